package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/results"
	"kymobench/procedures/run"
)

// job is one run with everything wired: what demo and run have in common.
type job struct {
	file       *setup.File
	ports      setup.Opener
	definition *procedures.Definition
	committer  func(line.Inbox) record.Committer
	folder     folder
	serial     string
	marks      marks
	operator   string
	console    func(line.Inbox) run.Operator
	seed       uint64
	layout     int
	covered    func(text string) error // the report can print it
}

// outcome of a job: the run's, with the files it left.
type outcome struct {
	run.Outcome
	record string
}

// carry runs the job to its closed record.
func (j job) carry(ctx context.Context) (outcome, error) {
	counter, previous, err := j.folder.latest()
	if err != nil {
		return outcome{}, err
	}
	if f := j.file; f.Highest < j.definition.HighestPressure() {
		return outcome{}, usagef("the procedure goes to %.0f mmHg, the bench file allows %.0f mmHg", j.definition.HighestPressure().MmHg(), f.Highest.MmHg())
	}
	for _, text := range []string{j.serial, j.operator, j.marks.model, j.marks.lot, j.file.Department, j.file.Bench} {
		if err := j.covered(text); err != nil {
			return outcome{}, usageError{fmt.Errorf("the report could not print it: %w", err)}
		}
	}
	rig, err := j.file.Open(j.ports)
	if err != nil {
		return outcome{}, err
	}
	out, path, err := j.carryOn(ctx, rig, counter+1, previous)
	if closing := rig.Close(); err == nil {
		err = closing
	}
	return outcome{out, path}, err
}

func (j job) carryOn(ctx context.Context, rig *bench.Rig, counter int64, previous string) (run.Outcome, string, error) {
	id := fmt.Sprintf("%s-%04d", rig.Inbox.Wall().UTC().Format("20060102T150405Z"), counter)
	path := filepath.Join(j.folder.runs(), id+".record")
	out, err := run.Carry(ctx, run.Settings{
		Definition: j.definition,
		BenchFile:  record.File{Name: filepath.Base(j.file.Name), SHA256: j.file.SHA256, Text: string(j.file.Source)},
		Facts:      factsOf(j.file, j.definition, j.serial, j.marks),
		Rig:        rig,
		Layout:     j.layout,
		Operator:   j.console(rig.Inbox),
		Opened: record.Opened{
			Schema: record.Schema, Run: id, Counter: counter, Previous: previous, Program: "kymobench " + version,
			Department: j.file.Department, Bench: j.file.Bench, Operator: j.operator, Simulated: j.file.Simulated, Seed: j.seed,
		},
		Open: func() (*record.Writer, error) { return record.Create(path, id, j.committer(rig.Inbox)) },
	})
	return out, path, err
}

// exit is the code for a verdict.
func exitFor(r results.Results) int {
	switch r.Verdict.String() {
	case "accepted":
		return exitDone
	case "rejected":
		return exitRejected
	}
	return exitInconclusive
}

// runDocument is the public JSON of a run.
type runDocument struct {
	Schema  string           `json:"schema"`
	Verdict string           `json:"verdict"`
	Reasons []results.Reason `json:"reasons"`
	Limits  []results.Limit  `json:"limits"`
	Results struct {
		Static any `json:"static"`
		Step   any `json:"step"`
	} `json:"results"`
	Record string  `json:"record"`
	Report *string `json:"report"`
	Truth  *truth  `json:"simulated_truth,omitempty"`
}

type truth struct {
	NaturalFrequency float64 `json:"natural_frequency_hz"`
	DampingRatio     float64 `json:"damping_ratio"`
	ZeroOffset       float64 `json:"zero_offset_mmHg"`
	Sensitivity      float64 `json:"sensitivity_uV_V_mmHg"`
	Hysteresis       float64 `json:"hysteresis_mmHg"`
}

func documentOf(r results.Results, recordPath string) runDocument {
	d := runDocument{Schema: "kymobench/run/1", Verdict: r.Verdict.String(), Reasons: r.Reasons, Limits: r.Limits, Record: recordPath}
	if r.Static != nil {
		d.Results.Static = fitStatic{"kymobench/fit-static/1", r.Static}
	}
	if r.Step != nil {
		d.Results.Step = fitStep{"kymobench/fit-step/1", r.Step}
	}
	return d
}

// printRun shows the verdict and a line for each limit.
func printRun(w io.Writer, r results.Results) {
	fmt.Fprintf(w, "verdict: %s\n", r.Verdict)
	for _, reason := range r.Reasons {
		fmt.Fprintf(w, "  because: %s (%s)\n", reason.Text, reason.Code)
	}
	for _, l := range r.Limits {
		value := "undetermined"
		if l.Value != nil {
			value = fmt.Sprintf("%.5g +- %.2g %s", *l.Value, *l.Expanded, l.Unit)
		}
		fmt.Fprintf(w, "%-18s %-36s limit %-22s %s\n", l.Name, value, l.Bounds.String(), l.Outcome)
	}
}

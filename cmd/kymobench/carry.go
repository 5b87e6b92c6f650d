package main

import (
	"context"
	"fmt"
	"io"
	"path/filepath"
	"slices"

	"kymobench/bench"
	"kymobench/bench/line"
	"kymobench/bench/serialport"
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
	committer  func(record.Poster) record.Committer
	folder     folder
	uuts       []marks // in the order of the bench's places
	operator   string
	console    func(line.Inbox) run.Operator
	seed       uint64
	layout     int
	covered    func(text string) error // the report can print it
	opened     []record.Opened         // of records that are made again; none for a new run
	overdue    string                  // why a certificate past its due date may be used, "" when it may not
}

// outcome of a job for one UUT: the run's, with the file it left.
type outcome struct {
	run.Outcome
	serial string
	record string
}

// carry runs the job to its closed records, one for each UUT.
func (j job) carry(ctx context.Context) ([]outcome, error) {
	counter, previous, err := j.folder.latest()
	if err != nil {
		return nil, err
	}
	if len(j.opened) > 0 {
		counter, previous = j.opened[0].Counter-1, j.opened[0].Previous
		j.operator, j.seed = j.opened[0].Operator, j.opened[0].Seed
	}
	if f := j.file; f.Highest < j.definition.HighestPressure() {
		return nil, usagef("the procedure goes to %.0f mmHg, the bench file allows %.0f mmHg", j.definition.HighestPressure().MmHg(), f.Highest.MmHg())
	}
	for _, p := range j.file.Places() {
		if err := j.definition.UUTKind.PutsOut(p.UUT.Field.Unit); err != nil {
			return nil, usageError{fmt.Errorf("procedure %s: %w", j.definition.ID, err)}
		}
	}
	if n := len(j.file.Places()); len(j.uuts) > n {
		return nil, usagef("%d serial numbers, and the bench file has %d places for a UUT", len(j.uuts), n)
	}
	for i, m := range j.uuts {
		for _, other := range j.uuts[:i] {
			if m.serial == other.serial {
				return nil, usagef("the serial number %s stands twice", m.serial)
			}
		}
	}
	texts := []string{j.operator, j.file.Department, j.file.Bench, j.overdue}
	for _, m := range j.uuts {
		texts = append(texts, m.serial, m.model, m.lot)
	}
	for _, text := range texts {
		if err := j.covered(text); err != nil {
			return nil, usageError{fmt.Errorf("the report could not print it: %w", err)}
		}
	}
	file := *j.file
	file.Others = file.Others[:len(j.uuts)-1]
	overdue, err := j.certified(&file)
	if err != nil {
		return nil, err
	}
	release, err := lockInstruments(&file)
	if err != nil {
		return nil, err
	}
	defer release()
	rig, err := file.Open(j.ports)
	if err != nil {
		return nil, err
	}
	out, err := j.carryOn(ctx, &file, rig, counter, previous, overdue)
	if closing := rig.Close(); err == nil {
		err = closing
	}
	return out, err
}

// lockInstruments keeps other runs of this program away from every instrument
// that the bench file names by its identity, on whatever port: a port's own
// lock does not keep an administrator out. Simulated instruments of one bench
// and of another have the same identities, so they are not locked.
func lockInstruments(f *setup.File) (release func(), err error) {
	var locks []*serialport.Lock
	release = func() {
		for _, l := range locks {
			_ = l.Release() // the system drops it anyway when the process ends
		}
	}
	if f.Simulated {
		return release, nil
	}
	identities := []string{f.Reference.Identity, f.Pressure.Identity, f.Valve.Identity}
	for _, p := range f.Places() {
		if p.Readout != nil {
			identities = append(identities, p.Readout.Identity)
		}
	}
	slices.Sort(identities)
	for _, identity := range slices.Compact(identities) {
		if identity == "" {
			continue
		}
		l, err := serialport.NewLock(identity)
		if err != nil {
			release()
			return func() {}, err
		}
		locks = append(locks, l)
	}
	return release, nil
}

// certified refuses, before a port is opened, a run that asks for pressures
// about which the reference's certificate says nothing, and one whose
// certificates are overdue unless somebody gave a reason to use them all the
// same; those it returns.
func (j job) certified(file *setup.File) ([]setup.Overdue, error) {
	low, high := file.Certified()
	for _, p := range j.definition.Pressures() {
		const bits = 1e-6 // Pa: 300 mmHg by way of another unit differs in the last bits
		if p != 0 && (p > high+bits || p < low-bits) {
			return nil, usagef("the procedure asks for %.4g mmHg, and the reference's certificate covers %.4g to %.4g mmHg: a reference certified for this pressure is needed",
				p.MmHg(), low.MmHg(), high.MmHg())
		}
	}
	overdue := file.Overdue(j.ports.Inbox().Wall())
	if j.overdue == "" && len(overdue) > 0 {
		return nil, usagef("%s: have it calibrated, or say with --allow-overdue \"REASON\" why it is used; the verdict is then inconclusive at best", overdueText(overdue[0]))
	}
	if j.overdue != "" && len(overdue) == 0 {
		return nil, usagef("--allow-overdue is given and no certificate is overdue")
	}
	return overdue, nil
}

func overdueText(o setup.Overdue) string {
	return fmt.Sprintf("the certificate %s of the %s was due on %s", o.Number, o.Of, o.Due)
}

// carryOn names a run for each UUT, counted one after the other; all follow
// the run that was the latest when they began.
func (j job) carryOn(ctx context.Context, file *setup.File, rig *bench.Rig, counter int64, previous string, overdue []setup.Overdue) ([]outcome, error) {
	settings := run.Settings{
		Definition: j.definition,
		BenchFile:  record.File{Name: filepath.Base(j.file.Name), SHA256: j.file.SHA256, Text: string(j.file.Source)},
		Facts:      factsOf(j.file),
		Rig:        rig,
		Layout:     j.layout,
		Operator:   j.console(rig.Inbox),
	}
	out := make([]outcome, len(j.uuts))
	for i, place := range file.Places() {
		m := j.uuts[i]
		counter++
		id := fmt.Sprintf("%s-%04d", rig.Inbox.Wall().UTC().Format("20060102T150405Z"), counter)
		out[i].serial, out[i].record = m.serial, filepath.Join(j.folder.runs(), id+".record")
		subject := subjectOf(place, j.definition, m)
		subject.Opened = record.Opened{
			Schema: record.Schema, Run: id, Counter: counter, Previous: previous, Program: "kymobench " + version,
			Department: j.file.Department, Bench: j.file.Bench, Operator: j.operator, Simulated: j.file.Simulated, Seed: j.seed,
		}
		for _, o := range overdue {
			if o.Place < 0 || o.Place == i {
				subject.Overrides = append(subject.Overrides, record.Override{Code: results.CertificateOverdue, Text: overdueText(o), Reason: j.overdue})
			}
		}
		subject.Open = func(p record.Poster) (*record.Writer, error) { return record.Create(out[i].record, id, j.committer(p)) }
		settings.Subjects = append(settings.Subjects, subject)
	}
	outcomes, err := run.Carry(ctx, settings)
	for i, o := range outcomes {
		out[i].Outcome = o
	}
	return out, err
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
	SerialNumber string  `json:"serial_number,omitempty"` // where there are several UUTs
	Record       string  `json:"record"`
	Report       *string `json:"report"`
	Truth        *truth  `json:"simulated_truth,omitempty"`
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
		d.Results.Static = fitStatic{Schema: "kymobench/fit-static/1", Static: r.Static}
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

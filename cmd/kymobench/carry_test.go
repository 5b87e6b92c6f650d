package main

import (
	"context"
	"io"
	"math"
	"os"
	"strconv"
	"testing"
	"time"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/simulated"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/run"
)

// simulatedJob is the shipped procedure on a simulated bench in memory.
func simulatedJob(t *testing.T, dir string, seed uint64, conditions ...string) (job, *simulated.Bench) {
	t.Helper()
	return simulatedJobAs(t, dir, "", seed, conditions...)
}

// simulatedJobAs is one whose instruments speak in other forms.
func simulatedJobAs(t *testing.T, dir, forms string, seed uint64, conditions ...string) (job, *simulated.Bench) {
	t.Helper()
	b, err := simulatedBench(seed, conditions, forms, time.Time{})
	if err != nil {
		t.Fatal(err)
	}
	d, err := procedures.Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	file, err := setup.Load("bench.toml", b.BenchFile(nil))
	if err != nil {
		t.Fatal(err)
	}
	f := folder{dir}
	if err := f.make(); err != nil {
		t.Fatal(err)
	}
	return job{
		file: file, ports: newMemoryPorts(b), definition: d, folder: f, uuts: marksOf(b), operator: "test", seed: seed, layout: 1,
		covered:   func(string) error { return nil },
		committer: func(i record.Poster) record.Committer { return record.NewSimulated(i, b.CommitLatency) },
		console: func(i line.Inbox) run.Operator {
			return script{inbox: i, err: io.Discard, after: 500 * time.Millisecond}
		},
	}, b
}

// carryOne carries a job with one UUT.
func (j job) carryOne(ctx context.Context) (outcome, error) {
	all, err := j.carry(ctx)
	if len(all) != 1 {
		return outcome{}, err
	}
	return all[0], err
}

// simulatedRun carries such a job.
func simulatedRun(t *testing.T, dir string, seed uint64, condition string) (outcome, simulated.Truth) {
	t.Helper()
	j, b := simulatedJob(t, dir, seed, condition)
	out, err := j.carryOne(t.Context())
	if err != nil {
		t.Fatalf("seed %d, %s: %v", seed, condition, err)
	}
	return out, b.Truth()
}

// seeds is how many seeds a campaign takes: n, or what KYMOBENCH_SEEDS says.
func seeds(n int) uint64 {
	if s, err := strconv.Atoi(os.Getenv("KYMOBENCH_SEEDS")); err == nil && s > 0 {
		n = s
	}
	return uint64(n)
}

// Good UUTs are accepted, and the known truth lies within the expanded
// uncertainty about as often as 95 % promises.
func TestGoodIsAcceptedAndCovered(t *testing.T) {
	n := seeds(20)
	inside := map[string]int{}
	for seed := range n {
		out, truth := simulatedRun(t, t.TempDir(), seed+1, simulated.Good)
		if got := out.Results.Verdict.String(); got != "accepted" {
			t.Errorf("seed %d: %s, %v", seed+1, got, out.Results.Reasons)
		}
		known := map[string]float64{
			"zero_offset": truth.ZeroOffset, "sensitivity": truth.Sensitivity, "hysteresis": truth.Hysteresis,
			"natural_frequency": truth.NaturalFrequency, "damping_ratio": truth.DampingRatio,
		}
		for _, l := range out.Results.Limits {
			if want, ok := known[l.Name]; ok && l.Value != nil {
				value := *l.Value
				if l.Name == "hysteresis" {
					value = math.Abs(value)
				}
				if math.Abs(value-want) <= *l.Expanded {
					inside[l.Name]++
				} else if testing.Verbose() {
					t.Logf("seed %d %s: %.5g, truth %.5g, U %.3g", seed+1, l.Name, value, want, *l.Expanded)
				}
			}
		}
	}
	for name, k := range inside {
		t.Logf("%s: truth inside U in %d of %d", name, k, n)
		if float64(k) < 0.8*float64(n) {
			t.Errorf("%s: truth inside U in %d of %d only", name, k, n)
		}
	}
	if len(inside) != 5 {
		t.Errorf("figures with a known truth: %v", inside)
	}
}

func TestBadIsNotAccepted(t *testing.T) {
	for _, condition := range simulated.Conditions() {
		want := "rejected"
		switch condition {
		case simulated.Good:
			continue
		case simulated.Leak, simulated.Noisy:
			want = "inconclusive"
		}
		for seed := range seeds(3) {
			out, _ := simulatedRun(t, t.TempDir(), seed+1, condition)
			if got := out.Results.Verdict.String(); got != want {
				t.Errorf("%s, seed %d: %s, %v", condition, seed+1, got, out.Results.Reasons)
			}
			if condition == simulated.Noisy && (len(out.Results.Reasons) == 0 || out.Results.Reasons[0].Code != "not_settling") {
				t.Errorf("noisy, seed %d: %v", seed+1, out.Results.Reasons)
			}
			if condition == simulated.Leak && (len(out.Results.Reasons) == 0 || out.Results.Reasons[0].Code != "leak") {
				t.Errorf("leak, seed %d: %v", seed+1, out.Results.Reasons)
			}
		}
	}
}

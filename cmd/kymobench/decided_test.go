package main

import (
	"bytes"
	"fmt"
	"os"
	"slices"
	"strings"
	"testing"

	"kymobench/bench/simulated"
	"kymobench/procedures"
	"kymobench/procedures/results"
	"kymobench/procedures/verdict"
)

// A run that is left to count its steps makes the least of them where the
// limits are far and the most where the UUT stands on one; the same bench stops
// at the same step.
func TestStepsUntilDecided(t *testing.T) {
	var taken []int
	for _, share := range []float64{0.5, 1} { // of the true natural frequency
		var first []byte
		for range 2 {
			j, b := simulatedJob(t, t.TempDir(), 4, simulated.Good)
			text := string(j.definition.Source)
			low := fmt.Sprintf("low = \"%.2f Hz\"", share*b.Truth().NaturalFrequency)
			text = strings.NewReplacer("count = 5", "least_count = 3\nmost_count = 10", `low = "24 Hz"`, low).Replace(text)
			var err error
			if j.definition, err = procedures.Load("procedure.toml", []byte(text)); err != nil {
				t.Fatal(err)
			}
			out, err := j.carryOne(t.Context())
			if err != nil {
				t.Fatal(err)
			}
			record, err := os.ReadFile(out.record)
			if err != nil {
				t.Fatal(err)
			}
			s := out.Results.Step.Stopping
			if s == nil || s.Least != 3 || s.Most != 10 || s.Taken != len(out.Results.Step.Steps) || !(s.Wider > 1.1) {
				t.Fatalf("limit at %g of the truth: %+v", share, s)
			}
			i := slices.IndexFunc(out.Results.Limits, func(l results.Limit) bool { return l.Name == "natural_frequency" })
			l := out.Results.Limits[i]
			if open := len(s.Open) > 0; open != (l.Outcome != verdict.Pass) || open && s.Taken != 10 {
				t.Errorf("limit at %g of the truth: %v after %d steps, %+v", share, l.Outcome, s.Taken, s.Open)
			}
			if first == nil {
				first = record
				taken = append(taken, s.Taken)
			} else if !bytes.Equal(first, record) {
				t.Error("the same bench gave another record")
			}
		}
	}
	if !(taken[0] == 3 && taken[1] == 10) {
		t.Errorf("steps taken: %v", taken)
	}
}

package main

import (
	"errors"
	"strings"
	"testing"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/simulated"
	"kymobench/procedures/record"
)

// changedJob is the shipped procedure on a simulated bench whose bench file
// was changed.
func changedJob(t *testing.T, condition string, changes ...string) (job, *listening) {
	t.Helper()
	j, b := simulatedJob(t, t.TempDir(), 4, condition)
	file, err := setup.Load("bench.toml", []byte(strings.NewReplacer(changes...).Replace(string(j.file.Source))))
	if err != nil {
		t.Fatal(err)
	}
	source := &listening{Machine: b.Machine(simulated.RoleSource), word: "SOUR:"}
	j.file, j.ports = file, replacing{newMemoryPorts(b), map[string]line.Machine{simulated.RoleSource: source}}
	return j, source
}

// A reference past its due date is not used; with a reason it is, and the
// record, the reasons and every page say so. A good UUT is inconclusive then,
// a bad one is still rejected.
func TestOverdueNeedsAReason(t *testing.T) {
	late := []string{`due = "2027-03-01"`, `due = "2026-05-31"`} // of reference and readout; the virtual day is 2026-06-01
	j, source := changedJob(t, simulated.Good, late...)
	_, err := j.carry(t.Context())
	var usage usageError
	if !errors.As(err, &usage) || !strings.Contains(err.Error(), "HI-2026-0117 of the reference was due on 2026-05-31") {
		t.Errorf("not refused: %v", err)
	}
	if len(source.heard) > 0 || source.events > 0 {
		t.Errorf("the source was spoken to before the refusal: %d", source.events)
	}
	for _, c := range []struct{ condition, want string }{{simulated.Good, "inconclusive"}, {simulated.Offset, "rejected"}} {
		j, _ = changedJob(t, c.condition, late...)
		j.overdue = "the replacement is on its way"
		outs, err := j.carry(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		out := outs[0]
		if got := out.Results.Verdict.String(); got != c.want {
			t.Errorf("%s: %s, want %s", c.condition, got, c.want)
		}
		said := 0
		for _, r := range out.Results.Reasons {
			if r.Code == "certificate_overdue" {
				said++
			}
		}
		if said != 2 {
			t.Errorf("%s: reasons %v", c.condition, out.Results.Reasons)
		}
		read, err := record.ReadClosed(out.record)
		if err != nil {
			t.Fatal(err)
		}
		overrides := 0
		for _, e := range read.Events {
			if e.Kind == record.KindOverride && strings.Contains(string(e.Payload), "the replacement is on its way") {
				overrides++
			}
		}
		if overrides != 2 {
			t.Errorf("%s: %d overrides in the record", c.condition, overrides)
		}
	}
	// Nothing is overdue: a habit of giving the reason is refused.
	j, _ = changedJob(t, simulated.Good)
	j.overdue = "always"
	if _, err := j.carry(t.Context()); !errors.As(err, &usage) {
		t.Errorf("taken: %v", err)
	}
}

// Pressures beyond the reference's certificate are refused before anything is
// pressurised; a certificate that ends at the highest set pressure is enough.
func TestOutsideTheCertificate(t *testing.T) {
	beyond := []string{`at = "350 mmHg"`, `at = "290 mmHg"`, `at = "300 mmHg"`, `at = "280 mmHg"`, `at = "400 mmHg"`, `at = "299.9 mmHg"`}
	j, source := changedJob(t, simulated.Good, beyond...)
	_, err := j.carry(t.Context())
	var usage usageError
	if !errors.As(err, &usage) || !strings.Contains(err.Error(), "asks for 300 mmHg") || source.events > 0 {
		t.Errorf("%v; the source heard %d messages", err, source.events)
	}
	beyond[5] = `at = "300 mmHg"`
	j, _ = changedJob(t, simulated.Good, beyond...)
	outs, err := j.carry(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	if out := outs[0]; out.Results.Verdict.String() != "accepted" {
		t.Errorf("%v, %v", out.Results.Verdict, out.Results.Reasons)
	}
}

package main

import (
	"errors"
	"fmt"
	"os"
	"runtime"
	"strconv"
	"strings"
	"sync"
	"testing"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/simulated"
	"kymobench/procedures/record"
)

// faultyPorts are those of a simulated bench, one of them with a fault.
type faultyPorts struct {
	*memoryPorts
	role   string
	faulty *simulated.Faulty
	opened bool
}

var errNotThere = errors.New("no such port")

func (p *faultyPorts) Connect(id line.PortID, name string, mode setup.PortMode) error {
	role, renamed := strings.CutPrefix(name, "new-")
	if role != p.role {
		return p.memoryPorts.Connect(id, name, mode)
	}
	if p.opened && !p.faulty.Plugged(p.inbox.Now(), renamed) || !p.opened && renamed {
		return errNotThere
	}
	p.opened = true
	p.inbox.Connect(id, p.faulty, line.MemoryOptions{})
	return nil
}

// Moved finds an adapter by what the system knows of it.
func (p *faultyPorts) Moved(_ line.PortID, name string) (string, bool) {
	return "new-" + name, name == p.role && p.faulty.Plugged(p.inbox.Now(), true)
}

// faultCase is one run with one fault; its numbers replay it.
type faultCase struct {
	seed      uint64
	condition string
	role      string
	kind      simulated.FaultKind
	position  float64 // of the run's exchanges on that port, 0 to 1
}

func (c faultCase) String() string {
	return fmt.Sprintf("seed %d %s, %s of the %s at %.4f", c.seed, c.condition, c.kind, c.role, c.position)
}

// recoverable says whether a run must come to its true verdict in spite of it.
// The others leave the run inconclusive, or end it before anything is measured.
func (c faultCase) recoverable() bool {
	switch c.kind {
	case simulated.Silent, simulated.WrongSpeed, simulated.WrongUnit:
		return false
	case simulated.OverRange: // of a reference: no number, vented
		return c.role != simulated.RoleReference
	case simulated.Blocked: // longer than the write's deadline
		return false
	}
	return true
}

type faultOutcome struct {
	wrong, lost  string
	verdict      string
	why          string
	applied      bool
	interrupted  bool
	beforeRecord bool
}

// exchangesOf counts those of a faultless run, for the positions.
func exchangesOf(t *testing.T, seed uint64, condition, role string) int {
	t.Helper()
	_, f, err := carryFault(t, faultCase{seed: seed, condition: condition, role: role, kind: simulated.Late}, -1)
	if err != nil {
		t.Fatal(err)
	}
	return f.Exchanges()
}

func carryFault(t *testing.T, c faultCase, exchange int) (outcome, *simulated.Faulty, error) {
	t.Helper()
	j, b := simulatedJob(t, t.TempDir(), c.seed, c.condition)
	faulty, err := b.WithFault(c.role, simulated.Fault{Kind: c.kind, Exchange: exchange, Seed: c.seed*1000 + uint64(max(exchange, 0))})
	if err != nil {
		t.Fatal(err)
	}
	j.ports = &faultyPorts{memoryPorts: newMemoryPorts(b), role: c.role, faulty: faulty}
	out, err := j.carryOne(t.Context())
	return out, faulty, err
}

// carry runs one case and holds it against the truth.
func (c faultCase) carry(t *testing.T, exchanges int) faultOutcome {
	out, faulty, err := carryFault(t, c, 1+int(c.position*float64(exchanges-1)))
	o := faultOutcome{applied: faulty.Applied()}
	if err != nil {
		o.beforeRecord, o.why = true, err.Error()
		return o
	}
	o.verdict = out.Results.Verdict.String()
	o.why = fmt.Sprint(out.Results.Reasons)
	truth := "accepted"
	if c.condition != simulated.Good {
		truth = "rejected"
	}
	if o.verdict != "inconclusive" && o.verdict != truth {
		o.wrong = o.verdict
	}
	for _, r := range out.Results.Reservations {
		o.interrupted = o.interrupted || r.Code == "interrupted"
	}
	if read, err := record.ReadClosed(out.record); err != nil || read.Head.Lines != int64(len(read.Events)) {
		o.lost = fmt.Sprintf("%v", err)
	}
	return o
}

// Every fault of a line at every place of it: no verdict is wrong, no record is
// lost, and of the runs that can be brought to their true verdict in spite of
// the fault at least 99 % are. KYMOBENCH_FULL=1 takes 23 faults x 250 positions
// x 4 roles; KYMOBENCH_FAULT picks one kind.
func TestLineFaults(t *testing.T) {
	positions := 5
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		positions = 250
	}
	if n, err := strconv.Atoi(os.Getenv("KYMOBENCH_POSITIONS")); err == nil {
		positions = n
	}
	roles := []string{simulated.RoleReference, simulated.RoleUUT, simulated.RoleSource, simulated.RoleValve}
	exchanges := map[string]int{}
	for _, role := range roles {
		exchanges[role] = exchangesOf(t, 1, simulated.Good, role)
	}
	var cases []faultCase
	for _, role := range roles {
		for k, kind := range simulated.FaultKinds() {
			if only := os.Getenv("KYMOBENCH_FAULT"); only != "" && only != string(kind) {
				continue
			}
			for p := range positions {
				c := faultCase{seed: uint64(1 + (p*7+k)%97), condition: simulated.Good, role: role, kind: kind, position: (float64(p) + 0.5) / float64(positions)}
				if (p+k)%2 == 1 {
					c.condition = []string{simulated.WrongSensitivity, simulated.Offset, simulated.AirBubble}[(p/2+k)%3]
				}
				cases = append(cases, c)
			}
		}
	}
	outcomes := make([]faultOutcome, len(cases))
	var wait sync.WaitGroup
	next := make(chan int)
	for range runtime.GOMAXPROCS(0) {
		wait.Go(func() {
			for i := range next {
				outcomes[i] = cases[i].carry(t, exchanges[cases[i].role])
			}
		})
	}
	for i := range cases {
		next <- i
	}
	close(next)
	wait.Wait()
	type tally struct{ n, applied, true_, inconclusive, before int }
	tallies := map[string]*tally{}
	could, did := 0, 0
	for i, o := range outcomes {
		c := cases[i]
		key := c.role + " " + string(c.kind)
		if tallies[key] == nil {
			tallies[key] = &tally{}
		}
		y := tallies[key]
		y.n++
		if o.applied {
			y.applied++
		}
		switch {
		case o.wrong != "":
			t.Errorf("%v: %s, %s", c, o.wrong, o.why)
		case o.lost != "":
			t.Errorf("%v: record %s", c, o.lost)
		case o.beforeRecord:
			y.before++
		case o.verdict == "inconclusive":
			y.inconclusive++
		default:
			y.true_++
		}
		if c.recoverable() {
			could++
			if o.verdict != "inconclusive" && !o.beforeRecord {
				did++
			} else if testing.Verbose() {
				t.Logf("%v: %s %s", c, o.verdict, o.why)
			}
		}
	}
	for _, role := range roles {
		for _, kind := range simulated.FaultKinds() {
			if y := tallies[role+" "+string(kind)]; y != nil {
				t.Logf("%-9s %-11s of %d: happened %d, true %d, inconclusive %d, ended before the record %d", role, kind, y.n, y.applied, y.true_, y.inconclusive, y.before)
			}
		}
	}
	t.Logf("of %d recoverable runs %d ended in the true verdict", could, did)
	if float64(did) < 0.99*float64(could) {
		t.Errorf("of %d recoverable runs %d ended in the true verdict", could, did)
	}
}

// A sample period stated wrongly would put every natural frequency out by as
// much: the recovered clock tells, and it is the bench's fault.
func TestWrongSamplePeriod(t *testing.T) {
	for stated, want := range map[string]string{`"1 ms"`: "accepted", `"1.01 ms"`: "sample_rate", `"2 ms"`: "sample_rate", `"0.9 ms"`: "sample_rate"} {
		j, b := simulatedJob(t, t.TempDir(), 21, simulated.Good)
		text := strings.Replace(string(b.BenchFile(nil)), `sample_period = "1 ms"`, "sample_period = "+stated, 1)
		var err error
		if j.file, err = setup.Load("bench.toml", []byte(text)); err != nil {
			t.Fatal(err)
		}
		out, err := j.carryOne(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		got := out.Results.Verdict.String()
		if len(out.Results.Reasons) > 0 {
			got = out.Results.Reasons[0].Code
		}
		if got != want {
			t.Errorf("a period stated as %s: %s, %v", stated, got, out.Results.Reasons)
		}
	}
}

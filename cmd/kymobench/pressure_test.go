package main

import (
	"strings"
	"testing"
	"time"

	"kymobench/bench/line"
	"kymobench/bench/simulated"
	"kymobench/procedures/record"
)

// lying is a reference that answers one of its questions with a text of its own.
type lying struct {
	line.Machine
	at     int    // the question, counted from 1
	text   string // what it answers then
	always bool   // and to every question after it
	asks   int
	told   line.Instant // first
	due    line.Instant
	out    []byte
}

func (l *lying) Receive(at line.Instant, data []byte) {
	if strings.Contains(string(data), "MEAS") {
		if l.asks++; l.asks == l.at || l.always && l.asks > l.at {
			if l.told == 0 {
				l.told = at.Add(30 * time.Millisecond)
			}
			l.due, l.out = at.Add(30*time.Millisecond), []byte(l.text+"\n")
			return
		}
	}
	l.Machine.Receive(at, data)
}

func (l *lying) Due() (line.Instant, bool) {
	if l.out != nil {
		return l.due, true
	}
	return l.Machine.Due()
}

func (l *lying) Emit(at line.Instant) []byte {
	if out := l.out; out != nil {
		l.out = nil
		return out
	}
	return l.Machine.Emit(at)
}

// A reading of the reference beyond the pressures never to be exceeded, or over
// its range, vents at once, and is written after the vent was sent. One that
// stands alone is then taken again; where it does not, the run is closed as
// inconclusive.
func TestOverpressureVentsFirst(t *testing.T) {
	for _, c := range []struct {
		text, code string
		always     bool
	}{
		{"+3.5000E+02", "interrupted", false}, {"-4.0000E+01", "interrupted", false}, {"9.9E37", "reference_lost", false}, {"nonsense", "", false},
		{"+3.5000E+02", "overpressure", true},
	} {
		j, b := simulatedJob(t, t.TempDir(), 11, simulated.Good)
		source := &listening{Machine: b.Machine(simulated.RoleSource), word: "SOUR:VENT"}
		reference := &lying{Machine: b.Machine(simulated.RoleReference), at: 300, text: c.text, always: c.always}
		j.ports = replacing{newMemoryPorts(b), map[string]line.Machine{simulated.RoleSource: source, simulated.RoleReference: reference}}
		out, err := j.carryOne(t.Context())
		if err != nil {
			t.Fatal(err)
		}
		if c.code == "" { // one garbled answer is asked again
			if got := out.Results.Verdict.String(); got != "accepted" {
				t.Errorf("%s: %s, %v", c.text, got, out.Results.Reasons)
			}
			continue
		}
		if c.code == "interrupted" {
			if got := out.Results; got.Verdict.String() != "accepted" || len(got.Reservations) == 0 || got.Reservations[0].Code != c.code {
				t.Errorf("%s: %s, %v, %v", c.text, got.Verdict, got.Reasons, got.Reservations)
			}
		} else if got := out.Results.Verdict.String(); !out.Closed || got != "inconclusive" || out.Results.Reasons[0].Code != c.code {
			t.Errorf("%s: closed %v, %s, %v", c.text, out.Closed, got, out.Results.Reasons)
			continue
		}
		vent := line.Instant(-1)
		for _, at := range source.heard {
			if at >= reference.told && vent < 0 {
				vent = at
			}
		}
		if vent < 0 || vent.Sub(reference.told) > 200*time.Millisecond {
			t.Errorf("%s: said at %v, vent heard at %v", c.text, reference.told, source.heard)
		}
		read, err := record.ReadFile(out.record)
		if err != nil {
			t.Fatal(err)
		}
		for _, e := range read.Events {
			if (e.Kind == record.KindFault || e.Kind == record.KindVoid) && e.At < vent {
				t.Errorf("%s: the fault was written at %v, the vent sent at %v", c.text, e.At, vent)
			}
		}
	}
}

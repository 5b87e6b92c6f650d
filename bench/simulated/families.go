package simulated

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"kymobench/bench/line"
)

// Families say in what form each instrument of a simulated bench speaks; ""
// is the first that Forms lists for the role.
type Families struct {
	Reference, UUT, Source, Valve string
}

// Forms lists the forms that a role can have.
//
//	reference  scpi; lines: asked, echoes what it is sent, decimal comma, status
//	           and CRC-16; running: lines of text by itself, 20 a second; modbus;
//	           frames: 50 a second, a float32 in kPa with CRC-16
//	uut        lines; checked: lines with a status and an exclusive-or; frames:
//	           counted, with the applied pressure beside it and CRC-16
//	source     scpi; lines: acknowledged, asked in kPa; modbus
//	valve      scpi; lines: acknowledged; modbus; modem-line: DTR
func Forms(role string) []string {
	switch role {
	case RoleReference:
		return []string{"scpi", "lines", "running", "modbus", "frames"}
	case RoleUUT:
		return []string{"lines", "checked", "frames"}
	case RoleSource:
		return []string{"scpi", "lines", "modbus"}
	case RoleValve:
		return []string{"scpi", "lines", "modbus", "modem-line"}
	}
	return nil
}

// ParseFamilies reads "reference=modbus,uut=frames".
func ParseFamilies(s string) (Families, error) {
	var f Families
	for part := range strings.SplitSeq(s, ",") {
		if part == "" {
			continue
		}
		role, form, _ := strings.Cut(part, "=")
		into := map[string]*string{RoleReference: &f.Reference, RoleUUT: &f.UUT, RoleSource: &f.Source, RoleValve: &f.Valve}[role]
		if into == nil {
			return f, fmt.Errorf("%q is none of: reference, uut, source, valve", role)
		}
		if !slices.Contains(Forms(role), form) {
			return f, fmt.Errorf("%q is no form of the %s: there are %s", form, role, strings.Join(Forms(role), ", "))
		}
		*into = form
	}
	return f, nil
}

// usual puts the first form where none is stated, and refuses one that is not
// there.
func (f Families) usual() (Families, error) {
	for _, r := range []struct {
		role string
		form *string
	}{{RoleReference, &f.Reference}, {RoleUUT, &f.UUT}, {RoleSource, &f.Source}, {RoleValve, &f.Valve}} {
		if *r.form == "" {
			*r.form = Forms(r.role)[0]
		}
		if !slices.Contains(Forms(r.role), *r.form) {
			return f, fmt.Errorf("simulated bench: %q is no form of the %s: there are %s", *r.form, r.role, strings.Join(Forms(r.role), ", "))
		}
	}
	return f, nil
}

// referenceAs, sourceAs and valveAs make the machines in their forms.
func referenceAs(form string, v *volume, d drawn) line.Machine {
	switch form {
	case "lines":
		return referenceInLines(v, d)
	case "running":
		return newRunning(v, d, 50*time.Millisecond, func(g *gauge, at line.Instant) []byte {
			return fmt.Appendf(nil, "%s mmHg\r\n", signed(g.reading(at)))
		})
	case "modbus":
		return referenceInRegisters(v, d)
	case "frames":
		return newRunning(v, d, 20*time.Millisecond, func(g *gauge, at line.Instant) []byte { return gaugeFrame(g.reading(at)) })
	}
	return newReference(v, d)
}

func sourceAs(form string, v *volume, d drawn) line.Machine {
	switch form {
	case "lines":
		return sourceInLines(v, d)
	case "modbus":
		return sourceInRegisters(v, d)
	}
	return newSource(v, d)
}

func valveAs(form string, v *volume, d drawn) line.Machine {
	switch form {
	case "lines":
		return valveInLines(v, d)
	case "modbus":
		return valveInRegisters(v, d)
	case "modem-line":
		return &coil{v: v}
	}
	return newValve(v, d)
}

// coil is a valve on the relay of a port's DTR: on opens it.
type coil struct{ v *volume }

func (c *coil) Receive(at line.Instant, _ []byte) { c.v.advance(at) }
func (c *coil) Due() (line.Instant, bool)         { return 0, false }
func (c *coil) Emit(line.Instant) []byte          { return nil }

// Signal strikes the valve.
func (c *coil) Signal(at line.Instant, which line.ModemLine, on bool) {
	if which == line.DTR {
		c.v.strike(at, on)
	}
}

var _ line.SignalMachine = (*coil)(nil)

// running is a reference that sends by itself; it takes the present pressure
// for zero when it is sent a line "Z".
type running struct {
	v     *volume
	gauge *gauge
	every time.Duration
	next  line.Instant
	write func(g *gauge, at line.Instant) []byte
	heard []byte
}

func newRunning(v *volume, d drawn, every time.Duration, write func(*gauge, line.Instant) []byte) *running {
	return &running{v: v, gauge: newGauge(v, d), every: every, next: line.Instant(every / 3), write: write}
}

// Receive takes a command.
func (r *running) Receive(at line.Instant, data []byte) {
	r.v.advance(at)
	for _, c := range data {
		if c != '\n' && c != '\r' {
			r.heard = append(r.heard[:min(len(r.heard), 8)], c)
			continue
		}
		if string(r.heard) == "Z" {
			_ = r.gauge.zero(at) // it says nothing, whatever comes of it
		}
		r.heard = r.heard[:0]
	}
}

// Due names the next reading.
func (r *running) Due() (line.Instant, bool) { return r.next, true }

// Emit returns it; it is of 5 ms before.
func (r *running) Emit(at line.Instant) []byte {
	r.v.advance(at)
	if at < r.next {
		return nil
	}
	r.next = r.next.Add(r.every)
	return r.write(r.gauge, at.Add(-5*time.Millisecond))
}

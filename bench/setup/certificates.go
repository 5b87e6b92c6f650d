package setup

import (
	"time"

	"kymobench/bench/quantity"
)

// Overdue is a certificate whose due date has passed. Place is the UUT's place
// on the manifold, from 0, that it concerns; -1 when it concerns all.
type Overdue struct {
	Of, Number, Due string
	Place           int
}

// Overdue lists the certificates that are past their due date at a time: each
// holds until the end of that day, in UTC.
func (f *File) Overdue(at time.Time) []Overdue {
	var out []Overdue
	add := func(of, number, due string, place int) {
		if day, err := time.Parse(time.DateOnly, due); err == nil && !at.UTC().Before(day.AddDate(0, 0, 1)) {
			out = append(out, Overdue{of, number, due, place})
		}
	}
	add("reference", f.Reference.Certificate.Number, f.Reference.Certificate.Due, -1)
	for i, p := range f.Places() {
		if p.Readout != nil {
			add("readout", p.Readout.Certificate, p.Readout.Due, i)
		}
	}
	return out
}

// Certified is the range in which the reference's certificate says something:
// that of the reference, and where corrections are stated not beyond the
// first and the last of them.
func (f *File) Certified() (low, high quantity.Pressure) {
	stated := func(text string) quantity.Pressure {
		p, err := quantity.ParsePressure(text)
		if err != nil {
			return 0 // Load has parsed it
		}
		return p
	}
	low, high = stated(f.Reference.RangeLow), stated(f.Reference.RangeHigh)
	if c := f.Reference.Certificate.Corrections; len(c) > 1 { // one alone is a constant
		low, high = max(low, stated(c[0].At)), min(high, stated(c[len(c)-1].At))
	}
	return low, high
}

package quantity

import (
	"errors"
	"fmt"
	"strconv"
	"strings"
)

// FilterKind is what a part of a readout does to a signal.
type FilterKind string

// The kinds of filter.
const (
	LowPass FilterKind = "low_pass" // of first order, by its corner frequency
	Average FilterKind = "average"  // a mean over a time, Order times one after another
	Lag     FilterKind = "delay"    // later by a time, unchanged
)

// Filter is one part of what a readout does between its input and its numbers.
type Filter struct {
	Kind   FilterKind
	Corner Frequency // low_pass alone
	Length Span      // average and delay
	Order  int       // of an average, 1 to 8
}

// ParseFilter reads "low_pass 200 Hz", "average 4 ms", "average 4 ms x3" (a
// sinc3 converter) or "delay 2 ms".
func ParseFilter(s string) (Filter, error) {
	kind, rest, ok := strings.Cut(s, " ")
	f := Filter{Kind: FilterKind(kind), Order: 1}
	if !ok {
		return Filter{}, fmt.Errorf("%q is no filter: write \"low_pass 200 Hz\", \"average 4 ms\", \"average 4 ms x3\" or \"delay 2 ms\"", s)
	}
	var err error
	switch f.Kind {
	case LowPass:
		f.Corner, err = ParseFrequency(rest)
	case Average:
		if length, times, found := strings.Cut(rest, " x"); found {
			if f.Order, err = strconv.Atoi(times); err != nil || f.Order < 1 || f.Order > 8 {
				return Filter{}, fmt.Errorf("%q: %q times an average, 1 to 8 are taken", s, times)
			}
			rest = length
		}
		f.Length, err = ParseSpan(rest)
	case Lag:
		f.Length, err = ParseSpan(rest)
	default:
		return Filter{}, fmt.Errorf("%q: there is no filter %q; there are low_pass, average and delay", s, kind)
	}
	if err != nil {
		return Filter{}, err
	}
	if !(f.Corner > 0) && !(f.Length > 0) {
		return Filter{}, errors.New("a filter of nothing: leave it out")
	}
	if f.Length > 1 || f.Kind == LowPass && f.Corner < 0.1 {
		return Filter{}, fmt.Errorf("%q: longer than a second is no readout's filter", s)
	}
	return f, nil
}

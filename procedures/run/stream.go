package run

import (
	"math"
	"sort"

	"kymobench/bench/line"
	"kymobench/procedures/record"
)

// stream keeps the UUT's latest samples, and a running summary of those since
// the reference was last read.
type stream struct {
	samples []sample
	dropped int64   // samples before samples[0]
	gaps    []int64 // numbers of the samples before which a line was refused
	since   summary
	still   still
}

type sample struct {
	at   line.Instant
	text string
	p    float64 // Pa, before zeroing
}

// keepSamples is how many samples are kept at least: half a minute at 1 kHz.
const keepSamples = 32768

// add takes a sample; reference is the reference's last reading, in Pa.
func (s *stream) add(at line.Instant, text string, p, reference float64) {
	s.still.says(text, reference)
	if len(s.samples) >= 2*keepSamples {
		n := copy(s.samples, s.samples[len(s.samples)-keepSamples:])
		s.dropped += int64(len(s.samples) - n)
		s.samples = s.samples[:n]
	}
	s.samples = append(s.samples, sample{at, text, p})
	s.since.add(p)
	s.since.at += (at.Seconds() - s.since.at) / float64(s.since.n)
}

// latest is the last sample's pressure, in Pa; not a number before the first.
func (s *stream) latest() float64 {
	if len(s.samples) == 0 {
		return math.NaN()
	}
	return s.samples[len(s.samples)-1].p
}

func (s *stream) gap() {
	s.gaps = append(s.gaps, s.dropped+int64(len(s.samples)))
	s.since.refused++
}

// from returns the number of the first sample taken at or after an instant.
func (s *stream) from(at line.Instant) int64 {
	i := sort.Search(len(s.samples), func(i int) bool { return s.samples[i].at >= at })
	return s.dropped + int64(i)
}

// end is the number that the next sample will have.
func (s *stream) end() int64 { return s.dropped + int64(len(s.samples)) }

// between returns the samples numbered from to end-1; false when the first of
// them is no longer kept.
func (s *stream) between(from, end int64) ([]sample, bool) {
	if from < s.dropped || end > s.end() || from > end {
		return nil, false
	}
	return s.samples[from-s.dropped : end-s.dropped], true
}

// whole says that no line was refused among the samples from to end-1.
func (s *stream) whole(from, end int64) bool {
	for _, g := range s.gaps {
		if g > from && g < end {
			return false
		}
	}
	return true
}

// summary is n, mean, scatter and extremes of pressures in Pa.
type summary struct {
	n        int
	mean, m2 float64
	min, max float64
	refused  int
	at       float64 // s: mean time at which they came, of a stream's summary
}

// add updates the summary (Welford's recurrence).
func (s *summary) add(x float64) {
	if s.n == 0 {
		s.min, s.max = x, x
	}
	s.n++
	d := x - s.mean
	s.mean += d / float64(s.n)
	s.m2 += d * (x - s.mean)
	s.min, s.max = math.Min(s.min, x), math.Max(s.max, x)
}

// heard is what the summary says to a reading of the reference, told of delay
// (s) before the values came.
func (s *summary) heard(reading, delay float64) heard {
	if s.n == 0 {
		return heard{}
	}
	return heard{n: s.n, mean: s.mean, scatter: s.sd(), behind: reading - s.at + delay}
}

// sd is the standard deviation of one value, 0 for fewer than two.
func (s *summary) sd() float64 {
	if s.n < 2 {
		return 0
	}
	return math.Sqrt(s.m2 / float64(s.n-1))
}

// watch turns the summary into mmHg for the record, rounded to what a summary
// is worth, and begins a new one.
func (s *summary) watch() *record.Watch {
	if s.n == 0 && s.refused == 0 {
		return nil
	}
	w := &record.Watch{N: s.n, Mean: milli(s.mean), SD: milli(s.sd()), Min: milli(s.min), Max: milli(s.max), Refused: s.refused}
	*s = summary{}
	return w
}

// milli turns Pa into mmHg with three decimals.
func milli(pa float64) float64 { return math.Round(pa/133.322387415*1000) / 1000 }

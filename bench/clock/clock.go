// Package clock recovers the sample clock of an instrument that sends by itself
// from when its readings arrive, which is in bursts and late by what adapter,
// driver and scheduler make of it.
//
// It opens no port and keeps no readings. Delays only ever add: so the readings
// that came with the least delay lie on a straight line, arrival over number,
// below all others, and that line is the clock.
//
// Order of use: Add the arrival of every reading in order; then Line for the
// recovered period, At for a reading's own time, Suspects for what looks like
// lost or doubled readings.
package clock

import (
	"math"
	"slices"
)

// Recovery follows one stream. The zero value is ready to use.
type Recovery struct {
	n    int64 // readings so far
	hull []point
	sumX float64 // of the numbers of all readings

	bursts                int64 // instants at which readings arrived
	firstBurst, lastBurst float64
	lastArrival           float64

	windows  []point // of least delay in each of the latest stretches
	past     []point // of longer and longer stretches since the beginning
	window   window
	lines    []Line // at the beginning of each of the latest stretches
	suspects []Suspect
	first    int64 // number that the hull begins with
}

type point struct {
	x float64 // number of the reading
	y float64 // s, arrival
}

type window struct {
	from  float64 // number
	least point
}

// Suspect is a place where readings seem to be missing (Readings > 0) or to
// have come twice (< 0). It is never proof: a chunk timer that beats with the
// sample clock looks the same.
type Suspect struct {
	After    int64   // the reading after which it was noticed
	Readings float64 // about so many
}

// Line is the recovered clock.
type Line struct {
	Period      float64 // s
	Uncertainty float64 // s, standard, of the period against this machine's clock
	Start       float64 // s, of reading 0, late by the least delay there is
	Readings    int64
}

const (
	leastReadings = 64   // before that there is no line
	stretch       = 0.25 // s, of one window of the delay floor
	hindsight     = 40   // windows, 10 s: as long as a slow beat
	foresight     = 4    // windows that must agree
	missing       = 0.6  // of a period
	unlikely      = 7.5  // median absolute deviations: 5 standard deviations
)

// Add takes the arrival (s, on a monotonic clock) of the next reading.
//
// The hull of (number, arrival) from below is kept as a monotone chain, O(1)
// amortised: numbers rise. Of readings that arrive together the last has the
// least delay, and stands for them.
func (r *Recovery) Add(arrival float64) {
	x := float64(r.n)
	r.n++
	r.sumX += x
	p := point{x, arrival}
	if r.bursts == 0 {
		r.firstBurst = arrival
	}
	// What comes within half a mean period of the reading before came with it.
	if r.bursts == 0 || arrival-r.lastArrival > 0.5*(arrival-r.firstBurst)/float64(r.n-r.first) {
		r.bursts, r.lastBurst = r.bursts+1, arrival
	}
	r.lastArrival = arrival
	if n := len(r.hull); n > 0 && r.hull[n-1].y == arrival {
		r.hull = r.hull[:n-1]
	}
	for n := len(r.hull); n >= 2 && below(r.hull[n-2], r.hull[n-1], p); n = len(r.hull) {
		r.hull = r.hull[:n-1]
	}
	r.hull = append(r.hull, p)
	r.watch(p)
}

// below says that b lies on or above the line from a to c, so that the hull
// does without it.
func below(a, b, c point) bool {
	return (b.y-a.y)*(c.x-a.x) >= (c.y-a.y)*(b.x-a.x)
}

// Line gives the recovered clock; false before there are enough readings.
//
// Of all lines that no arrival lies below, the one with the least sum of delays
// is the edge of the hull under the mean of the numbers (linear programming in
// two unknowns: the objective is the height at the mean). Its uncertainty comes
// from how much the least delay varies over eight parts of the record: a line
// through eight heights that scatter by s has a slope known to s sqrt(12/8)
// over the length. Source of the method: worked out for this program; measured
// in its tests against known clocks.
func (r *Recovery) Line() (Line, bool) {
	readings := r.n - r.first
	if readings < leastReadings || len(r.hull) < 2 {
		return Line{}, false
	}
	a, b := r.edge()
	period := (b.y - a.y) / (b.x - a.x)
	if !(period > 0) {
		return Line{}, false
	}
	l := Line{Period: period, Start: a.y - a.x*period, Readings: readings}
	l.Uncertainty = r.scatter(l) * math.Sqrt(12.0/8) / float64(readings)
	// Between two jumps of a beat the floor follows the timer, not the clock:
	// over the whole it is out by that much at most.
	l.Uncertainty = math.Max(l.Uncertainty, period/float64(r.beat(l))/float64(readings)/math.Sqrt(3))
	return l, true
}

// edge finds the hull's edge under the mean number.
func (r *Recovery) edge() (a, b point) {
	mean := r.sumX / float64(r.n-r.first)
	low, high := 0, len(r.hull)-1
	for high-low > 1 {
		if m := (low + high) / 2; r.hull[m].x <= mean {
			low = m
		} else {
			high = m
		}
	}
	return r.hull[low], r.hull[high]
}

// delay is how much later than the line a reading arrived.
func (l Line) delay(p point) float64 { return p.y - l.Start - p.x*l.Period }

// scatter is the standard deviation of the least delay of eight parts.
func (r *Recovery) scatter(l Line) float64 {
	n := len(r.past)
	if n < 8 {
		return l.Period // not known better than a sample
	}
	var sum, squares float64
	for part := range 8 {
		least := l.least(r.past[part*n/8 : (part+1)*n/8])
		sum += least / 8
		squares += least * least / 8
	}
	return math.Sqrt(math.Max(squares-sum*sum, 0) * 8 / 7)
}

// At is when a reading was taken, on the clock of the arrivals, late by the
// least delay; false before there is a line.
func (l Line) At(number int64) float64 { return l.Start + float64(number)*l.Period }

// Suspects lists the places where readings seem missing or doubled.
func (r *Recovery) Suspects() []Suspect { return r.suspects }

// Readings counts what was added.
func (r *Recovery) Readings() int64 { return r.n }

// watch keeps the least delay of each stretch and looks for a step in it. It
// goes by the line as it was known when the stretch began.
func (r *Recovery) watch(p point) {
	w := &r.window
	if len(r.lines) == 0 {
		l, ok := r.Line()
		if !ok {
			return
		}
		r.lines = append(r.lines, l)
		*w = window{from: p.x, least: p}
		return
	}
	l := r.lines[len(r.lines)-1]
	if l.delay(p) < l.delay(w.least) {
		w.least = p
	}
	if (p.x-w.from)*l.Period < stretch {
		return
	}
	r.keep(w.least)
	*w = window{from: p.x, least: p}
	if l, ok := r.Line(); ok {
		r.lines = append(r.lines, l)
		if n := len(r.lines); n > foresight+1 {
			r.lines = r.lines[:copy(r.lines, r.lines[n-foresight-1:])]
		}
	}
	r.step(p)
}

// mostPast bounds what is remembered of a long stream.
const mostPast = 512

// keep remembers the point of least delay of a stretch.
func (r *Recovery) keep(p point) {
	r.windows = append(r.windows, p)
	if n := len(r.windows); n > 4*(hindsight+foresight) {
		r.windows = r.windows[:copy(r.windows, r.windows[n-hindsight-foresight:])]
	}
	r.past = append(r.past, p)
	if len(r.past) < mostPast {
		return
	}
	l, _ := r.Line()
	for i := range mostPast / 2 { // one of two, the one with the less delay
		a, b := r.past[2*i], r.past[2*i+1]
		if l.delay(b) < l.delay(a) {
			a = b
		}
		r.past[i] = a
	}
	r.past = r.past[:mostPast/2]
}

// step compares the latest windows with those before them. A rise of the floor
// by most of a period that stays is a reading lost, a fall a reading doubled;
// the clock is then followed anew. Where the timer that hands readings over
// beats with the sample clock, the floor wanders over a whole period and jumps
// back by itself: then one reading cannot be told from that, and only more are
// suspected.
func (r *Recovery) step(p point) {
	n, l := len(r.windows), r.lines[0] // as it was before the latest windows
	if n < 4*foresight || len(r.lines) <= foresight {
		return
	}
	var before []float64 // least delays of groups as large as the latest
	for end := n - foresight; end >= foresight && len(before) < hindsight/foresight; end -= foresight {
		before = append(before, l.least(r.windows[end-foresight:end]))
	}
	m := median(slices.Clone(before))
	change := l.least(r.windows[n-foresight:]) - m
	for i, d := range before {
		before[i] = math.Abs(d - m)
	}
	bound := missing * l.Period
	if r.beats(l) {
		bound = 1.5 * l.Period
	}
	if math.Abs(change) <= math.Max(bound, unlikely*median(before)) {
		return
	}
	r.suspects = append(r.suspects, Suspect{After: int64(p.x), Readings: math.Round(change / l.Period)})
	*r = Recovery{n: r.n, first: r.n, suspects: r.suspects}
}

// least is the least delay of points.
func (l Line) least(points []point) float64 {
	least := math.Inf(1)
	for _, p := range points {
		least = math.Min(least, l.delay(p))
	}
	return least
}

// median sorts x; the lower of two in the middle.
func median(x []float64) float64 {
	slices.Sort(x)
	return x[(len(x)-1)/2]
}

// beats says that the readings are handed over at intervals of very nearly a
// whole number of sample periods.
func (r *Recovery) beats(l Line) bool { return r.beat(l) == 1 }

// beat is the least number of hand-overs that take very nearly a whole number
// of sample periods, at most 64; the delay floor wanders over a period divided
// by it. 1 while not enough is known; 64 where readings come one by one.
func (r *Recovery) beat(l Line) int {
	const most = 64
	if r.bursts < 16 {
		return 1
	}
	ratio := (r.lastBurst - r.firstBurst) / float64(r.bursts-1) / l.Period
	if ratio < 1.5 {
		return most
	}
	for q := 1; q < most; q++ {
		if x := float64(q) * ratio; math.Abs(x-math.Round(x)) < 0.02 {
			return q
		}
	}
	return most
}

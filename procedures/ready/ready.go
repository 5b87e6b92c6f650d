// Package ready says when a point may be taken, and how fast a shut-off volume
// loses pressure.
//
// What is judged at a point is a difference, UUT minus reference; drift that
// both see cancels but for slope times the difference of their delays. So the
// rule looks at the difference, and at the pressure only as far as its slope
// can spoil the difference. It knows no units but those of its caller: one
// pressure unit, seconds.
//
// Order of use: a Watch for each point, Add for each reading of the reference
// with the UUT's mean around it, until the State is ready.
package ready

import (
	"fmt"
	"math"
)

// Settings of the difference rule. The zero value is never ready, for it asks
// for a standard uncertainty of zero.
type Settings struct {
	Delay         float64 // s: response time of the reference, its tolerance and the skew between the two, added
	SlopeShare    float64 // pressure: |slope| x Delay may be this much
	Standard      float64 // pressure: standard uncertainty asked of the mean difference
	LeastReadings int     // at least this many readings, never under 5
	Settling      float64 // s: readings this soon after the first are not used (the reference's response)
}

// Sample is one reading of the reference with what the UUT said around it.
type Sample struct {
	Time      float64 // s
	Reference float64
	UUT       float64 // mean of the UUT's samples around Time, in the same unit
}

// State is what a Watch knows after a sample.
type State struct {
	Ready    bool
	Waiting  string  // what is waited for, in words; empty when ready
	First    int     // index of the first sample of the window to be used
	Slope    float64 // of the reference over the window, pressure per second
	SlopeSE  float64
	Mean     float64 // of UUT minus reference over the window
	Standard float64 // of that mean
}

// Watch follows one point.
type Watch struct {
	settings Settings
	samples  []Sample
}

// NewWatch starts following a point that has just come inside its window.
func NewWatch(s Settings) *Watch {
	s.LeastReadings = max(s.LeastReadings, 5)
	return &Watch{settings: s}
}

// Count returns how many samples were added.
func (w *Watch) Count() int { return len(w.samples) }

// Add takes the next sample and says whether the point is ready.
//
// The window is the last n samples, n = LeastReadings up to four times that,
// the shortest that satisfies all of:
//   - it begins Settling after the first sample;
//   - (|slope| + SE(slope)) x Delay <= SlopeShare, the slope by least squares
//     on the reference's readings;
//   - the difference has no trend beyond its noise: |trend| <= 2.5 SE(trend),
//     or the trend over the window is under SlopeShare;
//   - the standard uncertainty of the mean difference, SD/sqrt(n), is at most
//     Standard.
//
// Source: facts of practice worked out for this program (the judged quantity
// is the difference); the least-squares formulas are textbook.
func (w *Watch) Add(s Sample) State {
	w.samples = append(w.samples, s)
	least := w.settings.LeastReadings
	usable := 0
	for usable < len(w.samples) && w.samples[usable].Time-w.samples[0].Time < w.settings.Settling {
		usable++
	}
	if len(w.samples)-usable < least {
		return State{Waiting: fmt.Sprintf("readings: %d of %d", max(0, len(w.samples)-usable), least)}
	}
	var state State
	for n := least; n <= 4*least && len(w.samples)-n >= usable; n++ {
		state = w.judge(len(w.samples) - n)
		if state.Ready {
			return state
		}
	}
	return state
}

func (w *Watch) judge(first int) State {
	window := w.samples[first:]
	n := float64(len(window))
	var mt, mr, md float64
	for _, s := range window {
		mt += s.Time / n
		mr += s.Reference / n
		md += (s.UUT - s.Reference) / n
	}
	var stt, str, std float64
	for _, s := range window {
		t := s.Time - mt
		stt += t * t
		str += t * (s.Reference - mr)
		std += t * (s.UUT - s.Reference - md)
	}
	state := State{First: first, Mean: md}
	if stt <= 0 {
		state.Waiting = "readings at different times"
		return state
	}
	state.Slope = str / stt
	trend := std / stt
	var rr, rd, dd float64
	for _, s := range window {
		t := s.Time - mt
		r := s.Reference - mr - state.Slope*t
		d := s.UUT - s.Reference - md
		rr += r * r
		rd += (d - trend*t) * (d - trend*t)
		dd += d * d
	}
	state.SlopeSE = math.Sqrt(rr / (n - 2) / stt)
	trendSE := math.Sqrt(rd / (n - 2) / stt)
	state.Standard = math.Sqrt(dd / (n - 1) / n)
	length := window[len(window)-1].Time - window[0].Time
	switch {
	case (math.Abs(state.Slope)+state.SlopeSE)*w.settings.Delay > w.settings.SlopeShare:
		state.Waiting = fmt.Sprintf("pressure %s %.2g a second, hold", rising(state.Slope), math.Abs(state.Slope))
	case math.Abs(trend) > 2.5*trendSE && math.Abs(trend)*length > w.settings.SlopeShare:
		state.Waiting = fmt.Sprintf("the UUT still %s against the reference", rising(trend))
	case state.Standard > w.settings.Standard:
		state.Waiting = fmt.Sprintf("noise: mean known to %.2g, %.2g asked", state.Standard, w.settings.Standard)
	default:
		state.Ready = true
	}
	return state
}

func rising(slope float64) string {
	if slope < 0 {
		return "falling"
	}
	return "rising"
}

package ready

import (
	"fmt"
	"math"
)

// Kind is what a wait is for. The zero value is nothing: the point is ready.
type Kind uint8

// What can be waited for.
const (
	Nothing   Kind = iota
	Gathering      // readings: Have of Need
	Moving         // the reference's slope, Value a second
	Trending       // the difference itself, Value a second
	Unsure         // whether the difference stands still, by so few readings: Need more
	Noisy          // its mean is known to Value, Limit is asked; Need more readings
	Coarse         // the resolution alone leaves Value, Limit is asked: waiting does not help
	Relaxing       // Still: Value may still be to come, Limit is allowed
	WrongSide      // Approach: the pressure has been beyond by Value, Limit is allowed
)

// String is a word for records: "gathering", "moving" and so on, "" for nothing.
func (k Kind) String() string {
	words := [...]string{"", "gathering", "moving", "trending", "unsure", "noisy", "coarse", "relaxing", "wrong side"}
	if int(k) < len(words) {
		return words[k]
	}
	return "unknown"
}

// Status says what is waited for, in numbers. The unit of Value and Limit is
// the caller's unit of pressure, for Moving and Trending per second.
type Status struct {
	Kind       Kind
	Value      float64
	Limit      float64
	Have, Need int
	Seconds    float64 // expected until ready; +Inf: no end can be foretold
}

// Text says it in words, for a person who waits; "" when nothing is waited for.
func (s Status) Text(unit string) string {
	switch s.Kind {
	case Gathering:
		return fmt.Sprintf("readings: %d of %d%s", s.Have, s.Need, s.within())
	case Moving:
		if math.IsInf(s.Seconds, 1) {
			return fmt.Sprintf("reference still moving %s %s/s, no slowing seen: a leak, or a source that does not hold?", short(s.Value), unit)
		}
		return fmt.Sprintf("reference still moving %s %s/s%s", short(s.Value), unit, s.within())
	case Trending:
		return fmt.Sprintf("the UUT moves against the reference, %s %s/s%s", short(s.Value), unit, s.within())
	case Unsure:
		return fmt.Sprintf("too few readings to be sure that the difference stands still: %d more%s", s.Need, s.within())
	case Noisy:
		if s.Need > 0 {
			return fmt.Sprintf("noise: difference known to %s %s, %s asked: %d more readings%s", short(s.Value), unit, short(s.Limit), s.Need, s.within())
		}
		return fmt.Sprintf("noise: difference known to %s %s, %s asked", short(s.Value), unit, short(s.Limit))
	case Coarse:
		return fmt.Sprintf("the resolution alone leaves %s %s, %s asked: waiting does not help", short(s.Value), unit, short(s.Limit))
	case WrongSide:
		return fmt.Sprintf("approached from the wrong side: the pressure has been beyond by %s %s, so its hysteresis will not count; going back and coming again mends it", short(s.Value), unit)
	case Relaxing:
		return fmt.Sprintf("the pressure may still move by %s %s, %s allowed%s", short(s.Value), unit, short(s.Limit), s.within())
	}
	return ""
}

// within tells the expected time: ", about 6 s".
func (s Status) within() string {
	switch {
	case math.IsInf(s.Seconds, 0) || math.IsNaN(s.Seconds) || s.Seconds <= 0:
		return ""
	case s.Seconds < 1:
		return ", about 1 s"
	}
	return fmt.Sprintf(", about %.0f s", s.Seconds)
}

// short writes a magnitude with two digits.
func short(x float64) string {
	x = math.Abs(x)
	if x >= 10 || x == 0 {
		return fmt.Sprintf("%.0f", x)
	}
	return fmt.Sprintf("%.2g", x)
}

// moving foretells how long the reference's slope needs to die away: from the
// slopes of the halves of the latest readings, as an exponential has them. It
// foretells nothing while noise could make that difference of slopes.
func (w *Watch) moving(state State) Status {
	s := Status{Kind: Moving, Value: state.Slope, Seconds: math.Inf(1)}
	s.Limit = w.settings.SlopeShare / w.settings.DelayUncertainty
	end := w.sums.last()
	a := max(0, end-2*w.settings.LeastReadings)
	m := (a + end) / 2
	early, late := w.sums.reference(a, m), w.sums.reference(m, end)
	apart := (w.sums.rows[end].t - w.sums.rows[a+1].t) / 2
	if early.stt == 0 || late.stt == 0 {
		return s
	}
	noise := math.Sqrt(early.variance()/early.stt + late.variance()/late.stt)
	if ratio := early.slope / late.slope; ratio > 1 && math.Abs(early.slope-late.slope) > 2*noise {
		tau := apart / math.Log(ratio)
		s.Seconds = math.Max(tau*math.Log(math.Abs(state.Slope)/s.Limit), w.sums.period())
	}
	return s
}

// noisy foretells how many readings more bring the mean to what is asked, the
// noise being as it is.
func (w *Watch) noisy(state State) Status {
	set := w.settings
	s := Status{Kind: Noisy, Value: state.Standard, Limit: set.Standard, Seconds: math.Inf(1)}
	left := set.Standard*set.Standard - state.Settling*state.Settling
	if state.Resolution < set.Standard {
		left -= state.Resolution * state.Resolution
	}
	if left > 0 && !math.IsInf(state.Noise, 1) {
		n := float64(state.Readings)
		whole := math.Max(n*state.Noise*state.Noise/left, float64(set.LeastReadings)*state.safe)
		s.Need = max(1, int(math.Ceil(whole-n)))
		s.Seconds = w.seconds(s.Need)
	}
	return s
}

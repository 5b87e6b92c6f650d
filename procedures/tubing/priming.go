package tubing

import "math"

// Trial is what one trial release gave: best values with their 95 % intervals.
type Trial struct {
	Frequency, Damping, Product       float64 // Hz, 1, Hz
	FrequencyIn, DampingIn, ProductIn Interval
}

// Target is what the line is to become. Zeros are not known or not asked.
type Target struct {
	FrequencyLow, DampingLow, DampingHigh float64 // limits
	CleanFrequency, CleanProduct          float64 // of the same line clean and free of air: Hz, Hz
}

// Advice is what to do next.
type Advice uint8

// The advice. The zero value is that one trial more is needed to tell.
const (
	Again       Advice = iota // nothing to compare with yet
	FlushAir                  // air: tap the dome and flush
	AirEntered                // the frequency fell and the product did not rise
	Narrowed                  // the product rose, or is above the clean line's
	StillRising               // within the limits, and air is still leaving
	Settled                   // as good as it gets, and not within the limits
	Done                      // as good as it gets, and within the limits
)

// String is the word of an advice for programs.
func (a Advice) String() string {
	words := [...]string{"again", "flush_air", "air_entered", "narrowed", "still_rising", "settled", "done"}
	if int(a) < len(words) {
		return words[a]
	}
	return "again"
}

// How much two releases of the same line differ at most by themselves, as a
// share (common practice here, no source): a change below it is none.
const (
	sameFrequency = 0.02
	sameProduct   = 0.05
	cleanProduct  = 0.2 // how far above the clean line's the product may lie
	cleanFrequent = 0.1 // and how far below it the frequency
)

// Advise says what to do after the latest of the trials, oldest first.
//
// Air lowers the natural frequency and leaves fn x zeta alone; a narrowing
// raises fn x zeta (Line.Product). So what changed since the trial before tells
// which: a change counts when it is beyond the uncertainty of both, added as
// the root of squares, and beyond what releases differ by anyway. What is known
// of the clean line tells the same from one trial alone.
func Advise(trials []Trial, target Target) Advice {
	if len(trials) == 0 {
		return Again
	}
	last := trials[len(trials)-1]
	within := last.FrequencyIn.Low >= target.FrequencyLow && last.DampingIn.Low >= target.DampingLow &&
		(target.DampingHigh == 0 || last.DampingIn.High <= target.DampingHigh)
	limited := target.FrequencyLow > 0 || target.DampingLow > 0 || target.DampingHigh > 0
	narrow := target.CleanProduct > 0 && last.ProductIn.Low > (1+cleanProduct)*target.CleanProduct
	air := target.CleanFrequency > 0 && last.FrequencyIn.High < (1-cleanFrequent)*target.CleanFrequency
	if len(trials) == 1 {
		switch {
		case narrow && !(within && limited):
			return Narrowed
		case air:
			return FlushAir
		case limited && !within && last.FrequencyIn.High < target.FrequencyLow && !narrow:
			return FlushAir // what is too slow is full of air more often than not
		}
		return Again
	}
	before := trials[len(trials)-2]
	frequency := change(before.Frequency, before.FrequencyIn, last.Frequency, last.FrequencyIn, sameFrequency)
	product := change(before.Product, before.ProductIn, last.Product, last.ProductIn, sameProduct)
	switch {
	case product > 0:
		return Narrowed
	case frequency < 0:
		return AirEntered
	case frequency > 0 && within && limited:
		return StillRising
	case frequency > 0:
		return FlushAir
	case within && limited:
		return Done
	case narrow:
		return Narrowed
	case air:
		return FlushAir
	}
	return Settled
}

// change is 1 or -1 when b is above or below a by more than both intervals
// and the share tell; 0 otherwise.
func change(a float64, ia Interval, b float64, ib Interval, share float64) int {
	if !(a > 0) || !(b > 0) {
		return 0
	}
	half := math.Hypot((ia.High-ia.Low)/2/a, (ib.High-ib.Low)/2/b)
	switch d := math.Log(b / a); {
	case d > math.Max(half, share):
		return 1
	case d < -math.Max(half, share):
		return -1
	}
	return 0
}

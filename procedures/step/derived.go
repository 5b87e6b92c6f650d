package step

import (
	"fmt"
	"math"
	"slices"
)

// Figure is one figure of a line that follows from natural frequency and
// damping ratio. Value must not be read unless Exists.
//
// Low and High are the ends of the 95 % interval over all draws, each draw
// with its own value; where a draw has no such figure (no peak, nothing that
// oscillates) it counts with what the figure tends to there. The standard
// uncertainty is half the interval over the factor of Student's t, so that it
// is the propagated one wherever the figure is nearly linear, and finite with
// few degrees of freedom.
type Figure struct {
	Estimate
	Exists bool
	Reason string // why it does not exist at the best values
	Note   string // what the interval does not tell: branches, draws that lack it
}

// Derived is what natural frequency and damping mean for the answer to a step
// and to a sine. Frequencies are in Hz, times in seconds, phases in degrees;
// overshoot, gains are plain numbers.
type Derived struct {
	DampedFrequency, Overshoot, RiseTime, Settling2, Settling5 Figure
	ResonanceFrequency, ResonanceGain                          Figure
	Bandwidth3dB, Flat5                                        Figure
	At                                                         []AtFrequency
	Product                                                    Figure // fn x zeta, Hz
}

// AtFrequency is the gain and phase at one frequency.
type AtFrequency struct {
	Frequency   float64 // Hz
	Gain, Phase Figure
}

// branchShare is the share of the draws from which on a branch is told.
const branchShare = 0.005

// Derive works the figures out at the best values and for every draw, and the
// gain and phase at the frequencies (Hz, above 0). Draws are those of the same
// Joint. Each figure's formula stands with its function in figures.go.
func (j Joint) Derive(d Draws, frequencies []float64) Derived {
	s := sampler{joint: j, draws: d, values: make([]float64, len(d.Frequency))}
	seconds := func(f func(zeta float64) float64) func(fn, zeta float64) float64 {
		return func(fn, zeta float64) float64 { return f(zeta) / (2 * math.Pi * fn) }
	}
	hertz := func(f func(zeta float64) float64) func(fn, zeta float64) float64 {
		return func(fn, zeta float64) float64 { return fn * f(zeta) }
	}
	oscillates := func(zeta float64) bool { return zeta < 1 }
	peaks := func(zeta float64) bool { return 2*zeta*zeta < 1 }
	settle := func(part float64) Figure {
		return s.branched(seconds(func(zeta float64) float64 { return SettlingTime(zeta, part) }), "s",
			func(zeta float64) int { return extremaOutside(zeta, part) })
	}
	out := Derived{
		DampedFrequency: s.lacking(hertz(DampedFrequency), oscillates, "nothing oscillates: the damping ratio is 1 or more"),
		Overshoot:       s.lacking(func(_, zeta float64) float64 { return Overshoot(zeta) }, oscillates, "no overshoot: the damping ratio is 1 or more"),
		RiseTime:        s.plain(seconds(RiseTime)),
		Settling2:       settle(0.02),
		Settling5:       settle(0.05),
		ResonanceFrequency: s.lacking(func(fn, zeta float64) float64 { f, _ := Resonance(zeta); return fn * f }, peaks,
			"no peak: the damping ratio is over 0.7071"),
		ResonanceGain: s.lacking(func(_, zeta float64) float64 { _, g := Resonance(zeta); return g }, peaks,
			"no peak: the damping ratio is over 0.7071"),
		Bandwidth3dB: s.plain(hertz(Bandwidth)),
		Flat5: s.branched(hertz(func(zeta float64) float64 { return FlatBand(zeta, 0.05) }), "Hz", func(zeta float64) int {
			if peaksBeyond(zeta, 0.05) {
				return 1
			}
			return 0
		}),
		Product: s.plain(func(fn, zeta float64) float64 { return fn * zeta }),
	}
	for _, f := range frequencies {
		out.At = append(out.At, AtFrequency{
			Frequency: f,
			Gain:      s.plain(func(fn, zeta float64) float64 { return Amplitude(fn, zeta, f) }),
			Phase:     s.plain(func(fn, zeta float64) float64 { return Phase(fn, zeta, f) * 180 / math.Pi }),
		})
	}
	return out
}

// Figure puts a figure of somebody else's making into the same form: its best
// value and its value for every draw, which are sorted in place.
func (j Joint) Figure(best float64, values []float64) Figure {
	out := Figure{Exists: true}
	out.Value = best
	out.Low, out.High = interval95(values)
	out.StandardUncertainty = (out.High - out.Low) / 2 / j.coverage95()
	return out
}

// sampler carries a figure through the draws.
type sampler struct {
	joint  Joint
	draws  Draws
	values []float64
}

func (s *sampler) plain(f func(fn, zeta float64) float64) Figure {
	for i, fn := range s.draws.Frequency {
		s.values[i] = f(fn, s.draws.Damping[i])
	}
	return s.joint.Figure(f(s.joint.Frequency, s.joint.Damping), s.values)
}

// lacking is a figure that some damping ratios do not have.
func (s *sampler) lacking(f func(fn, zeta float64) float64, has func(zeta float64) bool, reason string) Figure {
	with := 0
	for _, zeta := range s.draws.Damping {
		if has(zeta) {
			with++
		}
	}
	share := float64(with) / float64(len(s.draws.Damping))
	if !has(s.joint.Damping) {
		out := Figure{Reason: reason}
		if share >= branchShare {
			out.Note = fmt.Sprintf("within the uncertainty there may be one (%.0f %% of the draws)", 100*share)
		}
		return out
	}
	out := s.plain(f)
	if share <= 1-branchShare {
		out.Note = fmt.Sprintf("within the uncertainty there may be none (%.0f %% of the draws)", 100*(1-share))
	}
	return out
}

// branched is a figure that jumps where the branch changes with the damping
// ratio; the note tells the branches that matter.
func (s *sampler) branched(f func(fn, zeta float64) float64, unit string, branch func(zeta float64) int) Figure {
	out := s.plain(f)
	counts := map[int]int{}
	for _, zeta := range s.draws.Damping {
		counts[branch(zeta)]++
	}
	var names []int
	for b, n := range counts {
		if float64(n) >= branchShare*float64(len(s.values)) {
			names = append(names, b)
		}
	}
	if len(names) < 2 {
		return out
	}
	slices.Sort(names)
	out.Note = "jumps with the damping ratio: "
	for i, b := range names {
		if i > 0 {
			out.Note += ", or "
		}
		if i > 3 {
			out.Note += "others"
			break
		}
		var values []float64
		for k, zeta := range s.draws.Damping {
			if branch(zeta) == b {
				values = append(values, f(s.draws.Frequency[k], zeta))
			}
		}
		low, high := interval95(values)
		out.Note += fmt.Sprintf("%.3g to %.3g %s (%.0f %% of the draws)", low, high, unit, 100*float64(counts[b])/float64(len(s.values)))
	}
	return out
}

package step

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// When a suspect counts. The chances are those of one question; some thirty
// that are much alike are asked of every step.
const (
	surely   = 1e-6 // beyond this chance a suspect is there, whatever it does
	probably = 1e-4 // beyond this, and far-reaching, it is reserved
	// farReaching is the shift of ln fn beyond which a suspect that is only
	// probable is told: less than half the error that must not pass unsaid.
	farReaching = 0.08
	// slightest is the part of the step, or of fn, below which nothing is told:
	// no line is a second-order system to a thousandth.
	slightest = 0.001
	hazard    = 3    // standard deviations by which a lag may hide
	gravest   = 0.18 // ln of an error of 20 %
)

// trial is what the suspects of one step came to.
type trial struct {
	all     []suspect
	freedom float64 // degrees of freedom behind each z
	worst   suspect // the largest |z|
	sure    bool    // worst is there beyond doubt
	explanation
	explained bool
	edge      Tolerance // what the stated edge may do
}

// beyond is the size of z that chance exceeds, to one side, with p.
func beyond(p, freedom float64) float64 {
	return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: math.Min(freedom, 1e6)}.Quantile(1 - p)
}

// calm is the noise away from the answer: standard deviation (trace's unit),
// correlation from sample to sample and degrees of freedom, from before the
// step and from the settled tail, each about its own line. Where there is too
// little of both it is that of the residuals.
func (q *quality) calm(c covariance, tau float64) (sigma, phi, freedom float64) {
	n := len(q.step.Residuals)
	tail := min(n, q.post-q.from+int((15*tau+q.width())*q.rate))
	var sum, lag, count, freed float64
	for _, r := range [][]float64{detrended(q.quiet(min(q.pre, q.post) - q.from)), detrended(q.withoutSpikes(q.step.Residuals)[tail:])} {
		if len(r) < 16 {
			continue
		}
		for i, v := range r {
			sum += v * v
			if i > 0 {
				lag += v * r[i-1]
			}
		}
		count += float64(len(r))
		freed += 2
	}
	least := math.Max(1e-9*math.Abs(q.scale), q.quantum/math.Sqrt(12))
	if count < 40 || !(sum > 0) {
		return math.Max(c.sigma, least), c.correlation, c.freedom
	}
	// The lines take correlation out, and the estimate is low by (1+4 phi)/n
	// besides (Kendall 1954, from memory). What chance makes of white noise is none.
	phi = lag / sum
	phi += (freed/2*(1+phi) + 1 + 4*phi) / count
	if phi < 2/math.Sqrt(count) {
		phi = 0
	}
	phi = math.Min(phi, 0.99)
	loss := (1 + phi) / (1 - phi)
	sigma = math.Sqrt(sum / math.Max(count-freed*loss, count/4))
	freedom = math.Max(1, (count-freed)*(1-phi*phi)/(1+phi*phi))
	return math.Max(math.Min(sigma, c.sigma), least), phi, freedom
}

// try puts the suspects before the fit of a step.
func (q *quality) try(j [][]float64, c covariance, middle, fn, zeta float64, name bool, s Settings) trial {
	sigma, phi, freedom := q.calm(c, settling(2*math.Pi*fn, zeta))
	scaled := make([]float64, len(q.step.Residuals))
	for i, r := range q.withoutSpikes(q.step.Residuals) {
		scaled[i] = r / q.scale
	}
	out := trial{freedom: freedom}
	t, ok := q.tribunal(j, scaled, middle, sigma/math.Abs(q.scale), phi)
	if !ok {
		return out
	}
	if s.EdgeStated && s.EdgeTime > 0 && !q.problem.measured {
		out.edge = t.edgeBias(2*math.Pi*fn, s.EdgeTime, s.EdgeTolerance)
	}
	out.all = t.hear()
	for _, s := range out.all {
		if math.Abs(s.z) > math.Abs(out.worst.z) && (s.peak > slightest || math.Abs(s.shift) > slightest) {
			out.worst = s
		}
	}
	out.sure = math.Abs(out.worst.z) > beyond(surely, freedom)
	if out.sure && name && q.problem.applied == nil {
		out.explanation, out.explained = q.explain(t, middle)
	}
	return out
}

// sentence judges by the trial: reasons where what is wrong moves the figures
// too far, reservations else.
func (q *quality) sentence(t trial, readoutStated bool) {
	s := q.step
	if t.sure {
		code, text := t.name(s.At)
		if t.explained && math.Abs(t.explanation.shift) > largestUncertainty && code != Misfit {
			s.Reasons = append(s.Reasons, code)
			return
		}
		s.reserve(code, text)
		return
	}
	for _, u := range t.all {
		if math.Abs(u.shift) > farReaching && math.Abs(u.z) > beyond(probably, t.freedom) {
			s.reserve(Misfit, fmt.Sprintf("the residuals look like %s, by %.1f standard deviations; were it there, the natural frequency would be %.2g %% %s", u.kind, math.Abs(u.z), 100*math.Abs(math.Expm1(u.shift)), higher(u.shift)))
			return
		}
	}
	if most := t.undetected(); most > gravest && !readoutStated && !q.problem.measured {
		s.reserve(ReadoutNotStated, fmt.Sprintf("a filter in the readout that nobody stated could hide in this noise and make the natural frequency read up to %.2g %% low", 100*-math.Expm1(-most)))
	}
}

// undetected is the largest rise of ln fn that a lag could hide: were it in
// the trace, it would show by fewer than hazard standard deviations.
func (t trial) undetected() float64 {
	most := 0.0
	for _, u := range t.all {
		if u.kind == lagged {
			most = math.Max(most, u.shift+hazard*u.slack)
		}
	}
	return most
}

func higher(shift float64) string {
	if shift < 0 {
		return "lower"
	}
	return "higher"
}

// name is the code and the words for what is there beyond doubt.
func (t trial) name(at float64) (code, text string) {
	e := t.explanation
	if !t.explained {
		return Misfit, fmt.Sprintf("the fit leaves something like %s, %.0f times what noise would; the line may not be a second-order system, or the step not single", t.worst.kind, math.Abs(t.worst.z))
	}
	far := fmt.Sprintf("; the natural frequency would be %.2g %% %s", 100*math.Abs(math.Expm1(e.shift)), higher(e.shift))
	switch e.kind {
	case stepped:
		return Overlapping, fmt.Sprintf("a further step of %.2g %% follows %.3g s after this one", 100*e.amount, e.after) + far
	case struck:
		return Bounced, fmt.Sprintf("the pressure turned back by %.2g %% of the step %.3g s after it, for %.3g s, as behind a valve that bounces", 100*math.Abs(e.amount), e.after, e.length) + far
	case second:
		return SecondMode, fmt.Sprintf("a second mode swings beside the line at %.3g Hz, %.2g %% of the step high", e.after, 100*math.Abs(e.amount)) + far
	}
	return Lag, fmt.Sprintf("the answer comes behind a lag of %.3g s: a slow edge, or a filter in the readout, that was not stated", e.after) + far
}

func (k suspicion) String() string {
	switch k {
	case lagged:
		return "a lag"
	case stepped:
		return "a further step"
	case struck:
		return "a bounce"
	case second:
		return "a second mode"
	}
	return "a creeping level"
}

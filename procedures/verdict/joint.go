package verdict

import (
	"errors"
	"fmt"
	"math"

	"kymobench/procedures/uncertainty"
)

// ErrJoint: figures of which no joint risk can be given.
var ErrJoint = errors.New("no joint risk")

// Joint is the risk of deciding about a whole UUT. For one accepted, Outside is
// the probability that it was accepted wrongly: that at least one true value
// lies outside its limit. For one rejected, Inside is that of rejecting
// wrongly: that all lie inside. Least and Most bound Outside whatever the
// correlations: the largest of the single ones, and their sum.
type Joint struct {
	Inside, Outside float64
	Error           float64 // of both, absolute: three standard errors where sampled
	Least, Most     float64
	Figures         int // how many limits could count: a few may be too far from their figures
	Points          int // 0: not sampled
}

// JointRisk is that of figures judged together, by their Judgements, whose
// errors have the correlations r (uncertainty.Covariances of their budgets, as
// Correlation), given what was measured and a flat prior. The single
// probabilities stay what they are, by t or Monte Carlo; the normal
// distribution with those correlations says how they go together. That is exact
// where all are normal; what else there could be lies between Least and Most.
//
// A Judgement that is undetermined for want of a value, an uncertainty or a
// limit has no probabilities, and none can be given: ErrJoint. Source: JCGM
// 106:2012 leaves several limits out; the rectangle of a multivariate normal,
// Rectangle; common practice, no source, for coupling other distributions (a
// normal copula).
func JointRisk(judged []Judgement, r uncertainty.Matrix, s uncertainty.RectangleSettings) (Joint, error) {
	if r.N != len(judged) || len(r.Data) != r.N*r.N {
		return Joint{}, fmt.Errorf("%w: %d figures and the correlations of %d", ErrJoint, len(judged), r.N)
	}
	var out Joint
	var keep []int
	for i := range judged {
		j := &judged[i]
		p := j.Below + j.Above
		if j.Outcome == Undetermined && p == 0 {
			return Joint{}, fmt.Errorf("%w: figure %d has no probabilities: %s", ErrJoint, i+1, j.Reason)
		}
		out.Least, out.Most = math.Max(out.Least, p), out.Most+p
	}
	// What is nothing beside the largest is left out, and counted in the error.
	var left float64
	for i := range judged {
		if p := judged[i].Below + judged[i].Above; p > 1e-6*out.Least {
			keep = append(keep, i)
		} else {
			left += p
		}
	}
	out.Most, out.Figures = math.Min(out.Most, 1), len(keep)
	n := len(keep)
	low, high := make([]float64, n), make([]float64, n)
	m := uncertainty.Matrix{N: n, Data: make([]float64, n*n)}
	for i, from := range keep {
		low[i] = uncertainty.StudentQuantile(judged[from].Below, 0)
		high[i] = -uncertainty.StudentQuantile(judged[from].Above, 0)
		for k, other := range keep {
			m.Data[i*n+k] = r.At(from, other)
		}
	}
	region, err := uncertainty.Rectangle(low, high, m, 0, s)
	if err != nil {
		return Joint{}, fmt.Errorf("%w: %w", ErrJoint, err)
	}
	out.Inside, out.Outside, out.Error, out.Points = region.Inside, region.Outside, region.Error+left, region.Points
	// The error of sampling must not lead past what is certain.
	if out.Outside < out.Least || out.Outside > out.Most {
		out.Outside = math.Min(math.Max(out.Outside, out.Least), out.Most)
		out.Inside = 1 - out.Outside
	}
	return out, nil
}

// Judged is one figure for JointGlobalRisk: the normal prior of its true
// values, its standard uncertainty, tolerance and acceptance.
type Judged struct {
	Prior             NormalPrior
	Standard          float64
	Tolerance, Accept Limit
}

// JointGlobalRisk is GlobalRisk for UUTs that are accepted when every figure
// is: Consumer counts those accepted with at least one true value outside,
// Producer those rejected with all inside. True values are normal with the
// correlations between, errors of measurement with those of measuring; neither
// knows of the other. Both correlations count: seven points at 4:1 have a
// consumer's risk of 0.041 when all is independent, and 0.016 when true values
// correlate by 0.9 and errors by 0.8.
//
//	Consumer = P(all accepted) - P(all accepted and all inside)
//	Producer = P(all inside) - P(all accepted and all inside)
//
// by three rectangles of a normal distribution, the last of twice as many
// quantities as figures; Error is of their sum. Errors as GlobalRisk and
// uncertainty.Rectangle. From memory.
func JointGlobalRisk(figures []Judged, between, measuring uncertainty.Matrix, s uncertainty.RectangleSettings) (Risks, error) {
	n := len(figures)
	if between.N != n || measuring.N != n {
		return Risks{}, fmt.Errorf("%w: %d figures with the correlations of %d and %d", ErrJoint, n, between.N, measuring.N)
	}
	low, high := make([]float64, 2*n), make([]float64, 2*n)
	scale := make([]float64, n) // SD of what is measured
	for i, f := range figures {
		if err := f.Prior.check(); err != nil {
			return Risks{}, err
		}
		if !(f.Standard > 0) || !finite(f.Standard) {
			return Risks{}, fmt.Errorf("%w: a standard uncertainty of %v", ErrPrior, f.Standard)
		}
		tl, th, err := sides(f.Tolerance)
		if err != nil {
			return Risks{}, err
		}
		al, ah, err := sides(f.Accept)
		if err != nil {
			return Risks{}, err
		}
		scale[i] = math.Hypot(f.Prior.SD, f.Standard)
		low[i], high[i] = (al-f.Prior.Mean)/scale[i], (ah-f.Prior.Mean)/scale[i]
		low[n+i], high[n+i] = (tl-f.Prior.Mean)/f.Prior.SD, (th-f.Prior.Mean)/f.Prior.SD
	}
	both := uncertainty.Matrix{N: 2 * n, Data: make([]float64, 4*n*n)}
	measured := uncertainty.Matrix{N: n, Data: make([]float64, n*n)}
	set := func(i, k int, v float64) { both.Data[i*2*n+k] = v }
	for i, f := range figures {
		for k, g := range figures {
			between, measuring := between.At(i, k), measuring.At(i, k)
			v := (between*f.Prior.SD*g.Prior.SD + measuring*f.Standard*g.Standard) / (scale[i] * scale[k])
			if i == k {
				v = 1
			}
			measured.Data[i*n+k] = v
			set(i, k, v)
			set(n+i, n+k, between)
			set(i, n+k, between*f.Prior.SD/scale[i])
			set(n+k, i, between*f.Prior.SD/scale[i])
		}
	}
	accepted, err := uncertainty.Rectangle(low[:n], high[:n], measured, 0, s)
	if err != nil {
		return Risks{}, fmt.Errorf("%w: %w", ErrJoint, err)
	}
	inside, err := uncertainty.Rectangle(low[n:], high[n:], between, 0, s)
	if err != nil {
		return Risks{}, fmt.Errorf("%w: %w", ErrJoint, err)
	}
	right, err := uncertainty.Rectangle(low, high, both, 0, s)
	if err != nil {
		return Risks{}, fmt.Errorf("%w: %w", ErrJoint, err)
	}
	return Risks{
		Consumer: math.Max(0, right.Outside-accepted.Outside), Producer: math.Max(0, right.Outside-inside.Outside),
		Outside: inside.Outside, Accepted: accepted.Inside, Error: accepted.Error + inside.Error + right.Error,
	}, nil
}

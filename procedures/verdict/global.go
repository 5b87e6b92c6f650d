package verdict

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"

	"kymobench/procedures/uncertainty"
)

// ErrPrior: a prior, a limit or an uncertainty that gives no global risk.
var ErrPrior = errors.New("no global risk")

// Prior is what is taken as known of the true values of UUTs like this one,
// before it is measured. A global risk is worth as much as its prior.
type Prior interface {
	// Density at x, per unit of x.
	Density(x float64) float64
	// Below is the probability of a true value below x.
	Below(x float64) float64
	// Span holds all but some 1e-14 of the true values.
	Span() (low, high float64)
	check() error
}

// NormalPrior has its mean and standard deviation above 0 in the limit's unit.
type NormalPrior struct{ Mean, SD float64 }

// Density is the normal density.
func (p NormalPrior) Density(x float64) float64 {
	z := (x - p.Mean) / p.SD
	return math.Exp(-z*z/2) / (p.SD * math.Sqrt(2*math.Pi))
}

// Below is Phi((x - Mean)/SD).
func (p NormalPrior) Below(x float64) float64 {
	return uncertainty.StudentBelow((x-p.Mean)/p.SD, 0)
}

// Span is 8 standard deviations to either side.
func (p NormalPrior) Span() (low, high float64) { return p.Mean - 8*p.SD, p.Mean + 8*p.SD }

func (p NormalPrior) check() error {
	if !finite(p.Mean) || !(p.SD > 0) || !finite(p.SD) {
		return fmt.Errorf("%w: a normal prior with mean %v and standard deviation %v", ErrPrior, p.Mean, p.SD)
	}
	return nil
}

// GammaPrior is of what cannot be negative: density proportional to
// x^(Shape-1) exp(-Rate x), mean Shape/Rate, standard deviation
// sqrt(Shape)/Rate; Shape 1 or more, Rate above 0, per unit of the limit.
type GammaPrior struct{ Shape, Rate float64 }

// Density is 0 below 0.
func (p GammaPrior) Density(x float64) float64 {
	if x < 0 {
		return 0
	}
	return distuv.Gamma{Alpha: p.Shape, Beta: p.Rate}.Prob(x)
}

// Below is the incomplete gamma function P(Shape, Rate x).
func (p GammaPrior) Below(x float64) float64 {
	if x <= 0 {
		return 0
	}
	return mathext.GammaIncReg(p.Shape, p.Rate*x)
}

// Span goes from 0 to where 1e-14 is left.
func (p GammaPrior) Span() (low, high float64) {
	return 0, mathext.GammaIncRegCompInv(p.Shape, 1e-14) / p.Rate
}

func (p GammaPrior) check() error {
	if !(p.Shape >= 1) || !finite(p.Shape) || !(p.Rate > 0) || !finite(p.Rate) {
		return fmt.Errorf("%w: a gamma prior with shape %v and rate %v", ErrPrior, p.Shape, p.Rate)
	}
	return nil
}

// Risks are long-run shares of all UUTs of the prior. Consumer's: accepted
// though outside the tolerance. Producer's: rejected though inside.
type Risks struct {
	Consumer, Producer float64
	Outside            float64 // true values outside the tolerance
	Accepted           float64 // UUTs accepted, rightly or wrongly
	Error              float64 // of Consumer and Producer, absolute
}

// OfAccepted is the share of the accepted UUTs that are outside.
func (r Risks) OfAccepted() float64 { return r.Consumer / r.Accepted }

// GlobalRisk is that of accepting what is measured inside accept as being
// inside tolerance, with standard uncertainty u above 0 and degrees of freedom
// dof (0 or +Inf: infinite), the same for all true values; for an acceptance
// interval by guard bands see Acceptance.
//
//	Consumer = integral outside the tolerance of Density(x) P(accepted | x) dx
//	Producer = integral inside it of Density(x) P(rejected | x) dx
//	P(accepted | x) = F((AU - x)/u) - F((AL - x)/u), F normal or Student's t
//
// Integrated to 1e-12; Error says what was reached. ErrPrior for a prior, u or
// limits that are none. Source: JCGM 106:2012, 9.5, eqs (17) to (20), numbers
// from memory.
func GlobalRisk(p Prior, u, dof float64, tolerance, accept Limit) (Risks, error) {
	if err := p.check(); err != nil {
		return Risks{}, err
	}
	if !(u > 0) || !finite(u) || !(dof >= 0) {
		return Risks{}, fmt.Errorf("%w: a standard uncertainty of %v with %v degrees of freedom", ErrPrior, u, dof)
	}
	tl, th, err := sides(tolerance)
	if err != nil {
		return Risks{}, err
	}
	al, ah, err := sides(accept)
	if err != nil {
		return Risks{}, err
	}
	rejected := func(x float64) float64 {
		return uncertainty.StudentBelow((al-x)/u, dof) + uncertainty.StudentBelow((x-ah)/u, dof)
	}
	accepted := func(x float64) float64 {
		switch low, high := (al-x)/u, (ah-x)/u; { // with the digits of a small one
		case low > 0:
			return uncertainty.StudentBelow(-low, dof) - uncertainty.StudentBelow(-high, dof)
		case high < 0:
			return uncertainty.StudentBelow(high, dof) - uncertainty.StudentBelow(low, dof)
		}
		return 1 - rejected(x)
	}
	from, to := p.Span()
	integral := func(share func(float64) float64, a, b float64) (float64, float64) {
		a, b = math.Max(a, from), math.Min(b, to)
		if !(a < b) {
			return 0, 0
		}
		points := []float64{a, b}
		low, high := p.Span()
		mid := low + (high-low)/2
		for _, x := range []float64{al - 8*u, al, al + 8*u, ah - 8*u, ah, ah + 8*u, mid, mid - (high-low)/16, mid + (high-low)/16} {
			if x > a && x < b {
				points = append(points, x)
			}
		}
		return uncertainty.Integrate(func(x float64) float64 { return p.Density(x) * share(x) }, 2e-13, points...)
	}
	var r Risks
	low, e1 := integral(accepted, math.Inf(-1), tl)
	high, e2 := integral(accepted, th, math.Inf(1))
	inside, e3 := integral(rejected, tl, th)
	r.Consumer, r.Producer, r.Error = low+high, inside, math.Max(e1+e2, e3)
	r.Outside = p.Below(tl) + 1 - p.Below(th)
	r.Accepted = 1 - r.Outside - r.Producer + r.Consumer
	return r, nil
}

// sides are the two sides of a limit, infinite where there is none.
func sides(l Limit) (low, high float64, err error) {
	low, high = math.Inf(-1), math.Inf(1)
	if l.Low != nil {
		low = *l.Low
	}
	if l.High != nil {
		high = *l.High
	}
	if l.Low == nil && l.High == nil || l.Low != nil && !finite(low) || l.High != nil && !finite(high) || low > high {
		return 0, 0, fmt.Errorf("%w: a limit from %v to %v", ErrPrior, low, high)
	}
	return low, high, nil
}

// Acceptance is the limit inside which a rule accepts without condition, w from
// each side: A = T - w (JCGM 106:2012, 8.3). ErrPrior where nothing is left.
func Acceptance(l Limit, w float64) (Limit, error) {
	low, high, err := sides(l)
	if err != nil || !(w >= 0) || low+w > high-w {
		return Limit{}, errors.Join(err, fmt.Errorf("%w: a guard band of %v leaves nothing of a limit from %v to %v", ErrPrior, w, low, high))
	}
	low, high = low+w, high-w
	out := Limit{Resolution: l.Resolution}
	if l.Low != nil {
		out.Low = &low
	}
	if l.High != nil {
		out.High = &high
	}
	return out, nil
}

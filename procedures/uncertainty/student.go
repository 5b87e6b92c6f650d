package uncertainty

import (
	"math"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// StudentBelow is the probability that Student's t with real degrees of freedom
// above 0 lies below x; 0 or less, not a number and +Inf stand for infinite
// ones, the normal distribution. Its relative error is some 1e-12 in either
// tail down to probabilities of 1e-12; not a number where x is none.
//
//	up to 200 degrees of freedom   I(nu/(nu+x^2); nu/2, 1/2)/2, the incomplete beta function
//	above                          the normal distribution at the deviate that has the same tail
//
// The library's own distribution loses digits from some 1e4 degrees of freedom
// on and at 1e15 is wrong altogether; such degrees of freedom are met, where one
// small noise stands beside large contributions. Source: G. W. Hill, Algorithm
// 395, Comm. ACM 13 (1970) 617, from memory, for the deviate.
func StudentBelow(x, dof float64) float64 {
	if x > 0 {
		return 1 - upper(x, dof)
	}
	return upper(-x, dof)
}

// upper is the probability above x >= 0.
func upper(x, dof float64) float64 {
	if !(dof > 0) || math.IsInf(dof, 1) || math.IsInf(x, 1) || math.IsNaN(x) {
		return math.Erfc(x/math.Sqrt2) / 2
	}
	if dof <= 200 {
		if x*x < 1e-3*dof { // the complement keeps its digits near the middle
			return 0.5 - mathext.RegIncBeta(0.5, dof/2, x*x/(dof+x*x))/2
		}
		return mathext.RegIncBeta(dof/2, 0.5, 1/(1+x/dof*x)) / 2
	}
	a := dof - 0.5
	b := 48 * a * a
	s := a * math.Log1p(x/dof*x)
	z := math.Sqrt(s) * (1 + (((((-0.4*s-3.3)*s-24)*s-85.5)/(0.8*s*s+100+b) + s + 3) / b))
	return math.Erfc(z/math.Sqrt2) / 2
}

// StudentQuantile is the x below which Student's t with real degrees of freedom
// above 0 lies with probability p in 0..1 (0 or less, not a number and +Inf:
// the normal distribution); -Inf at 0, +Inf at 1, not a number for any other p.
// Newton's steps in the logarithm of the tail bring it to the last digits of
// StudentBelow. From memory.
func StudentQuantile(p, dof float64) float64 {
	switch {
	case !(p >= 0) || p > 1:
		return math.NaN()
	case p == 0 || p == 1:
		return math.Inf(int(2*p - 1))
	case p == 0.5:
		return 0
	case p > 0.5:
		return -StudentQuantile(1-p, dof)
	}
	z := -distuv.UnitNormal.Quantile(p)
	if !(dof > 0) || math.IsInf(dof, 1) {
		return -z
	}
	x := z + (z*z*z+z)/(4*dof)
	if dof < 3 { // the tail is a power of x: start from its leading term
		x = math.Max(x, math.Sqrt(dof)*math.Exp((logDensityFactor(dof)-math.Log(p*math.Sqrt(dof)))/dof))
	}
	for range 60 {
		tail := upper(x, dof)
		density := math.Exp(logDensityFactor(dof) - (dof+1)/2*math.Log1p(x/dof*x))
		step := tail / density * math.Log(tail/p)
		x = math.Max(x+step, x/4)
		if math.Abs(step) <= 1e-15*x {
			break
		}
	}
	return -x
}

// logDensityFactor is the logarithm of the density of t at 0:
// Gamma((nu+1)/2)/(Gamma(nu/2) sqrt(pi nu)). From 1e4 on it is a series in
// 1/nu, for the difference of the logarithms loses digits.
func logDensityFactor(dof float64) float64 {
	if dof > 1e4 {
		return -math.Log(2*math.Pi)/2 - 1/(4*dof)
	}
	a, _ := math.Lgamma((dof + 1) / 2)
	b, _ := math.Lgamma(dof / 2)
	return a - b - math.Log(math.Pi*dof)/2
}

// manyDegrees is from where on the normal distribution stands for Student's t
// where it is drawn: the factor is then 2.4e-8 too small, while the library's
// own t loses its digits and at 1e15 is wrong altogether (3.23 for 1.96).
// Degrees of freedom like that are met: one small noise beside large
// contributions.
const manyDegrees = 1e8

// coverage is the 97.5 % quantile of Student's t with real degrees of freedom
// above 0; infinite where they are 0 or no number. From 1 on it is a Chebyshev
// series in 1/dof, true to 1e-14 and a hundred times faster than turning the
// distribution round, which is most of the work of a budget otherwise. Source
// of the coefficients: quantiles by mpmath 1.3.0 with 30 digits at 64
// Chebyshev nodes of 1/dof in 0..1.
func coverage(dof float64) float64 {
	if dof > 0 && dof < 1 {
		return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}.Quantile(0.975)
	}
	if !(dof > 0) {
		return math.Inf(1)
	}
	c := [...]float64{
		5.7662257301327605805, 5.0467136773499980066, 1.5144033349810396533, 0.31932614054099298859,
		0.051636497460040053522, 0.0070010897796927469209, 8.1242257372004987853e-4, 7.8802703291181565826e-5,
		6.3114407690584929975e-6, 6.8276957907811802616e-7, 5.7757993808234383954e-8, -1.6418325764627012692e-8,
		6.0803970165210201662e-9, -1.0362335938560290485e-9, -6.238676934706136406e-13, 1.0124712400853755619e-10,
		-6.0568914995381576601e-11, 2.5600691834125748862e-11, -8.3607057115286140317e-12, 1.8509701028974199614e-12,
		-8.1678469063831486348e-15, -2.7173606269164989041e-13, 1.879975640980415412e-13, -8.8760478135221049398e-14,
		3.2815754033160794277e-14, -9.032835903531536579e-15,
	}
	x := 2/dof - 1 // 0 degrees of freedom in the reciprocal stand at -1
	var b, before float64
	for k := len(c) - 1; k > 0; k-- {
		b, before = 2*x*b-before+c[k], b
	}
	return x*b - before + c[0]
}

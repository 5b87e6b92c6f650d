package step

import "math"

// Stopping is how a run that counts its own steps stops: after at least Least
// steps it looks after each whether its limits are decided, and ends with Most.
// The zero value is a fixed number of steps.
//
// Who looks again and again sees chance pass a limit sooner or later: with
// looks after 3, 4 ... 20 steps the 95 % interval of Student's t lies beyond a
// true value on one chosen side in 11 % of runs instead of 2.5 %. The interval
// is therefore as wide at every look as keeps that at 2.5 % over all of them.
type Stopping struct{ Least, Most int }

// looks tells whether there is more than one.
func (s Stopping) looks() bool { return s.Least > 0 && s.Most > s.Least }

// stoppingBound is the least z that, over all looks from least to most steps,
// is passed by the transformed t of a mean at its limit in 2.5 % of runs.
// Source: simulation of 2 million runs, testdata/stopping (numpy 1.24.2): the
// third digit is good to 2. Constant bounds of this kind are Pocock's
// (Biometrika 1977;64:191-9, from memory).
type stoppingBound struct {
	least, most int
	z           float64
}

func stoppingBounds() []stoppingBound {
	return []stoppingBound{
		{3, 4, 2.138}, {3, 5, 2.252}, {3, 6, 2.327}, {3, 8, 2.425}, {3, 10, 2.491}, {3, 12, 2.537}, {3, 15, 2.588}, {3, 20, 2.647}, {3, 25, 2.686}, {3, 30, 2.717},
		{4, 5, 2.126}, {4, 6, 2.231}, {4, 8, 2.355}, {4, 10, 2.433}, {4, 12, 2.488}, {4, 15, 2.546}, {4, 20, 2.612}, {4, 25, 2.657}, {4, 30, 2.689},
		{5, 6, 2.111}, {5, 8, 2.275}, {5, 10, 2.370}, {5, 12, 2.434}, {5, 15, 2.501}, {5, 20, 2.574}, {5, 25, 2.624}, {5, 30, 2.661},
		{6, 8, 2.189}, {6, 10, 2.304}, {6, 12, 2.381}, {6, 15, 2.457}, {6, 20, 2.539}, {6, 25, 2.593}, {6, 30, 2.632},
		{8, 10, 2.163}, {8, 12, 2.271}, {8, 15, 2.371}, {8, 20, 2.472}, {8, 25, 2.537}, {8, 30, 2.581},
		{10, 12, 2.146}, {10, 15, 2.283}, {10, 20, 2.407}, {10, 25, 2.483}, {10, 30, 2.535},
	}
}

// Limits of what a run may be left to count: below three steps a scatter says
// next to nothing, beyond 30 the bounds are not known.
const (
	LeastSteps = 3
	MostSteps  = 30
)

// bound is the one that covers all looks: of the least that is not larger and
// the most that is not smaller, the lowest z.
func (s Stopping) bound() float64 {
	z := math.Inf(1)
	for _, b := range stoppingBounds() {
		if b.least <= s.Least && b.most >= s.Most {
			z = math.Min(z, b.z)
		}
	}
	return z
}

// Factor is how many times wider than Student's 95 % interval the interval
// must be for so many degrees of freedom, the steps less one. It is 1 for a
// fixed number of steps, and infinite beyond MostSteps or below LeastSteps.
//
// t and z are carried into each other by
// z = (8 v + 1)/(8 v + 3) sqrt(v ln(1 + t^2/v)), v the degrees of freedom
// (Wallace 1959, from memory); the bounds were simulated with it.
func (s Stopping) Factor(degreesOfFreedom float64) float64 {
	if !s.looks() {
		return 1
	}
	v := math.Min(degreesOfFreedom, 1e6)
	z := s.bound() * (8*v + 3) / (8*v + 1)
	return math.Max(1, math.Sqrt(v*math.Expm1(z*z/v))/studentT(v))
}

// More is the least number of further steps after which a limit would be
// decided, were the mean and the scatter of the steps to stay what they are:
// guard times the half-width of the interval lies between the mean and the
// nearest side. Nothing is false when no number up to Most would do (or up to
// MostSteps when the number is fixed).
//
// mean and scatter (standard deviation from step to step) of n steps, the
// half-width common of what does not shrink with their number, and the sides
// (minus or plus infinity when there is none) are in one unit. Source: by
// hand; the risk of deciding wrongly is that of the interval.
func (s Stopping) More(n int, mean, scatter, common, low, high, guard float64) (more int, can bool) {
	room := math.Min(math.Abs(mean-low), math.Abs(high-mean))
	most := MostSteps
	if s.looks() {
		most = s.Most
	}
	for k := max(n, 2); k <= most; k++ {
		v := float64(k - 1)
		if k >= s.Least && guard*math.Hypot(s.Factor(v)*studentT(v)*scatter/math.Sqrt(float64(k)), common) <= room {
			return k - n, true
		}
	}
	return 0, false
}

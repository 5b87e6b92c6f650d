package uncertainty

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/mathext"
	"gonum.org/v1/gonum/stat/distuv"
)

// ErrRectangle: a region or a matrix that is none.
var ErrRectangle = errors.New("no probability of this region")

// RectangleSettings of Rectangle; the zero value works.
type RectangleSettings struct {
	Seed       uint64
	Tolerance  float64 // three standard errors as a share of the smaller of inside and outside; 0: 0.02. 1e-7 is always enough
	MostPoints int     // 0: 200,000
}

// Region is the probability inside a region and outside it, the latter with the
// digits of a small one, and its error: three standard errors where it was
// sampled, the estimate of the integration else.
type Region struct {
	Inside, Outside, Error float64
	Points                 int // 0: not sampled
}

// shifts is how many times the lattice is laid, each shifted anew, for the
// standard error.
const shifts = 12

// Rectangle is the probability that every one of several quantities lies
// between its bounds: standard normal ones with the correlations r, or with dof
// finite and above 0 Student's t that share one standard deviation estimated
// with dof degrees of freedom (multivariate t). Bounds may be infinite; low and
// high have r.N elements. One and two quantities are integrated to 1e-12, more
// sampled, over a lattice of points shifted at random, until the tolerance or
// the most points are reached; Error says what was. The same seed gives the
// same digits on one build. r may be singular. ErrRectangle for bounds in the
// wrong order, a matrix that is no correlation matrix, and lengths that differ.
//
// Source: A. Genz, J. Comp. Graph. Stat. 1 (1992) 141 (the integrand); A. Genz
// and F. Bretz, J. Comp. Graph. Stat. 11 (2002) 950 (order of the variables,
// lattice, t); from memory.
func Rectangle(low, high []float64, r Matrix, dof float64, s RectangleSettings) (Region, error) {
	n := r.N
	if len(low) != n || len(high) != n || len(r.Data) != n*n {
		return Region{}, fmt.Errorf("%w: %d and %d bounds for a matrix of %d rows", ErrRectangle, len(low), len(high), n)
	}
	for i := range n {
		if !(low[i] <= high[i]) {
			return Region{}, fmt.Errorf("%w: bounds %v and %v", ErrRectangle, low[i], high[i])
		}
		for k := range n {
			if v := r.At(i, k); !(v >= -1 && v <= 1) || v != r.At(k, i) || i == k && v != 1 {
				return Region{}, fmt.Errorf("%w: a correlation of %v", ErrRectangle, v)
			}
		}
	}
	if _, ok := root(r.Data, n); !ok {
		return Region{}, fmt.Errorf("%w: the correlations contradict each other", ErrRectangle)
	}
	if few := dof > 0 && dof < manyDegrees; !few {
		if low, high, r = near(low, high, r); r.N < n {
			return Rectangle(low, high, r, dof, s)
		}
	}
	switch n {
	case 0:
		return Region{Inside: 1}, nil
	case 1:
		out := StudentBelow(low[0], dof) + StudentBelow(-high[0], dof)
		return Region{Inside: 1 - out, Outside: out}, nil
	case 2:
		return two(low, high, r.At(0, 1), dof), nil
	}
	return sampleRegion(newLadder(low, high, r), dof, s)
}

// near leaves out what lies outside its bounds with less than 1e-15.
func near(low, high []float64, r Matrix) ([]float64, []float64, Matrix) {
	const far = 8.1
	var keep []int
	for i := range low {
		if low[i] > -far || high[i] < far {
			keep = append(keep, i)
		}
	}
	if len(keep) == r.N {
		return low, high, r
	}
	n := len(keep)
	a, b, m := make([]float64, n), make([]float64, n), Matrix{n, make([]float64, n*n)}
	for i, from := range keep {
		a[i], b[i] = low[from], high[from]
		for k, other := range keep {
			m.Data[i*n+k] = r.At(from, other)
		}
	}
	return a, b, m
}

// two integrates over the first the probability of the second: given x it is
// normal about rho x with variance 1 - rho^2, or t with one degree of freedom
// more and (nu + x^2)/(nu + 1) of that. The outside is that of the first and,
// of its inside, that of the second.
func two(low, high []float64, rho, dof float64) Region {
	few := dof > 0 && dof < manyDegrees
	width, more := math.Sqrt((1-rho)*(1+rho)), 0.0
	if few {
		more = dof + 1
	}
	density := func(x float64) float64 { return math.Exp(-x*x/2) / math.Sqrt(2*math.Pi) }
	if few {
		factor := logDensityFactor(dof)
		density = func(x float64) float64 { return math.Exp(factor - (dof+1)/2*math.Log1p(x/dof*x)) }
	}
	f := func(x float64) float64 {
		w := width
		if few {
			w *= math.Sqrt((dof + x*x) / (dof + 1))
		}
		var out float64
		switch a, b := low[1]-rho*x, high[1]-rho*x; {
		case w > 0:
			out = StudentBelow(a/w, more) + StudentBelow(-b/w, more)
		case a > 0 || b < 0:
			out = 1
		}
		return density(x) * out
	}
	out := StudentBelow(low[0], dof) + StudentBelow(-high[0], dof)
	far := -StudentQuantile(1e-14, dof)
	a, b := math.Max(low[0], -far), math.Min(high[0], far)
	points := []float64{a, b}
	for _, x := range []float64{-3, 0, 3, low[1] / rho, high[1] / rho} {
		if x > a && x < b { // where the second is cut, and for t the middle of a wide range
			points = append(points, x)
		}
	}
	var v, e float64
	if a < b {
		v, e = Integrate(f, 1e-13, points...)
	}
	return Region{Inside: math.Max(0, 1-out-v), Outside: math.Min(1, out+v), Error: e}
}

// ladder has the quantities in an order in which each, given those before it,
// is normal: x_i = Sum l_ik z_k up to k = i. Those that follow from others
// alone have no z of their own and bound the last z in them.
type ladder struct {
	steps []step
}

type step struct{ bounds []bound }

// bound holds one quantity between low and high; l has the coefficients of all
// z up to its step's own, the last of them above 0 or below.
type bound struct {
	low, high float64
	l         []float64
}

// newLadder takes at each step the quantity that is most likely outside, given
// what the others are expected to be: then the integrand varies least.
func newLadder(low, high []float64, r Matrix) *ladder {
	n := r.N
	left := make([]int, n)
	l := make([][]float64, n) // coefficients found so far
	for i := range n {
		left[i] = i
	}
	var out ladder
	var expected []float64 // of each z within its bounds
	for len(left) > 0 {
		best, bestInside, bestWidth := -1, 2.0, 0.0 // by their conditional probability
		for at, i := range left {
			v, mean := 1.0, 0.0
			for k, c := range l[i] {
				v -= c * c
				mean += c * expected[k]
			}
			if v < 1e-10 {
				continue
			}
			w := math.Sqrt(v)
			if p := between((low[i]-mean)/w, (high[i]-mean)/w); p < bestInside {
				best, bestInside, bestWidth = at, p, w
			}
		}
		if best < 0 { // all that are left follow from others
			for _, i := range left {
				out.attach(bound{low[i], high[i], l[i]})
			}
			break
		}
		i := left[best]
		left = append(left[:best], left[best+1:]...)
		mean := 0.0
		for k, c := range l[i] {
			mean += c * expected[k]
		}
		for _, j := range left {
			c := r.At(i, j)
			for k := range l[i] {
				c -= l[i][k] * l[j][k]
			}
			l[j] = append(l[j], c/bestWidth)
		}
		l[i] = append(l[i], bestWidth)
		out.steps = append(out.steps, step{[]bound{{low[i], high[i], l[i]}}})
		a, b := (low[i]-mean)/bestWidth, (high[i]-mean)/bestWidth
		e := 0.0
		if bestInside > 1e-300 {
			e = (math.Exp(-a*a/2) - math.Exp(-b*b/2)) / math.Sqrt(2*math.Pi) / bestInside
		} else if a > 0 {
			e = a
		} else {
			e = b
		}
		expected = append(expected, e)
	}
	return &out
}

// attach puts a bound without a z of its own to the last z that counts in it.
func (out *ladder) attach(b bound) {
	last := len(b.l) - 1
	for last > 0 && math.Abs(b.l[last]) < 1e-7 {
		last--
	}
	b.l = b.l[:last+1]
	out.steps[last].bounds = append(out.steps[last].bounds, b)
}

// between is the normal probability from a to b.
func between(a, b float64) float64 {
	if a > 0 {
		a, b = -b, -a
	}
	return StudentBelow(b, 0) - StudentBelow(a, 0)
}

// outside is the probability outside, for one point w of the unit cube, with
// all bounds multiplied by scale; z is room for as many numbers as w.
func (d *ladder) outside(w, z []float64, scale float64) float64 {
	out := 0.0 // 1 less the product of what is inside, without loss of small ones
	for i := range d.steps {
		a, b := math.Inf(-1), math.Inf(1)
		for _, x := range d.steps[i].bounds {
			var sum float64
			for k, c := range x.l[:i] {
				sum += c * z[k]
			}
			lo, hi := (x.low*scale-sum)/x.l[i], (x.high*scale-sum)/x.l[i]
			if lo > hi {
				lo, hi = hi, lo
			}
			a, b = math.Max(a, lo), math.Min(b, hi)
		}
		if !(a < b) {
			return 1
		}
		below, above := StudentBelow(a, 0), StudentBelow(-b, 0)
		out += (1 - out) * (below + above)
		if i == len(d.steps)-1 || out >= 1 {
			break
		}
		inside := 1 - below - above
		if a > 0 { // in the upper tail, counted from above
			inside = StudentBelow(-a, 0) - above
			z[i] = -distuv.UnitNormal.Quantile(math.Max(above+(1-w[i])*inside, 1e-300))
		} else {
			z[i] = distuv.UnitNormal.Quantile(math.Min(math.Max(below+w[i]*inside, 1e-300), 1-1e-16))
		}
	}
	return math.Min(out, 1)
}

// sampleRegion doubles the points of a lattice of square roots of primes.
func sampleRegion(d *ladder, dof float64, s RectangleSettings) (Region, error) {
	tolerance, most := s.Tolerance, s.MostPoints
	if !(tolerance > 0) {
		tolerance = 0.02
	}
	if most <= 0 {
		most = 200_000
	}
	few := dof > 0 && dof < manyDegrees
	n := len(d.steps) // one more than the z that are drawn: for the t
	random := rand.New(rand.NewPCG(s.Seed, 1))
	steps := primeRoots(n)
	shift := make([]float64, shifts*n)
	for i := range shift {
		shift[i] = random.Float64()
	}
	w, z := make([]float64, n), make([]float64, n)
	var sums [shifts]float64
	for done, next := 0, 250; ; done, next = next, 2*next {
		for q := range shifts {
			for k := done; k < next; k++ {
				for i := range w {
					_, x := math.Modf(float64(k+1)*steps[i] + shift[q*n+i])
					w[i] = math.Abs(2*x - 1) // periodic, as lattices like it
				}
				scale := 1.0
				if few {
					scale = math.Sqrt(2 * mathext.GammaIncRegInv(dof/2, math.Min(math.Max(w[n-1], 1e-15), 1-1e-15)) / dof)
				}
				sums[q] += d.outside(w, z, scale)
			}
		}
		var mean, squares float64
		for q := range sums {
			x := sums[q] / float64(next)
			delta := x - mean
			mean += delta / float64(q+1)
			squares += delta * (x - mean)
		}
		err := 3 * math.Sqrt(squares/(shifts*(shifts-1)))
		enough := err <= math.Max(1e-7, tolerance*math.Min(mean, 1-mean))
		if points := shifts * next; enough && next > 250 || 2*points > most {
			return Region{Inside: 1 - mean, Outside: mean, Error: err, Points: points}, nil
		}
	}
}

// primeRoots are the parts after the point of the square roots of the first n
// primes.
func primeRoots(n int) []float64 {
	out := make([]float64, 0, n)
	for p := 2; len(out) < n; p++ {
		prime := true
		for d := 2; d*d <= p; d++ {
			if p%d == 0 {
				prime = false
				break
			}
		}
		if prime {
			_, f := math.Modf(math.Sqrt(float64(p)))
			out = append(out, f)
		}
	}
	return out
}

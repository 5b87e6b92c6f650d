package uncertainty

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// ErrSample: a budget that cannot be sampled.
var ErrSample = errors.New("budget cannot be sampled")

// firstDraws are made before the number needed is estimated.
const firstDraws = 20_000

// drawn is a Monte Carlo's values, as deviations from the estimate.
type drawn struct {
	values []float64
	rest   []float64 // the same without the normal contributions
	normal float64   // standard deviation of these
}

// sampler draws a budget.
type sampler struct {
	drawn
	random *rand.Rand

	// Inputs that add up: what is normal is drawn as one.
	flat, peaked, sines []float64 // half-widths
	students            []part

	model  func([]float64) float64
	inputs []Input
	groups []group
	alone  []int // inputs in no group
	centre float64
}

func newSampler(b Budget, parts []part, s Settings) (*sampler, error) {
	out := &sampler{random: rand.New(rand.NewPCG(s.Seed, 0)), model: b.Model, inputs: b.Inputs}
	if b.Model == nil {
		for _, p := range parts {
			out.take(p)
		}
		return out, nil
	}
	var err error
	if out.groups, _, err = b.groups(); err != nil {
		return nil, err
	}
	grouped := map[int]bool{}
	x := make([]float64, len(b.Inputs))
	for _, g := range out.groups {
		for _, i := range g.at {
			grouped[i] = true
		}
	}
	for i, in := range b.Inputs {
		x[i] = in.Estimate
		if !grouped[i] {
			out.alone = append(out.alone, i)
		}
	}
	if out.centre = b.Model(x); math.IsNaN(out.centre) || math.IsInf(out.centre, 0) {
		return nil, fmt.Errorf("%w: the model gives no number at the estimates", ErrBudget)
	}
	return out, nil
}

func (s *sampler) take(p part) {
	switch {
	case p.size == 0:
	case p.kind == Rectangular:
		s.flat = append(s.flat, p.size*math.Sqrt(3))
	case p.kind == Triangular:
		s.peaked = append(s.peaked, p.size*math.Sqrt(6))
	case p.kind == UShaped:
		s.sines = append(s.sines, p.size*math.Sqrt2)
	case p.dof > 0 && p.dof < manyDegrees:
		s.students = append(s.students, p)
	default:
		s.normal = math.Hypot(s.normal, p.size)
	}
}

// run draws until two standard errors of the half-width are within the
// tolerance, and returns the interval and that standard error.
func (s *sampler) run(set Settings) (low, high, stderr float64, err error) {
	tolerance, most := set.tolerance(), set.MostDraws
	if most <= 0 {
		most = 1_000_000
	}
	for n := max(len(s.values), min(firstDraws, most)); ; {
		if err := s.draw(n); err != nil {
			return 0, 0, 0, err
		}
		low, high, stderr = s.interval(set.Shortest)
		needed := 2 * stderr / (tolerance * (high - low) / 2)
		if !(needed > 1) || n == most {
			return low, high, stderr, nil
		}
		// The error estimated is itself uncertain: a tenth more than it says,
		// and at least a half more draws.
		n = int(math.Min(float64(most), math.Max(1.5, 1.1*needed*needed)*float64(n)))
	}
}

// draw goes on until there are n values.
func (s *sampler) draw(n int) error {
	s.values = slices.Grow(s.values, n-len(s.values))
	if s.model != nil {
		return s.drawModel(n)
	}
	if s.normal > 0 {
		s.rest = slices.Grow(s.rest, n-len(s.rest))
	}
	r := s.random
	for len(s.values) < n {
		var x float64
		for _, a := range s.flat {
			x += a * (2*r.Float64() - 1)
		}
		for _, a := range s.peaked {
			x += a * (r.Float64() + r.Float64() - 1)
		}
		for _, a := range s.sines {
			x += a * math.Cos(math.Pi*r.Float64())
		}
		for i := range s.students {
			x += s.students[i].size * student(r, s.students[i].dof)
		}
		if s.normal > 0 {
			s.rest = append(s.rest, x)
			x += s.normal * r.NormFloat64()
		}
		s.values = append(s.values, x)
	}
	return nil
}

// drawModel draws the inputs of a model; those read together share what makes
// their t, so that any sum of them is a t of the same degrees of freedom.
func (s *sampler) drawModel(n int) error {
	r := s.random
	x := make([]float64, len(s.inputs))
	z := make([]float64, len(s.inputs))
	for len(s.values) < n {
		for _, i := range s.alone {
			in := &s.inputs[i]
			x[i] = in.Estimate + in.Standard*one(r, in.Distribution, in.DegreesOfFreedom)
		}
		for k := range s.groups {
			g := &s.groups[k]
			m := len(g.inputs)
			shared := 1.0
			if dof := g.inputs[0].DegreesOfFreedom; dof > 0 && dof < manyDegrees {
				shared = math.Sqrt(dof / distuv.Gamma{Alpha: dof / 2, Beta: 0.5, Src: r}.Rand())
			}
			for i := range m {
				z[i] = r.NormFloat64()
				var d float64
				for j := range i + 1 {
					d += g.root[i*m+j] * z[j]
				}
				in := &g.inputs[i]
				x[g.at[i]] = in.Estimate + in.Standard*shared*d
			}
		}
		y := s.model(x)
		if math.IsNaN(y) || math.IsInf(y, 0) {
			return fmt.Errorf("%w: the model gives no number at %v", ErrBudget, x)
		}
		s.values = append(s.values, y-s.centre)
	}
	return nil
}

// one draws a distribution of standard uncertainty 1.
func one(r *rand.Rand, distribution string, dof float64) float64 {
	switch distribution {
	case Rectangular:
		return math.Sqrt(3) * (2*r.Float64() - 1)
	case Triangular:
		return math.Sqrt(6) * (r.Float64() + r.Float64() - 1)
	case UShaped:
		return math.Sqrt2 * math.Cos(math.Pi*r.Float64())
	}
	if dof > 0 && dof < manyDegrees {
		return student(r, dof)
	}
	return r.NormFloat64()
}

// student draws Student's t from a point in the unit disc. Source: R. W.
// Bailey, Math. Comp. 62 (1994) 779, from memory.
func student(r *rand.Rand, dof float64) float64 {
	for {
		u, v := 2*r.Float64()-1, 2*r.Float64()-1
		if w := u*u + v*v; w > 0 && w <= 1 {
			return u * math.Sqrt(dof*math.Expm1(-2/dof*math.Log(w))/w)
		}
	}
}

// interval is that of 95 % and the standard error of its half-width: half the
// distance of the order statistics one standard deviation of their rank away.
// A sum is symmetrical, and both its tails are taken for one.
func (s *sampler) interval(shortest bool) (low, high, stderr float64) {
	n := float64(len(s.values))
	if s.model == nil {
		sizes := make([]float64, len(s.values))
		for i, x := range s.values {
			sizes[i] = math.Abs(x)
		}
		spread := math.Sqrt(n * 0.95 * 0.05)
		// The lowest rank first: what follows it is then all above it.
		a := ranked(sizes, 0, 0.95*n-spread)
		b := ranked(sizes, rank(0.95*n-spread, len(sizes)), 0.95*n)
		c := ranked(sizes, rank(0.95*n, len(sizes)), 0.95*n+spread)
		return -b, b, (c - a) / 2
	}
	slices.Sort(s.values)
	spread := math.Sqrt(n * 0.975 * 0.025)
	at := func(x float64) float64 { return s.values[rank(x, len(s.values))] }
	tails := func(x float64) float64 { return (at(x+spread) - at(x-spread)) / 4 }
	// The tails are nearly independent, and each is half of the half-width.
	low, high, stderr = at(0.025*n), at(0.975*n), math.Hypot(tails(0.025*n), tails(0.975*n))
	if shortest {
		inside := int(math.Round(0.95 * n))
		for i := 0; i+inside < len(s.values); i++ {
			if s.values[i+inside]-s.values[i] < high-low {
				low, high = s.values[i], s.values[i+inside]
			}
		}
	}
	return low, high, stderr
}

// rank is the place of the x-th of n in order.
func rank(x float64, n int) int { return min(max(int(math.Ceil(x)), 1), n) - 1 }

// ranked puts the x-th of all values in its place and returns it; those before
// from are known to be the smallest.
func ranked(values []float64, from int, x float64) float64 {
	k := rank(x, len(values))
	lo, hi := from, len(values)-1
	for lo < hi {
		// The middle of three, so that values in order are no worst case.
		mid := lo + (hi-lo)/2
		if values[mid] < values[lo] {
			values[mid], values[lo] = values[lo], values[mid]
		}
		if values[hi] < values[lo] {
			values[hi], values[lo] = values[lo], values[hi]
		}
		if values[hi] < values[mid] {
			values[hi], values[mid] = values[mid], values[hi]
		}
		pivot := values[mid]
		i, j := lo, hi
		for i <= j {
			for values[i] < pivot {
				i++
			}
			for values[j] > pivot {
				j--
			}
			if i <= j {
				values[i], values[j] = values[j], values[i]
				i, j = i+1, j-1
			}
		}
		switch {
		case k <= j:
			hi = j
		case k >= i:
			lo = i
		default:
			return values[k]
		}
	}
	return values[k]
}

// moments are the mean and the standard deviation of the draws, which has no
// sense where an input has none of its own.
func (s *sampler) moments() (mean float64, sd *float64) {
	var m, q float64
	for i, x := range s.values {
		d := x - m
		m += d / float64(i+1)
		q += d * (x - m)
	}
	for _, p := range s.students {
		if p.dof <= 2 {
			return m, nil
		}
	}
	if s.model == nil {
		m = 0 // by symmetry
	} else {
		for _, in := range s.inputs {
			if in.DegreesOfFreedom > 0 && in.DegreesOfFreedom <= 2 && (in.Distribution == Normal || in.Distribution == StudentT) {
				return m, nil
			}
		}
	}
	out := math.Sqrt(q / float64(len(s.values)-1))
	return m, &out
}

func (d *drawn) below(x float64) float64 { return d.share(x, 1) }
func (d *drawn) above(x float64) float64 { return d.share(x, -1) }

// share is the probability of values below x (side 1) or above it (side -1).
func (d *drawn) share(x, side float64) float64 {
	var sum float64
	if d.normal > 0 {
		scale := side / (d.normal * math.Sqrt2)
		for _, r := range d.rest {
			sum += math.Erfc((r-x)*scale) / 2
		}
		return sum / float64(len(d.rest))
	}
	for _, v := range d.values {
		if (x-v)*side > 0 {
			sum++
		}
	}
	return sum / float64(len(d.values))
}

// Sampled is the half-width of the 95 % interval by Monte Carlo, and the
// standard error that the number of draws leaves in it.
type Sampled struct {
	Expanded, Error float64
	Draws           int
}

// Sample is the Monte Carlo of Evaluate alone, for inputs that add up, with a
// number of draws that is given: 1,000 or more. ErrSample for fewer, and for
// what Evaluate calls ErrBudget.
func Sample(inputs []Input, draws int, seed uint64) (Sampled, error) {
	b := Budget{Inputs: inputs}
	if draws < 1000 {
		return Sampled{}, fmt.Errorf("%w: %d draws are too few", ErrSample, draws)
	}
	if err := b.check(); err != nil {
		return Sampled{}, fmt.Errorf("%w: %w", ErrSample, err)
	}
	s, err := newSampler(b, independent(nil, inputs), Settings{Seed: seed})
	if err != nil {
		return Sampled{}, err
	}
	if err := s.draw(draws); err != nil {
		return Sampled{}, err
	}
	_, high, stderr := s.interval(false)
	return Sampled{Expanded: high, Error: stderr, Draws: draws}, nil
}

// Dominated says whether one rectangular contribution has a larger variance
// than all others together. Then Combine's interval is too wide: by 2.2 % where
// the variances are equal and the others normal, by 19 % where the rectangle
// stands alone. Source: EA-4/02 S9 has the idea, from memory; the bound is our
// own.
func Dominated(inputs []Input) bool {
	var v, most float64
	for _, in := range inputs {
		c := in.Standard * in.Sensitivity
		v += c * c
		if in.Distribution == Rectangular {
			most = math.Max(most, c*c)
		}
	}
	return most > v-most
}

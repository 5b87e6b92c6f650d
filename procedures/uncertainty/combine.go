package uncertainty

import (
	"errors"
	"fmt"
	"math"
)

// ErrBudget: a budget that cannot be combined.
var ErrBudget = errors.New("budget cannot be combined")

// Budget is one figure's inputs. Without a Model the figure is near its
// estimate the sum of Sensitivity x deviation, as the GUM has it. With one it is
// Model of the values, in the order of the inputs, whose Estimates count then
// and whose Sensitivities do not.
type Budget struct {
	Inputs       []Input
	Correlations []Correlation
	Model        func(values []float64) float64
}

// Correlation of two inputs, named by their keys, -1..1. Prefer to state what
// two inputs have in common as an input of its own with a key (GUM F.1.2.4):
// then nothing need be said here. Correlated inputs are normal, or Student's t
// of the same degrees of freedom, which says that they were read together.
type Correlation struct {
	A, B string
	R    float64
}

// Combined is the result: Expanded is the half-width of the 95 % interval.
type Combined struct {
	Standard, DegreesOfFreedom, Coverage, Expanded float64
}

// part is a contribution independent of all others: one input, inputs of one
// key together, or correlated ones together.
type part struct {
	size, dof float64 // |c u|; 0 or infinite: infinite
	kind      string
}

// Combine adds independent inputs in quadrature, u_c^2 = Sum (c_i u_i)^2, takes
// the effective degrees of freedom u_c^4 / Sum ((c_i u_i)^4/nu_i) (Welch and
// Satterthwaite, GUM G.4.1; +Inf when no input has finite ones) and the factor
// of Student's t for 95 %. Inputs of one key count as one, with the sum of
// their coefficients. An empty budget gives zeros with infinite degrees of
// freedom. It checks nothing: what is no number gives what is none.
func Combine(inputs []Input) Combined {
	var room [24]part
	return total(independent(room[:0], inputs))
}

// independent puts inputs that have no correlations into parts.
func independent(parts []part, inputs []Input) []part {
	for i := range inputs {
		in := &inputs[i]
		c := in.Sensitivity
		if in.Key != "" {
			if first := firstOf(inputs, in.Key); first < i {
				continue
			}
			for k := i + 1; k < len(inputs); k++ {
				if inputs[k].Key == in.Key {
					c += inputs[k].Sensitivity
				}
			}
		}
		parts = append(parts, part{math.Abs(c * in.Standard), in.DegreesOfFreedom, in.Distribution})
	}
	return parts
}

func firstOf(inputs []Input, key string) int {
	for i := range inputs {
		if inputs[i].Key == key {
			return i
		}
	}
	return len(inputs)
}

func total(parts []part) Combined {
	var v, d float64
	for _, p := range parts {
		s := p.size * p.size
		v += s
		if p.dof > 0 {
			d += s * s / p.dof
		}
	}
	r := Combined{Standard: math.Sqrt(v), DegreesOfFreedom: math.Inf(1)}
	if d > 0 {
		r.DegreesOfFreedom = v * v / d
	}
	r.Coverage = coverage(r.DegreesOfFreedom)
	r.Expanded = r.Coverage * r.Standard
	return r
}

// check refuses what cannot be combined.
func (b *Budget) check() error {
	for i := range b.Inputs {
		in := &b.Inputs[i]
		size := in.Standard * in.Sensitivity
		switch {
		case !(in.Standard >= 0) || math.IsInf(in.Standard, 0) || b.Model == nil && (math.IsNaN(size) || math.IsInf(size, 0)):
			return fmt.Errorf("%w: %s has no usable uncertainty", ErrBudget, in.Name)
		case !(in.DegreesOfFreedom >= 0):
			return fmt.Errorf("%w: %s has %v degrees of freedom", ErrBudget, in.Name, in.DegreesOfFreedom)
		case in.Distribution != Normal && in.Distribution != StudentT && math.IsNaN(halfWidths(in.Distribution)):
			return fmt.Errorf("%w: %s has the distribution %q", ErrBudget, in.Name, in.Distribution)
		}
		if in.Key == "" {
			continue
		}
		if first := &b.Inputs[firstOf(b.Inputs, in.Key)]; !sameError(first, in) {
			return fmt.Errorf("%w: %s and %s have one key but not one uncertainty", ErrBudget, first.Name, in.Name)
		} else if first != in && b.Model != nil {
			return fmt.Errorf("%w: %s stands twice in a model", ErrBudget, in.Name)
		}
	}
	return nil
}

func sameError(a, b *Input) bool {
	return a.Standard == b.Standard && a.Distribution == b.Distribution && a.DegreesOfFreedom == b.DegreesOfFreedom
}

// parts puts the budget's inputs, linear, into independent contributions.
func (b *Budget) parts(room []part) ([]part, error) {
	if len(b.Correlations) == 0 {
		return independent(room, b.Inputs), nil
	}
	groups, rest, err := b.groups()
	if err != nil {
		return nil, err
	}
	parts := independent(room, rest)
	for _, g := range groups {
		v := 0.0
		for i := range g.inputs {
			for k := range g.inputs {
				v += g.size(i) * g.size(k) * g.r[i*len(g.inputs)+k]
			}
		}
		parts = append(parts, part{math.Sqrt(math.Max(v, 0)), g.inputs[0].DegreesOfFreedom, StudentT})
	}
	return parts, nil
}

// group is inputs that correlate with each other.
type group struct {
	inputs []Input // one of each key, with the sum of their coefficients
	at     []int   // where each first stands in the budget
	r      []float64
	root   []float64 // lower triangle L with r = L L'
}

func (g *group) size(i int) float64 { return g.inputs[i].Sensitivity * g.inputs[i].Standard }

// groups finds the inputs that correlate, however many others lie between, and
// those left. Sources: GUM 5.2.2 eq. (13) for the variance; that the degrees of
// freedom of inputs read together are those of each is GUM H.2, approach 2,
// where a figure is worked out from each set of readings. For different degrees
// of freedom no formula is agreed on, and none is used.
func (b *Budget) groups() (groups []group, rest []Input, err error) {
	of := map[string]int{} // key to group
	member := func(key string) error {
		if firstOf(b.Inputs, key) == len(b.Inputs) || key == "" {
			return fmt.Errorf("%w: a correlation names the key %q, which no input has", ErrBudget, key)
		}
		return nil
	}
	next := 0
	for _, c := range b.Correlations {
		if err := errors.Join(member(c.A), member(c.B)); err != nil {
			return nil, nil, err
		}
		if !(c.R >= -1 && c.R <= 1) || c.A == c.B {
			return nil, nil, fmt.Errorf("%w: %s and %s cannot correlate by %v", ErrBudget, c.A, c.B, c.R)
		}
		if c.R == 0 {
			continue
		}
		ga, isA := of[c.A]
		gb, isB := of[c.B]
		switch {
		case isA && isB:
			for key, g := range of {
				if g == gb {
					of[key] = ga
				}
			}
		case isA:
			of[c.B] = ga
		case isB:
			of[c.A] = gb
		default:
			of[c.A], of[c.B] = next, next
			next++
		}
	}
	place := make([]int, next) // group to its index, less one
	for i, in := range b.Inputs {
		g, correlated := of[in.Key]
		if !correlated || in.Key == "" {
			rest = append(rest, in)
			continue
		}
		if place[g] == 0 {
			groups = append(groups, group{})
			place[g] = len(groups)
		}
		one := &groups[place[g]-1]
		if first := firstOf(one.inputs, in.Key); first < len(one.inputs) {
			one.inputs[first].Sensitivity += in.Sensitivity
			continue
		}
		one.inputs, one.at = append(one.inputs, in), append(one.at, i)
	}
	for i := range groups {
		if err := groups[i].fill(b.Correlations); err != nil {
			return nil, nil, err
		}
	}
	return groups, rest, nil
}

func (g *group) fill(correlations []Correlation) error {
	n := len(g.inputs)
	first := g.inputs[0]
	g.r = make([]float64, n*n)
	for i, in := range g.inputs {
		g.r[i*n+i] = 1
		if in.Distribution != Normal && in.Distribution != StudentT {
			return fmt.Errorf("%w: %s correlates but is %s, which says nothing of the two together: state what they have in common as an input of its own", ErrBudget, in.Name, in.Distribution)
		}
		if finite(in.DegreesOfFreedom) != finite(first.DegreesOfFreedom) {
			return fmt.Errorf("%w: %s and %s correlate with different degrees of freedom: state what they have in common as an input of its own", ErrBudget, first.Name, in.Name)
		}
	}
	for _, c := range correlations {
		a, b := firstOf(g.inputs, c.A), firstOf(g.inputs, c.B)
		if a == n || b == n {
			continue
		}
		if was := g.r[a*n+b]; was != 0 && was != c.R {
			return fmt.Errorf("%w: %s and %s correlate by %v and by %v", ErrBudget, c.A, c.B, was, c.R)
		}
		g.r[a*n+b], g.r[b*n+a] = c.R, c.R
	}
	var ok bool
	if g.root, ok = root(g.r, n); !ok {
		return fmt.Errorf("%w: the correlations around %s contradict each other", ErrBudget, first.Name)
	}
	return nil
}

// finite is the degrees of freedom where they are finite, else 0.
func finite(dof float64) float64 {
	if math.IsInf(dof, 1) {
		return 0
	}
	return dof
}

// root is the lower triangle L, n by n in rows, with L L' = r, a correlation
// matrix that may be singular; false when it is none, by more than 1e-9.
func root(r []float64, n int) ([]float64, bool) {
	l := make([]float64, n*n)
	for i := range n {
		for j := range i + 1 {
			s := r[i*n+j]
			for k := range j {
				s -= l[i*n+k] * l[j*n+k]
			}
			switch d := l[j*n+j]; {
			case i == j && s < -1e-9:
				return nil, false
			case i == j:
				if s > 1e-12 { // less is what rounding leaves of nothing
					l[i*n+i] = math.Sqrt(s)
				}
			case d > 0:
				l[i*n+j] = s / d
			case math.Abs(s) > 1e-6:
				return nil, false
			}
		}
	}
	return l, true
}

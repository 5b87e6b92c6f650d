package fit

import (
	"errors"
	"fmt"
	"math"
	"slices"
)

// ErrModel: readings that do not determine the coefficients asked for.
var ErrModel = errors.New("the readings do not determine the model")

// Noise is what is known of the errors of y. Its covariance matrix is
//
//	V_ij = SD_i^2 [i = j] + Sum_k Common_ki Common_kj
//
// so that errors shared by all readings (the reference's scale: u p_i, its
// offset: u) count as shared, and the work stays linear in the readings. The
// zero Noise is independent errors, alike and of unknown size.
type Noise struct {
	// SD is the standard uncertainty of each y, independent of the others.
	SD []float64
	// Relative says that SD are known but for a factor that all share, which
	// the residuals give: noise that grows with the reading by some share.
	Relative bool
	// Common holds for each shared error what one standard uncertainty of it
	// does to each y.
	Common [][]float64
}

// Model is a fitted linear model y = X b.
type Model struct {
	Coefficients []float64
	Covariance   [][]float64 // of the coefficients, from noise and shared errors
	// Shared holds for each shared error what one standard uncertainty of it
	// does to each coefficient.
	Shared [][]float64
	// Residual is sqrt(chi^2/DoF): the SD of the residuals in y's unit, or as
	// a multiple of the SD where Noise names them. 0 without degrees of freedom.
	Residual float64
	DoF      int
	// Estimated says that the noise in Covariance was found from the residuals.
	Estimated bool
}

// Linear is the least-squares fit of y = Sum_j b_j x[j] (x by columns, all as
// long as y). With W the inverse square root of the independent part:
//
//   - SD stated: generalised least squares, b = (X'V^-1 X)^-1 X'V^-1 y with
//     covariance (X'V^-1 X)^-1, not changed by the residuals; chi^2 = r'V^-1 r,
//     DoF = n - p. It is found as ordinary least squares with one unknown more
//     for each shared error, which is observed as 0 with uncertainty 1.
//   - SD not stated, or Relative: ordinary (weighted) least squares; s^2 from
//     the residuals of a fit in which the shared errors are free, DoF = n less
//     the rank of X and Common together; covariance s^2 (X'W^2 X)^-1 + A A',
//     A = (WX)^+ W Common. Where every shared error is a combination of the
//     model's columns, as scale and offset are of a straight line's, this is
//     generalised least squares.
//
// All of it in some 32 digits, so that what is lost is what the numbers given
// do not hold. Columns may differ in size by any factor.
//
// ErrData: unequal lengths, nothing, not finite, beyond 1e150, an SD not above
// zero. ErrModel: fewer readings than coefficients (none to spare where the
// noise is to be found), or a column that lies in the others to within 1e-14.
//
// Source: Aitken, Proc. R. Soc. Edinb. 55 (1935) 42; textbook. The certified
// digits reached on NIST's linear sets are in the tests.
func Linear(x [][]float64, y []float64, noise Noise) (Model, error) {
	scale := make([]float64, len(x))
	for j, column := range x {
		if len(column) != len(y) {
			return Model{}, fmt.Errorf("%w: column %d of the model has %d values for %d readings", ErrData, j+1, len(column), len(y))
		}
		if err := finite(column); err != nil {
			return Model{}, err
		}
		scale[j] = scaleFor(column, 0)
	}
	s, err := solve(len(x), func(i int, to []double) {
		for j := range x {
			to[j] = of(x[j][i] * scale[j])
		}
	}, y, noise)
	if err != nil {
		return Model{}, err
	}
	for j, f := range scale {
		s.b[j] = s.b[j].times(of(f))
		for k := range s.shared {
			s.shared[k][j] = s.shared[k][j].times(of(f))
		}
		for i := range s.covariance {
			s.covariance[i][j] = s.covariance[i][j].times(of(f))
			s.covariance[j][i] = s.covariance[j][i].times(of(f))
		}
	}
	return s.model()
}

// At is the fitted y of one row of x and its standard uncertainty,
// sqrt(row Covariance row'), of the model and not of one more reading.
func (m Model) At(row []float64) (y, u float64) {
	var v float64
	for i, a := range row {
		y += a * m.Coefficients[i]
		for j, b := range row {
			v += a * m.Covariance[i][j] * b
		}
	}
	return y, math.Sqrt(max(v, 0))
}

// DegreesOfFreedom are the effective ones of coefficient j by Welch and
// Satterthwaite (GUM G.4.1): the noise has DoF, shared errors infinitely many.
// +Inf where the noise was stated.
func (m Model) DegreesOfFreedom(j int) float64 {
	all := m.Covariance[j][j]
	noise := all
	for _, s := range m.Shared {
		noise -= s[j] * s[j]
	}
	if !m.Estimated || !(noise > 0) {
		return math.Inf(1)
	}
	return float64(m.DoF) * (all / noise) * (all / noise)
}

// solution is a Model in doubles.
type solution struct {
	b          []double
	covariance [][]double
	shared     [][]double
	residual   float64
	dof        int
	estimated  bool
}

// solve fits p columns; row writes those of reading i, which are of size 1.
func solve(p int, row func(i int, to []double), y []float64, noise Noise) (solution, error) {
	n, m := len(y), len(noise.Common)
	if err := noise.refuse(y); err != nil {
		return solution{}, err
	}
	if p == 0 || n < p {
		return solution{}, fmt.Errorf("%w: %d readings for %d coefficients", ErrModel, n, p)
	}
	f := scaleFor(y, 0)
	t := newTriangle(p + m + 1)
	line := make([]double, p+m+1)
	for i := range y {
		row(i, line[:p])
		for k, c := range noise.Common {
			line[p+k] = of(c[i] * f)
		}
		line[p+m] = of(y[i] * f)
		if noise.SD != nil {
			w := of(1).over(of(noise.SD[i] * f))
			for j := range line {
				line[j] = line[j].times(w)
			}
		}
		t.add(line)
	}
	s := solution{estimated: noise.SD == nil || noise.Relative}
	per := of(1 / f)
	if s.estimated {
		t.fold()
		if t.dependent(p) {
			return solution{}, fmt.Errorf("%w: a column of it is a combination of the others", ErrModel)
		}
		return t.estimated(s, n, p, m, per, noise.SD == nil)
	}
	for k := range m {
		clear(line)
		line[p+k] = of(1)
		t.add(line)
	}
	t.fold()
	if t.dependent(p) {
		return solution{}, fmt.Errorf("%w: a column of it is a combination of the others", ErrModel)
	}
	s.b = t.solve(p+m, p+m)[:p]
	all := t.inverse(p + m)
	for j := range p {
		s.b[j] = s.b[j].times(per)
		s.covariance = append(s.covariance, slices.Clone(all[j][:p]))
		for i := range s.covariance[j] {
			s.covariance[j][i] = s.covariance[j][i].times(per).times(per)
		}
	}
	// The covariance of a coefficient with the unknown of a shared error is,
	// but for its sign, what one standard uncertainty of that error does.
	for k := range m {
		shared := make([]double, p)
		for j := range shared {
			shared[j] = all[j][p+k].negative().times(per)
		}
		s.shared = append(s.shared, shared)
	}
	if s.dof = n - p; s.dof > 0 {
		s.residual = math.Abs(t.at(p+m, p+m).value()) / math.Sqrt(float64(s.dof))
	}
	return s, nil
}

// estimated finds the noise from the residuals.
func (t *triangle) estimated(s solution, n, p, m int, per double, bare bool) (solution, error) {
	ss, rank := t.left(p, m)
	if s.dof = n - p - rank; s.dof < 1 {
		return solution{}, fmt.Errorf("%w: no reading is left over to show the noise", ErrModel)
	}
	variance := ss.over(of(float64(s.dof)))
	s.residual = variance.root().value()
	if bare {
		s.residual *= per.hi
	}
	s.b = t.solve(p, p+m)
	for k := range m {
		s.shared = append(s.shared, t.solve(p, p+k))
	}
	s.covariance = t.inverse(p)
	for i := range p {
		s.b[i] = s.b[i].times(per)
		for k := range m {
			s.shared[k][i] = s.shared[k][i].times(per)
		}
	}
	for i := range p {
		for j := range p {
			c := s.covariance[i][j].times(variance).times(per).times(per)
			for k := range m {
				c = c.plus(s.shared[k][i].times(s.shared[k][j]))
			}
			s.covariance[i][j] = c
		}
	}
	return s, nil
}

// left is the sum of squares of the last column that neither the leading p
// columns nor the m after them explain, and how many of those m count: one
// that lies in what stands before it does not.
func (t *triangle) left(p, m int) (ss double, rank int) {
	var kept [][]double
	for k := range m + 1 {
		q := make([]double, m+1)
		for i := range k + 1 {
			q[i] = t.at(p+i, p+k)
		}
		for _, e := range kept {
			c := dot(e, q)
			for i := range q {
				q[i] = q[i].minus(c.times(e[i]))
			}
		}
		ss = dot(q, q)
		if norm := ss.root(); k < m && norm.hi > negligible*t.length(p+k, 0) {
			for i := range q {
				q[i] = q[i].over(norm)
			}
			kept = append(kept, q)
		}
	}
	return ss, len(kept)
}

func dot(a, b []double) double {
	var sum double
	for i := range a {
		sum = sum.plus(a[i].times(b[i]))
	}
	return sum
}

// model rounds; ErrModel where a figure is none that a float64 holds.
func (s solution) model() (Model, error) {
	m := Model{Residual: s.residual, DoF: s.dof, Estimated: s.estimated, Coefficients: values(s.b)}
	ok := usable(m.Residual) && usable(m.Coefficients...)
	for i := range s.covariance {
		m.Covariance = append(m.Covariance, values(s.covariance[i]))
		ok = ok && usable(m.Covariance[i]...)
	}
	for k := range s.shared {
		m.Shared = append(m.Shared, values(s.shared[k]))
	}
	if !ok {
		return Model{}, fmt.Errorf("%w: its figures are too large for the numbers of a computer", ErrModel)
	}
	return m, nil
}

func values(x []double) []float64 {
	out := make([]float64, len(x))
	for i := range x {
		out[i] = x[i].value()
	}
	return out
}

func usable(x ...float64) bool {
	for _, v := range x {
		if math.IsNaN(v - v) {
			return false
		}
	}
	return true
}

// refuse says what is wrong with y and its noise.
func (n Noise) refuse(y []float64) error {
	if err := finite(y); err != nil {
		return err
	}
	if n.SD != nil && len(n.SD) != len(y) || n.SD == nil && n.Relative {
		return fmt.Errorf("%w: %d standard uncertainties for %d readings", ErrData, len(n.SD), len(y))
	}
	var size float64
	for _, v := range y {
		size = max(size, math.Abs(v))
	}
	for i, u := range n.SD {
		if !(u > 0) || size > 0 && !(u > 1e-100*size && u < 1e100*size) {
			return fmt.Errorf("%w: standard uncertainty %d is not above zero, or too far from the readings to compute with", ErrData, i+1)
		}
	}
	for _, c := range n.Common {
		if len(c) != len(y) {
			return fmt.Errorf("%w: a shared error has %d values for %d readings", ErrData, len(c), len(y))
		}
		if err := finite(c); err != nil {
			return err
		}
	}
	return nil
}

// finite refuses what is not, and what has a square that is not.
func finite(x []float64) error {
	for i, v := range x {
		if !(math.Abs(v) <= 1e150) {
			return fmt.Errorf("%w: number %d is not finite, or too large to compute with", ErrData, i+1)
		}
	}
	return nil
}

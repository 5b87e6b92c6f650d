package uncertainty

import (
	"fmt"
	"math"
)

// Matrix is square and symmetrical, in rows.
type Matrix struct {
	N    int
	Data []float64
}

// At is the element of row i and column k.
func (m Matrix) At(i, k int) float64 { return m.Data[i*m.N+k] }

// Correlation is the matrix scaled to 1 on its diagonal; the row and column of
// a variance of 0 are 0 beside it.
func (m Matrix) Correlation() Matrix {
	out := Matrix{m.N, make([]float64, m.N*m.N)}
	for i := range m.N {
		for k := range m.N {
			v := m.At(i, k) / math.Sqrt(m.At(i, i)*m.At(k, k))
			if i == k || math.IsNaN(v) {
				v = float64(1 - min(1, max(i-k, k-i)))
			}
			out.Data[i*m.N+k] = math.Max(-1, math.Min(1, v))
		}
	}
	return out
}

// Covariances are those of figures that have inputs in common, which their keys
// say: cov(y, z) = Sum over all inputs x, x' of c_x u(x) c'_x' u(x') r(x, x'),
// with r 1 for one key, the correlation stated in any of the budgets, 0
// otherwise. The figures are near their estimates sums of their inputs: give
// budgets of a model linearised. An empty list gives an empty matrix. ErrBudget
// as Evaluate, and for a key with one uncertainty here and another there.
// Source: GUM 5.2 and F.1.2.3, eq. (F.1) for inputs in common.
func Covariances(budgets []Budget) (Matrix, error) {
	n := len(budgets)
	out := Matrix{n, make([]float64, n*n)}
	column := map[string]int{}
	var inputs []*Input // the first of each key
	var rows [][]float64
	for i := range budgets {
		b := &budgets[i]
		if err := b.check(); err != nil {
			return Matrix{}, err
		}
		row := make([]float64, len(inputs))
		for k := range b.Inputs {
			in := &b.Inputs[k]
			size := in.Sensitivity * in.Standard
			if in.Key == "" {
				out.Data[i*n+i] += size * size
				continue
			}
			c, known := column[in.Key]
			if !known {
				c = len(inputs)
				column[in.Key] = c
				inputs, row = append(inputs, in), append(row, 0)
			} else if !sameError(inputs[c], in) {
				return Matrix{}, fmt.Errorf("%w: %s and %s have one key but not one uncertainty", ErrBudget, inputs[c].Name, in.Name)
			}
			row[c] += size
		}
		rows = append(rows, row)
	}
	r, err := stated(budgets, column)
	if err != nil {
		return Matrix{}, err
	}
	for i := range n {
		for k := range i + 1 {
			var v float64
			for c := range min(len(rows[i]), len(rows[k])) {
				v += rows[i][c] * rows[k][c]
			}
			for _, x := range r {
				v += x.r * (at(rows[i], x.a)*at(rows[k], x.b) + at(rows[i], x.b)*at(rows[k], x.a))
			}
			out.Data[i*n+k] += v
			if k != i {
				out.Data[k*n+i] = out.Data[i*n+k]
			}
		}
	}
	return out, nil
}

// at is an element of a row that ends where its figure was the first to need no
// more columns.
func at(row []float64, c int) float64 {
	if c < len(row) {
		return row[c]
	}
	return 0
}

// pair is the correlation of two columns.
type pair struct {
	a, b int
	r    float64
}

// stated collects the correlations of all budgets by their columns, each once,
// in the order in which they are stated: sums keep their last bits.
func stated(budgets []Budget, column map[string]int) ([]pair, error) {
	var out []pair
	known := map[[2]int]float64{}
	for i := range budgets {
		if len(budgets[i].Correlations) == 0 {
			continue
		}
		if _, _, err := budgets[i].groups(); err != nil {
			return nil, err
		}
		for _, c := range budgets[i].Correlations {
			a, b := column[c.A], column[c.B]
			key := [2]int{min(a, b), max(a, b)}
			if was, twice := known[key]; twice && was != c.R {
				return nil, fmt.Errorf("%w: %s and %s correlate by %v and by %v", ErrBudget, c.A, c.B, was, c.R)
			} else if !twice {
				known[key] = c.R
				out = append(out, pair{a, b, c.R})
			}
		}
	}
	return out, nil
}

package fit

import (
	"math"
	"math/rand/v2"
	"testing"
)

// The lines by brute force, from their geometry: independent is half the
// largest deviation from a chord over all triples, zero-based the largest
// |ri dj - rj di| / (di + dj) over all pairs above the first point. Whole
// numbers make edges parallel and points collinear.
func TestLinesByBruteForce(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	for trial := range 4000 {
		n := 2 + r.IntN(9)
		x, y := make([]float64, n), make([]float64, n)
		for i := range x {
			x[i], y[i] = float64(i)+0.9*r.Float64(), r.NormFloat64()
			if trial%2 == 0 {
				x[i], y[i] = float64(i), float64(r.IntN(4))
			}
		}
		var triples, pairs float64
		for j := range n {
			for i := range j {
				if i > 0 {
					di, dj := x[i]-x[0], x[j]-x[0]
					pairs = math.Max(pairs, math.Abs((y[i]-y[0])*dj-(y[j]-y[0])*di)/(di+dj))
				}
				for k := j + 1; k < n; k++ {
					on := y[i] + (y[k]-y[i])*(x[j]-x[i])/(x[k]-x[i])
					triples = math.Max(triples, math.Abs(y[j]-on)/2)
				}
			}
		}
		l := Lines(x, y, nil)
		if math.Abs(l.Independent.Value-triples) > 1e-12 || math.Abs(l.ZeroBased.Value-pairs) > 1e-12 {
			t.Fatalf("%v at %v: independent %v, by triples %v; zero-based %v, by pairs %v", y, x, l.Independent.Value, triples, l.ZeroBased.Value, pairs)
		}
	}
}

// A plain bow has a terminal-based deviation of exactly twice the independent
// one; a straight line has none; one point gives none of the four.
func TestLinesOfPlainShapes(t *testing.T) {
	l := Lines([]float64{0, 1, 2, 3, 4}, []float64{0, 3, 4, 3, 0}, nil)
	if l.Terminal.Value != 4 || l.Independent.Value != 2 {
		t.Errorf("a bow of 4: terminal %v, independent %v", l.Terminal.Value, l.Independent.Value)
	}
	for n, y := range map[int][]float64{2: {1, 5}, 3: {1, 3, 5}, 5: {7, 7, 7, 7, 7}} {
		x := []float64{0, 1, 2, 3, 4}[:n]
		for i, d := range []*Deviation{Lines(x, y, nil).Terminal, Lines(x, y, nil).Independent, Lines(x, y, nil).ZeroBased, Lines(x, y, nil).LeastSquares} {
			if d == nil || d.Value > 1e-15 {
				t.Errorf("%v, line %d: %v", y, i, d)
			}
		}
	}
	if l := Lines([]float64{3}, []float64{4}, nil); l.Terminal != nil || l.Independent != nil || l.ZeroBased != nil || l.LeastSquares != nil {
		t.Errorf("one point gave %+v", l)
	}
}

// A long bow has every point on its hull and is still done at once.
func TestLinesOfManyPoints(t *testing.T) {
	const n = 100_001
	x, y := make([]float64, n), make([]float64, n)
	for i := range x {
		x[i] = float64(i) / (n - 1)
		y[i] = 4 * x[i] * (1 - x[i])
	}
	l := Lines(x, y, nil)
	// 4x(1-x) - sx is largest, (4-s)^2/16, at (4-s)/8 and s at 1: equal for
	// s = 12 - 8 sqrt 2.
	if want := 12 - 8*math.Sqrt2; math.Abs(l.Terminal.Value-1) > 1e-9 || math.Abs(l.Independent.Value-0.5) > 1e-9 || math.Abs(l.ZeroBased.Value-want) > 1e-9 {
		t.Errorf("terminal %v, independent %v, zero-based %v, want 1, 0.5, %v", l.Terminal.Value, l.Independent.Value, l.ZeroBased.Value, want)
	}
}

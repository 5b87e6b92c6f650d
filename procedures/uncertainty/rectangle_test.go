package uncertainty

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// equal is a correlation matrix with rho beside its diagonal.
func equal(n int, rho float64) Matrix {
	m := Matrix{n, make([]float64, n*n)}
	for i := range m.Data {
		m.Data[i] = rho
	}
	for i := range n {
		m.Data[i*n+i] = 1
	}
	return m
}

func same(n int, x float64) []float64 {
	out := make([]float64, n)
	for i := range out {
		out[i] = x
	}
	return out
}

// Rectangles of equally correlated quantities are one integral over what they
// have in common, by scipy 1.10.1 (integrate.quad to 1e-13); three quantities
// with correlation 1/2 are all above zero in a quarter of cases,
// 1/8 + 3 asin(1/2)/(4 pi).
func TestRectangle(t *testing.T) {
	inf := math.Inf(1)
	for _, c := range []struct {
		n                       int
		low, high, r, dof, want float64
	}{
		{3, -1, 1, 0.5, 0, 0.37566748973647013}, {7, -2, 2, 0.8, 0, 0.8629708177982205}, {42, -3, 3, 0.9, 0, 0.9837713544932929},
		{20, -inf, 1.5, 0.3, 0, 0.47221273045821877}, {5, -1, 0.5, 0.99, 0, 0.462034084394851}, {3, 0, inf, 0.5, 0, 0.25},
		{3, -2, 2, 0.5, 4, 0.7588368188293619}, {7, -2.5, 2.5, 0.8, 9, 0.9044028703100218}, {2, -1, 2, 0.6, 3, 0.6108890652169426},
		{1, -1, 1, 0, 0, 0.6826894921370859}, {1, -1, 1, 0, 1, 0.5}, {2, 0, inf, 0.5, 0, 1.0 / 3}, {2, -inf, inf, 0.5, 2, 1},
		// All alike: as one. All opposite pairs: as one between both.
		{2, -1, 2, 1, 0, 0.8185946141203637}, {6, -1, 2, 1, 0, 0.8185946141203637}, {2, -1, 2, -1, 0, 0.6826894921370859}, {6, -1, 2, 1, 5, 0.7681},
	} {
		got, err := Rectangle(same(c.n, c.low), same(c.n, c.high), equal(c.n, c.r), c.dof, RectangleSettings{Seed: 1})
		tol := got.Error + 1e-11
		if c.want == 0.7681 {
			c.want = StudentBelow(2, 5) - StudentBelow(-1, 5)
		}
		if err != nil || math.Abs(got.Inside-c.want) > tol || math.Abs(got.Inside+got.Outside-1) > 1e-12 || got.Error > 0.02*math.Min(c.want, 1-c.want)+1e-7 || (c.n > 2) != (got.Points > 0) {
			t.Errorf("%+v: %+v, %v, off by %.1e", c, got, err, got.Inside-c.want)
		}
	}
	// Two of unequal bounds (scipy 1.10.1, quad), either way round.
	for _, swap := range []bool{false, true} {
		low, high := []float64{-1, -2}, []float64{2, 0.5}
		if swap {
			low, high = []float64{-2, -1}, []float64{0.5, 2}
		}
		if got, err := Rectangle(low, high, equal(2, 0.7), 0, RectangleSettings{}); err != nil || math.Abs(got.Inside-0.5303191574044954) > 1e-12 {
			t.Errorf("two: %+v, %v", got, err)
		}
	}
}

// Laws: what is independent multiplies; quantities without bounds do not count;
// the order of quantities and the sign of one do not; small probabilities of
// being outside keep their digits.
func TestRectangleLaws(t *testing.T) {
	random := rand.New(rand.NewPCG(5, 0))
	for trial := range 8 {
		const n = 6
		var rows [n][n + 2]float64
		for i := range rows {
			for k := range rows[i] {
				rows[i][k] = random.NormFloat64()
			}
			if trial%4 == 3 && i >= 3 { // singular: the others follow from three
				for k := range rows[i] {
					rows[i][k] = rows[0][k]*float64(i) + rows[1][k] - rows[2][k]*0.3
				}
			}
		}
		c := Matrix{n, make([]float64, n*n)}
		for i := range n {
			for k := range n {
				for m := range rows[i] {
					c.Data[i*n+k] += rows[i][m] * rows[k][m]
				}
			}
		}
		r := c.Correlation()
		low, high := make([]float64, n), make([]float64, n)
		for i := range low {
			low[i], high[i] = -2*random.Float64(), 0.5+2*random.Float64()
		}
		whole, err := Rectangle(low, high, r, 0, RectangleSettings{Seed: 1})
		if err != nil {
			t.Fatal(err)
		}
		order := random.Perm(n)
		l2, h2, r2 := make([]float64, n), make([]float64, n), Matrix{n, make([]float64, n*n)}
		for i, from := range order {
			l2[i], h2[i] = low[from], high[from]
			for k, other := range order {
				r2.Data[i*n+k] = r.At(from, other)
				if (i == 2) != (k == 2) { // one the other way round
					r2.Data[i*n+k] *= -1
				}
			}
		}
		l2[2], h2[2] = -h2[2], -l2[2]
		again, err := Rectangle(l2, h2, r2, 0, RectangleSettings{Seed: 2})
		if err != nil || math.Abs(again.Inside-whole.Inside) > again.Error+whole.Error {
			t.Errorf("%d: %+v and %+v, %v", trial, whole, again, err)
		}
		// The same by drawing.
		count, draws := 0.0, 100_000
		l, _ := root(r.Data, n)
		for range draws {
			in := 1.0
			var z [n]float64
			for i := range n {
				z[i] = random.NormFloat64()
				x := 0.0
				for k := range i + 1 {
					x += l[i*n+k] * z[k]
				}
				if x < low[i] || x > high[i] {
					in = 0
				}
			}
			count += in / float64(draws)
		}
		if sd := math.Sqrt(whole.Inside * whole.Outside / float64(draws)); math.Abs(count-whole.Inside) > 4.5*sd+whole.Error {
			t.Errorf("%d: %+v, drawn %v +- %v", trial, whole, count, sd)
		}
	}
	// Independent, one of them without bounds.
	got, err := Rectangle([]float64{-1, math.Inf(-1), -5, -6}, []float64{1, math.Inf(1), 5, 6}, equal(4, 0), 0, RectangleSettings{})
	if err != nil || math.Abs(got.Inside-0.6826894921370859*0.9999994266968563*0.9999999980268247) > 1e-12 {
		t.Errorf("independent: %+v, %v", got, err)
	}
	got, err = Rectangle(same(3, -6), same(3, 6), equal(3, 0), 0, RectangleSettings{})
	if err != nil || math.Abs(got.Outside/(3*1.973175290075396e-09)-1) > 1e-6 {
		t.Errorf("far out: %+v, %v", got, err)
	}
	for name, f := range map[string]func() (Region, error){
		"order": func() (Region, error) {
			return Rectangle([]float64{1}, []float64{0}, equal(1, 0), 0, RectangleSettings{})
		},
		"lengths": func() (Region, error) { return Rectangle(same(2, 0), same(3, 1), equal(3, 0), 0, RectangleSettings{}) },
		"no number": func() (Region, error) {
			return Rectangle(same(1, math.NaN()), same(1, 1), equal(1, 0), 0, RectangleSettings{})
		},
		"contradiction": func() (Region, error) {
			return Rectangle(same(3, 0), same(3, 1), equal(3, -0.9), 0, RectangleSettings{})
		},
		"no correlation": func() (Region, error) {
			return Rectangle(same(2, 0), same(2, 1), Matrix{2, []float64{2, 0, 0, 1}}, 0, RectangleSettings{})
		},
	} {
		if got, err := f(); !errors.Is(err, ErrRectangle) || got != (Region{}) {
			t.Errorf("%s: %+v, %v", name, got, err)
		}
	}
}

// The rule is exact for polynomials up to degree 22 in one stretch, and takes
// its time where a function bends.
func TestIntegrate(t *testing.T) {
	for degree := range 23 {
		v, _ := Integrate(func(x float64) float64 { return float64(degree+1) * math.Pow(x, float64(degree)) }, 1, 0, 1)
		compare(t, []figure{{fmt.Sprint("degree ", degree), v, 1, 1e-14}})
	}
	for name, c := range map[string]struct {
		f      func(float64) float64
		points []float64
		want   float64
	}{
		"bend":    {func(x float64) float64 { return math.Abs(x - 0.3) }, []float64{0, 1}, 0.045 + 0.245},
		"peak":    {func(x float64) float64 { return 1 / (1e-6 + x*x) }, []float64{-1, 1}, 2e3 * math.Atan(1e3)},
		"root":    {math.Sqrt, []float64{1, 0}, 2.0 / 3},
		"nothing": {math.Sqrt, []float64{1}, 0},
	} {
		v, e := Integrate(c.f, 1e-10, c.points...)
		if math.Abs(v-c.want) > 1e-10 || e > 1e-10 {
			t.Errorf("%s: %v +- %v, want %v", name, v, e, c.want)
		}
	}
	if _, e := Integrate(func(x float64) float64 { return 1 / x }, 1e-10, 0, 1); e <= 1e-10 {
		t.Errorf("what has no integral has an error of %v", e)
	}
}

func BenchmarkRectangle(b *testing.B) {
	for _, n := range []int{7, 42} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			for b.Loop() {
				if _, err := Rectangle(same(n, -3), same(n, 3), equal(n, 0.8), 0, RectangleSettings{}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

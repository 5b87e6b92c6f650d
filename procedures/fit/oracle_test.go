package fit

import (
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
	"os"
	"testing"
)

// task and answer are those of testdata/oracle.py.
type task struct {
	Models []modelTask  `json:"models"`
	Both   []bothTask   `json:"both"`
	Static []staticTask `json:"static"`
}

type modelTask struct {
	X        [][]float64 `json:"x"`
	Y        []float64   `json:"y"`
	SD       []float64   `json:"sd"`
	Relative bool        `json:"relative"`
	Common   [][]float64 `json:"common"`
	Row      []float64   `json:"row"`
}

type bothTask struct {
	X  []float64 `json:"x"`
	Y  []float64 `json:"y"`
	UX []float64 `json:"ux"`
	UY []float64 `json:"uy"`
}

type staticTask struct {
	Reference []float64 `json:"reference"`
	UUT       []float64 `json:"uut"`
	Cycle     []int     `json:"cycle"`
	Down      []bool    `json:"down"`
	Set       []float64 `json:"set"`
	Mounting  []int     `json:"mounting"`
	Zero      *float64  `json:"zero"`
	Astray    []bool    `json:"-"`
}

type answer struct {
	Models []struct {
		B          []float64
		Covariance [][]float64
		Residual   float64
		DoF        int
		At         [2]float64
	}
	Both   []struct{ Slope, Intercept, Chi2 float64 }
	Static []struct {
		ZeroOffset float64       `json:"zero_offset"`
		AsRead     [2]float64    `json:"as_read"`
		AfterZero  [2]float64    `json:"after_zero"`
		Line       []float64     `json:"line"`
		Hysteresis [][3]float64  `json:"hysteresis"`
		ZeroReturn []*float64    `json:"zero_return"`
		DoF        int           `json:"dof"`
		Pooled     *float64      `json:"pooled"`
		Range      *float64      `json:"range"`
		Points     [][6]*float64 `json:"points"`
		Lines      map[string][2]*float64
		Curve      []float64
		Residual   *float64 `json:"curve_residual"`
	}
}

// many is how much is sent to the second oracle: all with KYMOBENCH_FULL=1,
// a tenth with KYMOBENCH_OUTSIDE=1, else a fortieth.
func many(n int) int {
	switch {
	case os.Getenv("KYMOBENCH_FULL") == "1":
		return n
	case os.Getenv("KYMOBENCH_OUTSIDE") == "1":
		return n / 10
	}
	return n / 40
}

// Regression against statsmodels 0.13.5 (ordinary, weighted and generalised
// least squares, with the prediction at one place) and York's line against
// orthogonal distance regression of scipy 1.10.1, on random readings. The
// shared errors are sometimes combinations of the model's columns.
func TestModelsOracle(t *testing.T) {
	r := rand.New(rand.NewPCG(21, 22))
	var ask task
	for k := range many(2000) {
		n, p := 4+r.IntN(50), 1+r.IntN(4)
		m := modelTask{X: make([][]float64, p), Relative: k%5 == 3}
		n = max(n, p+4)
		at := 300 * r.NormFloat64()
		for j := range p {
			m.Row = append(m.Row, r.NormFloat64())
			for range n {
				m.X[j] = append(m.X[j], r.NormFloat64()*math.Pow(10, float64(3*j))+at*float64(min(j, 1)))
			}
		}
		if k%5 > 1 {
			for range n {
				m.SD = append(m.SD, math.Exp(r.NormFloat64()))
			}
		}
		for range r.IntN(3) {
			c := make([]float64, n)
			inside := r.IntN(2) == 0
			for i := range c {
				if c[i] = r.NormFloat64(); inside {
					c[i] = m.X[0][i]/scaleOf(m.X[0]) - m.X[p-1][i]/scaleOf(m.X[p-1])*0.3
				}
			}
			m.Common = append(m.Common, c)
		}
		for i := range n {
			y := 5*m.X[0][i] + r.NormFloat64()
			if m.SD != nil {
				y = 5*m.X[0][i] + m.SD[i]*r.NormFloat64()
			}
			m.Y = append(m.Y, y)
		}
		ask.Models = append(ask.Models, m)
	}
	for range many(500) {
		n := 4 + r.IntN(30)
		var b bothTask
		for i := range n {
			b.UX, b.UY = append(b.UX, 0.2*math.Exp(r.NormFloat64())), append(b.UY, 0.2*math.Exp(r.NormFloat64()))
			b.X = append(b.X, 2*float64(i)+b.UX[i]*r.NormFloat64())
			b.Y = append(b.Y, 3-0.7*2*float64(i)+b.UY[i]*r.NormFloat64())
		}
		ask.Both = append(ask.Both, b)
	}
	var a answer
	python(t, "oracle.py", ask, &a)
	if len(a.Models) != len(ask.Models) || len(a.Both) != len(ask.Both) {
		t.Fatalf("%d and %d answers", len(a.Models), len(a.Both))
	}
	worst := 0.0
	for k, m := range ask.Models {
		want := a.Models[k]
		got, err := Linear(m.X, m.Y, Noise{SD: m.SD, Relative: m.Relative, Common: m.Common})
		if err != nil {
			t.Fatal(err)
		}
		at, u := got.At(m.Row)
		same := func(name string, x, y, size float64) {
			t.Helper()
			worst = max(worst, math.Abs(x-y)/size)
			// Double precision and columns of sizes up to 1e9 to one leave it eight digits.
			if !(math.Abs(x-y) <= 1e-8*size) {
				t.Errorf("model %d, %s: %v, statsmodels has %v", k, name, x, y)
			}
		}
		same("residual", got.Residual, want.Residual, want.Residual)
		same("at", at, want.At[0], want.At[1]+math.Abs(at))
		same("u at", u, want.At[1], u)
		if got.DoF != want.DoF {
			t.Errorf("model %d: %d degrees of freedom, want %d", k, got.DoF, want.DoF)
		}
		for i := range got.Coefficients {
			ui := math.Sqrt(want.Covariance[i][i])
			same("coefficient", got.Coefficients[i], want.B[i], ui+math.Abs(want.B[i]))
			for j := range got.Coefficients {
				same("covariance", got.Covariance[i][j], want.Covariance[i][j], ui*math.Sqrt(want.Covariance[j][j]))
			}
		}
	}
	for k, b := range ask.Both {
		got, err := York(b.X, b.Y, b.UX, b.UY)
		if err != nil {
			t.Fatal(err)
		}
		want := a.Both[k]
		// Both minimise the same sum. Ours is the lesser; where scipy stops short
		// by some chi^2, it is off by the root of that in standard uncertainties;
		// rounding of chi^2 by 1e-13 is seen as 1e-6 of them at most.
		short := want.Chi2 - got.ChiSquare
		off := 1e-6 + 2*math.Sqrt(max(short, 0))
		if short < -1e-12*want.Chi2 || short > 1e-8*want.Chi2 ||
			math.Abs(got.Slope-want.Slope) > off*got.USlope || math.Abs(got.Intercept-want.Intercept) > off*got.UIntercept {
			t.Errorf("errors in both %d: %v %v %v, scipy has %+v", k, got.Slope, got.Intercept, got.ChiSquare, want)
		}
	}
	t.Logf("%d models, largest difference %.2g; %d lines with errors in both", len(ask.Models), worst, len(ask.Both))
}

func scaleOf(x []float64) float64 { return 1 / scaleFor(x, 0) }

// Every static figure against plain Python, on readings of every kind.
func TestStaticOracle(t *testing.T) {
	r := rand.New(rand.NewPCG(31, 32))
	var ask task
	var sets []Data
	for range many(4000) {
		d := drawn(r)
		if r.IntN(20) == 0 { // far from zero
			for i := range d.UUT {
				d.Reference[i], d.UUT[i] = d.Reference[i]+1e6, d.UUT[i]+1e6
				if d.Set != nil {
					d.Set[i] += 1e6
				}
			}
		}
		sets = append(sets, d)
		ask.Static = append(ask.Static, staticTask(d))
	}
	var a answer
	python(t, "oracle.py", ask, &a)
	if len(a.Static) != len(sets) {
		t.Fatalf("%d answers", len(a.Static))
	}
	compared := map[string]int{}
	for k, d := range sets {
		f, err := Static(d)
		if err != nil {
			t.Fatal(err)
		}
		want := a.Static[k]
		span := spanOf(d)
		size := span + 1e-6*farOf(d)*span
		same := func(name string, got, want *float64, tol float64) {
			t.Helper()
			if got != nil && math.IsNaN(*got) {
				got = nil
			}
			if (got == nil) != (want == nil) {
				t.Fatalf("set %d, %s: there %v, with the oracle %v\n%+v", k, name, got != nil, want != nil, d)
			}
			if got == nil {
				return
			}
			compared[name]++
			if !(math.Abs(*got-*want) <= tol) {
				t.Errorf("set %d, %s: %v, the oracle has %v\n%+v", k, name, *got, *want, d)
			}
		}
		plain := 1e-9 * size
		same("zero offset", f.ZeroOffset, &want.ZeroOffset, plain)
		same("highest", &f.AsRead.Highest.Value, &want.AsRead[0], plain)
		same("lowest", &f.AsRead.Lowest.Value, &want.AsRead[1], plain)
		same("highest after zero", &f.AfterZero.Highest.Value, &want.AfterZero[0], plain)
		same("lowest after zero", &f.AfterZero.Lowest.Value, &want.AfterZero[1], plain)
		if (f.Line == nil) != (want.Line == nil) {
			t.Fatalf("set %d: line %v", k, f.Line)
		}
		if f.Line == nil {
			continue
		}
		far := farOf(d)
		for i, v := range []*float64{&f.Line.Intercept, &f.Line.Slope, &f.Line.UIntercept, &f.Line.USlope} {
			// linregress has the line's scatter from 1 - r^2, which leaves half the digits.
			tol := []float64{1e-9 * far * size, 1e-9 * far, 1e-6 * far * far * size, 1e-6 * far * far}[i]
			same([]string{"intercept", "slope", "u(intercept)", "u(slope)"}[i], v, &want.Line[i], tol)
		}
		if len(f.EachHysteresis) != len(want.Hysteresis) {
			t.Fatalf("set %d: %d of hysteresis, the oracle has %d", k, len(f.EachHysteresis), len(want.Hysteresis))
		}
		for i, h := range want.Hysteresis {
			got := f.EachHysteresis[i]
			if float64(got.Cycle) != h[0] || math.Abs(got.At-h[1]) > plain {
				t.Fatalf("set %d: hysteresis %+v, the oracle has %v", k, got, h)
			}
			same("hysteresis", &got.Value, &h[2], plain*far)
		}
		for i, z := range want.ZeroReturn {
			same("zero return", f.ZeroReturn[i], z, plain*far)
		}
		same("pooled", f.Repeatability.PooledSD, want.Pooled, plain*far)
		same("range", f.Repeatability.LargestRange, want.Range, plain*far)
		if f.Repeatability.DoF != nil && *f.Repeatability.DoF != want.DoF || f.Repeatability.DoF == nil && want.DoF != 0 {
			t.Errorf("set %d: degrees of freedom, the oracle has %d", k, want.DoF)
		}
		for i, p := range want.Points {
			g := f.Points[i]
			for j, v := range []*float64{g.Average, g.Hysteresis, g.RangeUp, g.RangeDown, g.Repeatability, g.Reproducibility} {
				same([]string{"average", "mean hysteresis", "range up", "range down", "repeatability", "reproducibility"}[j], v, p[j], plain*far)
			}
		}
		whole := true // typed in whole numbers, or without noise: ties
		for i := range d.UUT {
			whole = whole && d.UUT[i] == math.Round(d.UUT[i])
		}
		for name, l := range map[string]*Deviation{"independent": f.Linearity.Independent, "zero_based": f.Linearity.ZeroBased,
			"terminal": f.Linearity.Terminal, "least_squares": f.Linearity.LeastSquares} {
			w := want.Lines[name]
			if l == nil {
				same(name, nil, w[0], 0)
				continue
			}
			same(name, &l.Value, w[0], 1e-8*size*far)
			// Noise of 1e-5 about 1e6 is 1e5 of the last place: the oracle's digits end.
			if s := f.Repeatability.PooledSD; s != nil && *s > 1e-6*span*min(far, 1e6) && !whole {
				same(name+", u", &l.Standard, w[1], 1e-7**s)
			}
		}
		if (f.Curvature == nil) != (want.Curve == nil) {
			t.Fatalf("set %d: curvature there %v", k, f.Curvature != nil)
		}
		if f.Curvature != nil {
			same("residual about the curve", &f.Curvature.Residual, want.Residual, plain*far)
			for i := range f.Curvature.Coefficients {
				same(fmt.Sprint("power ", i), &f.Curvature.Coefficients[i], &want.Curve[i], 1e-9*math.Pow(size, float64(1-i))*math.Pow(far, 4))
			}
		}
	}
	t.Logf("%d sets, compared: %v", len(sets), compared)
	for _, name := range []string{"reproducibility", "independent, u", "zero_based, u", "zero return", "power 3"} {
		if compared[name] < len(sets)/20 {
			t.Errorf("%s was compared %d times", name, compared[name])
		}
	}
}

// Polynomials against the exact solution in rationals, on designs that cost
// double precision up to all its digits: x far from zero, hardly apart, of
// uneven spacing, orders to ten.
func TestHostilePolynomials(t *testing.T) {
	r := rand.New(rand.NewPCG(41, 42))
	lost := 0.0
	for range 40 {
		order := r.IntN(11)
		n := order + 2 + r.IntN(12)
		at, wide := math.Pow(10, 5*r.Float64()-1), math.Pow(10, 4*r.Float64()-2)
		x, y := make([]float64, n), make([]float64, n)
		for i := range x {
			x[i] = at + wide*math.Pow(r.Float64(), 3)
			y[i] = r.NormFloat64()
		}
		f, err := FitPolynomial(x, y, order, Noise{})
		if err != nil {
			continue // some x are one, to what a double tells apart
		}
		var columns [][]*big.Rat
		for k := range order + 1 {
			columns = append(columns, powerOf(x, k))
		}
		b, sd := exact(columns, powerOf(y, 1))
		for k := range b {
			for _, d := range []float64{math.Abs(f.Coefficients[k]-b[k]) / sd[k], math.Abs(math.Sqrt(f.Covariance[k][k])-sd[k]) / sd[k]} {
				lost = max(lost, d)
				if !(d <= 1e-10) {
					t.Errorf("order %d, %d x about %g within %g, power %d: %v +- %v, exactly %v +- %v", order, n, at, wide, k, f.Coefficients[k], math.Sqrt(f.Covariance[k][k]), b[k], sd[k])
				}
			}
		}
	}
	t.Logf("largest difference %.2g standard uncertainties", lost)
}

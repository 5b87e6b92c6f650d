package fit

import (
	"errors"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"
	"testing"
)

type figure struct {
	name           string
	got, want, tol float64 // tol: relative
}

func compare(t *testing.T, all []figure) {
	t.Helper()
	for _, c := range all {
		if !(math.Abs(c.got-c.want) <= c.tol*math.Abs(c.want)) {
			t.Errorf("%s: %.16g, want %.16g", c.name, c.got, c.want)
		}
	}
}

const sources = "../../testdata/sources/"

// valuesOf reads what a source prints of its quantities, and what was computed
// from its data in more digits; NaN where either is blank.
func valuesOf(t *testing.T, path string) (printed, computed map[string]float64) {
	printed, computed = map[string]float64{}, map[string]float64{}
	for _, row := range rowsOf(t, sources+path) {
		for k, to := range []map[string]float64{printed, computed} {
			to[row[0]] = math.NaN()
			if row[k+1] != "" {
				to[row[0]] = number(t, row[k+1])
			}
		}
	}
	return printed, computed
}

// against holds figures to both columns: the printed one to half of its last
// digit, which tol gives by name, the computed one to 1e-9.
func against(t *testing.T, path string, got map[string]float64) {
	t.Helper()
	printed, computed := valuesOf(t, path)
	for _, row := range rowsOf(t, sources+path) {
		x, there := got[row[0]]
		if !there {
			t.Errorf("%s: nobody looked at %s", path, row[0])
			continue
		}
		delete(got, row[0])
		if want := computed[row[0]]; !math.IsNaN(want) && math.Abs(x-want) > 1e-9*math.Abs(want) && math.Abs(x-want) > 5*lastDigit(row[2]) {
			t.Errorf("%s, %s: %.14g, computed %v", path, row[0], x, want)
		}
		if want := printed[row[0]]; !math.IsNaN(want) && math.Abs(x-want) > 0.51*lastDigit(row[1]) {
			t.Errorf("%s, %s: %.14g, printed %s", path, row[0], x, row[1])
		}
	}
	for name := range got {
		t.Errorf("%s has no %s", path, name)
	}
}

// lastDigit is one unit of the last digit of a number as printed.
func lastDigit(text string) float64 {
	mantissa, exponent, _ := strings.Cut(text, "e")
	e, _ := strconv.Atoi(exponent)
	_, decimals, _ := strings.Cut(mantissa, ".")
	return math.Pow(10, float64(e-len(decimals)))
}

// thermometer is the source's, less 20 degC.
func thermometer(t *testing.T) (x, b []float64) {
	for _, row := range rowsOf(t, sources+"gum-h3/thermometer.csv") {
		x, b = append(x, number(t, row[0])-20), append(b, number(t, row[1]))
	}
	return x, b
}

// Source: testdata/sources/gum-h3, by the line and by the polynomial of first
// order, with a systematic 0.005 degC shared by all corrections.
func TestThermometer(t *testing.T) {
	x, b := thermometer(t)
	l, err := Line(x, b)
	if err != nil {
		t.Fatal(err)
	}
	f, err := FitPolynomial(x, b, 1, Noise{})
	if err != nil {
		t.Fatal(err)
	}
	same := make([]float64, len(x))
	for i := range same {
		same[i] = 0.005
	}
	g, err := FitPolynomial(x, b, 1, Noise{Common: [][]float64{same}})
	if err != nil {
		t.Fatal(err)
	}
	p, _ := f.Straight()
	for _, l := range []Straight{l, p} {
		at, u := l.At(10)
		against(t, "gum-h3/thermometer_values.csv", map[string]float64{
			"y1": l.Intercept, "u(y1)": l.UIntercept, "y2": l.Slope, "u(y2)": l.USlope, "r(y1 y2)": l.Covariance / l.UIntercept / l.USlope,
			"s": l.Residual, "sum of squares": l.Residual * l.Residual * float64(l.DoF), "b(30)": at, "u(b(30))": u,
			"u(y1) with 0.005": math.Sqrt(g.Covariance[0][0]), "its degrees of freedom": g.DegreesOfFreedom(0),
		})
	}
	if at, u := f.At(10); math.Abs(at+0.1493768127324772) > 1e-15 || math.Abs(u-0.004138595752854945) > 1e-15 {
		t.Errorf("at 30 degC by the polynomial: %v, %v", at, u)
	}
	// The slope keeps its own uncertainty; an offset does not move it.
	compare(t, []figure{
		{"u(y2)", math.Sqrt(g.Covariance[1][1]), l.USlope, 1e-13}, {"its degrees of freedom", g.DegreesOfFreedom(1), 9, 1e-12},
		{"offset moves the intercept", g.Shared[0][0], 0.005, 1e-14}, {"degrees of freedom", float64(g.DoF), 9, 0},
	})
	if math.Abs(g.Shared[0][1]) > 1e-17 {
		t.Errorf("an offset moves the slope by %v", g.Shared[0][1])
	}
}

// Source: testdata/sources/eurachem-a5.
func TestWhere(t *testing.T) {
	var x, y []float64
	for _, row := range rowsOf(t, sources+"eurachem-a5/cadmium.csv") {
		x, y = append(x, number(t, row[0])), append(y, number(t, row[1]))
	}
	l, err := Line(x, y)
	if err != nil {
		t.Fatal(err)
	}
	c, u, err := l.Where((.0712+.0716)/2, 2)
	if err != nil {
		t.Fatal(err)
	}
	against(t, "eurachem-a5/cadmium_values.csv", map[string]float64{
		"slope": l.Slope, "intercept": l.Intercept, "S": l.Residual, "c of 0.0712 and 0.0716": c, "u(c)": u,
	})
	if _, _, err := l.Where(1, 0); !errors.Is(err, ErrNoLine) {
		t.Errorf("no further reading: %v", err)
	}
	if _, _, err := (Straight{}).Where(1, 1); !errors.Is(err, ErrNoLine) {
		t.Errorf("no slope: %v", err)
	}
}

// Source: testdata/sources/pearson-york.
func TestYork(t *testing.T) {
	var x, y, ux, uy []float64
	for _, row := range rowsOf(t, sources+"pearson-york/pearson_york.csv") {
		x, y = append(x, number(t, row[0])), append(y, number(t, row[1]))
		ux, uy = append(ux, 1/math.Sqrt(number(t, row[2]))), append(uy, 1/math.Sqrt(number(t, row[3])))
	}
	l, err := York(x, y, ux, uy)
	if err != nil {
		t.Fatal(err)
	}
	against(t, "pearson-york/pearson_york_values.csv", map[string]float64{
		"a": l.Intercept, "b": l.Slope, "u(a)": l.UIntercept, "u(b)": l.USlope, "S": l.ChiSquare,
	})
	// Laws: exchanged axes give the same line; without errors in x it is the
	// weighted line.
	back, err := York(y, x, uy, ux)
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{{"1/b", 1 / back.Slope, l.Slope, 1e-12}, {"-a/b", -back.Intercept / back.Slope, l.Intercept, 1e-12}, {"S", back.ChiSquare, l.ChiSquare, 1e-12}})
	only, err := York(x, y, make([]float64, len(x)), uy)
	if err != nil {
		t.Fatal(err)
	}
	w, err := FitPolynomial(x, y, 1, Noise{SD: uy})
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{
		{"weighted a", only.Intercept, w.Coefficients[0], 1e-12}, {"weighted b", only.Slope, w.Coefficients[1], 1e-12},
		{"its u(b)", only.USlope, math.Sqrt(w.Covariance[1][1]), 1e-12}, {"its covariance", only.Covariance, w.Covariance[0][1], 1e-12},
		{"its residual", only.Residual, w.Residual, 1e-12},
	})
	for name, spoil := range map[string]func() (Both, error){
		"short":       func() (Both, error) { return York(x, y, ux[1:], uy) },
		"negative":    func() (Both, error) { return York(x, y, []float64{-1, 1, 1, 1, 1, 1, 1, 1, 1, 1}, uy) },
		"no noise":    func() (Both, error) { return York(x, y, make([]float64, 10), make([]float64, 10)) },
		"not finite":  func() (Both, error) { return York(x, y, ux, []float64{math.NaN(), 1, 1, 1, 1, 1, 1, 1, 1, 1}) },
		"all x equal": func() (Both, error) { return York(make([]float64, 10), y, ux, uy) },
	} {
		if l, err := spoil(); err == nil || l != (Both{}) {
			t.Errorf("%s: %+v, %v", name, l, err)
		}
	}
}

// A certificate's scale of 2e-4, shared by all points, goes into the slope
// whole: u^2 = s^2/Sxx + b^2 u^2, to the exclusion of the intercept. By hand.
func TestSharedScale(t *testing.T) {
	var x, y, scale, offset, sd []float64
	r := rand.New(rand.NewPCG(7, 8))
	for i := range 42 {
		p := 50 * float64(i%7)
		x, y = append(x, p), append(y, 0.3+1.002*p+0.05*r.NormFloat64())
		scale, offset, sd = append(scale, 2e-4*1.002*p), append(offset, 0.03), append(sd, 0.05)
	}
	const sxx = 42 * 1e4
	stated, err := FitPolynomial(x, y, 1, Noise{SD: sd, Common: [][]float64{scale, offset}})
	if err != nil {
		t.Fatal(err)
	}
	line, err := Line(x, y)
	if err != nil {
		t.Fatal(err)
	}
	found, err := FitPolynomial(x, y, 1, Noise{Common: [][]float64{scale, offset}})
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{
		{"slope", stated.Coefficients[1], line.Slope, 1e-13}, {"intercept", stated.Coefficients[0], line.Intercept, 1e-12},
		{"u(slope), noise stated", math.Sqrt(stated.Covariance[1][1]), math.Sqrt(0.05*0.05/sxx + 2.004e-4*2.004e-4), 1e-12},
		{"u(intercept), noise stated", math.Sqrt(stated.Covariance[0][0]), math.Sqrt(0.05*0.05*(1./42+150.*150/sxx) + 9e-4), 1e-12},
		{"u(slope), noise found", math.Sqrt(found.Covariance[1][1]), math.Hypot(line.USlope, 2.004e-4), 1e-12},
		{"u(intercept), noise found", math.Sqrt(found.Covariance[0][0]), math.Hypot(line.UIntercept, 0.03), 1e-12},
		{"covariance", found.Covariance[0][1], line.Covariance, 1e-10},
		{"residual", found.Residual, line.Residual, 1e-13}, {"degrees of freedom", float64(found.DoF), 40, 0},
		{"scale moves the slope", stated.Shared[0][1], 2.004e-4, 1e-12}, {"offset moves the intercept", stated.Shared[1][0], 0.03, 1e-12},
		{"the same, noise found", found.Shared[0][1], 2.004e-4, 1e-12},
	})
}

// Two shared errors of which the second is no part of the model: by hand, for
// y = b with V = I + cc', c = (1, 0, 0): b = (y1/2 + y2 + y3)/2.5.
func TestSharedByHand(t *testing.T) {
	one := [][]float64{{1, 1, 1}}
	m, err := Linear(one, []float64{4, 1, 2}, Noise{SD: one[0], Common: [][]float64{{1, 0, 0}}})
	if err != nil {
		t.Fatal(err)
	}
	// r = (2, -1, 0), r'V^-1 r = 2 + 1 + 0 with b = 2.
	compare(t, []figure{
		{"b", m.Coefficients[0], 2, 1e-15}, {"variance", m.Covariance[0][0], 0.4, 1e-15}, {"shared", m.Shared[0][0], 0.2, 1e-15},
		{"residual", m.Residual, math.Sqrt(1.5), 1e-15}, {"degrees of freedom", float64(m.DoF), 2, 0},
	})
	// Noise found: the first reading is spent on its own error, so s^2 is that
	// of the other two; b is the plain mean, the shared error moves it by 1/3.
	m, err = Linear(one, []float64{4, 1, 2}, Noise{Common: [][]float64{{1, 0, 0}}})
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{
		{"b", m.Coefficients[0], 7. / 3, 1e-15}, {"residual", m.Residual, math.Sqrt(0.5), 1e-14}, {"degrees of freedom", float64(m.DoF), 1, 0},
		{"shared", m.Shared[0][0], 1. / 3, 1e-15}, {"variance", m.Covariance[0][0], 0.5/3 + 1./9, 1e-14},
		{"effective degrees of freedom", m.DegreesOfFreedom(0), (0.5/3 + 1./9) * (0.5/3 + 1./9) / (0.25 / 9), 1e-13},
	})
}

// Weights known but for a factor give the figures of the same weights times
// anything; stated ones scale the covariance. By hand: y = b x through the
// origin with SD proportional to x is the mean of y/x.
func TestRelative(t *testing.T) {
	x := [][]float64{{1, 2, 4}}
	y := []float64{1.1, 1.8, 4.4}
	for _, by := range []float64{1, 1e-9, 1e7} {
		sd := []float64{by, 2 * by, 4 * by}
		m, err := Linear(x, y, Noise{SD: sd, Relative: true})
		if err != nil {
			t.Fatal(err)
		}
		// SD of 1.1, 0.9, 1.1.
		s := math.Sqrt((1.1-3.1/3)*(1.1-3.1/3)*2+(0.9-3.1/3)*(0.9-3.1/3)) / math.Sqrt2
		compare(t, []figure{{"b", m.Coefficients[0], 3.1 / 3, 1e-14}, {"u(b)", math.Sqrt(m.Covariance[0][0]), s / math.Sqrt(3), 1e-13}, {"s", m.Residual, s / by, 1e-13}})
		m, err = Linear(x, y, Noise{SD: sd})
		if err != nil {
			t.Fatal(err)
		}
		compare(t, []figure{{"b", m.Coefficients[0], 3.1 / 3, 1e-14}, {"u(b)", math.Sqrt(m.Covariance[0][0]), by / math.Sqrt(3), 1e-13}})
	}
}

func TestLinearRefuses(t *testing.T) {
	x := [][]float64{{1, 1, 1, 1}, {0, 1, 2, 3}}
	y := []float64{1, 2, 3, 5}
	for name, c := range map[string]struct {
		x     [][]float64
		y     []float64
		noise Noise
		want  error
	}{
		"no columns":             {nil, y, Noise{}, ErrModel},
		"no readings":            {[][]float64{{}}, nil, Noise{}, ErrModel},
		"unequal":                {[][]float64{{1, 2}}, y, Noise{}, ErrData},
		"not finite":             {[][]float64{{1, 2, math.NaN(), 3}}, y, Noise{}, ErrData},
		"y too large":            {x, []float64{1, 2, 3, 1e200}, Noise{}, ErrData},
		"dependent":              {[][]float64{{1, 2, 3, 4}, {2, 4, 6, 8}}, y, Noise{}, ErrModel},
		"a column of zeros":      {[][]float64{{1, 2, 3, 4}, {0, 0, 0, 0}}, y, Noise{}, ErrModel},
		"none to spare":          {[][]float64{{1, 1}, {0, 1}}, y[:2], Noise{}, ErrModel},
		"spent on shared errors": {x, y, Noise{Common: [][]float64{{1, 0, 0, 0}, {0, 1, 0, 0}}}, ErrModel},
		"SD short":               {x, y, Noise{SD: []float64{1}}, ErrData},
		"SD zero":                {x, y, Noise{SD: []float64{1, 1, 0, 1}}, ErrData},
		"SD negative":            {x, y, Noise{SD: []float64{1, 1, -1, 1}}, ErrData},
		"SD beyond hope":         {x, y, Noise{SD: []float64{1, 1, 1e-200, 1}}, ErrData},
		"relative to nothing":    {x, y, Noise{Relative: true}, ErrData},
		"shared short":           {x, y, Noise{Common: [][]float64{{1}}}, ErrData},
		"shared not finite":      {x, y, Noise{Common: [][]float64{{1, 2, 3, math.Inf(1)}}}, ErrData},
	} {
		if m, err := Linear(c.x, c.y, c.noise); !errors.Is(err, c.want) || m.Coefficients != nil {
			t.Errorf("%s: %+v, %v", name, m, err)
		}
	}
	for name, c := range map[string]struct {
		x     []float64
		order int
	}{"order below zero": {[]float64{1, 2, 3, 4}, -1}, "two distinct x for three": {[]float64{1, 2, 1, 2}, 2}, "equal x": {[]float64{1, 1, 1, 1}, 1}, "unequal": {[]float64{1}, 1}} {
		if f, err := FitPolynomial(c.x, y, c.order, Noise{}); !errors.Is(err, ErrModel) || f.Coefficients != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
	// With its noise stated, a line through two readings has a covariance and no
	// degree of freedom left.
	m, err := Linear([][]float64{{1, 1}, {0, 1}}, y[:2], Noise{SD: []float64{1, 1}})
	if err != nil || m.DoF != 0 || m.Residual != 0 {
		t.Fatalf("%+v, %v", m, err)
	}
	compare(t, []figure{{"u(intercept)", m.Covariance[0][0], 1, 1e-15}, {"u(slope)", m.Covariance[1][1], 2, 1e-15}})
	// Equal x carry a constant: their mean.
	f, err := FitPolynomial([]float64{7, 7, 7}, []float64{1, 2, 6}, 0, Noise{})
	if err != nil {
		t.Fatal(err)
	}
	at, u := f.At(7)
	compare(t, []figure{{"mean", at, 3, 1e-15}, {"u", u, math.Sqrt(7. / 3), 1e-14}})
	if y, u := (Polynomial{}).At(3); y != 0 || u != 0 {
		t.Error("the zero polynomial")
	}
}

func TestLineRefuses(t *testing.T) {
	if l, err := Line([]float64{1, 1, 1}, []float64{1, 2, 3}); err == nil {
		t.Errorf("equal x gave %v", l)
	}
	if l, err := Line([]float64{1, 2}, []float64{1, 2}); err == nil {
		t.Errorf("two readings gave %v", l)
	}
}

// The description in float64 is the polynomial in 32 digits, to what readings
// of such sizes hold.
func TestDescribe(t *testing.T) {
	r := rand.New(rand.NewPCG(11, 12))
	for range 300 {
		n, order := 6+r.IntN(40), r.IntN(4)
		x, y := make([]float64, n), make([]float64, n)
		at, wide := 400*r.NormFloat64(), math.Pow(10, 4*r.Float64()-1)
		for i := range x {
			x[i] = at + wide*r.Float64()
			y[i] = 1 + 1.01*x[i] + r.NormFloat64()
		}
		got, err := describe(x, y, order)
		if err != nil {
			t.Fatal(err)
		}
		want, err := FitPolynomial(x, y, order, Noise{})
		if err != nil {
			t.Fatal(err)
		}
		// Powers of x far from zero cancel: one digit in the values costs as many
		// in the coefficients as their uncertainties exceed those of the values.
		tol := 1e-12 * math.Pow(1+math.Abs(at)/wide, float64(order))
		for i := range want.Coefficients {
			u := math.Sqrt(want.Covariance[i][i])
			if math.Abs(got.Coefficients[i]-want.Coefficients[i]) > tol*(math.Abs(want.Coefficients[i])+u) {
				t.Errorf("at %v over %v, order %d, power %d: %v, want %v", at, wide, order, i, got.Coefficients[i], want.Coefficients[i])
			}
			for j := range want.Coefficients {
				uu := u * math.Sqrt(want.Covariance[j][j])
				if math.Abs(got.Covariance[i][j]-want.Covariance[i][j]) > tol*uu {
					t.Errorf("covariance %d %d: %v, want %v", i, j, got.Covariance[i][j], want.Covariance[i][j])
				}
			}
		}
		if math.Abs(got.Residual-want.Residual) > 1e-10*want.Residual || got.DoF != want.DoF {
			t.Errorf("residual %v, want %v", got.Residual, want.Residual)
		}
	}
	for name, f := range map[string]func() (Model, error){
		"two distinct x for three": func() (Model, error) { return describe([]float64{1, 2, 1, 2, 1}, make([]float64, 5), 2) },
		"equal x":                  func() (Model, error) { return describe([]float64{1, 1, 1, 1, 1}, make([]float64, 5), 1) },
		"none to spare":            func() (Model, error) { return describe([]float64{1, 2, 3}, make([]float64, 3), 2) },
		"fourth order":             func() (Model, error) { return describe(make([]float64, 9), make([]float64, 9), 4) },
	} {
		if m, err := f(); !errors.Is(err, ErrModel) || m.Coefficients != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
}

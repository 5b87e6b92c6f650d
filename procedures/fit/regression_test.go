package fit

import (
	"errors"
	"math"
	"math/rand/v2"
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

// thermometer: source GUM (JCGM 100:2008) H.3; readings less 20 degC, and
// corrections. The full digits wanted of it were computed from the printed
// data in exact rational sums; the page prints -0.1494, 0.0041 at 30 degC.
func thermometer() (x, b []float64) {
	x = []float64{21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511}
	for i := range x {
		x[i] -= 20
	}
	return x, []float64{-.171, -.169, -.166, -.159, -.164, -.165, -.156, -.157, -.159, -.161, -.160}
}

func TestThermometer(t *testing.T) {
	x, b := thermometer()
	l, err := Line(x, b)
	if err != nil {
		t.Fatal(err)
	}
	f, err := FitPolynomial(x, b, 1, Noise{})
	if err != nil {
		t.Fatal(err)
	}
	p, _ := f.Straight()
	for _, l := range []Straight{l, p} {
		at, u := l.At(10)
		compare(t, []figure{
			{"y1", l.Intercept, -0.17120379013134998, 1e-13}, {"u(y1)", l.UIntercept, 0.0028775978351599537, 1e-13},
			{"y2", l.Slope, 0.002182697739887278, 1e-12}, {"u(y2)", l.USlope, 0.0006679387732278317, 1e-13},
			{"r", l.Covariance / l.UIntercept / l.USlope, -0.9304296030934459, 1e-13}, {"s", l.Residual, 0.003497563963505284, 1e-13},
			{"degrees of freedom", float64(l.DoF), 9, 0}, {"sum of squares", l.Residual * l.Residual * 9, 1.1009658310929713e-4, 1e-13},
			{"b(30)", at, -0.1493768127324772, 1e-13}, {"u(b(30))", u, 0.004138595752854945, 1e-12},
		})
	}
	if at, u := f.At(10); math.Abs(at+0.1493768127324772) > 1e-15 || math.Abs(u-0.004138595752854945) > 1e-15 {
		t.Errorf("at 30 degC by the polynomial: %v, %v", at, u)
	}
	// A systematic 0.005 degC shared by all corrections: u(y1) = 0.0058 with 145
	// degrees of freedom; the slope keeps its own.
	same := make([]float64, len(x))
	for i := range same {
		same[i] = 0.005
	}
	g, err := FitPolynomial(x, b, 1, Noise{Common: [][]float64{same}})
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{
		{"u(y1)", math.Sqrt(g.Covariance[0][0]), 0.00576893138292676, 1e-13}, {"its degrees of freedom", g.DegreesOfFreedom(0), 145.38, 1e-4},
		{"u(y2)", math.Sqrt(g.Covariance[1][1]), 0.0006679387732278317, 1e-13}, {"its degrees of freedom", g.DegreesOfFreedom(1), 9, 1e-12},
		{"offset moves the intercept", g.Shared[0][0], 0.005, 1e-14}, {"degrees of freedom", float64(g.DoF), 9, 0},
	})
	if math.Abs(g.Shared[0][1]) > 1e-17 {
		t.Errorf("an offset moves the slope by %v", g.Shared[0][1])
	}
}

// Source: EURACHEM/CITAC guide QUAM, example A5 (cadmium by atomic
// absorption), data; S, c and u(c) computed elsewhere from them (the guide
// prints 0.26 and 0.018).
func TestWhere(t *testing.T) {
	y := []float64{.028, .029, .029, .084, .083, .081, .135, .131, .133, .180, .181, .183, .215, .230, .216}
	var x []float64
	for _, c := range []float64{.1, .3, .5, .7, .9} {
		x = append(x, c, c, c)
	}
	l, err := Line(x, y)
	if err != nil {
		t.Fatal(err)
	}
	c, u, err := l.Where((.0712+.0716)/2, 2)
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{
		{"slope", l.Slope, 0.2410, 1e-4}, {"intercept", l.Intercept, 0.0087, 4e-3}, {"S", l.Residual, 0.005485645604, 1e-9},
		{"c", c, 0.2601659751, 1e-9}, {"u(c)", u, 0.0178446111, 1e-8},
	})
	if _, _, err := l.Where(1, 0); !errors.Is(err, ErrNoLine) {
		t.Errorf("no further reading: %v", err)
	}
	if _, _, err := (Straight{}).Where(1, 1); !errors.Is(err, ErrNoLine) {
		t.Errorf("no slope: %v", err)
	}
}

// Source: Pearson's data (Phil. Mag. 2 (1901) 559) with York's weights (Can. J.
// Phys. 44 (1966) 1079); full digits computed elsewhere with the same method;
// literature: 5.47991 and -0.48053.
func TestYork(t *testing.T) {
	x := []float64{0, .9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4}
	y := []float64{5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5}
	ux := []float64{1000, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1}
	uy := []float64{1, 1.8, 4, 8, 20, 20, 70, 70, 100, 500}
	for i := range ux {
		ux[i], uy[i] = 1/math.Sqrt(ux[i]), 1/math.Sqrt(uy[i])
	}
	l, err := York(x, y, ux, uy)
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{
		{"a", l.Intercept, 5.479910224033, 1e-12}, {"b", l.Slope, -0.4805334074462, 1e-12},
		{"u(a)", l.UIntercept, 0.2949707354931, 1e-11}, {"u(b)", l.USlope, 0.05798500900077, 1e-11}, {"S", l.ChiSquare, 11.86635319406, 1e-11},
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

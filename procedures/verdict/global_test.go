package verdict

import (
	"errors"
	"math"
	"testing"

	"kymobench/procedures/uncertainty"
)

func both(t float64) Limit { return Limit{Low: side(-t), High: side(t)} }

// Consumer's and producer's risks. Sources: (a) T = 1, U = 2u = 1/TUR, prior
// normal with 95 % inside, and the zero-mean normal priors at 4:1: computed
// outside, integrals with scipy 1.10.1; with A = T - U; the often-quoted 0.8 %
// is SD T/2; the worst prior at 4:1 is SD 1.0762 T. (b) JCGM 106:2012, 9.5.4,
// ball bearings, printed 0.8 % and 0.1 %, and more digits computed; (c) JCGM
// 106:2012, 9.5.2 by in-tolerance share at SD of the process over u of 4,
// computed; (d) a case of our own, computed with scipy.
func TestGlobalRisk(t *testing.T) {
	const sd95 = 1 / 1.959963984540054
	bearing, at := Limit{High: side(2)}, func(a float64) Limit { return Limit{High: &a} }
	for _, c := range []struct {
		name               string
		p                  Prior
		u                  float64
		tolerance, accept  Limit
		consumer, producer float64
		tol                float64 // half a digit of what is stated, of a limit or of a risk
	}{
		{"a 1:1", NormalPrior{0, sd95}, 1. / 2, both(1), both(1), .018011555154, .129571580695, 1e-12},
		{"a 2:1", NormalPrior{0, sd95}, 1. / 4, both(1), both(1), .013373408282, .041775295754, 1e-12},
		{"a 4:1", NormalPrior{0, sd95}, 1. / 8, both(1), both(1), .008582664809, .015536513031, 1e-12},
		{"a 10:1", NormalPrior{0, sd95}, 1. / 20, both(1), both(1), .004060169370, .005162455491, 1e-12},
		{"a 4:1 guarded", NormalPrior{0, sd95}, 1. / 8, both(1), both(0.75), .0002077027, .1035719259, 1e-10},
		{"a worst", NormalPrior{0, 1.0762}, 1. / 8, both(1), both(1), .0223820486, math.NaN(), 1e-10},
		{"a often quoted", NormalPrior{0, 0.5}, 1. / 8, both(1), both(1), .0080060848, math.NaN(), 1e-10},
		{"b", GammaPrior{4, 4}, 0.25, bearing, bearing, 0.008019112, 0.017444570, 1e-9},
		{"b guarded", GammaPrior{4, 4}, 0.25, bearing, at(1.671829), 0.001, 0.075493876, 2e-7},
		{"d", NormalPrior{0, 0.12}, 0.04, both(0.2), both(0.2), 0.018942, 0.037208, 1e-6},
		{"d guarded", NormalPrior{0, 0.12}, 0.04, both(0.2), both(0.12), 0.000469, 0.247670, 1e-6},
		// Far more and far less certain than the process is wide.
		{"nearly certain", NormalPrior{0, sd95}, 1e-6, both(1), both(1), 0, 0, 1e-6},
		{"knows nothing", NormalPrior{0, sd95}, 1e6, both(1), both(1), 0, 0.95, 1e-6},
	} {
		r, err := GlobalRisk(c.p, c.u, 0, c.tolerance, c.accept)
		if err != nil || math.Abs(r.Consumer-c.consumer) > c.tol || math.Abs(r.Producer-c.producer) > c.tol || r.Error > 1e-9 {
			t.Errorf("%s: %+v, %v; want %v and %v", c.name, r, err, c.consumer, c.producer)
		}
	}
	r, err := GlobalRisk(GammaPrior{4, 4}, 0.25, 0, bearing, bearing)
	if err != nil || math.Abs(r.Outside-0.042380112) > 1e-9 {
		t.Errorf("out of tolerance: %+v, %v", r, err)
	}
	for share, want := range map[float64]float64{0.60: 4.83860, 0.70: 3.92234, 0.80: 2.85583, 0.90: 1.59995, 0.95: 0.87101, 0.99: 0.19992} {
		sd := 1 / uncertainty.StudentQuantile((1+share)/2, 0)
		r, err := GlobalRisk(NormalPrior{0, sd}, sd/4, 0, both(1), both(1))
		if err != nil || math.Abs(100*r.Consumer-want) > 1e-5 || math.Abs(r.Outside-(1-share)) > 1e-12 {
			t.Errorf("%v in tolerance: %+v, %v", share, r, err)
		}
	}
}

// No zero-mean normal prior is worse at 4:1 than SD 1.0762 T: 4:1 promises
// 2.2 %, not 2 %.
func TestWorstPrior(t *testing.T) {
	risk := func(sd float64) float64 {
		r, err := GlobalRisk(NormalPrior{0, sd}, 1./8, 0, both(1), both(1))
		if err != nil {
			t.Fatal(err)
		}
		return r.Consumer
	}
	worst := risk(1.0762)
	for sd := 0.1; sd < 12; sd *= 1.07 {
		if risk(sd) > worst {
			t.Errorf("SD %v: %v", sd, risk(sd))
		}
	}
	if risk(1.0762+2e-3) > worst || risk(1.0762-2e-3) > worst {
		t.Error("the worst is elsewhere")
	}
}

// Laws: accepted right and wrong, rejected right and wrong make one; neither
// unit nor sign nor a shift of all counts; more uncertain is riskier; what is
// neither one nor the other is refused.
func TestGlobalLaws(t *testing.T) {
	for _, dof := range []float64{0, 3, 12} {
		a, err := GlobalRisk(NormalPrior{0.2, 0.6}, 0.2, dof, Limit{Low: side(-1), High: side(1.3)}, Limit{Low: side(-0.7), High: side(1)})
		if err != nil {
			t.Fatal(err)
		}
		b, err := GlobalRisk(NormalPrior{-2 + 5, 6}, 2, dof, Limit{Low: side(-13 + 5), High: side(10 + 5)}, Limit{Low: side(-10 + 5), High: side(7 + 5)})
		if err != nil || math.Abs(a.Consumer-b.Consumer) > 1e-12 || math.Abs(a.Producer-b.Producer) > 1e-12 || math.Abs(a.Accepted-b.Accepted) > 1e-12 {
			t.Errorf("%+v and mirrored, shifted, scaled %+v, %v", a, b, err)
		}
		if dof > 0 {
			continue
		}
		// Accepted, as the sum of two normals has it: SD sqrt(0.6^2 + 0.2^2).
		s := math.Hypot(0.6, 0.2)
		want := uncertainty.StudentBelow(0.8/s, 0) - uncertainty.StudentBelow(-0.9/s, 0)
		if math.Abs(a.Accepted-want) > 1e-12 || math.Abs(a.OfAccepted()-a.Consumer/want) > 1e-12 {
			t.Errorf("accepted %v, want %v", a.Accepted, want)
		}
	}
	l := both(1)
	for name, f := range map[string]func() (Risks, error){
		"SD":       func() (Risks, error) { return GlobalRisk(NormalPrior{0, 0}, 1, 0, l, l) },
		"shape":    func() (Risks, error) { return GlobalRisk(GammaPrior{0.5, 1}, 1, 0, l, l) },
		"u":        func() (Risks, error) { return GlobalRisk(NormalPrior{0, 1}, 0, 0, l, l) },
		"no limit": func() (Risks, error) { return GlobalRisk(NormalPrior{0, 1}, 1, 0, Limit{}, l) },
		"reversed": func() (Risks, error) { return GlobalRisk(NormalPrior{0, 1}, 1, 0, l, both(-1)) },
		"nothing left": func() (Risks, error) {
			a, err := Acceptance(l, 1.1)
			if a.Low != nil {
				t.Error("a limit all the same")
			}
			return Risks{}, err
		},
	} {
		if r, err := f(); !errors.Is(err, ErrPrior) || r != (Risks{}) {
			t.Errorf("%s: %+v, %v", name, r, err)
		}
	}
	if a, err := Acceptance(l, 0.25); err != nil || *a.Low != -0.75 || *a.High != 0.75 {
		t.Errorf("%+v, %v", a, err)
	}
}

func equal(n int, rho float64) uncertainty.Matrix {
	m := uncertainty.Matrix{N: n, Data: make([]float64, n*n)}
	for i := range m.Data {
		m.Data[i] = rho
	}
	for i := range n {
		m.Data[i*n+i] = 1
	}
	return m
}

// Seven points at 4:1 with 95 % inside: .0411 when all errors are independent,
// .0160 when true errors correlate by 0.9 and measurements by 0.8 (computed
// outside, digits as stated). Independent, the single ones multiply.
func TestJointGlobalRisk(t *testing.T) {
	one := Judged{NormalPrior{0, 1 / 1.959963984540054}, 1. / 8, both(1), both(1)}
	var seven []Judged
	for range 7 {
		seven = append(seven, one)
	}
	for _, c := range []struct{ between, measuring, want float64 }{{0, 0, 0.0411}, {0.9, 0.8, 0.0160}} {
		r, err := JointGlobalRisk(seven, equal(7, c.between), equal(7, c.measuring), uncertainty.RectangleSettings{Seed: 1, Tolerance: 1e-3})
		if err != nil || math.Abs(r.Consumer-c.want) > 5e-5+r.Error {
			t.Errorf("%+v: %+v, %v", c, r, err)
		}
		if c.between == 0 {
			p, accepted, outside := 0.008582664809, 1-0.05-0.015536513031+0.008582664809, 0.05
			want := math.Pow(accepted, 7) - math.Pow(accepted-p, 7)
			if math.Abs(r.Consumer-want) > r.Error || math.Abs(r.Accepted-math.Pow(accepted, 7)) > r.Error || math.Abs(r.Outside-(1-math.Pow(1-outside, 7))) > r.Error {
				t.Errorf("independent: %+v, want %v", r, want)
			}
		}
	}
	// One figure is GlobalRisk.
	r, err := JointGlobalRisk(seven[:1], equal(1, 0), equal(1, 0), uncertainty.RectangleSettings{})
	if err != nil || math.Abs(r.Consumer-.008582664809) > 1e-9 || math.Abs(r.Producer-.015536513031) > 1e-9 {
		t.Errorf("one: %+v, %v", r, err)
	}
	if _, err := JointGlobalRisk(seven, equal(6, 0), equal(7, 0), uncertainty.RectangleSettings{}); !errors.Is(err, ErrJoint) {
		t.Error(err)
	}
}

// Joint risk of what was measured: one figure is itself, two by the closed form
// of the bivariate normal, many of one error are one, independent ones multiply,
// those far inside do not count.
func TestJointRisk(t *testing.T) {
	l := Limit{High: side(1)}
	judged := func(y ...float64) []Judgement {
		var out []Judgement
		for _, y := range y {
			out = append(out, Decide(y, Known(0.5, 0, 1), l, Simple, 0))
		}
		return out
	}
	const at1, at2 = 0.15865525393145707, 0.02275013194817921
	for _, c := range []struct {
		name  string
		j     []Judgement
		rho   float64
		want  float64
		exact float64
	}{
		{"one", judged(0.5), 0, at1, 1e-13},
		{"two, independent", judged(0.5, 0), 0, 1 - (1-at1)*(1-at2), 1e-12},
		{"two at their limits", judged(1, 1), 0.5, 1 - (0.25 + math.Asin(0.5)/(2*math.Pi)), 1e-12},
		{"three at their limits", judged(1, 1, 1), 0.5, 0.75, 0},
		{"nine of one error", judged(0.5, 0.5, 0.5, 0.5, 0.5, 0.5, 0, 0, -5), 1, at1, 1e-12},
		{"five, independent", judged(0.5, 0.5, 0.5, 0.5, 0), 0, 1 - math.Pow(1-at1, 4)*(1-at2), 0},
		{"far inside", judged(-9, -9, -9), 0.5, 0, 1e-12},
	} {
		r, err := JointRisk(c.j, equal(len(c.j), c.rho), uncertainty.RectangleSettings{Seed: 4})
		if err != nil || math.Abs(r.Outside-c.want) > math.Max(c.exact, r.Error)+1e-13 || math.Abs(r.Inside+r.Outside-1) > 1e-12 ||
			r.Least > r.Outside || r.Outside > r.Most {
			t.Errorf("%s: %+v, %v; want %v", c.name, r, err, c.want)
		}
	}
	// Student's t keeps its own probability.
	few := Decide(0, Known(0.5, 3, 1.59), l, Simple, 0)
	r, err := JointRisk([]Judgement{few}, equal(1, 0), uncertainty.RectangleSettings{})
	if err != nil || math.Abs(r.Outside-few.WrongAccept) > 1e-13 {
		t.Errorf("t: %+v, %v; want %v", r, err, few.WrongAccept)
	}
	none := Decide(math.NaN(), Known(1, 0, 2), l, Simple, 0)
	if _, err := JointRisk([]Judgement{few, none}, equal(2, 0), uncertainty.RectangleSettings{}); !errors.Is(err, ErrJoint) {
		t.Error(err)
	}
	if _, err := JointRisk([]Judgement{few}, equal(2, 0), uncertainty.RectangleSettings{}); !errors.Is(err, ErrJoint) {
		t.Error(err)
	}
}

func BenchmarkGlobalRisk(b *testing.B) {
	for b.Loop() {
		if _, err := GlobalRisk(NormalPrior{0, 0.51}, 1./8, 0, both(1), both(1)); err != nil {
			b.Fatal(err)
		}
	}
}

package results

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"strings"
	"testing"

	"kymobench/procedures/pulse"
	"kymobench/procedures/recorded"
)

// releases computes the results of some steps of 100 mmHg through a line,
// written as a file from the textbook answer below a damping ratio of 1.
func releases(t *testing.T, r *rand.Rand, fn, zeta, noise float64, o recorded.StepOptions) Results {
	t.Helper()
	var b strings.Builder
	b.WriteString("time_s,pressure_mmHg\n")
	w, root := 2*math.Pi*fn, math.Sqrt(1-zeta*zeta)
	phase := r.Float64() / 500
	for i := range 2000 {
		at := float64(i) / 500
		p := 100.0
		for k, sign := range []float64{-1, 1, -1} {
			if x := w * (at - 1.2*float64(k) - 0.6 - phase); x > 0 {
				p += sign * 100 * (1 - math.Exp(-zeta*x)*(math.Cos(root*x)+zeta/root*math.Sin(root*x)))
			}
		}
		fmt.Fprintf(&b, "%.3f,%.3f\n", at, p+noise*r.NormFloat64())
	}
	o.Edge = "0"
	events, err := recorded.Step("trace.csv", strings.NewReader(b.String()), o)
	if err != nil {
		t.Fatal(err)
	}
	res, err := Compute(events)
	if err != nil {
		t.Fatal(err)
	}
	return res
}

// The 95 % intervals of what follows for a pulse hold the truth as often as
// they promise: errors at 120/min and the fastest rate, lines and noises drawn
// at random. KYMOBENCH_FULL=1 takes 600 lines.
func TestPulseFiguresCover(t *testing.T) {
	n := 12
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		n = 600
	}
	r := rand.New(rand.NewPCG(12, 6))
	inside, asked := map[string]int{}, map[string]int{}
	for range n {
		fn, zeta := 8+22*r.Float64(), 0.15+0.75*r.Float64()
		res := releases(t, r, fn, zeta, 0.1+0.4*r.Float64(), recorded.StepOptions{})
		if res.Step.Pulse == nil {
			t.Fatalf("%g Hz, %g: %v", fn, zeta, res.Step.Combined.Reasons)
		}
		if !res.Step.Response.Agrees {
			t.Errorf("%g Hz, %g: %s", fn, zeta, res.Step.Response.Text)
		}
		for i, w := range pulse.Shapes() {
			reach, err := pulse.NewReach(w, pulse.Tolerance{Absolute: 2, Share: 0.02})
			if err != nil {
				t.Fatal(err)
			}
			s := res.Step.Pulse.Shapes[i]
			hold := func(name string, f DerivedFigure, want float64) {
				asked[name]++
				if f.Interval[0] <= want && want <= f.Interval[1] {
					inside[name]++
				}
			}
			e := w.Through(fn, zeta, 120)
			hold("systolic", s.Errors[4].Systolic, e.Systolic)
			hold("diastolic", s.Errors[4].Diastolic, e.Diastolic)
			if rate := reach.Rate(fn, zeta); rate > 0 && !math.IsInf(rate, 1) {
				hold("fastest rate", s.Fastest, rate)
			}
		}
	}
	for name, all := range asked {
		share := float64(inside[name]) / float64(all)
		t.Logf("%s: %.4f of %d", name, share, all)
		// Figures of one line go together: as many as lines are independent.
		if slack := 3 * math.Sqrt(0.95*0.05/float64(n)); share < 0.93-slack || share > 0.97+slack {
			t.Errorf("%s: the 95 %% intervals cover %.3f of %d", name, share, all)
		}
	}
}

// Undetermined steps have no figure that follows from them; and what is asked
// for wrongly is an error, not another figure.
func TestNothingFollowsFromNothing(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 1))
	s := releases(t, r, 90, 0.1, 8, recorded.StepOptions{}).Step
	if s.Combined.Determined || s.Derived != nil || s.Pulse != nil || s.Opinions != nil || s.Response != nil {
		t.Errorf("%+v", s)
	}
}

// Twice the same gives the same results, so that they can be verified.
func TestDynamicIsDeterministic(t *testing.T) {
	a := releases(t, rand.New(rand.NewPCG(2, 2)), 14, 0.4, 0.3, recorded.StepOptions{})
	b := releases(t, rand.New(rand.NewPCG(2, 2)), 14, 0.4, 0.3, recorded.StepOptions{})
	if at, err := Compare(a, b); at != "" || err != nil {
		t.Errorf("%s differs, %v", at, err)
	}
	other := releases(t, rand.New(rand.NewPCG(2, 3)), 14, 0.4, 0.3, recorded.StepOptions{})
	if at, _ := Compare(a, other); at == "" {
		t.Error("other noise gives the same results")
	}
}

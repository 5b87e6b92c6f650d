package uncertainty

import (
	"math"
	"testing"
)

// Quantiles for 95.45 % and 95 % between -t and t, three digits as tables
// print them (GUM table G.2, checked with scipy 1.10.1).
func TestStudentQuantile(t *testing.T) {
	for dof, want := range map[float64]float64{1: 13.968, 2: 4.527, 3: 3.307, 5: 2.649, 9: 2.320, 10: 2.284, 20: 2.133, 50: 2.051} {
		p := (1 + 0.9544997361036416) / 2
		if got := StudentQuantile(p, dof); math.Abs(got-want) > 5e-4 {
			t.Errorf("95.45 %%, %v: %v, want %v", dof, got, want)
		}
	}
	// GUM H.1 takes t for 99 % and 16 degrees of freedom: 2.92.
	compare(t, []figure{{"99 %", StudentQuantile(0.995, 16), 2.920781622425097, 1e-12}})
	// The factor for 95 % is the same by both ways.
	for _, dof := range []float64{1, 1.3, 2, 2.5, 3, 7.77, 28, 100.5, 199, 201, 1047.28429, 1e4, 1e6, 1e9, math.Inf(1)} {
		compare(t, []figure{{"95 %", StudentQuantile(0.975, dof), coverage(dof), 3e-13}})
	}
	// Closed forms: one degree of freedom tan(pi (p - 1/2)), two
	// (2p - 1)/sqrt(2p(1 - p)).
	for _, p := range []float64{1e-9, 0.001, 0.2, 0.49, 0.7, 0.999} {
		compare(t, []figure{
			{"one", StudentQuantile(p, 1), math.Copysign(1/math.Tan(math.Pi*math.Min(p, 1-p)), p-0.5), 1e-9},
			{"two", StudentQuantile(p, 2), (2*p - 1) / math.Sqrt(2*p*(1-p)), 1e-12},
		})
	}
	for _, dof := range []float64{0.1, 0.7, 1.5, 4, 30, 150, 250, 1e5, 0} {
		for _, p := range []float64{1e-12, 1e-4, 0.3, 0.5, 0.9} {
			x := StudentQuantile(p, dof)
			if back := StudentBelow(x, dof); math.Abs(back/p-1) > 1e-10 {
				t.Errorf("%v degrees of freedom: %v came back as %v by %v", dof, p, back, x)
			}
		}
	}
	for _, p := range []float64{-0.1, 1.1, math.NaN()} {
		if x := StudentQuantile(p, 3); !math.IsNaN(x) {
			t.Errorf("%v gave %v", p, x)
		}
	}
	if !math.IsInf(StudentQuantile(0, 3), -1) || !math.IsInf(StudentQuantile(1, 3), 1) {
		t.Error("the ends")
	}
}

// Tails by closed forms: for two degrees of freedom (1 - x/sqrt(2 + x^2))/2,
// in the tail as 1/(s (s + x)) with s^2 = 2 + x^2; for one atan(1/x)/pi.
func TestStudentBelow(t *testing.T) {
	for _, x := range []float64{1e-8, 0.01, 0.5, 1, 2, 5, 30, 1e4} {
		s := math.Sqrt(2 + x*x)
		compare(t, []figure{
			{"one", StudentBelow(-x, 1), math.Atan(1/x) / math.Pi, 1e-12}, {"two", StudentBelow(-x, 2), 1 / (s * (s + x)), 1e-12},
			{"sum", StudentBelow(-x, 7) + StudentBelow(x, 7), 1, 1e-15},
		})
	}
	// Both sides of the change of formula agree, far into the tail.
	for _, x := range []float64{0.01, 1, 4, 8} {
		compare(t, []figure{{"change", StudentBelow(-x, math.Nextafter(200, 201)), StudentBelow(-x, 200), 1e-11}})
	}
	for _, dof := range []float64{0, -1, 1e20, math.Inf(1), math.NaN()} {
		compare(t, []figure{{"normal", StudentBelow(-2, dof), 0.0227501319481792, 1e-12}})
	}
	if !math.IsNaN(StudentBelow(math.NaN(), 3)) || StudentBelow(math.Inf(-1), 3) != 0 || StudentBelow(math.Inf(1), 300) != 1 {
		t.Error("the edges")
	}
}

func BenchmarkStudent(b *testing.B) {
	for b.Loop() {
		StudentQuantile(0.99, 7.3)
	}
}

func BenchmarkStudentBelow(b *testing.B) {
	for b.Loop() {
		StudentBelow(-2.3, 7.3)
	}
}

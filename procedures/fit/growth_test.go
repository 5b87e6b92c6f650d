package fit

import (
	"math"
	"math/rand/v2"
	"testing"
)

// How often growing noise is seen where there is none, and where there is; the
// weighted intercept scatters far less than the ordinary, as much as stated.
func TestGrowing(t *testing.T) {
	n := 2000
	if trials() > 10_000 {
		n = 100_000
	}
	r := rand.New(rand.NewPCG(51, 52))
	draw := func(constant, share float64) Figures {
		d := Data{}
		for cycle := 1; cycle <= 3; cycle++ {
			for k := range 14 {
				p := 50 * float64(min(k, 13-k))
				d.Reference, d.Set = append(d.Reference, p), append(d.Set, p)
				d.UUT = append(d.UUT, 1+p+math.Hypot(constant, share*p)*r.NormFloat64())
				d.Cycle, d.Down = append(d.Cycle, cycle), append(d.Down, k > 6)
			}
		}
		f, err := Static(d)
		if err != nil {
			t.Fatal(err)
		}
		return f
	}
	var falsely, rightly, ordinary, weighted, stated float64
	for range n {
		if draw(0.1, 0).Growing != nil {
			falsely++
		}
		f := draw(0, 1e-3)
		if g := f.Growing; g != nil {
			rightly++
			ordinary += math.Pow(f.Line.Intercept-1, 2)
			weighted += math.Pow(g.Line.Intercept-1, 2)
			stated += math.Pow(g.Line.UIntercept, 2)
		}
	}
	t.Logf("seen in %.2f %% without and %.1f %% with growth; intercept scatters by %.3g ordinary, %.3g weighted, stated %.3g",
		100*falsely/float64(n), 100*rightly/float64(n), math.Sqrt(ordinary/rightly), math.Sqrt(weighted/rightly), math.Sqrt(stated/rightly))
	if falsely > 0.02*float64(n) || rightly < 0.5*float64(n) || weighted > ordinary/9 {
		t.Error("growing noise")
	}
	// With a constant part that is known to be there, sigma is found about right.
	var constant, share, found float64
	for range n {
		if g := draw(0.02, 1e-3).Growing; g != nil {
			constant += g.Constant
			share += g.Share
			found++
		}
	}
	t.Logf("0.02 and 1e-3: on average %.3g and %.3g", constant/found, share/found)
	if math.Abs(share/found-1e-3) > 2e-4 {
		t.Errorf("share %v", share/found)
	}
}

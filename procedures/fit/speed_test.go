package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"kymobench/procedures/uncertainty"
)

// simulated is a UUT with bow, hysteresis and noise: 7 set pressures, 2 legs.
func simulated(r *rand.Rand, cycles int) Data {
	n := 14 * cycles
	d := Data{
		Reference: make([]float64, 0, n), UUT: make([]float64, 0, n), Set: make([]float64, 0, n),
		Cycle: make([]int, 0, n), Down: make([]bool, 0, n),
	}
	for cycle := 1; cycle <= cycles; cycle++ {
		for k := range 14 {
			down := k > 6
			set := 50 * float64(min(k, 13-k))
			p := set + 0.2*r.NormFloat64()
			y := 0.4 + 1.003*p + 1e-5*p*(300-p) + 0.05*r.NormFloat64()
			if down {
				y += 0.3 * (1 - math.Pow(set/150-1, 2))
			}
			d.Reference, d.UUT, d.Set = append(d.Reference, p), append(d.UUT, y), append(d.Set, set)
			d.Cycle, d.Down = append(d.Cycle, cycle), append(d.Down, down)
		}
	}
	return d
}

// specification is what a bench states for a budget, in mmHg and shares.
type specification struct {
	Certificate         float64 `json:"certificate"` // expanded, k = 2
	Share               float64 `json:"share"`       // of reading, expanded
	Drift               float64 `json:"drift"`       // of reading, half-width
	ResolutionReference float64 `json:"resolution_reference"`
	ResolutionUUT       float64 `json:"resolution_uut"`
	Temperature         float64 `json:"temperature"`
	Head                float64 `json:"head"`
	Settling            float64 `json:"settling"` // half-width
	Skew                float64 `json:"skew"`     // half-width
}

func stated() specification {
	return specification{0.06, 4e-4, 2e-4, 0.01, 0.1, 0.02, 0.05, 0.03, 0.01}
}

// budgets combines the twelve inputs of a budget at each set pressure.
func budgets(f Figures, s specification) []uncertainty.Combined {
	out := make([]uncertainty.Combined, len(f.Points))
	var back float64
	for _, z := range f.ZeroReturn {
		back = max(back, math.Abs(*z))
	}
	inputs := make([]uncertainty.Input, 0, 12)
	for l, p := range f.Points {
		add := func(u, dof float64) {
			inputs = append(inputs, uncertainty.Input{Standard: u, Sensitivity: 1, DegreesOfFreedom: dof})
		}
		inputs = inputs[:0]
		add(uncertainty.FromExpanded(s.Certificate, 2), 0)
		add(uncertainty.FromExpanded(s.Share, 2)*p.Set, 0)
		add(uncertainty.FromHalfWidth(s.Drift)*p.Set, 0)
		add(uncertainty.FromFullWidth(s.ResolutionReference), 0)
		add(uncertainty.FromFullWidth(s.ResolutionUUT), 0)
		add(*f.Repeatability.PooledSD/math.Sqrt(float64(f.Cycles)), float64(*f.Repeatability.DoF))
		add(uncertainty.FromFullWidth(*p.Hysteresis), 0)
		add(uncertainty.FromFullWidth(back), 0)
		add(s.Temperature, 0)
		add(s.Head, 0)
		add(uncertainty.FromHalfWidth(s.Settling), 0)
		add(uncertainty.FromHalfWidth(s.Skew), 0)
		out[l] = uncertainty.Combine(inputs)
	}
	return out
}

// peer is the same analysis in numpy and scipy, testdata/peer.py.
type peer struct {
	Figures struct {
		Intercept, Slope, Residual    float64
		Covariance                    [2][2]float64
		Cubic                         [4]float64
		CubicCovariance               [4][4]float64 `json:"cubic_covariance"`
		Terminal, Independent         float64
		LeastSquares                  float64      `json:"least_squares"`
		ZeroBased                     float64      `json:"zero_based"`
		Hysteresis                    [][7]float64 // by cycle
		LargestHysteresis             float64      `json:"largest_hysteresis"`
		MeanHysteresis                [7]float64   `json:"mean_hysteresis"`
		ZeroOffset                    float64      `json:"zero_offset"`
		ZeroReturn                    []float64    `json:"zero_return"`
		Ranges                        [2][7]float64
		Pooled                        float64
		Repeatability                 [7]float64
		Average                       [7]float64
		AsRead                        [2]float64 `json:"as_read"`
		AfterZero                     [2]float64 `json:"after_zero"`
		Combined, Effective, Expanded [7]float64
	} `json:"figures"`
	Seconds float64 `json:"seconds"`
}

func askPeer(t testing.TB, d Data, rounds, repeat int) peer {
	t.Helper()
	var p peer
	python(t, "peer.py", map[string]any{
		"reference": d.Reference, "uut": d.UUT, "cycle": d.Cycle, "down": d.Down, "set": d.Set,
		"spec": stated(), "rounds": rounds, "repeat": repeat,
	}, &p)
	return p
}

// What is timed is the same analysis: every figure of the peer is ours, to 1e-9
// of the span of 300 mmHg or the figure itself.
func TestPeer(t *testing.T) {
	d := simulated(rand.New(rand.NewPCG(1, 2)), 3)
	p := askPeer(t, d, 1, 1).Figures
	f, err := Static(d)
	if err != nil {
		t.Fatal(err)
	}
	same := func(name string, got, want float64) {
		if !(math.Abs(got-want) <= 1e-9*math.Abs(want) || math.Abs(got-want) <= 1e-13) {
			t.Errorf("%s: %.15g, numpy has %.15g", name, got, want)
		}
	}
	same("intercept", f.Line.Intercept, p.Intercept)
	same("slope", f.Line.Slope, p.Slope)
	same("residual", f.Line.Residual, p.Residual)
	same("covariance", f.Line.Covariance, p.Covariance[0][1])
	same("u(intercept)^2", f.Line.UIntercept*f.Line.UIntercept, p.Covariance[0][0])
	same("u(slope)^2", f.Line.USlope*f.Line.USlope, p.Covariance[1][1])
	for i, c := range f.Curvature.Coefficients {
		same("cubic", c, p.Cubic[i])
		for j, v := range f.Curvature.Covariance[i] {
			same("cubic, covariance", v, p.CubicCovariance[i][j])
		}
	}
	same("terminal", f.Linearity.Terminal.Value, p.Terminal)
	same("independent", f.Linearity.Independent.Value, p.Independent)
	same("zero-based", f.Linearity.ZeroBased.Value, p.ZeroBased)
	same("least squares", f.Linearity.LeastSquares.Value, p.LeastSquares)
	for k, h := range f.EachHysteresis {
		same("hysteresis", h.Value, p.Hysteresis[k/7][k%7])
	}
	same("largest hysteresis", math.Abs(f.Hysteresis.Value), p.LargestHysteresis)
	same("zero offset", *f.ZeroOffset, p.ZeroOffset)
	for c, z := range f.ZeroReturn {
		same("zero return", *z, p.ZeroReturn[c])
	}
	same("pooled", *f.Repeatability.PooledSD, p.Pooled)
	same("highest", f.AsRead.Highest.Value, p.AsRead[0])
	same("lowest", f.AsRead.Lowest.Value, p.AsRead[1])
	same("highest after zero", f.AfterZero.Highest.Value, p.AfterZero[0])
	same("lowest after zero", f.AfterZero.Lowest.Value, p.AfterZero[1])
	for l, b := range budgets(f, stated()) {
		at := f.Points[l]
		same("mean hysteresis", *at.Hysteresis, p.MeanHysteresis[l])
		same("range up", *at.RangeUp, p.Ranges[0][l])
		same("range down", *at.RangeDown, p.Ranges[1][l])
		same("repeatability", *at.Repeatability, p.Repeatability[l])
		same("average", *at.Average, p.Average[l])
		same("combined", b.Standard, p.Combined[l])
		same("degrees of freedom", b.DegreesOfFreedom, p.Effective[l])
		same("expanded", b.Expanded, p.Expanded[l])
	}
}

// One UUT's whole static analysis, 42 readings, with the budgets at 7 set
// pressures: x-numpy is how many times as long the fastest of the peer's rounds
// takes as the fastest of ours, rounds of some 2 ms each, in turns on the same
// machine.
func BenchmarkWhole(b *testing.B) {
	d := simulated(rand.New(rand.NewPCG(1, 2)), 3)
	ours, theirs := math.Inf(1), math.Inf(1)
	for range 3 {
		theirs = min(theirs, askPeer(b, d, 300, 5).Seconds)
		for range 300 {
			begin := time.Now()
			for range 100 {
				whole(b, d)
			}
			ours = min(ours, time.Since(begin).Seconds()/100)
		}
	}
	for b.Loop() {
		whole(b, d)
	}
	b.ReportMetric(theirs/ours, "x-numpy")
	b.ReportMetric(theirs*1e9, "numpy-ns")
	b.ReportMetric(ours*1e9, "fastest-ns")
}

func whole(b *testing.B, d Data) {
	f, err := Static(d)
	if err != nil {
		b.Fatal(err)
	}
	if budgets(f, stated())[6].Expanded == 0 {
		b.Fatal("no budget")
	}
}

// The table of cost against readings, the fastest of the rounds: 7 set pressures
// and ever more cycles, and one cycle of ever more set pressures.
func BenchmarkStatic(b *testing.B) {
	for _, n := range []int{42, 420, 4200, 42_000, 420_000, 1_000_000} {
		cycles := simulated(rand.New(rand.NewPCG(1, 2)), (n+13)/14)
		sets := Data{Cycle: make([]int, n), Down: make([]bool, n)}
		for i := range n {
			p := float64(min(i, n-1-i))
			sets.Down[i] = i >= n/2
			sets.Reference, sets.Set = append(sets.Reference, p), append(sets.Set, p)
			sets.UUT = append(sets.UUT, 1.01*p+math.Sin(0.3*float64(i)))
		}
		for name, d := range map[string]Data{"cycles": cycles, "sets": sets} {
			b.Run(fmt.Sprint(name, "/", n), func(b *testing.B) {
				fastest := math.Inf(1)
				for b.Loop() {
					begin := time.Now()
					if _, err := Static(d); err != nil {
						b.Fatal(err)
					}
					fastest = min(fastest, time.Since(begin).Seconds())
				}
				b.ReportMetric(fastest*1e9/float64(len(d.UUT)), "fastest-ns/reading")
			})
		}
	}
}

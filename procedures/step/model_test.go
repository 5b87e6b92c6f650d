package step

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// The kernel against the generator, which works from the complex poles.
func TestResponseAndRamp(t *testing.T) {
	for _, zeta := range []float64{0.001, 0.05, 0.3, 0.64, 0.99, 0.9999, 0.999999, 1, 1.000001, 1.0001, 1.01, 1.5, 3, 20} {
		for _, x := range []float64{-1, 0, 1e-3, 0.05, 0.3, 1, 3, 10, 40, 300} {
			want, _ := trueStep(x, 1/(2*math.Pi), zeta)
			// The generator itself loses digits as its poles meet.
			slack := 1e-13 + 1e-15/math.Max(1e-6, math.Sqrt(math.Abs(zeta-1)))
			if math.Abs(zeta-1) < 1e-5 {
				slack = 3e-6
			}
			if got := Response(x, zeta); math.Abs(got-want) > slack {
				t.Errorf("Response(%g, %g) = %.15g, want %.15g", x, zeta, got, want)
			}
			for _, width := range []float64{0.001, 0.019, 0.021, 0.5, 2} {
				if math.Abs(zeta-1) < 1e-3 && zeta != 1 {
					continue
				}
				want := trueEdge(x, width, 1/(2*math.Pi), zeta)
				if got := Ramp(x, width, zeta); math.Abs(got-want) > 1e-13*(1+math.Max(x, 1))*(1+zeta)/width+1e-12 {
					t.Errorf("Ramp(%g, %g, %g) = %.15g, want %.15g", x, width, zeta, got, want)
				}
			}
		}
	}
}

// problems makes one of each kind with samples of its own model.
func problems() map[string]*problem {
	const n = 300
	base := func() *problem {
		p := &problem{one: make([]float64, n), tau: make([]float64, n), y: make([]float64, n), first: -0.05, dt: 0.001,
			low: [2]float64{-10, -10}, high: [2]float64{20, 10}}
		r := rand.New(rand.NewPCG(1, 2))
		for i := range n {
			p.one[i], p.tau[i] = 1, 2*float64(i)/(n-1)-1
			p.y[i] = trueEdge(p.first+float64(i)*p.dt, 0, 20, 0.5) + 0.01*r.NormFloat64()
		}
		return p
	}
	all := map[string]*problem{}
	all["ideal"] = base()
	all["ramp"] = base()
	all["ramp"].width = 0.01
	all["narrow ramp"] = base()
	all["narrow ramp"].width = 0.0001
	all["fitted"] = base()
	all["fitted"].fitWidth = true
	blocks := base()
	blocks.fitWidth = true
	for i := range n {
		blocks.times = append(blocks.times, blocks.first+float64(i)*blocks.dt)
	}
	blocks.runs = []run{{0, len(blocks.times), 1, blocks.dt}}
	all["blocks"] = blocks
	driven := base()
	driven.applied = &appliedInput{u: make([]float64, n)}
	for i := range n {
		driven.applied.u[i] = 1 - math.Exp(-math.Max(0, driven.first+float64(i)*driven.dt)/0.01)
	}
	all["applied"] = driven
	for _, p := range all {
		p.prepare()
	}
	return all
}

// The derivatives of every kind of column against differences, for damping
// on both sides of one and widths on both sides of the series.
func TestDerivatives(t *testing.T) {
	for name, p := range problems() {
		for _, zeta := range []float64{0.2, 0.98, 1, 1.02, 1.8} {
			for _, width := range []float64{0.00012, 0.02} {
				theta := [most]float64{math.Log(2 * math.Pi * 20), math.Log(zeta), 0.00037, width * width}
				columns := func(theta [most]float64) (g []float64, d [4][]float64) {
					p.begin(&theta)
					for start := 0; start < len(p.y); start += blockSize {
						k := min(blockSize, len(p.y)-start)
						if !p.fill(&theta, start, k) {
							g = append(g, make([]float64, k)...)
							for i := range d {
								d[i] = append(d[i], make([]float64, k)...)
							}
							continue
						}
						g = append(g, p.g[:k]...)
						for i := range d {
							d[i] = append(d[i], p.d[i][:k]...)
						}
					}
					return g, d
				}
				_, d := columns(theta)
				for i, h := range []float64{1e-5, 1e-5, 1e-8, 1e-4 * width * width}[:p.nonlinear] {
					up, down := theta, theta
					up[i] += h
					down[i] -= h
					a, _ := columns(up)
					b, _ := columns(down)
					scale := 0.0
					for _, v := range d[i] {
						scale = math.Max(scale, math.Abs(v))
					}
					for m := range d[i] {
						// Within the edge of an ideal step the derivative jumps.
						if x := p.first + float64(m)*p.dt - theta[delay]; math.Abs(x) < 0.0105 && i == squared || math.Abs(x) < 0.0002 {
							continue
						}
						if want := (a[m] - b[m]) / (2 * h); math.Abs(d[i][m]-want) > 2e-5*scale+1e-9 {
							t.Errorf("%s zeta %g width %g parameter %d sample %d: %g, difference %g", name, zeta, width, i, m, d[i][m], want)
							break
						}
					}
				}
			}
		}
	}
}

// The inner loop allocates nothing.
func TestNoAllocation(t *testing.T) {
	for name, p := range problems() {
		theta := [most]float64{math.Log(2 * math.Pi * 20), math.Log(0.6), 0.0003, 1e-6}
		var n normal
		if k := testing.AllocsPerRun(20, func() { p.normalAt(&theta, &n) }); k != 0 {
			t.Errorf("%s: %g allocations a pass", name, k)
		}
		// A search allocates its two sets of normal equations once, whatever
		// the number of samples and passes.
		copyOf := theta
		if k := testing.AllocsPerRun(5, func() {
			theta = copyOf
			search{floor: floorOf(p), iterations: 30, tolerance: 1e-10}.minimise(p, &theta, &n)
		}); k > 2 {
			t.Errorf("%s: %g allocations a search", name, k)
		}
	}
}

func BenchmarkPass(b *testing.B) {
	p := problems()["ideal"]
	theta := [most]float64{math.Log(2 * math.Pi * 20), math.Log(0.6), 0.0003}
	var n normal
	for b.Loop() {
		p.normalAt(&theta, &n)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(p.y)), "ns/sample")
}

func BenchmarkAnalyse(b *testing.B) {
	for _, rate := range []float64{1000, 10000, 100000, 500000} {
		b.Run(fmt.Sprint(2*rate), func(b *testing.B) {
			p := plan{fn: 24, zeta: 0.4, rate: rate, before: 0.5, spacing: 1.5, heights: []float64{100}, sigma: 0.5}
			trace := p.make(rand.New(rand.NewPCG(1, 1)))
			b.ReportAllocs()
			for b.Loop() {
				if _, _, _, err := Analyse(trace, Settings{EdgeStated: true, MinimumStep: 8}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

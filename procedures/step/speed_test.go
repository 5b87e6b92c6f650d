package step

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"testing"
	"time"
)

// peerTrace is one trace for the peer, from the starting point that the search
// is given here too.
type peerTrace struct {
	T0    float64   `json:"t0"`
	Dt    float64   `json:"dt"`
	Y     []float64 `json:"y"`
	Start []float64 `json:"start"`
}

type peerFit struct {
	Seconds float64   `json:"seconds"`
	Theta   []float64 `json:"theta"`
}

// raced is one trace with its problem and a common starting point: 15 % off in
// frequency, 25 % in damping, and a tenth of a period in time.
func raced(samples int, seed uint64) (Trace, *problem, [most]float64, peerTrace) {
	const fn, zeta, length, before = 24.0, 0.4, 2.0, 0.5
	p := plan{fn: fn, zeta: zeta, rate: float64(samples) / length, before: before, spacing: length - before, heights: []float64{100}, phase: 0.3, sigma: 0.5}
	trace := p.make(rand.New(rand.NewPCG(seed, 8)))
	n := len(trace.Pressure)
	full := &problem{dt: 1 / trace.Rate, y: trace.Pressure, one: make([]float64, n), tau: make([]float64, n)}
	full.low = [2]float64{math.Log(0.01), math.Log(1e-3)}
	full.high = [2]float64{math.Log(1e6), math.Log(100)}
	for i := range n {
		full.one[i], full.tau[i] = 1, 2*float64(i)/float64(n-1)-1
	}
	full.prepare()
	theta := [most]float64{math.Log(2 * math.Pi * fn * 1.15), math.Log(zeta * 1.25), before + p.phase/trace.Rate + 0.1/fn/2}
	peer := peerTrace{0, full.dt, trace.Pressure, []float64{trace.Pressure[0], 0, 100, theta[0], theta[1], theta[2]}}
	return trace, full, theta, peer
}

// least is the shortest of some times of f: what others do on the machine only
// adds.
func least(times int, f func()) float64 {
	best := math.Inf(1)
	for range times {
		begun := time.Now()
		f()
		best = math.Min(best, time.Since(begun).Seconds())
	}
	return best
}

// residualPass is one evaluation of the residuals by the recursion, without
// derivatives: the unit in which a fit's cost is told.
func (p *problem) residualPass(theta *[most]float64, beta *[linear]float64) float64 {
	w, zeta := math.Exp(theta[lnOmega]), math.Exp(theta[lnZeta])
	d := w * p.dt
	cd, sd := kernel(d, zeta)
	sum := 0.0
	for start := 0; start < len(p.y); start += blockSize {
		k := min(blockSize, len(p.y)-start)
		p.a.fill(w*(p.first+float64(start)*p.dt-theta[delay]), d, zeta, cd, sd, k)
		for i := range k {
			r := p.y[start+i] - beta[0]*p.one[start+i] - beta[1]*p.tau[start+i] - beta[2]*(1-p.a.c[i]-zeta*p.a.s[i])
			sum += r * r
		}
	}
	return sum
}

// TestBesideLeastSquares fits the same traces as scipy's least_squares, from
// the same starting points, to the same place, and says how much faster. The
// ratios are asked for with KYMOBENCH_SPEED=1 only: they are no test on a
// machine that is busy.
//
//	KYMOBENCH_OUTSIDE=1 KYMOBENCH_SPEED=1 go test -run BesideLeastSquares -v ./procedures/step
func TestBesideLeastSquares(t *testing.T) {
	python := outsidePython(t)
	sizes := []int{2000, 20000}
	job := struct {
		Repeats int         `json:"repeats"`
		Traces  []peerTrace `json:"traces"`
	}{Repeats: 7}
	for _, n := range sizes {
		_, _, _, peer := raced(n, 1)
		job.Traces = append(job.Traces, peer)
	}
	text, err := json.Marshal(job)
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(python, "testdata/peer.py")
	cmd.Stdin, cmd.Stderr = bytes.NewReader(text), os.Stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	var fits []peerFit
	if err := json.Unmarshal(out, &fits); err != nil || len(fits) != len(sizes) {
		t.Fatalf("%s: %v", out, err)
	}
	for i, n := range sizes {
		trace, full, start, _ := raced(n, 1)
		var at normal
		theta := start
		search{floor: -1, iterations: 100, tolerance: 1e-12}.minimise(full, &theta, &at)
		for k, theirs := range fits[i].Theta[3:] {
			// Both stop within 1e-6 of the standard uncertainty of a least-squares fit.
			if math.Abs(theta[k]-theirs) > 1e-6*math.Max(1, math.Abs(theirs)) {
				t.Errorf("%d samples: parameter %d is %.10g, scipy's %.10g", n, k, theta[k], theirs)
			}
		}
		same := least(15, func() {
			theta = start
			search{floor: -1, iterations: 100, tolerance: 1e-10}.minimise(full, &theta, &at)
		})
		whole := least(9, func() {
			if _, _, _, err := Analyse(trace, Settings{EdgeStated: true, MinimumStep: 8}); err != nil {
				t.Fatal(err)
			}
		})
		beta := full.beta
		pass := least(25, func() { full.residualPass(&theta, &beta) })
		a, b, c := fits[i].Seconds/same, fits[i].Seconds/whole, whole/pass
		t.Logf("%d samples: scipy %.3g ms; the same search %.3g ms, %.0f times faster; whole analysis %.3g ms, %.0f times faster, %.1f residual passes (search alone %.1f)",
			n, fits[i].Seconds*1e3, same*1e3, a, whole*1e3, b, c, same/pass)
		if os.Getenv("KYMOBENCH_SPEED") == "1" && (a < 30 || b < map[int]float64{2000: 10, 20000: 25}[n] || n == 20000 && c > 14) {
			t.Errorf("%d samples: %.0f, %.0f times faster, %.1f passes", n, a, b, c)
		}
	}
}

// BenchmarkSamples shows that the cost is linear in the samples.
func BenchmarkSamples(b *testing.B) {
	for _, n := range []int{2000, 20000, 200000, 1000000} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			trace, _, _, _ := raced(n, 1)
			b.ReportAllocs()
			for b.Loop() {
				if _, _, _, err := Analyse(trace, Settings{EdgeStated: true, MinimumStep: 8}); err != nil {
					b.Fatal(err)
				}
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(n), "ns/sample")
		})
	}
}

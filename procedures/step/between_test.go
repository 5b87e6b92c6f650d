package step

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Edges with corners between two samples, measured where they enter: ramps,
// exponentials, a jump, sums of ramps that bend smoothly. The line's figures
// come back within what the fit claims, also where straight lines between the
// samples would be many standard uncertainties wrong.
func TestBetweenSamples(t *testing.T) {
	r := rand.New(rand.NewPCG(61, 1))
	for _, kind := range []string{"jump", "short ramp", "ramp", "exponential", "bent"} {
		var sum, lines float64
		outside, all := 0, trials(40, 1000)
		for range all {
			fn, zeta := 10+30*r.Float64(), 0.1+0.8*r.Float64()
			rate := fn * (8 + 20*r.Float64())
			at := 0.4 + r.Float64()/rate
			edges := []input{{height: 100, at: at}}
			switch kind {
			case "short ramp":
				edges[0].width = (0.3 + 2*r.Float64()) / rate
			case "ramp":
				edges[0].width = (0.1 + 0.3*r.Float64()) / fn
			case "exponential":
				edges[0].tau = (0.03 + 0.2*r.Float64()) / fn
			case "bent":
				edges = nil
				whole := 0.3 / fn
				for k := range 12 {
					edges = append(edges, input{height: 100.0 / 12, at: at + whole*(float64(k)/11-0.5), width: whole / 2})
				}
			}
			trace := Trace{Rate: rate, Pressure: make([]float64, int((at+0.3+20*slowest(fn, zeta))*rate))}
			trace.Applied = make([]float64, len(trace.Pressure))
			for i := range trace.Pressure {
				for _, e := range edges {
					since := float64(i)/rate - e.at
					trace.Pressure[i] += 0.9 * e.answer(float64(i)/rate, fn, zeta)
					switch {
					case e.tau > 0 && since > 0:
						trace.Applied[i] -= e.height * math.Expm1(-since/e.tau)
					case e.width > 0:
						trace.Applied[i] += e.height * min(1, max(0, since/e.width+0.5))
					case since > 0:
						trace.Applied[i] += e.height
					}
				}
			}
			noisy(trace.Pressure, 0.05, r)
			s := one(t, trace, Settings{MinimumStep: 8})
			if !s.Determined {
				t.Errorf("%s: %v, fn %g zeta %g fs/fn %.3g", kind, s.Reasons, fn, zeta, rate/fn)
				continue
			}
			e := math.Log(s.Frequency.Value/fn) / (s.Frequency.StandardUncertainty / s.Frequency.Value)
			sum += e * e
			if s.Frequency.Low > fn || s.Frequency.High < fn {
				outside++
			}
			a := analysis{trace: trace, settings: Settings{MinimumStep: 8}, dt: 1 / rate, y: trace.Pressure}
			f, _, _ := a.set(window{0, int(at*rate) - 3, int(at*rate) + 1, len(trace.Pressure), 8})
			f.found = polish(f.problem, [most]float64{math.Log(2 * math.Pi * fn), math.Log(zeta)})
			lines += math.Pow((f.theta[lnOmega]-math.Log(2*math.Pi*fn))/(s.Frequency.StandardUncertainty/s.Frequency.Value), 2)
		}
		n := float64(all)
		t.Logf("%-12s root mean square error %.2f standard uncertainties, with straight lines %.2f; %d of %d outside", kind, math.Sqrt(sum/n), math.Sqrt(lines/n), outside, all)
		if sum/n > 2.5 || float64(outside) > 0.1*n+3*math.Sqrt(0.1*n) {
			t.Errorf("%s: error %.2f standard uncertainties, %d of %d outside", kind, math.Sqrt(sum/n), outside, all)
		}
	}
}

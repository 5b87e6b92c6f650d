package simulated

import (
	"math"
	"strconv"
	"testing"
	"time"
)

// A plain analysis of what the bench puts out, with the certificate and the
// uncertainties that the bench file states, must find the truth as often as
// they promise: over n benches the mean square of error over uncertainty is 1
// within 4 sqrt(2/n), and the hysteresis is found to a few hundredths.
func TestStaticFiguresAreAsStated(t *testing.T) {
	const benches = 60
	var slopes, zeros float64
	for seed := range uint64(benches) {
		s := start(t, Settings{Seed: seed})
		correct := certificate(t, s.b)
		point := func() (p, y float64) {
			const readings = 15
			s.run(4 * time.Second)
			for range readings {
				next := s.now.Add(100 * time.Millisecond)
				p += correct(s.read()) / readings
				s.run(next.Sub(s.now))
			}
			return p, mean(s.samples(1500)) / nominal
		}
		s.send(RoleReference, "CAL:ZERO")
		p0, y0 := point()
		for _, text := range []string{"300", "0"} {
			s.send(RoleSource, "SOUR:PRES "+text)
			s.run(4 * time.Second)
		}
		var p, y []float64
		for _, set := range cycle() {
			s.send(RoleSource, "SOUR:PRES "+strconv.FormatFloat(set, 'f', 0, 64))
			a, b := point()
			p, y = append(p, a), append(y, b)
		}
		b, tr := slopeOf(p, y), s.b.Truth()

		// Errors at one set pressure are common to its two points: 0.02 mmHg
		// each, 0 at 0; c is what a point's error does to the slope.
		var sxx, noise float64
		c := map[float64]float64{}
		for _, x := range cycle() {
			sxx += (x - mean(cycle())) * (x - mean(cycle()))
		}
		for _, x := range cycle() {
			one := (x - mean(cycle())) / sxx
			noise += one * one * 0.01 * 0.01
			if x > 0 {
				c[x] += one
			}
		}
		points := 0.0
		for _, x := range c {
			points += x * x * 0.02 * 0.02
		}
		u := nominal * math.Sqrt(3e-4*3e-4+2.5e-4*2.5e-4+points+noise)
		z := (nominal*b - tr.Sensitivity) / u
		slopes += z * z / benches
		z = (y0 - p0 - tr.ZeroOffset) / math.Hypot(math.Hypot(0.0734, 0.2/nominal), 0.008)
		zeros += z * z / benches

		h := 0.0
		for i, j := 0, len(p)-1; i < j; i, j = i+1, j-1 {
			h = math.Max(h, math.Abs(y[j]-y[i]-b*(p[j]-p[i])))
		}
		within(t, "hysteresis", h, tr.Hysteresis, 0.06)
	}
	within(t, "sensitivity, mean square of error over uncertainty", slopes, 1, 4*math.Sqrt(2./benches))
	within(t, "zero offset, mean square of error over uncertainty", zeros, 1, 4*math.Sqrt(2./benches))
	t.Logf("sensitivity %.2f, zero offset %.2f", slopes, zeros)
}

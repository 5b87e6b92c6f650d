package layout1

import (
	"math"

	"kymobench/procedures/results"
)

// follow fills in what follows from fn and zeta, with invented uncertainties;
// words of every length stand where a note may.
func follow(s *results.Step, fn, zeta float64) {
	figure := func(v float64) results.DerivedFigure {
		u := 0.004 * math.Abs(v)
		return results.DerivedFigure{Value: &v, Standard: &u, Interval: &[2]float64{v - 2*u, v + 2.2*u}}
	}
	gain := func(f float64) float64 { u := f / fn; return 1 / math.Hypot(1-u*u, 2*zeta*u) }
	d := &results.Derived{
		DampedFrequency: figure(fn * math.Sqrt(math.Max(0.01, 1-zeta*zeta))), Overshoot: figure(12.3), RiseTime: figure(0.2 / fn), Settling2: figure(1 / fn), Settling5: figure(0.7 / fn),
		ResonanceFrequency: figure(0.7 * fn), ResonanceGain: figure(1.1), Bandwidth3dB: figure(1.2 * fn), Flat5: figure(0.3 * fn), Product: figure(fn * zeta),
	}
	for _, f := range []float64{1, 5, 10, 20} {
		d.At = append(d.At, results.AtFrequency{Frequency: f, Gain: figure(gain(f)), Phase: figure(-60 * f / fn)})
	}
	if zeta > 0.5 {
		d.ResonanceFrequency = results.DerivedFigure{Reason: "no peak: the damping ratio is over 0.7071", Note: "within the uncertainty there may be one (12 % of the draws)"}
		d.Flat5.Note = "jumps with the damping ratio: 10.7 to 11.3 Hz (38 % of the draws), or 17 to 17.5 Hz (62 % of the draws)"
		d.Flat5.Interval[1] *= 1.6
	}
	for i := range 61 {
		f := fn / 20 * math.Pow(40, float64(i)/60)
		d.Curve = append(d.Curve, results.CurvePoint{Frequency: f, Gain: gain(f), Interval: [2]float64{0.99 * gain(f), 1.01 * gain(f)}})
	}
	r := &results.Response{Steps: 5, Agrees: true, Text: "without the model the response is the same"}
	for k := 1; k <= 12; k++ {
		f := fn * float64(k) / 8
		r.Points = append(r.Points, results.ResponsePoint{Frequency: f, Gain: gain(f) * (1 + 0.01*math.Sin(float64(k))), GainStandard: 0.01, FittedGain: gain(f)})
	}
	p := &results.PulseErrors{
		Tolerance: 2, ToleranceShare: 0.02, SlowestRate: 40, FastestRate: 220,
		Plane: results.PulsePlane{Rate: 120, Contours: []results.PulseContour{
			{Shape: "smooth", Damping: []float64{0.1, 0.5, 0.6, 1, 2}, Frequency: []float64{17, 11, 5, 18, 40}},
			{Shape: "brisk", Damping: []float64{0.1, 0.5, 0.6, 1, 2}, Frequency: []float64{34, 25, 9, 31, 70}},
		}},
		Rules: []results.PulseRule{{Name: "eight harmonics", Text: "a natural frequency of 8 times the heart rate follows the pulse", Known: "common practice, no source", Rate: figure(7.5 * fn)}},
	}
	for i, name := range []string{"three harmonics", "smooth", "a beat of somebody's own with a long name.csv"} {
		shape := results.PulseShape{Name: name, From: "stated by this program", Systolic: 140, Diastolic: 60, Mean: 90, Fastest: figure(100 + 30*float64(i))}
		if i == 2 {
			shape.Fastest = results.DerivedFigure{Interval: &[2]float64{140, 220}, Reason: "the errors are within the tolerance up to 220/min", Note: "220/min or more in 62 % of the draws"}
		}
		for rate := 40.0; rate <= 220; rate += 20 {
			shape.Errors = append(shape.Errors, results.RateErrors{Rate: rate, Systolic: figure(0.1 * rate * float64(i)), Diastolic: figure(-0.02 * rate)})
		}
		p.Shapes = append(p.Shapes, shape)
	}
	s.Line = &results.StatedLine{Place: "at the transducer's own port", Length: "1.2 m", Bore: "1.6 mm", Fluid: "saline", FlushDevice: "none fitted"}
	s.Derived, s.Response, s.Pulse = d, r, p
	s.Opinions = &results.Opinions{Finding: "more", Texts: []results.Reason{
		{Code: "air", Text: "if nothing but air yielded, it would be 150 to 420 \u00b5l of it at atmospheric pressure"},
		{Code: "narrowing", Text: "the product fn x zeta is 9.1 times what steady flow through the stated bore of 1.6 mm gives, 5.4 times that of oscillating flow: something else than the stated bore damps"},
	}}
}

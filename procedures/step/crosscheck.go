package step

import (
	"math"
	"math/cmplx"
	"slices"
)

// The cross-check looks at a step without the model: the spectrum of what came
// out over that of what went in. The spectra are those of the derivatives,
// which vanish at both ends.

// Transfer is the response of the line at one frequency, from one step.
type Transfer struct {
	Frequency float64    // Hz
	Measured  complex128 // out over in
	Model     complex128 // the same sums over the fitted answer
	Scatter   float64    // standard deviation of |Measured| and of its phase times it, from the noise
}

// Spectrum works out the response at frequencies (Hz, above 0 and below half
// the sample rate) from one determined step of a trace:
//
//	out(f) = A exp(-i w t') + 2 i sin(w dt/2) Sum d[k] exp(-i w t[k])
//
// is the sum of the differences from sample to sample, each at its middle: A is
// the height, t' the middle between two samples at the edge, d what is left of
// the trace when baseline, drift and a bare jump at t' are taken off. In this
// form, with the levels before and after known, noise at the ends of the window
// has no part in it. in(f) is the spectrum of the edge, A sin(pi f T)/(pi f T)
// times sin(w dt/2)/(w dt/2) of the differences; or the same sum over the applied
// pressure, its levels from the means before the edge and over the last
// quarter.
//
// What the readout's stated filters do, and the delay behind an applied
// pressure, is taken out of both. Baseline, drift, height and time of the edge
// are the fit's; nothing else is.
// What is sampled too slowly is folded in: hold Measured against Model, which
// has the same, and not against the gain of the model. Isolated samples far out
// are left out. Source: discrete Fourier transform, textbook; summed by parts.
func Spectrum(t Trace, s Step, settings Settings, frequencies []float64) []Transfer {
	n := len(s.Fitted)
	if !s.Determined || n < 8 || len(s.Residuals) != n || s.From < 0 || s.From+n > len(t.Pressure) {
		return nil
	}
	dt := 1 / t.Rate
	since := func(k int) float64 { return t.Start + float64(s.From+k)*dt - s.At }
	edge := min(max(int(math.Ceil(-since(0)*t.Rate)), 1), n-1) // the first sample after the jump
	model, rest := make([]float64, n), make([]float64, n)
	for k := range n {
		model[k] = s.Fitted[k] - s.Baseline - s.Drift*since(k)
		if k >= edge {
			model[k] -= s.Height
		}
		rest[k] = s.Residuals[k]
	}
	withoutSingles(rest)
	quiet := rest[:max(0, edge-int(2*s.EdgeWidth*t.Rate)-4)]
	var applied []float64
	height := 0.0
	if t.Applied != nil {
		applied, height = levelled(t.Applied[s.From:s.From+n], edge)
	}
	// What lies long before the edge, or more than fourteen time constants after it,
	// is noise alone.
	slowest := settling(2*math.Pi*s.Frequency.Value, s.Damping.Value) + s.EdgeWidth + math.Abs(s.Delay)
	readout := settings.Readout
	if t.Applied != nil && !settings.AppliedUnfiltered {
		readout = nil // both pass it
	}
	for _, f := range readout {
		slowest += f.Length * math.Max(1, float64(f.Order))
		if f.Kind == LowPass {
			slowest += 1 / (2 * math.Pi * f.Corner)
		}
	}
	first, last := max(0, edge-int(2*s.EdgeWidth*t.Rate)-4), min(n, edge+int(math.Ceil(14*slowest*t.Rate))+4)
	if applied != nil {
		first, last = 0, n // the edge takes as long as it takes
	}
	model, rest = model[first:last], rest[first:last]
	begin := since(first)
	variance, phi, within := quietNoise(quiet, rest, s.Autocorrelation)
	variance *= float64(len(rest))
	var out []Transfer
	for _, f := range frequencies {
		w := 2 * math.Pi * f
		by := complex(0, 2*math.Sin(w*dt/2))
		jump := cmplx.Rect(1, -w*(since(edge)-dt/2))
		in := complex(s.Height*sinc(f*s.EdgeWidth)*sinc(f*dt), 0)
		if applied != nil {
			in = complex(height, 0)*jump + by*transform(applied, w, begin, dt)
		}
		of := complex(s.Height, 0)*jump + by*transform(model, w, begin, dt)
		noise := by * transform(rest, w, begin, dt)
		// Noise that is correlated from sample to sample has this much more of
		// itself here (spectrum of a first-order autoregression).
		coloured := 0.0
		for _, x := range []float64{phi - within, phi, phi + within} {
			x = math.Min(0.98, math.Max(0, x))
			coloured = math.Max(coloured, (1-x*x)/(1-2*x*math.Cos(w*dt)+x*x))
		}
		in *= cmplx.Rect(1, -w*s.Delay)
		for _, f := range readout {
			in *= f.gain(w)
		}
		out = append(out, Transfer{
			Frequency: f, Measured: (of + noise) / in, Model: of / in,
			Scatter: cmplx.Abs(by) * math.Sqrt(variance*coloured/2) / cmplx.Abs(in),
		})
	}
	return out
}

// gain is the filter's gain and phase at w rad/s: 1/(1 + i w tau) of a low-pass,
// the sinc of each mean about its middle, a bare delay. Source: textbook.
func (f Filter) gain(w float64) complex128 {
	switch f.Kind {
	case LowPass:
		return 1 / complex(1, w/(2*math.Pi*f.Corner))
	case Average:
		one := complex(sinc(w*f.Length/(2*math.Pi)), 0) * cmplx.Rect(1, -w*f.Length/2)
		all := complex(1, 0)
		for range max(1, f.Order) {
			all *= one
		}
		return all
	}
	return cmplx.Rect(1, -w*f.Length)
}

// quietNoise is the variance of the noise and how it is correlated from sample
// to sample: from what the fit left before the edge, where no fault of the
// model is, with two standard deviations of the correlation. Fewer than 50
// samples there tell too little; then all that the fit left has to do.
func quietNoise(quiet, all []float64, correlation float64) (variance, phi, within float64) {
	of := func(r []float64) (v, c float64) {
		for i, x := range r {
			v += x * x
			if i > 0 {
				c += x * r[i-1]
			}
		}
		return v, c
	}
	if len(quiet) < 50 {
		v, _ := of(all)
		return v / float64(max(1, len(all))), correlation, 0
	}
	v, c := of(quiet)
	n := float64(len(quiet))
	if v > 0 {
		phi = c / v
	}
	return v / n, phi, 2 / math.Sqrt(n)
}

// transform is Sum v[k] exp(-i w (start + k dt)), by Horner's rule from the end.
func transform(v []float64, w, start, dt float64) complex128 {
	turn := cmplx.Rect(1, -w*dt)
	var sum complex128
	for _, x := range slices.Backward(v) {
		sum = sum*turn + complex(x, 0)
	}
	return sum * cmplx.Rect(1, -w*start)
}

func sinc(x float64) float64 {
	if math.Abs(x) < 1e-9 {
		return 1
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}

// levelled takes off the level before the edge, and the jump to the level of
// the last quarter at the edge.
func levelled(u []float64, edge int) (rest []float64, height float64) {
	mean := func(v []float64) float64 {
		m := 0.0
		for _, x := range v {
			m += x / float64(len(v))
		}
		return m
	}
	before, after := mean(u[:max(1, edge-edge/8)]), mean(u[len(u)-max(1, len(u)/4):])
	rest = make([]float64, len(u))
	for k, x := range u {
		if rest[k] = x - before; k >= edge {
			rest[k] -= after - before
		}
	}
	return rest, after - before
}

// withoutSingles puts nothing in the place of single residuals that stand out
// from all others eight times, and from both neighbours: spikes, which the fit
// leaves out too.
func withoutSingles(r []float64) {
	sizes := make([]float64, len(r))
	for i, x := range r {
		sizes[i] = math.Abs(x)
	}
	usual := slices.Clone(sizes)
	slices.Sort(usual)
	far := 8 * 1.4826 * usual[len(usual)/2]
	for i, x := range sizes {
		if x > far && (i == 0 || sizes[i-1] < x/2) && (i == len(r)-1 || sizes[i+1] < x/2) {
			r[i] = 0
		}
	}
}

// CrossCheck is what the spectra of all steps say together.
type CrossCheck struct {
	Points []CrossPoint
	Steps  int
	Agrees bool
	Worst  CrossPoint // where measured and model differ most, in scatters; where they disagree, among those frequencies
}

// CrossPoint is the mean over the steps at one frequency.
type CrossPoint struct {
	Frequency, Gain, Phase   float64 // Hz, 1, degrees: measured
	ModelGain, ModelPhase    float64 // of the fitted answers, through the same sums
	GainScatter, PhaseError  float64 // standard uncertainty of the means, 1 and degrees
	Difference, Significance float64 // |measured - model|, and how many of its scatters that is
}

// A response disagrees with the model where the two differ by over a hundredth
// of what went in and by more than noise makes them differ in one of 100,000
// checks of that many frequencies.
const (
	differenceTold = 0.01
	falseAlarm     = 1e-5
)

// Check holds the spectra of several steps (of the same frequencies) against
// their fits. Without any it agrees with nothing and says so by Steps 0.
//
// The test: n |d|^2/(2 s^2), d the mean difference and s the root mean square
// scatter of one part, is exponential if noise alone made it; parameters that
// the fit adapted make it smaller. Source: periodogram of noise, textbook.
func Check(spectra [][]Transfer) CrossCheck {
	c := CrossCheck{Steps: len(spectra)}
	if c.Steps == 0 {
		return c
	}
	n := float64(c.Steps)
	c.Agrees = true
	for i := range spectra[0] {
		var measured, model complex128
		var noise, gain, spreadGain, spreadPhase float64
		for _, s := range spectra {
			measured += s[i].Measured / complex(n, 0)
			model += s[i].Model / complex(n, 0)
			noise += s[i].Scatter * s[i].Scatter / n
		}
		gain = cmplx.Abs(measured)
		for _, s := range spectra {
			// Along the mean and across it: gain and phase.
			turned := s[i].Measured * cmplx.Conj(measured) / complex(math.Max(gain, 1e-300), 0)
			spreadGain += math.Pow(real(turned)-gain, 2)
			spreadPhase += math.Pow(imag(turned), 2)
		}
		scatter := math.Sqrt(noise / n)
		p := CrossPoint{
			Frequency: spectra[0][i].Frequency, Gain: gain, Phase: cmplx.Phase(measured) * 180 / math.Pi,
			ModelGain: cmplx.Abs(model), ModelPhase: cmplx.Phase(model) * 180 / math.Pi,
			GainScatter: scatter, PhaseError: scatter,
			Difference: cmplx.Abs(measured - model),
		}
		if c.Steps > 1 {
			p.GainScatter = math.Max(p.GainScatter, math.Sqrt(spreadGain/(n-1)/n))
			p.PhaseError = math.Max(p.PhaseError, math.Sqrt(spreadPhase/(n-1)/n))
		}
		p.PhaseError *= 180 / math.Pi / math.Max(gain, 1e-300)
		p.Significance = p.Difference / (math.Sqrt2 * scatter)
		if scatter == 0 {
			p.Significance = 0
		}
		c.Points = append(c.Points, p)
		plain := p.Difference > differenceTold && p.Significance*p.Significance > math.Log(float64(len(spectra[0]))/falseAlarm)
		if plain == !c.Agrees && p.Significance >= c.Worst.Significance || plain && c.Agrees {
			c.Worst = p
		}
		c.Agrees = c.Agrees && !plain
	}
	return c
}

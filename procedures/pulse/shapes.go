package pulse

import (
	"fmt"
	"math"
)

// The names of the shapes that come with the program.
const (
	ThreeHarmonics = "three harmonics"
	Smooth         = "smooth"
	Brisk          = "brisk"
)

// Shapes are the pulses that come with the program: a published one and two of
// our own.
//
//	three harmonics  100 + 14.4 [sin t + sin(2 t)/2 + sin(3 t)/4] mmHg: the
//	                 published form DBP + PP/2 + 0.36 PP [...] with DBP 80 and PP
//	                 40. Its extremes are 119.98 and 80.02, not 120 and 80.
//	smooth           our own: two Gaussian bumps a beat, of heights 1 and 0.6, at
//	                 0.20 and 0.42 of the beat, with standard deviations of 0.09
//	                 and 0.15 of it; repeated every beat, between 60 and 140 mmHg
//	brisk            our own: three bumps, heights 1, 0.75 and 0.25 at 0.13, 0.27
//	                 and 0.50, standard deviations 0.045, 0.09 and 0.05; between
//	                 60 and 140 mmHg
//
// The steepest rise of smooth is 6.4 mmHg/beat for each mmHg of pulse, that of
// brisk 12.6: 640 and 1260 mmHg/s at 75/min. The two are stated shapes, chosen
// to stand for a rounded and for a steep pulse; they are nobody's recording.
func Shapes() []Wave {
	return []Wave{
		must(Harmonics(ThreeHarmonics, 100, []float64{0, 0, 0}, []float64{14.4, 7.2, 3.6})),
		must(Bumps(Smooth, 60, 140, []Bump{{1, 0.20, 0.09}, {0.6, 0.42, 0.15}})),
		must(Bumps(Brisk, 60, 140, []Bump{{1, 0.13, 0.045}, {0.75, 0.27, 0.09}, {0.25, 0.50, 0.05}})),
	}
}

// must is for the program's own constants: a test makes them all.
func must(w Wave, err error) Wave {
	if err != nil {
		panic(err)
	}
	return w
}

// Bump is a Gaussian of the beat: Height exp(-((x - At)/Width)^2/2), x and
// At in beats, repeated in every beat.
type Bump struct{ Height, At, Width float64 }

// Bumps makes a wave of the sum of bumps, stretched to lie between diastolic
// and systolic. The harmonics of one bump are exact:
//
//	2 h w sqrt(2 pi) exp(-2 (pi k w)^2) cos and sin of (2 pi k At)
//
// and end where the exponential is below 1e-8. Widths 0.02 to 0.5 beats.
// Source: Fourier transform of a Gaussian, textbook.
func Bumps(name string, diastolic, systolic float64, bumps []Bump) (Wave, error) {
	var cos, sin []float64
	mean := 0.0
	for _, b := range bumps {
		if !(b.Width >= 0.02 && b.Width <= 0.5) {
			return Wave{}, fmt.Errorf("%w: a bump %g beats wide, 0.02 to 0.5 are taken", ErrWave, b.Width)
		}
		mean += b.Height * b.Width * math.Sqrt(2*math.Pi)
		for k := 1; ; k++ {
			x := math.Pi * float64(k) * b.Width
			e := math.Exp(-2 * x * x)
			if e < 1e-8 {
				break
			}
			if k > len(cos) {
				cos, sin = append(cos, 0), append(sin, 0)
			}
			size := 2 * b.Height * b.Width * math.Sqrt(2*math.Pi) * e
			s, c := math.Sincos(2 * math.Pi * float64(k) * b.At)
			cos[k-1] += size * c
			sin[k-1] += size * s
		}
	}
	raw, err := Harmonics(name, mean, cos, sin)
	if err != nil {
		return Wave{}, err
	}
	if !(systolic > diastolic) {
		return Wave{}, fmt.Errorf("%w: systolic %g is not above diastolic %g", ErrWave, systolic, diastolic)
	}
	grow := (systolic - diastolic) / (raw.Systolic - raw.Diastolic)
	for i := range cos {
		cos[i] *= grow
		sin[i] *= grow
	}
	return Harmonics(name, diastolic+grow*(mean-raw.Diastolic), cos, sin)
}

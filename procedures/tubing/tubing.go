// Package tubing says what natural frequency and damping ratio of a filled line
// mean for its hardware: compliance, the air that would explain it, and whether
// the damping is that of the stated bore or of something narrower.
//
// It is numerics only, SI units throughout, and its answers are opinions: they
// hold for a straight rigid tube of one bore with all its compliance at one
// end, laminar flow and a liquid. It says nothing of domes, stopcocks, filters
// and soft tubing in between, which all add damping and compliance of their own.
//
// Order of use: a Line; Compliance of a measured fn; Air from two compliances;
// Product for what fn x zeta should be; Judge for the opinion with its
// uncertainty.
package tubing

import (
	"errors"
	"fmt"
	"math"
)

// Line is a tube filled with a liquid.
type Line struct {
	Length    float64 // m
	Bore      float64 // inner diameter, m
	Density   float64 // kg/m3
	Viscosity float64 // dynamic, Pa s
}

// ErrLine is wrapped by every refusal.
var ErrLine = errors.New("line not usable")

func (l Line) check() error {
	for _, x := range []struct {
		name string
		v    float64
	}{{"length", l.Length}, {"bore", l.Bore}, {"density", l.Density}, {"viscosity", l.Viscosity}} {
		if !(x.v > 0) || math.IsInf(x.v, 0) {
			return fmt.Errorf("%w: its %s is %g", ErrLine, x.name, x.v)
		}
	}
	return nil
}

// Inertance is the mass that a flow has to move, rho L/(pi r^2), kg/m4.
// Source: plug flow, textbook; the velocity profile makes it up to a third
// more at very low frequencies.
func (l Line) Inertance() float64 { return l.Density * l.Length / l.area() }

func (l Line) area() float64 { return math.Pi * l.Bore * l.Bore / 4 }

// Resistance is that of steady laminar flow, 8 eta L/(pi r^4), Pa s/m3
// (Hagen-Poiseuille).
func (l Line) Resistance() float64 {
	r := l.Bore / 2
	return 8 * l.Viscosity * l.Length / (math.Pi * r * r * r * r)
}

// Frequency is the natural frequency (Hz) of the line with a compliance C
// (m3/Pa) at its end, and Damping its damping ratio:
//
//	fn = (r/2) sqrt(1/(pi rho L C)),  zeta = (4 eta/r^3) sqrt(L C/(pi rho))
//
// Source: Applied Biofluid Mechanics, equations 8.32 and 8.33, in another form.
func (l Line) Frequency(c float64) (fn, zeta float64) {
	r := l.Bore / 2
	return r / 2 * math.Sqrt(1/(math.Pi*l.Density*l.Length*c)), 4 * l.Viscosity / (r * r * r) * math.Sqrt(l.Length*c/(math.Pi*l.Density))
}

// Compliance is the volume that the far end takes in for a pressure, m3/Pa,
// that gives the line a natural frequency fn (Hz): Frequency solved for C,
//
//	C = r^2/(4 pi rho L fn^2)
//
// ErrLine for a line or a frequency that is not above 0.
func (l Line) Compliance(fn float64) (float64, error) {
	if err := l.check(); err != nil {
		return 0, err
	}
	if !(fn > 0) || math.IsInf(fn, 0) {
		return 0, fmt.Errorf("%w: a natural frequency of %g Hz", ErrLine, fn)
	}
	r := l.Bore / 2
	return r * r / (4 * math.Pi * l.Density * l.Length * fn * fn), nil
}

// adiabatic is the ratio of specific heats of air.
const adiabatic = 1.4

// Air is the volume of air, m3 at the absolute pressure p (Pa), that has a
// compliance c (m3/Pa): c p when the air stays as warm as the liquid around it,
// 1.4 c p when no heat passes. A bubble in a line lies between, nearer to the
// first the smaller it is and the slower the line.
//
// Air that has this volume at p takes p/p0 times as much at another absolute
// pressure p0. Source: gas law; the ratio 1.4 of dry air, textbook.
func Air(c, p float64) (isothermal, adiabat float64) { return c * p, adiabatic * c * p }

// Product is what fn x zeta (Hz) of the line is for steady laminar flow,
// whatever its length and its compliance: 2 eta/(pi rho r^2). Source: the two
// formulas of Frequency multiplied.
func (l Line) Product() float64 {
	r := l.Bore / 2
	return 2 * l.Viscosity / (math.Pi * l.Density * r * r)
}

// Oscillating is fn x zeta (Hz) of the line when the flow swings at fn (Hz) in
// place of being steady: the liquid then moves like a plug with a thin sheared
// layer at the wall, which damps more. The resistance is the real part of the
// impedance of laminar oscillating flow,
//
//	Z = i w rho L/(pi r^2)/(1 - F),  F = 2 J1(k)/(k J0(k)),  k = i^(3/2) a
//	a = r sqrt(w rho/eta)
//
// over twice its inertance Im Z/w, over 2 pi. For slow swings it tends to
// Product times 3/4, because the inertance of a parabolic profile is 4/3 of
// the plug's. Source: Womersley, J Physiol 1955;127:553-563, from memory.
func (l Line) Oscillating(fn float64) float64 {
	w := 2 * math.Pi * fn
	a := l.Bore / 2 * math.Sqrt(w*l.Density/l.Viscosity)
	z := complex(0, 1) / (1 - womersley(a)) // in w rho L/(pi r^2)
	return w * real(z) / imag(z) / 2 / (2 * math.Pi)
}

// womersley is F = 2 J1(k)/(k J0(k)), k = i^(3/2) a, by the continued fraction
// J[n]/J[n-1] = 1/(2 n/k - J[n+1]/J[n]), begun where the ratio is nothing: the
// Bessel functions of growing order are the recurrence's smallest solution, so
// what the beginning has wrong dies out.
func womersley(a float64) complex128 {
	k := complex(a, 0) * complex(-math.Sqrt2/2, math.Sqrt2/2)
	var ratio complex128
	for n := int(a) + 40; n >= 1; n-- {
		ratio = 1 / (complex(2*float64(n), 0)/k - ratio)
	}
	return 2 * ratio / k
}

package results

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"strings"

	"kymobench/bench/quantity"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/step"
	"kymobench/procedures/tubing"
)

// Opinions say what the figures may mean for the hardware. They are no
// results: they hold for a straight rigid tube with laminar flow, and no limit
// is compared with them.
type Opinions struct {
	Compliance  *DerivedFigure `json:"compliance_mm3_per_100mmHg"` // of all that yields at the far end
	Air         *AirVolume     `json:"air"`
	Steady      *DerivedFigure `json:"product_over_steady_flow"`      // fn x zeta over 2 eta/(pi rho r^2)
	Oscillating *DerivedFigure `json:"product_over_oscillating_flow"` // over that of flow swinging at fn
	Designed    *DerivedFigure `json:"product_over_designed"`
	Finding     string         `json:"finding"` // as_stated, more, less, undetermined
	Texts       []Reason       `json:"texts"`
}

// AirVolume is the air at atmospheric pressure that would explain a natural
// frequency, from as warm as the liquid (isothermal) to no heat passing.
type AirVolume struct {
	Explains   string        `json:"explains"` // all of the compliance, or the change from the designed line
	Isothermal DerivedFigure `json:"isothermal_ul"`
	Adiabatic  DerivedFigure `json:"adiabatic_ul"`
	Absolute   float64       `json:"absolute_pressure_kPa"` // while it rings
}

// standardAtmosphere stands for a barometer that nobody read, with a half-width
// for weather and height: 8 % is from sea level to some 700 m.
const (
	standardAtmosphere  = 101325.0 // Pa
	atmosphereTolerance = 0.08
)

// designedTolerance is the half-width taken for designed figures, and changed
// how far from them still counts as the same line (common practice, no source).
const (
	designedTolerance = 0.05
	changed           = 0.2
)

// lineKnown is the stated line with the half-widths of what was stated.
type lineKnown struct {
	tubing.Line
	length, bore, viscosity float64 // shares
	fluid                   string
}

// halfDigit is the half-width of a stated length as a share: half of its last
// digit ("1.6 mm" lies between 1.55 and 1.65 mm).
func halfDigit(text string, v quantity.Value) float64 {
	return 0.5 * lastDigit(text) / math.Abs(v.Stated)
}

// lastDigit is one of the last digit of a number that is stated with its unit.
func lastDigit(text string) float64 {
	number, _, _ := strings.Cut(text, " ")
	_, after, _ := strings.Cut(number, ".")
	return math.Pow10(-len(after))
}

// known reads the stated line; the second value says what is missing.
func known(l record.Line) (lineKnown, string) {
	var k lineKnown
	take := func(what, text string) (float64, float64, string) {
		if text == "" {
			return 0, 0, what + " is not stated"
		}
		v, err := quantity.ParseAs(text, quantity.DimLength)
		if err != nil || !(v.SI > 0) {
			return 0, 0, fmt.Sprintf("%s %q is no length", what, text)
		}
		return v.SI, halfDigit(text, v), ""
	}
	var why string
	if k.Length, k.length, why = take("the line's length", l.Length); why != "" {
		return k, why
	}
	if k.Bore, k.bore, why = take("the line's bore", l.Bore); why != "" {
		return k, why
	}
	if l.FluidDensity != "" || l.FluidViscosity != "" {
		density, err := parsed(l.FluidDensity, quantity.DimDensity)
		viscosity, other := parsed(l.FluidViscosity, quantity.DimViscosity)
		if err != nil || other != nil || !(density > 0) || !(viscosity > 0) {
			return k, fmt.Sprintf("density %q and viscosity %q of the fluid cannot both be read", l.FluidDensity, l.FluidViscosity)
		}
		k.Density, k.Viscosity, k.viscosity = density, viscosity, 0.05
		k.fluid = fmt.Sprintf("a fluid of %.4g kg/m3 and %.3g mPa s, as stated", density, 1000*viscosity)
		return k, ""
	}
	f, ok := tubing.FluidNamed(l.Fluid)
	if !ok {
		return k, fmt.Sprintf("the fluid %q is not known by name and its density and viscosity are not stated", l.Fluid)
	}
	k.Density, k.Viscosity, k.viscosity = f.Density, f.Viscosity, f.Tolerance
	k.fluid = fmt.Sprintf("%s at 20 degC (%.4g kg/m3, %.3g mPa s)", f.Name, f.Density, 1000*f.Viscosity)
	return k, ""
}

// opinions works them out with the draws; the tolerances of what was stated are
// drawn beside them, evenly within their half-widths.
func (g *gathered) opinions(s *scale, d *dynamics, joint step.Joint, drawn step.Draws) (*Opinions, error) {
	stated := g.stated()
	out := &Opinions{Finding: tubing.Undetermined.String(), Texts: []Reason{}}
	say := func(code, format string, a ...any) {
		out.Texts = append(out.Texts, Reason{code, fmt.Sprintf(format, a...)})
	}
	k, missing := known(stated)
	air := surroundings(stated, s, d)
	if air.err != nil {
		return nil, air.err
	}
	design, err := designed(stated)
	if err != nil {
		return nil, err
	}
	r := rand.New(rand.NewPCG(drawSeed, 0x6c696e65))
	either := func(half float64) float64 { return 1 + half*(2*r.Float64()-1) }
	var compliance, isothermal, adiabat, steady, oscillating, product, frequency []float64
	for i, fn := range drawn.Frequency {
		zeta := drawn.Damping[i]
		l := k.Line
		l.Length *= either(k.length)
		l.Bore *= either(k.bore)
		l.Viscosity *= either(k.viscosity)
		clean := design.frequency * either(designedTolerance)
		product = append(product, fn*zeta/(clean*design.damping*either(designedTolerance)))
		frequency = append(frequency, fn/clean)
		atmosphere := either(air.tolerance)
		if missing != "" {
			continue
		}
		c, _ := l.Compliance(fn)
		compliance = append(compliance, c)
		if design.frequency > 0 {
			before, _ := l.Compliance(clean)
			c -= before
		}
		iso, adi := air.volume(c, atmosphere)
		isothermal, adiabat = append(isothermal, iso), append(adiabat, adi)
		steady = append(steady, fn*zeta/l.Product())
		oscillating = append(oscillating, fn*zeta/l.Oscillating(fn))
	}
	// Half-widths outweigh the scatter of the steps here, so the factor of a
	// normal distribution leads from the interval to the standard uncertainty.
	joint.DegreesOfFreedom = 0
	figure := func(best float64, values []float64, scale float64) *DerivedFigure {
		f := derivedFigure(joint.Figure(best, values), scale)
		return &f
	}
	if design.damping > 0 {
		out.Designed = figure(joint.Frequency*joint.Damping/(design.frequency*design.damping), product, 1)
	}
	var moved *DerivedFigure
	if design.frequency > 0 {
		moved = figure(joint.Frequency/design.frequency, frequency, 1)
	}
	if missing == "" {
		c, err := k.Compliance(joint.Frequency)
		if err != nil {
			return nil, err
		}
		out.Compliance = figure(c, compliance, 1e9*100*float64(quantity.MillimetreOfMercury))
		explains := "all of the compliance, if nothing else yields"
		if design.frequency > 0 {
			before, err := k.Compliance(design.frequency)
			if err != nil {
				return nil, err
			}
			c -= before
			explains = "the change from the designed line"
		}
		iso, adi := air.volume(c, 1)
		out.Air = &AirVolume{Explains: explains, Isothermal: *figure(iso, isothermal, 1e9), Adiabatic: *figure(adi, adiabat, 1e9), Absolute: air.absolute / 1000}
		out.Steady = figure(joint.Frequency*joint.Damping/k.Product(), steady, 1)
		out.Oscillating = figure(joint.Frequency*joint.Damping/k.Oscillating(joint.Frequency), oscillating, 1)
	}
	out.conclude(moved, missing, k, say)
	return out, nil
}

// conclude puts the figures into sentences.
func (o *Opinions) conclude(moved *DerivedFigure, missing string, k lineKnown, say func(code, format string, a ...any)) {
	span := func(f *DerivedFigure) tubing.Interval {
		return tubing.Interval{Low: f.Interval[0], High: f.Interval[1]}
	}
	change := tubing.Undetermined
	if moved != nil {
		change = tubing.JudgeChange(span(moved), changed)
	}
	finding := tubing.Undetermined
	switch {
	case o.Designed != nil:
		finding = tubing.JudgeChange(span(o.Designed), changed)
	case o.Steady != nil:
		finding = tubing.Judge(span(o.Steady), span(o.Oscillating))
	}
	o.Finding = finding.String()
	if o.Air != nil {
		a, b := o.Air.Isothermal, o.Air.Adiabatic
		low, high := math.Max(0, a.Interval[0]), b.Interval[1]
		switch {
		case moved == nil:
			say("air", "if nothing but air yielded, it would be %s to %s \u00b5l of it at atmospheric pressure (95 %%, isothermal to adiabatic, the bubble at %.1f kPa absolute): there is no more than that", two(low), two(high), o.Air.Absolute)
		case change == tubing.Less:
			say("air", "the natural frequency is lower than designed; %s to %s \u00b5l of air at atmospheric pressure would explain it (95 %%, isothermal to adiabatic, the bubble at %.1f kPa absolute), or a softer line or dome", two(low), two(high), o.Air.Absolute)
		case change == tubing.AsStated:
			say("no_air", "the natural frequency is that of the designed line within %.0f %%: no air is needed to explain it", 100*changed)
		case change == tubing.More:
			say("no_air", "the natural frequency is higher than designed: no air, or not the line that was designed")
		default:
			say("undetermined", "whether the natural frequency is that of the designed line cannot be told")
		}
	}
	switch {
	case o.Designed != nil && finding == tubing.More:
		say("narrowing", "the product fn x zeta is %.2f times that of the designed line (95 %%: %.2f to %.2f). Air leaves it alone: look for a narrowing (kink, clot, a stopcock not quite open) or another loss", *o.Designed.Value, o.Designed.Interval[0], o.Designed.Interval[1])
	case o.Designed != nil && finding == tubing.AsStated:
		say("as_designed", "the product fn x zeta is that of the designed line within %.0f %%: nothing is narrower; what has changed, if anything, yields", 100*changed)
	case o.Designed != nil && finding == tubing.Less:
		say("less_damped", "the product fn x zeta is below that of the designed line (%.2f of it; 95 %%: %.2f to %.2f): a wider or shorter line, a thinner fluid, or a loss that was taken out", *o.Designed.Value, o.Designed.Interval[0], o.Designed.Interval[1])
	case o.Designed != nil:
		say("undetermined", "whether fn x zeta is that of the designed line cannot be told: %.2f of it, 95 %% interval %.2f to %.2f", *o.Designed.Value, o.Designed.Interval[0], o.Designed.Interval[1])
	case o.Steady == nil:
		say("undetermined", "what damps the line cannot be told: %s", missing)
	case finding == tubing.More:
		say("narrowing", "the product fn x zeta is %.1f times what steady flow through the stated bore of %.3g mm gives, %.1f times that of oscillating flow: something else than the stated bore damps. That is a dome, a restrictor, a filter or the transducer itself; or, where a line of this kind used to damp less, a narrowing (kink, clot, a stopcock not quite open). Air would leave the product alone", *o.Steady.Value, 1000*k.Bore, *o.Oscillating.Value)
	case finding == tubing.AsStated:
		say("as_stated", "the product fn x zeta is what the stated bore of %.3g mm gives (%.2f of steady, %.2f of oscillating laminar flow): nothing points to a narrowing; if the natural frequency is too low, it is air or something soft", 1000*k.Bore, *o.Steady.Value, *o.Oscillating.Value)
	case finding == tubing.Less:
		say("less_damped", "the product fn x zeta is below what any line of the stated bore of %.3g mm and fluid gives (%.2f of steady flow): bore, length or fluid are not as stated", 1000*k.Bore, *o.Steady.Value)
	default:
		say("undetermined", "whether the damping is that of the stated bore of %.3g mm cannot be told: fn x zeta is %.2f (95 %%: %.2f to %.2f) of steady and %.2f (%.2f to %.2f) of oscillating laminar flow, and real lines lie up to twice above", 1000*k.Bore,
			*o.Steady.Value, o.Steady.Interval[0], o.Steady.Interval[1], *o.Oscillating.Value, o.Oscillating.Interval[0], o.Oscillating.Interval[1])
	}
	if o.Steady != nil {
		say("validity", "this holds for %s in a straight rigid tube with laminar flow and all that yields at its end. Bore and length were taken to be within half of their last digit, the viscosity within %.0f %%. Damping measured at high frequencies was found well above the laminar model (Donovan et al., J Biomech Eng 1991;113:476-484), and soft tubing, domes, stopcocks and filters are not in it",
			k.fluid, 100*k.viscosity)
	}
}

// two prints a number with two significant digits and without an exponent.
func two(x float64) string {
	if !(x > 0) {
		return "0"
	}
	p := math.Pow10(1 - int(math.Floor(math.Log10(x))))
	return strconv.FormatFloat(math.Round(x*p)/p, 'f', -1, 64)
}

// clean is the same line when it was clean; zeros when nobody stated it.
type clean struct{ frequency, damping float64 }

func designed(l record.Line) (clean, error) {
	var c clean
	var err error
	if c.frequency, err = parsed(l.DesignedFrequency, quantity.DimFrequency); err != nil {
		return c, fmt.Errorf("designed frequency: %w", err)
	}
	if l.DesignedDamping != "" {
		if c.damping, err = quantity.ParseDecimal(l.DesignedDamping); err != nil {
			return c, fmt.Errorf("designed damping: %w", err)
		}
	}
	if c.frequency < 0 || c.damping < 0 || c.damping > 0 && c.frequency == 0 {
		return c, fmt.Errorf("designed frequency %q and damping %q", l.DesignedFrequency, l.DesignedDamping)
	}
	return c, nil
}

// surrounding is the air pressure around the bench and in the line.
type surrounding struct {
	atmosphere, absolute, tolerance float64 // Pa, Pa, share
	err                             error
}

// surroundings takes the barometer if somebody read it, and adds the mean
// pressure about which the steps rang.
func surroundings(l record.Line, s *scale, d *dynamics) surrounding {
	out := surrounding{atmosphere: standardAtmosphere, tolerance: atmosphereTolerance}
	if l.Barometer != "" {
		p, err := parsed(l.Barometer, quantity.DimPressure)
		if err != nil || !(p > 20e3 && p < 120e3) {
			out.err = fmt.Errorf("barometer %q: an absolute pressure between 20 and 120 kPa is expected", l.Barometer)
			return out
		}
		out.atmosphere, out.tolerance = p, 0.002
	}
	n, level := 0.0, 0.0
	for _, c := range d.all {
		for _, st := range c.steps {
			if st.Determined {
				n++
				// A release ends at atmosphere, whatever the UUT's zero reads.
				if c.Direction != string(procedures.Release) {
					level += s.unit.ToSI(st.Baseline + st.Height)
				}
			}
		}
	}
	out.absolute = out.atmosphere + level/math.Max(1, n)
	return out
}

// volume is the air of a compliance, as it is at atmospheric pressure, for an
// atmosphere so many times the one taken.
func (a surrounding) volume(c, times float64) (isothermal, adiabat float64) {
	p := a.absolute + (times-1)*a.atmosphere
	isothermal, adiabat = tubing.Air(c, p)
	grow := p / (times * a.atmosphere)
	return isothermal * grow, adiabat * grow
}

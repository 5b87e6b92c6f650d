package results

import (
	"math"

	"kymobench/procedures/fit"
)

// Lines are the four lines of Linearity; nil where it is undetermined.
type Lines struct {
	Independent  *Line `json:"independent"`
	Terminal     *Line `json:"terminal"`
	ZeroBased    *Line `json:"zero_based"`
	LeastSquares *Line `json:"least_squares"`
}

// Line is one of the four, and what the noise of the readings alone leaves in
// its linearity; nil where nothing was read twice.
type Line struct {
	Intercept float64  `json:"intercept"`
	Slope     float64  `json:"slope"`
	Standard  *float64 `json:"linearity_standard_uncertainty"`
}

// HysteresisAt is that of one cycle at one set pressure, down less up.
type HysteresisAt struct {
	Cycle int     `json:"cycle"`
	At    float64 `json:"at"`
	Value float64 `json:"value"`
}

// SetPressure is what was found at one set pressure; nil where nothing shows
// it. Average is of the legs, reduced to the set pressure; Hysteresis is the
// magnitude, averaged over the cycles; repeatability and reproducibility are
// ranges of readings less their own cycle's zero.
type SetPressure struct {
	Set             float64  `json:"set"`
	Average         *float64 `json:"average"`
	Hysteresis      *float64 `json:"mean_hysteresis"`
	RangeUp         *float64 `json:"range_up"`
	RangeDown       *float64 `json:"range_down"`
	Repeatability   *float64 `json:"repeatability_less_zero"`
	Reproducibility *float64 `json:"reproducibility_less_zero"`
	SD              *float64 `json:"standard_deviation"` // of one reading about its leg's mean
	DoF             int      `json:"degrees_of_freedom"`
}

// WeightedLine is the least-squares line in which each reading weighs by its
// noise, where the scatter shows that this grows with the pressure:
// sigma^2 = constant^2 + (share x pressure)^2.
type WeightedLine struct {
	Intercept  Figure  `json:"intercept"`
	Slope      Figure  `json:"slope"`
	Covariance float64 `json:"covariance_intercept_slope"`
	Constant   float64 `json:"noise_constant"`
	Share      float64 `json:"noise_share"`
	DoF        int     `json:"residual_degrees_of_freedom"`
}

// Extremes are the highest and the lowest error.
type Extremes struct {
	Highest ErrorAt `json:"highest"`
	Lowest  ErrorAt `json:"lowest"`
}

// Curvature describes the readings by the powers of the pressure, from the
// constant up; the covariance is by the scatter about that curve.
type Curvature struct {
	Coefficients []float64   `json:"coefficients"`
	Covariance   [][]float64 `json:"covariance"`
	ResidualSD   float64     `json:"residual_standard_deviation"`
	DoF          int         `json:"residual_degrees_of_freedom"`
}

// Undetermined is a figure that the readings cannot give.
type Undetermined struct {
	Figure string `json:"figure"`
	Reason string `json:"reason"`
}

// conformity puts what the fit says beyond single figures into the results.
func (out *Static) conformity(f fit.Figures) {
	out.Linearity, out.Lines = linearityOf(f.Linearity)
	out.CycleNumbers = f.CycleNumbers
	out.EachHysteresis = []HysteresisAt{}
	for _, h := range f.EachHysteresis {
		out.EachHysteresis = append(out.EachHysteresis, HysteresisAt{h.Cycle, h.At, h.Value})
	}
	out.Points = []SetPressure{}
	for _, p := range f.Points {
		out.Points = append(out.Points, SetPressure{p.Set, p.Average, p.Hysteresis, p.RangeUp, p.RangeDown, p.Repeatability, p.Reproducibility, p.SD, p.DoF})
	}
	out.AsRead, out.AfterZero = extremesOf(f.AsRead), extremesOf(f.AfterZero)
	out.Reproducibility = f.Reproducibility
	if c := f.Curvature; c != nil {
		out.Curvature = &Curvature{c.Coefficients, c.Covariance, c.Residual, c.DoF}
	}
	if g := f.Growing; g != nil {
		l := g.Line
		out.Weighted = &WeightedLine{Figure{l.Intercept, l.UIntercept}, Figure{l.Slope, l.USlope}, l.Covariance, g.Constant, g.Share, l.DoF}
	}
	if s := f.Repeatability.PooledSD; s != nil {
		of := math.Sqrt2 * *s
		out.DifferenceSD = &of
	}
	out.Undetermined = []Undetermined{}
	for _, u := range f.Undetermined {
		out.Undetermined = append(out.Undetermined, Undetermined{u.Figure, u.Reason})
	}
}

func linearityOf(l fit.Linearities) (Linearity, Lines) {
	one := func(d *fit.Deviation) (*float64, *Line) {
		if d == nil {
			return nil, nil
		}
		line := &Line{Intercept: d.Intercept, Slope: d.Slope}
		if !math.IsNaN(d.Standard) {
			line.Standard = &d.Standard
		}
		return &d.Value, line
	}
	var values Linearity
	var lines Lines
	values.Independent, lines.Independent = one(l.Independent)
	values.Terminal, lines.Terminal = one(l.Terminal)
	values.ZeroBased, lines.ZeroBased = one(l.ZeroBased)
	values.LeastSquares, lines.LeastSquares = one(l.LeastSquares)
	return values, lines
}

func extremesOf(e fit.Extremes) *Extremes {
	return &Extremes{*errorAtOf(&e.Highest), *errorAtOf(&e.Lowest)}
}

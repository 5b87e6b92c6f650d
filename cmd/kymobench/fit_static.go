package main

import (
	"fmt"
	"io"
	"math"
	"strings"
	"text/tabwriter"

	"kymobench/procedures/results"
)

// staticTable prints the static figures, one a line; those that are missing
// say why.
type staticTable struct {
	*tabwriter.Writer
	s *results.Static
}

func printStatic(w io.Writer, s *results.Static) error {
	t := staticTable{tabwriter.NewWriter(w, 0, 0, 2, ' ', 0), s}
	u := s.Unit
	fmt.Fprintf(t, "readings\t%d\tin %d cycles\n", s.Readings, s.Cycles)
	t.figure("intercept", "line", s.Intercept, u)
	t.figure("slope", "line", s.Slope, "1")
	dof := ""
	if s.ResidualDoF != nil {
		dof = fmt.Sprintf("%d degrees of freedom", *s.ResidualDoF)
	}
	t.row("residual standard deviation", "line", s.ResidualSD, u, dof)
	if g := s.Weighted; g != nil {
		fmt.Fprintf(t, "noise grows with the pressure\t%.3g\t%s\tand %.3g %% of it, each squared and added\n", g.Constant, u, 100*g.Share)
		t.figure("intercept, weighted by it", "line", &g.Intercept, u)
		t.figure("slope, weighted by it", "line", &g.Slope, "1")
	}
	if s.Sensitivity != nil {
		t.figure("sensitivity", "line", &results.Figure{Value: s.Sensitivity.Value, Standard: s.Sensitivity.Standard}, s.Sensitivity.Unit)
	}
	byNoise := t.byNoise(s.DifferenceSD)
	if s.ZeroOffset != nil {
		t.row("zero offset", "", &s.ZeroOffset.Value, u, t.byNoise(s.Repeatability.PooledSD))
	}
	for i, z := range s.ZeroReturn {
		t.row(fmt.Sprintf("zero return, cycle %d", s.CycleNumbers[i]), "zero return", z, u, byNoise)
	}
	t.linearity("independent", s.Linearity.Independent, s.Lines.Independent)
	t.linearity("terminal-based", s.Linearity.Terminal, s.Lines.Terminal)
	t.linearity("zero-based", s.Linearity.ZeroBased, s.Lines.ZeroBased)
	t.linearity("least squares", s.Linearity.LeastSquares, s.Lines.LeastSquares)
	if h := s.Hysteresis; h != nil {
		t.row("hysteresis, largest", "", &h.Largest, u, fmt.Sprintf("at %.6g %s, %s", h.At, u, byNoise))
	} else {
		t.row("hysteresis, largest", "hysteresis", nil, u, "")
	}
	t.row("repeatability, largest range", "repeatability", s.Repeatability.LargestRange, u, "")
	dof = ""
	if s.Repeatability.DoF != nil {
		dof = fmt.Sprintf("%d degrees of freedom", *s.Repeatability.DoF)
	}
	t.row("repeatability, pooled SD", "repeatability", s.Repeatability.PooledSD, u, dof)
	t.row("reproducibility, largest", "reproducibility", s.Reproducibility, u, "")
	one := t.byNoise(s.Repeatability.PooledSD)
	t.error("largest error", s.LargestError, one)
	t.error("largest error after zero", s.ErrorAfterZero, byNoise)
	if s.AfterZero != nil {
		t.error("highest error after zero", &s.AfterZero.Highest, byNoise)
		t.error("lowest error after zero", &s.AfterZero.Lowest, byNoise)
		t.error("highest error as read", &s.AsRead.Highest, one)
		t.error("lowest error as read", &s.AsRead.Lowest, one)
	}
	t.curvature()
	t.points()
	reservations(t, s.Reservations)
	return t.Flush()
}

// why is the reason that a figure is missing.
func (t staticTable) why(figure string) string {
	for _, u := range t.s.Undetermined {
		if u.Figure == figure {
			return u.Reason
		}
	}
	return ""
}

func (t staticTable) row(name, figure string, v *float64, unit, note string) {
	if v == nil {
		fmt.Fprintf(t, "%s\tundetermined\t\t%s\n", name, t.why(figure))
		return
	}
	fmt.Fprintf(t, "%s\t%.6g\t%s\t%s\n", name, *v, unit, note)
}

func (t staticTable) figure(name, figure string, f *results.Figure, unit string) {
	if f == nil {
		t.row(name, figure, nil, unit, "")
		return
	}
	t.row(name, figure, &f.Value, unit, fmt.Sprintf("standard uncertainty %.2g", f.Standard))
}

// byNoise says how uncertain a figure is by the noise of the readings alone.
func (t staticTable) byNoise(u *float64) string {
	if u == nil {
		return "uncertainty by noise undetermined"
	}
	return fmt.Sprintf("standard uncertainty by noise %.2g", *u)
}

func (t staticTable) linearity(name string, v *float64, line *results.Line) {
	note := ""
	if line != nil {
		note = fmt.Sprintf("%s; intercept %.6g %s, slope %.8g", t.byNoise(line.Standard), line.Intercept, t.s.Unit, line.Slope)
	}
	t.row("linearity, "+name, "linearity", v, t.s.Unit, note)
}

func (t staticTable) error(name string, e *results.ErrorAt, noise string) {
	if e == nil {
		t.row(name, "", nil, "", "")
		return
	}
	where := fmt.Sprintf("cycle %d, %s", e.Cycle, e.Leg)
	if e.At != nil {
		where = fmt.Sprintf("at %.6g %s, %s", *e.At, t.s.Unit, where)
	}
	t.row(name, "", &e.Value, t.s.Unit, where+"; "+noise)
}

func (t staticTable) curvature() {
	c := t.s.Curvature
	if c == nil {
		t.row("curvature", "curvature", nil, "", "")
		return
	}
	for k, b := range c.Coefficients {
		unit := t.s.Unit
		switch k {
		case 0:
		case 1:
			unit = "1"
		case 2:
			unit = "1/" + t.s.Unit
		default:
			unit = fmt.Sprintf("1/%s^%d", t.s.Unit, k-1)
		}
		t.figure(fmt.Sprintf("polynomial, power %d", k), "", &results.Figure{Value: b, Standard: math.Sqrt(c.Covariance[k][k])}, unit)
	}
	t.row("residual SD about it", "", &c.ResidualSD, t.s.Unit, fmt.Sprintf("%d degrees of freedom", c.DoF))
}

// manyPoints is how many set pressures or cycles are listed; the JSON has all.
const manyPoints = 40

func (t staticTable) points() {
	of := map[float64][]string{}
	if t.s.Cycles <= manyPoints {
		for _, h := range t.s.EachHysteresis {
			of[h.At] = append(of[h.At], fmt.Sprintf("%.4g (cycle %d)", h.Value, h.Cycle))
		}
	}
	for i, p := range t.s.Points {
		if i == manyPoints {
			fmt.Fprintf(t, "and %d set pressures more\t\t\t--json has them all\n", len(t.s.Points)-i)
			return
		}
		var notes []string
		add := func(name string, v *float64) {
			if v != nil {
				notes = append(notes, fmt.Sprintf("%s %.4g", name, *v))
			}
		}
		if each := of[p.Set]; each != nil {
			notes = append(notes, "hysteresis "+strings.Join(each, ", "))
		} else {
			add("mean hysteresis", p.Hysteresis)
		}
		add("range up", p.RangeUp)
		add("range down", p.RangeDown)
		add("repeatability less zero", p.Repeatability)
		add("reproducibility less zero", p.Reproducibility)
		name := fmt.Sprintf("average at %.6g %s", p.Set, t.s.Unit)
		if p.Average == nil {
			fmt.Fprintf(t, "%s\tundetermined\t\t%s\n", name, strings.Join(append(notes, "only one leg was read"), "; "))
			continue
		}
		t.row(name, "", p.Average, t.s.Unit, strings.Join(notes, "; "))
	}
}

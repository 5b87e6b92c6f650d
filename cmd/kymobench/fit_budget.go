package main

import (
	"fmt"
	"io"
	"math"
	"strings"

	"kymobench/procedures/results"
)

// budgetWidth is what fits an ordinary terminal.
const budgetWidth = 100

// printBudgets prints every budget as a table, and what belongs into them and
// nobody stated.
func printBudgets(w io.Writer, r results.Results) error {
	var b strings.Builder
	fmt.Fprintf(&b, "standard uncertainty = stated / divisor; contribution = standard uncertainty x sensitivity;\n")
	fmt.Fprintf(&b, "dof: degrees of freedom; k: factor for 95 %%; U = k x root of the sum of squares\n")
	for _, x := range r.Budgets {
		printBudget(&b, x)
	}
	if len(r.NotStated) > 0 {
		fmt.Fprintf(&b, "\nnot stated, and in none of these budgets:\n")
		for _, n := range r.NotStated {
			b.WriteString(wrapped("  - "+n.Text, budgetWidth, "    "))
		}
	}
	for _, n := range r.Static.Reservations {
		b.WriteString(wrapped(fmt.Sprintf("reservation: %s (%s)", n.Text, n.Code), budgetWidth, "  "))
	}
	_, err := io.WriteString(w, b.String())
	return err
}

const budgetRow = "  %-31s %-11s %-6s %14s %7s %8s %9s %5s\n"

func printBudget(b *strings.Builder, x results.Budget) {
	fmt.Fprintf(b, "\n%s\n", budgetTitle(x))
	if len(x.Lines) > 0 {
		fmt.Fprintf(b, budgetRow, "contribution", "from", "dist.", "stated", "divisor", "sens.", "contrib.", "dof")
	}
	for _, l := range x.Lines {
		fmt.Fprintf(b, budgetRow, l.Name, l.Source, distributionText(l.Distribution), plainUnit(l.Stated, l.Unit), divisorText(l),
			fmt.Sprintf("%.3g", l.Sensitivity), fmt.Sprintf("%.3g", l.Contribution), dofText(l.DoF))
	}
	if x.Reason != "" {
		b.WriteString(wrapped("  no interval: "+x.Reason, budgetWidth, "  "))
		return
	}
	fmt.Fprintf(b, "  u %.4g, dof %s, k %.4g, U %.3g %s: 95 %% interval %.6g to %.6g\n",
		*x.Standard, dofText(x.DoF), *x.Coverage, *x.Expanded, x.Unit, x.Interval[0], x.Interval[1])
	if m := x.Sampled; m != nil {
		fmt.Fprintf(b, "  U is by Monte Carlo, %d draws, seed %d: the shortcut gives %.3g, more than 5 %% off\n", m.Draws, m.Seed, m.Shortcut)
	}
}

// budgetTitle is the figure with its value and what it was found from.
func budgetTitle(x results.Budget) string {
	name := map[string]string{
		results.FigureError:         "error after zeroing",
		results.FigureMeanError:     "error after zeroing of the legs' mean",
		results.FigureZeroOffset:    "zero offset before zeroing",
		results.FigureLargestError:  "largest error after zeroing, combined",
		results.FigureZeroReturn:    "return of zero",
		results.FigureRepeatability: "repeatability, largest range",
		results.FigurePooled:        "repeatability, pooled standard deviation",
	}[x.Figure]
	if name == "" {
		name = strings.ReplaceAll(x.Figure, "_", " ")
	}
	if x.Set != nil {
		name += fmt.Sprintf(" at %.6g", *x.Set)
	}
	if x.Leg != "" {
		name += ", " + x.Leg
	}
	if x.Cycle > 0 {
		name += fmt.Sprintf(", cycle %d", x.Cycle)
	}
	readings := "readings"
	if x.Readings == 1 {
		readings = "reading"
	}
	return fmt.Sprintf("%s: %.6g %s (%d %s)", name, *x.Value, x.Unit, x.Readings, readings)
}

func distributionText(d string) string {
	if d == "rectangular" {
		return "rect."
	}
	return d
}

// divisorText writes the divisors of a half and of a full width as what they are.
func divisorText(l results.BudgetLine) string {
	switch {
	case l.Distribution == "rectangular" && math.Abs(l.Divisor*l.Divisor-3) < 1e-9:
		return "sqrt3"
	case l.Distribution == "rectangular" && math.Abs(l.Divisor*l.Divisor-12) < 1e-9:
		return "2sqrt3"
	}
	return fmt.Sprintf("%.4g", l.Divisor)
}

// plainUnit writes a number with its unit; shares as they are stated, in per cent.
func plainUnit(x float64, unit string) string {
	if unit == "1" {
		return fmt.Sprintf("%.4g %%", 100*x)
	}
	return fmt.Sprintf("%.4g %s", x, unit)
}

func dofText(dof *float64) string {
	switch {
	case dof == nil:
		return "inf"
	case *dof >= 9999:
		return ">9999"
	}
	return fmt.Sprintf("%.4g", *dof)
}

// wrapped breaks a text at blanks so that no line is longer than width.
func wrapped(text string, width int, indent string) string {
	var out strings.Builder
	line := ""
	for _, word := range strings.SplitAfter(text, " ") {
		if len([]rune(line))+len([]rune(strings.TrimRight(word, " "))) > width && strings.TrimSpace(line) != "" {
			out.WriteString(strings.TrimRight(line, " ") + "\n")
			line = indent
		}
		line += word
	}
	out.WriteString(strings.TrimRight(line, " ") + "\n")
	return out.String()
}

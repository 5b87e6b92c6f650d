// Package uncertainty says how uncertain a figure is. It knows no units and
// judges nothing.
//
// Order of use: make each Input from what is stated of it (Expanded, HalfWidth,
// FullWidth, Mean), with its source, its sensitivity coefficient and, where the
// same error is in several inputs or several figures, a key; then Evaluate the
// Budget. That gives the standard uncertainty, effective degrees of freedom,
// coverage factor and 95 % interval after the GUM, or the interval by Monte
// Carlo where the GUM's is more than 5 % off, and which it was and why.
// Covariances gives what several figures have in common, Rectangle the
// probability that several quantities lie within bounds together.
package uncertainty

import (
	"fmt"
	"math"
	"strconv"
)

// The distributions that an Input may name.
const (
	Normal      = "normal"      // Student's t when its degrees of freedom are finite
	Rectangular = "rectangular" // half-width sqrt(3) x Standard
	Triangular  = "triangular"  // half-width sqrt(6) x Standard
	UShaped     = "u_shaped"    // half-width sqrt(2) x Standard: a sine caught at any moment (arcsine)
	StudentT    = "t"           // scaled by Standard: its own SD is larger
)

// Where the number behind an input may come from.
const (
	FromCertificate    = "certificate"
	FromBench          = "bench file"
	FromRun            = "this run"
	FromCommonPractice = "common practice"
)

// What Stated may be.
const (
	AsStandard  = "standard"   // a standard uncertainty; Divisor 1
	AsExpanded  = "expanded"   // Divisor is the coverage factor k
	AsHalfWidth = "half_width" // the divisor follows from the distribution
	AsFullWidth = "full_width"
	AsScatter   = "scatter" // standard deviation of single readings; Divisor is the root of how many a mean has
)

// Input is one contribution. Inputs of one key are one error: their
// coefficients add within a budget, and budgets that hold it have it in common.
// Without a key an input is independent of all others.
type Input struct {
	Name, Source, Distribution string
	Standard                   float64 // standard uncertainty, in the input's own unit
	Sensitivity                float64 // coefficient to the figure's unit
	DegreesOfFreedom           float64 // 0 or +Inf: infinite

	Key             string
	As              string  // what Stated is; "" when nothing but Standard is known
	Stated, Divisor float64 // Standard = Stated/Divisor
	Estimate        float64 // only for a model that is not linear
}

// Expanded is the input of a certificate that states an uncertainty with its
// coverage factor k > 0: U/k, normal (GUM 4.3.3). For any other k its Standard
// is not a number.
func Expanded(u, k float64) Input {
	return Input{Distribution: Normal, Standard: FromExpanded(u, k), As: AsExpanded, Stated: u, Divisor: k}
}

// HalfWidth is what lies within -a..a, rectangular, triangular or u-shaped:
// a/sqrt(3), a/sqrt(6), a/sqrt(2) (GUM 4.3.7, 4.3.9; JCGM 101:2008, 6.4.6, from
// memory, for the last). Not a number for any other distribution.
func HalfWidth(a float64, distribution string) Input {
	d := halfWidths(distribution)
	return Input{Distribution: distribution, Standard: a / d, As: AsHalfWidth, Stated: a, Divisor: d}
}

// FullWidth is HalfWidth for what is stated from end to end: a resolution,
// hysteresis, the return of zero.
func FullWidth(w float64, distribution string) Input {
	d := 2 * halfWidths(distribution)
	return Input{Distribution: distribution, Standard: w / d, As: AsFullWidth, Stated: w, Divisor: d}
}

// Mean is the mean of n readings, n of 1 or more, of which the standard
// deviation s is known with degrees of freedom dof (n-1 when s is of these n
// alone, more when it is pooled): s/sqrt(n), Student's t (GUM 4.2.3, G.3).
func Mean(s float64, n int, dof float64) Input {
	d := math.Sqrt(float64(n))
	return Input{Distribution: StudentT, Standard: s / d, DegreesOfFreedom: dof, As: AsScatter, Stated: s, Divisor: d}
}

// Standard is an input of which the standard uncertainty is all that is stated.
func Standard(u float64) Input {
	return Input{Distribution: Normal, Standard: u, As: AsStandard, Stated: u, Divisor: 1}
}

// halfWidths is how many standard deviations lie between the middle and the
// end of a distribution with ends; not a number for one without.
func halfWidths(distribution string) float64 {
	switch distribution {
	case Rectangular:
		return math.Sqrt(3)
	case Triangular:
		return math.Sqrt(6)
	case UShaped:
		return math.Sqrt2
	}
	return math.NaN()
}

// Derivation says in one line how Standard came from what is stated, in the
// input's own unit: "U 0.1, k 2 -> 0.05".
func (in Input) Derivation() string {
	s, d, u := short(in.Stated), short(in.Divisor), short(in.Standard)
	switch in.As {
	case AsExpanded:
		return fmt.Sprintf("U %s, k %s -> %s", s, d, u)
	case AsHalfWidth:
		return fmt.Sprintf("half-width %s, %s, over %s -> %s", s, in.Distribution, d, u)
	case AsFullWidth:
		return fmt.Sprintf("full width %s, %s, over %s -> %s", s, in.Distribution, d, u)
	case AsScatter:
		return fmt.Sprintf("s %s over %s -> %s", s, d, u)
	}
	return "u " + u
}

func short(x float64) string { return strconv.FormatFloat(x, 'g', 4, 64) }

// FromExpanded is the standard uncertainty U/k of a certificate that states U
// with its coverage factor k > 0 (GUM 4.3.3). Not-a-number for any other k.
func FromExpanded(expanded, k float64) float64 {
	if !(k > 0) {
		return math.NaN()
	}
	return expanded / k
}

// FromHalfWidth is a/sqrt(3): all values within -a..a are equally likely (GUM
// 4.3.7).
func FromHalfWidth(a float64) float64 { return a / math.Sqrt(3) }

// FromFullWidth is w/(2 sqrt(3)), for what is stated from end to end: a
// resolution, hysteresis, repeatability as a range, the return of zero (GUM
// F.2.2.1 for resolution; the others as DKD-R 6-1, from memory).
func FromFullWidth(w float64) float64 { return w / (2 * math.Sqrt(3)) }

// Package uncertainty combines the contributions to one figure's uncertainty.
// It knows no units and judges nothing. Order of use: turn what is stated into
// standard uncertainties (FromExpanded, FromHalfWidth, FromFullWidth), Combine
// the budget; where Dominated says that one rectangle makes the interval,
// Sample it.
package uncertainty

import "math"

// The distributions that an Input may name.
const (
	Normal      = "normal"      // Student's t when its degrees of freedom are finite
	Rectangular = "rectangular" // half-width sqrt(3) x Standard
	StudentT    = "t"           // scaled by Standard: its own SD is larger
)

// Input is one uncorrelated contribution.
type Input struct {
	Name, Source, Distribution string
	Standard                   float64 // standard uncertainty, in the input's own unit
	Sensitivity                float64 // coefficient to the figure's unit
	DegreesOfFreedom           float64 // 0 or +Inf: infinite
}

// Combined is the result: Expanded is the half-width of the 95 % interval.
type Combined struct {
	Standard, DegreesOfFreedom, Coverage, Expanded float64
}

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

// Combine adds in quadrature, u_c^2 = Sum (c_i u_i)^2, takes the effective
// degrees of freedom u_c^4 / Sum ((c_i u_i)^4/nu_i) (Welch and Satterthwaite,
// GUM G.4.1; +Inf when no input has finite ones) and the factor of Student's t
// for 95 %. An empty budget gives zeros with infinite degrees of freedom.
func Combine(inputs []Input) Combined {
	var v, d float64
	for _, in := range inputs {
		c := in.Standard * in.Sensitivity
		v += c * c
		if in.DegreesOfFreedom > 0 {
			d += c * c * c * c / in.DegreesOfFreedom
		}
	}
	r := Combined{Standard: math.Sqrt(v), DegreesOfFreedom: math.Inf(1)}
	if d > 0 {
		r.DegreesOfFreedom = v * v / d
	}
	r.Coverage = coverage(r.DegreesOfFreedom)
	r.Expanded = r.Coverage * r.Standard
	return r
}

// Package uncertainty combines the contributions to one figure's uncertainty.
// It knows no units and judges nothing. Order of use: Combine a budget.
package uncertainty

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
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
	r := Combined{Standard: math.Sqrt(v), DegreesOfFreedom: math.Inf(1), Coverage: 1.959963984540054}
	if d > 0 {
		r.DegreesOfFreedom = v * v / d
		r.Coverage = distuv.StudentsT{Mu: 0, Sigma: 1, Nu: r.DegreesOfFreedom}.Quantile(0.975)
	}
	r.Expanded = r.Coverage * r.Standard
	return r
}

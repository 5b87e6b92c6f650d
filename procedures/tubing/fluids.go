package tubing

import "strings"

// Fluid is a liquid that lines are filled with, at 20 degC.
type Fluid struct {
	Name      string
	Density   float64 // kg/m3
	Viscosity float64 // Pa s
	// How far the viscosity may be off for a bench between 18 and 25 degC, as a
	// share either way: water loses 2.4 % of it with every kelvin.
	Tolerance float64
}

// Fluids are the liquids known by name. Water: 998.2 kg/m3 and 1.002 mPa s at
// 20 degC (IAPWS tables, from memory); saline is 0.9 % sodium chloride: 1005
// kg/m3 and 1.02 mPa s (from memory).
func Fluids() []Fluid {
	return []Fluid{
		{"water", 998.2, 1.002e-3, 0.12},
		{"saline", 1005, 1.02e-3, 0.12},
	}
}

// FluidNamed finds the liquid that a description begins with: "water, degassed"
// is water. False when it begins with none.
func FluidNamed(text string) (Fluid, bool) {
	word, _, _ := strings.Cut(strings.ToLower(strings.TrimSpace(text)), ",")
	word, _, _ = strings.Cut(strings.TrimSpace(word), " ")
	for _, f := range Fluids() {
		if f.Name == word {
			return f, true
		}
	}
	return Fluid{}, false
}

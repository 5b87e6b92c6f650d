package uncertainty

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// manyDegrees is from where on the normal distribution stands for Student's t
// where it is drawn: the factor is then 2.4e-8 too small, while the library's
// own t loses its digits and at 1e15 is wrong altogether (3.23 for 1.96).
// Degrees of freedom like that are met: one small noise beside large
// contributions.
const manyDegrees = 1e8

// coverage is the 97.5 % quantile of Student's t with real degrees of freedom
// above 0; infinite where they are 0 or no number. From 1 on it is a Chebyshev
// series in 1/dof, true to 1e-14 and a hundred times faster than turning the
// distribution round, which is most of the work of a budget otherwise. Source
// of the coefficients: quantiles by mpmath 1.3.0 with 30 digits at 64
// Chebyshev nodes of 1/dof in 0..1.
func coverage(dof float64) float64 {
	if dof > 0 && dof < 1 {
		return distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}.Quantile(0.975)
	}
	if !(dof > 0) {
		return math.Inf(1)
	}
	c := [...]float64{
		5.7662257301327605805, 5.0467136773499980066, 1.5144033349810396533, 0.31932614054099298859,
		0.051636497460040053522, 0.0070010897796927469209, 8.1242257372004987853e-4, 7.8802703291181565826e-5,
		6.3114407690584929975e-6, 6.8276957907811802616e-7, 5.7757993808234383954e-8, -1.6418325764627012692e-8,
		6.0803970165210201662e-9, -1.0362335938560290485e-9, -6.238676934706136406e-13, 1.0124712400853755619e-10,
		-6.0568914995381576601e-11, 2.5600691834125748862e-11, -8.3607057115286140317e-12, 1.8509701028974199614e-12,
		-8.1678469063831486348e-15, -2.7173606269164989041e-13, 1.879975640980415412e-13, -8.8760478135221049398e-14,
		3.2815754033160794277e-14, -9.032835903531536579e-15,
	}
	x := 2/dof - 1 // 0 degrees of freedom in the reciprocal stand at -1
	var b, before float64
	for k := len(c) - 1; k > 0; k-- {
		b, before = 2*x*b-before+c[k], b
	}
	return x*b - before + c[0]
}

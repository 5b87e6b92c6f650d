package uncertainty

import (
	"math"
	"testing"
)

// impedanceReadings are five simultaneous readings of voltage (V), current (mA)
// and phase (rad).
func impedanceReadings(t *testing.T) (read [3][]float64) {
	for _, row := range rowsOf(t, "gum-h2/impedance.csv") {
		for i := range read {
			read[i] = append(read[i], number(t, row[i]))
		}
	}
	return read
}

// moments are the means, the standard uncertainties of the means and their
// correlations.
func moments(read [3][]float64) (mean, u [3]float64, r [3][3]float64) {
	var cov [3][3]float64
	for i, x := range read {
		for _, v := range x {
			mean[i] += v / float64(len(x))
		}
	}
	for i := range read {
		for k := range read {
			n := float64(len(read[i]))
			for j := range read[i] {
				cov[i][k] += (read[i][j] - mean[i]) * (read[k][j] - mean[k]) / (n * (n - 1))
			}
		}
		u[i] = math.Sqrt(cov[i][i])
	}
	for i := range read {
		for k := range read {
			r[i][k] = cov[i][k] / (u[i] * u[k])
		}
	}
	return mean, u, r
}

// Source: gum-h2, printed digits: R = V/I cos(phi), X = V/I sin(phi), Z = V/I;
// u(X) computes to 0.29558 from the readings.
func TestImpedance(t *testing.T) {
	mean, u, r := moments(impedanceReadings(t))
	printed := valuesOf(t, "gum-h2/impedance_values.csv", 1)
	compare(t, []figure{
		{"r(V,I)", r[0][1], printed["r(V I)"], 0.02}, {"r(V,phi)", r[0][2], printed["r(V phi)"], 0.01}, {"r(I,phi)", r[1][2], printed["r(I phi)"], 0.01},
	})
	keys := []string{"V", "I", "phi"}
	var in []Input
	for i, key := range keys {
		in = append(in, Input{Name: key, Key: key, Distribution: StudentT, Standard: u[i], DegreesOfFreedom: 4, Estimate: mean[i]})
	}
	correlations := []Correlation{{"V", "I", r[0][1]}, {"V", "phi", r[0][2]}, {"I", "phi", r[1][2]}}
	ohm := func(x []float64) float64 { return 1000 * x[0] / x[1] }
	models := []func([]float64) float64{
		func(x []float64) float64 { return ohm(x) * math.Cos(x[2]) },
		func(x []float64) float64 { return ohm(x) * math.Sin(x[2]) },
		ohm,
	}
	var budgets []Budget
	for i, want := range []struct{ value, u float64 }{{printed["R"], printed["u(R)"]}, {printed["X"], 0.29558}, {printed["Z"], printed["u(Z)"]}} {
		b := Budget{Inputs: in, Correlations: correlations, Model: models[i]}
		e, err := Evaluate(b, Settings{Seed: 2, MostDraws: 200_000})
		if err != nil {
			t.Fatal(err)
		}
		// Approach 2 works each figure out from each set of readings and takes
		// their mean: Student's t with 4 degrees of freedom, which the Monte
		// Carlo must find too. The model is not quite straight.
		if math.Abs(models[i](mean[:])-want.value) > 5e-4 || math.Abs(e.Standard-want.u) > 6e-4 || e.DegreesOfFreedom != 4 || e.Method != GUM ||
			math.Abs(e.Drawn-2.7764451051977987*e.Standard) > 4*e.Error+2e-3*e.Drawn {
			t.Errorf("figure %d: %v, %+v; want %+v", i, models[i](mean[:]), e, want)
		}
		line, err := Linearise(models[i], in)
		if err != nil {
			t.Fatal(err)
		}
		budgets = append(budgets, Budget{Inputs: line, Correlations: correlations})
	}
	c, err := Covariances(budgets)
	if err != nil {
		t.Fatal(err)
	}
	r3 := c.Correlation()
	compare(t, []figure{
		{"r(R,X)", r3.At(0, 1), printed["r(R X)"], 1e-3}, {"r(R,Z)", r3.At(0, 2), printed["r(R Z)"], 1.1e-3}, {"r(X,Z)", r3.At(1, 2), printed["r(X Z)"], 5e-4},
		{"u(X)", math.Sqrt(c.At(1, 1)), 0.29558, 2e-5},
	})
}

// With their correlations stated or with what they have in common as inputs
// with keys: one budget. Ten resistors in series, each compared with one
// standard (GUM 5.2.2, example): u is ten times that of one, 1 ohm for 0.1.
func TestCommon(t *testing.T) {
	var stated, common Budget
	for i := range 10 {
		key := string(rune('a' + i))
		stated.Inputs = append(stated.Inputs, Input{Key: key, Distribution: Normal, Standard: 0.1, Sensitivity: 1})
		for k := range i {
			stated.Correlations = append(stated.Correlations, Correlation{key, string(rune('a' + k)), 1})
		}
		common.Inputs = append(common.Inputs, Input{Key: "standard", Distribution: Normal, Standard: 0.1, Sensitivity: 1})
	}
	for name, b := range map[string]Budget{"stated": stated, "common": common} {
		e, err := Evaluate(b, Settings{Always: true})
		if err != nil || math.Abs(e.Standard-1) > 1e-12 || math.Abs(e.Drawn-1.959963984540054) > 4*e.Error {
			t.Errorf("%s: %+v, %v", name, e, err)
		}
	}
	if c := Combine(common.Inputs); math.Abs(c.Standard-1) > 1e-12 {
		t.Errorf("combined: %v", c.Standard)
	}
	// A zero and a scale in common: y_i = scale p_i + noise_i - zero. By hand:
	// cov = u_s^2 p_1 p_2 + u_z^2, var = u_s^2 p^2 + u_z^2 + u_n^2.
	var at []Budget
	for _, p := range []float64{100, 300} {
		at = append(at, Budget{Inputs: []Input{
			{Key: "scale", Distribution: Normal, Standard: 3e-4, Sensitivity: p},
			{Key: "zero", Distribution: StudentT, Standard: 0.02, Sensitivity: -1, DegreesOfFreedom: 9},
			{Distribution: StudentT, Standard: 0.04, Sensitivity: 1, DegreesOfFreedom: 9},
		}})
	}
	c, err := Covariances(at)
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{
		{"cov", c.At(0, 1), 9e-8*3e4 + 4e-4, 1e-12}, {"and back", c.At(1, 0), c.At(0, 1), 0},
		{"var at 100", c.At(0, 0), 9e-4 + 4e-4 + 16e-4, 1e-12}, {"var at 300", c.At(1, 1), 81e-4 + 4e-4 + 16e-4, 1e-12},
		{"r", c.Correlation().At(0, 1), 31e-4 / math.Sqrt(29e-4*101e-4), 1e-12},
	})
	// The same variance as each budget's own.
	for i, b := range at {
		e, err := Evaluate(b, Settings{})
		if err != nil || math.Abs(e.Standard*e.Standard/c.At(i, i)-1) > 1e-12 {
			t.Errorf("%d: %v and %v, %v", i, e.Standard, c.At(i, i), err)
		}
	}
	at[1].Inputs[0].Standard = 1
	if m, err := Covariances(at); err == nil || m.Data != nil {
		t.Error("one key with two uncertainties")
	}
	if m, err := Covariances(nil); err != nil || m.N != 0 {
		t.Error("nothing has covariances", err)
	}
}

// Law: a difference of two figures with the same common part has none of it,
// and the order of inputs does not count.
func TestCancels(t *testing.T) {
	in := []Input{
		{Key: "reference", Distribution: Normal, Standard: 3, Sensitivity: 1}, {Distribution: Rectangular, Standard: 0.3, Sensitivity: 1},
		{Key: "reference", Distribution: Normal, Standard: 3, Sensitivity: -1}, {Distribution: Rectangular, Standard: 0.4, Sensitivity: 1},
	}
	for range in {
		e, err := Evaluate(Budget{Inputs: in}, Settings{})
		if err != nil || math.Abs(e.Standard-0.5) > 1e-12 {
			t.Errorf("%v, %v", e.Standard, err)
		}
		in = append(in[1:], in[0])
	}
}

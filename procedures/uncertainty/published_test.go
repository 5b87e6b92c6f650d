package uncertainty

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"
)

const sources = "../../testdata/sources/"

// rowsOf reads a table of a source, without its heading.
func rowsOf(t *testing.T, path string) [][]string {
	t.Helper()
	file, err := os.Open(sources + path)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil || len(rows) < 2 {
		t.Fatalf("%s: %d rows, %v", path, len(rows), err)
	}
	return rows[1:]
}

// number reads a field, with its unit left out; an empty one is not a number.
func number(t *testing.T, field string) float64 {
	t.Helper()
	field, _, _ = strings.Cut(field, " ")
	if field == "" {
		return math.NaN()
	}
	x, err := strconv.ParseFloat(field, 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

// valuesOf are the columns of a table of values by the name of their rows.
func valuesOf(t *testing.T, path string, column int) map[string]float64 {
	t.Helper()
	out := map[string]float64{}
	for _, row := range rowsOf(t, path) {
		out[row[0]] = number(t, row[column])
	}
	return out
}

// Source: gum-h1. The comparator's inputs make u(d); the standard is stated as
// U = 75 nm with k = 3.
func TestEndGauge(t *testing.T) {
	var in []Input
	for _, row := range rowsOf(t, "gum-h1/end_gauge.csv") {
		x := Standard(number(t, row[2]))
		if row[1] == Rectangular {
			x = HalfWidth(number(t, row[2]), Rectangular)
		}
		x.Name, x.Sensitivity, x.DegreesOfFreedom = row[0], number(t, row[3]), number(t, row[4])
		in = append(in, x)
	}
	d, err := Evaluate(Budget{Inputs: in[:3]}, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	comparator := Standard(d.Standard)
	comparator.Sensitivity, comparator.DegreesOfFreedom = 1, d.DegreesOfFreedom
	standard := Expanded(75, 3)
	standard.Sensitivity, standard.DegreesOfFreedom = 1, 18
	if in[3].Standard != standard.Standard {
		t.Errorf("U 75 nm, k 3 gave %v", standard.Standard)
	}
	whole, err := Evaluate(Budget{Inputs: append([]Input{comparator, standard}, in[4:]...)}, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	// As one list of six the whole has the same variance; its degrees of
	// freedom are of the same parts, for Welch and Satterthwaite's sum adds up.
	flat := Combine(in)
	want := valuesOf(t, "gum-h1/end_gauge_values.csv", 2)
	compare(t, []figure{
		{"u(d)", d.Standard, want["u(d) in nm"], 1e-8}, {"nu of d", d.DegreesOfFreedom, want["degrees of freedom of d"], 1e-6},
		{"u_c", whole.Standard, want["u_c in nm"], 1e-9}, {"nu_eff", whole.DegreesOfFreedom, want["degrees of freedom"], 1e-9},
		{"u_c of six", flat.Standard, want["u_c in nm"], 1e-9}, {"nu_eff of six", flat.DegreesOfFreedom, want["degrees of freedom"], 1e-9},
		{"t", StudentQuantile(0.995, 16), want["t for 99 %"], 1e-9},
		{"U99", StudentQuantile(0.995, math.Floor(whole.DegreesOfFreedom)) * whole.Standard, want["U99 in nm"], 1e-4},
	})
	// The model with its product terms: 34 nm for 32 (H.1.7). Drawn normal, so
	// that the standard deviation is what the propagation to second order has.
	const length = 50e6
	bent := Budget{
		Inputs: []Input{
			{Name: "standard", Distribution: Normal, Standard: 25, Estimate: 0}, {Name: "comparator", Distribution: Normal, Standard: d.Standard},
			{Name: "alpha", Distribution: Rectangular, Standard: FromHalfWidth(2e-6), Estimate: 11.5e-6},
			{Name: "theta", Distribution: Normal, Standard: 0.41, Estimate: -0.1},
			{Name: "d alpha", Distribution: Rectangular, Standard: FromHalfWidth(1e-6)}, {Name: "d theta", Distribution: Rectangular, Standard: FromHalfWidth(0.05)},
		},
		Model: func(x []float64) float64 { return x[0] + x[1] - length*(x[4]*x[3]+x[2]*x[5]) },
	}
	e, err := Evaluate(bent, Settings{Seed: 1, MostDraws: 400_000, Tolerance: 1e-4})
	if err != nil || e.SD == nil || math.Abs(*e.SD-want["u_c with second order in nm"]) > 0.15 {
		t.Errorf("with its products: %+v, %v", e.Combined, err)
	}
}

// Source: jcgm-101, 9.2: sums of four.
func TestSupplementSums(t *testing.T) {
	inputs := func(distribution string, u ...float64) []Input {
		var out []Input
		for _, u := range u {
			out = append(out, Input{Distribution: distribution, Standard: u, Sensitivity: 1})
		}
		return out
	}
	want := rowsOf(t, "jcgm-101/values.csv")
	for i, in := range [][]Input{inputs(Normal, 1, 1, 1, 1), inputs(Rectangular, 1, 1, 1, 1), inputs(Rectangular, 1, 1, 1, 10)} {
		e, err := Evaluate(Budget{Inputs: in}, Settings{Seed: 2, Always: true, Tolerance: 0.003})
		digit := 0.005
		if i == 2 {
			digit = 0.05
		}
		if err != nil || math.Abs(e.Drawn-number(t, want[i][4])) > digit+3*e.Error || math.Abs(*e.SD-number(t, want[i][2])) > 0.02*number(t, want[i][2]) || (e.Method == MonteCarlo) != (i == 2) {
			t.Errorf("%s: %+v, %v", want[i][0], e, err)
		}
	}
}

// Source: jcgm-101, 9.3 and 9.4: models that bend, the shortest intervals, and
// inputs that correlate. The last digit printed, and four standard errors.
func TestSupplementModels(t *testing.T) {
	flat := func(name string, low, high float64) Input {
		in := HalfWidth((high-low)/2, Rectangular)
		in.Name, in.Estimate = name, (high+low)/2
		return in
	}
	normal := func(key string, x, u float64) Input {
		return Input{Name: key, Key: key, Distribution: Normal, Standard: u, Estimate: x}
	}
	squares := func(x []float64) float64 { return 1e6 * (x[0]*x[0] + x[1]*x[1]) }
	loss := func(x, r float64) Budget {
		return Budget{Inputs: []Input{normal("1", x, 0.005), normal("2", 0, 0.005)}, Correlations: []Correlation{{"1", "2", r}}, Model: squares}
	}
	budgets := []Budget{
		{Inputs: []Input{normal("mass", 1e5, 0.05), normal("added", 1.234, 0.02), flat("air", 1.1, 1.3), flat("weight", 7000, 9000), flat("reference", 7950, 8050)},
			Model: func(x []float64) float64 { return (x[0]+x[1])*(1+(x[2]-1.2)*(1/x[3]-1/x[4])) - 1e5 }},
		loss(0, 0), loss(0.01, 0), loss(0.05, 0), loss(0, 0.9), loss(0.01, 0.9), loss(0.05, 0.9),
	}
	for i, row := range rowsOf(t, "jcgm-101/values.csv")[3:] {
		digit := 1.0
		if i == 0 {
			digit = 1e-4
		}
		// The first is symmetrical and nearly flat: where its shortest interval
		// lies is chance, and that with equal tails is as short.
		e, err := Evaluate(budgets[i], Settings{Seed: 3, Shortest: i > 0, Tolerance: 0.004})
		if err != nil || e.SD == nil {
			t.Fatalf("%s: %+v, %v", row[0], e, err)
		}
		x := make([]float64, len(budgets[i].Inputs))
		for k, in := range budgets[i].Inputs {
			x[k] = in.Estimate
		}
		at := budgets[i].Model(x)
		// Ends of the shortest interval scatter more than its width.
		for name, c := range map[string][2]float64{
			"estimate": {at + e.Mean, number(t, row[1])}, "u": {*e.SD, number(t, row[2])}, "low": {at + e.Low, number(t, row[3])}, "high": {at + e.High, number(t, row[4])},
		} {
			if math.Abs(c[0]-c[1]) > 1.5*digit+8*e.Error {
				t.Errorf("%s: %s %v, want %v; error %v", row[0], name, c[0], c[1], e.Error)
			}
		}
		if e.Method != MonteCarlo && i != 3 && i != 6 {
			t.Errorf("%s: by %s: %s", row[0], e.Method, e.Why)
		}
	}
}

// line is the least-squares line with the uncertainties of its two
// coefficients, their correlation and the scatter.
func line(x, y []float64) (a, b, ua, ub, r, s float64) {
	n := float64(len(x))
	var mx, my, sxx, sxy, q float64
	for i := range x {
		mx, my = mx+x[i]/n, my+y[i]/n
	}
	for i := range x {
		sxx, sxy = sxx+(x[i]-mx)*(x[i]-mx), sxy+(x[i]-mx)*(y[i]-my)
	}
	b = sxy / sxx
	a = my - b*mx
	for i := range x {
		e := y[i] - a - b*x[i]
		q += e * e
	}
	s = math.Sqrt(q / (n - 2))
	return a, b, s * math.Sqrt(1/n+mx*mx/sxx), s / math.Sqrt(sxx), -mx / math.Sqrt(sxx/n+mx*mx), s
}

// Source: gum-h3: a correction from two correlated coefficients with nine
// degrees of freedom, and a systematic part added to one.
func TestThermometer(t *testing.T) {
	var x, y []float64
	for _, row := range rowsOf(t, "gum-h3/thermometer.csv") {
		x, y = append(x, number(t, row[0])-20), append(y, number(t, row[1]))
	}
	_, _, ua, ub, r, _ := line(x, y)
	want := valuesOf(t, "gum-h3/thermometer_values.csv", 2)
	b := Budget{
		Inputs: []Input{
			{Key: "y1", Distribution: StudentT, Standard: ua, Sensitivity: 1, DegreesOfFreedom: 9},
			{Key: "y2", Distribution: StudentT, Standard: ub, Sensitivity: 10, DegreesOfFreedom: 9},
		},
		Correlations: []Correlation{{"y1", "y2", r}},
	}
	e, err := Evaluate(b, Settings{Always: true})
	if err != nil || e.Method != GUM {
		t.Fatalf("%+v, %v", e, err)
	}
	with, err := Evaluate(Budget{Inputs: []Input{b.Inputs[0], {Name: "systematic", Distribution: Normal, Standard: 0.005, Sensitivity: 1}}}, Settings{})
	if err != nil {
		t.Fatal(err)
	}
	compare(t, []figure{
		{"r", r, want["r(y1 y2)"], 1e-12}, {"u(b(30))", e.Standard, want["u(b(30))"], 1e-12}, {"its degrees of freedom", e.DegreesOfFreedom, 9, 1e-12},
		{"u(y1) with 0.005", with.Standard, want["u(y1) with 0.005"], 1e-12}, {"its degrees of freedom", with.DegreesOfFreedom, want["its degrees of freedom"], 1e-4},
	})
}

// Source: eurachem-a5: what a line read backwards gives, as a model of two
// readings' mean, intercept and slope.
func TestInversePrediction(t *testing.T) {
	var x, y []float64
	for _, row := range rowsOf(t, "eurachem-a5/cadmium.csv") {
		x, y = append(x, number(t, row[0])), append(y, number(t, row[1]))
	}
	a, b, ua, ub, r, s := line(x, y)
	want := valuesOf(t, "eurachem-a5/cadmium_values.csv", 2)
	e, err := Evaluate(Budget{
		Inputs: []Input{
			{Key: "y", Distribution: StudentT, Standard: s / math.Sqrt2, DegreesOfFreedom: 13, Estimate: (.0712 + .0716) / 2},
			{Key: "a", Distribution: StudentT, Standard: ua, DegreesOfFreedom: 13, Estimate: a},
			{Key: "b", Distribution: StudentT, Standard: ub, DegreesOfFreedom: 13, Estimate: b},
		},
		Correlations: []Correlation{{"a", "b", r}},
		Model:        func(x []float64) float64 { return (x[0] - x[1]) / x[2] },
	}, Settings{})
	// The model bends a little over u(b): sensitivities by difference quotients.
	if err != nil || math.Abs(e.Standard/want["u(c)"]-1) > 2e-3 {
		t.Errorf("%v, want %v, %v", e.Standard, want["u(c)"], err)
	}
}

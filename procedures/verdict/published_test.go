package verdict

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"
)

// table reads a table of a source, without its heading.
func table(t *testing.T, path string) [][]string {
	t.Helper()
	file, err := os.Open("../../testdata/sources/" + path)
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

// number reads a field; an empty one is not a number.
func number(t *testing.T, field string) float64 {
	t.Helper()
	if field == "" {
		return math.NaN()
	}
	x, err := strconv.ParseFloat(field, 64)
	if err != nil {
		t.Fatal(err)
	}
	return x
}

// limitOf is the limit of two fields; an empty one is no side.
func limitOf(t *testing.T, low, high string) Limit {
	t.Helper()
	var l Limit
	if low != "" {
		l.Low = side(number(t, low))
	}
	if high != "" {
		l.High = side(number(t, high))
	}
	return l
}

// Source: jcgm-106, conformance: 1 - Below - Above, four or six digits.
func TestConformanceExamples(t *testing.T) {
	for _, row := range table(t, "jcgm-106/conformance.csv") {
		u := number(t, row[2])
		j := Decide(number(t, row[1]), Known(u, 0, 1.96*u), limitOf(t, row[3], row[4]), Simple, 0)
		if p := 1 - j.Below - j.Above; math.Abs(p-number(t, row[6])) > 5e-5 || math.Abs(p-number(t, row[5])) > 0.0051 {
			t.Errorf("%s: %v", row[0], p)
		}
	}
}

// Source: guard-bands: a value w = r U inside its limit, k = 2.
func TestGuardBands(t *testing.T) {
	for _, row := range table(t, "guard-bands/worst_cases.csv") {
		r, bound, exact := number(t, row[1]), number(t, row[2]), number(t, row[3])
		j := Decide(2-r*0.5, Known(0.25, 0, 0.5), Limit{High: side(2)}, Guarded, r)
		if j.Outcome != Pass || math.Abs(j.WrongAccept-exact) > 5e-4*exact || j.WrongAccept > bound*1.0001 {
			t.Errorf("%s: %+v", row[0], j)
		}
	}
}

// Source: jcgm-106, risks.
func TestGlobalRiskExamples(t *testing.T) {
	for _, row := range table(t, "jcgm-106/risks.csv") {
		var p Prior = NormalPrior{number(t, row[2]), number(t, row[3])}
		if row[1] == "gamma" {
			p = GammaPrior{number(t, row[2]), number(t, row[3])}
		}
		r, err := GlobalRisk(p, number(t, row[4]), 0, limitOf(t, row[5], row[6]), limitOf(t, row[7], row[8]))
		consumer, producer, digit := number(t, row[9]), number(t, row[10]), number(t, row[11])
		if err != nil || math.Abs(r.Consumer-consumer) > digit || math.Abs(r.Producer-producer) > digit || r.Error > 1e-9 {
			t.Errorf("%s: %+v, %v", row[0], r, err)
		}
	}
}

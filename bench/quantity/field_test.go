package quantity

import "testing"

// The grammar is the house's own statement of it; expected values are what the
// decimals say.
func TestParseDecimal(t *testing.T) {
	for s, want := range map[string]float64{"0": 0, "+1500.02": 1500.02, "-3": -3, "1.5e2": 150, "007.25": 7.25} {
		if got, err := ParseDecimal(s); err != nil || got != want {
			t.Errorf("%q: %v, %v; want %v", s, got, err, want)
		}
	}
	for _, s := range []string{"", "+", ".5", "5.", "nan", "inf", "0x1p-2", "1_0", " 1", "1 ", "1e", "1e999", "1,5", "--1"} {
		if got, err := ParseDecimal(s); err == nil {
			t.Errorf("%q taken for %v", s, got)
		}
	}
}

func TestField(t *testing.T) {
	f := Field{Width: 8, Unit: "uV/V"}
	if x, err := f.Number("+1500.02"); err != nil || x != 1500.02 {
		t.Errorf("fixed width: %v, %v", x, err)
	}
	if x, err := f.Number("+150.02"); err == nil {
		t.Errorf("a lost digit was taken for %v", x)
	}
	g := Field{Separator: ";", Column: 1, Unit: "mmHg", UnitInText: true}
	if x, err := g.Number("P;12.5 mmHg"); err != nil || x != 12.5 {
		t.Errorf("delimited: %v, %v", x, err)
	}
	if x, err := g.Number("P;12.5 kPa"); err == nil {
		t.Errorf("another unit was taken for %v", x)
	}
}

package quantity

import (
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

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
	width := Field{Width: 8, Unit: "uV/V"}
	second := Field{Separator: ";", Column: 1, Unit: "mmHg", UnitInText: true}
	framed := Field{Separator: ", ", Column: 2, Prefix: "P=", Suffix: "!", Unit: "kPa"}
	for _, c := range []struct {
		f    Field
		text string
		want float64
	}{
		{width, "+1500.02", 1500.02}, {width, "  150.02", 150.02}, {second, "P;12.5 mmHg", 12.5}, {second, "P;12.5mmHg;3", 12.5},
		{framed, "1, 2, P=-3.5!", -3.5}, {framed, "1, , P=4!, ", 4}, {Field{Separator: ",", Unit: "V"}, "7", 7}, {Field{}, " 7", 7},
	} {
		if x, err := c.f.Number(c.text); err != nil || x != c.want {
			t.Errorf("%q: %v, %v, want %v", c.text, x, err, c.want)
		}
	}
	for _, c := range []struct {
		f    Field
		text string
	}{
		{width, "+150.02"}, {width, "+1500.022"}, {second, "P;12.5 kPa"}, {second, "P;12.5"}, {second, "P"}, {second, "P;"}, {second, ""},
		{framed, "1, 2"}, {framed, "1, 2, -3.5!"}, {framed, "1, 2, P=-3.5"}, {Field{Separator: ",", Column: -1}, "7,8"}, {Field{}, "7 "},
	} {
		if x, err := c.f.Number(c.text); err == nil || x != 0 {
			t.Errorf("%q taken for %v", c.text, x)
		} else if !strings.Contains(err.Error(), strconv.Quote(c.text)) && !strings.Contains(err.Error(), "decimal") {
			t.Errorf("%q: %v does not quote it", c.text, err)
		}
	}
}

func TestFieldValue(t *testing.T) {
	f := Field{Separator: ";", Column: 1, Unit: "kPa", UnitInText: true}
	v, err := f.Value("P;40 kPa")
	if err != nil || v.SI != 40e3 || v.Stated != 40 || v.Unit.Name != "kPa" {
		t.Errorf("%+v, %v", v, err)
	}
	for text, f := range map[string]Field{"40": {}, "41": {Unit: "mmhg"}, "P;40 mmHg": f, "1e308": {Unit: "kPa"}} {
		if v, err := f.Value(text); err == nil || v != (Value{}) {
			t.Errorf("%q taken for %+v", text, v)
		}
	}
}

func TestFieldNamesTheColumn(t *testing.T) {
	_, err := Field{Separator: ",", Column: 2}.Number("1,2")
	if err == nil || !strings.Contains(err.Error(), `"1,2" has no column 2`) {
		t.Error(err)
	}
}

// A stream of thousands of lines a second makes no garbage here.
func TestFieldAllocatesNothing(t *testing.T) {
	for text, f := range map[string]Field{
		"+1500.02":           {Width: 8, Unit: "uV/V"},
		"17;a;P=12.5 mmHg;9": {Separator: ";", Column: 2, Prefix: "P=", Unit: "mmHg", UnitInText: true},
		"b;-3.25!":           {Separator: ";", Column: 1, Suffix: "!", Unit: "mV"},
	} {
		if n := testing.AllocsPerRun(1000, func() {
			if x, err := f.Number(text); err != nil || x == 0 {
				t.Fatal(x, err)
			}
		}); n != 0 {
			t.Errorf("Number of %q: %v allocations", text, n)
		}
		if n := testing.AllocsPerRun(1000, func() {
			if v, err := f.Value(text); err != nil || v.SI == 0 {
				t.Fatal(v, err)
			}
		}); n != 0 {
			t.Errorf("Value of %q: %v allocations", text, n)
		}
	}
}

func FuzzParseDecimal(f *testing.F) {
	for _, s := range []string{"0", "-1.5e+3", "+007", "1e999", "1e-999", ".5", "5.", "0x1p-2", "1_0", "nan", "١"} {
		f.Add(s)
	}
	grammar := regexp.MustCompile(`\A[+-]?[0-9]+(\.[0-9]+)?([eE][+-]?[0-9]+)?\z`)
	f.Fuzz(func(t *testing.T, s string) {
		x, err := ParseDecimal(s)
		want, parseErr := strconv.ParseFloat(s, 64)
		if good := grammar.MatchString(s) && parseErr == nil; good != (err == nil) {
			t.Fatalf("%q: %v, %v", s, x, err)
		}
		if err == nil && x != want || err != nil && x != 0 || math.IsNaN(x) || math.IsInf(x, 0) {
			t.Errorf("%q: %v, %v, want %v", s, x, err, want)
		}
	})
}

// A number written into a line as the field says is found there again.
func FuzzField(f *testing.F) {
	f.Add(";", 1, "P=", "!", 0, "mmHg", true, 12.5, "a;b")
	f.Add("", 0, "", "", 8, "uV/V", false, -150.25, "")
	f.Add(", ", 3, "", " ", 0, "", true, 0.0, "x, ")
	f.Fuzz(func(t *testing.T, separator string, column int, prefix, suffix string, width int, unit string, unitInText bool, x float64, other string) {
		field := Field{Separator: separator, Column: column, Prefix: prefix, Suffix: suffix, Width: width, Unit: unit, UnitInText: unitInText}
		if got, err := field.Number(other); err != nil && got != 0 {
			t.Fatalf("%q: %v with %v", other, got, err)
		}
		number := strconv.FormatFloat(x, 'f', -1, 64)
		if math.IsNaN(x) || math.IsInf(x, 0) || width != 0 || column < 0 || column > 9 {
			return
		}
		part := prefix + number
		if unitInText {
			part += unit
		}
		part += suffix
		if separator != "" && (strings.Contains(part, separator) || strings.Contains(other, separator) ||
			strings.Contains(part+separator[:len(separator)-1], separator)) {
			return // the separator stands in, or runs into, the part
		}
		text := part
		if separator != "" {
			text = strings.Repeat(separator, column) + part + separator + other
			if parts := strings.Split(text, separator); len(parts) <= column || parts[column] != part {
				return // it overlaps itself
			}
		}
		if got, err := field.Number(text); err != nil || got != x {
			t.Errorf("%+v on %q: %v, %v, want %v", field, text, got, err, x)
		}
	})
}

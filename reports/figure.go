package reports

import (
	"math"
	"strconv"
	"strings"
)

// A figure is printed with its expanded uncertainty rounded to two significant
// digits and its value to the same decimal place (JCGM 100:2008, 7.2.6: at
// most two digits; nearest, not up, so that what is printed can be reproduced).

// place returns the power of ten of the second significant digit of u > 0.
func place(u float64) int {
	p := int(math.Floor(math.Log10(u))) - 1
	// Log10 may miss a power of ten by one, and rounding may carry into one.
	for _, q := range []int{p + 1, p, p - 1} {
		if digits := math.Round(u / math.Pow10(q)); digits >= 10 {
			return q
		}
	}
	return p - 1
}

// decimal prints x to the power of ten p, with a true minus sign, and never a
// negative zero.
func decimal(x float64, p int) string {
	if math.Abs(x) >= 1e9 || p < -12 {
		return minus(strconv.FormatFloat(x, 'e', 1, 64)) // no instrument of this bench reads that
	}
	if p > 0 {
		step := math.Pow10(p)
		x, p = math.Round(x/step)*step, 0
	}
	return minus(strconv.FormatFloat(x, 'f', -p, 64))
}

// minus puts a true minus sign before a number, and none before zero.
func minus(s string) string {
	rest, negative := strings.CutPrefix(s, "-")
	if negative && strings.Trim(rest, "0.") == "" {
		return rest
	}
	if negative {
		s = "\u2212" + rest
	}
	return strings.Replace(s, "e-", "e\u2212", 1)
}

// figure prints a value and its expanded uncertainty to the same place. The
// second text is empty when there is no uncertainty to go by; the value then
// stands to the resolution.
func figure(value float64, expanded *float64, resolution float64) (string, string) {
	if expanded == nil || !(*expanded > 0) || math.IsInf(*expanded, 0) {
		return resolved(value, resolution), ""
	}
	p := place(*expanded)
	return decimal(value, p), decimal(*expanded, p)
}

// resolved prints a value to the place of a resolution; to four significant
// digits when none is stated.
func resolved(value, resolution float64) string {
	if !(resolution > 0) {
		return significant(value, 4)
	}
	p := int(math.Floor(math.Log10(resolution) + 1e-9))
	return decimal(value, min(p, 0))
}

// significant prints x with n significant digits.
func significant(x float64, n int) string {
	if x == 0 || math.IsInf(x, 0) || math.IsNaN(x) {
		return minus(strconv.FormatFloat(x, 'g', n, 64))
	}
	p := int(math.Floor(math.Log10(math.Abs(x)))) - n + 1
	if p < -9 || p > 6 {
		return minus(strconv.FormatFloat(x, 'e', n-1, 64))
	}
	return decimal(x, p)
}

// stated prints a number that somebody stated, without the noise of binary
// fractions.
func stated(x float64) string {
	return minus(strconv.FormatFloat(x, 'g', 10, 64))
}

// withUnit joins a number and its unit.
func withUnit(number, unit string) string {
	if unit == "" || number == "" {
		return number
	}
	return number + "\u00a0" + unit
}

// plusMinus prints "12.34 ± 0.12 Hz".
func plusMinus(value, expanded, unit string) string {
	if expanded == "" {
		return withUnit(value, unit)
	}
	if unit == "" {
		return value + "\u00a0±\u00a0" + expanded
	}
	return "(" + value + "\u00a0±\u00a0" + expanded + ")\u00a0" + unit
}

// unitText is how a unit is printed.
func unitText(unit string) string {
	if unit == "1" {
		return ""
	}
	return strings.NewReplacer("uV", "µV", "degC", "°C", "us", "µs").Replace(unit)
}

// quantityText prints a quantity as a record states it ("-5 mmHg").
func quantityText(text string) string {
	number, unit, ok := strings.Cut(text, " ")
	if !ok {
		return minus(text)
	}
	return withUnit(minus(number), unitText(unit))
}

// percent prints a probability: "0.12 %", "< 0.01 %".
func percent(p float64) string {
	switch {
	case p < 1e-4:
		return "<\u00a00.01\u00a0%"
	case p > 1-1e-4:
		return ">\u00a099.99\u00a0%"
	}
	return significant(p*100, 2) + "\u00a0%"
}

// plural prints "1 reservation", "3 reservations".
func plural(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return strconv.Itoa(n) + " " + many
}

// capital gives a text a capital first letter.
func capital(s string) string {
	if s == "" {
		return s
	}
	r := []rune(s)
	return strings.ToUpper(string(r[0])) + string(r[1:])
}

// sentence ends a text with a full stop.
func sentence(s string) string {
	s = strings.TrimSpace(s)
	if s == "" || strings.HasSuffix(s, ".") || strings.HasSuffix(s, "?") || strings.HasSuffix(s, "!") {
		return s
	}
	return s + "."
}

// oneLine puts a text of the program or a file on one line: line breaks and
// tabs, which error texts may hold, become semicolons, "+-" its sign.
func oneLine(s string) string {
	s = strings.Join(strings.FieldsFunc(s, func(r rune) bool { return r == '\n' || r == '\r' || r == '\t' }), "; ")
	return strings.ReplaceAll(s, " +- ", " ± ")
}

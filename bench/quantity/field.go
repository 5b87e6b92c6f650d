// Package quantity holds what a number with a unit is, as instruments and
// files state it. It is a leaf; it measures and judges nothing.
//
// Field is the place of one number in a line of text; Parse reads "300 mmHg",
// and the Parse functions of each quantity read it into a named type. Unit and
// Value turn numbers into SI and back; RoundTo and the Format functions write
// them.
package quantity

import (
	"fmt"
	"strconv"
	"strings"
)

// Field says how one number stands in a line of text received from an
// instrument. Zero value: the whole line is the number.
type Field struct {
	Separator  string `json:"separator,omitempty"`
	Column     int    `json:"column,omitempty"`
	Prefix     string `json:"prefix,omitempty"`
	Suffix     string `json:"suffix,omitempty"`
	Width      int    `json:"width,omitempty"`
	Unit       string `json:"unit"`
	UnitInText bool   `json:"unit_in_text,omitempty"`
}

// Number returns the number in the text, or an error that quotes the text. It
// allocates nothing unless it refuses: fast streams come through here.
func (f Field) Number(text string) (float64, error) {
	s := text
	if f.Separator != "" {
		var ok bool
		if s, ok = column(s, f.Separator, f.Column); !ok {
			return 0, fmt.Errorf("%q has no column %d", text, f.Column)
		}
	}
	s, ok := strings.CutPrefix(s, f.Prefix)
	if !ok {
		return 0, fmt.Errorf("%q lacks %q before the number", text, f.Prefix)
	}
	if s, ok = strings.CutSuffix(s, f.Suffix); !ok {
		return 0, fmt.Errorf("%q lacks %q after the number", text, f.Suffix)
	}
	if f.UnitInText {
		if s, ok = strings.CutSuffix(s, f.Unit); !ok {
			return 0, fmt.Errorf("%q lacks the unit %s", text, f.Unit)
		}
		s = strings.TrimRight(s, " ")
	}
	if f.Width > 0 && len(s) != f.Width {
		return 0, fmt.Errorf("%q: the number has %d characters, %d are stated", text, len(s), f.Width)
	}
	return ParseDecimal(strings.TrimLeft(s, " "))
}

// Value is Number with the field's unit. A field that names no known unit, and
// a number too large for SI, are refused.
func (f Field) Value(text string) (Value, error) {
	u, ok := UnitNamed(f.Unit)
	if !ok {
		return Value{}, fmt.Errorf("%q is no unit known here", f.Unit)
	}
	x, err := f.Number(text)
	if err != nil {
		return Value{}, err
	}
	return valueOf(x, u)
}

// column returns the part of s between separators, from 0.
func column(s, separator string, n int) (part string, ok bool) {
	for ; n > 0; n-- {
		if _, s, ok = strings.Cut(s, separator); !ok {
			return "", false
		}
	}
	part, _, _ = strings.Cut(s, separator)
	return part, n == 0
}

// ParseDecimal reads [+-]digits[.digits][(e|E)[+-]digits] and nothing else: no
// nan, inf, hexadecimal, underscore or blank, and no number that overflows.
func ParseDecimal(s string) (float64, error) {
	rest, ok := digits(sign(s))
	if !ok {
		return 0, fmt.Errorf("%q is no decimal number", s)
	}
	if strings.HasPrefix(rest, ".") {
		if rest, ok = digits(rest[1:]); !ok {
			return 0, fmt.Errorf("%q is no decimal number", s)
		}
	}
	if rest != "" && (rest[0] == 'e' || rest[0] == 'E') {
		if rest, ok = digits(sign(rest[1:])); !ok {
			return 0, fmt.Errorf("%q is no decimal number", s)
		}
	}
	if rest != "" {
		return 0, fmt.Errorf("%q is no decimal number", s)
	}
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		return 0, fmt.Errorf("%q is out of range", s)
	}
	return x, nil
}

func sign(s string) string {
	if s != "" && (s[0] == '+' || s[0] == '-') {
		return s[1:]
	}
	return s
}

// digits cuts off one or more leading digits.
func digits(s string) (rest string, ok bool) {
	i := 0
	for i < len(s) && s[i] >= '0' && s[i] <= '9' {
		i++
	}
	return s[i:], i > 0
}

package quantity

import (
	"fmt"
	"strconv"
)

// ParseDecimal reads [+-]digits[.digits][(e|E)[+-]digits] and nothing else: no
// nan, inf, hexadecimal, underscore or blank, and no number that overflows.
func ParseDecimal(s string) (float64, error) {
	if x, ok := plainDecimal(s, '.'); ok {
		return x, nil
	}
	return anyDecimal(s)
}

// powers are the powers of ten that a float64 holds exactly, as far as 15
// digits need them.
func power(n int) float64 {
	return [...]float64{1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}[n]
}

// plainDecimal reads what instruments mostly send, [+-]digits[point digits] of
// at most 15 digits, and leaves the rest to anyDecimal. The digits as a whole
// number and the power of ten are exact, so that their quotient is the float64
// nearest to the decimal (Clinger, How to read floating point numbers
// accurately, 1990, the simple case; from memory).
func plainDecimal(s string, point byte) (float64, bool) {
	negative := false
	if s != "" && (s[0] == '+' || s[0] == '-') {
		negative = s[0] == '-'
		s = s[1:]
	}
	if len(s) == 0 || len(s) > 16 {
		return 0, false
	}
	var whole int64
	decimals, seen := 0, false
	for i := range len(s) {
		d := s[i] - '0'
		if d <= 9 {
			whole = whole*10 + int64(d)
			continue
		}
		if s[i] != point || seen || i == 0 || i == len(s)-1 {
			return 0, false
		}
		seen, decimals = true, len(s)-1-i
	}
	if !seen && len(s) > 15 {
		return 0, false
	}
	x := float64(whole)
	if decimals > 0 {
		x /= power(decimals)
	}
	if negative {
		x = -x
	}
	return x, true
}

// anyDecimal reads the whole grammar.
func anyDecimal(s string) (float64, error) {
	rest, ok := digits(sign(s))
	if ok && rest != "" && rest[0] == '.' {
		rest, ok = digits(rest[1:])
	}
	if ok && rest != "" && (rest[0] == 'e' || rest[0] == 'E') {
		rest, ok = digits(sign(rest[1:]))
	}
	if !ok || rest != "" {
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

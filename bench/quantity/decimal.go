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

// powers are the powers of ten that 15 digits need; a float64 holds them
// exactly.
func powers() (p [16]float64) {
	p[0] = 1
	for i := 1; i < len(p); i++ {
		p[i] = p[i-1] * 10
	}
	return p
}

// plainDecimal reads what instruments mostly send, [+-]digits[point digits] of
// at most 15 digits, and leaves the rest to anyDecimal. The digits as a whole
// number and the power of ten are exact, so that their quotient is the float64
// nearest to the decimal (Clinger, How to read floating point numbers
// accurately, 1990, the simple case; from memory).
func plainDecimal(s string, point byte) (float64, bool) {
	whole, decimals, n, negative := leading(s, point)
	if n == 0 || n != len(s) {
		return 0, false
	}
	power := 1.0
	for range decimals {
		power *= 10
	}
	return signed(float64(whole)/power, negative), true
}

// leading reads the decimal that s begins with and returns its digits as a
// whole number, how many of them are decimals, and how many characters it has:
// 0 when there is none, or one of more than 15 digits.
func leading(s string, point byte) (whole int64, decimals, n int, negative bool) {
	i := 0
	if s != "" && (s[0] == '+' || s[0] == '-') {
		negative = s[0] == '-'
		i = 1
	}
	from, at := i, 0
	for ; i < len(s); i++ {
		if d := s[i] - '0'; d <= 9 {
			whole = whole*10 + int64(d)
			continue
		}
		if s[i] != point || at != 0 || i == from {
			break
		}
		at = i
	}
	digits := i - from
	if at != 0 {
		digits--
		decimals = i - 1 - at
		if decimals == 0 {
			return 0, 0, 0, false
		}
	}
	if digits == 0 || digits > 15 {
		return 0, 0, 0, false
	}
	return whole, decimals, i, negative
}

func signed(x float64, negative bool) float64 {
	if negative {
		return -x
	}
	return x
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

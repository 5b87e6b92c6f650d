package quantity

import (
	"math"
	"math/big"
	"strconv"
	"strings"
)

// RoundTo rounds x to a multiple of resolution > 0, half away from zero, on
// the shortest decimals of both: 0.15 at 0.1 is 0.2, as on paper, though the
// nearest double lies below. Zero has no sign. Not-a-number, infinities and a
// resolution of 0 or less return x.
func RoundTo(x, resolution float64) float64 {
	if !(resolution > 0) || math.IsInf(resolution, 0) || math.IsNaN(x) || math.IsInf(x, 0) {
		return x
	}
	a, ok1 := new(big.Rat).SetString(strconv.FormatFloat(x, 'g', -1, 64))
	r, ok2 := new(big.Rat).SetString(strconv.FormatFloat(resolution, 'g', -1, 64))
	if !ok1 || !ok2 {
		return x
	}
	q := new(big.Rat).Quo(a, r)
	sign := q.Sign()
	q.Abs(q).Add(q, big.NewRat(1, 2))
	whole := new(big.Int).Quo(q.Num(), q.Denom())
	if whole.Sign() == 0 {
		return 0
	}
	out, _ := new(big.Rat).Mul(new(big.Rat).SetInt(whole), r).Float64()
	return float64(sign) * out
}

// DecimalsFor is how many decimals a resolution needs: 0.05 needs 2, 1 and 20
// need none.
func DecimalsFor(resolution float64) int {
	_, decimals, _ := strings.Cut(strconv.FormatFloat(resolution, 'f', -1, 64), ".")
	return len(decimals)
}

// FormatRounded writes x rounded to the resolution, with its decimals; with a
// resolution of 0 or less, infinite or not a number, x in full.
func FormatRounded(x, resolution float64) string {
	if !(resolution > 0) || math.IsInf(resolution, 0) {
		return strconv.FormatFloat(x, 'g', -1, 64)
	}
	return strconv.FormatFloat(RoundTo(x, resolution), 'f', DecimalsFor(resolution), 64)
}

// FormatWithUncertainty writes "23.46 ± 0.12": the uncertainty to two
// significant digits, half away from zero, and x to the same decimal (GUM
// 7.2.6). An uncertainty of 0 or less, infinite or not a number is not written,
// and x stands in full.
func FormatWithUncertainty(x, uncertainty float64) string {
	resolution := secondDigit(uncertainty)
	if resolution > 0 && secondDigit(RoundTo(uncertainty, resolution)) > resolution {
		resolution = secondDigit(RoundTo(uncertainty, resolution)) // 0.0996 is 0.10
	}
	if !(resolution > 0) {
		return FormatRounded(x, 0)
	}
	return FormatRounded(x, resolution) + " ± " + FormatRounded(uncertainty, resolution)
}

// secondDigit is the power of ten at which the second significant digit of
// x > 0 stands; 0 for anything else.
func secondDigit(x float64) float64 {
	if !(x > 0) || math.IsInf(x, 0) {
		return 0
	}
	_, exponent, _ := strings.Cut(strconv.FormatFloat(x, 'e', -1, 64), "e")
	e, err := strconv.Atoi(exponent)
	if err != nil {
		return 0
	}
	power, err := strconv.ParseFloat("1e"+strconv.Itoa(e-1), 64)
	if err != nil {
		return 0
	}
	return power
}

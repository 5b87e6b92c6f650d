package quantity

import (
	"math"
	"math/big"
	"strconv"
	"strings"
)

// RoundTo rounds x to a multiple of resolution > 0, half away from zero, on
// the shortest decimals of both: 0.15 at 0.1 is 0.2, as on paper, though the
// nearest double lies below. Not-a-number, infinities and a resolution of 0 or
// less return x.
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
	out, _ := new(big.Rat).Mul(new(big.Rat).SetInt(whole), r).Float64()
	return float64(sign) * out
}

// DecimalsFor is how many decimals a resolution needs: 0.05 needs 2, 1 needs 0.
func DecimalsFor(resolution float64) int {
	_, decimals, _ := strings.Cut(strconv.FormatFloat(resolution, 'f', -1, 64), ".")
	return len(decimals)
}

// FormatRounded writes x rounded to the resolution, with its decimals.
func FormatRounded(x, resolution float64) string {
	return strconv.FormatFloat(RoundTo(x, resolution), 'f', DecimalsFor(resolution), 64)
}

package fit

import "math"

// double is the unevaluated sum of two float64, some 32 decimal digits: what
// a polynomial of high order needs for its coefficients to keep 12. Source:
// Dekker, Numer. Math. 18 (1971) 224, and Hida, Li, Bailey, quad-double
// library, from memory. The conversions float64(a*b) keep a compiler from
// fusing a product with the sum after it.
type double struct{ hi, lo float64 }

// of is exact.
func of(x float64) double { return double{hi: x} }

// twoSum is a + b exactly.
func twoSum(a, b float64) double {
	s := a + b
	t := s - a
	return double{s, (a - (s - t)) + (b - t)}
}

// quickSum is a + b exactly where |a| >= |b|.
func quickSum(a, b float64) double {
	s := a + b
	return double{s, b - (s - a)}
}

func (a double) plus(b double) double {
	s, t := twoSum(a.hi, b.hi), twoSum(a.lo, b.lo)
	s = quickSum(s.hi, s.lo+t.hi)
	return quickSum(s.hi, s.lo+t.lo)
}

func (a double) negative() double { return double{-a.hi, -a.lo} }

func (a double) minus(b double) double { return a.plus(b.negative()) }

func (a double) times(b double) double {
	p := float64(a.hi * b.hi)
	e := math.FMA(a.hi, b.hi, -p)
	return quickSum(p, e+float64(float64(a.hi*b.lo)+float64(a.lo*b.hi)))
}

// over divides; b is not zero.
func (a double) over(b double) double {
	q := a.hi / b.hi
	r := a.minus(b.times(of(q)))
	q2 := r.hi / b.hi
	r = r.minus(b.times(of(q2)))
	return quickSum(q, q2).plus(of(r.hi / b.hi))
}

// root is the square root; 0 for a that is not above 0.
func (a double) root() double {
	if !(a.hi > 0) {
		return double{}
	}
	x := math.Sqrt(a.hi)
	return quickSum(x, a.minus(of(x).times(of(x))).hi/(2*x))
}

// value is the nearest float64.
func (a double) value() float64 { return a.hi + a.lo }

// triangle is the upper triangular R of a QR factorisation of rows that are
// given one by one: Householder reflections fold a block of rows at a time
// into it, so that a million rows need no more memory than a hundred.
// R'R is the sum of the products of the rows. Source: Golub and Van Loan,
// Matrix Computations, 5.2 and 5.3, from memory.
type triangle struct {
	columns int
	r       []double   // columns x columns, by rows; below the diagonal unused
	block   [][]double // rows not yet folded in, by column
	rows    int        // of the block
}

const blockRows = 64

func newTriangle(columns int) *triangle {
	t := &triangle{columns: columns, r: make([]double, columns*columns), block: make([][]double, columns)}
	all := make([]double, columns*blockRows)
	for j := range t.block {
		t.block[j] = all[j*blockRows : (j+1)*blockRows]
	}
	return t
}

// add takes one row; it keeps no reference to it.
func (t *triangle) add(row []double) {
	for j, x := range row {
		t.block[j][t.rows] = x
	}
	if t.rows++; t.rows == blockRows {
		t.fold()
	}
}

// fold brings the block into the triangle. The reflection of column k touches
// row k of the triangle and the block: v = (R_kk - alpha, block), and
// 2/v'v = -1/(alpha v_0).
func (t *triangle) fold() {
	n := t.rows
	t.rows = 0
	for k := range t.columns {
		v := t.block[k][:n]
		norm := t.at(k, k).times(t.at(k, k))
		below := 0.0
		for _, x := range v {
			norm = norm.plus(x.times(x))
			below = math.Max(below, math.Abs(x.hi))
		}
		if below == 0 {
			continue
		}
		alpha := norm.root()
		if t.at(k, k).hi > 0 {
			alpha = alpha.negative()
		}
		top := t.at(k, k).minus(alpha)
		per := of(-1).over(alpha.times(top))
		for j := k + 1; j < t.columns; j++ {
			column := t.block[j][:n]
			w := top.times(t.at(k, j))
			for i, x := range v {
				w = w.plus(x.times(column[i]))
			}
			w = w.times(per)
			t.r[k*t.columns+j] = t.at(k, j).minus(w.times(top))
			for i, x := range v {
				column[i] = column[i].minus(w.times(x))
			}
		}
		t.r[k*t.columns+k] = alpha
	}
}

func (t *triangle) at(i, j int) double { return t.r[i*t.columns+j] }

// solve returns s with R s = column j, over the leading p columns, j >= p.
func (t *triangle) solve(p, j int) []double {
	s := make([]double, p)
	for i := p - 1; i >= 0; i-- {
		x := t.at(i, j)
		for k := i + 1; k < p; k++ {
			x = x.minus(t.at(i, k).times(s[k]))
		}
		s[i] = x.over(t.at(i, i))
	}
	return s
}

// inverse returns (R'R)^-1 of the leading p columns.
func (t *triangle) inverse(p int) [][]double {
	inv := make([][]double, p) // of R, upper triangular
	for i := p - 1; i >= 0; i-- {
		inv[i] = make([]double, p)
		inv[i][i] = of(1).over(t.at(i, i))
		for j := i + 1; j < p; j++ {
			var x double
			for k := i + 1; k <= j; k++ {
				x = x.minus(t.at(i, k).times(inv[k][j]))
			}
			inv[i][j] = x.over(t.at(i, i))
		}
	}
	out := make([][]double, p)
	for i := range out {
		out[i] = make([]double, p)
		for j := range out[i] {
			for k := max(i, j); k < p; k++ {
				out[i][j] = out[i][j].plus(inv[i][k].times(inv[j][k]))
			}
		}
	}
	return out
}

// dependent says whether one of the leading p columns lies in the others to
// within the last bits of a float64: |R_kk| against the length of the column.
func (t *triangle) dependent(p int) bool {
	for k := range p {
		if !(math.Abs(t.at(k, k).hi) > negligible*t.length(k, 0)) {
			return true
		}
	}
	return false
}

// length is that of column j from row i of the triangle on.
func (t *triangle) length(j, i int) float64 {
	var ss float64
	for ; i <= j; i++ {
		ss += t.at(i, j).hi * t.at(i, j).hi
	}
	return math.Sqrt(ss)
}

// negligible is the share of a column below which what is left of it is
// rounding of the numbers it was given in: some 45 units in their last place.
const negligible = 1e-14

package fit

import "math"

// Growing is noise that grows with the pressure, and the line in which each
// reading weighs by its own: sigma(p)^2 = Constant^2 + (Share p)^2.
type Growing struct {
	Constant, Share float64
	Line            Straight // its Residual is a multiple of sigma
}

// surelyGrows is from where on the likelihood ratio of growing noise counts: in
// 1 % of UUTs whose noise does not grow (7 set pressures, 3 cycles, 2 legs;
// 100,000 drawn), and in 89 % of those whose noise is a share of the pressure and
// nothing else (KYMOBENCH_FULL=1 go test -run TestGrowing -v).
const surelyGrows = 6

// growing looks at whether the scatter at the set pressures (variances v with n
// degrees of freedom each) grows with their squares q, by the likelihood ratio
//
//	Sum n (ln A0 + v/A0) - Sum n (ln(A + B q) + v/(A + B q)), A0 the mean of v by n,
//
// where A and B make the second sum least, and if it does, finds the line with
// those weights, known but for a factor. The set pressure nearest zero is left
// out: a vented UUT is quieter than any noise of pressure, and its display may
// not move at all. Source: textbook, chi-squared likelihood.
func (w *work) growing(f *Figures, v []float64, n []int) {
	var a0, total float64
	zero, most := w.zeroLevel(), 0.0
	count, q := w.floats(len(w.levels)), w.floats(len(w.levels))
	for l, set := range w.levels {
		if l != zero && n[l] > 0 {
			count[l] = float64(n[l])
			a0 += v[l] * count[l]
			total += count[l]
			most = max(most, math.Abs(set))
		}
	}
	if a0 /= total; !(a0 > 1e-12*w.size*1e-12*w.size) { // not mere rounding
		return
	}
	var score float64
	for l, set := range w.levels {
		q[l] = set / most * (set / most)
		score += count[l] * (v[l]/a0 - 1) * q[l]
	}
	if !(score > 0) {
		return
	}
	// For a ratio B/A the best A is a mean; what is left is a curve with one
	// trough in the logarithm of the ratio. Up to 1e4: a constant of a hundredth
	// of the top's is no longer told from none.
	best := func(ratio float64) (a, sum float64) {
		for l, c := range count {
			a += v[l] * c / total / (1 + ratio*q[l])
			sum += c * math.Log(1+ratio*q[l])
		}
		return a, sum + total*math.Log(a)
	}
	at, least := 0.0, total*math.Log(a0)
	for ratio := 0.3; ratio < 2e4; ratio *= 4 {
		if _, sum := best(ratio); sum < least {
			at, least = ratio, sum
		}
	}
	if !(total*math.Log(a0)-least > surelyGrows) {
		return
	}
	rises := func(ratio float64) bool { // the slope of the sum
		var up, over, under float64
		for l, c := range count {
			share := 1 / (1 + ratio*q[l])
			up += c * q[l] * share
			over += c * v[l] * q[l] * share * share
			under += c * v[l] * share
		}
		return up > total*over/under
	}
	low, high := at/4, at*4
	for range 60 {
		if middle := math.Sqrt(low * high); rises(middle) {
			high = middle
		} else {
			low = middle
		}
	}
	ratio := math.Sqrt(low * high)
	a, _ := best(ratio)
	g := Growing{Constant: math.Sqrt(a), Share: math.Sqrt(a*ratio) / most}
	sd := make([]float64, len(w.Reference))
	for i, p := range w.Reference {
		sd[i] = math.Hypot(g.Constant, g.Share*p)
	}
	line, err := FitPolynomial(w.Reference, w.UUT, 1, Noise{SD: sd, Relative: true})
	if err != nil {
		return
	}
	g.Line, _ = line.Straight()
	f.Growing = &g
}

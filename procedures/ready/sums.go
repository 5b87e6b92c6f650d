package ready

import "math"

// kept is how many samples a window can hold at least before old ones go.
const kept = 2048

// sums keeps the samples of a point with running sums, so that the figures of
// any window cost the same. A window is named by two rows a < b and holds the
// samples of rows a+1 to b. All sums are about the origin; when twice kept are
// held the latest kept are summed anew, so that digits do not run out.
type sums struct {
	rows   []row // rows[0] stands before the first sample
	origin Sample
}

// row is one sample, about the origin, and the sums up to it.
type row struct {
	number         int     // of the sample, counted by who adds
	t, r, d        float64 // time, reference, difference
	age, scatter   float64 // Behind and Scatter of the sample
	st, stt        float64
	sr, str, srr   float64
	sd, std, sdd   float64
	jumps          float64 // squared differences of neighbouring d
	sAge, sScatter float64
}

func (s Sample) finite() bool {
	sum := s.Time + s.Reference + s.UUT + s.Behind + s.Scatter
	return !math.IsNaN(sum) && !math.IsInf(sum, 0)
}

func (s *sums) reset() { s.rows = append(s.rows[:0], row{}) }

// last is the row of the latest sample, 0 when there is none.
func (s *sums) last() int { return len(s.rows) - 1 }

// add takes a sample unless it is not finite or not later than the last.
func (s *sums) add(x Sample, number int) {
	if !x.finite() {
		return
	}
	if s.last() == 0 {
		s.origin = x
	}
	if s.last() >= 2*kept {
		s.renew()
	}
	next := row{
		number: number, t: x.Time - s.origin.Time, r: x.Reference - s.origin.Reference,
		d: (x.UUT - s.origin.UUT) - (x.Reference - s.origin.Reference), age: x.Behind, scatter: x.Scatter,
	}
	if s.last() > 0 && !(next.t > s.rows[s.last()].t) {
		return
	}
	s.append(next)
}

func (s *sums) append(x row) {
	p := &s.rows[s.last()]
	x.st, x.stt = p.st+x.t, p.stt+x.t*x.t
	x.sr, x.str, x.srr = p.sr+x.r, p.str+x.t*x.r, p.srr+x.r*x.r
	x.sd, x.std, x.sdd = p.sd+x.d, p.std+x.t*x.d, p.sdd+x.d*x.d
	x.jumps = p.jumps
	if s.last() > 0 {
		x.jumps += (x.d - p.d) * (x.d - p.d)
	}
	x.sAge, x.sScatter = p.sAge+x.age, p.sScatter+x.scatter
	s.rows = append(s.rows, x)
}

// renew forgets all but the latest kept samples and moves the origin there.
func (s *sums) renew() {
	old := s.rows[s.last()-kept+1:]
	o := old[0]
	s.origin.Time += o.t
	s.origin.Reference += o.r
	s.origin.UUT += o.r + o.d
	s.reset()
	for _, x := range old {
		x.t, x.r, x.d = x.t-o.t, x.r-o.r, x.d-o.d
		s.append(x)
	}
}

// since returns the row before the first sample at or after a time.
func (s *sums) since(time float64) int {
	time -= s.origin.Time
	low, high := 0, s.last() // rows[low] is before, rows[high+1] is not
	for low < high {
		middle := (low + high) / 2
		if x := &s.rows[middle+1]; x.t < time {
			low = middle + 1
		} else {
			high = middle
		}
	}
	return low
}

// period is the mean time between samples, 0 when fewer than two are held.
func (s *sums) period() float64 {
	if s.last() < 2 {
		return 0
	}
	return (s.rows[s.last()].t - s.rows[1].t) / float64(s.last()-1)
}

// lineFit is the least-squares line of a quantity over a window's time.
type lineFit struct {
	n, mean, slope float64
	stt            float64 // of time about its mean
	rss            float64 // about the line
}

// variance is the residual variance with the line's two parameters taken off,
// 0 for fewer than three samples.
func (l lineFit) variance() float64 {
	if l.n < 3 {
		return 0
	}
	return l.rss / (l.n - 2)
}

func fitted(n, st, stt, sy, sty, syy float64) lineFit {
	l := lineFit{n: n, mean: sy / n, stt: stt - st*st/n}
	if !(l.stt > 0) {
		l.stt = 0
		return l
	}
	sty -= st * sy / n
	l.slope = sty / l.stt
	l.rss = math.Max(0, syy-sy*sy/n-sty*l.slope)
	return l
}

func (s *sums) reference(a, b int) lineFit {
	x, y := &s.rows[a], &s.rows[b]
	l := fitted(float64(b-a), y.st-x.st, y.stt-x.stt, y.sr-x.sr, y.str-x.str, y.srr-x.srr)
	l.mean += s.origin.Reference
	return l
}

func (s *sums) difference(a, b int) lineFit {
	x, y := &s.rows[a], &s.rows[b]
	l := fitted(float64(b-a), y.st-x.st, y.stt-x.stt, y.sd-x.sd, y.std-x.std, y.sdd-x.sdd)
	l.mean += s.origin.UUT - s.origin.Reference
	return l
}

// behind and scatter are the means of those of a window's samples.
func (s *sums) behind(a, b int) float64 {
	return (s.rows[b].sAge - s.rows[a].sAge) / float64(b-a)
}

func (s *sums) scatter(a, b int) float64 {
	return (s.rows[b].sScatter - s.rows[a].sScatter) / float64(b-a)
}

// ends returns the mean time and reference of the first and of the last few
// readings of a window: a fifth of them, at most five.
func (s *sums) ends(a, b int) (t1, r1, t2, r2, k float64) {
	few := min(max(1, (b-a)/5), 5)
	k = float64(few)
	p, q := &s.rows[a], &s.rows[a+few]
	t1, r1 = (q.st-p.st)/k, (q.sr-p.sr)/k
	p, q = &s.rows[b-few], &s.rows[b]
	t2, r2 = (q.st-p.st)/k, (q.sr-p.sr)/k
	return t1, r1, t2, r2, k
}

// slope is the reference's mean slope over a window: from its first readings
// to its last, and not the least-squares slope, for what a lag does to the mean
// difference is lag times the mean slope however the pressure bends.
func (s *sums) slope(a, b int) (value, se float64) {
	t1, r1, t2, r2, k := s.ends(a, b)
	if !(t2 > t1) {
		return 0, math.Inf(1)
	}
	return (r2 - r1) / (t2 - t1), s.referenceNoise(a, b) * math.Sqrt(2/k) / (t2 - t1)
}

// bend is the least-squares trend of the reference's slope over a window. For
// a slope r' over a time T it is 12/T^3 Integral (t - T/2) r' dt, which is
// 12/T^2 (mean of both ends - mean of all); textbook integration by parts.
func (s *sums) bend(a, b int) (value, se float64) {
	t1, r1, t2, r2, k := s.ends(a, b)
	if !(t2 > t1) {
		return 0, math.Inf(1)
	}
	mean := (s.rows[b].sr - s.rows[a].sr) / float64(b-a)
	c := 12 / (t2 - t1) / (t2 - t1)
	return c * ((r1+r2)/2 - mean), c * s.referenceNoise(a, b) / math.Sqrt(2*k)
}

// referenceNoise is the SD of one reading of the reference: about the lines of
// the window's two halves, which takes a bend for no noise.
func (s *sums) referenceNoise(a, b int) float64 {
	m := (a + b) / 2
	l, r := s.reference(a, m), s.reference(m, b)
	return math.Sqrt((l.rss + r.rss) / math.Max(l.n+r.n-4, 1))
}

// noise returns the variance of one difference about the window's line; by how
// much more than white noise of it makes the mean scatter (more); and the same
// with the correlation taken 0.3 of its standard error higher (safe), which
// says whether the window is long enough to have seen it.
//
// The first autocorrelation is r = 1 - D/(2v), D the mean squared difference of
// neighbours without the line's share; unbiased for white noise when v is. A
// first-order process of that correlation makes the variance of a mean
// (1 + r)/(1 - r) times larger, and hides so much of its own variance in the
// line that v is rss/(n - 2 times that): solved by going round a few times.
// Noise of another kind is looked for in the means of blocks of 4, 8, 16 ...
// while there are six blocks: where their variance about the line is beyond
// the 95 % quantile of chi-square, it counts in full.
func (s *sums) noise(a, b int, line lineFit) (v, more, safe float64) {
	v = line.variance()
	if !(v > 0) {
		return 0, 1, 1
	}
	white := v
	period := (s.rows[b].t - s.rows[a+1].t) / (line.n - 1)
	jump := (s.rows[b].jumps-s.rows[a+1].jumps)/(line.n-1) - line.slope*line.slope*period*period
	r := 0.0
	for range 4 {
		r = 1 - jump/(2*v)
		more = longer(r)
		v = line.rss / math.Max(line.n-2*more, line.n/4)
	}
	safe = longer(r + 0.3/math.Sqrt(line.n))
	for size := 4; size*6 <= b-a; size *= 2 {
		blocks, about := s.blocks(a, b, size, line)
		ratio := float64(size) * about / white
		if ratio > chiSquare95(float64(blocks-2)) {
			more = math.Max(more, ratio*white/v)
		}
	}
	return v, more, math.Max(safe, more)
}

// longer is (1 + r)/(1 - r), never under 1; r counts as 0.99 at most.
func longer(r float64) float64 {
	r = math.Min(math.Max(r, 0), 0.99)
	return (1 + r) / (1 - r)
}

// blocks returns how many whole blocks a window has, counted from its end, and
// the variance of their means about the line of the window.
func (s *sums) blocks(a, b, size int, line lineFit) (count int, variance float64) {
	x, y := &s.rows[a], &s.rows[b]
	mt, md := (y.st-x.st)/line.n, (y.sd-x.sd)/line.n
	for to := b; to-size >= a; to -= size {
		p, q := &s.rows[to-size], &s.rows[to]
		e := (q.sd-p.sd)/float64(size) - md - line.slope*((q.st-p.st)/float64(size)-mt)
		variance += e * e
		count++
	}
	return count, variance / float64(count-2)
}

// chiSquare95 is the 95 % quantile of chi-square over its degrees of
// freedom, to about 1 % for 3 and more (Wilson and Hilferty, PNAS 1931;17:684,
// from memory).
func chiSquare95(dof float64) float64 {
	c := 2 / (9 * dof)
	x := 1 - c + 1.644854*math.Sqrt(c)
	return x * x * x
}

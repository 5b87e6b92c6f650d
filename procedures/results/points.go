package results

import (
	"fmt"
	"math"

	"kymobench/bench/quantity"
	"kymobench/procedures/record"
)

// blockMean is how many samples of a stream are averaged before their scatter
// is taken for noise, so that correlation between neighbours does not make the
// mean look better known than it is.
const blockMean = 50

// taken is one point: means, and what is known of their noise.
type taken struct {
	record.Point
	set    float64 // in the scale's unit
	hasSet bool
	p      float64 // corrected reference
	y      float64 // UUT
	beyond float64 // mean distance of its readings outside the certificate's range

	nP, nY int
	vP     float64 // variance of one reading of the reference about its slope
	dofP   float64
	vY     float64 // variance of one block mean of the UUT
	kY     int     // block means
	dofY   float64
	slope  float64 // of the reference, per second

	lag, lags float64 // sum of products of neighbouring block means about their mean, and how many
	vRaw      float64 // variance of single samples of the UUT about their slope
	dofRaw    float64
	lagRaw    float64 // sum of products of neighbours

	level  int  // index of its set pressure, from the lowest
	cell   int  // readings of one cycle, leg and set pressure
	zeroed bool // at the pressure at which the reference was zeroed in the run
}

// takePoint reads the texts of a point.
func (g *gathered) takePoint(s *scale, pt record.Point) (taken, error) {
	t := taken{Point: pt}
	if pt.Set != "" {
		r := reader{}
		t.set, t.hasSet = r.stated(pt.Set, s.unit), true
		if r.err != nil {
			return t, r.err
		}
	}
	var times, ps []float64
	for _, n := range pt.Readings {
		r, ok := g.readings[n]
		if !ok {
			return t, fmt.Errorf("point names line %d, which is no reading", n)
		}
		p, beyond, err := s.reference(r.Text)
		if err != nil {
			return t, fmt.Errorf("reference reading in line %d: %w", n, err)
		}
		t.beyond += beyond / float64(len(pt.Readings))
		times, ps = append(times, r.middle()), append(ps, p)
	}
	if len(ps) == 0 {
		return t, fmt.Errorf("point without a reading of the reference")
	}
	if keep, n := withoutOutliers(ps, s.resolutionReference); n > 0 {
		times, ps = kept(times, keep), kept(ps, keep)
		g.outliers += n
	}
	t.nP = len(ps)
	t.p, t.slope, t.vP, t.dofP = trend(times, ps)
	t.p += s.lag * t.slope
	if pt.UUT != "" {
		y, err := s.uut(pt.UUT, pt.Excitation)
		t.y, t.nY = y, 1
		return t, err
	}
	ys, err := g.samples(s, pt.Blocks)
	if err != nil {
		return t, err
	}
	if len(ys) == 0 {
		return t, fmt.Errorf("point without a reading of the UUT")
	}
	ys, n := dropOutliers(ys, s.resolutionUUT)
	g.outliers += n
	t.nY = len(ys)
	t.y = mean(ys)
	means := blockMeans(ys, blockMean)
	t.kY = len(means)
	t.vY, t.dofY, t.lag = roughness(means)
	t.lags = math.Max(0, float64(t.kY-1))
	t.vRaw, t.dofRaw, t.lagRaw = roughness(ys)
	return t, nil
}

// samples reads the texts of blocks, in order.
func (g *gathered) samples(s *scale, lines []int64) ([]float64, error) {
	var ys []float64
	for _, n := range lines {
		b, ok := g.blocks[n]
		if !ok {
			return nil, fmt.Errorf("line %d is no block of samples", n)
		}
		for i, text := range b.Samples {
			y, err := s.uut(text, "")
			if err != nil {
				return nil, fmt.Errorf("sample %d of line %d: %w", i+1, n, err)
			}
			ys = append(ys, y)
		}
	}
	return ys, nil
}

// trend returns the mean of p, its least-squares slope over t, and the variance
// of one value about that line with its degrees of freedom. Fewer than three
// values give no slope and no variance.
func trend(t, p []float64) (m, slope, variance, dof float64) {
	m = mean(p)
	n := float64(len(p))
	if len(p) < 3 {
		return m, 0, 0, 0
	}
	mt := mean(t)
	var stt, stp float64
	for i := range t {
		stt += (t[i] - mt) * (t[i] - mt)
		stp += (t[i] - mt) * (p[i] - m)
	}
	if stt > 0 {
		slope = stp / stt
	}
	for i := range t {
		r := p[i] - m - slope*(t[i]-mt)
		variance += r * r / (n - 2)
	}
	return m, slope, variance, n - 2
}

// mean is the two-pass arithmetic mean; one value is returned exactly.
func mean(x []float64) float64 {
	if len(x) == 1 {
		return x[0]
	}
	n := float64(len(x))
	var m, rest float64
	for _, v := range x {
		m += v / n
	}
	for _, v := range x {
		rest += (v - m) / n
	}
	return m + rest
}

func blockMeans(x []float64, size int) []float64 {
	var means []float64
	if len(x) < 4*size {
		return append(means, x...)
	}
	for i := 0; i+size <= len(x); i += size {
		means = append(means, mean(x[i:i+size]))
	}
	return means
}

// roughness is the variance of values about their least-squares slope, its
// degrees of freedom, and the sum of products of neighbours so reduced. Three
// values or two are taken about their mean, one gives nothing.
func roughness(y []float64) (variance, dof, lag float64) {
	n := float64(len(y))
	if len(y) < 2 {
		return 0, 0, 0
	}
	m, mt := mean(y), (n-1)/2
	slope := 0.0
	dof = n - 1
	if len(y) > 3 {
		for i, v := range y {
			slope += (float64(i) - mt) * (v - m)
		}
		slope /= n * (n*n - 1) / 12
		dof = n - 2
	}
	before := 0.0
	for i, v := range y {
		r := v - m - slope*(float64(i)-mt)
		variance += r * r / dof
		lag += r * before
		before = r
	}
	return variance, dof, lag
}

// noise is what the points of a run say together about the scatter of their
// means: the variances pooled over points, for the scatter at one point alone
// has few degrees of freedom.
type noise struct {
	vP, dofP float64 // of one reading of the reference
	vY, dofY float64 // of one block mean of the UUT

	// Where points are single readings: the variance of y - p.
	vSingle, dofSingle float64
	how                string // it is known
	from               string
	// What cells of different cycles vary by beyond all that.
	vCell, dofCell float64

	why string // nothing shows the noise
}

// pool combines what the points say about their own scatter. Neighbouring block
// means that vary together, as those of a slow noise do, leave more in a mean
// than their scatter alone says: (1 + r)/(1 - r) times its variance with r
// their correlation, when it is more than chance gives (textbook, for noise
// whose correlation falls off geometrically).
func pool(points []taken) noise {
	var n noise
	var lag, lags float64
	for _, t := range points {
		n.vP += t.vP * t.dofP
		n.dofP += t.dofP
		n.vY += t.vY * t.dofY
		n.dofY += t.dofY
		lag, lags = lag+t.lag, lags+t.lags
	}
	if n.dofP > 0 {
		n.vP /= n.dofP
	}
	if n.dofY > 0 {
		n.vY /= n.dofY
	}
	if lags > 0 && n.vY > 0 {
		r := math.Min(0.9, lag/lags/n.vY)
		if r > 2/math.Sqrt(lags) {
			n.vY *= (1 + r) / (1 - r)
			n.dofY *= (1 - r) / (1 + r)
		}
	}
	return n
}

// of is the variance that noise leaves in the mean of one point, as its own
// readings show it.
func (n noise) of(t *taken) float64 {
	v := 0.0
	if t.nP > 0 {
		v += n.vP / float64(t.nP)
	}
	if t.kY > 0 {
		v += n.vY / float64(t.kY)
	}
	return v
}

// mmHg is the unit in which limits on pressures are compared.
func mmHg() quantity.Unit {
	u, _ := quantity.UnitNamed("mmHg")
	return u
}

package step

import (
	"math"
	"slices"
)

// start is one starting point of the search and the cost there.
type start struct {
	theta [most]float64
	cost  float64
	i, j  int // place in the grid
}

// The grid of the scan: six damping ratios, frequencies a factor apart.
const (
	gridFactor = 1.35
	gridZetas  = 6
)

func gridZeta(i int) float64 {
	return [gridZetas]float64{0.07, 0.2, 0.45, 0.8, 1.2, 2}[i]
}

// scan tries the grid on coarse and returns at most five starting points, the
// lowest first, no two of them neighbours. half is the time at which the
// trace is half way: it ties t0 to w and zeta, so that only two dimensions
// need to be searched. With an applied pressure the delay starts at 0.
func scan(coarse *problem, half float64) []start {
	var grid []start
	var n normal
	span := coarse.high[lnOmega] - coarse.low[lnOmega]
	count := int(math.Ceil(span / math.Log(gridFactor)))
	for i := range gridZetas {
		zeta := gridZeta(i)
		x50 := crossing(zeta, 0, riseEnd(zeta), 0.5)
		for j := range count {
			s := start{i: i, j: j}
			s.theta[lnOmega] = coarse.low[lnOmega] + (float64(j)+0.5)*span/float64(count)
			s.theta[lnZeta] = math.Log(zeta)
			w := math.Exp(s.theta[lnOmega])
			if !coarse.measured {
				s.theta[delay] = half - x50/w
			}
			if coarse.fitWidth {
				// A width that small is felt by the search without shaping the scan.
				s.theta[squared] = math.Pow(0.3/w, 2)
			}
			s.cost = coarse.costAt(&s.theta, &n)
			if !math.IsInf(s.cost, 1) {
				grid = append(grid, s)
			}
		}
	}
	slices.SortStableFunc(grid, func(a, b start) int {
		switch {
		case a.cost < b.cost:
			return -1
		case a.cost > b.cost:
			return 1
		}
		return 0
	})
	var best []start
	for _, s := range grid {
		near := slices.ContainsFunc(best, func(o start) bool {
			return abs(s.i-o.i) <= 1 && abs(s.j-o.j) <= 1
		})
		if !near {
			best = append(best, s)
		}
		if len(best) == 5 {
			break
		}
	}
	return best
}

// costAt is the cost alone, which on block means needs no derivatives.
func (p *problem) costAt(theta *[most]float64, n *normal) float64 {
	if p.times == nil {
		p.normalAt(theta, n)
		return n.cost
	}
	w, zeta := math.Exp(theta[lnOmega]), math.Exp(theta[lnZeta])
	width := p.width
	if p.fitWidth {
		width = math.Sqrt(theta[squared])
	}
	var m [most][most]float64
	for i := range p.fixed {
		copy(m[i][:], p.fixed[i][:])
	}
	m[linear][0], m[linear][1], m[linear][linear] = m[2][0], m[2][1], m[2][2]
	m[2] = [most]float64{}
	xw := w * width
	narrow := xw < smallWidth
	for _, r := range p.runs {
		d := w * r.spacing
		if w*(p.times[r.to-1]-theta[delay])+xw/2 <= 0 {
			continue
		}
		cd, sd := kernel(d, zeta)
		root := p.one[r.from]
		for from := r.from; from < r.to; from += blockSize {
			k := min(blockSize, r.to-from)
			x := w * (p.times[from] - theta[delay])
			g := p.g[:k]
			if narrow { // for a scan an edge that narrow is ideal
				p.a.fill(x, d, zeta, cd, sd, k)
				for i := range g {
					g[i] = 1 - p.a.c[i] - zeta*p.a.s[i]
				}
			} else {
				p.a.fill(x+xw/2, d, zeta, cd, sd, k)
				p.b.fill(x-xw/2, d, zeta, cd, sd, k)
				for i := range g {
					xa, sa, xb, sb := p.a.x[i], p.a.s[i], p.b.x[i], p.b.s[i]
					g[i] = ((xa - sa - 2*zeta*(1-p.a.c[i]-zeta*sa)) - (xb - sb - 2*zeta*(1-p.b.c[i]-zeta*sb))) / xw
				}
			}
			var sum, drift, square, product float64
			tau, y := p.tau[from:from+k], p.y[from:from+k]
			for i, v := range g {
				sum += v
				drift += v * tau[i]
				square += v * v
				product += v * y[i]
			}
			m[2][0] += sum * root * root
			m[2][1] += drift * root
			m[2][2] += square * root * root
			m[linear][2] += product * root
		}
	}
	held := p.nonlinear
	p.nonlinear = 0
	n.cost = math.Inf(1)
	p.eliminate(&m, linear, n)
	p.nonlinear = held
	return n.cost
}

func abs(i int) int { return max(i, -i) }

// found is a minimum of the full problem.
type found struct {
	theta [most]float64
	beta  [linear]float64
	at    normal
}

// searchAll refines the starting points on coarse, then the best distinct two
// on full. The second minimum is kept (ok2) because sampled too slowly a
// trace can have two that explain it equally well.
// What is found on coarse lies later than on full by late, the readout's own.
func searchAll(coarse, full *problem, half, late float64) (best found, second found, ok, ok2 bool) {
	refine := search{floor: floorOf(coarse), iterations: 25, tolerance: 1e-6}
	var refined []start
	var n normal
	for _, s := range scan(coarse, half) {
		refine.minimise(coarse, &s.theta, &n)
		s.cost = n.cost
		same := false
		for i := range refined {
			o := &refined[i]
			if math.Abs(o.theta[lnOmega]-s.theta[lnOmega])+math.Abs(o.theta[lnZeta]-s.theta[lnZeta]) < 0.05 {
				same = true
				if s.cost < o.cost {
					*o = s
				}
			}
		}
		if !same && !math.IsInf(s.cost, 1) {
			refined = append(refined, s)
		}
	}
	slices.SortStableFunc(refined, func(a, b start) int {
		switch {
		case a.cost < b.cost:
			return -1
		case a.cost > b.cost:
			return 1
		}
		return 0
	})
	for k, s := range refined {
		if k == 2 {
			break
		}
		if full.applied != nil && !full.measured {
			s.theta[delay] -= late
			s.theta[squared] = 0
			if full.fitWidth {
				// First as if the edge were ideal: the stand-in was a rough one.
				full.hold(true)
				s.theta = polish(full, s.theta).theta
				full.hold(false)
				s.theta[squared] = math.Pow(0.05*math.Exp(-s.theta[lnOmega]), 2)
			}
		}
		f := polish(full, s.theta)
		switch {
		case math.IsInf(f.at.cost, 1):
		case !ok:
			best, ok = f, true
		case math.Abs(f.theta[lnOmega]-best.theta[lnOmega])+math.Abs(f.theta[lnZeta]-best.theta[lnZeta]) < 0.02:
			if f.at.cost < best.at.cost {
				best = f
			}
		case f.at.cost < best.at.cost:
			best, second, ok2 = f, best, true
		default:
			second, ok2 = f, true
		}
	}
	return best, second, ok, ok2
}

func floorOf(p *problem) int {
	if p.fitWidth {
		return squared
	}
	return -1
}

// polish searches the full problem from theta.
func polish(full *problem, theta [most]float64) found {
	f := found{theta: theta}
	search{floor: floorOf(full), iterations: 60, tolerance: 1e-10}.minimise(full, &f.theta, &f.at)
	if !math.IsInf(f.at.cost, 1) {
		// The linear parameters of the lowest point, not of the last one tried.
		full.normalAt(&f.theta, &f.at)
		f.beta = full.beta
	}
	return f
}

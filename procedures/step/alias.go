package step

import "math"

// Sampled too slowly, a fast swing leaves the samples of a slow one: poles
// s and s + 2 pi i k/dt give the same samples. A fit finds the slow one; the
// aliases are therefore looked for by name.

const (
	aliasDamping = 0.05 // no line known here swings with less (facts of the project)
	aliasComfort = 10   // samples a period above which an alias is not thought of
	aliasSamples = 25   // a period; above, a rise that is seen cannot be an alias
	aliasPhases  = 16   // places of the step between two samples that are tried
	aliasReach   = 48   // samples in which an alias must hold before all are asked
)

// aliases searches the full problem from the aliases of a minimum and returns
// the best of them, if one explains the samples about as well or better. The
// damping of a pole is kept, its frequency becomes 2 pi k rate +- wd for k = 1
// and 2. Time t0 is tried at places between the samples around that of the
// slow answer, whose first sample is the fast one's too. Source: the sampling
// theorem; search by hand.
func aliases(full *problem, f found) (best found, ok bool) {
	w, zeta := math.Exp(f.theta[lnOmega]), math.Exp(f.theta[lnZeta])
	if full.applied != nil || zeta > 1.3 || 2*math.Pi/(w*full.dt) > aliasSamples {
		return found{}, false
	}
	near := full.around(f.theta[delay])
	sigma, wd := zeta*w, w*DampedFrequency(zeta)
	around := 2 * math.Pi / full.dt
	var n normal
	near.normalAt(&f.theta, &n)
	height := math.Abs(f.beta[response])
	limit := n.cost + 0.1*height*height
	best.at.cost = math.Inf(1)
	for _, other := range []float64{around - wd, around + wd, 2*around - wd, 2*around + wd} {
		if !(other > wd) {
			continue
		}
		var lowest start
		lowest.cost = math.Inf(1)
		for k := range aliasPhases {
			s := start{}
			s.theta = f.theta
			s.theta[lnOmega] = math.Log(math.Hypot(sigma, other))
			s.theta[lnZeta] = math.Log(sigma / math.Hypot(sigma, other))
			s.theta[delay] = f.theta[delay] + (3*float64(k)/aliasPhases-1)*full.dt
			near.normalAt(&s.theta, &n)
			if n.cost < lowest.cost {
				s.cost = n.cost
				lowest = s
			}
		}
		if math.IsInf(lowest.cost, 1) {
			continue
		}
		search{floor: floorOf(near), iterations: 15, tolerance: 1e-4}.minimise(near, &lowest.theta, &n)
		if n.cost > limit {
			continue
		}
		g := polish(full, lowest.theta)
		// What strays back to the minimum itself is no alias of it.
		if g.at.cost < best.at.cost && g.theta[lnOmega] > f.theta[lnOmega]+math.Ln2 {
			best, ok = g, true
		}
	}
	return best, ok
}

// around is the part of a problem near a time, at the full rate.
func (p *problem) around(at float64) *problem {
	centre := int(math.Round((at - p.first) / p.dt))
	from := max(0, centre-aliasReach/4)
	to := min(len(p.y), from+aliasReach)
	part := &problem{
		one: p.one[from:to], tau: p.tau[from:to], y: p.y[from:to],
		first: p.first + float64(from)*p.dt, dt: p.dt, width: p.width, fitWidth: p.fitWidth,
		low: p.low, high: p.high,
	}
	part.high[lnOmega] += math.Log(3)
	part.prepare()
	return part
}

// aliasBetter tells whether the alias explains the samples better than what
// was found by more than noise can do.
func (q *quality) aliasBetter(c covariance) bool {
	variance := c.sigma * c.sigma / (q.scale * q.scale)
	return q.aliased && q.alias.theta[lnZeta] > math.Log(leastDamping) && q.at.cost-q.alias.at.cost > 16*variance
}

// aliasKnown tells whether the alias explains the samples as well, has a
// damping that a line can have, and so few samples a period are not rare.
func (q *quality) aliasKnown(c covariance) bool {
	variance := c.sigma * c.sigma / (q.scale * q.scale)
	return q.aliased && q.alias.theta[lnZeta] > math.Log(aliasDamping) && q.alias.at.cost-q.at.cost < 16*variance &&
		math.Exp(q.theta[lnOmega])/(2*math.Pi)*aliasComfort > q.rate
}

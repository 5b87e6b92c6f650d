package step

import (
	"fmt"
	"math"
	"slices"
)

// Limits of what can be said (facts of the project, measured on simulations).
const (
	samplesNeeded     = 4    // a period
	samplesComfort    = 5    // a period; between the two the result is reserved
	samplesOverdamped = 10   // a period, when nothing oscillates
	widestEdge        = 0.35 // edge width x fn
)

// judge turns a fit into a Step: uncertainties, reasons and reservations. It
// reports false when what was fitted is no step at all. Only with name are
// other models fitted to say in which way this one is wrong.
func (a *analysis) judge(f fitted, name bool) (Step, bool) {
	p := f.problem
	s := Step{From: f.from, To: f.to, EdgeWidth: f.width()}
	height := f.scale * f.beta[response]
	n := float64(f.to - f.from)
	s.Height = height
	s.Drift = f.scale * f.beta[1] * 2 / (n - 1) * a.trace.Rate
	at, middle := float64(f.origin)*a.dt, f.theta[delay]
	if !p.measured {
		at += f.theta[delay]
		middle += a.readout.lag()
	} else {
		at += f.appliedMiddle
		s.Delay = f.behind()
		middle = f.appliedMiddle + s.Delay
		if a.settings.AppliedUnfiltered && a.readout != nil {
			s.Delay -= a.readout.delay
		}
	}
	s.At = a.trace.Start + at
	if !p.measured && a.readout != nil {
		s.At -= a.readout.delay
	}
	s.Baseline = f.base + f.scale*(f.beta[0]+f.beta[1]*(2*(at*a.trace.Rate-float64(f.from))/(n-1)-1))
	j := f.jacobian()
	s.Residuals = f.residuals(j)
	s.Fitted = make([]float64, len(s.Residuals))
	for i := range s.Residuals {
		v := a.y[f.from+i]
		model := v - s.Residuals[i]*f.scale
		if slices.Contains(f.spikes, i) {
			model = f.base + f.scale*f.problem.y[i]
		}
		s.Residuals[i] = v - model
		s.Fitted[i] = a.trace.Pressure[f.from+i] - s.Residuals[i]
	}
	s.Noise = lineScatter(a.y[f.from:f.pre])
	var through passed
	if p.measured && p.applied != nil {
		through = f.passThrough(j, a.trace.Applied)
	}
	c := sandwich(j, f.withoutSpikes(s.Residuals), f.scale, through)
	s.DegreesOfFreedom, s.Autocorrelation = c.freedom, c.correlation
	q := quality{fitted: f, step: &s, trace: a.y, quantum: a.quantum, rate: a.trace.Rate}
	if !q.isStep() {
		return s, false
	}
	fn := math.Exp(f.theta[lnOmega]+f.course.log) / (2 * math.Pi)
	zeta := math.Exp(f.theta[lnZeta] + f.course.zeta)
	uLog, uZeta := c.deviation[linear+lnOmega], zeta*c.deviation[linear+lnZeta]
	if p.measured {
		own := uLog * uZeta
		uLog, uZeta = math.Hypot(uLog, f.course.uLog), math.Hypot(uZeta, zeta*f.course.uZeta)
		if own > 0 {
			c.together *= own / (uLog * uZeta)
		}
	}
	add := func(code string) { s.Reasons = append(s.Reasons, code) }
	if q.clipped() {
		add(Clipped)
	}
	rate := a.trace.Rate
	slowly := f.rival && q.rivals(fn, c) || q.aliasBetter(c)
	switch {
	case fn*samplesNeeded > rate, zeta > 1+2*uZeta && fn*samplesOverdamped*math.Exp(-3*uLog) > rate, slowly:
		add(SamplingTooSlow)
	case q.aliasKnown(c):
		s.reserve(SamplingSlow, fmt.Sprintf("at %.3g samples a period a line of %.3g Hz and damping ratio %.2g would leave the same samples", rate/fn, math.Exp(f.alias.theta[lnOmega])/(2*math.Pi), math.Exp(f.alias.theta[lnZeta])))
	case fn*samplesComfort*math.Exp(-2*uLog) > rate:
		s.reserve(SamplingSlow, fmt.Sprintf("%.3g samples a period of the natural frequency, fewer than %d", rate/fn, samplesComfort))
	}
	s.trial = q.try(j, c, middle, fn, zeta, name, a.settings)
	s.Edge = s.trial.edge
	bound := a.settings.EdgeTolerance == 0
	if !p.measured && f.width()*fn > widestEdge || bound && math.Abs(s.Edge.Log) > largestUncertainty {
		add(EdgeTooSlow)
	}
	// With less than one time constant of answer the uncertainty is not to be
	// trusted either.
	tau := settling(2*math.Pi*fn, zeta)
	answer := float64(f.to-f.post) * a.dt
	if !(uLog <= largestUncertainty) || answer < tau {
		switch short := answer < 4*tau || float64(f.pre-f.from)*a.dt < 0.25/fn; {
		case short && f.to < len(a.y):
			add(Overlapping)
		case short:
			add(Truncated)
		default:
			add(UncertaintyTooLarge)
		}
	}
	q.sentence(s.trial, a.settings.ReadoutStated || len(a.settings.Readout) > 0)
	q.reserve(fn, zeta)
	if p.fitWidth {
		s.reserve(EdgeNotStated, "the edge of the step was neither stated nor measured; its width was fitted, its shape is not known")
	}
	if len(s.Reasons) > 0 {
		return s, true
	}
	t := studentT(c.freedom)
	s.Determined = true
	s.Frequency = logEstimate(math.Log(fn), uLog, t)
	s.Damping = Estimate{zeta, uZeta, math.Max(0, zeta-t*uZeta), zeta + t*uZeta}
	if bound {
		s.bound = true
		s.Frequency, s.Damping = s.Frequency.widen(true, s.Edge.Log), s.Damping.widen(false, s.Edge.Damping)
	}
	s.Correlation = c.together
	return s, true
}

func (s *Step) reserve(code, text string) {
	s.Reservations = append(s.Reservations, Reservation{code, text})
}

// doubted tells whether the model was found wrong.
func (s *Step) doubted() bool {
	return s.has(Misfit) || s.has(Bounced) || s.has(Overlapping) || s.has(Lag) || s.has(SecondMode)
}

func (s *Step) has(code string) bool {
	return slices.ContainsFunc(s.Reservations, func(r Reservation) bool { return r.Code == code })
}

// jacobian returns the columns of 1, drift, g and A dg/dtheta at the
// solution, in the scaled unit.
func (f *fitted) jacobian() [][]float64 {
	p := f.problem
	n := len(p.y)
	j := make([][]float64, linear+p.nonlinear)
	j[0], j[1] = p.one, p.tau
	for i := response; i < len(j); i++ {
		j[i] = make([]float64, n)
	}
	p.begin(&f.theta)
	for start := 0; start < n; start += blockSize {
		k := min(blockSize, n-start)
		if !p.fill(&f.theta, start, k) {
			continue
		}
		copy(j[response][start:], p.g[:k])
		for i := range p.nonlinear {
			for m := range k {
				j[linear+i][start+m] = f.beta[response] * p.d[i][m]
			}
		}
	}
	return j
}

func (f *fitted) residuals(j [][]float64) []float64 {
	r := make([]float64, len(f.problem.y))
	for i, y := range f.problem.y {
		r[i] = y - f.beta[0] - f.beta[1]*j[1][i] - f.beta[response]*j[response][i]
	}
	return r
}

// withoutSpikes is r with the samples left out at nothing.
func (f *fitted) withoutSpikes(r []float64) []float64 {
	if len(f.spikes) == 0 {
		return r
	}
	r = slices.Clone(r)
	for _, i := range f.spikes {
		r[i] = 0
	}
	return r
}

// covariance holds the standard deviations of the parameters, in the order
// of the jacobian, in the scaled unit.
type covariance struct {
	deviation   [most]float64
	together    float64 // correlation of ln w and ln zeta
	sigma       float64 // of the residuals, unit of the trace
	correlation float64 // from sample to sample
	freedom     float64
}

// sandwich estimates the covariance of the parameters under noise that
// follows x[i] = phi x[i-1] + white:
//
//	cov = s^2 (J'J)^-1 (J'R J)(J'J)^-1,  R[i][k] = phi^|i-k|
//	s^2 = r'r/(n - tr((J'J)^-1 J'R J))
//
// phi is the lag-one correlation of the residuals, corrected for what the
// fit took out of it (the same trace over n) and not below 0. Degrees of
// freedom of s: n (1 - phi^2)/(1 + phi^2) less the number of parameters.
// Noise of a measured applied pressure, passed on by the line, is added.
// Source: generalised least squares; correction by hand.
func sandwich(j [][]float64, residuals []float64, scale float64, through passed) covariance {
	n, size := len(residuals), len(j)
	var c covariance
	var gram, inverse [most][most]float64
	var unit [most]float64
	for i := range size {
		for k := range i + 1 {
			gram[i][k] = dot(j[i], j[k])
		}
		if unit[i] = math.Sqrt(gram[i][i]); unit[i] == 0 {
			unit[i] = 1
		}
	}
	for i := range size {
		c.deviation[i] = math.Inf(1)
		for k := range i + 1 {
			gram[i][k] /= unit[i] * unit[k]
		}
	}
	c.freedom = 1
	if !cholesky(&gram, size) {
		return c
	}
	for k := range size {
		var e [most]float64
		e[k] = 1
		substitute(&gram, &e, size)
		for i := range size {
			inverse[i][k] = e[i]
		}
	}
	var sum, lag float64
	for i, r := range residuals {
		sum += r * r
		if i > 0 {
			lag += r * residuals[i-1]
		}
	}
	raw := 0.0
	if sum > 0 {
		raw = lag / sum
	}
	var meat [most][most]float64
	phi, taken := 0.0, float64(size)
	for range 3 {
		share := math.Min(taken/float64(n), 0.5)
		phi = math.Min(math.Max(raw+share*(1-raw), 0), 0.99)
		meat = correlated(j, unit, phi)
		taken = 0
		for i := range size {
			for k := range size {
				taken += inverse[i][k] * meat[k][i]
			}
		}
		if phi == 0 {
			break
		}
	}
	c.correlation = phi
	c.freedom = math.Max(1, float64(n)*(1-phi*phi)/(1+phi*phi)-float64(size))
	variance := sum / math.Max(float64(n)-taken, 1)
	// Rounding keeps even a perfect trace from being known exactly.
	c.sigma = math.Max(math.Sqrt(variance), 1e-9*math.Abs(scale))
	own := math.Max(c.sigma*c.sigma-through.variance*scale*scale, 0)
	product := func(i, l int) float64 {
		v := 0.0
		for k := range size {
			for m := range size {
				middle := own*meat[k][m] + scale*scale*through.meat[k][m]/unit[k]/unit[m]
				v += inverse[i][k] * middle * inverse[m][l]
			}
		}
		return v
	}
	for i := range size {
		c.deviation[i] = math.Sqrt(math.Max(product(i, i), 0)) / math.Abs(scale) / unit[i]
	}
	const w, z = linear + lnOmega, linear + lnZeta
	if d := math.Sqrt(product(w, w) * product(z, z)); d > 0 {
		c.together = math.Max(-1, math.Min(1, product(w, z)/d))
	}
	return c
}

// correlated is J'R J with the columns divided by unit, by one recursion:
// the sum over earlier samples of phi^lag J is carried along.
func correlated(j [][]float64, unit [most]float64, phi float64) [most][most]float64 {
	var m [most][most]float64
	size := len(j)
	var carried, row [most]float64
	for i := range j[0] {
		for k := range size {
			row[k] = j[k][i] / unit[k]
			carried[k] *= phi
		}
		for k := range size {
			for l := range k + 1 {
				m[k][l] += row[k]*row[l] + row[k]*carried[l] + carried[k]*row[l]
			}
		}
		for k := range size {
			carried[k] += row[k]
		}
	}
	for k := range size {
		for l := range k {
			m[l][k] = m[k][l]
		}
	}
	return m
}

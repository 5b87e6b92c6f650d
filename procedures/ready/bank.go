package ready

import "math"

// Columns of a model: a level, what relaxes, what leaks, how what relaxes
// changes with its time constant, and a second, slower part of it.
const (
	level = iota
	relaxing
	leaking
	turning
	slower
	columns
)

// spacing is the distance of neighbouring time constants, as a logarithm.
const spacing = 0.05

// bank is a row of linear models of a pressure, one for each of a row of time
// constants tau:
//
//	p(t) = a + A e + d (t/tau) e + s exp(-t/(slow tau)) - rate c(t),  e = exp(-t/tau)
//
// c(t) is t, or what the leak's flow has let out by then. The column with d
// bridges the distance to the next tau: d = A x the logarithm of the true tau
// over this one. Readings are added one at a time at a cost that does not grow;
// what they say together is the models' average, each weighted by its evidence.
type bank struct {
	size    int     // columns of the largest model
	slow    float64 // how much slower the second part relaxes
	taus    []float64
	moments []moments
	n       int
	origin  float64 // of time
	zero    float64 // of pressure
	kept    []kept3
}

// moments are the sums of products of the columns, and of columns and readings.
type moments struct {
	xx [columns][columns]float64 // lower half
	xy [columns]float64
}

// kept3 is a reading as it is kept for its residual.
type kept3 struct{ t, c, p float64 }

// keptReadings is how many readings the noise is judged by at least.
const keptReadings = 1024

// beliefs are what is held for possible before the first reading: standard
// deviations about zero, in pressure and pressure per second, and the
// probability of a second part.
type beliefs struct{ amplitude, rate, twoParts float64 }

// newBank is a bank with every time constant from the shortest to the longest;
// a second part, slow times slower, unless slow is 0.
func newBank(shortest, longest, slow float64) *bank {
	b := &bank{size: slower, slow: slow}
	if slow > 0 {
		b.size = columns
	}
	n := int(math.Ceil(math.Log(longest/shortest)/spacing)) + 1
	for i := range n {
		b.taus = append(b.taus, shortest*math.Exp(spacing*float64(i)))
	}
	b.moments = make([]moments, n)
	return b
}

// row5 is a model's columns at a time since the origin, the last only if slow
// is not 0.
func row5(slow, tau, t, c float64) [columns]float64 {
	e := math.Exp(-t / tau)
	x := [columns]float64{level: 1, relaxing: e, leaking: -c, turning: t / tau * e}
	if slow > 0 {
		x[slower] = math.Exp(-t / (slow * tau))
	}
	return x
}

// add takes a reading: its time, what has leaked by then for a rate of 1 (or
// the time since the first reading, with since), and the pressure.
func (b *bank) add(t, c, p float64) {
	if b.n == 0 {
		b.origin, b.zero = t, p
	}
	t, p = t-b.origin, p-b.zero
	for i := range b.taus {
		x, m := row5(b.slow, b.taus[i], t, c), &b.moments[i]
		for j := range b.size {
			for k := range j + 1 {
				m.xx[j][k] += x[j] * x[k]
			}
			m.xy[j] += x[j] * p
		}
	}
	b.n++
	if len(b.kept) == 2*keptReadings {
		b.kept = b.kept[:copy(b.kept, b.kept[keptReadings:])]
	}
	b.kept = append(b.kept, kept3{t, c, p})
}

// model is what one of the bank says.
type model struct {
	index, size int     // of the time constant; columns that it has
	tau, slow   float64 // s; of its second part, times tau
	log         float64 // logarithm of its evidence
	weight      float64 // its share
	mean        [columns]float64
	cov         [columns][columns]float64
}

// negligible is how far below the best an evidence is left out: e^-25.
const negligible = 25

// models works out what each model says when a reading has a variance, with
// and without a second part, and weighs them by their evidence: with X the
// columns, y the readings, P the prior's precisions and L = X'X/v + P,
//
//	ln evidence = y'X L^-1 X'y / (2 v^2) - ln|L|/2 + ln|P|/2 + const.
//
// amplitude is what relaxes by the last look, for the prior of the turning
// column: its time constant lies anywhere within one spacing. Source: Bayesian
// linear regression with known variance, textbook.
func (b *bank) models(into []model, variance, amplitude float64, known beliefs) []model {
	into = into[:0]
	best := math.Inf(-1)
	prior := known.precisions(amplitude)
	for i, tau := range b.taus {
		for size := slower; size <= b.size; size++ {
			m := model{index: i, size: size, tau: tau, slow: b.slow, log: math.Log(1 - known.twoParts)}
			if size == columns {
				m.log = math.Log(known.twoParts)
			}
			var l [columns][columns]float64
			if math.IsInf(m.log, -1) || !b.factor(&m, &l, variance, &prior) {
				continue
			}
			best = math.Max(best, m.log)
			into = append(into, m)
		}
	}
	few := into[:0]
	for _, m := range into {
		if m.log >= best-negligible {
			b.solve(&m, variance, &prior)
			few = append(few, m)
		}
	}
	weigh(few)
	return few
}

// weigh shares out the weights by evidence.
func weigh(models []model) {
	best, total := math.Inf(-1), 0.0
	for i := range models {
		best = math.Max(best, models[i].log)
	}
	for i := range models {
		models[i].weight = math.Exp(models[i].log - best)
		total += models[i].weight
	}
	for i := range models {
		models[i].weight /= total
	}
}

// precisions are those of the prior: the level is free, the second part a
// fifth of what may relax.
func (k beliefs) precisions(amplitude float64) [columns]float64 {
	a := 1 / (k.amplitude * k.amplitude)
	turn := math.Max(amplitude, k.amplitude/25) * spacing / math.Sqrt(12)
	return [columns]float64{level: 1e-8 * a, relaxing: a, leaking: 1 / (k.rate * k.rate), turning: 1 / (turn * turn), slower: 25 * a}
}

// factor puts the Cholesky factor of a model's precision into l and adds its
// log evidence; false for a matrix that is not positive definite.
func (b *bank) factor(m *model, l *[columns][columns]float64, variance float64, prior *[columns]float64) bool {
	sums := &b.moments[m.index]
	var y [columns]float64
	shrunk := 1.0 // product of prior precision over posterior pivots
	for i := range m.size {
		for j := range i + 1 {
			s := sums.xx[i][j] / variance
			if i == j {
				s += prior[i]
			}
			for k := range j {
				s -= l[i][k] * l[j][k]
			}
			if i > j {
				l[i][j] = s / l[j][j]
				continue
			}
			if !(s > 0) {
				return false
			}
			l[i][i] = math.Sqrt(s)
		}
		s := sums.xy[i] / variance
		for k := range i {
			s -= l[i][k] * y[k]
		}
		y[i] = s / l[i][i]
		m.log += y[i] * y[i] / 2
		shrunk *= prior[i] / (l[i][i] * l[i][i])
	}
	m.log += math.Log(shrunk) / 2
	return true
}

// solve works out a model's coefficients and their covariance.
func (b *bank) solve(m *model, variance float64, prior *[columns]float64) {
	var l [columns][columns]float64
	again := *m
	b.factor(&again, &l, variance, prior)
	for c := range m.size {
		var y [columns]float64
		for i := c; i < m.size; i++ {
			s := 0.0
			if i == c {
				s = 1
			}
			for k := c; k < i; k++ {
				s -= l[i][k] * y[k]
			}
			y[i] = s / l[i][i]
		}
		for i := m.size - 1; i >= 0; i-- {
			s := y[i]
			for k := i + 1; k < m.size; k++ {
				s -= l[k][i] * m.cov[k][c]
			}
			m.cov[i][c] = s / l[i][i]
		}
	}
	for i := range m.size {
		for k := range m.size {
			m.mean[i] += m.cov[i][k] * b.moments[m.index].xy[k] / variance
		}
	}
}

// closest is the model with the largest evidence if noise were white with a
// variance, its coefficients worked out.
func (b *bank) closest(variance, amplitude float64, known beliefs) model {
	prior := known.precisions(amplitude)
	best := model{log: math.Inf(-1)}
	for i, tau := range b.taus {
		m := model{index: i, size: b.size, tau: tau, slow: b.slow}
		var l [columns][columns]float64
		if b.factor(&m, &l, variance, &prior) && m.log > best.log {
			best = m
		}
	}
	if best.size > 0 {
		b.solve(&best, variance, &prior)
	}
	return best
}

// likeliest is the model with the largest weight.
func likeliest(models []model) *model {
	best := &models[0]
	for i := range models {
		if models[i].weight > best.weight {
			best = &models[i]
		}
	}
	return best
}

// of returns mean and variance of a combination of a model's coefficients.
func (m *model) of(x *[columns]float64) (mean, variance float64) {
	for p := range columns {
		if x[p] == 0 {
			continue
		}
		mean += x[p] * m.mean[p]
		for q := range columns {
			variance += x[p] * x[q] * m.cov[p][q]
		}
	}
	return mean, variance
}

// restless is the variance that white noise would need to spoil a mean of
// neighbouring readings as much as theirs does, by what the readings kept leave
// about a model: their variance times what correlation adds, as in Watch.
// floor is added: the least that is believed.
func (b *bank) restless(m *model, residuals []float64, floor float64) (float64, []float64) {
	residuals = residuals[:0]
	for _, r := range b.kept {
		x := row5(b.slow, m.tau, r.t, r.c)
		e := r.p
		for k := range columns {
			e -= x[k] * m.mean[k]
		}
		residuals = append(residuals, e)
	}
	v, more := scatter(residuals, columns-1)
	return v*more + floor, residuals
}

// scatter is the variance of residuals of a fit with so many parameters, and by
// how much more than white noise of it makes a mean scatter: by the first
// autocorrelation and by the means of blocks, as sums.noise has it.
func scatter(e []float64, parameters float64) (v, more float64) {
	n := float64(len(e))
	var rss, jumps float64
	for i, x := range e {
		rss += x * x
		if i > 0 {
			jumps += (x - e[i-1]) * (x - e[i-1])
		}
	}
	if n <= parameters+2 || rss == 0 {
		return 0, 1
	}
	v = rss / (n - parameters)
	white := v
	for range 4 {
		more = longer(1 - jumps/(n-1)/(2*v))
		v = rss / math.Max(n-parameters*more, n/4)
	}
	for size := 4; size*6 <= len(e); size *= 2 {
		count, squares := 0, 0.0
		for to := len(e); to >= size; to -= size {
			sum := 0.0
			for _, x := range e[to-size : to] {
				sum += x
			}
			squares += sum * sum / float64(size)
			count++
		}
		ratio := squares / (float64(count) - parameters/2) / white
		if ratio > chiSquare95(float64(count)-parameters/2) {
			more = math.Max(more, ratio*white/v)
		}
	}
	return v, more
}

// roughness is the variance of white noise by second differences, for a first
// look: E (p_{i-1} - 2 p_i + p_{i+1})^2 = 6 v.
func (b *bank) roughness() float64 {
	var sum float64
	n := len(b.kept)
	for i := 2; i < n; i++ {
		d := b.kept[i].p - 2*b.kept[i-1].p + b.kept[i-2].p
		sum += d * d / 6
	}
	return sum / math.Max(float64(n-2), 1)
}

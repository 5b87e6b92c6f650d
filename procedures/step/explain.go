package step

import "math"

// Where the residuals leave no doubt that the model is wrong, a few others
// are fitted to block means, to say in which way: the same line after two
// steps, after a valve that shut again for a while, behind a lag, or with a
// second mode beside it. They name the trouble; no figure is taken from them,
// for the next trouble may be another.

// story is one such model as a least-squares problem: baseline, drift,
// height and one or two further columns are linear; ln w, ln zeta, t0 and one
// or two more are searched, with derivatives by differences.
type story struct {
	kind   suspicion
	blocks *tribunal
	times  []float64 // of the blocks, s
	y      []float64
	width  float64 // of the edge, s
	size   int     // nonlinear parameters
	linear int

	rest, moved []float64
	columns     [5][]float64
	beta        [5]float64
}

// newStory takes the blocks of a trial; y is the trace in the scaled unit.
func newStory(kind suspicion, t *tribunal, times, y []float64, width float64) *story {
	s := &story{kind: kind, blocks: t, times: times, y: y, width: width, size: 4, linear: 4}
	switch kind {
	case struck:
		s.size = 5
	case second:
		s.size, s.linear = 5, 5
	case lagged:
		s.linear = 3
	}
	n := len(y)
	s.rest, s.moved = make([]float64, n), make([]float64, n)
	s.columns[0], s.columns[1] = t.columns[0], t.columns[1]
	for i := response; i < s.linear; i++ {
		s.columns[i] = make([]float64, n)
	}
	return s
}

// residuals leaves y less the best linear combination of the columns in out.
func (s *story) residuals(theta *[most]float64, out []float64) (cost float64, ok bool) {
	w, zeta := math.Exp(theta[lnOmega]), math.Exp(theta[lnZeta])
	if !(w > 0 && zeta > 1e-3 && zeta < 30) || math.IsInf(w, 1) {
		return 0, false
	}
	first, length := math.Exp(theta[3]), math.Exp(theta[4])
	if s.kind != second && !(first > 0 && first < 1e9) {
		return 0, false
	}
	for k, at := range s.times {
		since, root := at-theta[delay], s.blocks.root[k]
		g := Ramp(w*since, w*s.width, zeta)
		switch s.kind {
		case stepped:
			s.columns[3][k] = root * Ramp(w*(since-first), w*s.width, zeta)
		case struck:
			s.columns[3][k] = root * (Ramp(w*(since-first), w*s.width, zeta) - Ramp(w*(since-first-length), w*s.width, zeta))
		case lagged:
			if x := w * since; x > 0 {
				c, sk := kernel(x, zeta)
				g = delayed(x, zeta, w*first, c, sk)
			} else {
				g = 0
			}
		case second:
			s.columns[3][k], s.columns[4][k] = 0, 0
			if since > 0 {
				// theta[3]: ln of the second frequency, theta[4]: of its damping ratio.
				e := math.Exp(-length*first*since) * root
				sin, cos := math.Sincos(first * since)
				s.columns[3][k], s.columns[4][k] = e*cos, e*sin
			}
		}
		s.columns[2][k] = root * g
	}
	return s.project(out)
}

// project solves for the linear parameters.
func (s *story) project(out []float64) (cost float64, ok bool) {
	var gram [most][most]float64
	var b [most]float64
	var unit [5]float64
	for i := range s.linear {
		if unit[i] = math.Sqrt(dot(s.columns[i], s.columns[i])); !(unit[i] > 0) {
			return 0, false
		}
		for k := range i + 1 {
			gram[i][k] = dot(s.columns[i], s.columns[k]) / unit[i] / unit[k]
		}
		gram[i][i] += 1e-12
		b[i] = dot(s.columns[i], s.y) / unit[i]
	}
	if !cholesky(&gram, s.linear) {
		return 0, false
	}
	substitute(&gram, &b, s.linear)
	copy(out, s.y)
	for i := range s.linear {
		s.beta[i] = b[i] / unit[i]
		for k, v := range s.columns[i] {
			out[k] -= s.beta[i] * v
		}
	}
	return dot(out, out), true
}

// normalAt makes a story an objective of the search.
func (s *story) normalAt(theta *[most]float64, n *normal) {
	n.size = s.size
	n.cost = math.Inf(1)
	cost, ok := s.residuals(theta, s.rest)
	if !ok {
		return
	}
	jacobian := make([][]float64, s.size)
	for i := range jacobian {
		h := 1e-5
		if i == delay {
			h = 1e-5 / math.Exp(theta[lnOmega])
		}
		next := *theta
		next[i] += h
		if _, ok := s.residuals(&next, s.moved); !ok {
			return
		}
		jacobian[i] = make([]float64, len(s.rest))
		for k := range s.rest {
			jacobian[i][k] = (s.moved[k] - s.rest[k]) / h
		}
	}
	for i := range s.size {
		n.gradient[i] = -dot(jacobian[i], s.rest)
		for k := range i + 1 {
			n.hessian[i][k] = dot(jacobian[i], jacobian[k])
			n.hessian[k][i] = n.hessian[i][k]
		}
	}
	n.cost, n.rounding = cost, 0
}

// explanation is the story that explains most of what the model leaves.
type explanation struct {
	kind          suspicion
	shift         float64 // of ln fn
	amount        float64 // height of the further step, pulse or mode as a part of the step
	after, length float64 // s after the step and how long; of a lag its time constant, of a mode its frequency
}

// explain fits the stories, each from the best suspects of its kind. One is
// told when it takes away at least seven tenths of what the strongest suspect
// shows, and leaves at most three tenths of what lies beyond the noise (or as
// much as the noise itself may vary).
func (f *fitted) explain(t *tribunal, middle float64) (explanation, bool) {
	w := math.Exp(f.theta[lnOmega])
	times := make([]float64, len(t.x))
	for k, x := range t.x {
		times[k] = middle + x/w
	}
	y := t.of(f.problem.y)
	variance := t.sigma * t.sigma
	noise := variance * float64(len(y))
	simple := dot(t.rest, t.rest)
	var best explanation
	lowest, left := math.Inf(1), 0.0
	near := 2 * variance * math.Sqrt(2*float64(len(y)))
	for _, kind := range []suspicion{lagged, stepped, second, struck} {
		if left-noise < near && !math.IsInf(lowest, 1) {
			break // the simpler story says it all
		}
		s := newStory(kind, t, times, y, f.width())
		for _, from := range t.leads(kind) {
			theta := f.theta
			theta[delay] = middle
			theta[lnOmega] += math.Max(-0.5, math.Min(0.5, from.shift))
			theta[3] = math.Log(from.place / w)
			theta[4] = theta[3] - math.Ln2
			if kind == second {
				theta[3], theta[4] = math.Log(from.place*w), math.Log(0.1)
			}
			var n normal
			search{floor: -1, iterations: 15, tolerance: 1e-3}.minimise(s, &theta, &n)
			score := n.cost + 8*variance*float64(s.size+s.linear)
			if !(score < lowest) {
				continue
			}
			if _, ok := s.residuals(&theta, s.rest); ok {
				lowest, left = score, n.cost
				best = s.tell(&theta, theta[lnOmega]-f.theta[lnOmega])
			}
		}
	}
	strongest := 0.0
	for _, s := range t.all {
		strongest = math.Max(strongest, s.z*s.z*variance)
	}
	slack := math.Max(0.3*(simple-noise), 4*variance*math.Sqrt(2*float64(len(y))))
	return best, simple-left > 0.7*strongest && left-noise < slack
}

// tell puts the parameters of a story into words' numbers.
func (s *story) tell(theta *[most]float64, shift float64) explanation {
	e := explanation{kind: s.kind, shift: shift, after: math.Exp(theta[3])}
	switch s.kind {
	case stepped:
		e.amount = s.beta[3] / s.beta[2]
	case struck:
		e.amount, e.length = s.beta[3]/s.beta[2], math.Exp(theta[4])
	case second:
		e.amount = math.Hypot(s.beta[3], s.beta[4]) / s.beta[2]
		e.after /= 2 * math.Pi
	}
	return e
}

// leads are the two strongest suspects of a kind, by their size of z.
func (t *tribunal) leads(kind suspicion) []suspect {
	var first, next suspect
	for _, s := range t.all {
		switch {
		case s.kind != kind:
		case math.Abs(s.z) > math.Abs(first.z):
			first, next = s, first
		case math.Abs(s.z) > math.Abs(next.z):
			next = s
		}
	}
	if next.z == 0 || kind == lagged {
		return []suspect{first}
	}
	return []suspect{first, next}
}

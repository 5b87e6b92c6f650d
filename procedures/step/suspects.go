package step

import "math"

// A suspect is something the model leaves out that a bench can still do: a
// lag, a second step soon after the first, a valve that bounces, a second
// mode, a level that creeps. Each would add a known shape to the trace. The
// residuals are asked for each shape, less what the model itself can take up
// of it: how surely it is there, and how far it would move the figures.
//
// Source: score tests (Rao 1948, from memory) under noise correlated as
// phi^lag; the list of suspects is the project's own.
type suspect struct {
	kind  suspicion
	place float64 // radians of fn after the step, or multiple of fn
	z     float64 // how many standard deviations of noise it stands out
	shift float64 // of ln fn, were it taken into the model as estimated
	slack float64 // standard uncertainty of that shift
	peak  float64 // of what it leaves unexplained, as a part of the step
}

type suspicion int

const (
	lagged    suspicion = iota // a first-order lag
	stepped                    // a further step
	struck                     // a short pulse: a valve that bounces
	second                     // a second mode
	creeping                   // a slow exponential
	suspected                  // their number
)

// blocks are the means of neighbouring samples, fine where the answer is
// fast, on which the suspects are tried: sums over each block divided by the
// root of its length.
type blocks struct {
	start, length []int
	columns       [][]float64 // of the model
	rest          []float64   // the residuals
}

// divide lays blocks over n samples: a 32nd of a period near post, a 16th
// while it rings, growing beyond.
func divide(n, post int, period, tau float64) (start, length []int) {
	fine := max(1, int(period/32))
	middling := max(1, int(period/16))
	for i := 0; i < n; {
		d := i - post
		l := fine
		switch {
		case d < -4*fine:
			l = max(fine, -d/8)
			l = min(l, -d-2*fine)
		case float64(d) < 12*tau:
			l = max(fine, min(middling, d/32))
		default:
			l = max(middling, d/32)
		}
		l = min(max(l, 1), n-i)
		start, length = append(start, i), append(length, l)
		i += l
	}
	return start, length
}

func (b *blocks) of(column []float64) []float64 {
	out := make([]float64, len(b.start))
	for k, from := range b.start {
		sum := 0.0
		for _, v := range column[from : from+b.length[k]] {
			sum += v
		}
		out[k] = sum / math.Sqrt(float64(b.length[k]))
	}
	return out
}

// correlatedSquare is d'R d for block means d of noise that is phi^lag from
// sample to sample: inside a block of length L the sum of phi^|i-k| over it,
// between blocks the product of two geometric sums.
func (b *blocks) correlatedSquare(d []float64, phi float64) float64 {
	if phi == 0 {
		return dot(d, d)
	}
	var sum, carried float64
	for k, v := range d {
		l := float64(b.length[k])
		decay := math.Pow(phi, l)
		tail := (1 - decay) / (1 - phi)
		inside := (l*(1+phi) - 2*phi*tail) / (1 - phi)
		v /= math.Sqrt(l)
		sum += v*v*inside + 2*v*tail*carried
		carried = carried*decay + v*phi*tail
	}
	return sum
}

// tribunal holds what every suspect is tried against.
type tribunal struct {
	blocks
	x          []float64 // radians of fn since the middle of the edge, of each block
	root       []float64 // of the block's length
	c, s       []float64 // the kernel there, 1 and 0 before
	zeta       float64
	sigma, phi float64 // of the noise, in the scaled unit
	gram       [most][most]float64
	unit       [most]float64
	shape      []float64
	all        []suspect
}

// tribunal prepares the trial. The residuals come in the scaled unit; middle
// is the time of the middle of the edge. It fails when the model's own
// columns cannot be told apart.
func (f *fitted) tribunal(j [][]float64, residuals []float64, middle, sigma, phi float64) (*tribunal, bool) {
	w, zeta := math.Exp(f.theta[lnOmega]), math.Exp(f.theta[lnZeta])
	t := &tribunal{zeta: zeta, sigma: sigma, phi: phi}
	rate := 1 / f.problem.dt
	t.start, t.length = divide(len(residuals), f.post-f.from, 2*math.Pi/w*rate, settling(w, zeta)*rate)
	for i, column := range j {
		t.columns = append(t.columns, t.of(column))
		t.unit[i] = math.Sqrt(dot(t.columns[i], t.columns[i]))
		if !(t.unit[i] > 0) {
			return nil, false
		}
		for k := range i + 1 {
			t.gram[i][k] = dot(t.columns[i], t.columns[k]) / t.unit[i] / t.unit[k]
		}
	}
	if !cholesky(&t.gram, len(j)) {
		return nil, false
	}
	n := len(t.start)
	t.rest = t.of(residuals)
	room := make([]float64, 5*n)
	t.x, t.root, t.c, t.s, t.shape = room[:n], room[n:2*n], room[2*n:3*n], room[3*n:4*n], room[4*n:]
	for k, from := range t.start {
		length := float64(t.length[k])
		t.x[k] = w * (f.problem.first + (float64(from)+(length-1)/2)*f.problem.dt - middle)
		t.root[k] = math.Sqrt(length)
		t.c[k] = 1
		if t.x[k] > 0 {
			t.c[k], t.s[k] = kernel(t.x[k], zeta)
		}
	}
	return t, true
}

// try asks the residuals for one shape, a function of the block that is
// nothing up to x = from. Edges are taken for ideal: a shape that is only
// nearly right is a fair question still, if a weaker one.
func (t *tribunal) try(kind suspicion, place, from float64, shape func(k int) float64) {
	d := t.shape
	whole := 0.0
	for k, x := range t.x {
		d[k] = 0
		if x > from {
			d[k] = shape(k) * t.root[k]
		}
		whole += d[k] * d[k]
	}
	taken := t.taken()
	for i := range t.columns {
		for k, v := range t.columns[i] {
			d[k] -= taken[i] * v
		}
	}
	left := dot(d, d)
	if !(left > 1e-8*whole) {
		return
	}
	peak := 0.0
	for k, v := range d {
		peak = math.Max(peak, math.Abs(v)/t.root[k])
	}
	score, noise := dot(d, t.rest), t.sigma*math.Sqrt(t.correlatedSquare(d, t.phi))
	t.all = append(t.all, suspect{
		kind: kind, place: place, z: score / noise,
		shift: -taken[linear+lnOmega] * score / left,
		slack: math.Abs(taken[linear+lnOmega]) * noise / left,
		peak:  peak * math.Abs(score) / left,
	})
}

// hear tries all suspects, up to 60 radians of fn after the step.
func (t *tribunal) hear() []suspect {
	zeta := t.zeta
	q2 := zeta*zeta - 1
	reach := t.x[len(t.x)-1]
	for _, kappa := range []float64{0.15, 0.5, 1.2} {
		t.try(lagged, kappa, 0, func(k int) float64 {
			return delayed(t.x[k], zeta, kappa, t.c[k], t.s[k]) - (1 - t.c[k] - zeta*t.s[k])
		})
	}
	for delta := 0.3; delta < 0.7*reach && delta < 60 && 2*zeta*delta < 300; delta *= 1.45 {
		// The addition theorem, backwards.
		cd, sd := kernel(-delta, zeta)
		t.try(struck, delta, delta, func(k int) float64 { return t.s[k]*cd + t.c[k]*sd })
		t.try(stepped, delta, delta, func(k int) float64 {
			return 1 - (t.c[k]*cd + q2*t.s[k]*sd) - zeta*(t.s[k]*cd+t.c[k]*sd)
		})
	}
	for _, ratio := range []float64{1.5, 2.1, 2.9, 4, 5.6} {
		t.try(second, ratio, 0, func(k int) float64 { return math.Exp(-0.1*ratio*t.x[k]) * math.Cos(ratio*t.x[k]) })
		t.try(second, ratio, 0, func(k int) float64 { return math.Exp(-0.1*ratio*t.x[k]) * math.Sin(ratio*t.x[k]) })
	}
	for kappa := 4.0; kappa < reach/2 && kappa < 100; kappa *= 3 {
		t.try(creeping, kappa, 0, func(k int) float64 { return -math.Expm1(-t.x[k] / kappa) })
	}
	return t.all
}

// delayed is the answer to an ideal step behind a first-order lag of kappa
// radians of fn, from x > 0 and its kernel: 1 - a C - b s - (1-a) exp(-x/kappa),
// which solves kappa o' + o = g. Where the lag meets a pole of the line a
// neighbour stands in, as good for a suspect.
func delayed(x, zeta, kappa, c, s float64) float64 {
	d := 1 - 2*kappa*zeta + kappa*kappa
	if math.Abs(d) < 1e-3 {
		kappa *= 1.07
		d = 1 - 2*kappa*zeta + kappa*kappa
	}
	return 1 - (1-2*kappa*zeta)/d*c - (zeta-kappa*(2*zeta*zeta-1))/d*s - kappa*kappa/d*math.Exp(-x/kappa)
}

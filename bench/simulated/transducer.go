package simulated

import (
	"math"
	"math/rand/v2"
	"sync/atomic"
	"time"

	"kymobench/bench/line"
)

// oscillator is the fluid in the line: y" + 2 zeta w y' + w^2 y = w^2 u, with
// u the pressure where the line begins and y that at the diaphragm, mmHg.
type oscillator struct {
	w, zeta  float64 // rad/s, 1
	y, slope float64 // mmHg, mmHg/s
	usual    free    // over the usual time step
	step     float64 // s, of usual
}

// free holds what an undriven oscillator does over a time h, in x = w h:
//
//	y(h)    = y (c + zeta s) + (y'/w) s
//	y'(h)/w = -y s + (y'/w) (c - zeta s)
//
// with c = exp(-zeta x) cos(x r), s = exp(-zeta x) sin(x r)/r, r = sqrt(1 -
// zeta^2); hyperbolic above zeta = 1. Source: textbook solution.
type free struct{ h, c, s float64 }

func (o *oscillator) free(h float64) free {
	x := o.w * h
	e := math.Exp(-o.zeta * x)
	r2 := 1 - o.zeta*o.zeta
	switch r := math.Sqrt(math.Abs(r2)); {
	case r*x < 1e-5: // cos and sin/r to rounding
		return free{h, e * (1 - r2*x*x/2), e * x * (1 - r2*x*x/6)}
	case r2 > 0:
		return free{h, e * math.Cos(r*x), e * math.Sin(r*x) / r}
	default:
		return free{h, e * math.Cosh(r*x), e * math.Sinh(r*x) / r}
	}
}

// tune changes the line's figures; step is the usual time step.
func (o *oscillator) tune(fn, zeta, step float64) {
	o.w, o.zeta, o.step = 2*math.Pi*fn, zeta, step
	o.usual = o.free(step)
}

// drive goes on over h while u goes straight from u0 to u1; exact for that.
// The particular solution of a ramp with slope k is u - 2 zeta k/w.
func (o *oscillator) drive(u0, u1, h float64) {
	f := o.usual
	if h != o.step {
		f = o.free(h)
	}
	k := (u1 - u0) / h
	lag := 2 * o.zeta * k / o.w
	e, d := o.y-u0+lag, (o.slope-k)/o.w
	o.y = u1 - lag + e*(f.c+o.zeta*f.s) + d*f.s
	o.slope = k + o.w*(d*(f.c-o.zeta*f.s)-e*f.s)
}

// transducer is the UUT with its readout as seen on the wire: lines such as
// "+1500.02\r\n" in uV/V, sent by themselves. Samples are taken on the
// converter's own clock, and delivered in bursts as a USB adapter does.
type transducer struct {
	v      *volume
	d      drawn
	cursor cursor
	line   oscillator
	dia    *diaphragm
	noise  *rand.Rand
	put    func(out []byte, x float64) []byte // a sample on the wire

	applied *rand.Rand // the noise of the applied pressure

	period float64      // ns, the converter's true one
	number int64        // of the next sample
	last   line.Instant // the line's state is of this instant
	input  float64      // mmHg at the line's beginning, then
	burst  line.Instant // the next one

	flushes atomic.Int64 // asked for
	flushed int64        // done
}

// bubbleLeft is the share of a bubble that a flush leaves in the line.
const bubbleLeft = 0.15

// flush does what was asked for since the last release: the compliance of the
// bubble, which 1/fn^2 goes by, shrinks; fn x zeta stays.
func (u *transducer) flush() {
	for ; u.flushed < u.flushes.Load(); u.flushed++ {
		if u.d.dry == 0 {
			continue
		}
		product := u.d.fn * u.d.zeta
		dry := 1 / (u.d.dry * u.d.dry)
		u.d.fn = 1 / math.Sqrt(dry+bubbleLeft*(1/(u.d.fn*u.d.fn)-dry))
		u.d.zeta = product / u.d.fn
	}
}

func newTransducer(v *volume, m *diaphragm, d drawn, form string) *transducer {
	u := &transducer{
		v: v, d: d, cursor: cursor{v: v}, dia: m, noise: stream(d.seed, "converter noise"),
		period: float64(samplePeriod) * (1 + d.clock),
		burst:  line.Instant(d.burstPhase),
	}
	u.line.tune(d.fn, d.zeta, u.period/1e9)
	switch u.put = appendOutput; form {
	case "checked":
		u.put = appendChecked
	case "frames":
		u.applied = stream(d.seed, "applied noise")
		u.put = func(out []byte, x float64) []byte {
			return appendFrame(out, uint8(u.number), x, u.input+appliedNoise*u.applied.NormFloat64())
		}
	}
	return u
}

// Receive: the UUT listens to nobody.
func (u *transducer) Receive(at line.Instant, _ []byte) { u.v.advance(at) }

// Due names the next burst.
func (u *transducer) Due() (line.Instant, bool) { return u.burst, true }

// Emit returns the lines or frames of all samples converted since the last burst.
func (u *transducer) Emit(at line.Instant) []byte {
	u.v.advance(at)
	if at < u.burst {
		return nil
	}
	u.burst = u.burst.Add(burstEvery)
	until := at.Add(-conversion)
	out := make([]byte, 0, 20*lineLength)
	for {
		t := line.Instant(u.d.samplePhase) + line.Instant(float64(u.number)*u.period)
		if t > until {
			return out
		}
		out = u.put(out, u.sample(t))
		u.number++
	}
}

// sample is the converter's output at an instant, uV/V.
func (u *transducer) sample(t line.Instant) float64 {
	u.follow(t)
	age := poweredBefore + t.Seconds()
	y := u.dia.output(u.line.y+u.d.head) + u.d.warmUp*math.Exp(-age/600)
	y += u.d.noise * u.noise.NormFloat64()
	return (1+u.d.gain)*nominal*y + u.d.zero
}

// follow brings the line to an instant. Between two samples the pressure is
// taken for straight, but where one piece of it ends and another begins the
// step is cut: the valve's edge is exact.
func (u *transducer) follow(t line.Instant) {
	c := &u.cursor
	for c.index+1 < len(u.v.pieces) && u.v.pieces[c.index+1].from <= t {
		next := &u.v.pieces[c.index+1]
		u.to(next.from, next.p0)
		c.index++
		if next.fn != 0 {
			u.flush()
			u.line.tune(u.d.fn*next.fn, u.d.zeta*next.zeta, u.period/1e9)
		}
	}
	p := &u.v.pieces[c.index]
	if p.kind == falling {
		// The end of the edge is a corner inside a piece.
		if end := p.from.Add(time.Duration(u.d.edgeWidth * 1e9)); u.last < end && end < t {
			u.to(end, u.v.pressure(p, end.Sub(p.from).Seconds()))
		}
	}
	u.to(t, u.v.pressure(p, t.Sub(p.from).Seconds()))
}

func (u *transducer) to(t line.Instant, input float64) {
	if h := t.Sub(u.last); h > 0 {
		s := h.Seconds()
		if math.Abs(s-u.line.step) < 2e-9 {
			s = u.line.step // a sample's own rounding to nanoseconds
		}
		u.line.drive(u.input, input, s)
		u.last = t
	}
	u.input = input
}

const lineLength = 10

// appendOutput writes sign, four digits, point, two digits, CR, LF; what does
// not fit stands at the end of the scale, as a converter's does.
func appendOutput(out []byte, x float64) []byte {
	n := int64(math.Round(x / converterResolution))
	sign := byte('+')
	if n < 0 {
		sign, n = '-', -n
	}
	n = min(n, 999999)
	digits := [lineLength]byte{sign, 0, 0, 0, 0, '.', 0, 0, '\r', '\n'}
	for _, i := range [...]int{7, 6, 4, 3, 2, 1} {
		digits[i] = byte('0' + n%10)
		n /= 10
	}
	return append(out, digits[:]...)
}

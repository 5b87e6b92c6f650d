package simulated

import (
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"kymobench/bench/line"
)

// quietly is a bench whose draws are set by hand; what is not set is perfect.
func quietly(change func(*drawn)) drawn {
	d := drawn{
		sensitivity: nominal, hysteresis: 1e-9, fn: 40, zeta: 0.4,
		lag: 0.15, edgeWidth: 0.0025, slew: 200, approach: 0.3, ventTau: 0.2, thermalTau: 2,
		samplePhase: 300 * time.Microsecond, burstPhase: 5 * time.Millisecond,
	}
	change(&d)
	return d
}

func within(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tolerance) {
		t.Errorf("%s: %.12g, want %.12g within %g", what, got, want, tolerance)
	}
}

// source: scipy 1.10.1, signal.lsim of w^2/(s^2 + 2 zeta w s + w^2), first
// order hold, from 100 mmHg at rest; u falls straight to 0 from 1 to 3.5 ms.
// Tolerance: both are exact but for rounding; lsim's matrix exponential and
// 160 products leave about 1e-11.
func TestOscillatorAgainstScipy(t *testing.T) {
	rows := []struct {
		fn, zeta float64
		y        [6]float64 // at 3, 5, 8, 12, 20, 40 ms
	}{
		{40, 0.3, [6]float64{96.90891074257325, 79.09780362776611, 32.51541566885648, -21.684519279683713, -18.902311427201894, -4.637430825208337}},
		{35, 0.65, [6]float64{97.77161036165826, 85.65859280974115, 56.06728991048566, 20.019798434674435, -6.494921818289672, 0.4575857868713724}},
		{24, 1.0, [6]float64{98.95461051029281, 93.21588841151404, 78.41634485880904, 56.84626825454031, 25.361381563197916, 2.2653955231099268}},
		{12, 1.6, [6]float64{99.73041212757639, 98.18779716801878, 93.83441267873057, 86.37751471074735, 70.9990417835674, 42.000524274607265}},
	}
	u := func(ms float64) float64 { return 100 * math.Max(0, math.Min(1, 1-(ms-1)/2.5)) }
	for _, row := range rows {
		var o oscillator
		o.tune(row.fn, row.zeta, 0.001)
		o.y = 100
		last := 0.0
		for i, ms := range []float64{1, 3, 3.5, 5, 8, 12, 20, 40} {
			o.drive(u(last), u(ms), (ms-last)/1000)
			last = ms
			if k := []int{-1, 0, -1, 1, 2, 3, 4, 5}[i]; k >= 0 {
				within(t, "response", o.y, row.y[k], 1e-9)
			}
		}
	}
}

// However a straight stretch is cut, the line ends in the same state.
func TestOscillatorDoesNotDependOnTheStep(t *testing.T) {
	for _, zeta := range []float64{0.1, 0.65, 1 - 1e-9, 1, 1 + 1e-9, 2} {
		var whole, cut oscillator
		whole.tune(30, zeta, 0.001)
		cut.tune(30, zeta, 0.001)
		whole.y, cut.y = 20, 20
		whole.drive(10, 50, 0.007)
		for i := range 7 {
			cut.drive(10+40*float64(i)/7, 10+40*float64(i+1)/7, 0.001)
		}
		within(t, "pressure", cut.y, whole.y, 1e-9)
		within(t, "slope", cut.slope, whole.slope, 1e-6)
	}
}

// The samples on the wire, taken back to mmHg, against a Runge-Kutta
// integration of the line's equation with the volume's pressure as input.
func TestReleaseOnTheWire(t *testing.T) {
	for _, line2 := range []struct{ fn, zeta float64 }{{40, 0.4}, {12, 1.3}} {
		d := quietly(func(d *drawn) { d.fn, d.zeta, d.clock = line2.fn, line2.zeta, 5e-5 })
		v := newVolume(d)
		u := newTransducer(v, newDiaphragm(d), d, "")
		v.set(0, 100)
		out, now := emitUntil(t, u, line.Instant(4*time.Second))
		v.strike(now, true)
		more, _ := emitUntil(t, u, now.Add(200*time.Millisecond))
		out = append(out, more...)
		edge := v.pieces[len(v.pieces)-1]
		w, zeta := 2*math.Pi*d.fn*edge.fn, d.zeta*edge.zeta
		slope := newDiaphragm(d).slope

		y, dy, at := edge.p0, 0.0, 0.0
		acceleration := func(t, y, dy float64) float64 {
			p := math.Max(0, edge.p0*(1-t/d.edgeWidth))
			return w*w*(p-y) - 2*zeta*w*dy
		}
		compared := 0
		for n, x := range out {
			when := float64(d.samplePhase)/1e9 + float64(n)*1e-3*(1+d.clock) - edge.from.Seconds()
			if when <= 0 {
				continue
			}
			steps := int(math.Ceil((when - at) / 2e-6))
			h := (when - at) / float64(steps)
			for range steps {
				k1, l1 := dy, acceleration(at, y, dy)
				k2, l2 := dy+h/2*l1, acceleration(at+h/2, y+h/2*k1, dy+h/2*l1)
				k3, l3 := dy+h/2*l2, acceleration(at+h/2, y+h/2*k2, dy+h/2*l2)
				k4, l4 := dy+h*l3, acceleration(at+h, y+h*k3, dy+h*l3)
				y, dy, at = y+h/6*(k1+2*k2+2*k3+k4), dy+h/6*(l1+2*l2+2*l3+l4), at+h
			}
			// Half a step of the converter is 0.001 mmHg; at the corner of the
			// edge Runge-Kutta is good to about 1e-3.
			within(t, "sample after the release", x/nominal, slope*y, 3e-3)
			compared++
		}
		if compared < 150 {
			t.Errorf("%d samples compared", compared)
		}
	}
}

// emitUntil takes bursts until an instant and returns the values sent.
func emitUntil(t testing.TB, u *transducer, until line.Instant) ([]float64, line.Instant) {
	s := &session{t: t, out: map[string][]byte{}}
	now := line.Instant(0)
	for {
		due, _ := u.Due()
		if due > until {
			break
		}
		now = due
		s.out[RoleUUT] = append(s.out[RoleUUT], u.Emit(due)...)
	}
	return s.samples(len(s.out[RoleUUT]) / lineLength), now
}

func TestVolume(t *testing.T) {
	d := quietly(func(d *drawn) { d.leak = 0.6 / 300; d.thermal = 0.002 })
	v := newVolume(d)
	seconds := func(s float64) line.Instant { return line.Instant(math.Round(s * 1e9)) }
	p := func(s float64) float64 {
		v.advance(seconds(s))
		c := cursor{v: v}
		return c.at(seconds(s))
	}
	v.set(0, 300)
	target := v.target
	within(t, "set-point error", target, 300, 0.3)
	// dp/dt = 200 until 60 mmHg are left, at (300 - 60)/200 s; then exp.
	within(t, "slewing", p(0.5), 100, 1e-9)
	corner := (target - 60) / 200
	within(t, "corner", p(corner), target-60, 1e-6)
	within(t, "approach", p(corner+0.6), target-60*math.Exp(-2), 1e-6)
	within(t, "arrived", p(20), target, 1e-9)

	// Shut off long after: no cooling left worth a name, only the leak, which
	// is proportional to the pressure.
	v.hold(seconds(30))
	within(t, "leak", p(40), target*math.Exp(-10*0.6/300), 1e-3)
	within(t, "leak rate at 300 mmHg", (p(30)-p(30.01))/0.01, 0.6, 0.002)

	// Shut off at once: 0.2 % of the change, less what has gone since it was
	// made, is lost over a few tau. The leak adds its own.
	v.vent(seconds(60))
	within(t, "vent", p(60.4), p(60)*math.Exp(-2), 1e-9)
	if p(66) != 0 {
		t.Errorf("%g mmHg left after venting", p(66))
	}
	v.set(seconds(100), 300)
	v.hold(seconds(104))
	start := p(104)
	cooled := 0.002 * 300 * math.Exp(-(4-1.5)/2)
	within(t, "thermal relaxation", p(124), (start-cooled)*math.Exp(-20*0.6/300), 0.01)

	// The valve: a straight fall of the whole width, a few ms after the word;
	// the source can do what it likes while it is open.
	v.strike(seconds(130), true)
	before := p(130.02)
	edge := v.pieces[len(v.pieces)-1]
	if delay := edge.from.Seconds() - 130; delay < 0.003 || delay > 0.012 {
		t.Errorf("relay delay %g s", delay)
	}
	within(t, "open", before, 0, 0)
	within(t, "half the edge", p(edge.from.Seconds()+d.edgeWidth/2), edge.p0/2, 1e-3)
	v.set(seconds(131), 200)
	within(t, "source against the open valve", p(133), 0, 0)
	v.strike(seconds(134), false)
	within(t, "shut again, the source goes on", p(140), v.target, 1e-3)
}

// Where one piece ends the next begins: the pressure never jumps.
func TestPressureIsContinuous(t *testing.T) {
	s := start(t, Settings{Seed: 11, Condition: Leak})
	s.usual()
	v := s.b.machines[RoleSource].(*dialogue).v
	if len(v.pieces) < 30 {
		t.Fatalf("%d pieces", len(v.pieces))
	}
	for i := 1; i < len(v.pieces); i++ {
		a, b := &v.pieces[i-1], &v.pieces[i]
		within(t, "where two pieces meet", v.pressure(b, 0), v.pressure(a, b.from.Sub(a.from).Seconds()), 1e-9)
	}
}

// Laws of rate-independent hysteresis: a minor loop closes on the point it
// began from, is forgotten once left behind (return-point memory), has the
// same height wherever the branch it hangs on passes (congruency), and how
// fine the steps are does not matter.
func TestHysteresisLaws(t *testing.T) {
	d := quietly(func(d *drawn) { d.hysteresis = 0.5; d.offset = 3 })
	r := rand.New(rand.NewPCG(1, 2))
	for range 200 {
		m, twin := newDiaphragm(d), newDiaphragm(d)
		a := 60 + 240*r.Float64()
		low := a * r.Float64()
		high := low + (a-low)*r.Float64()
		turn := m.output(a)
		y1 := m.output(low)
		m.output(high)
		within(t, "minor loop closes below", m.output(low), y1, 1e-12)
		within(t, "minor loop closes above", m.output(a), turn, 1e-12)
		twin.output(a)
		for range 3 { // the twin makes no excursions
			p := a + (300-a)*r.Float64()
			within(t, "excursions are forgotten", m.output(p), twin.output(p), 1e-12)
			a = p
		}
		for i := 1; i <= 50; i++ {
			twin.output(a * (1 - float64(i)/50))
		}
		within(t, "steps do not matter", twin.output(0), m.output(0), 1e-12)
	}
	width := func(before ...float64) float64 {
		m := newDiaphragm(d)
		for _, p := range append(before, 80, 120, 80) {
			m.output(p)
		}
		up := m.output(100)
		m.output(120)
		return m.output(100) - up
	}
	if width() < 0.01 {
		t.Errorf("a minor loop is %g mmHg wide", width())
	}
	within(t, "congruent minor loops", width(160), width(300, 20, 200), 1e-12)
}

// The truth is what the cycle says, taken from the law itself: zero hysteresis
// at both ends, the drawn one at the widest.
func TestTruth(t *testing.T) {
	for seed := range uint64(50) {
		b := start(t, Settings{Seed: seed}).b
		d, tr := b.drawn, b.Truth()
		within(t, "hysteresis", tr.Hysteresis, d.hysteresis, 1e-12)
		within(t, "sensitivity", tr.Sensitivity, d.sensitivity, 1e-12)
		within(t, "zero offset", tr.ZeroOffset, d.offset, 1e-12)
		within(t, "natural frequency", tr.NaturalFrequency, d.fn, 0)
		y := newDiaphragm(d).through([]float64{0, 50, 100, 200, 300, 200, 100, 50, 0})
		within(t, "loop closed at zero", y[8], y[0], 1e-12)
		if y[5] <= y[3] || y[7] <= y[1] {
			t.Errorf("seed %d: the way down does not lie above the way up: %v", seed, y)
		}
	}
}

// The converter's noise at rest is white and as large as drawn: with n
// samples the standard deviation is known to 1/sqrt(2n), a correlation to
// 1/sqrt(n); four of those are allowed.
func TestNoise(t *testing.T) {
	for _, seed := range []uint64{1, 2, 3} {
		s := start(t, Settings{Seed: seed})
		s.run(11 * time.Second)
		const n = 10000
		x := s.samples(n)
		m := mean(x)
		var v, c float64
		for i := range x {
			v += (x[i] - m) * (x[i] - m) / (n - 1)
			if i > 0 {
				c += (x[i] - m) * (x[i-1] - m) / n
			}
		}
		sd := math.Sqrt(v) / nominal
		within(t, "noise over the drawn", sd/s.b.drawn.noise, 1, 4/math.Sqrt(2*n))
		within(t, "correlation", c/v, 0, 4/math.Sqrt(n))
		if sd < 0.115 || sd > 0.31 {
			t.Errorf("noise %g mmHg is outside the table", sd)
		}
		// Zero offset, readout zero, head: what stands before any zeroing.
		d := s.b.drawn
		want := (1+d.gain)*nominal*(d.offset+d.warmUp*math.Exp(-6)+d.sensitivity/nominal*d.head) + d.zero
		within(t, "zero on the wire", m, want, 4*nominal*d.noise/math.Sqrt(n)+0.02)
	}
}

package simulated

import (
	"math"
	"math/rand/v2"
	"sort"
	"time"

	"kymobench/bench/line"
)

// volume is the gas between source, valve, reference and the UUT's line. Its
// pressure is a closed form in pieces, each from one command (or stroke of the
// valve) to the next, so that asking for it changes nothing and two who ask
// agree.
type volume struct {
	d      drawn
	pieces []piece
	mode   mode
	target float64 // mmHg, of modeDrive
	open   bool    // the valve

	strokes []stroke // of the valve, yet to come, by time

	// excess is what the gas is too warm for, in mmHg, at the instant warmAt:
	// what the pressure of a shut volume will lose as it cools.
	excess float64
	warmAt line.Instant

	setError, relay, scatterF, scatterZ *rand.Rand
}

type mode uint8

const (
	modeVent mode = iota
	modeDrive
	modeHold
)

type stroke struct {
	at   line.Instant
	open bool
}

type kind uint8

const (
	still kind = iota
	driving
	held
	venting
	falling // the valve's edge
)

// piece is the pressure from an instant on, until the next piece.
type piece struct {
	from   line.Instant
	kind   kind
	p0     float64 // mmHg at from
	target float64 // driving, mmHg
	cool   float64 // held: what cooling will take, mmHg
	fn     float64 // not 0: what the lines' figures are multiplied by from here on
	zeta   float64
}

func newVolume(d drawn) *volume {
	return &volume{
		d:        d,
		pieces:   []piece{{kind: still, fn: 1, zeta: 1}},
		setError: stream(d.seed, "set-point error"),
		relay:    stream(d.seed, "relay delay"),
		scatterF: stream(d.seed, "scatter of fn"),
		scatterZ: stream(d.seed, "scatter of zeta"),
	}
}

// pressure is that of piece p a time t (s, not negative) after its start, mmHg.
//
//	driving  slew-limited first order: dp/dt = clamp((target - p)/tau, slew)
//	held     (p0 - cool (1 - exp(-t/tau))) exp(-leak t)
//	venting  p0 exp(-t/tau), exactly 0 after 25 tau
//	falling  a straight line to 0 over the edge's width
func (v *volume) pressure(p *piece, t float64) float64 {
	switch p.kind {
	case driving:
		left := p.target - p.p0
		limit := v.d.slew * v.d.approach
		if math.Abs(left) > limit {
			slewing := (math.Abs(left) - limit) / v.d.slew
			if t < slewing {
				return p.p0 + math.Copysign(v.d.slew*t, left)
			}
			left, t = math.Copysign(limit, left), t-slewing
		}
		return p.target - left*math.Exp(-t/v.d.approach)
	case held:
		return (p.p0 - p.cool*(1-math.Exp(-t/v.d.thermalTau))) * math.Exp(-v.d.leak*t)
	case venting:
		if t > 25*v.d.ventTau {
			return 0
		}
		return p.p0 * math.Exp(-t/v.d.ventTau)
	case falling:
		return p.p0 * max(0, 1-t/v.d.edgeWidth)
	}
	return p.p0
}

// cursor walks along the pieces with the time of whoever reads the pressure.
type cursor struct {
	v     *volume
	index int
}

// at returns the pressure at an instant not before the last one asked for.
func (c *cursor) at(t line.Instant) float64 {
	for c.index+1 < len(c.v.pieces) && c.v.pieces[c.index+1].from <= t {
		c.index++
	}
	p := &c.v.pieces[c.index]
	return c.v.pressure(p, t.Sub(p.from).Seconds())
}

// advance lets the strokes of the valve happen that are due at an instant.
// Every machine calls it first whenever it is driven.
func (v *volume) advance(now line.Instant) {
	for len(v.strokes) > 0 && v.strokes[0].at <= now {
		s := v.strokes[0]
		v.strokes = v.strokes[1:]
		switch {
		case s.open && !v.open:
			v.open = true
			v.warm(s.at, -v.now(s.at))
			v.begin(piece{
				from: s.at, kind: falling,
				fn:   math.Exp(0.003 * v.scatterF.NormFloat64()),
				zeta: 1 + 0.008*v.scatterZ.NormFloat64(),
			})
		case !s.open && v.open:
			v.open = false
			v.resume(s.at)
		}
	}
}

// now is the pressure at an instant at or after the last piece's beginning.
func (v *volume) now(t line.Instant) float64 {
	p := &v.pieces[len(v.pieces)-1]
	return v.pressure(p, t.Sub(p.from).Seconds())
}

// begin adds a piece that goes on from the present pressure.
func (v *volume) begin(p piece) {
	p.p0 = v.now(p.from)
	v.pieces = append(v.pieces, p)
}

// warm adds the heat of a change of pressure that ends at an instant.
func (v *volume) warm(t line.Instant, change float64) {
	v.excess = v.warmth(t) + v.d.thermal*change
	v.warmAt = t
}

func (v *volume) warmth(t line.Instant) float64 {
	return v.excess * math.Exp(-t.Sub(v.warmAt).Seconds()/v.d.thermalTau)
}

// resume lets the source act on the volume, the valve being shut.
func (v *volume) resume(t line.Instant) {
	if v.open {
		return
	}
	switch v.mode {
	case modeDrive:
		change := v.target - v.now(t)
		v.warm(t.Add(time.Duration(math.Abs(change)/v.d.slew*1e9)), change)
		v.begin(piece{from: t, kind: driving, target: v.target})
	case modeHold:
		v.begin(piece{from: t, kind: held, cool: v.warmth(t)})
	default:
		v.warm(t, -v.now(t))
		v.begin(piece{from: t, kind: venting})
	}
}

// set drives towards a pressure, mmHg, which the controller misses by a small
// steady amount.
func (v *volume) set(t line.Instant, p float64) {
	v.advance(t)
	v.mode, v.target = modeDrive, p+between(v.setError, -0.3, 0.3)
	v.resume(t)
}

// hold shuts the source off; vent opens it to atmosphere.
func (v *volume) hold(t line.Instant) { v.become(t, modeHold) }
func (v *volume) vent(t line.Instant) { v.become(t, modeVent) }

func (v *volume) become(t line.Instant, m mode) {
	v.advance(t)
	v.mode = m
	v.resume(t)
}

// strike moves the valve, after its relay's delay.
func (v *volume) strike(t line.Instant, open bool) {
	v.advance(t)
	delay := time.Duration(between(v.relay, 3e6, 12e6))
	v.strokes = append(v.strokes, stroke{t.Add(delay), open})
	sort.SliceStable(v.strokes, func(i, j int) bool { return v.strokes[i].at < v.strokes[j].at })
}

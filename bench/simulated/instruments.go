package simulated

import (
	"fmt"
	"math"
	"math/rand/v2"
	"strconv"
	"time"

	"kymobench/bench/line"
)

// Identities, as "maker,model,serial number,firmware".
const (
	identityReference = "Kymobench simulation,reference,SIM-R-001,1"
	identitySource    = "Kymobench simulation,pressure source,SIM-P-001,1"
	identityValve     = "Kymobench simulation,fast valve,SIM-V-001,1"
)

const (
	sourceLow  = -50.0 // mmHg, what the source can be asked for
	sourceHigh = 400.0

	// zeroWithin is how far from zero the reference will still take the present
	// pressure for zero, mmHg.
	zeroWithin = 5.0
)

// gauge is the measuring half of the reference manometer.
//
//	corrected = lagging pressure x (1 + scale) + point(pressure) + shift - taken
//	reading   = corrected - correction(reading) + noise, to 0.01 mmHg
//
// so that reading + correction(reading), as the certificate has it, leaves the
// errors that the certificate's uncertainty speaks of.
type gauge struct {
	d      drawn
	cursor cursor
	noise  *rand.Rand
	zeroed *rand.Rand

	step    int64   // the lag is known up to this many steps of lagStep
	input   float64 // mmHg, then
	lagging float64 // mmHg, then
	taken   float64 // mmHg, by CAL:ZERO
}

// lagStep is the grid on which the lag is followed, the pressure taken for
// straight between; it keeps readings independent of when others were asked.
const lagStep = 2 * time.Millisecond

// follow returns the lagging pressure at an instant: y' = (u - y)/lag, exact
// for u going straight between grid points.
// It cannot look back behind the grid point already reached.
func (g *gauge) follow(t line.Instant) float64 {
	t = max(t, line.Instant(g.step*int64(lagStep)))
	last := int64(t) / int64(lagStep)
	for g.step < last {
		g.step++
		u := g.cursor.at(line.Instant(g.step * int64(lagStep)))
		g.lagging = lagged(g.lagging, g.input, u, lagStep.Seconds(), g.d.lag)
		g.input = u
	}
	look := g.cursor // what lies between two grid points is looked at, not kept
	h := t.Sub(line.Instant(last * int64(lagStep))).Seconds()
	return lagged(g.lagging, g.input, look.at(t), h, g.d.lag)
}

func lagged(y, u0, u1, h, lag float64) float64 {
	if h <= 0 {
		return y
	}
	k := (u1 - u0) / h
	return u1 - k*lag + (y-u0+k*lag)*math.Exp(-h/lag)
}

// shows is the reading at an instant, without noise and not rounded.
func (g *gauge) shows(t line.Instant) float64 {
	p := g.follow(t)
	corrected := p*(1+g.d.scale) + at(&g.d.point, p) + g.d.zeroShift - g.taken
	x := corrected
	for range 3 { // the curve is so flat that each round gains three digits
		x = corrected - at(&g.d.correction, x)
	}
	return x
}

func newGauge(v *volume, d drawn) *gauge {
	return &gauge{
		d: d, cursor: cursor{v: v},
		noise: stream(d.seed, "reference noise"), zeroed: stream(d.seed, "reference zeroing"),
	}
}

// reading is what it shows at an instant, mmHg.
func (g *gauge) reading(at line.Instant) float64 {
	x := g.shows(at) + 0.02*g.noise.NormFloat64()
	return math.Round(x/referenceResolution) * referenceResolution
}

// zero takes the present pressure for zero, unless it is far from it.
func (g *gauge) zero(at line.Instant) *fault {
	x := g.shows(at)
	if math.Abs(x) > zeroWithin {
		return &fault{-221, "Settings conflict"}
	}
	// The device averages a while; what noise that leaves stays.
	g.taken += x + 0.003*g.zeroed.NormFloat64()
	return nil
}

func newReference(v *volume, d drawn) *dialogue {
	g := newGauge(v, d)
	read := func(at line.Instant) func() string { return func() string { return signed(g.reading(at)) } }
	zero := func(at line.Instant, _ float64) *fault { return g.zero(at) }
	reference := newDialogue(v, d.seed, RoleReference, identityReference,
		command{header: "MEASure:PRESsure?", ask: read, takes: [2]time.Duration{20 * time.Millisecond, 60 * time.Millisecond}},
		command{header: "CALibration:ZERO", do: zero},
	)
	reference.forget = func(line.Instant) { g.taken = 0 }
	return reference
}

// signed writes two decimals and always a sign.
func signed(x float64) string {
	s := strconv.FormatFloat(x, 'f', 2, 64)
	if s == "-0.00" {
		s = "0.00"
	}
	if s[0] != '-' {
		s = "+" + s
	}
	return s
}

func newSource(v *volume, d drawn) *dialogue {
	set := func(at line.Instant, p float64) *fault {
		if !(p >= sourceLow && p <= sourceHigh) {
			return &fault{-222, "Data out of range"}
		}
		v.set(at, p)
		return nil
	}
	source := newDialogue(v, d.seed, RoleSource, identitySource,
		command{header: "SOURce:PRESsure", number: true, do: set},
		command{header: "SOURce:HOLD", do: func(at line.Instant, _ float64) *fault { v.hold(at); return nil }},
		command{header: "SOURce:VENT", do: func(at line.Instant, _ float64) *fault { v.vent(at); return nil }},
	)
	source.forget = v.vent // it vents when it is switched on
	return source
}

func newValve(v *volume, d drawn) *dialogue {
	strike := func(open bool) func(line.Instant, float64) *fault {
		return func(at line.Instant, _ float64) *fault { v.strike(at, open); return nil }
	}
	return newDialogue(v, d.seed, RoleValve, identityValve,
		command{header: "ROUTe:OPEN", do: strike(true)},
		command{header: "ROUTe:CLOSe", do: strike(false)},
	)
}

// newReadout is what can be asked of the bridge converter; its numbers come
// with the UUT's stream.
func newReadout(v *volume, d drawn, number int) *dialogue {
	return newDialogue(v, d.seed, RoleReadout, identityOfReadout(number))
}

// identityOfReadout is that of the readout of a UUT, counted from 1.
func identityOfReadout(number int) string {
	return fmt.Sprintf("Kymobench simulation,bridge converter,SIM-C-%03d,1", number)
}

// Package simulated is a test bench that does not exist: a volume under
// pressure, a transducer at the end of a fluid-filled line, and the five
// instruments around them, each a state machine that speaks in bytes.
//
// It is not a driver and knows none: what it understands is written here a
// second time, from the wire's side, so that a mistake shared with a driver
// cannot confirm itself. It judges nothing; it only knows its truth. It has no
// clock and no goroutine of its own, but for the pseudo-terminals of Publish.
//
// Order of use: New, then either hand Machine(role) of each role to an
// in-memory inbox, or Publish the bench as pseudo-terminals; write BenchFile
// beside it; compare what was found with Truth.
//
// # What is drawn from the seed
//
// Every quantity has a random stream of its own, named after it, so that
// adding one moves no other. U(a, b) is uniform, N(s) normal about zero with
// standard deviation s. Errors that a bench file states as normal with an
// expanded uncertainty U and factor k are drawn as N(U/k), so that intervals
// made from the bench file cover what they promise.
//
//	the UUT, condition good
//	  zero offset                 U(-15, 15) mmHg
//	  sensitivity                 5 uV/V/mmHg x (1 + U(-0.4, 0.4) %)
//	  bow at half range           U(-0.1, 0.1) mmHg
//	  hysteresis                  U(0.15, 0.5) mmHg
//	  natural frequency           U(32, 45) Hz
//	  damping ratio               U(0.3, 0.65)
//	  each release                ln fn N(0.3 %), zeta N(0.8 %) about those
//	  noise at 1000 Hz            white, N(s), s = U(0.12, 0.3) mmHg
//	  warm-up drift               U(-1, 1) mmHg x exp(-(3600 s + t)/600 s)
//	other conditions, in place of the above
//	  wrong-sensitivity           +-U(2, 5) %, either sign
//	  offset                      +-U(30, 60) mmHg, either sign
//	  hysteresis                  U(2, 4) mmHg
//	  leak                        U(0.5, 1.5) mmHg/s at 300 mmHg
//	  air-bubble                  a line of U(32, 40) Hz and U(0.3, 0.4) whose
//	                              bubble lowers fn to U(10, 15) Hz, fn x zeta
//	                              as it was; damping ratio then 0.64 to 1.6
//	the bench
//	  reference, scale            N(0.03 %), common to all readings
//	  reference, at each 50 mmHg  N(0.02 mmHg), linear between, 0 at 0
//	  reference, corrections      U(-0.15, 0.15) mmHg at each 50 mmHg, 0 at 0
//	  reference, zero shift       U(-0.2, 0.2) mmHg, until CAL:ZERO; then N(0.003)
//	  reference, lag              first order, U(0.1, 0.2) s
//	  reference, noise            N(0.02 mmHg) for each reading
//	  reference, transaction      U(20, 60) ms, the pressure of its middle
//	  readout, gain               N(0.025 %)
//	  readout, zero               N(0.2 uV/V)
//	  height of the diaphragm     N(1 mm) of water = N(0.0734 mmHg)
//	  sample clock                U(-0.01, 0.01) %
//	  valve, relay delay          U(3, 12) ms, each stroke
//	  valve, edge                 2 ms/0.8 x (1 + U(-5, 5) %), a straight ramp
//	  source, slew                U(150, 250) mmHg/s
//	  source, time constant       U(0.25, 0.35) s
//	  source, set-point error     U(-0.3, 0.3) mmHg, each command
//	  vent, time constant         U(0.18, 0.22) s
//	  thermal relaxation          U(0.1, 0.3) % of a change, tau U(1, 5) s
//	  leak                        U(0, 0.003) mmHg/s at 300 mmHg
//	  committer                   U(1, 8) ms for each flush
//	  first moment                2026-06-01 08:00 UTC + U(5 min, 8 h)
package simulated

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"time"

	"kymobench/bench/line"
)

// Settings of a simulated bench. The zero value is the good bench of seed 0.
type Settings struct {
	Seed      uint64
	Condition string // one of Conditions; empty is "good"
}

// Conditions that a UUT, or its line, can be in.
const (
	Good             = "good"
	WrongSensitivity = "wrong-sensitivity"
	Offset           = "offset"
	Hysteresis       = "hysteresis"
	Leak             = "leak"
	AirBubble        = "air-bubble"
)

// Conditions lists the names that Settings.Condition takes.
func Conditions() []string {
	return []string{Good, WrongSensitivity, Offset, Hysteresis, Leak, AirBubble}
}

// Roles of the bench, the names of its machines and of its ports.
const (
	RoleReference = "reference"
	RoleUUT       = "uut"
	RoleReadout   = "readout"
	RoleSource    = "source"
	RoleValve     = "valve"
)

// Roles lists the machines of every bench.
func Roles() []string {
	return []string{RoleReference, RoleUUT, RoleReadout, RoleSource, RoleValve}
}

// Truth is what the UUT and its line are, without noise and without any error
// of the bench. No run may read it; it is for whoever checks runs.
type Truth struct {
	NaturalFrequency float64 // Hz, about which the releases scatter
	DampingRatio     float64 // likewise
	ZeroOffset       float64 // mmHg: output at zero pressure / 5 uV/V/mmHg, after exercise
	Sensitivity      float64 // uV/V/mmHg: least-squares slope over the noise-free cycle
	Hysteresis       float64 // mmHg: largest |down - up| at a set pressure of that cycle
}

// Bench is one simulated bench. All its machines share one volume, so they
// must be driven by one goroutine, in the order of time.
type Bench struct {
	settings  Settings
	drawn     drawn
	truth     Truth
	machines  map[string]line.Machine
	committer *rand.Rand
}

// New draws a bench. It errs on an unknown condition only.
func New(s Settings) (*Bench, error) {
	if s.Condition == "" {
		s.Condition = Good
	}
	if !slices.Contains(Conditions(), s.Condition) {
		return nil, fmt.Errorf("simulated bench: no condition %q; there are %s", s.Condition, strings.Join(Conditions(), ", "))
	}
	d := draw(s)
	dia := newDiaphragm(d)
	v := newVolume(d)
	return &Bench{
		settings:  s,
		drawn:     d,
		truth:     trueOf(d, dia),
		committer: stream(s.Seed, "committer"),
		machines: map[string]line.Machine{
			RoleReference: newReference(v, d),
			RoleUUT:       newTransducer(v, dia, d),
			RoleReadout:   newReadout(v, d),
			RoleSource:    newSource(v, d),
			RoleValve:     newValve(v, d),
		},
	}, nil
}

// Machine returns the instrument of a role, nil for a role that is not there.
// It is the same machine each time.
func (b *Bench) Machine(role string) line.Machine { return b.machines[role] }

// Truth returns what a perfect run would find.
func (b *Bench) Truth() Truth { return b.truth }

// CommitLatency draws how long a disk takes for the next flush.
func (b *Bench) CommitLatency() time.Duration {
	return time.Millisecond + time.Duration(b.committer.Float64()*float64(7*time.Millisecond))
}

// StartTime is the wall-clock time of instant 0, virtual and drawn.
func (b *Bench) StartTime() time.Time { return b.drawn.start }

// Model, SerialNumber and Lot are the invented marks of the UUT.
func (b *Bench) Model() string { return "SIM-PT5" }

// SerialNumber is told by seed and condition.
func (b *Bench) SerialNumber() string {
	code := strings.ToUpper(b.settings.Condition[:1])
	if b.settings.Condition == AirBubble {
		code = "B"
	}
	return fmt.Sprintf("SIM-%s%06d", code, b.settings.Seed)
}

// Lot is told by the seed.
func (b *Bench) Lot() string { return fmt.Sprintf("SIM-LOT-%02d", b.settings.Seed%100) }

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
//	  overdamped                  damping ratio U(1.35, 1.7)
//	  nonlinear                   bow +-U(5, 8) mmHg, either sign
//	  noisy                       white, N(s), s = U(5.4, 5.8) mmHg: no point is
//	                              ready in time, and whose noise it is, the
//	                              UUT's or its readout's, no run can tell
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
	"strconv"
	"strings"
	"time"

	"kymobench/bench/line"
)

// Settings of a simulated bench. The zero value is the good bench of seed 0.
type Settings struct {
	Seed      uint64
	Condition string // one of Conditions; empty is "good"
	// Others are the conditions of further UUTs on the same manifold, each with
	// a line, a readout and draws of its own.
	Others []string
	// Families are the forms in which the instruments speak.
	Families Families
	// Today is the day its certificates are dated for, so that they hold; zero
	// is that of its virtual start.
	Today time.Time
}

// Conditions that a UUT, or its line, can be in.
const (
	Good             = "good"
	WrongSensitivity = "wrong-sensitivity"
	Offset           = "offset"
	Hysteresis       = "hysteresis"
	Leak             = "leak"
	AirBubble        = "air-bubble"
	Overdamped       = "overdamped"
	Nonlinear        = "nonlinear"
	Noisy            = "noisy"
)

// Conditions lists the names that Settings.Condition takes.
func Conditions() []string {
	return []string{Good, WrongSensitivity, Offset, Hysteresis, Leak, AirBubble, Overdamped, Nonlinear, Noisy}
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

// MostUUTs is how many UUTs a simulated manifold takes.
const MostUUTs = 16

// numbered is the role of a UUT, or its readout, after the first: "uut2".
func numbered(role string, number int) string { return role + strconv.Itoa(number) }

// Roles lists the machines of this bench.
func (b *Bench) Roles() []string {
	roles := Roles()
	for i := range b.others {
		roles = append(roles, numbered(RoleUUT, i+2), numbered(RoleReadout, i+2))
	}
	return roles
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
	others    []UUT
	machines  map[string]line.Machine
	committer *rand.Rand
}

// UUT is what is known of one of the bench's UUTs.
type UUT struct {
	Condition, SerialNumber, Model, Lot string
	Truth                               Truth
}

// New draws a bench. It errs on an unknown condition, on more than MostUUTs,
// and on a leak stated of a further UUT, for a leak is the whole volume's.
func New(s Settings) (*Bench, error) {
	if s.Condition == "" {
		s.Condition = Good
	}
	for i, c := range append([]string{s.Condition}, s.Others...) {
		switch {
		case !slices.Contains(Conditions(), c):
			return nil, fmt.Errorf("simulated bench: no condition %q; there are %s", c, strings.Join(Conditions(), ", "))
		case i > 0 && c == Leak:
			return nil, fmt.Errorf("simulated bench: a leak is the whole volume's; state it of the first UUT")
		case i >= MostUUTs:
			return nil, fmt.Errorf("simulated bench: more than %d UUTs", MostUUTs)
		}
	}
	var err error
	if s.Families, err = s.Families.usual(); err != nil {
		return nil, err
	}
	d := draw(s)
	dia := newDiaphragm(d)
	v := newVolume(d)
	b := &Bench{
		settings:  s,
		drawn:     d,
		truth:     trueOf(d, dia),
		committer: stream(s.Seed, "committer"),
		machines: map[string]line.Machine{
			RoleReference: referenceAs(s.Families.Reference, v, d),
			RoleUUT:       newTransducer(v, dia, d, s.Families.UUT),
			RoleReadout:   newReadout(v, d, 1),
			RoleSource:    sourceAs(s.Families.Source, v, d),
			RoleValve:     valveAs(s.Families.Valve, v, d),
		},
	}
	for i, condition := range s.Others {
		own := Settings{Seed: mix(s.Seed + uint64(i+1)*0x9e3779b97f4a7c15), Condition: condition}
		d := draw(own)
		d.edgeWidth = b.drawn.edgeWidth // the valve is the bench's
		dia := newDiaphragm(d)
		b.machines[numbered(RoleUUT, i+2)] = newTransducer(v, dia, d, s.Families.UUT)
		b.machines[numbered(RoleReadout, i+2)] = newReadout(v, d, i+2)
		b.others = append(b.others, UUT{
			Condition: condition, SerialNumber: serialNumber(condition, s.Seed) + fmt.Sprintf("-%d", i+2), Model: b.Model(), Lot: b.Lot(), Truth: trueOf(d, dia),
		})
	}
	return b, nil
}

// UUTs lists the bench's UUTs in the order of the bench file.
func (b *Bench) UUTs() []UUT {
	first := UUT{Condition: b.settings.Condition, SerialNumber: b.SerialNumber(), Model: b.Model(), Lot: b.Lot(), Truth: b.truth}
	return append([]UUT{first}, b.others...)
}

// Flush is what a person does with their hands: it drives air out of the line
// of every UUT, with effect from the next release on. The known truth is that
// of the line as it was. It may be called from any goroutine.
func (b *Bench) Flush() {
	for role, m := range b.machines {
		if u, ok := m.(*transducer); ok && strings.HasPrefix(role, RoleUUT) {
			u.flushes.Add(1)
		}
	}
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
func (b *Bench) SerialNumber() string { return serialNumber(b.settings.Condition, b.settings.Seed) }

func serialNumber(condition string, seed uint64) string {
	code := strings.ToUpper(condition[:1])
	switch condition {
	case AirBubble:
		code = "B"
	case Overdamped:
		code = "D"
	case Noisy:
		code = "Y"
	}
	return fmt.Sprintf("SIM-%s%06d", code, seed)
}

// Lot is told by the seed.
func (b *Bench) Lot() string { return fmt.Sprintf("SIM-LOT-%02d", b.settings.Seed%100) }

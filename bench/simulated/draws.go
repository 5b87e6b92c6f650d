package simulated

import (
	"math"
	"math/rand/v2"
	"time"
)

// What the bench file states, and what the draws go by: one place for both.
const (
	nominal = 5.0 // uV/V/mmHg

	certificateK        = 2.0
	certificatePoint    = 0.04   // mmHg, expanded
	certificateShare    = 0.0006 // of the reading, expanded
	readoutK            = 2.0
	readoutGain         = 0.0005 // expanded
	readoutZero         = 0.4    // uV/V, expanded
	heightSD            = 1.0    // mm, standard
	waterMmHgPerMm      = 0.0734 // mmHg for 1 mm of water less air, 998 to 1000 kg/m3
	edge                = 0.002  // s, 10-90 %
	edgeTolerance       = 0.05
	clockTolerance      = 1e-4
	referenceResolution = 0.01 // mmHg
	converterResolution = 0.01 // uV/V

	samplePeriod = time.Millisecond
	burstEvery   = 16 * time.Millisecond // a USB adapter's latency timer
	conversion   = time.Millisecond      // from the sample to the adapter's buffer

	nodeStep = 50.0 // mmHg between the certificate's points
	nodeLow  = -50.0
	nodes    = 10 // -50 to 400 mmHg

	poweredBefore = 3600.0 // s since power-on at instant 0
)

// zeroNode is the index of 0 mmHg among the certificate's points.
const zeroNode = 1

// drawn is everything that the seed decides about a bench before it is used.
type drawn struct {
	seed  uint64
	start time.Time

	// the UUT
	offset      float64 // mmHg
	sensitivity float64 // uV/V/mmHg
	bow         float64 // mmHg at half range
	hysteresis  float64 // mmHg
	fn, zeta    float64
	dry         float64 // fn without the bubble, 0 where there is none
	noise       float64 // mmHg
	warmUp      float64 // mmHg at power-on

	// the bench
	scale       float64        // reference
	point       [nodes]float64 // reference, mmHg
	correction  [nodes]float64 // certificate, mmHg, as printed
	zeroShift   float64        // reference, mmHg
	lag         float64        // reference, s
	gain        float64        // readout
	zero        float64        // readout, uV/V
	head        float64        // mmHg at the diaphragm more than at the reference
	clock       float64        // share
	edgeWidth   float64        // s
	slew        float64        // mmHg/s
	approach    float64        // s
	ventTau     float64        // s
	thermal     float64        // share of a change
	thermalTau  float64        // s
	leak        float64        // 1/s
	burstPhase  time.Duration  // of the adapter's timer
	samplePhase time.Duration  // of the converter
}

// stream returns the random stream of one quantity. Seed and name go through
// FNV-1a and a finaliser (splitmix64), so that near seeds and near names give
// unrelated streams.
func stream(seed uint64, name string) *rand.Rand {
	h := uint64(14695981039346656037)
	for i := 0; i < 8; i++ {
		h = (h ^ (seed >> (8 * i) & 0xff)) * 1099511628211
	}
	for i := 0; i < len(name); i++ {
		h = (h ^ uint64(name[i])) * 1099511628211
	}
	return rand.New(rand.NewPCG(mix(h), mix(h+0x9e3779b97f4a7c15)))
}

func mix(z uint64) uint64 {
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

func between(r *rand.Rand, low, high float64) float64 { return low + (high-low)*r.Float64() }

// draw draws a bench; the table of ranges is in the package's doc.
func draw(s Settings) drawn {
	one := func(name string, low, high float64) float64 { return between(stream(s.Seed, name), low, high) }
	normal := func(name string, sd float64) float64 { return sd * stream(s.Seed, name).NormFloat64() }
	d := drawn{
		seed:        s.Seed,
		offset:      one("zero offset", -15, 15),
		sensitivity: nominal * (1 + one("sensitivity", -0.004, 0.004)),
		bow:         one("bow", -0.1, 0.1),
		hysteresis:  one("hysteresis", 0.15, 0.5),
		fn:          one("natural frequency", 32, 45),
		zeta:        one("damping ratio", 0.3, 0.65),
		noise:       one("noise", 0.12, 0.3),
		warmUp:      one("warm-up", -1, 1),

		scale:      normal("reference scale", certificateShare/certificateK),
		zeroShift:  one("reference zero", -0.2, 0.2),
		lag:        one("reference lag", 0.1, 0.2),
		gain:       normal("readout gain", readoutGain/readoutK),
		zero:       normal("readout zero", readoutZero/readoutK),
		head:       normal("height", heightSD*waterMmHgPerMm),
		clock:      one("sample clock", -clockTolerance, clockTolerance),
		edgeWidth:  edge / 0.8 * (1 + one("edge", -edgeTolerance, edgeTolerance)),
		slew:       one("slew", 150, 250),
		approach:   one("approach", 0.25, 0.35),
		ventTau:    one("vent", 0.18, 0.22),
		thermal:    one("thermal share", 0.001, 0.003),
		thermalTau: one("thermal time constant", 1, 5),
		leak:       one("leak", 0, 0.003) / 300,
	}
	offsetSeconds := one("start", 5*60, 8*3600)
	d.start = firstDay().Add(time.Duration(offsetSeconds) * time.Second)
	d.burstPhase = time.Duration(one("burst phase", 1, 16) * float64(time.Millisecond))
	d.samplePhase = time.Duration(one("sample phase", 0, 1) * float64(time.Millisecond))
	points, corrections := stream(s.Seed, "reference points"), stream(s.Seed, "certificate corrections")
	for i := range nodes {
		d.point[i] = certificatePoint / certificateK * points.NormFloat64()
		// A certificate prints hundredths; the curve is exactly what it prints.
		d.correction[i] = math.Round(between(corrections, -0.15, 0.15)*100) / 100
	}
	d.point[zeroNode], d.correction[zeroNode] = 0, 0
	d.worsen(s)
	return d
}

// firstDay is when the virtual days of all benches begin.
func firstDay() time.Time { return time.Date(2026, time.June, 1, 8, 0, 0, 0, time.UTC) }

// worsen puts in the condition. Its quantities have streams of their own, so
// the rest of the bench is that of the good one with the same seed.
func (d *drawn) worsen(s Settings) {
	r := stream(s.Seed, "condition "+s.Condition)
	sign := 1.0
	if r.Uint64()&1 == 1 {
		sign = -1
	}
	switch s.Condition {
	case WrongSensitivity:
		d.sensitivity = nominal * (1 + sign*between(r, 0.02, 0.05))
	case Offset:
		d.offset = sign * between(r, 30, 60)
	case Hysteresis:
		d.hysteresis = between(r, 2, 4)
	case Leak:
		d.leak = between(r, 0.5, 1.5) / 300
	case AirBubble:
		// The product of a laminar line depends on bore and fluid only; the
		// bubble leaves it alone. The dry line is drawn with low damping: with
		// more, the bubble's damping ratio passes 2, where no step response of
		// this noise gives fn within 5 %, and the run could decide nothing.
		d.dry = between(r, 32, 40)
		product := d.dry * between(r, 0.3, 0.4)
		d.fn = between(r, 10, 15)
		d.zeta = product / d.fn
	case Overdamped:
		// A narrowing, or a restrictor of the wrong kind. Above 1.7 the fits'
		// own uncertainty of fn nears 5 % at this noise.
		d.zeta = between(r, 1.35, 1.7)
	case Nonlinear:
		// At 100 mmHg, 8/9 of it: 4.4 mmHg or more, where 3 are allowed.
		d.bow = sign * between(r, 5, 8)
	case Noisy:
		// The mean of a point asks for 0.02 mmHg, which this noise gives in more
		// than a minute; and it stays within 330 mmHg at 300.
		d.noise = between(r, 5.4, 5.8)
	}
}

// at interpolates a curve over the certificate's points, constant beyond.
func at(curve *[nodes]float64, p float64) float64 {
	x := (p - nodeLow) / nodeStep
	if !(x > 0) {
		return curve[0]
	}
	if x >= nodes-1 {
		return curve[nodes-1]
	}
	i := int(x)
	f := x - float64(i)
	return curve[i]*(1-f) + curve[i+1]*f
}

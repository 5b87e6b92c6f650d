package simulated

import (
	"bytes"
	"math"
	"strings"
	"testing"
	"time"

	"github.com/pelletier/go-toml/v2"
)

func BenchmarkRun(b *testing.B) {
	for i := range b.N {
		s := start(b, Settings{Seed: uint64(i)})
		s.usual()
	}
}

func TestSameSeedSameBytes(t *testing.T) {
	for _, condition := range []string{Good, AirBubble} {
		settings := Settings{Seed: 7, Condition: condition}
		one, two, other := start(t, settings), start(t, settings), start(t, Settings{Seed: 8, Condition: condition})
		one.usual()
		two.usual()
		other.usual()
		if one.now.Seconds() < 200 {
			t.Fatalf("only %v were driven", one.now)
		}
		for _, role := range Roles() {
			if !bytes.Equal(one.out[role], two.out[role]) {
				t.Errorf("%s: %s differs between two runs of one seed", condition, role)
			}
		}
		for _, role := range []string{RoleUUT, RoleReference} {
			if bytes.Equal(one.out[role], other.out[role]) {
				t.Errorf("%s: %s is the same for two seeds", condition, role)
			}
		}
		if !bytes.Equal(one.b.BenchFile(nil), two.b.BenchFile(nil)) || bytes.Equal(one.b.BenchFile(nil), other.b.BenchFile(nil)) {
			t.Errorf("%s: bench files", condition)
		}
		if one.b.CommitLatency() != two.b.CommitLatency() || one.b.StartTime() != two.b.StartTime() || one.b.SerialNumber() != two.b.SerialNumber() {
			t.Errorf("%s: latency, start or serial number differ", condition)
		}
	}
}

// Asking must not change what is asked about: the UUT's bytes are the same
// whether or not the reference was read meanwhile.
func TestReadingChangesNothing(t *testing.T) {
	asked, quiet := start(t, Settings{Seed: 3}), start(t, Settings{Seed: 3})
	for _, s := range []*session{asked, quiet} {
		for _, command := range []string{"SOUR:PRES 120", "SOUR:HOLD", "SOUR:PRES 30"} {
			s.send(RoleSource, command)
			until := s.now.Add(3 * time.Second)
			if s == asked {
				s.reading(25)
			}
			s.run(until.Sub(s.now))
		}
		s.send(RoleValve, "ROUT:OPEN")
		s.run(time.Second)
	}
	if !bytes.Equal(asked.out[RoleUUT], quiet.out[RoleUUT]) {
		t.Error("the UUT's stream depends on whether the reference was asked")
	}
}

func TestUnknownCondition(t *testing.T) {
	if b, err := New(Settings{Condition: "perfect"}); err == nil || b != nil {
		t.Errorf("%v, %v", b, err)
	}
	if b, err := New(Settings{}); err != nil || b.Machine("toaster") != nil {
		t.Errorf("zero settings: %v", err)
	}
}

func TestLatencyAndStart(t *testing.T) {
	first := time.Date(2026, 6, 1, 8, 0, 0, 0, time.UTC)
	for seed := range uint64(100) {
		b := start(t, Settings{Seed: seed}).b
		if d := b.StartTime().Sub(first); d < 5*time.Minute || d > 8*time.Hour {
			t.Errorf("seed %d starts %v after %v", seed, d, first)
		}
		for range 50 {
			if l := b.CommitLatency(); l < time.Millisecond || l > 8*time.Millisecond {
				t.Fatalf("seed %d: a flush takes %v", seed, l)
			}
		}
	}
}

// The bench file must be TOML, name the ports as given, and state what the
// package's doc says is drawn.
func TestBenchFile(t *testing.T) {
	awkward := `C:\bench "2"\ü` + "\x01"
	file := start(t, Settings{Seed: 5}).b.BenchFile(map[string]string{RoleUUT: awkward})
	var tree struct {
		Schema    string
		Simulated bool
		Reference struct {
			Port, Identity string
			Certificate    struct {
				CoverageFactor float64 `toml:"coverage_factor"`
				Uncertainty    string
				OfReading      string `toml:"uncertainty_of_reading"`
				Correction     []struct{ At, Correction string }
			}
		}
		UUT struct {
			Port      string
			Width     int
			Tolerance string `toml:"sample_period_tolerance"`
		}
		Readout struct {
			Gain string `toml:"gain_uncertainty"`
			Zero string `toml:"zero_uncertainty"`
		}
		Source struct{ Port, Set string }
		Valve  struct {
			Edge      string `toml:"edge_time"`
			Tolerance string `toml:"edge_time_tolerance"`
		}
	}
	if err := toml.Unmarshal(file, &tree); err != nil {
		t.Fatal(err)
	}
	for _, row := range []struct{ name, got, want string }{
		{"schema", tree.Schema, "kymobench/bench/1"},
		{"uut port", tree.UUT.Port, awkward},
		{"source port", tree.Source.Port, "source"},
		{"reference", tree.Reference.Identity, "Kymobench simulation,reference,SIM-R-001,1"},
		{"certificate", tree.Reference.Certificate.Uncertainty, "0.04 mmHg"},
		{"certificate", tree.Reference.Certificate.OfReading, "0.06 %"},
		{"clock", tree.UUT.Tolerance, "0.01 %"},
		{"gain", tree.Readout.Gain, "0.05 %"},
		{"zero", tree.Readout.Zero, "0.4 uV/V"},
		{"set", tree.Source.Set, "SOUR:PRES {mmHg}"},
		{"edge", tree.Valve.Edge, "2 ms"},
		{"edge", tree.Valve.Tolerance, "5 %"},
	} {
		if row.got != row.want {
			t.Errorf("%s: %q, want %q", row.name, row.got, row.want)
		}
	}
	if !tree.Simulated || tree.UUT.Width != len("+1500.02") || tree.Reference.Certificate.CoverageFactor != 2 {
		t.Errorf("%+v", tree)
	}
	c := tree.Reference.Certificate.Correction
	if len(c) != 10 || c[0].At != "-50 mmHg" || c[9].At != "400 mmHg" || c[1].Correction != "0.00 mmHg" {
		t.Errorf("corrections %v", c)
	}
	if strings.Contains(string(file), "condition") {
		t.Error("the bench file tells the condition")
	}
}

// limits is what an incoming inspection allows, and expected the expanded
// uncertainty it reaches, as planned for the bench; the ranges drawn must keep
// 3 of them from every limit, or pass one by 3.
var (
	limits = map[string][2]float64{
		"zero_offset": {-25, 25}, "sensitivity": {4.95, 5.05}, "hysteresis": {-1, 1},
		"natural_frequency": {24, math.Inf(1)}, "damping_ratio": {0.15, 1.1}, "accuracy": {-1, 1}, "leak": {-0.1, 0.1},
	}
	expected = map[string]float64{
		"zero_offset": 0.35, "sensitivity": 0.004, "hysteresis": 0.12,
		"natural_frequency": 0.3, "damping_ratio": 0.02, "leak": 0.005,
	}
)

// truths lists every figure that has a limit; accuracy as the largest share of
// the band, 3 U of 0.3 mmHg or a tenth of the band added.
func truths(b *Bench) map[string]float64 {
	tr := b.Truth()
	figures := map[string]float64{
		"zero_offset": tr.ZeroOffset, "sensitivity": tr.Sensitivity, "hysteresis": tr.Hysteresis,
		"natural_frequency": tr.NaturalFrequency, "damping_ratio": tr.DampingRatio, "leak": b.drawn.leak * 300,
	}
	m := newDiaphragm(b.drawn)
	y := m.through(cycle())
	for i, p := range cycle() {
		band := 1 + 0.01*p
		if p > 50 {
			band = 0.03 * p
		}
		u := 0.05 + 0.0008*p
		figures["accuracy"] = math.Max(figures["accuracy"], (math.Abs(y[i]-y[0]-p)+3*u)/band)
	}
	return figures
}

func TestRanges(t *testing.T) {
	outside := map[string]string{
		WrongSensitivity: "sensitivity", Offset: "zero_offset", Hysteresis: "hysteresis", Leak: "leak", AirBubble: "natural_frequency",
		Overdamped: "damping_ratio", Nonlinear: "accuracy",
	}
	for _, condition := range Conditions() {
		for seed := range uint64(400) {
			b := start(t, Settings{Seed: seed, Condition: condition}).b
			for name, x := range truths(b) {
				l, margin := limits[name], 3*expected[name]
				inside := x-margin >= l[0] && x+margin <= l[1]
				beyond := x+margin < l[0] || x-margin > l[1]
				if condition == Good && !inside {
					t.Errorf("good, seed %d: %s = %g is within 3 U of %v", seed, name, x, l)
				}
				if outside[condition] == name && !beyond {
					t.Errorf("%s, seed %d: %s = %g is not 3 U outside %v", condition, seed, name, x, l)
				}
			}
		}
	}
}

// A condition changes its own figures and leaves the rest of the bench as the
// good one's with the same seed.
func TestConditionsChangeOnlyTheirs(t *testing.T) {
	for seed := range uint64(20) {
		good := draw(Settings{Seed: seed, Condition: Good})
		for _, condition := range Conditions() {
			d := draw(Settings{Seed: seed, Condition: condition})
			switch condition {
			case WrongSensitivity:
				d.sensitivity = good.sensitivity
			case Offset:
				d.offset = good.offset
			case Hysteresis:
				d.hysteresis = good.hysteresis
			case Leak:
				d.leak = good.leak
			case AirBubble:
				if product := d.fn * d.zeta; product < 32*0.3 || product > 40*0.4 || d.zeta > 1.6001 {
					t.Errorf("seed %d: fn x zeta = %g, zeta = %g", seed, product, d.zeta)
				}
				d.fn, d.zeta, d.dry = good.fn, good.zeta, good.dry
			case Overdamped:
				d.zeta = good.zeta
			case Nonlinear:
				d.bow = good.bow
			case Noisy:
				d.noise = good.noise
			}
			if d != good {
				t.Errorf("seed %d: %s changes more than its own", seed, condition)
			}
		}
	}
}

// Normal draws must have the mean and the standard deviation stated: of n
// draws the mean lies within 4 sd/sqrt(n), the standard deviation within 4
// sd/sqrt(2n). Pairs of draws must not correlate: |r| < 4/sqrt(n).
func TestSystematicErrorsAreNormal(t *testing.T) {
	const n = 2000
	names := []string{"scale", "gain", "zero", "head", "point 200", "point 300", "offset"}
	sds := []float64{3e-4, 2.5e-4, 0.2, 0.0734, 0.02, 0.02, 30 / math.Sqrt(12)}
	draws := make([][]float64, len(names))
	for seed := range uint64(n) {
		d := draw(Settings{Seed: seed, Condition: Good})
		for i, x := range []float64{d.scale, d.gain, d.zero, d.head, d.point[zeroNode+4], d.point[zeroNode+6], d.offset} {
			draws[i] = append(draws[i], x/sds[i])
		}
	}
	for i, x := range draws {
		var beyond, m2 float64
		for _, v := range x {
			m2 += v * v / n
			if math.Abs(v) > 1.959964 {
				beyond += 1. / n
			}
		}
		if m := mean(x); math.Abs(m) > 4/math.Sqrt(n) {
			t.Errorf("%s: mean %g sd", names[i], m)
		}
		if s := math.Sqrt(m2); math.Abs(s-1) > 4/math.Sqrt(2*n) {
			t.Errorf("%s: standard deviation %g of the stated", names[i], s)
		}
		if names[i] != "offset" && math.Abs(beyond-0.05) > 4*math.Sqrt(0.05*0.95/n) {
			t.Errorf("%s: %g of the draws beyond 1.96 sd", names[i], beyond)
		}
		for j := range i {
			r := 0.0
			for k := range x {
				r += x[k] * draws[j][k] / n
			}
			if math.Abs(r) > 4/math.Sqrt(n) {
				t.Errorf("%s and %s correlate: %g", names[i], names[j], r)
			}
		}
	}
}

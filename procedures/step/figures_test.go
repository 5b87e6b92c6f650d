package step

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"
)

// TestSecondOrderTable holds every column of the table of textbook figures
// against the package, to the nine digits printed.
func TestSecondOrderTable(t *testing.T) {
	file, err := os.Open("../../testdata/sources/second-order-table/second_order_table.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	if len(rows) != 19 {
		t.Fatalf("%d rows, want a heading and 18", len(rows))
	}
	decibels := func(gain float64) float64 { return 20 * math.Log10(gain) }
	resonance := func(z float64) float64 { f, _ := Resonance(z); return f }
	peak := func(z float64) float64 { _, g := Resonance(z); return g }
	figures := map[string]func(z float64) float64{
		"overshoot_pct":    func(z float64) float64 { return 100 * Overshoot(z) },
		"half_cycle_ratio": Overshoot,
		"full_cycle_ratio": func(z float64) float64 { return Overshoot(z) * Overshoot(z) },
		"log_dec_full":     func(z float64) float64 { return -2 * math.Log(Overshoot(z)) },
		"fd_over_fn":       DampedFrequency,
		"fr_over_fn":       resonance,
		"Mr":               peak,
		"Mr_dB":            func(z float64) float64 { return decibels(peak(z)) },
		"f3dB_over_fn":     Bandwidth,
		"tr10_90_wn":       RiseTime,
		"tp_wn":            PeakTime,
		"ts2pct_wn":        func(z float64) float64 { return SettlingTime(z, 0.02) },
		"ts5pct_wn":        func(z float64) float64 { return SettlingTime(z, 0.05) },
		"flat5_f_over_fn":  func(z float64) float64 { return FlatBand(z, 0.05) },
		"flat10_f_over_fn": func(z float64) float64 { return FlatBand(z, 0.10) },
	}
	for _, row := range rows[1:] {
		zeta, err := strconv.ParseFloat(row[0], 64)
		if err != nil {
			t.Fatal(err)
		}
		for i, name := range rows[0][1:] {
			figure, known := figures[name]
			if !known {
				t.Fatalf("column %q is not checked", name)
			}
			want, err := strconv.ParseFloat(row[i+1], 64)
			if err != nil {
				t.Fatal(err)
			}
			// zeta = 0.707106781 is 1/sqrt 2 rounded to nine digits: figures
			// that vanish there are small but not zero.
			slack := 6e-9*math.Abs(want) + 1e-12
			if zeta == 0.707106781 {
				slack = 6e-9*math.Abs(want) + 4e-5
			}
			if got := figure(zeta); !(math.Abs(got-want) <= slack) && got != want {
				t.Errorf("zeta %g %s: %.12g, table %.12g", zeta, name, got, want)
			}
		}
	}
}

// The gain falls to what the band figures say, a law of their definition.
func TestBandsMeetTheGain(t *testing.T) {
	for zeta := 0.05; zeta < 3; zeta *= 1.3 {
		if g := Amplitude(7, zeta, 7*Bandwidth(zeta)); math.Abs(g-math.Sqrt(0.5)) > 1e-12 {
			t.Errorf("zeta %g: gain %.15g at the -3 dB frequency", zeta, g)
		}
		if g := Amplitude(7, zeta, 7*FlatBand(zeta, 0.05)); math.Abs(math.Abs(g-1)-0.05) > 1e-12 {
			t.Errorf("zeta %g: gain %.15g at the end of the flat band", zeta, g)
		}
		if p := Phase(7, zeta, 7); math.Abs(p+math.Pi/2) > 1e-12 {
			t.Errorf("zeta %g: phase %g at fn", zeta, p)
		}
	}
	// Computed check value: widest +-5 % band, just above the jump.
	if low, high := FlatBand(0.5895, 0.05), FlatBand(0.58954, 0.05); math.Abs(low-0.55) > 0.01 || math.Abs(high-0.8679) > 0.0005 {
		t.Errorf("flat band %g below and %g above the jump, want 0.55 and 0.8679", low, high)
	}
}

// The published flush test: a period of 1.7 mm at 25 mm/s is 14.7 Hz, adjacent
// heights of 17 and 24 mm are a ratio of 0.71 and a damping ratio of 0.11
// (Miller's Anesthesia, 6th edition, figure 32-11). Read as a full cycle the
// same ratio gives half of it. What rings is the damped frequency: 14.794 Hz is
// the natural one (computed elsewhere).
func TestFlushTest(t *testing.T) {
	ringing, ratio := 25/1.7, 17.0/24
	zeta := DampingOfOpposite(ratio)
	if math.Abs(ringing-14.7) > 0.05 || math.Abs(ratio-0.71) > 0.005 || math.Abs(zeta-0.11) > 0.005 || math.Abs(zeta-0.1091) > 5e-5 {
		t.Errorf("%.4f Hz, ratio %.4f, damping %.5f", ringing, ratio, zeta)
	}
	if half := DampingOfSameSide(ratio); math.Abs(half-0.0548) > 5e-5 {
		t.Errorf("as a full cycle %.5f, want 0.0548", half)
	}
	if fn := ringing / DampedFrequency(zeta); math.Abs(fn-14.794) > 5e-4 {
		t.Errorf("natural frequency %.4f Hz, want 14.794", fn)
	}
	// The inverse of the half-cycle ratio, and the same ratios misread
	// (computed elsewhere, four decimals).
	half := []float64{0.5912, 0.4559, 0.3579, 0.2800, 0.2155, 0.1605, 0.1128, 0.0709, 0.0335}
	full := []float64{0.3441, 0.2481, 0.1882, 0.1443, 0.1097, 0.0810, 0.0567, 0.0355, 0.0168}
	for i := range half {
		r := float64(i+1) / 10
		if got := DampingOfOpposite(r); math.Abs(got-half[i]) > 5.1e-5 || math.Abs(Overshoot(got)-r) > 1e-12 {
			t.Errorf("ratio %.1f: %.5f", r, got)
		}
		if got := DampingOfSameSide(r); math.Abs(got-full[i]) > 5.1e-5 {
			t.Errorf("ratio %.1f as a full cycle: %.5f", r, got)
		}
	}
	if !math.IsNaN(DampingOfOpposite(1.1)) || !math.IsNaN(DampingOfOpposite(-1)) || DampingOfOpposite(0) != 1 || DampingOfOpposite(1) != 0 {
		t.Error("edges")
	}
}

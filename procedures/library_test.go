package procedures

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"math"
	"os"
	"slices"
	"strings"
	"testing"
	"time"

	"kymobench/bench/quantity"
	"kymobench/procedures/verdict"
)

// Every shipped procedure loads, is named after its id, and its README tells
// the origin of each of its limits.
func TestShippedAgainstREADME(t *testing.T) {
	names := ShippedNames()
	if !slices.Contains(names, "incoming") {
		t.Fatalf("shipped: %q", names)
	}
	readme, err := os.ReadFile("library/README.md")
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range names {
		d, err := Shipped(name)
		if err != nil {
			t.Fatal(err)
		}
		data, err := os.ReadFile("library/" + name + ".toml")
		if err != nil {
			t.Fatal(err)
		}
		sum := sha256.Sum256(data)
		if d.ID != name || d.Name != name+".toml" || string(d.Source) != string(data) || d.SHA256 != hex.EncodeToString(sum[:]) {
			t.Errorf("%s: id %q, name %q, sha256 %s", name, d.ID, d.Name, d.SHA256)
		}
		_, section, there := strings.Cut(string(readme), "## "+name+".toml")
		section, _, _ = strings.Cut(section, "\n## ")
		if !there {
			t.Errorf("%s is not in the README", name)
		}
		for _, l := range d.Limits {
			row := ""
			for _, s := range strings.Split(section, "\n") {
				if strings.HasPrefix(s, "| "+string(l.Name)+" |") {
					row = s
				}
			}
			if !strings.HasSuffix(row, "| "+string(l.OriginStatus)+" |") {
				t.Errorf("%s: the README says of %s %q, the file %q", name, l.Name, row, l.OriginStatus)
			}
		}
	}
	for _, name := range []string{"", "incoming.toml", "../incoming", "outgoing", "/etc/passwd", "."} {
		if d, err := Shipped(name); !errors.Is(err, ErrNotShipped) || d != nil {
			t.Errorf("%q: %v, %v", name, d, err)
		}
	}
}

// What the incoming inspection is asked to be: source, the issue that ordered
// it and the data of the fields it names.
func TestIncomingAsOrdered(t *testing.T) {
	d, err := Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	if d.UUTKind != BareTransducer || d.Decision != (Decision{verdict.FourOutcome, 1, verdict.Inconclusive, verdict.Inconclusive}) {
		t.Errorf("%s, %+v", d.UUTKind, d.Decision)
	}
	for _, c := range []struct {
		name            LimitName
		low, high, step float64 // NaN: none
		unit            string
	}{
		{ZeroOffset, -25, 25, 0.1, "mmHg"},
		{Sensitivity, 4.95, 5.05, 0.001, "uV/V/mmHg"},
		{Accuracy, math.NaN(), math.NaN(), 0.01, "mmHg"},
		{Hysteresis, -1, 1, 0.01, "mmHg"},
		{NaturalFrequency, 24, math.NaN(), 0.1, "Hz"},
		{DampingRatio, 0.15, 1.1, 0.01, "1"},
	} {
		l, ok := d.Limit(c.name)
		if !ok || !sides(l.Low, l.High, c.low, c.high) || l.Resolution != c.step || l.Unit != c.unit || l.Origin == "" {
			t.Errorf("%s: %+v", c.name, l)
		}
	}
	if len(d.Limits) != 6 {
		t.Errorf("%d limits", len(d.Limits))
	}
	var kinds []string
	for _, s := range d.Stages {
		kinds = append(kinds, s.Kind())
		switch s := s.(type) {
		case Leak:
			if math.Abs(s.At.MmHg()-300) > 1e-9 || s.For != 30*time.Second || math.Abs(s.HighestRate.MmHg()-0.1) > 1e-12 {
				t.Errorf("leak %+v", s)
			}
		case Static:
			var told []string
			for _, p := range s.Points() {
				told = append(told, string(p.Leg)+" "+quantity.FormatRounded(p.Set.MmHg(), 1))
			}
			if got := strings.Join(told, ", "); got != "up 0, up 50, up 100, up 200, up 300, down 200, down 100, down 50, down 0" || s.Cycles != 1 {
				t.Errorf("points %s", got)
			}
		case Step:
			if s.Count != 5 || math.Abs(s.Size.MmHg()-100) > 1e-9 || s.Before != 500*time.Millisecond || s.After != 2*time.Second || s.Direction != Release {
				t.Errorf("step %+v", s)
			}
		}
	}
	if got := strings.Join(kinds, " "); got != "warm_up zero exercise leak static step" {
		t.Errorf("stages %s", got)
	}
	if p := d.HighestPressure(); math.Abs(p.MmHg()-300) > 1e-9 {
		t.Errorf("highest pressure %v mmHg", p.MmHg())
	}
}

// Worked by hand: 1 mmHg + 1 % of the pressure up to 50 mmHg, 3 % above.
func TestAccuracyBand(t *testing.T) {
	d, err := Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	l, _ := d.Limit(Accuracy)
	for p, want := range map[float64]float64{0: 1, -30: 1.3, 20: 1.2, 50: 1.5, 100: 3, 300: 9} {
		low, high := l.At(quantity.MmHg(p))
		if low == nil || high == nil || math.Abs(*high-want) > 1e-9 || *low != -*high {
			t.Errorf("at %v mmHg: %v to %v, want %v", p, low, high, want)
		}
	}
	if _, high := l.At(quantity.MmHg(50.001)); math.Abs(*high-1.50003) > 1e-9 {
		t.Errorf("just above 50 mmHg: %v", *high)
	}
	h, _ := d.Limit(Hysteresis)
	if low, high := h.At(quantity.MmHg(100)); *low != -1 || *high != 1 {
		t.Errorf("hysteresis: %v to %v", *low, *high)
	}
}

func sides(low, high *float64, wantLow, wantHigh float64) bool {
	same := func(p *float64, want float64) bool {
		return p == nil && math.IsNaN(want) || p != nil && math.Abs(*p-want) <= 1e-12*math.Abs(want)
	}
	return same(low, wantLow) && same(high, wantHigh)
}

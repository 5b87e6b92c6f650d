package setup

import (
	"strings"
	"testing"
	"time"
)

func TestOverdue(t *testing.T) {
	good := simulatedFile(t, 1)
	readout := strings.Replace(good, "certificate = \"HI-2026-0118\"\ndue = \"2027-03-01\"", "certificate = \"HI-2026-0118\"\ndue = \"2026-05-31\"", 1)
	for _, c := range []struct{ file, at, want string }{
		{good, "2026-06-01T08:00:00Z", ""},
		{good, "2027-03-01T23:59:59Z", ""}, // a certificate holds until the end of its day
		{good, "2027-03-02T00:00:00Z", "reference HI-2026-0117 2027-03-01;readout HI-2026-0118 2027-03-01;"},
		{good, "2027-03-02T00:30:00+02:00", ""}, // which is still the first, in UTC
		{readout, "2026-06-01T08:00:00Z", "readout HI-2026-0118 2026-05-31;"},
	} {
		f, err := Load("bench.toml", []byte(c.file))
		if err != nil {
			t.Fatal(err)
		}
		at, err := time.Parse(time.RFC3339, c.at)
		if err != nil {
			t.Fatal(err)
		}
		got := ""
		for _, o := range f.Overdue(at) {
			got += o.Of + " " + o.Number + " " + o.Due + ";"
		}
		if got != c.want {
			t.Errorf("at %s: %q, want %q", c.at, got, c.want)
		}
	}
}

// The corrections of the simulated bench stand from -50 to 400 mmHg; its
// reference goes from -50 to 400 mmHg or less.
func TestCertified(t *testing.T) {
	good := simulatedFile(t, 1)
	for _, c := range []struct {
		file      string
		low, high float64
	}{
		{strings.Replace(good, `at = "400 mmHg"`, `at = "361 mmHg"`, 1), -50, 361},
		{strings.Replace(good, `range_high = "`, `range_high = "340 mmHg" # "`, 1), -50, 340},
	} {
		f, err := Load("bench.toml", []byte(c.file))
		if err != nil {
			t.Fatal(err)
		}
		low, high := f.Certified()
		if low.MmHg() != c.low && low.MmHg() > -29 || high.MmHg() < c.high-1e-9 || high.MmHg() > c.high+1e-9 {
			t.Errorf("%v to %v mmHg, want %v to %v", low.MmHg(), high.MmHg(), c.low, c.high)
		}
	}
}

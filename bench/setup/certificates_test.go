package setup

import (
	"slices"
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

// A certificate that gives errors is taken with the other sign; one that gives
// both is refused.
func TestErrorsOfACertificate(t *testing.T) {
	good := simulatedFile(t, 1)
	before, after, _ := strings.Cut(good, "[[reference.certificate.correction]]")
	_, rest, _ := strings.Cut(after, "[uut]")
	with := func(tables string) (*File, error) {
		return Load("bench.toml", []byte(before+tables+"[uut]"+rest))
	}
	f, err := with("[[reference.certificate.error]]\nat = \"0 mmHg\"\nerror = \"0 mmHg\"\n[[reference.certificate.error]]\nat = \"200 mmHg\"\nerror = \"0.06 mmHg\"\n" +
		"[[reference.certificate.error]]\nat = \"40 kPa\"\nerror = \"-0.02 kPa\"\n")
	if err != nil {
		t.Fatal(err)
	}
	want := []Correction{{"0 mmHg", "0 mmHg"}, {"200 mmHg", "-0.06 mmHg"}, {"40 kPa", "0.02 kPa"}}
	if !slices.Equal(f.Reference.Certificate.Corrections, want) {
		t.Errorf("%v, want %v", f.Reference.Certificate.Corrections, want)
	}
	for _, bad := range []string{
		"[[reference.certificate.error]]\nat = \"0 mmHg\"\nerror = \"0 mmHg\"\n[[reference.certificate.correction]]\nat = \"0 mmHg\"\ncorrection = \"0 mmHg\"\n",
		"[[reference.certificate.error]]\nat = \"100 mmHg\"\nerror = \"0 mmHg\"\n[[reference.certificate.error]]\nat = \"0 mmHg\"\nerror = \"0 mmHg\"\n",
		"[[reference.certificate.error]]\nat = \"0 mmHg\"\nerror = \"0.06\"\n",
	} {
		if _, err := with(bad); err == nil {
			t.Errorf("taken: %s", bad)
		}
	}
}

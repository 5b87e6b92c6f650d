package simulated

import (
	"bytes"
	"fmt"
	"strings"
	"time"
)

// BenchFile writes the bench file that describes this bench to whoever is to
// use it, with the reference's certificate as drawn. ports names the port of
// each role; a role without one is named after itself, as an in-memory bench
// does. It tells nothing of the truth.
func (b *Bench) BenchFile(ports map[string]string) []byte {
	port := func(role string) string {
		if p, ok := ports[role]; ok {
			return quoted(p)
		}
		return quoted(role)
	}
	var w bytes.Buffer
	fmt.Fprintf(&w, `# A simulated bench. Everybody and everything named here is invented.
schema = "kymobench/bench/1"
department = "Clinical engineering, Hollerbrook Infirmary"
bench = "Pressure bench 2"
simulated = true
keys = "trust"

[pressure]
highest = "330 mmHg"
lowest = "-30 mmHg"
volume = "60 mL"

[reference]
name = "reference manometer"
port = %s
%sresolution = "%g mmHg"
response_time = "0.3 s"
response_time_tolerance = "0.1 s"
range_low = "%g mmHg"
range_high = "%g mmHg"
height = "0 mm"
answer_within = "1 s"

[reference.certificate]
number = "HI-2026-0117"
laboratory = "Pressure laboratory, Hollerbrook Infirmary"
date = "%s"
due = "%s"
coverage_factor = %.1f
uncertainty = "%g mmHg"
uncertainty_of_reading = "%g %%"
`, port(RoleReference), b.referenceKeys(), referenceResolution, sourceLow, sourceHigh,
		b.day(-91), b.day(273), certificateK, certificatePoint, certificateShare*100)
	for i, c := range b.drawn.correction {
		fmt.Fprintf(&w, "\n[[reference.certificate.correction]]\nat = \"%g mmHg\"\ncorrection = \"%.2f mmHg\"\n", nodeLow+nodeStep*float64(i), c)
	}
	fmt.Fprintf(&w, `
[uut]
port = %s
%sunit = "uV/V"
resolution = "%g uV/V"
sample_period = "1 ms"
sample_period_tolerance = "%g %%"
excitation = "5 V"
nominal_sensitivity = "%g uV/V/mmHg"
height = "0 mm"
height_uncertainty = "%g mm"
fluid = "water"
delay = "9 ms"
delay_uncertainty = "8 ms"

[readout]
name = "bridge converter"
family = "scpi"
port = %s
identify = "*IDN?"
identity = %s
uptime = "SYST:UPT?"
gain_uncertainty = "%g %%"
zero_uncertainty = "%g uV/V"
coverage_factor = %.1f
certificate = "HI-2026-0118"
due = "%s"
filters = []

[source]
port = %s
%s
[valve]
port = %s
%sedge_time = "%g ms"
edge_time_tolerance = "%g %%"
`, port(RoleUUT), b.uutKeys(), converterResolution, clockTolerance*100, nominal, heightSD,
		port(RoleReadout), quoted(identityOfReadout(1)), readoutGain*100, readoutZero, readoutK, b.day(273),
		port(RoleSource), b.sourceKeys(),
		port(RoleValve), b.valveKeys(), edge*1000, edgeTolerance*100)
	w.WriteString(b.appliedTable())
	for i := range b.others {
		fmt.Fprintf(&w, `
[[another_uut]]
port = %s

[another_uut.readout]
name = "bridge converter %d"
family = "scpi"
port = %s
identify = "*IDN?"
identity = %s
uptime = "SYST:UPT?"
gain_uncertainty = "%g %%"
zero_uncertainty = "%g uV/V"
coverage_factor = %.1f
certificate = "HI-2026-0118"
due = "%s"
filters = []
`, port(numbered(RoleUUT, i+2)), i+2, port(numbered(RoleReadout, i+2)), quoted(identityOfReadout(i+2)), readoutGain*100, readoutZero, readoutK, b.day(273))
	}
	return w.Bytes()
}

// day is a date some days from the one the certificates are dated for.
func (b *Bench) day(days int) string {
	today := b.settings.Today
	if today.IsZero() {
		today = firstDay()
	}
	return today.UTC().AddDate(0, 0, days).Format(time.DateOnly)
}

// quoted writes a TOML basic string.
func quoted(s string) string {
	var w strings.Builder
	w.WriteByte('"')
	for _, r := range s {
		switch {
		case r == '"' || r == '\\':
			w.WriteByte('\\')
			w.WriteRune(r)
		case r < ' ' || r == 0x7f:
			fmt.Fprintf(&w, "\\u%04X", r)
		default:
			w.WriteRune(r)
		}
	}
	w.WriteByte('"')
	return w.String()
}

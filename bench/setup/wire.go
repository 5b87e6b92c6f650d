package setup

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"kymobench/bench/instruments/modbus"
	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
)

// roleKeys are the keys of a role beside those of its family.
func roleKeys(role string) string {
	return map[string]string{
		"reference": "name zero resolution response_time response_time_tolerance lag lag_uncertainty range_low range_high height certificate ",
		"source":    "name set hold vent ",
		"valve":     "name release shut edge_time edge_time_tolerance ",
		"uut": "resolution sample_period sample_period_tolerance excitation nominal_sensitivity height height_uncertainty fluid " +
			"delay delay_uncertainty ",
		"readout": "name gain_uncertainty zero_uncertainty excitation_uncertainty coverage_factor certificate due " +
			"filters ",
	}[role]
}

// readoutWire are the keys that a readout has only when it can be asked.
func readoutWire() []string {
	return strings.Fields(keysOf(familySCPI, "", false) + keysOf(familyLines, modeAsked, false) + keysOf(familyModbus, "", false))
}

// dialogue takes the port of an instrument and how it is asked, at a path of
// the file. A readout without a port cannot be asked, so it has no questions
// either.
func (l *loader) dialogue(role, name string, in *wireKeys, d *Dialogue, path ...any) {
	at := func(key string) []any { return to(path, key) }
	*d = Dialogue{Name: name}
	if d.Name == "" {
		d.Name = role
	} else {
		l.check(tomlfile.LongestIdentity, at("name")...)
	}
	if role == "readout" && !l.doc.Has(at("port")...) {
		for _, key := range readoutWire() {
			l.demand(!l.doc.Has(at(key)...), fmt.Sprintf("%s of a readout that has no port", key), "state its port, or leave this out", at(key)...)
		}
		return
	}
	read := role == "reference" || role == "uut"
	families := []string{familySCPI, familyLines, familyModbus}
	switch {
	case read:
		families = []string{familySCPI, familyLines, familyFrames, familyModbus}
	case role == "valve":
		families = append(families, familyRelay)
	}
	d.Family = tomlfile.TakeWord(l.doc, &l.err, families, at("family")...)
	switch {
	case d.Family == familyLines && read:
		d.Mode = tomlfile.TakeWord(l.doc, &l.err, []string{modeAsked, modeRunning}, at("mode")...)
	case d.Family == familyFrames:
		d.Mode = modeRunning
	case d.Family != familyRelay:
		d.Mode = modeAsked
	}
	if l.err != nil {
		return
	}
	l.only("a "+strings.ReplaceAll(role, "uut", "UUT"), d.Family, roleKeys(role)+keysOf(d.Family, d.Mode, read), path...)
	d.Port = tomlfile.TakeText(l.doc, &l.err, longestPort, at("port")...)
	l.mode(in, d, path...)
	d.Within = 2 * time.Second
	if l.doc.Has(at("answer_within")...) {
		within := quantity.Span(l.optional(quantity.DimSpan, at("answer_within")...))
		l.demand(within >= 1e-3 && within <= 60, "an answer is waited for between 1 ms and 60 s", "", at("answer_within")...)
		if l.err == nil {
			d.Within = within.Duration()
		}
	}
	if d.Mode == modeAsked {
		l.asked(in, d, path...)
	}
}

// asked takes the questions and commands that every asked instrument has.
func (l *loader) asked(in *wireKeys, d *Dialogue, path ...any) {
	at := func(key string) []any { return to(path, key) }
	has := func(key string) bool { return l.doc.Has(at(key)...) }
	if d.Family == familySCPI || has("identify") || has("identity") {
		d.Identify = tomlfile.TakeText(l.doc, &l.err, longestCommand, at("identify")...)
		d.Identity = tomlfile.TakeText(l.doc, &l.err, longestCommand, at("identity")...)
	}
	d.Uptime = l.command(at("uptime")...)
	d.Clear = l.command(at("clear")...)
	d.Errors = l.command(at("errors")...)
	d.Acknowledged = l.command(at("acknowledged")...)
	if d.Family != familyModbus {
		return
	}
	l.needs(at("station"), "station = 1")
	l.demand(in.Station >= 1 && in.Station <= 247, "a station has a number from 1 to 247", "", at("station")...)
	d.Station = in.Station
	order := func(key string) bool {
		return has(key) && tomlfile.TakeWord(l.doc, &l.err, []string{"high-first", "low-first"}, at(key)...) == "low-first"
	}
	d.Order = modbusOrder(order("byte_order"), order("word_order"))
	for _, key := range []string{"identify", "uptime"} {
		if has(key) {
			l.sentence(question, at(key)...)
		}
	}
}

// modbusOrder is the order of a number's bytes whose registers hold the low
// byte first, and which stands with its low register first.
func modbusOrder(lowByte, lowWord bool) string {
	switch {
	case lowByte && lowWord:
		return "little-endian"
	case lowWord:
		return "big-endian-swapped"
	case lowByte:
		return "little-endian-swapped"
	}
	return "big-endian"
}

// question and command are the words of Modbus, which package modbus reads.
func question(s string) error { _, err := modbus.ParseQuestion(s); return err }
func command(s string) error  { _, err := modbus.ParseCommand(s); return err }

func (l *loader) sentence(parse func(string) error, path ...any) {
	tomlfile.Take(l.doc, &l.err, func(s string) (string, error) { return s, parse(s) }, path...)
}

// mode takes how characters go over the port.
func (l *loader) mode(in *wireKeys, d *Dialogue, path ...any) {
	at := func(key string) []any { return to(path, key) }
	has := func(key string) bool { return l.doc.Has(at(key)...) }
	d.Baud = l.baud(in.Baud, path...)
	d.DataBits, d.StopBits, d.Parity = 8, 1, "none"
	if has("data_bits") {
		l.demand(in.DataBits == 7 || in.DataBits == 8, "a character has 7 or 8 data bits", "", at("data_bits")...)
		binary := d.Family == familyFrames || d.Family == familyModbus
		l.demand(in.DataBits == 8 || !binary, "bytes do not go through 7 data bits", "data_bits = 8, or a family of text", at("data_bits")...)
		d.DataBits = in.DataBits
	}
	if has("parity") {
		d.Parity = tomlfile.TakeWord(l.doc, &l.err, []string{"none", "odd", "even", "mark", "space"}, at("parity")...)
	}
	if has("stop_bits") {
		l.demand(in.StopBits == 1 || in.StopBits == 2, "a character has 1 or 2 stop bits", "", at("stop_bits")...)
		d.StopBits = in.StopBits
	}
	if has("terminator") {
		d.Terminator = map[string]string{"lf": "\n", "cr": "\r", "crlf": "\r\n"}[tomlfile.TakeWord(l.doc, &l.err, []string{"lf", "cr", "crlf"}, at("terminator")...)]
	}
	d.Echo = in.Echo
}

// needs refuses a table without a key that is not a text.
func (l *loader) needs(path []any, example string) {
	if l.err == nil && !l.doc.Has(path...) {
		l.refuse(l.doc.Missing(example, path...))
	}
}

// baud gives 9600 where none is stated.
func (l *loader) baud(stated int, path ...any) int {
	path = append(slices.Clone(path), "baud")
	if !l.doc.Has(path...) {
		return 9600
	}
	l.demand(stated >= 50 && stated <= 12_000_000, "no serial port has that rate", "usual rates are 9600 and 115200", path...)
	return stated
}

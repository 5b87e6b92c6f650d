package setup

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"math"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"kymobench/bench/instruments/modbus"
	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
)

// Schema is the form of bench file that Load reads.
const Schema = "kymobench/bench/1"

type benchFile struct {
	Schema     string         `toml:"schema"`
	Department string         `toml:"department"`
	Bench      string         `toml:"bench"`
	Simulated  bool           `toml:"simulated"`
	Keys       string         `toml:"keys"`
	Pressure   *pressureTable `toml:"pressure"`
	Reference  *instrument    `toml:"reference"`
	UUT        *uutTable      `toml:"uut"`
	Others     []otherTable   `toml:"another_uut"`
	Applied    *appliedTable  `toml:"applied"`
	Readout    *readoutTable  `toml:"readout"`
	Source     *instrument    `toml:"source"`
	Valve      *instrument    `toml:"valve"`
}

type pressureTable struct {
	Highest string `toml:"highest"`
	Lowest  string `toml:"lowest"`
	Volume  string `toml:"volume"`

	OwnLeak            string `toml:"own_leak"`
	OwnLeakUncertainty string `toml:"own_leak_uncertainty"`
}

// instrument holds the keys of every role but that of the UUT; keysOf and roles
// say which of them a table may have.
type instrument struct {
	wireKeys
	numberKeys
	Name string `toml:"name"`

	Zero                  string            `toml:"zero"`
	Resolution            string            `toml:"resolution"`
	ResponseTime          string            `toml:"response_time"`
	ResponseTimeTolerance string            `toml:"response_time_tolerance"`
	Lag                   string            `toml:"lag"`
	LagUncertainty        string            `toml:"lag_uncertainty"`
	RangeLow              string            `toml:"range_low"`
	RangeHigh             string            `toml:"range_high"`
	Height                string            `toml:"height"`
	Certificate           *certificateTable `toml:"certificate"`

	Set  string `toml:"set"`
	Hold string `toml:"hold"`
	Vent string `toml:"vent"`

	Release           string `toml:"release"`
	Shut              string `toml:"shut"`
	EdgeTime          string `toml:"edge_time"`
	EdgeTimeTolerance string `toml:"edge_time_tolerance"`
}

type readoutTable struct {
	wireKeys
	Name            string   `toml:"name"`
	GainUncertainty string   `toml:"gain_uncertainty"`
	ZeroUncertainty string   `toml:"zero_uncertainty"`
	Excitation      string   `toml:"excitation_uncertainty"`
	CoverageFactor  float64  `toml:"coverage_factor"`
	Certificate     string   `toml:"certificate"`
	Due             string   `toml:"due"`
	Filters         []string `toml:"filters"`
}

type certificateTable struct {
	Number               string            `toml:"number"`
	Laboratory           string            `toml:"laboratory"`
	Date                 string            `toml:"date"`
	Due                  string            `toml:"due"`
	CoverageFactor       float64           `toml:"coverage_factor"`
	Uncertainty          string            `toml:"uncertainty"`
	UncertaintyOfReading string            `toml:"uncertainty_of_reading"`
	DriftOfReading       string            `toml:"drift_of_reading"`
	DriftOfReadingYearly string            `toml:"drift_of_reading_per_year"`
	DriftYearly          string            `toml:"drift_per_year"`
	Temperature          string            `toml:"temperature_of_reading"`
	Corrections          []correctionTable `toml:"correction"`
	Errors               []errorTable      `toml:"error"`
}

// errorTable is what a certificate states that gives errors, reading less true
// pressure, in place of corrections.
type errorTable struct {
	At    string `toml:"at"`
	Error string `toml:"error"`
}

type correctionTable struct {
	At         string `toml:"at"`
	Correction string `toml:"correction"`
}

type uutTable struct {
	wireKeys
	numberKeys
	Resolution            string `toml:"resolution"`
	SamplePeriod          string `toml:"sample_period"`
	SamplePeriodTolerance string `toml:"sample_period_tolerance"`
	Excitation            string `toml:"excitation"`
	NominalSensitivity    string `toml:"nominal_sensitivity"`
	Height                string `toml:"height"`
	HeightUncertainty     string `toml:"height_uncertainty"`
	Fluid                 string `toml:"fluid"`
	Delay                 string `toml:"delay"`
	DelayUncertainty      string `toml:"delay_uncertainty"`
}

// appliedTable is the applied pressure, a second number in the UUT's frames or
// lines.
type appliedTable struct {
	Unit       string   `toml:"unit"`
	Resolution string   `toml:"resolution"`
	Column     int      `toml:"column"`
	Number     string   `toml:"number"`
	Scale      float64  `toml:"scale"`
	Offset     float64  `toml:"offset"`
	OverRange  []string `toml:"over_range"`
}

// otherTable is a further UUT on the manifold: what it does not state is as in
// [uut] and [readout].
type otherTable struct {
	Name              string        `toml:"name"`
	Port              string        `toml:"port"`
	Column            int           `toml:"column"`
	Height            string        `toml:"height"`
	HeightUncertainty string        `toml:"height_uncertainty"`
	Readout           *readoutTable `toml:"readout"`
}

type loader struct {
	doc  *tomlfile.Document
	file benchFile
	err  error
}

// Load reads a bench file. Every error is a *tomlfile.Error with its place.
func Load(name string, data []byte) (*File, error) {
	l := &loader{}
	doc, err := tomlfile.Read(name, data, &l.file)
	if err != nil {
		return nil, err
	}
	l.doc = doc
	sum := sha256.Sum256(data)
	f := &File{Name: name, Source: bytes.Clone(data), SHA256: hex.EncodeToString(sum[:])}
	tomlfile.TakeWord(doc, &l.err, []string{Schema}, "schema")
	f.Department = l.text("department")
	f.Bench = l.text("bench")
	f.Simulated = l.file.Simulated
	f.Keys = tomlfile.TakeIf(doc, &l.err, inside, "keys")
	l.tables()
	if l.err != nil {
		return nil, l.err
	}
	f.Highest = l.pressure("pressure", "highest")
	f.Lowest = l.pressure("pressure", "lowest")
	l.demand(f.Lowest <= 0 && f.Highest > 0, "lowest to highest does not hold atmosphere, where every run begins", "", "pressure", "lowest")
	f.Volume = tomlfile.TakeIf(doc, &l.err, millilitres, "pressure", "volume")
	f.OwnLeak = tomlfile.TakeIf(doc, &l.err, rate, "pressure", "own_leak")
	f.OwnLeakUncertainty = tomlfile.TakeIf(doc, &l.err, rate, "pressure", "own_leak_uncertainty")
	l.demand((f.OwnLeak == "") == (f.OwnLeakUncertainty == ""), "the bench's own leak and its standard uncertainty are stated together", "", "pressure", "volume")
	l.reference(f)
	l.uut(f)
	l.applied(f)
	l.readout(f)
	l.others(f)
	l.source(f)
	l.valve(f)
	l.together(f)
	if l.err != nil {
		return nil, l.err
	}
	return f, nil
}

// inside takes the name of a folder beside the file: never one elsewhere, for
// a bench file may come from elsewhere itself.
func inside(s string) (string, error) {
	if !filepath.IsLocal(s) {
		return "", fmt.Errorf("%q is no folder beside this file", s)
	}
	return s, nil
}

// tables refuses a file that lacks one, and keys that a role does not have.
func (l *loader) tables() {
	for _, name := range []string{"pressure", "reference", "uut", "source", "valve"} {
		if l.err == nil && !l.doc.Has(name) {
			l.refuse(l.doc.Missing("a table ["+name+"]", name))
		}
	}
}

const (
	longestPort    = 256 // characters: a path of the operating system
	longestCommand = 200 // characters: a line of a dialogue holds 256 bytes
)

// command takes a line to be sent that may be absent.
func (l *loader) command(path ...any) string {
	if !l.doc.Has(path...) {
		return ""
	}
	return l.told(path...)
}

// told takes a line to be sent.
func (l *loader) told(path ...any) string {
	text := tomlfile.TakeText(l.doc, &l.err, longestCommand, path...)
	if l.err != nil {
		return ""
	}
	out, err := controls(text)
	if err != nil {
		l.refuse(l.doc.Refuse(err.Error(), "", path...))
	}
	return out
}

func (l *loader) reference(f *File) {
	in, r := l.file.Reference, &f.Reference
	l.dialogue("reference", in.Name, &in.wireKeys, &r.Dialogue, "reference")
	l.unit(quantity.DimPressure, "reference", "unit")
	r.Read, r.Field = l.number(&in.numberKeys, &r.Dialogue, "reference")
	r.Zero = l.command("reference", "zero")
	if r.Zero != "" && r.Family == familyModbus {
		l.sentence(command, "reference", "zero")
	}
	r.Resolution = l.above(quantity.DimPressure, "reference", "resolution")
	r.ResponseTime = l.width(quantity.DimSpan, "reference", "response_time")
	r.ResponseTimeTolerance = l.widthIf(quantity.DimSpan, "reference", "response_time_tolerance")
	r.Lag = l.widthIf(quantity.DimSpan, "reference", "lag")
	r.LagUncertainty = l.widthIf(quantity.DimSpan, "reference", "lag_uncertainty")
	l.demand((r.Lag == "") == (r.LagUncertainty == ""), "the reference's lag and its standard uncertainty are stated together", "", "reference", "response_time")
	r.RangeLow = l.stated(quantity.DimPressure, "reference", "range_low")
	r.RangeHigh = l.stated(quantity.DimPressure, "reference", "range_high")
	l.demand(l.pressure("reference", "range_low") < l.pressure("reference", "range_high"), "the lowest pressure of the range is not below the highest", "", "reference", "range_low")
	r.Height = l.stated(quantity.DimLength, "reference", "height")
	if l.err == nil && in.Certificate == nil {
		l.refuse(l.doc.Missing("a table [reference.certificate]: without it nothing can be judged", "reference", "certificate"))
	}
	if l.err == nil {
		l.certificate(in.Certificate, &r.Certificate)
	}
}

func (l *loader) certificate(in *certificateTable, out *Certificate) {
	at := func(key string) []any { return []any{"reference", "certificate", key} }
	out.Number = l.text(at("number")...)
	out.Laboratory = tomlfile.TakeText(l.doc, &l.err, longestCommand, at("laboratory")...)
	out.Date = tomlfile.Take(l.doc, &l.err, day, at("date")...)
	out.Due = tomlfile.Take(l.doc, &l.err, day, at("due")...)
	l.demand(out.Date < out.Due, "the certificate is due before its date", "", at("due")...)
	out.CoverageFactor = l.coverage(in.CoverageFactor, at("coverage_factor")...)
	out.Uncertainty = l.width(quantity.DimPressure, at("uncertainty")...)
	out.UncertaintyOfReading = l.width(quantity.DimNone, at("uncertainty_of_reading")...)
	out.DriftPercent = l.widthIf(quantity.DimNone, at("drift_of_reading")...)
	out.DriftOfReadingPerYear = l.widthIf(quantity.DimNone, at("drift_of_reading_per_year")...)
	out.DriftPerYear = l.widthIf(quantity.DimPressure, at("drift_per_year")...)
	l.demand(out.DriftPercent == "" || out.DriftOfReadingPerYear == "", "the drift of the reading is stated twice, since the date and by year",
		"leave one of them out", at("drift_of_reading_per_year")...)
	out.TemperatureOfReading = l.widthIf(quantity.DimNone, at("temperature_of_reading")...)
	nothing := l.optional(quantity.DimPressure, at("uncertainty")...) == 0 && l.optional(quantity.DimNone, at("uncertainty_of_reading")...) == 0
	l.demand(!nothing, "a certificate without any uncertainty", "", at("uncertainty")...)
	l.demand(len(in.Corrections) == 0 || len(in.Errors) == 0, "the certificate gives corrections and errors",
		"a correction is what is added to a reading, an error is the reading less the true pressure: state one of the two", at("error")...)
	l.rising("correction", len(in.Corrections))
	for _, p := range in.Corrections {
		out.Corrections = append(out.Corrections, Correction(p))
	}
	l.rising("error", len(in.Errors))
	for i, p := range in.Errors {
		negative := tomlfile.Take(l.doc, &l.err, opposite, "reference", "certificate", "error", i, "error")
		out.Corrections = append(out.Corrections, Correction{At: p.At, Correction: negative})
	}
}

// rising takes the points of a certificate's table, which stand in the order of
// rising pressure.
func (l *loader) rising(what string, n int) {
	var before quantity.Pressure
	for i := range n {
		point := func(key string) []any { return []any{"reference", "certificate", what, i, key} }
		here := l.pressure(point("at")...)
		l.pressure(point(what)...)
		l.demand(i == 0 || here > before, what+"s stand in the order of rising pressure", "", point("at")...)
		before = here
	}
}

// opposite gives a stated pressure with the other sign, in its own unit.
func opposite(s string) (string, error) {
	v, err := quantity.ParseAs(s, quantity.DimPressure)
	if err != nil {
		return "", err
	}
	if v.Stated == 0 {
		return s, nil
	}
	return strconv.FormatFloat(-v.Stated, 'f', -1, 64) + " " + v.Unit.Name, nil
}

// number takes the question, if there is one, and where the number stands in
// what comes.
func (l *loader) number(in *numberKeys, d *Dialogue, path ...any) (read string, f quantity.Field) {
	if l.err != nil {
		return "", f
	}
	if d.Mode == modeAsked {
		read = l.told(to(path, "read")...)
	}
	switch d.Family {
	case familyFrames:
		return "", l.frameField(in, path...)
	case familyModbus:
		l.scale(in, path...)
		l.sentence(question, to(path, "read")...)
		over := l.wholes(in.OverRange, to(path, "over_range")...)
		if l.err != nil {
			return read, f
		}
		f, err := modbus.Settings{Station: d.Station, Order: d.Order, Read: read, Unit: in.Unit, Scale: in.Scale, Offset: in.Offset, OverRange: over}.Field()
		if err != nil {
			l.refuse(l.doc.Refuse(err.Error(), "", to(path, "read")...))
		}
		return read, f
	}
	return read, l.textField(in, path...)
}

// coverage takes a coverage factor, which is not absent.
func (l *loader) coverage(k float64, path ...any) float64 {
	if l.err == nil && !l.doc.Has(path...) {
		l.refuse(l.doc.Missing("coverage_factor = 2.0", path...))
	}
	l.demand(k >= 1 && k <= 4, "a coverage factor is 1 to 4, usually 2", "", path...)
	return k
}

// day takes a date as 2026-03-02.
func day(s string) (string, error) {
	if _, err := time.Parse(time.DateOnly, s); err != nil {
		return "", fmt.Errorf("%q is no date like 2026-03-02", s)
	}
	return s, nil
}

// rate takes a loss of pressure such as "0.002 mmHg/s", not below zero.
func rate(s string) (string, error) {
	if r, err := quantity.ParsePressureRate(s); err != nil || !(r >= 0) || math.IsInf(float64(r), 1) {
		return "", fmt.Errorf("%q is no loss of pressure like \"0.002 mmHg/s\"", s)
	}
	return s, nil
}

// millilitres takes a volume such as "60 mL".
func millilitres(s string) (string, error) {
	number, ok := strings.CutSuffix(s, " mL")
	if x, err := quantity.ParseDecimal(number); !ok || err != nil || x <= 0 {
		return "", fmt.Errorf("%q is no volume like \"60 mL\"", s)
	}
	return s, nil
}

package setup

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"path/filepath"
	"slices"
	"strings"
	"time"

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
	Readout    *readoutTable  `toml:"readout"`
	Source     *instrument    `toml:"source"`
	Valve      *instrument    `toml:"valve"`
}

type pressureTable struct {
	Highest string `toml:"highest"`
	Lowest  string `toml:"lowest"`
	Volume  string `toml:"volume"`
}

// instrument holds the keys of every asked instrument; keysOf says which of
// them a role has.
type instrument struct {
	Name         string `toml:"name"`
	Family       string `toml:"family"`
	Port         string `toml:"port"`
	Baud         int    `toml:"baud"`
	Identify     string `toml:"identify"`
	Identity     string `toml:"identity"`
	Uptime       string `toml:"uptime"`
	Clear        string `toml:"clear"`
	Errors       string `toml:"errors"`
	AnswerWithin string `toml:"answer_within"`

	Read                  string            `toml:"read"`
	Unit                  string            `toml:"unit"`
	UnitInText            bool              `toml:"unit_in_text"`
	Zero                  string            `toml:"zero"`
	Resolution            string            `toml:"resolution"`
	ResponseTime          string            `toml:"response_time"`
	ResponseTimeTolerance string            `toml:"response_time_tolerance"`
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
	Name            string  `toml:"name"`
	Family          string  `toml:"family"`
	Port            string  `toml:"port"`
	Baud            int     `toml:"baud"`
	Identify        string  `toml:"identify"`
	Identity        string  `toml:"identity"`
	Uptime          string  `toml:"uptime"`
	Clear           string  `toml:"clear"`
	Errors          string  `toml:"errors"`
	AnswerWithin    string  `toml:"answer_within"`
	GainUncertainty string  `toml:"gain_uncertainty"`
	ZeroUncertainty string  `toml:"zero_uncertainty"`
	Excitation      string  `toml:"excitation_uncertainty"`
	CoverageFactor  float64 `toml:"coverage_factor"`
	Certificate     string  `toml:"certificate"`
	Due             string  `toml:"due"`

	Filters []string `toml:"filters"`
}

// dialogue is the part that every asked instrument has.
func (r *readoutTable) dialogue() *instrument {
	return &instrument{Name: r.Name, Family: r.Family, Port: r.Port, Baud: r.Baud, Identify: r.Identify, Identity: r.Identity,
		Uptime: r.Uptime, Clear: r.Clear, Errors: r.Errors, AnswerWithin: r.AnswerWithin}
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
}

type correctionTable struct {
	At         string `toml:"at"`
	Correction string `toml:"correction"`
}

type uutTable struct {
	Family                string `toml:"family"`
	Mode                  string `toml:"mode"`
	Port                  string `toml:"port"`
	Baud                  int    `toml:"baud"`
	Unit                  string `toml:"unit"`
	Width                 int    `toml:"width"`
	Separator             string `toml:"separator"`
	Column                int    `toml:"column"`
	Prefix                string `toml:"prefix"`
	Suffix                string `toml:"suffix"`
	UnitInText            bool   `toml:"unit_in_text"`
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
	l.reference(f)
	l.uut(f)
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
	common := "name family port baud identify identity uptime clear errors answer_within "
	for _, of := range []struct{ role, keys string }{
		{"reference", "read unit unit_in_text zero resolution response_time response_time_tolerance range_low range_high height certificate"},
		{"source", "set hold vent"},
		{"valve", "release shut edge_time edge_time_tolerance"},
	} {
		role, known := of.role, strings.Fields(common+of.keys)
		for _, key := range l.doc.Keys(role) {
			if l.err == nil && !slices.Contains(known, key) {
				l.refuse(l.doc.RefuseKey(fmt.Sprintf("the %s has no key %q", role, key), tomlfile.DidYouMean(key, known), role, key))
			}
		}
	}
}

// dialogue takes what every asked instrument has, at a path of the file. A
// readout without a port cannot be asked, so it has no questions either.
func (l *loader) dialogue(role string, in *instrument, d *Dialogue, path ...any) {
	at := func(name string) []any { return append(slices.Clone(path), name) }
	*d = Dialogue{Name: in.Name, Baud: in.Baud}
	if d.Name == "" {
		d.Name = role
	} else {
		l.check(tomlfile.LongestIdentity, at("name")...)
	}
	if role == "readout" && !l.doc.Has(at("port")...) {
		for _, key := range []string{"family", "baud", "identify", "identity", "uptime", "clear", "errors", "answer_within"} {
			l.demand(!l.doc.Has(at(key)...), fmt.Sprintf("%s of a readout that has no port", key), "state its port, or leave this out", at(key)...)
		}
		return
	}
	d.Family = tomlfile.TakeWord(l.doc, &l.err, []string{"scpi"}, at("family")...)
	d.Port = tomlfile.TakeText(l.doc, &l.err, longestPort, at("port")...)
	d.Identify = tomlfile.TakeText(l.doc, &l.err, longestCommand, at("identify")...)
	d.Identity = tomlfile.TakeText(l.doc, &l.err, longestCommand, at("identity")...)
	d.Uptime = l.command(at("uptime")...)
	d.Clear = l.command(at("clear")...)
	d.Errors = l.command(at("errors")...)
	d.Baud = l.baud(in.Baud, path...)
	d.Within = 2 * time.Second
	if l.doc.Has(at("answer_within")...) {
		within := quantity.Span(l.optional(quantity.DimSpan, at("answer_within")...))
		l.demand(within >= 1e-3 && within <= 60, "an answer is waited for between 1 ms and 60 s", "", at("answer_within")...)
		if l.err == nil {
			d.Within = within.Duration()
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
	return tomlfile.TakeText(l.doc, &l.err, longestCommand, path...)
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

func (l *loader) reference(f *File) {
	in, r := l.file.Reference, &f.Reference
	l.dialogue("reference", in, &r.Dialogue, "reference")
	r.Read = tomlfile.TakeText(l.doc, &l.err, longestCommand, "reference", "read")
	r.Zero = l.command("reference", "zero")
	r.Field = quantity.Field{Unit: l.unit(quantity.DimPressure, "reference", "unit"), UnitInText: in.UnitInText}
	r.Resolution = l.above(quantity.DimPressure, "reference", "resolution")
	r.ResponseTime = l.width(quantity.DimSpan, "reference", "response_time")
	r.ResponseTimeTolerance = l.widthIf(quantity.DimSpan, "reference", "response_time_tolerance")
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
	var before quantity.Pressure
	for i, p := range in.Corrections {
		point := func(key string) []any { return []any{"reference", "certificate", "correction", i, key} }
		here := l.pressure(point("at")...)
		l.pressure(point("correction")...)
		l.demand(i == 0 || here > before, "corrections stand in the order of rising pressure", "", point("at")...)
		before = here
		out.Corrections = append(out.Corrections, Correction(p))
	}
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

// millilitres takes a volume such as "60 mL"; it is told beside a leak and
// enters no arithmetic, so its unit is known here alone.
func millilitres(s string) (string, error) {
	number, ok := strings.CutSuffix(s, " mL")
	if x, err := quantity.ParseDecimal(number); !ok || err != nil || x <= 0 {
		return "", fmt.Errorf("%q is no volume like \"60 mL\"", s)
	}
	return s, nil
}

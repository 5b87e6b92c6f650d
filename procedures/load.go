package procedures

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"math"
	"regexp"

	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
	"kymobench/procedures/verdict"
)

// Schema is the form of procedure file that Load reads.
const Schema = "kymobench/procedure/1"

// The file as it is written. Everything with a unit is text here; load parses
// it with the place at hand.
type definitionFile struct {
	Schema   string        `toml:"schema"`
	ID       string        `toml:"id"`
	Revision int64         `toml:"revision"`
	Title    string        `toml:"title"`
	Purpose  string        `toml:"purpose"`
	UUTKind  string        `toml:"uut_kind"`
	Pressure *pressureFile `toml:"pressure"`
	Decision *decisionFile `toml:"decision"`
	Limits   []limitFile   `toml:"limit"`
	Stages   []stageFile   `toml:"stage"`
}

type pressureFile struct {
	Highest string `toml:"highest"`
	Lowest  string `toml:"lowest"`
}

type decisionFile struct {
	Rule            string   `toml:"rule"`
	GuardFactor     *float64 `toml:"guard_factor"`
	ConditionalPass string   `toml:"conditional_pass"`
	ConditionalFail string   `toml:"conditional_fail"`
}

type limitFile struct {
	Name         string     `toml:"name"`
	Low          string     `toml:"low"`
	High         string     `toml:"high"`
	Bands        []bandFile `toml:"band"`
	Resolution   string     `toml:"resolution"`
	Origin       string     `toml:"origin"`
	OriginStatus string     `toml:"origin_status"`
}

type bandFile struct {
	UpTo      string `toml:"up_to"`
	Constant  string `toml:"constant"`
	OfReading string `toml:"of_reading"`
}

// loader takes a Definition out of a document; the first refusal stays in err
// and ends the taking.
type loader struct {
	doc  *tomlfile.Document
	file definitionFile
	err  error
}

// Load reads a procedure from the bytes of a file; name is what refusals call
// it. Every error is a *tomlfile.Error with line and column. The data are
// copied into the Definition.
func Load(name string, data []byte) (*Definition, error) {
	l := &loader{}
	doc, err := tomlfile.Read(name, data, &l.file)
	if err != nil {
		return nil, err
	}
	l.doc = doc
	sum := sha256.Sum256(data)
	d := &Definition{Name: name, Source: bytes.Clone(data), SHA256: hex.EncodeToString(sum[:])}
	l.head(d)
	l.decision(d)
	l.limits(d)
	l.stages(d)
	l.together(d)
	if l.err != nil {
		return nil, l.err
	}
	return d, nil
}

// longestText is the most characters of a text that is printed as a paragraph.
const longestText = 400

func (l *loader) head(d *Definition) {
	tomlfile.TakeWord(l.doc, &l.err, []string{Schema}, "schema")
	d.ID = tomlfile.Take(l.doc, &l.err, parseID, "id")
	d.Revision = l.file.Revision
	l.demand(d.Revision >= 1, "the revision is counted from 1", "revision = 1", "revision")
	d.Title = l.text(tomlfile.LongestIdentity, "title")
	d.Purpose = l.text(longestText, "purpose")
	l.kind(d)
	d.Highest = l.pressure("pressure", "highest")
	d.Lowest = l.pressure("pressure", "lowest")
	l.demand(d.Lowest < d.Highest, "the lowest pressure is not below the highest", "", "pressure", "lowest")
	l.demand(d.Lowest <= 0, "the lowest pressure is above atmosphere, where every run begins", "", "pressure", "lowest")
}

func (l *loader) kind(d *Definition) {
	d.UUTKind = tomlfile.TakeWord(l.doc, &l.err, []UUTKind{BareTransducer, TransducerWithChannel, Channel}, "uut_kind")
}

func parseID(s string) (string, error) {
	if !regexp.MustCompile(`^[a-z][a-z0-9-]{0,63}$`).MatchString(s) {
		return "", fmt.Errorf("an id is up to 64 small letters, digits and hyphens, beginning with a letter")
	}
	return s, nil
}

func (l *loader) decision(d *Definition) {
	if l.err == nil && l.file.Decision == nil {
		l.err = l.doc.Missing("a table [decision] with rule, guard_factor, conditional_pass, conditional_fail", "decision")
	}
	d.Decision.Rule = tomlfile.TakeWord(l.doc, &l.err, []verdict.Rule{verdict.Simple, verdict.Guarded, verdict.FourOutcome}, "decision", "rule")
	d.Decision.ConditionalPass = tomlfile.Take(l.doc, &l.err, parseVerdict, "decision", "conditional_pass")
	d.Decision.ConditionalFail = tomlfile.Take(l.doc, &l.err, parseVerdict, "decision", "conditional_fail")
	if l.err != nil {
		return
	}
	l.demand(d.Decision.ConditionalFail != verdict.Accepted,
		"a unit measured outside a limit cannot be accepted", "conditional_fail is rejected or inconclusive",
		"decision", "conditional_fail")
	factor := l.file.Decision.GuardFactor
	if d.Decision.Rule == verdict.Simple {
		l.demand(factor == nil, "the simple rule has no guard band", "leave out guard_factor", "decision", "guard_factor")
		return
	}
	if factor == nil {
		l.refuse(l.doc.Missing("guard_factor = 1.0 makes the guard band as wide as the expanded uncertainty", "decision", "guard_factor"))
		return
	}
	d.Decision.GuardFactor = *factor
	l.demand(*factor > 0 && *factor <= 3, "the guard factor is above 0 and at most 3", "", "decision", "guard_factor")
}

func parseVerdict(s string) (verdict.Verdict, error) {
	var v verdict.Verdict
	err := v.UnmarshalText([]byte(s))
	return v, err
}

func (l *loader) limits(d *Definition) {
	l.demand(len(l.file.Limits) > 0, "the procedure has no limits, so nothing can be judged", "", "limit")
	for i := range l.file.Limits {
		lim := Limit{Name: tomlfile.TakeWord(l.doc, &l.err, LimitNames(), "limit", i, "name")}
		_, twice := d.Limit(lim.Name)
		l.demand(!twice, fmt.Sprintf("a second limit for %s", lim.Name), "", "limit", i, "name")
		if l.err != nil {
			return
		}
		lim.Unit, _ = LimitUnit(lim.Name)
		parse := limitValue(lim.Name)
		lim.Low = tomlfile.TakeIf(l.doc, &l.err, pointer(parse), "limit", i, "low")
		lim.High = tomlfile.TakeIf(l.doc, &l.err, pointer(parse), "limit", i, "high")
		lim.Resolution = tomlfile.Take(l.doc, &l.err, parse, "limit", i, "resolution")
		lim.Bands = l.bands(i)
		lim.Origin = l.text(longestText, "limit", i, "origin")
		lim.OriginStatus = tomlfile.TakeWord(l.doc, &l.err, []OriginStatus{OriginSeen, OriginSecondHand,
			OriginMemory, OriginPractice, OriginDepartment}, "limit", i, "origin_status")
		l.limitMakesSense(lim, i)
		l.demand(lim.Name != Sensitivity || d.UUTKind == BareTransducer, fmt.Sprintf("a limit for the sensitivity of a %s, which shows pressure", d.UUTKind),
			"its accuracy holds it", "limit", i, "name")
		d.Limits = append(d.Limits, lim)
	}
}

func (l *loader) limitMakesSense(lim Limit, i int) {
	banded := len(lim.Bands) > 0
	l.demand(!banded || lim.Name == Accuracy, "only accuracy has bands", "state low and high", "limit", i, "band")
	l.demand(!banded || lim.Low == nil && lim.High == nil, "bands beside low or high", "state one or the other", "limit", i, "band")
	l.demand(banded || lim.Low != nil || lim.High != nil,
		fmt.Sprintf("the limit for %s has neither low nor high", lim.Name), "", "limit", i, "low")
	l.demand(lim.Resolution > 0, "the resolution is not above zero", "", "limit", i, "resolution")
	if lim.Low != nil && lim.High != nil {
		l.demand(*lim.Low < *lim.High, "low is not below high", "", "limit", i, "low")
		l.demand(lim.Resolution < (*lim.High-*lim.Low)/2,
			"results rounded to this resolution could not be told from the limits", "", "limit", i, "resolution")
	}
	if lim.Name == NaturalFrequency || lim.Name == DampingRatio || lim.Name == Sensitivity {
		l.demand(lim.Low == nil || *lim.Low > 0, fmt.Sprintf("%s is always above zero", lim.Name), "", "limit", i, "low")
		l.demand(lim.High == nil || *lim.High > 0, fmt.Sprintf("%s is always above zero", lim.Name), "", "limit", i, "high")
	}
}

func (l *loader) bands(i int) []Band {
	var bands []Band
	for j := range l.file.Limits[i].Bands {
		path := []any{"limit", i, "band", j}
		at := func(key string) []any { return append(path[:len(path):len(path)], key) }
		b := Band{
			UpTo:      quantity.Pressure(math.Inf(1)),
			Constant:  tomlfile.TakeIf(l.doc, &l.err, parsePressure, at("constant")...),
			OfReading: tomlfile.TakeIf(l.doc, &l.err, parseShare, at("of_reading")...),
		}
		last := j == len(l.file.Limits[i].Bands)-1
		l.demand(!last || !l.doc.Has(at("up_to")...), "the last band holds for all higher pressures", "leave out up_to", at("up_to")...)
		if !last {
			b.UpTo = l.pressure(at("up_to")...)
			l.demand(j == 0 || b.UpTo > bands[max(0, j-1)].UpTo, "up_to is not above that of the band before", "", at("up_to")...)
		}
		l.demand(b.Constant >= 0, "a band cannot be negative", "", at("constant")...)
		l.demand(b.OfReading >= 0, "a band cannot be negative", "", at("of_reading")...)
		l.demand(b.Constant > 0 || b.OfReading > 0, "a band of no width", "state constant, of_reading or both", path...)
		bands = append(bands, b)
		if l.err != nil {
			return nil
		}
	}
	return bands
}

// demand refuses the value at the path unless ok.
func (l *loader) demand(ok bool, text, hint string, path ...any) {
	if !ok {
		l.refuse(l.doc.Refuse(text, hint, path...))
	}
}

func (l *loader) refuse(e *tomlfile.Error) {
	if l.err == nil {
		l.err = e
	}
}

func (l *loader) text(most int, path ...any) string {
	return tomlfile.TakeText(l.doc, &l.err, most, path...)
}

func (l *loader) pressure(path ...any) quantity.Pressure {
	return tomlfile.Take(l.doc, &l.err, parsePressure, path...)
}

// pointer makes a parser of T one of *T, for values that may be absent.
func pointer[T any](parse func(string) (T, error)) func(string) (*T, error) {
	return func(s string) (*T, error) {
		v, err := parse(s)
		return &v, err
	}
}

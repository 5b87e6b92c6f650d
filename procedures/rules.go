package procedures

import (
	"crypto/sha256"
	"encoding/hex"
	"regexp"

	"kymobench/bench/tomlfile"
)

// LimitsSchema is the form of a file that holds limits and a decision rule and
// nothing else.
const LimitsSchema = "kymobench/limits/1"

// Rules are limits and how an uncertainty counts against them, without a word
// on what is done: what a run that was carried out already can be judged by.
type Rules struct {
	Title    string
	UUTKind  UUTKind
	Decision Decision
	Limits   []Limit

	Name   string // the file's name as given to LoadRules
	SHA256 string // of its bytes, lower-case hex
}

// Rules are those of the procedure.
func (d *Definition) Rules() Rules {
	return Rules{Title: d.Title, UUTKind: d.UUTKind, Decision: d.Decision, Limits: d.Limits, Name: d.Name, SHA256: d.SHA256}
}

// Limit returns the limit of that name, and whether there is one.
func (r *Rules) Limit(name LimitName) (Limit, bool) {
	for _, l := range r.Limits {
		if l.Name == name {
			return l, true
		}
	}
	return Limit{}, false
}

// limitsFile is a file of LimitsSchema as it is written.
type limitsFile struct {
	Schema   string        `toml:"schema"`
	Title    string        `toml:"title"`
	UUTKind  string        `toml:"uut_kind"`
	Decision *decisionFile `toml:"decision"`
	Limits   []limitFile   `toml:"limit"`
}

// LoadRules reads limits from the bytes of a file: a whole procedure, of which
// the stages are not used, or a file of LimitsSchema with title, uut_kind,
// [decision] and [[limit]] as a procedure has them. Every error is a
// *tomlfile.Error with line and column.
func LoadRules(name string, data []byte) (*Rules, error) {
	// Which of the two a file is meant to be decides what is refused in it, so
	// it is looked for before the file is read strictly.
	if !regexp.MustCompile(`(?m)^\s*schema\s*=\s*["']kymobench/limits/`).Match(data) {
		d, err := Load(name, data)
		if err != nil {
			return nil, err
		}
		r := d.Rules()
		return &r, nil
	}
	var file limitsFile
	doc, err := tomlfile.Read(name, data, &file)
	if err != nil {
		return nil, err
	}
	l := &loader{doc: doc, file: definitionFile{Decision: file.Decision, Limits: file.Limits}}
	sum := sha256.Sum256(data)
	d := &Definition{Name: name, SHA256: hex.EncodeToString(sum[:])}
	tomlfile.TakeWord(doc, &l.err, []string{LimitsSchema}, "schema")
	d.Title = l.text(tomlfile.LongestIdentity, "title")
	l.kind(d)
	l.decision(d)
	l.limits(d)
	if l.err != nil {
		return nil, l.err
	}
	r := d.Rules()
	return &r, nil
}

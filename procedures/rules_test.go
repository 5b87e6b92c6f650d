package procedures

import (
	"errors"
	"reflect"
	"strings"
	"testing"

	"kymobench/bench/tomlfile"
)

const limitsOnly = `schema = "kymobench/limits/1"
title = "Limits of another department"
uut_kind = "bare transducer"

[decision]
rule = "simple"
conditional_pass = "accepted"
conditional_fail = "rejected"

[[limit]]
name = "noise"
high = "0.5 mmHg"
resolution = "0.01 mmHg"
origin = "Set by the department"
origin_status = "department"
`

// A procedure gives its own rules; a file of limits alone has the same tables
// and is refused with the place of what is wrong.
func TestLoadRules(t *testing.T) {
	d, err := Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	r, err := LoadRules(d.Name, d.Source)
	if err != nil || !reflect.DeepEqual(*r, d.Rules()) || len(r.Limits) != len(d.Limits) || r.SHA256 != d.SHA256 {
		t.Errorf("%+v, %v", r, err)
	}
	r, err = LoadRules("my.toml", []byte(limitsOnly))
	if err != nil {
		t.Fatal(err)
	}
	l, ok := r.Limit(Noise)
	if !ok || *l.High != 0.5 || l.Low != nil || r.UUTKind != BareTransducer || r.Title != "Limits of another department" || len(r.SHA256) != 64 {
		t.Errorf("%+v", r)
	}
	for _, c := range []struct{ from, to, text string }{
		{"title = ", "[[stage]]\nkind = \"zero\"\n#", `my.toml:2:3: unknown table "stage"`},
		{`"0.5 mmHg"`, `"0.5"`, `my.toml:12:8: "0.5": a number, a blank and a unit are expected, as in "300 mmHg"`},
		{`limits/1`, `limits/2`, `my.toml:1:10: "kymobench/limits/2" is no schema`},
		{`"bare transducer"`, `"channel"`, ""},
		{`name = "noise"`, `name = "sensitivity"`, `my.toml:12:8: "0.5 mmHg": mmHg is a unit of something else`},
		{`conditional_pass = "accepted"`, ``, `my.toml:5:2: key "conditional_pass" is missing in [decision]`},
	} {
		_, err := LoadRules("my.toml", []byte(strings.Replace(limitsOnly, c.from, c.to, 1)))
		var e *tomlfile.Error
		if c.text == "" && err != nil || c.text != "" && (!errors.As(err, &e) || e.Error() != c.text) {
			t.Errorf("%s: %v, want %s", c.to, err, c.text)
		}
	}
}

// A limit that the static stage cannot carry is refused, and one that the kind
// of unit cannot have.
func TestLimitsAndWhatCarriesThem(t *testing.T) {
	d, err := Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	good := string(d.Source)
	limit := func(name, high string) string {
		return "[[limit]]\nname = \"" + name + "\"\nhigh = \"" + high + "\"\nresolution = \"0.01 mmHg\"\norigin = \"x\"\norigin_status = \"department\"\n\n"
	}
	with := func(l string) string { return strings.Replace(good, "[[stage]]", l+"[[stage]]", 1) }
	for _, c := range []struct{ file, want string }{
		{with(limit("zero_return", "1 mmHg")), ""},
		{with(limit("linearity_independent", "1 mmHg")), ""},
		{with(limit("repeatability", "1 mmHg")), "no second cycle, which the limit for repeatability needs"},
		{strings.Replace(with(limit("zero_return", "1 mmHg")), "\"50 mmHg\", \"0 mmHg\",\n]", "\"50 mmHg\",\n]", 1),
			"no down leg back to where the cycle began, which the limit for zero_return needs"},
		{strings.Replace(good, `uut_kind = "bare transducer"`, `uut_kind = "channel"`, 1), "a limit for the sensitivity of a channel, which shows pressure"},
	} {
		_, err := Load("my.toml", []byte(c.file))
		if c.want == "" && err != nil || c.want != "" && (err == nil || !strings.Contains(err.Error(), c.want)) {
			t.Errorf("%v, want %q", err, c.want)
		}
	}
	for _, c := range []struct {
		kind UUTKind
		unit string
		ok   bool
	}{
		{BareTransducer, "uV/V", true}, {BareTransducer, "mV", true}, {BareTransducer, "mmHg", false}, {TransducerWithChannel, "mmHg", true},
		{TransducerWithChannel, "mV", false}, {Channel, "kPa", true}, {Channel, "uV/V", false}, {Channel, "bananas", false},
	} {
		if err := c.kind.PutsOut(c.unit); (err == nil) != c.ok {
			t.Errorf("%s puts out %s: %v", c.kind, c.unit, err)
		}
	}
}

package tomlfile

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"unicode/utf8"
)

// A file with everything a real one has.
type instrumentFile struct {
	Name    string       `toml:"name"`
	Baud    int          `toml:"baud"`
	Factor  float64      `toml:"factor"`
	Truly   bool         `toml:"truly"`
	Points  []string     `toml:"points"`
	Part    *partFile    `toml:"part"`
	Limits  []limitFile  `toml:"limit"`
	Missing *string      `toml:"missing"`
	Inline  []cornerFile `toml:"inline"`
}

type partFile struct {
	Number string     `toml:"number"`
	Corner cornerFile `toml:"corner"`
}

type limitFile struct {
	Name string       `toml:"name"`
	Band []cornerFile `toml:"band"`
}

type cornerFile struct {
	At string `toml:"at"`
}

const sound = `# a comment with a degree sign: 21 °C
name = "réference"
baud = 9_600
factor = 2
truly = true
points = ["0 mmHg",
  "50 mmHg"]

[part]
number = 'HI-1'
corner.at = "5 mm"

[[limit]]
name = "a"
[[limit.band]]
at = "1 mmHg"
[[limit.band]]
at = "2 mmHg"

[[limit]]
name = "b"
`

func TestReadTakesEveryKindOfValue(t *testing.T) {
	for _, lineEnd := range []string{"\n", "\r\n"} {
		for _, mark := range []string{"", "\xef\xbb\xbf"} {
			var f instrumentFile
			d, err := Read("x.toml", []byte(mark+strings.ReplaceAll(sound, "\n", lineEnd)), &f)
			if err != nil {
				t.Fatal(err)
			}
			got := fmt.Sprintf("%s %d %g %t %q %+v %q %v", f.Name, f.Baud, f.Factor, f.Truly, f.Points, *f.Part, f.Limits, f.Missing)
			want := `réference 9600 2 true ["0 mmHg" "50 mmHg"] {Number:HI-1 Corner:{At:5 mm}} [{"a" [{"1 mmHg"} {"2 mmHg"}]} {"b" []}] <nil>`
			if got != want {
				t.Errorf("read\n%s\nwant\n%s", got, want)
			}
			if keys := strings.Join(d.Keys("part"), " "); keys != "number corner" {
				t.Errorf("keys of part: %s", keys)
			}
			if d.Has("missing") || !d.Has("limit", 1, "name") || d.Has("limit", 2) || d.Has("limit", -1) || d.Keys("nothing") != nil {
				t.Error("Has and Keys disagree with the file")
			}
		}
	}
}

// Places were counted by eye in the text above.
func TestAt(t *testing.T) {
	var f instrumentFile
	d, err := Read("x.toml", []byte(sound), &f)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct {
		path         []any
		line, column int
	}{
		{nil, 1, 1},
		{[]any{"name"}, 2, 8},
		{[]any{"points"}, 6, 10},
		{[]any{"points", 0}, 6, 11},
		{[]any{"points", 1}, 7, 3},
		{[]any{"part"}, 9, 2},
		{[]any{"part", "number"}, 10, 10},
		{[]any{"part", "corner", "at"}, 11, 13},
		{[]any{"part", "absent"}, 9, 2},
		{[]any{"absent", "further"}, 1, 1},
		{[]any{"limit", 0, "band", 1, "at"}, 18, 6},
		{[]any{"limit", 1, "band"}, 20, 3},
	} {
		if line, column := d.At(c.path...); line != c.line || column != c.column {
			t.Errorf("%v is at %d:%d, want %d:%d", c.path, line, column, c.line, c.column)
		}
	}
	if e := d.RefuseKey("no", "", "part", "number"); e.Line != 10 || e.Column != 1 {
		t.Errorf("key of part.number is at %d:%d, want 10:1", e.Line, e.Column)
	}
	for _, c := range []struct {
		err  *Error
		want string
	}{
		{d.Refuse("too high", "", "part", "number"), `x.toml:10:10: too high`},
		{d.Missing("", "part", "due"), `x.toml:9:2: key "due" is missing in [part]`},
		{d.Missing("", "limit", 1, "resolution"), `x.toml:20:3: key "resolution" is missing in [[limit]] number 2`},
		{d.Missing("", "department"), `x.toml:1:1: key "department" is missing in the file`},
	} {
		if c.err.Error() != c.want {
			t.Errorf("said %q, want %q", c.err, c.want)
		}
	}
}

func TestCheckText(t *testing.T) {
	var f struct {
		A string `toml:"a"`
		B string `toml:"b"`
		C string `toml:"c"`
		D string `toml:"d"`
		N int    `toml:"n"`
	}
	d, err := Read("x.toml", []byte("a = \"\"\nb = \" x\"\nc = \"éééé\"\nd = \"ééééé\"\nn = 1\n"), &f)
	if err != nil {
		t.Fatal(err)
	}
	for key, want := range map[string]string{
		"a": `x.toml:1:5: key "a" is empty`,
		"b": `x.toml:2:5: key "b" begins or ends with a blank`,
		"c": `<nil>`,
		"d": `x.toml:4:5: key "d" has 5 characters, more than 4`,
		"n": `<nil>`,
		"z": `<nil>`,
	} {
		if got := fmt.Sprint(d.CheckText(4, key)); got != want {
			t.Errorf("%s: %s, want %s", key, got, want)
		}
	}
}

// Each row is a file, what is said and where, and the hint.
func TestRefusals(t *testing.T) {
	for _, c := range []struct{ file, want, hint string }{
		// keys
		{"bauds = 1\n", `1:1: unknown key "bauds"`, `did you mean "baud"?`},
		{"Baud = 1\n", `1:1: unknown key "Baud"`, `did you mean "baud"?`},
		{"baud = 1\n\n[part]\nnumber = \"1\"\n  nubmer = \"2\"\n", `5:3: unknown key "nubmer" in [part]`, `did you mean "number"?`},
		{"[[limit]]\n[[limit]]\nzzz = 1\n", `3:1: unknown key "zzz" in [[limit]] number 2`, `it is one of: name, band`},
		{"[prat]\nx = 1\n", `1:2: unknown table "prat"`, `did you mean "part"?`},
		{"inline = [ {at = \"1\"}, {ta = \"2\"} ]\n", `1:25: unknown key "ta" in [[inline]] number 2`, `did you mean "at"?`},
		{"\"" + strings.Repeat("k", 70) + "\" = 1\n", `1:1: unknown key "` + strings.Repeat("k", 64) + `..."`,
			"it is one of: name, baud, factor, truly, points, part, limit, missing, inline"},
		// twice
		{"baud = 1\nbaud = 2\n", `2:1: key "baud" stands twice, first on line 1`, ""},
		{"[part]\n[part]\n", `2:2: key "part" stands twice, first on line 1`, "put all its keys under one [part]"},
		{"inline = [ {at = \"1\", at = \"2\"} ]\n", `1:23: key "at" stands twice, first on line 1`, ""},
		{"part.number = \"1\"\n[part]\ncorner.at = \"2\"\n", `2:2: table part already exists as defined by a dotted key`, ""},
		{"[[limit]]\n[limit]\n", `2:2: key "limit" stands twice, first on line 1`, ""},
		{"[part]\n[[part]]\n", `2:3: key "part" stands twice, first on line 1`, "put all its keys under one [part]"},
		{"baud = 1\n[baud]\n", `2:2: key "baud" stands twice, first on line 1`, ""},
		{"baud = 1\nbaud.x = 1\n", `2:1: key "baud" stands twice, first on line 1`, ""},
		{"inline = []\n[[inline]]\n", `2:3: key "inline" stands twice, first on line 1`, ""},
		// kinds
		{"name = 3\n", `1:8: key "name" takes text in quotes, not a whole number`, `write it in quotes, with its unit if it has one: "3 mmHg"`},
		{"name = 2026-03-02\n", `1:8: key "name" takes text in quotes, not a date or time`, `write the date in quotes: name = "2026-03-02"`},
		{"name = true\n", `1:8: key "name" takes text in quotes, not true or false`, ""},
		{"baud = \"9600\"\n", `1:8: key "baud" takes a whole number, not text`, "write it without quotes"},
		{"baud = 9600.5\n", `1:8: key "baud" takes a whole number, not a number`, ""},
		{"baud = 99999999999999999999\n", `1:8: key "baud" is too large a number`, ""},
		{"factor = \"2\"\n", `1:10: key "factor" takes a number, not text`, "write it without quotes"},
		{"factor = nan\n", `1:10: key "factor" is not a finite number`, ""},
		{"factor = -inf\n", `1:10: key "factor" is not a finite number`, ""},
		{"factor = 1e400\n", `1:10: key "factor" is not a finite number`, ""},
		{"truly = \"true\"\n", `1:9: key "truly" takes true or false, not text`, "write it without quotes"},
		{"truly = 1\n", `1:9: key "truly" takes true or false, not a whole number`, ""},
		{"points = \"0 mmHg\"\n", `1:10: key "points" takes a list of texts, not text`, ""},
		{"points = [\"0 mmHg\", 50]\n", `1:21: key "points", item 2, takes text in quotes, not a whole number`, `write it in quotes, with its unit if it has one: "50 mmHg"`},
		{"part = \"x\"\n", `1:8: key "part" takes a table, not text`, ""},
		{"[[part]]\n", `1:3: key "part" takes a table, not a list`, "write [part] instead of [[part]]"},
		{"[limit]\nname = \"a\"\n", `1:2: key "limit" takes a list of tables, not a table`, "write [[limit]] instead of [limit]"},
		// syntax
		{"baud\n", `1:5: an equals sign is missing after the key`, ""},
		{"baud = \nname = \"x\"\n", `1:8: the value is missing`, ""},
		{"baud =", `1:6: the value is missing`, ""},
		{"name = 3 mmHg\n", `1:10: something stands after the value: 'm'`, `text stands in quotes, and so does a value with its unit: name = "3 mmHg"`},
		{"name = reference\n", `1:8: not a value: 'r'`, `text stands in quotes, and so does a value with its unit: name = "reference"`},
		{"name = \"x\n", `1:10: text without its closing quote`, ""},
		{"name = 'x", `1:9: text without its closing quote`, ""},
		{"name = \"C:\\port\"\n", `1:11: a backslash with a meaning that text does not know: 'p'`, `write \\ for a backslash, or put the text between '`},
		{"truly = True\n", `1:9: not a value: 'T'`, "write truly = true"},
		{"baud = 010\n", `1:8: integers cannot have leading zeroes`, `text stands in quotes, and so does a value with its unit: baud = "010"`},
		{"[part\n", `1:6: expected ']' to close table name`, ""},
		{"höhe = 1\n", `1:2: an equals sign is missing after the key`, ""},
		{"= 1\n", `1:1: not a key: '='`, ""},
		{"points = [\"a\"\n", `1:14: array is incomplete`, ""},
		// characters
		{"# \u202e\n", "1:3: a character that does not show (U+202E)", "delete it"},
		{"name = \"é\u200bx\"\n", "1:10: a character that does not show (U+200B)", "delete it"},
		{"name = \"a\x1bb\"\n", "1:10: a character that does not show (U+001B)", "delete it"},
		{"name = \"a\u0085\"\n", "1:10: a character that does not show (U+0085)", "delete it"},
		{"# \u2028\n", "1:3: a character that does not show (U+2028)", "delete it"},
		{"name = \"a\"\rbaud = 1\n", "1:11: a character that does not show (U+000D)", "delete it"},
		{"name = \"\\u202E\"\n", "1:8: text with a character that does not show (U+202E)", ""},
		{"name = \"a\\nb\"\n", "1:8: text with a character that does not show (U+000A)", ""},
		{"name = \"\"\"a\nb\"\"\"\n", "1:8: text with a character that does not show (U+000A)", ""},
		{"\n# \xe9\n", "2:3: a byte that is not UTF-8", "save the file as UTF-8"},
		// depth
		{strings.Repeat("a.", 16) + "a = 1\n", "1:33: more than 16 tables and lists inside each other", ""},
		{"a = " + strings.Repeat("[", 30) + strings.Repeat("]", 30) + "\n", "1:5: more than 16 tables and lists inside each other", ""},
		{"[" + strings.Repeat("a.", 16) + "a]\n", "1:34: more than 16 tables and lists inside each other", ""},
		{"a = " + strings.Repeat("{a=", 30) + "1" + strings.Repeat("}", 30) + "\n", "1:51: more than 16 tables and lists inside each other", ""},
	} {
		var f instrumentFile
		d, err := Read("x.toml", []byte(c.file), &f)
		var refusal *Error
		if !errors.As(err, &refusal) || d != nil {
			t.Errorf("%.60q: %v, not refused", c.file, err)
			continue
		}
		if refusal.Error() != "x.toml:"+c.want || refusal.Hint != c.hint {
			t.Errorf("%.60q\nsaid %s\nwant x.toml:%s\nhint %s\nwant %s", c.file, refusal, c.want, refusal.Hint, c.hint)
		}
	}
}

func TestLargestFile(t *testing.T) {
	var f instrumentFile
	pad := "#" + strings.Repeat(" ", LargestFile-2) + "\n"
	if _, err := Read("x.toml", []byte(pad), &f); err != nil {
		t.Errorf("a file of %d bytes: %v", len(pad), err)
	}
	_, err := Read("x.toml", []byte(pad+"#"), &f)
	if want := "x.toml: the file has 1048577 bytes, more than 1048576"; fmt.Sprint(err) != want {
		t.Errorf("said %v, want %s", err, want)
	}
}

func TestNearest(t *testing.T) {
	known := []string{"samples", "sample_period", "port", "set"}
	for word, want := range map[string]string{
		"sample": "samples", "smaples": "samples", "sampel_period": "sample_period", "prot": "port",
		"sett": "set", "voltage": "", "PORT": "port", "x": "",
	} {
		if got := nearest(word, known); got != want {
			t.Errorf("%q is near %q, want %q", word, got, want)
		}
	}
}

// No input makes Read panic; a refusal has a place inside the file; what is
// accepted is accepted again and every key has its place.
func FuzzRead(f *testing.F) {
	f.Add([]byte(sound))
	f.Add([]byte("a = {b = [1, {c = 2}]}\n[[limit.band]]\n[part.corner]\nat='''x'''"))
	f.Add([]byte("[[limit]]\nname=\"\\u0041\"\n[limit.band]\n"))
	f.Fuzz(func(t *testing.T, data []byte) {
		var file instrumentFile
		d, err := Read("x.toml", data, &file)
		if err != nil {
			var refusal *Error
			if !errors.As(err, &refusal) || refusal.Text == "" || refusal.Line < 1 || refusal.Column < 1 ||
				refusal.Line > strings.Count(string(data), "\n")+1 || !utf8.ValidString(refusal.Error()) {
				t.Fatalf("%q: %#v", data, err)
			}
			return
		}
		for _, key := range d.Keys() {
			if line, column := d.At(key); line < 1 || column < 1 || !d.Has(key) {
				t.Fatalf("%q: key %q has no place", data, key)
			}
		}
		if len(file.Limits) > 0 && !d.Has("limit", len(file.Limits)-1) || d.Has("limit", len(file.Limits)) {
			t.Fatalf("%q: %d limits read, and others found", data, len(file.Limits))
		}
		if d.Has("part") != (file.Part != nil) || d.Has("missing") != (file.Missing != nil) {
			t.Fatalf("%q: index and struct disagree", data)
		}
	})
}

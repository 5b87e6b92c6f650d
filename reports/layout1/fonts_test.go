package layout1

import (
	"strings"
	"testing"

	"golang.org/x/image/font/sfnt"
)

// Covered passes over printable ASCII without asking the fonts; here they are
// asked.
func TestASCIIIsCovered(t *testing.T) {
	for _, f := range faces() {
		font, err := sfnt.Parse(f.ttf)
		if err != nil {
			t.Fatal(err)
		}
		var b sfnt.Buffer
		for r := ' '; r <= '~'; r++ {
			if g, err := font.GlyphIndex(&b, r); err != nil || g == 0 {
				t.Errorf("%s lacks %q", f.family, r)
			}
		}
	}
}

func TestCovered(t *testing.T) {
	for _, text := range []string{
		"", "plain", "Příliš žluťoučký kůň úpěl ďábelské ódy", "Größenänderung, Übermaß, Straße", "Ξεσκεπάζω την ψυχοφθόρα βδελυγμία",
		"µV/V/mmHg ± 0,1 °C – “quoted” ½ ≤ ≥ ∞ −5 …", "Łódź, Århus, Çankırı, Ñuñoa", "Щука",
	} {
		if err := Covered(text); err != nil {
			t.Errorf("%q: %v", text, err)
		}
	}
	for text, says := range map[string]string{
		"serial 😀":               "character 8, U+1F600",
		"tab\there":              "U+0009, is a control character",
		"line\nbreak":            "control character",
		"null\x00":               "control character",
		"del\x7f":                "control character",
		"c1\u0085":               "control character",
		"bad \xff\xfe":           "not valid UTF-8",
		"surrogate \xed\xa0\x80": "not valid UTF-8",
		"e\u0301":                "combines with the letter before it",
		"a\u200bb":               "invisible format character",
		"a\u202eb":               "invisible format character",
		"soft\u00adly":           "invisible format character",
		"para\u2029":             "invisible format character",
		"שלום":                   "from right to left",
		"مرحبا":                  "from right to left",
		"\ue000":                 "private character",
		"漢":                      "not in the report's fonts",
		"\uffff":                 "not in the report's fonts",
		"\ufffd\U0010ffff":       "character",
	} {
		err := Covered(text)
		if err == nil || !strings.Contains(err.Error(), says) {
			t.Errorf("%q: %v, want something with %q", text, err, says)
		}
	}
}

// Whatever is covered can be printed, and what is not gives an error: never a
// panic of the library underneath.
func FuzzCovered(f *testing.F) {
	for _, text := range []string{"plain", "Příliš", "\xff", "a\x00", "😀", "(brackets) \\ and )", "\r\n", "þÿ"} {
		f.Add(text)
	}
	m := accepted(f)
	f.Fuzz(func(t *testing.T, text string) {
		if len(text) > 300 {
			t.Skip("long texts are slow to lay out")
		}
		d := m.document(t)
		d.Subject, d.Deciding = text, text
		d.Static, d.Step, d.Budgets = nil, nil, nil
		b, err := Render(d, nil)
		if want := Covered(text); (want == nil) != (err == nil) || (err == nil) != (len(b) > 0) {
			t.Errorf("%q: covered %v, rendered %v", text, want, err)
		}
	})
}

package layout1

import (
	"bytes"
	"compress/zlib"
	"fmt"
	"io"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"unicode/utf16"

	"golang.org/x/image/font"
	"golang.org/x/image/font/sfnt"
	"golang.org/x/image/math/fixed"
)

// A reader of what this layout writes, so that tests see the pages as they
// are and not as the program meant them.

// written is one piece of text on a page: its baseline's start and its
// extent, in points from the lower left. Turned text has no box.
type written struct {
	text           string
	x, y, w, up    float64
	turned         bool
	family         string
	size, descends float64
}

// pagesOf returns the texts of every page, in order.
func pagesOf(t testing.TB, pdf []byte) [][]written {
	t.Helper()
	families := map[string]string{}
	for _, m := range regexp.MustCompile(`/F([0-9a-f]{40}) (\d+) 0 R`).FindAllSubmatch(pdf, -1) {
		base := regexp.MustCompile(`(?s)\n` + string(m[2]) + ` 0 obj\n.{0,80}?/BaseFont /utf8(\w+)`).FindSubmatch(pdf)
		if base == nil {
			t.Fatalf("font object %s has no name", m[2])
		}
		families[string(m[1])] = string(base[1])
	}
	var out [][]written
	for _, content := range contentsOf(t, pdf) {
		out = append(out, texts(t, content, families))
	}
	return out
}

// contentsOf returns the operators of every page, in order.
func contentsOf(t testing.TB, pdf []byte) [][]byte {
	t.Helper()
	var out [][]byte
	for _, m := range regexp.MustCompile(`/Type /Page\n(?s:.{0,120}?)/Contents (\d+) 0 R`).FindAllSubmatch(pdf, -1) {
		out = append(out, stream(t, pdf, string(m[1])))
	}
	if len(out) == 0 {
		t.Fatal("no page was found")
	}
	return out
}

func stream(t testing.TB, pdf []byte, object string) []byte {
	t.Helper()
	m := regexp.MustCompile(`\n` + object + ` 0 obj\n<</Filter /FlateDecode /Length (\d+)>>\nstream\n`).FindSubmatchIndex(pdf)
	if m == nil {
		t.Fatalf("object %s is no compressed stream", object)
	}
	n, err := strconv.Atoi(string(pdf[m[2]:m[3]]))
	if err != nil {
		t.Fatal(err)
	}
	z, err := zlib.NewReader(bytes.NewReader(pdf[m[1] : m[1]+n]))
	if err != nil {
		t.Fatal(err)
	}
	b, err := io.ReadAll(z)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func texts(t testing.TB, content []byte, families map[string]string) []written {
	t.Helper()
	measure := newMeasure(t)
	var out []written
	var family string
	var size float64
	for {
		i := bytes.Index(content, []byte("BT "))
		if i < 0 {
			return out
		}
		content = content[i+3:]
		if content[0] == '/' {
			var name string
			if _, err := fmt.Sscanf(string(content[:80]), "/F%s %f Tf", &name, &size); err != nil {
				t.Fatal(err)
			}
			family = families[name]
			continue
		}
		var w written
		if _, err := fmt.Sscanf(string(content[:min(40, len(content))]), "%f %f Td", &w.x, &w.y); err != nil {
			t.Fatal(err)
		}
		var raw []byte
		content = content[bytes.IndexByte(content, '(')+1:]
		for content[0] != ')' {
			if content[0] == '\\' {
				content = content[1:]
				if content[0] == 'r' {
					content[0] = '\r'
				}
			}
			raw = append(raw, content[0])
			content = content[1:]
		}
		units := make([]uint16, len(raw)/2)
		for i := range units {
			units[i] = uint16(raw[2*i])<<8 | uint16(raw[2*i+1])
		}
		w.text, w.family, w.size = string(utf16.Decode(units)), family, size
		w.turned = w.x == 0 && w.y == 0
		w.w = measure.width(t, family, w.text) * size
		w.up, w.descends = 0.7*size, 0.2*size
		out = append(out, w)
	}
}

// measure gives widths from the fonts themselves, in ems.
type measure struct{ fonts map[string]*sfnt.Font }

func newMeasure(t testing.TB) measure {
	m := measure{map[string]*sfnt.Font{}}
	for _, f := range faces() {
		font, err := sfnt.Parse(f.ttf)
		if err != nil {
			t.Fatal(err)
		}
		m.fonts[f.family] = font
	}
	return m
}

func (m measure) width(t testing.TB, family, text string) float64 {
	f := m.fonts[family]
	if f == nil {
		t.Fatalf("text %q is in no font of the layout (%q)", text, family)
	}
	var b sfnt.Buffer
	var sum float64
	const em = 2048
	for _, r := range text {
		g, err := f.GlyphIndex(&b, r)
		if err != nil || g == 0 {
			t.Errorf("text %q: %U is not in %s", text, r, family)
		}
		a, err := f.GlyphAdvance(&b, g, fixed.I(em), font.HintingNone)
		if err != nil {
			t.Fatal(err)
		}
		sum += float64(a) / 64 / em
	}
	return sum
}

// allText is a page's text, piece after piece.
func allText(page []written) string {
	var s []string
	for _, w := range page {
		s = append(s, w.text)
	}
	return strings.Join(s, " ")
}

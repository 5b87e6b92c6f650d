package layout1

import (
	"fmt"
	"strconv"
	"unicode"
	"unicode/utf8"

	"codeberg.org/go-fonts/liberation/liberationsansbold"
	"codeberg.org/go-fonts/liberation/liberationsansregular"
	"codeberg.org/go-fonts/liberation/liberationserifregular"
	"golang.org/x/image/font/sfnt"
)

// The faces of the layout: sans for reading, bold for what is looked for,
// serif for headings and the verdict.
const (
	sans  = "sans"
	bold  = "sansbold"
	serif = "serif"
)

type face struct {
	family string
	ttf    []byte // never written to: gofpdf gets a clone, for it changes its bytes
}

func faces() []face {
	return []face{
		{sans, liberationsansregular.TTF},
		{bold, liberationsansbold.TTF},
		{serif, liberationserifregular.TTF},
	}
}

// Covered says whether the layout can print a text: valid UTF-8 of characters
// that all its faces have, from left to right, without control characters and
// without marks that combine with the letter before them (write the composed
// letter). The error names the first character that cannot be printed and its
// place. It is meant for texts that people type, before the run.
func Covered(text string) error { return newCoverage().check(text) }

// coverage remembers which characters can be printed, so that a document does
// not ask the fonts twice.
type coverage struct {
	fonts []*sfnt.Font
	known map[rune]string // why not; "" for a character that can be printed
	err   error
}

func newCoverage() *coverage {
	c := &coverage{known: map[rune]string{}}
	for _, f := range faces() {
		font, err := sfnt.Parse(f.ttf)
		if err != nil {
			c.err = fmt.Errorf("font %s: %w", f.family, err)
			return c
		}
		c.fonts = append(c.fonts, font)
	}
	return c
}

func (c *coverage) check(text string) error {
	if c.err != nil {
		return c.err
	}
	if !utf8.ValidString(text) {
		return fmt.Errorf("text %s is not valid UTF-8", strconv.QuoteToASCII(text))
	}
	n := 0
	for _, r := range text {
		n++
		if r >= ' ' && r <= '~' {
			continue // all faces cover printable ASCII; a test says so
		}
		why, seen := c.known[r]
		if !seen {
			why = c.ask(r)
			c.known[r] = why
		}
		if why != "" {
			return fmt.Errorf("text %q: character %d, %U, %s", text, n, r, why)
		}
	}
	return nil
}

func (c *coverage) ask(r rune) string {
	if why := unprintable(r); why != "" {
		return why
	}
	var buffer sfnt.Buffer
	for _, f := range c.fonts {
		if glyph, err := f.GlyphIndex(&buffer, r); err != nil || glyph == 0 {
			return "is not in the report's fonts"
		}
	}
	return ""
}

// unprintable says why a character is refused whatever the fonts hold; ""
// when it is not. Characters above U+FFFF are out of the PDF library's reach;
// format characters are invisible and can turn a text around.
func unprintable(r rune) string {
	switch {
	case unicode.IsControl(r):
		return "is a control character"
	case unicode.Is(unicode.Cf, r), unicode.Is(unicode.Zl, r), unicode.Is(unicode.Zp, r):
		return "is an invisible format character"
	case unicode.Is(unicode.Co, r):
		return "is a private character without a meaning of its own"
	case unicode.IsMark(r):
		return "combines with the letter before it; write the composed letter"
	case unicode.In(r, unicode.Hebrew, unicode.Arabic):
		return "belongs to a script written from right to left, which this layout does not set"
	case r > 0xffff:
		return "is not in the report's fonts"
	}
	return ""
}

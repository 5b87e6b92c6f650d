package layout1

import (
	"fmt"
	"math"
	"strings"

	"github.com/jung-kurt/gofpdf"

	"kymobench/reports"
)

// Millimetres of an A4 page.
const (
	pageWidth  = 210.0
	pageHeight = 297.0
	left       = 22.0
	right      = 188.0
	width      = right - left
	top        = 23.0
	bottom     = 276.0
	perPoint   = 25.4 / 72
)

// colour is 8-bit red, green and blue.
type colour struct{ r, g, b uint8 }

// The colours: ink, two greys of text and line, two of areas, and one accent
// that prints as a dark grey.
func ink() colour    { return colour{0x1c, 0x1c, 0x1c} }
func quiet() colour  { return colour{0x5c, 0x5c, 0x5c} }
func hair() colour   { return colour{0xb0, 0xb0, 0xb0} }
func shade() colour  { return colour{0xd4, 0xd6, 0xd8} }
func pale() colour   { return colour{0xec, 0xee, 0xef} }
func accent() colour { return colour{0x0b, 0x4a, 0x66} }

// paper is the document while its pages are written, from the top down. y is
// where the next thing goes, in millimetres from the top of the page. The
// first error stays, and nothing is written after it.
//
// Lines, areas and colours are written as self-contained operators of PDF, not
// through gofpdf, so that gofpdf's own idea of the graphics state stays true;
// only fonts and text go through it.
type paper struct {
	pdf     *gofpdf.Fpdf
	d       *reports.Document
	y       float64
	family  string
	size    float64
	section int
	raw     []byte
	marked  []byte // the operators of the mark, the same on every page
	cover   *coverage
	svg     *drawing // not nil: what is drawn and written goes there, and pdf only measures
	fill    colour   // of text
	err     error
}

// newPage begins a page with its mark, if the bench was simulated.
func (p *paper) newPage() {
	p.pdf.AddPage()
	p.family = ""
	p.y = top
	if p.d.Mark != "" {
		p.mark()
	}
}

// turned writes text at x, y (baseline's start, from the top), turned
// counterclockwise.
func (p *paper) turned(x, y, sin, cos float64, text string) {
	p.check(text)
	if p.err != nil {
		return
	}
	if p.svg != nil {
		p.svg.text(p, x, y, -math.Atan2(sin, cos)*180/math.Pi, text)
		return
	}
	p.pdf.TransformBegin()
	p.pdf.Transform(gofpdf.TransformMatrix{A: cos, B: sin, C: -sin, D: cos, E: x / perPoint, F: (pageHeight - y) / perPoint})
	p.pdf.Text(0, pageHeight, text)
	p.pdf.TransformEnd()
}

// finish writes head and foot of every page, now that their number is known.
func (p *paper) finish() {
	n := p.pdf.PageCount()
	for i := 1; i <= n && p.err == nil; i++ {
		p.pdf.SetPage(i)
		p.family = "" // the page's own font is not the one set last
		p.colour(quiet())
		p.font(sans, 7.5)
		p.fitted(left, 14, p.d.Title+", "+p.d.Subject, 0.62*width)
		p.textRight(right, 14, p.clipped(p.d.Department, 0.34*width))
		p.line(left, 16.5, right, 16.5, 0.15, hair())
		p.line(left, 281, right, 281, 0.15, hair())
		if p.d.Stamp != "" {
			p.font(bold, 8)
			p.colour(ink())
			half := p.width(p.d.Stamp)/2 + 2.5
			middle := (left + right) / 2
			p.rect(middle-half, 17.4, 2*half, 4.6, pale())
			p.textCentre(middle, 20.7, p.d.Stamp)
			p.font(sans, 7.5)
			p.colour(quiet())
		}
		p.text(left, 285.5, "Run "+p.d.Run)
		p.textRight(right, 285.5, fmt.Sprintf("page %d of %d", i, n))
		if p.d.Mark != "" {
			p.font(bold, 7.5)
			p.colour(ink())
			p.textCentre((left+right)/2, 285.5, p.d.Mark+" KEYS, NO ITEM TESTED")
		}
	}
	p.pdf.SetPage(n)
}

// check keeps the first text that cannot be printed as the error.
func (p *paper) check(text string) {
	if p.err == nil {
		p.err = p.cover.check(text)
	}
}

// font sets family and size in points.
func (p *paper) font(family string, size float64) {
	if p.family != family || p.size != size {
		p.pdf.SetFont(family, "", size)
		p.family, p.size = family, size
	}
}

func (p *paper) colour(c colour) {
	p.fill = c
	p.pdf.SetTextColor(int(c.r), int(c.g), int(c.b))
}

// text writes one line with its baseline at y. Blanks that do not break are
// plain blanks on paper, so that a search finds "24 Hz".
func (p *paper) text(x, y float64, text string) {
	p.check(text)
	if p.err != nil || text == "" {
		return
	}
	if p.svg != nil {
		p.svg.text(p, x, y, 0, text)
		return
	}
	p.pdf.Text(x, y, strings.ReplaceAll(text, "\u00a0", " "))
}

func (p *paper) width(text string) float64 {
	p.check(text)
	if p.err != nil {
		return 0
	}
	return p.pdf.GetStringWidth(text)
}

func (p *paper) textRight(x, y float64, text string)  { p.text(x-p.width(text), y, text) }
func (p *paper) textCentre(x, y float64, text string) { p.text(x-p.width(text)/2, y, text) }

// fontFor sets a font in which a text is no wider than w: of the size given,
// or smaller, down to half.
func (p *paper) fontFor(family string, size float64, text string, w float64) {
	p.font(family, size)
	if wide := p.width(text); wide > w {
		p.font(family, size*max(0.5, w/wide))
	}
}

// fitted writes a line, cut to a width with an ellipsis; only for heads of
// pages, where the whole text stands elsewhere.
func (p *paper) fitted(x, y float64, text string, w float64) { p.text(x, y, p.clipped(text, w)) }

func (p *paper) clipped(text string, w float64) string {
	if p.width(text) <= w {
		return text
	}
	runes := []rune(text)
	for len(runes) > 0 && p.width(string(runes)+"\u2026") > w {
		runes = runes[:len(runes)-1]
	}
	return strings.TrimSpace(string(runes)) + "\u2026"
}

// wrap breaks a text into lines no wider than w, at blanks; a word that is
// wider on its own is broken where it has to be. There is always one line.
func (p *paper) wrap(text string, w float64) []string {
	p.check(text)
	if p.err != nil {
		return []string{""}
	}
	var lines []string
	current := ""
	for _, word := range strings.Split(text, " ") {
		next := word
		if current != "" {
			next = current + " " + word
		}
		if p.pdf.GetStringWidth(next) <= w {
			current = next
			continue
		}
		if current != "" {
			lines = append(lines, current)
		}
		current = word
		for p.pdf.GetStringWidth(current) > w {
			runes := []rune(current)
			n := len(runes) - 1
			for n > 1 && p.pdf.GetStringWidth(string(runes[:n])) > w {
				n--
			}
			if n < 1 {
				break
			}
			n = breakBefore(runes, n)
			lines = append(lines, string(runes[:n]))
			current = string(runes[n:])
		}
	}
	return append(lines, current)
}

// breakBefore looks for a better place than n to break a long word at: after
// the last mark of punctuation in the second half.
func breakBefore(runes []rune, n int) int {
	for i := n; i > n/2; i-- {
		if strings.ContainsRune(",;:/-_=", runes[i-1]) {
			return i
		}
	}
	return n
}

// lead is the distance of two lines of a size, in millimetres.
func lead(size float64) float64 { return size * perPoint * 1.32 }

// paragraph writes a wrapped text at x and moves y below it; lines go to the
// next page as needed.
func (p *paper) paragraph(x, w float64, text, family string, size float64, c colour) {
	p.font(family, size)
	for _, line := range p.wrap(text, w) {
		p.need(lead(size))
		p.font(family, size)
		p.colour(c)
		p.y += lead(size)
		p.text(x, p.y-0.3*size*perPoint, line)
	}
	p.colour(ink())
}

// need begins a new page when h millimetres do not fit on this one.
func (p *paper) need(h float64) {
	if p.y+h > bottom {
		p.newPage()
	}
}

// heading begins a section, on the next page when less than room millimetres
// are left below it.
func (p *paper) heading(title string, room float64) {
	p.need(13 + room)
	p.section++
	if p.y > top {
		p.y += 5
	}
	p.font(serif, 14)
	p.colour(accent())
	p.text(left, p.y+4.5, fmt.Sprintf("%d", p.section))
	p.colour(ink())
	p.text(left+8, p.y+4.5, title)
	p.y += 8
}

// running writes a section of sentences that run on, whole on one page.
func (p *paper) running(title string, texts []string, size float64) {
	text := strings.Join(texts, " ")
	p.font(sans, size)
	p.heading(title, min(float64(len(p.wrap(text, width)))*lead(size), bottom-top-15))
	p.paragraph(left, width, text, sans, size, ink())
}

// bullets writes a list.
func (p *paper) bullets(texts []string, size float64) {
	for _, t := range texts {
		p.font(sans, size)
		lines := p.wrap(t, width-5)
		p.need(lead(size) * float64(min(len(lines), 4)))
		p.rect(left+1, p.y+lead(size)*0.5, 1.1, 0.25, accent())
		p.paragraph(left+5, width-5, t, sans, size, ink())
		p.y += 0.8
	}
}

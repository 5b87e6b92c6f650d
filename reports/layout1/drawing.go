package layout1

import (
	"bytes"
	"encoding/xml"
	"fmt"
	"strconv"
	"strings"
)

// drawing collects what a paper draws as SVG, in points from the top left. It
// understands the operators that this package writes and no others: colours,
// width, dash, paths of lines and cubic curves, fill and stroke.
type drawing struct{ body bytes.Buffer }

// operators turns one self-contained run of PDF operators into a path.
func (d *drawing) operators(raw []byte) error {
	var path, paint strings.Builder
	var fill, stroke, dash string
	width := "1"
	var numbers []float64
	dashing := false
	var pattern []float64
	for _, word := range strings.Fields(strings.NewReplacer("[", " [ ", "]", " ] ").Replace(string(raw))) {
		if x, err := strconv.ParseFloat(word, 64); err == nil {
			if dashing {
				pattern = append(pattern, x)
			} else {
				numbers = append(numbers, x)
			}
			continue
		}
		need := map[string]int{"rg": 3, "RG": 3, "w": 1, "d": 1, "m": 2, "l": 2, "c": 6}[word]
		if len(numbers) != need {
			return fmt.Errorf("draw: operator %q with %d numbers, %d belong to it", word, len(numbers), need)
		}
		switch word {
		case "q", "Q":
		case "[":
			dashing, pattern = true, nil
		case "]":
			dashing = false
		case "rg":
			fill = hex(numbers)
		case "RG":
			stroke = hex(numbers)
		case "w":
			width = plain(numbers[0])
		case "d":
			var parts []string
			for _, x := range pattern {
				parts = append(parts, plain(x))
			}
			dash = strings.Join(parts, " ")
		case "m", "l", "c":
			path.WriteString(strings.ToUpper(word))
			for i := 0; i+1 < len(numbers); i += 2 {
				if i > 0 {
					path.WriteByte(' ')
				}
				path.WriteString(plain(numbers[i]) + " " + plain(pageHeight/perPoint-numbers[i+1]))
			}
		case "h":
			path.WriteByte('Z')
		case "f":
			fmt.Fprintf(&paint, ` fill="%s"`, fill)
		case "s":
			path.WriteByte('Z')
			fallthrough
		case "S":
			fmt.Fprintf(&paint, ` fill="none" stroke="%s" stroke-width="%s"`, stroke, width)
			if dash != "" {
				fmt.Fprintf(&paint, ` stroke-dasharray="%s"`, dash)
			}
		default:
			return fmt.Errorf("draw: unknown operator %q", word)
		}
		numbers = numbers[:0]
	}
	fmt.Fprintf(&d.body, "<path d=\"%s\"%s/>\n", path.String(), paint.String())
	return nil
}

func hex(rgb []float64) string {
	return fmt.Sprintf("#%02x%02x%02x", int(rgb[0]*255+0.5), int(rgb[1]*255+0.5), int(rgb[2]*255+0.5))
}

func plain(x float64) string { return string(appendNumber(nil, x)) }

// text writes one line, its baseline beginning at x, y (mm), turned by degrees
// clockwise. The length measured in the layout's own fonts is stated, so that a
// viewer without them keeps the places.
func (d *drawing) text(p *paper, x, y, turned float64, text string) {
	family, weight := "Liberation Sans, Arial, Helvetica, sans-serif", ""
	switch p.family {
	case bold:
		weight = ` font-weight="bold"`
	case serif:
		family = "Liberation Serif, Times New Roman, serif"
	}
	length := p.pdf.GetStringWidth(text) / perPoint
	turn := ""
	if turned != 0 {
		turn = fmt.Sprintf(` transform="rotate(%s %s %s)"`, plain(turned), plain(x/perPoint), plain(y/perPoint))
	}
	fmt.Fprintf(&d.body, `<text x="%s" y="%s" font-family="%s" font-size="%s"%s fill="%s" textLength="%s"%s xml:space="preserve">`,
		plain(x/perPoint), plain(y/perPoint), family, plain(p.size), weight, hex([]float64{float64(p.fill.r) / 255, float64(p.fill.g) / 255, float64(p.fill.b) / 255}), plain(length), turn)
	// The buffer takes everything.
	_ = xml.EscapeText(&d.body, []byte(strings.ReplaceAll(text, "\u00a0", " ")))
	d.body.WriteString("</text>\n")
}

// document is the whole file, as wide as a page and height points high.
func (d *drawing) document(title string, height float64) []byte {
	var out bytes.Buffer
	w, h := plain(pageWidth/perPoint), plain(height)
	fmt.Fprintf(&out, "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"%spt\" height=\"%spt\" viewBox=\"0 0 %s %s\">\n<title>", w, h, w, h)
	_ = xml.EscapeText(&out, []byte(title))
	fmt.Fprintf(&out, "</title>\n<rect width=\"%s\" height=\"%s\" fill=\"#ffffff\"/>\n", w, h)
	out.Write(d.body.Bytes())
	out.WriteString("</svg>\n")
	return out.Bytes()
}

package layout1

import (
	"math"
	"strconv"
	"strings"

	"kymobench/reports"
)

// front is page one: verdict, identity, limits.
func (p *paper) front() {
	p.newPage()
	d := p.d
	p.font(sans, 8)
	p.colour(quiet())
	p.text(left, p.y+2.5, "Test report")
	p.y += 4
	p.paragraph(left, width, d.Title, serif, 22, ink())
	p.paragraph(left, width, d.Subject, sans, 10.5, ink())
	p.y += 4
	p.verdict()
	p.y += 4
	p.who()
	p.heading("Results against their limits", 30)
	p.limits()
	p.heading("Reservations", 10)
	if len(d.Reservations) == 0 {
		p.paragraph(left, width, "None.", sans, 8.5, ink())
	}
	var list [][]string
	for _, r := range d.Reservations {
		list = append(list, []string{r.About, r.Text})
	}
	table{size: 8.2, gap: 0.25, columns: []column{{w: 14}, {w: width - 14}}}.write(p, list)
	p.running("Not tested", d.NotTested, 8.2)
}

// verdict is what is read first: the word, its sign and the figure that
// decided it.
func (p *paper) verdict() {
	d, start, page := p.d, p.y, p.pdf.PageNo()
	const indent = 21
	p.font(serif, 28)
	p.colour(ink())
	p.text(left+indent, p.y+10, d.Headline)
	p.sign(left+11.5, p.y+7.2)
	p.y += 13.5
	p.paragraph(left+indent, width-indent, d.Deciding, bold, 10.5, ink())
	p.y += 1
	for _, r := range d.Reasons {
		if r != d.Deciding {
			p.paragraph(left+indent, width-indent, r, sans, 9, ink())
		}
	}
	note := d.Counts
	if n := len(d.Reservations); n > 0 {
		note += " " + strconv.Itoa(n) + " reservation" + map[bool]string{true: "", false: "s"}[n == 1] + " to be read with it: section\u00a02."
	} else {
		note += " No reservations."
	}
	p.paragraph(left+indent, width-indent, note, sans, 9, quiet())
	if d.Mark != "" {
		p.paragraph(left+indent, width-indent, "Simulated bench: a demonstration. No physical item was tested.", bold, 9, ink())
	}
	p.y += 1.5
	if p.pdf.PageNo() != page {
		start = top
	}
	p.rect(left, start, 1.4, p.y-start, accent())
}

// sign draws the verdict's sign; the word beside it says the same.
func (p *paper) sign(x, y float64) {
	const r = 5.2
	c := accent()
	switch p.d.Verdict {
	case "accepted":
		p.disc(x, y, r, c, true, 0)
		p.line(x-2.5, y+0.2, x-0.7, y+2.1, 1, colour{255, 255, 255})
		p.line(x-0.9, y+2.1, x+2.6, y-2.0, 1, colour{255, 255, 255})
	case "rejected":
		p.rect(x-r, y-r, 2*r, 2*r, ink())
		p.line(x-2.3, y-2.3, x+2.3, y+2.3, 1, colour{255, 255, 255})
		p.line(x-2.3, y+2.3, x+2.3, y-2.3, 1, colour{255, 255, 255})
	default:
		p.disc(x, y, r-0.5, ink(), false, 1)
		p.line(x-2.3, y, x+2.3, y, 1, ink())
	}
}

// who sets identity and test side by side.
func (p *paper) who() {
	const gap = 8
	half := (width - gap) / 2
	a := p.pairs(left, half, 26, rowPairs(p.d.Identity), 8.5)
	b := p.pairs(left+half+gap, half, 24, rowPairs(p.d.Test), 8.5)
	p.y = math.Max(a, b)
}

func rowPairs(rows []reports.Row) []pair {
	out := make([]pair, len(rows))
	for i, r := range rows {
		out[i] = pair{r.Label, r.Text}
	}
	return out
}

// The columns of the table of limits: left edges, in millimetres from the
// margin.
const (
	limitName    = 0.0
	limitValue   = 58.0 // the value ends here, its uncertainty begins
	limitUnit    = 73.0
	limitBound   = 92.0
	limitStrip   = 113.0
	stripWidth   = 15.0
	limitOutcome = 130.0
	limitRisk    = width
)

func (p *paper) limits() {
	if len(p.d.Limits) == 0 {
		p.paragraph(left, width, "No limit was judged.", sans, 9, ink())
	} else {
		p.limitHead()
	}
	for _, l := range p.d.Limits {
		p.limit(l)
	}
	p.y += 1.5
	for _, r := range p.d.Rules {
		p.paragraph(left, width, r, sans, 7, quiet())
	}
}

func (p *paper) limitHead() {
	p.font(sans, 7.8)
	p.colour(quiet())
	y := p.y + 3
	p.text(left+limitName, y, "Result")
	p.textRight(left+limitValue-1.2, y, "measured")
	p.text(left+limitValue, y, "± U (95 %)")
	p.text(left+limitUnit, y, "Unit")
	p.text(left+limitBound, y, "Limit")
	p.text(left+limitOutcome, y, "Outcome")
	p.textRight(left+limitRisk, y, "Risk")
	p.colour(ink())
	p.y += 4.3
	p.line(left, p.y, right, p.y, 0.2, quiet())
	p.y += 0.6
}

// limit is one row: the figures, a small drawing, and in small print where
// the limit comes from.
func (p *paper) limit(l reports.LimitRow) {
	small := l.Origin
	if l.Guard != "" {
		small = "Guard band " + strings.TrimSpace(l.Guard+" "+l.Unit) + ". " + small
	}
	p.font(sans, 7)
	notes := p.wrap(small, width-2)
	if l.Note != "" {
		notes = append(p.wrap(l.Note, width-2), notes...)
	}
	p.font(bold, 9)
	names := p.wrap(l.Name, limitValue-12)
	p.font(sans, 9)
	bounds := p.wrap(l.Limit, limitStrip-limitBound-1)
	face := sans
	if l.Outcome != "pass" {
		face = bold
	}
	p.font(face, 9)
	words := p.wrap(l.Outcome, limitRisk-limitOutcome-12.7)
	n := max(len(names), len(bounds), len(words))
	if l.At != "" {
		n = max(n, len(names)+1)
	}
	h := float64(n)*lead(9) + float64(min(len(notes), 12))*lead(7) + 2.9
	if p.y+h > bottom {
		p.newPage()
		p.limitHead()
	}
	y := p.y + lead(9)
	for i, name := range names {
		p.font(bold, 9)
		p.text(left+limitName, y+float64(i)*lead(9), name)
	}
	if l.At != "" {
		p.font(sans, 7.8)
		p.colour(quiet())
		p.text(left+limitName, y+float64(len(names))*lead(9), l.At)
		p.colour(ink())
	}
	if l.Number == nil {
		p.font(sans, 9)
		p.textRight(left+limitUnit-2, y, l.Value)
	} else {
		p.fontFor(bold, 9, l.Value, 15.5)
		p.textRight(left+limitValue-1.2, y, l.Value)
		if l.Expanded != "" {
			p.fontFor(sans, 9, "± "+l.Expanded, limitUnit-limitValue-0.5)
			p.text(left+limitValue, y, "± "+l.Expanded)
		}
	}
	p.fontFor(sans, 9, l.Unit, limitBound-limitUnit-0.5)
	p.text(left+limitUnit, y, l.Unit)
	for i, b := range bounds {
		p.text(left+limitBound, y+float64(i)*lead(9), b)
	}
	p.font(face, 9)
	for i, w := range words {
		p.text(left+limitOutcome, y+float64(i)*lead(9), w)
	}
	p.font(sans, 9)
	p.textRight(left+limitRisk, y, l.Risk)
	p.strip(left+limitStrip, y-1.1, l)
	p.y += float64(n)*lead(9) + 1.1
	for _, note := range notes {
		p.need(lead(7))
		p.font(sans, 7)
		p.colour(quiet())
		p.y += lead(7)
		p.text(left, p.y-0.8, note)
	}
	p.colour(ink())
	p.y += 1.2
	p.line(left, p.y, right, p.y, 0.08, hair())
	p.y += 0.6
}

// strip draws where the result lies: the allowed range as a grey bar that
// fades out on an open side, the limits as upright strokes, the guard band
// darker, the result as a dot with its interval. A result beyond the drawing
// stands at its end as an arrow head.
func (p *paper) strip(x, y float64, l reports.LimitRow) {
	if l.Low == nil && l.High == nil {
		return
	}
	lo, hi := stripRange(l)
	at := func(v float64) float64 { return x + stripWidth*math.Min(1, math.Max(0, (v-lo)/(hi-lo))) }
	from, to := lo, hi
	if l.Low != nil {
		from = *l.Low
	}
	if l.High != nil {
		to = *l.High
	}
	const h = 2.2
	p.rect(at(from), y-h/2, at(to)-at(from), h, pale())
	if g := math.Min(l.GuardNumber, (to-from)/2); g > 0 {
		if l.Low != nil {
			p.rect(at(from), y-h/2, at(from+g)-at(from), h, shade())
		}
		if l.High != nil {
			p.rect(at(to-g), y-h/2, at(to)-at(to-g), h, shade())
		}
	}
	for _, b := range []*float64{l.Low, l.High} {
		if b != nil {
			p.line(at(*b), y-1.9, at(*b), y+1.9, 0.35, ink())
		}
	}
	if l.Number == nil {
		return
	}
	v := *l.Number
	switch {
	case v < lo:
		p.polygon(accent(), true, 0, x-1.4, y, x+0.6, y-1.1, x+0.6, y+1.1)
		return
	case v > hi:
		p.polygon(accent(), true, 0, x+stripWidth+1.4, y, x+stripWidth-0.6, y-1.1, x+stripWidth-0.6, y+1.1)
		return
	}
	if l.U != nil {
		p.line(at(v-*l.U), y, at(v+*l.U), y, 0.3, accent())
	}
	p.disc(at(v), y, 0.8, accent(), true, 0)
}

// stripRange chooses what the drawing spans.
func stripRange(l reports.LimitRow) (lo, hi float64) {
	switch {
	case l.Low != nil && l.High != nil:
		span := *l.High - *l.Low
		lo, hi = *l.Low-0.3*span, *l.High+0.3*span
	case l.Low != nil:
		reach := openReach(l, *l.Low)
		lo, hi = *l.Low-reach/2, *l.Low+reach
	default:
		reach := openReach(l, *l.High)
		lo, hi = *l.High-reach, *l.High+reach/2
	}
	if !(hi > lo) {
		lo, hi = lo-1, lo+1
	}
	return lo, hi
}

func openReach(l reports.LimitRow, bound float64) float64 {
	reach := math.Abs(bound) / 2
	if l.Number != nil {
		away := math.Abs(*l.Number - bound)
		if l.U != nil {
			away += *l.U
		}
		reach = math.Max(reach, 1.1*away)
	}
	return reach
}

package layout1

import (
	"math"

	"kymobench/reports"
)

// The columns of the budgets; the share of the variance is drawn between
// contribution and degrees of freedom.
const (
	shareAt    = 146.0
	shareWidth = 9.0
)

func budgetTable() table {
	return table{size: 7, gap: 0.1, columns: []column{
		{title: "Contribution of", w: 46}, {title: "from", w: 19}, {title: "distribution", w: 19},
		{title: "standard uncertainty", w: 28, right: true}, {title: "sensitivity", w: 16, right: true},
		{title: "contribution", w: 17, right: true}, {title: "ν", w: width - 145 + 2, right: true},
	}}
}

// budgets is the uncertainty of every judged result, contribution by
// contribution.
func (p *paper) budgets() {
	if len(p.d.Budgets) == 0 {
		return
	}
	p.heading("Uncertainty budgets", 60)
	p.paragraph(left, width, "Contribution is standard uncertainty times sensitivity coefficient, in the unit of the result; contributions add as the root of the sum of squares. The bar is each one's share of the variance. ν: degrees of freedom, k: coverage factor for 95 %.", sans, 7.2, quiet())
	p.y += 1
	budgetTable().head(p)
	for i, b := range p.d.Budgets {
		p.budget(b, i == 0)
	}
}

func (p *paper) budget(b reports.Budget, first bool) {
	t := budgetTable()
	const titleSize = 8.0
	title, sum := b.Title, b.Sum
	if b.Unit != "" {
		title += ", in " + b.Unit
	}
	h := lead(titleSize) + 1
	var rows [][]string
	for _, l := range b.Lines {
		rows = append(rows, []string{l.Name, l.Source, l.Distribution, l.Standard, l.Sensitivity, l.Contribution, l.DoF})
		h += t.height(t.wrapped(p, rows[len(rows)-1]))
	}
	if p.y+math.Min(h, 60) > bottom {
		p.newPage()
		t.head(p)
	} else if !first {
		p.y += 1.6
	}
	p.font(sans, 7.5)
	summed := p.wrap(sum, 86)
	p.font(bold, titleSize)
	titled := p.wrap(title, width-88)
	for i := range max(len(summed), len(titled)) {
		p.y += lead(titleSize)
		if i < len(titled) {
			p.font(bold, titleSize)
			p.text(left, p.y-0.8, titled[i])
		}
		if i < len(summed) {
			p.font(sans, 7.5)
			p.textRight(right, p.y-0.8, summed[i])
		}
	}
	p.y += 0.3
	if b.Missing != "" {
		p.paragraph(left, width, b.Missing, sans, 7.5, quiet())
	}
	for i, row := range rows {
		t.place(p, t.wrapped(p, row))
		y := p.y - lead(t.size)
		p.rect(left+shareAt, y+0.8, shareWidth*b.Lines[i].Share, 1.7, accent())
		p.line(left+shareAt, y+0.5, left+shareAt, y+2.8, 0.1, hair())
	}
}

// back is everything after the budgets, down to the signature and the end
// mark.
func (p *paper) back() {
	d := p.d
	var rows [][]string
	for _, i := range d.Instruments {
		rows = append(rows, []string{i.Role, i.Name, i.Identity, i.Certificate, i.Due})
	}
	t := table{size: 8, gap: 0.5, rules: true, columns: []column{
		{title: "Role", w: 25}, {title: "Instrument", w: 32}, {title: "Identity as answered", w: 42},
		{title: "Certificate", w: 45}, {title: "Due", w: 22},
	}}
	p.heading("Instruments", t.together(p, rows))
	t.write(p, rows)
	p.heading("Conditions", 15)
	p.y = p.pairs(left, width, 48, rowPairs(d.Conditions), 8)
	p.heading("Procedure", 15)
	p.y = p.pairs(left, width, 48, rowPairs(d.Procedure), 8)
	p.need(14)
	p.paragraph(left, width, "Additions to, deviations and exclusions from the procedure", bold, 8, ink())
	p.bullets(d.Deviations, 8)
	p.running("Safety", d.Warnings, 7.5)
	p.running("Use of this report", d.Scope, 8.2)
	p.signature()
}

// signature is the printed side of the signature; the signature itself is not
// drawn. The end mark follows on the same page.
func (p *paper) signature() {
	s := p.d.Signature
	rows := []pair{
		{"Meaning", s.Meaning}, {"Date and time", s.Date + ", " + s.Time}, {"Run", p.d.Run},
		{"Head of the record", s.Head}, {"Record", s.Record},
	}
	const inner = 5.0
	w := width - 2*inner
	p.font(serif, 15)
	names := p.wrap(s.Name, w)
	p.font(sans, 8)
	h := 3 + lead(8) + float64(len(names))*lead(15) + 1.5
	for _, r := range rows {
		h += float64(len(p.wrap(r.text, w-34)))*lead(8) + 0.7
	}
	note := "Signed electronically. The signed statement is attached as " + p.d.Run + ".performed.cms, the record as " + p.d.Run + ".record; the file as a whole is sealed by the signature inside it."
	h += 1 + float64(len(p.wrap(note, w)))*lead(7.5) + 3
	p.heading("Signature", h+10)
	start, page := p.y, p.pdf.PageNo()
	p.y += 3
	p.paragraph(left+inner, w, s.Role, sans, 8, quiet())
	p.paragraph(left+inner, w, s.Name, serif, 15, ink())
	p.y += 1.5
	p.y = p.pairs(left+inner, w, 34, rows, 8)
	p.y += 1
	p.paragraph(left+inner, w, note, sans, 7.5, quiet())
	p.y += 3
	if p.pdf.PageNo() == page {
		p.frame(left, start, width, p.y-start)
	}
	p.need(10)
	p.y += 9
	p.font(sans, 8.5)
	p.textCentre((left+right)/2, p.y, p.d.EndMark)
	half := p.width(p.d.EndMark)/2 + 4
	mid := (left + right) / 2
	p.line(left, p.y-1.1, mid-half, p.y-1.1, 0.15, hair())
	p.line(mid+half, p.y-1.1, right, p.y-1.1, 0.15, hair())
}

// frame draws a hairline box.
func (p *paper) frame(x, y, w, h float64) {
	p.polygon(hair(), false, 0.2, x, y, x+w, y, x+w, y+h, x, y+h)
}

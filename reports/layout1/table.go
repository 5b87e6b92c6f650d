package layout1

// column is one column of a table: its place is the sum of those before it.
type column struct {
	title  string
	w      float64
	right  bool // numbers stand to the right
	family string
}

// table is a list of rows under a head that is written again on every page.
// Rows are not broken over pages unless they are longer than one.
type table struct {
	columns []column
	size    float64
	gap     float64 // white above and below a row
	rules   bool    // a hairline under every row
}

// write sets the rows and moves y below them.
func (t table) write(p *paper, rows [][]string) {
	if len(rows) == 0 {
		return
	}
	p.need(t.together(p, rows))
	t.head(p)
	for _, row := range rows {
		t.place(p, t.wrapped(p, row))
		if t.rules {
			p.line(left, p.y, right, p.y, 0.08, hair())
		}
	}
}

// place sets a row where it fits: whole, or, when it is longer than a page, as
// many of its lines as each page holds.
func (t table) place(p *paper, lines [][]string) {
	whole := bottom - top - t.headHeight() - 2*t.gap
	if p.y+t.height(lines) > bottom {
		p.newPage()
		t.head(p)
	}
	for t.height(lines) > whole+2*t.gap {
		n := int(whole / lead(t.size))
		part, rest := make([][]string, len(lines)), make([][]string, len(lines))
		for i, l := range lines {
			part[i], rest[i] = l[:min(n, len(l))], l[min(n, len(l)):]
		}
		t.row(p, part)
		p.newPage()
		t.head(p)
		lines = rest
	}
	t.row(p, lines)
}

// together is the height that must be left for a table to begin on a page: all
// of a short one, the head and some rows of a long one.
func (t table) together(p *paper, rows [][]string) float64 {
	const short = 75.0
	h, some := t.headHeight(), 0.0
	for i, row := range rows {
		h += t.height(t.wrapped(p, row))
		if i == 3 || some == 0 {
			some = h
		}
		if h > short {
			return min(some, short)
		}
	}
	return h
}

func (t table) headHeight() float64 {
	for _, c := range t.columns {
		if c.title != "" {
			return lead(t.size) + 1.4
		}
	}
	return 0
}

func (t table) head(p *paper) {
	if t.headHeight() == 0 {
		return
	}
	p.font(sans, t.size-0.7)
	p.colour(quiet())
	x := left
	for _, c := range t.columns {
		if c.right {
			p.textRight(x+c.w-2, p.y+lead(t.size)-0.8, c.title)
		} else {
			p.text(x, p.y+lead(t.size)-0.8, c.title)
		}
		x += c.w
	}
	p.colour(ink())
	p.y += lead(t.size) + 0.7
	p.line(left, p.y, right, p.y, 0.2, quiet())
	p.y += 0.7
}

// wrapped breaks the cells of a row.
func (t table) wrapped(p *paper, row []string) [][]string {
	out := make([][]string, len(t.columns))
	for i, c := range t.columns {
		p.font(c.face(), t.size)
		if i < len(row) {
			out[i] = p.wrap(row[i], c.w-2)
		}
	}
	return out
}

func (c column) face() string {
	if c.family == "" {
		return sans
	}
	return c.family
}

func (t table) height(lines [][]string) float64 {
	most := 1
	for _, l := range lines {
		most = max(most, len(l))
	}
	return float64(most)*lead(t.size) + 2*t.gap
}

func (t table) row(p *paper, lines [][]string) {
	h := t.height(lines)
	x := left
	for i, c := range t.columns {
		p.font(c.face(), t.size)
		for n, text := range lines[i] {
			y := p.y + t.gap + float64(n+1)*lead(t.size) - 0.3*t.size*perPoint
			if c.right {
				p.textRight(x+c.w-2, y, text)
			} else {
				p.text(x, y, text)
			}
		}
		x += c.w
	}
	p.y += h
}

// pairs writes labels and texts in a column of width w at x, from p.y down,
// and returns where it ended; p.y stays.
func (p *paper) pairs(x, w, labelWidth float64, rows []pair, size float64) float64 {
	y := p.y
	for _, r := range rows {
		p.font(sans, size)
		lines := p.wrap(r.text, w-labelWidth)
		labels := p.wrap(r.label, labelWidth-2)
		n := max(len(lines), len(labels))
		for i := range n {
			if y+lead(size)*float64(min(n-i, 4)) > bottom && (i == 0 || y+lead(size) > bottom) {
				p.newPage()
				p.font(sans, size)
				y = p.y
			}
			y += lead(size)
			base := y - 0.3*size*perPoint
			if i < len(labels) {
				p.colour(quiet())
				p.text(x, base, labels[i])
			}
			if i < len(lines) {
				p.colour(ink())
				p.text(x+labelWidth, base, lines[i])
			}
		}
		y += 0.7
	}
	p.colour(ink())
	return y
}

type pair struct{ label, text string }

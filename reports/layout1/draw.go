package layout1

import "strconv"

// Lines and areas, in millimetres from the top left of the page. Each writes
// its own state between q and Q and leaves none behind.

func (p *paper) line(x1, y1, x2, y2, w float64, c colour) {
	p.begin(c, w)
	p.point(x1, y1, " m ")
	p.point(x2, y2, " l S Q")
	p.emit()
}

// rect fills a rectangle.
func (p *paper) rect(x, y, w, h float64, c colour) {
	p.polygon(c, true, 0, x, y, x+w, y, x+w, y+h, x, y+h)
}

// polygon fills or strokes a closed polygon of x, y pairs.
func (p *paper) polygon(c colour, fill bool, w float64, xy ...float64) {
	p.begin(c, w)
	for i := 0; i+1 < len(xy); i += 2 {
		if i == 0 {
			p.point(xy[0], xy[1], " m ")
		} else {
			p.point(xy[i], xy[i+1], " l ")
		}
	}
	if fill {
		p.raw = append(p.raw, "h f Q"...)
	} else {
		p.raw = append(p.raw, "h S Q"...)
	}
	p.emit()
}

// disc fills or strokes a circle, as four Bezier curves.
func (p *paper) disc(x, y, r float64, c colour, fill bool, w float64) {
	const k = 0.5522847498 // 4/3 (sqrt(2) - 1)
	p.begin(c, w)
	p.point(x+r, y, " m ")
	for _, q := range [][6]float64{
		{r, -k * r, k * r, -r, 0, -r}, {-k * r, -r, -r, -k * r, -r, 0},
		{-r, k * r, -k * r, r, 0, r}, {k * r, r, r, k * r, r, 0},
	} {
		p.point(x+q[0], y+q[1], " ")
		p.point(x+q[2], y+q[3], " ")
		p.point(x+q[4], y+q[5], " c ")
	}
	if fill {
		p.raw = append(p.raw, "f Q"...)
	} else {
		p.raw = append(p.raw, "s Q"...)
	}
	p.emit()
}

// begin saves the graphics state and sets colour and line width.
func (p *paper) begin(c colour, w float64) {
	p.raw = append(p.raw[:0], "q "...)
	for _, op := range []string{" rg ", " RG "} {
		for i, v := range []uint8{c.r, c.g, c.b} {
			if i > 0 {
				p.raw = append(p.raw, ' ')
			}
			p.raw = appendNumber(p.raw, float64(v)/255)
		}
		p.raw = append(p.raw, op...)
	}
	if w > 0 {
		p.raw = appendNumber(p.raw, w/perPoint)
		p.raw = append(p.raw, " w "...)
	}
}

func (p *paper) point(x, y float64, op string) {
	p.raw = appendNumber(p.raw, x/perPoint)
	p.raw = append(p.raw, ' ')
	p.raw = appendNumber(p.raw, (pageHeight-y)/perPoint)
	p.raw = append(p.raw, op...)
}

func (p *paper) emit() {
	switch {
	case p.err != nil:
	case p.svg != nil:
		p.err = p.svg.operators(p.raw)
	default:
		p.pdf.RawWriteStr(string(p.raw))
	}
}

// appendNumber writes a number as PDF wants it: no exponent, no more than
// three decimals, no trailing zeros, nothing that is far off every page.
func appendNumber(b []byte, x float64) []byte {
	if x != x {
		x = 0
	}
	x = min(max(x, -20000), 20000)
	start := len(b)
	b = strconv.AppendFloat(b, x, 'f', 3, 64)
	end := len(b)
	for b[end-1] == '0' {
		end--
	}
	if b[end-1] == '.' {
		end--
	}
	b = b[:end]
	if string(b[start:]) == "-0" {
		b = append(b[:start], '0')
	}
	return b
}

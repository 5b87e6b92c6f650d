package results

import "math"

// A figure of the static readings is, near what was found, a sum over points:
// Sum g_i (y_i - b p_i), with g_i how much point i counts and b 1 for an error
// and the slope for what is counted from a line. What is uncertain about it
// follows from the g alone, and so does what two figures have in common.

// weight is how much one point counts in a figure.
type weight struct {
	i int // of the point
	g float64
}

// sums are what the contributions take from the weights.
type sums struct {
	p, y      float64         // Sum g p, Sum g y
	at        map[int]float64 // Sum g over a set pressure where the reference has an error of its own
	where     []int           // their order
	aged      float64         // Sum g over all of these
	points    float64         // Sum g^2
	reference float64         // Sum g^2/n, n readings of the reference in a point
	blocks    float64         // Sum g^2/k, k block means of the UUT
	cells     float64         // Sum over cells of (Sum g)^2
	settling  float64         // root of Sum (g slope delay)^2
}

func (s *scale) sumsOf(points []taken, w []weight) sums {
	out := sums{at: map[int]float64{}}
	cells := map[int]float64{}
	var order []int
	for _, x := range w {
		t := &points[x.i]
		out.p += x.g * t.p
		out.y += x.g * t.y
		out.points += x.g * x.g
		if t.nP > 0 {
			out.reference += x.g * x.g / float64(t.nP)
		}
		if t.kY > 0 {
			out.blocks += x.g * x.g / float64(t.kY)
		}
		out.settling = math.Hypot(out.settling, x.g*t.slope*s.delay)
		if !t.zeroed {
			if _, known := out.at[t.level]; !known {
				out.where = append(out.where, t.level)
			}
			out.at[t.level] += x.g
			out.aged += x.g
		}
		if _, known := cells[t.cell]; !known {
			order = append(order, t.cell)
		}
		cells[t.cell] += x.g
	}
	for _, c := range order { // in order, for the last bits
		out.cells += cells[c] * cells[c]
	}
	return out
}

// each is the root of the sum of squares over the set pressures.
func (m sums) each() float64 {
	var v float64
	for _, k := range m.where {
		v += m.at[k] * m.at[k]
	}
	return math.Sqrt(v)
}

// linear is the budget of Sum g_i (y_i - b p_i). What is the same in all
// readings that count, as the head in an error after zeroing, cancels by
// itself; what is not is left to the caller.
func (s *scale) linear(points []taken, w []weight, b float64, n noise) *budget {
	m := s.sumsOf(points, w)
	u := s.unit.Name
	out := &budget{}
	out.put("reference, share of reading", fromCertificate, "1", s.share, b*m.p, 0)
	out.put("reference, at the set pressure", fromCertificate, u, s.pointwise, b*m.each(), 0)
	out.put("reference, drift since its date", fromCertificate, "1", halfWidth(s.drift), b*m.p, 0)
	out.put("reference, drift as a pressure", fromCertificate, u, halfWidth(s.driftAt), b*m.aged, 0)
	out.put("reference, temperature", fromCertificate, "1", halfWidth(s.warmth), b*m.p, 0)
	out.put("reference, resolution", fromBench, u, fullWidth(s.resolutionReference), b*math.Sqrt(m.points), 0)
	out.put("readout, gain", fromCertificate, "1", s.gain, m.y, 0)
	out.put("readout, excitation", fromCertificate, "1", s.volts, m.y, 0)
	out.put("UUT, resolution", fromBench, u, fullWidth(s.resolutionUUT), math.Sqrt(m.points), 0)
	out.put("noise of the reference", fromRun, u, scatter(math.Sqrt(n.vP)), b*math.Sqrt(m.reference), n.dofP)
	out.put("noise of the UUT", fromRun, u, scatter(math.Sqrt(n.vY)), math.Sqrt(m.blocks), n.dofY)
	out.put(n.named(), n.from, u, scatter(math.Sqrt(n.vSingle)), math.Sqrt(m.points), n.dofSingle)
	out.put("spread between cycles", fromRun, u, scatter(math.Sqrt(n.vCell)), math.Sqrt(m.cells), n.dofCell)
	out.put("settling left: slope x delay", fromRun, u, halfWidth(m.settling), 1, 0)
	out.why = n.why
	out.tidy()
	return out
}

// tidy drops what cancels but for the last bits. Whether these are exactly zero
// differs between processors, and with it the number of contributions that a
// Monte Carlo draws.
func (b *budget) tidy() {
	var most float64
	for _, e := range b.entries {
		most = math.Max(most, math.Abs(e.Standard*e.Sensitivity))
	}
	kept := b.entries[:0]
	for _, e := range b.entries {
		if math.Abs(e.Standard*e.Sensitivity) > 1e-9*most {
			kept = append(kept, e)
		}
	}
	b.entries = kept
}

// named says how the noise of a single reading is known.
func (n noise) named() string {
	if n.how == "" {
		return "noise of a reading"
	}
	return "noise of a reading, " + n.how
}

// errorOf is the weights of the error of some points after zeroing: their mean
// less that of the zero.
func (st *staticFigures) errorOf(points []int) []weight {
	w := make([]weight, 0, len(points)+len(st.zeros))
	for _, i := range points {
		w = append(w, weight{i, 1 / float64(len(points))})
	}
	return merge(w, st.zeros, -1/float64(len(st.zeros)))
}

// merge adds g for each of the points.
func merge(w []weight, points []int, g float64) []weight {
	place := make(map[int]int, len(w))
	for k, x := range w {
		place[x.i] = k
	}
	for _, i := range points {
		if k, known := place[i]; known {
			w[k].g += g
			continue
		}
		place[i] = len(w)
		w = append(w, weight{i, g})
	}
	return w
}

// value is Sum g_i (y_i - p_i).
func value(points []taken, w []weight) float64 {
	var v float64
	for _, x := range w {
		v += x.g * (points[x.i].y - points[x.i].p)
	}
	return v
}

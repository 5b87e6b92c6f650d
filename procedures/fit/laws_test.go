package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"reflect"
	"testing"
)

// drawn makes readings of every kind that a bench or a file may hold: few or
// many set pressures, some below zero, readings off them, legs and points that
// are missing or read twice, one cycle or several, mounted again, without set
// pressures, and typed to whole numbers, which makes ties.
func drawn(r *rand.Rand) Data {
	levels, cycles := 2+r.IntN(8), 1+r.IntN(4)
	low := []float64{0, 0, 0, -50, 20, -300}[r.IntN(6)]
	step := []float64{50, 50, 12.5, 1, 300}[r.IntN(5)]
	scatter := []float64{0, 0.02, 0.3}[r.IntN(3)] * step / 10
	noise := []float64{0, 1e-3, 0.05, 2}[r.IntN(4)] * step / 50
	grows, whole, oneLeg, gaps, twice := r.IntN(5) == 0, r.IntN(5) == 0, r.IntN(6) == 0, r.IntN(4) == 0, r.IntN(4) == 0
	bow, width, slope := 4*r.NormFloat64()*noise, 10*r.Float64()*noise, 1+0.02*r.NormFloat64()
	var d Data
	mountings := 1 + r.IntN(cycles)
	for c := range cycles {
		for k := range 2 * levels {
			down := k >= levels
			if down && oneLeg || gaps && r.IntN(6) == 0 {
				continue
			}
			times := 1
			if twice && r.IntN(4) == 0 {
				times = 2
			}
			for range times {
				l := min(k, 2*levels-1-k)
				set := low + step*float64(l)
				p := set + scatter*r.NormFloat64()
				share := float64(l) / float64(levels-1)
				y := 0.7*noise + slope*p + bow*share*(1-share)
				if grows {
					y += noise * share * share * r.NormFloat64()
				} else {
					y += noise * r.NormFloat64()
				}
				if down {
					y += width * share * (1 - share)
				}
				if whole {
					p, y = math.Round(p), math.Round(y)
				}
				d.Reference, d.UUT, d.Set = append(d.Reference, p), append(d.UUT, y), append(d.Set, set)
				d.Cycle, d.Down, d.Mounting = append(d.Cycle, 3*c+1), append(d.Down, down), append(d.Mounting, c*mountings/cycles)
			}
		}
	}
	if len(d.UUT) == 0 {
		return drawn(r)
	}
	if r.IntN(4) == 0 {
		d.Set = nil
	}
	if r.IntN(3) == 0 {
		d.Mounting = nil
	}
	if r.IntN(4) == 0 {
		zero := noise * r.NormFloat64()
		d.Zero = &zero
	}
	return d
}

// law is a figure by its name, its dimension in pressures, and what a line
// a + c p added to the UUT does to it.
type law struct {
	name      string
	value     float64 // NaN: undetermined
	dimension int
	a, c      float64
	far       float64 // of a coefficient at p = 0: how its digits go with the distance from there
}

// lawsOf spreads the figures out, with the places they were found at in words.
func lawsOf(d Data, f Figures) (figures []law, words string) {
	add := func(name string, v *float64, dimension int, a, c float64) {
		x := math.NaN()
		if v != nil {
			x = *v
		}
		figures = append(figures, law{name, x, dimension, a, c, 0})
	}
	if l := f.Line; l != nil {
		add("intercept", &l.Intercept, 1, 1, 0)
		add("slope", &l.Slope, 0, 0, 1)
		add("u(intercept)", &l.UIntercept, 1, 0, 0)
		add("u(slope)", &l.USlope, 0, 0, 0)
		add("residual", &l.Residual, 1, 0, 0)
		for k := range 4 {
			figures[len(figures)-2-k].far = 1
		}
	}
	add("zero offset", f.ZeroOffset, 1, 1, firstReference(d, f))
	for c, z := range f.ZeroReturn {
		add(fmt.Sprint("zero return ", c), z, 1, 0, 0)
	}
	deviation := func(name string, l *Deviation) {
		if l == nil {
			add(name, nil, 1, 0, 0)
			return
		}
		add(name, &l.Value, 1, 0, 0)
		add(name+", intercept", &l.Intercept, 1, 1, 0)
		figures[len(figures)-1].far = 1
		add(name+", slope", &l.Slope, 0, 0, 1)
		add(name+", u", &l.Standard, 1, 0, 0)
	}
	deviation("independent", f.Linearity.Independent)
	deviation("terminal", f.Linearity.Terminal)
	deviation("zero-based", f.Linearity.ZeroBased)
	deviation("least squares", f.Linearity.LeastSquares)
	for k := range f.EachHysteresis {
		h := &f.EachHysteresis[k]
		add(fmt.Sprintf("hysteresis, cycle %d", h.Cycle), &h.Value, 1, 0, 0)
	}
	add("pooled SD", f.Repeatability.PooledSD, 1, 0, 0)
	add("largest range", f.Repeatability.LargestRange, 1, 0, 0)
	add("reproducibility", f.Reproducibility, 1, 0, 0)
	for k := range f.Points {
		p := &f.Points[k]
		add("average", p.Average, 1, 1, p.Set)
		add("mean hysteresis", p.Hysteresis, 1, 0, 0)
		add("SD there", p.SD, 1, 0, 0)
		add("range up", p.RangeUp, 1, 0, 0)
		add("range down", p.RangeDown, 1, 0, 0)
		add("repeatability", p.Repeatability, 1, 0, 0)
		add("reproducibility there", p.Reproducibility, 1, 0, 0)
	}
	if g := f.Growing; g != nil {
		add("noise, constant", &g.Constant, 1, 0, 0)
		add("noise, share", &g.Share, 0, 0, 0)
		add("weighted intercept", &g.Line.Intercept, 1, 1, 0)
		add("weighted slope", &g.Line.Slope, 0, 0, 1)
		add("u(weighted intercept)", &g.Line.UIntercept, 1, 0, 0)
		for k := range 3 {
			figures[len(figures)-1-k].far = 1
		}
	}
	if m := f.Curvature; m != nil {
		for k := range m.Coefficients {
			a, c := 0., 0.
			switch k {
			case 0:
				a = 1
			case 1:
				c = 1
			}
			add(fmt.Sprint("power ", k), &m.Coefficients[k], 1-k, a, c)
		}
		for k := range m.Coefficients {
			figures[len(figures)-1-k].far = 3
		}
		add("residual about the curve", &m.Residual, 1, 0, 0)
	}
	codes := ""
	for _, r := range f.Reservations {
		codes += r.Code + " "
	}
	for _, u := range f.Undetermined {
		codes += u.Figure + " "
	}
	return figures, fmt.Sprint(f.Cycles, codes, f.Sets == nil)
}

// errorsOf are figures of y - p, which no added line leaves alone.
func errorsOf(f Figures) (figures []law, words string) {
	for _, l := range []Located{*f.LargestError, *f.ErrorAfterZero, f.AsRead.Highest, f.AsRead.Lowest, f.AfterZero.Highest, f.AfterZero.Lowest} {
		figures = append(figures, law{name: "error", value: l.Value, dimension: 1})
		words += fmt.Sprintf("%d %v; ", l.Cycle, l.Down)
	}
	if f.Hysteresis != nil {
		figures = append(figures, law{name: "largest hysteresis", value: math.Abs(f.Hysteresis.Value), dimension: 1})
	}
	return figures, words
}

// firstReference is the mean p of the readings that the zero offset is of,
// found by looking at all of them.
func firstReference(d Data, f Figures) float64 {
	best, sum, n := -1, 0., 0.
	key := f.Sets
	if math.IsNaN(key[0]) {
		key = d.Reference
	}
	before := func(i, j int) bool {
		a, b := math.Abs(key[i]), math.Abs(key[j])
		switch {
		case a != b:
			return a < b
		case d.Cycle[i] != d.Cycle[j]:
			return d.Cycle[i] < d.Cycle[j]
		case d.Down[i] != d.Down[j]:
			return !d.Down[i]
		}
		return d.Down[i] == (key[i] > key[j]) && key[i] != key[j]
	}
	for i := range key {
		if best < 0 || before(i, best) {
			best = i
		}
	}
	for i := range key {
		if key[i] == key[best] && d.Cycle[i] == d.Cycle[best] && d.Down[i] == d.Down[best] {
			sum += d.Reference[i]
			n++
		}
	}
	return sum / n
}

// trials is how many sets are drawn: 1,500, or 60,000 with KYMOBENCH_FULL=1.
func trials() int {
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		return 60_000
	}
	return 1500
}

// Laws, to 1e-9 of the span: a line added to the UUT's output moves no
// linearity, hysteresis, zero return or repeatability, shifts the intercept and
// the slope by its own, and the offset by itself; everything scales under a
// change of unit; the order of readings that keep their cycle and leg changes
// nothing.
func TestLaws(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	determined := map[string]int{}
	for trial := range trials() {
		d := drawn(r)
		one, err := Static(d)
		if err != nil {
			t.Fatal(err)
		}
		figures, words := lawsOf(d, one)
		for _, f := range figures {
			if !math.IsNaN(f.value) {
				determined[f.name]++
			}
		}
		span := spanOf(d)
		a, c, by := 7*r.NormFloat64(), 0.5*r.NormFloat64(), math.Pow(10, 4*r.Float64()-2)
		check := func(what string, changed Data, want func(law) float64, size float64, errors bool) {
			t.Helper()
			other, err := Static(changed)
			if err != nil {
				t.Fatal(err)
			}
			got, now := lawsOf(changed, other)
			had := figures
			if errors {
				e, w := errorsOf(one)
				had, words = append(had[:len(had):len(had)], e...), words+w
				e, w = errorsOf(other)
				got, now = append(got, e...), now+w
			}
			if now != words || len(got) != len(had) {
				t.Fatalf("trial %d, %s: %s, before %s", trial, what, now, words)
			}
			for k, f := range had {
				x, y := want(f), got[k].value
				tol := 1e-9 * math.Pow(size, float64(f.dimension))
				tol *= math.Pow(farOf(d), f.far)
				if math.IsNaN(x) != math.IsNaN(y) || math.Abs(x-y) > tol {
					t.Fatalf("trial %d, %s: %s %.12g, want %.12g", trial, what, f.name, y, x)
				}
			}
			_, words = lawsOf(d, one)
		}
		line, unit := d, d
		line.UUT, unit.Reference, unit.UUT, unit.Set = nil, nil, nil, nil
		for i := range d.UUT {
			line.UUT = append(line.UUT, d.UUT[i]+a+c*d.Reference[i])
			unit.Reference, unit.UUT = append(unit.Reference, d.Reference[i]*by), append(unit.UUT, d.UUT[i]*by)
			if d.Set != nil {
				unit.Set = append(unit.Set, d.Set[i]*by)
			}
		}
		if d.Zero != nil {
			zero := *d.Zero * by
			unit.Zero = &zero
		}
		check("line added", line, func(f law) float64 { return f.value + f.a*a + f.c*c }, span, false)
		check("unit changed", unit, func(f law) float64 { return f.value * math.Pow(by, float64(f.dimension)) }, span*by, true)
		check("mixed", mixed(r, d), func(f law) float64 { return f.value }, span, true)
	}
	// The law holds of something: every figure was there in many trials.
	for name, n := range determined {
		if n < trials()/100 {
			t.Errorf("%s was determined in %d trials", name, n)
		}
	}
	if len(determined) < 30 {
		t.Errorf("only %d figures", len(determined))
	}
}

// farOf is how far from zero the readings lie, in half spans.
func farOf(d Data) float64 {
	var far float64
	for _, p := range d.Reference {
		far = max(far, math.Abs(p))
	}
	return max(1, far/spanOf(d)*2)
}

func spanOf(d Data) float64 {
	low, high := math.Inf(1), math.Inf(-1)
	for _, p := range d.Reference {
		low, high = min(low, p), max(high, p)
	}
	return max(high-low, 1e-3)
}

// mixed gives the readings in another order.
func mixed(r *rand.Rand, d Data) Data {
	out := Data{Zero: d.Zero}
	for _, i := range r.Perm(len(d.UUT)) {
		out.Reference, out.UUT = append(out.Reference, d.Reference[i]), append(out.UUT, d.UUT[i])
		out.Cycle, out.Down = append(out.Cycle, d.Cycle[i]), append(out.Down, d.Down[i])
		if d.Set != nil {
			out.Set = append(out.Set, d.Set[i])
		}
		if d.Mounting != nil {
			out.Mounting = append(out.Mounting, d.Mounting[i])
		}
	}
	return out
}

// A figure is missing exactly where a reason is given, and no input is touched.
func TestReasons(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	for range 2000 {
		d := drawn(r)
		before := Data{append([]float64(nil), d.Reference...), append([]float64(nil), d.UUT...), append([]int(nil), d.Cycle...), append([]bool(nil), d.Down...), append([]float64(nil), d.Set...), append([]int(nil), d.Mounting...), d.Zero, d.Astray}
		f, err := Static(d)
		if err != nil {
			t.Fatal(err)
		}
		if !reflect.DeepEqual(d, before) && len(d.Set) > 0 && len(d.Mounting) > 0 {
			t.Fatal("the readings were changed")
		}
		reasons := map[string]string{}
		for _, u := range f.Undetermined {
			reasons[u.Figure] = u.Reason
		}
		back := false
		for _, z := range f.ZeroReturn {
			back = back || z == nil
		}
		for figure, missing := range map[string]bool{
			FigureLine: f.Line == nil, FigureLinearity: f.Linearity.Independent == nil, FigureHysteresis: f.Hysteresis == nil,
			FigureRepeatability: f.Repeatability.PooledSD == nil, FigureReproducibility: f.Reproducibility == nil,
			FigureZeroReturn: back, FigureCurvature: f.Curvature == nil,
		} {
			if (reasons[figure] != "") != missing {
				t.Fatalf("%s: missing %v, reason %q", figure, missing, reasons[figure])
			}
		}
		for _, l := range []*Deviation{f.Linearity.Terminal, f.Linearity.ZeroBased, f.Linearity.LeastSquares} {
			if (l == nil) != (f.Linearity.Independent == nil) {
				t.Fatal("one linearity without the others")
			}
		}
	}
}

package step

import (
	"encoding/csv"
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"os"
	"slices"
	"strconv"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// The campaign that holds the errors of the fit against the Cramer-Rao bound.
// The whole of it, which writes the table anew, is run by
//
//	KYMOBENCH_FULL=1 go test -run 'TestEfficiency' -v -timeout 90m ./procedures/step
//
// with 2,000 trials a case; without the variable a few cases are run with few.
const efficiencyTable = "testdata/efficiency/table.csv"

// effCase is a line, a sample rate, a noise and what is known of the edge.
type effCase struct {
	edge           string // known, fitted, applied
	fn, zeta, rate float64
	noise          float64 // standard deviation, part of the step
	before, after  float64 // window, s
	edgeTime       float64 // full width (fitted) or time constant (applied), s
}

// effCases lists the whole campaign. Windows reach 20 settling time constants
// beyond the step, at least 64 samples and 0.1 s; before it 0.4 s.
func effCases() []effCase {
	var all []effCase
	for _, edge := range []string{"known", "applied", "fitted"} {
		for _, fn := range []float64{8, 15, 24, 40, 200} {
			for _, zeta := range []float64{0.1, 0.2, 0.4, 0.64, 1, 1.5} {
				for _, rate := range []float64{250, 1000, 4000} {
					if rate < 5*fn || zeta >= 1 && rate < 10*fn {
						continue
					}
					for _, noise := range []float64{0.005, 0.0005} {
						c := effCase{edge: edge, fn: fn, zeta: zeta, rate: rate, noise: noise, before: 0.4}
						c.after = max(20*slowest(fn, zeta), 64/rate, 0.1)
						switch edge {
						case "fitted":
							c.edgeTime = 0.2 / fn
						case "applied":
							c.edgeTime = 0.1 / fn
							c.after += 12 * c.edgeTime
						}
						all = append(all, c)
					}
				}
			}
		}
	}
	return all
}

func (c effCase) samples() int { return int((c.before + c.after) * c.rate) }

// shape is the answer t seconds after the edge; v is the square of its width.
func (c effCase) shape(t, fn, zeta, v float64) float64 {
	switch c.edge {
	case "applied":
		return exponentialEdge(t, c.edgeTime, fn, zeta)
	case "fitted":
		return trueEdge(t, math.Sqrt(v), fn, zeta)
	}
	g, _ := trueStep(t, fn, zeta)
	return g
}

// exponentialEdge is the answer to 1 - exp(-t/tau), from the poles.
func exponentialEdge(t, tau, fn, zeta float64) float64 {
	if t <= 0 {
		return 0
	}
	if math.Abs(zeta-1) < 1e-4 {
		// The two poles meet: the mean of both sides is right to 1e-8.
		return (exponentialEdge(t, tau, fn, 1+2e-4) + exponentialEdge(t, tau, fn, 1-2e-4)) / 2
	}
	g, _ := trueStep(t, fn, zeta)
	w, a, at := complex(2*math.Pi*fn, 0), complex(-1/tau, 0), complex(t, 0)
	root := cmplx.Sqrt(complex(zeta*zeta-1, 0))
	p1, p2 := w*(complex(-zeta, 0)+root), w*(complex(-zeta, 0)-root)
	h := w * w / ((a - p1) * (a - p2))
	// exp(a t) drives h exp(a t); the two modes start it from rest.
	c1, c2 := h*(a-p2)/(p2-p1), h*(a-p1)/(p1-p2)
	return g - real(h*cmplx.Exp(a*at)+c1*cmplx.Exp(p1*at)+c2*cmplx.Exp(p2*at))
}

// bound is the Cramer-Rao bound of ln fn and zeta under white noise, from the
// numerical Fisher matrix of exactly the parameters freed (height, level,
// drift, time, ln fn, zeta and, when it is fitted, the square of the width),
// the variances averaged over eight positions of the step between samples.
func (c effCase) bound() (lnFn, zeta float64) {
	n, size := c.samples(), 6
	if c.edge == "fitted" {
		size = 7
	}
	truth := [7]float64{1, 0, 0, 0, math.Log(c.fn), c.zeta, c.edgeTime * c.edgeTime}
	step := [7]float64{1e-3, 1, 1, 1e-5 / c.fn, 1e-5, 1e-5, 1e-5 / c.fn / c.fn}
	const phases = 8
	for phase := range phases {
		at := c.before + (float64(phase)+0.5)/phases/c.rate
		j := mat.NewDense(n, size, nil)
		var length [7]float64
		for k := range size {
			up, down := truth, truth
			up[k] += step[k]
			down[k] -= step[k]
			value := func(p *[7]float64, t float64) float64 {
				return p[1] + p[2]*t + p[0]*c.shape(t-p[3], math.Exp(p[4]), p[5], p[6])
			}
			for i := range n {
				t := float64(i)/c.rate - at
				d := (value(&up, t) - value(&down, t)) / (2 * step[k])
				j.Set(i, k, d)
				length[k] += d * d
			}
		}
		for k := range size {
			length[k] = math.Sqrt(length[k])
			for i := range n {
				j.Set(i, k, j.At(i, k)/length[k])
			}
		}
		var information, inverse mat.Dense
		information.Mul(j.T(), j)
		if inverse.Inverse(&information) != nil {
			return math.Inf(1), math.Inf(1)
		}
		lnFn += inverse.At(4, 4) / length[4] / length[4] / phases
		zeta += inverse.At(5, 5) / length[5] / length[5] / phases
	}
	return c.noise * math.Sqrt(lnFn), c.noise * math.Sqrt(zeta)
}

// trace draws one trial.
func (c effCase) trace(r *rand.Rand) Trace {
	at := c.before + r.Float64()/c.rate
	t := Trace{Rate: c.rate, Pressure: make([]float64, c.samples())}
	if c.edge == "applied" {
		t.Applied = make([]float64, len(t.Pressure))
	}
	for i := range t.Pressure {
		since := float64(i)/c.rate - at
		t.Pressure[i] = 100*c.shape(since, c.fn, c.zeta, c.edgeTime*c.edgeTime) + 100*c.noise*r.NormFloat64()
		if t.Applied != nil && since > 0 {
			t.Applied[i] = 100 * -math.Expm1(-since/c.edgeTime)
		}
	}
	return t
}

func (c effCase) settings() Settings {
	return Settings{EdgeStated: c.edge == "known", ReadoutStated: true, MinimumStep: 8}
}

// effRow is what a case came to.
type effRow struct {
	effCase
	trials, refused, gross, reserved int
	boundFn, boundZeta               float64
	ratioFn, ratioZeta               float64
}

// run does the trials of one case.
func (c effCase) run(t *testing.T, count int, seed uint64) effRow {
	t.Helper()
	row := effRow{effCase: c, trials: count}
	row.boundFn, row.boundZeta = c.bound()
	r := rand.New(rand.NewPCG(seed, 77))
	var fn, zeta float64
	for range count {
		_, combined, reservations, err := Analyse(c.trace(r), c.settings())
		if err != nil {
			t.Fatal(err)
		}
		if len(reservations) > 0 {
			row.reserved++
		}
		if !combined.Determined {
			row.refused++
			continue
		}
		e := combined.Frequency.Value/c.fn - 1
		if math.Abs(e) > 0.2 {
			row.gross++
		}
		fn += e * e
		zeta += math.Pow(combined.Damping.Value-c.zeta, 2)
	}
	n := float64(count - row.refused)
	row.ratioFn, row.ratioZeta = math.Sqrt(fn/n)/row.boundFn, math.Sqrt(zeta/n)/row.boundZeta
	return row
}

// verdictOfRows holds the rows of one kind of edge to the limits, which leave
// room for three standard deviations of a ratio from that many trials.
func holdRows(t *testing.T, edge string, rows []effRow) {
	t.Helper()
	var mean [2]float64
	count, trials, lost := 0, 0, 0
	for _, row := range rows {
		if row.edge != edge {
			continue
		}
		count++
		trials += row.trials
		lost += row.refused + row.gross
		slack := 3 / math.Sqrt(2*float64(row.trials))
		for k, ratio := range []float64{row.ratioFn, row.ratioZeta} {
			mean[k] += ratio
			if !(ratio <= 1.08+slack) {
				t.Errorf("%s: rmse over bound %.3f (%d trials)", row, ratio, row.trials)
			}
		}
	}
	if count == 0 {
		t.Errorf("no rows with the edge %s", edge)
		return
	}
	slack := 3 / math.Sqrt(2*float64(trials))
	for k := range mean {
		mean[k] /= float64(count)
		if !(mean[k] <= 1.02+slack) {
			t.Errorf("edge %s: mean of rmse over bound %.4f", edge, mean[k])
		}
	}
	if float64(lost) > 0.001*float64(trials)+3*math.Sqrt(0.001*float64(trials)) {
		t.Errorf("edge %s: %d refused or over 20 %% wrong of %d", edge, lost, trials)
	}
	t.Logf("edge %s: %d cases, mean of rmse over bound %.4f and %.4f, refused or gross %d of %d", edge, count, mean[0], mean[1], lost, trials)
}

func (row effRow) String() string {
	return fmt.Sprintf("%s fn %g zeta %g rate %g noise %g", row.edge, row.fn, row.zeta, row.rate, row.noise)
}

// largestBound: cases whose bound of fn lies above are left out.
const largestBound = 0.03

func TestEfficiency(t *testing.T) {
	var rows []effRow
	for k, c := range effCases() {
		if !full() && (k%23 != 3 || c.samples() > 2000) || full() && !c.asked() {
			continue
		}
		if fn, _ := c.bound(); !(fn < largestBound) {
			continue
		}
		row := c.run(t, trials(30, 2000), uint64(k))
		t.Logf("%s: bound %.3g %.3g, rmse over bound %.3f %.3f, refused %d gross %d reserved %d", row, row.boundFn, row.boundZeta, row.ratioFn, row.ratioZeta, row.refused, row.gross, row.reserved)
		rows = append(rows, row)
	}
	for _, edge := range []string{"known", "applied", "fitted"} {
		if full() && !slices.ContainsFunc(rows, func(r effRow) bool { return r.edge == edge }) {
			continue
		}
		holdRows(t, edge, rows)
	}
	if full() {
		store(t, rows)
	}
}

// asked lets a whole campaign be run in pieces: KYMOBENCH_EDGE names the kind
// of edge, KYMOBENCH_FN the natural frequency.
func (c effCase) asked() bool {
	edge, fn := os.Getenv("KYMOBENCH_EDGE"), os.Getenv("KYMOBENCH_FN")
	return (edge == "" || edge == c.edge) && (fn == "" || fn == strconv.FormatFloat(c.fn, 'g', -1, 64))
}

var effHeader = []string{"edge", "fn_Hz", "zeta", "rate_Hz", "noise_part", "samples", "trials", "bound_fn", "bound_zeta", "rmse_over_bound_fn", "rmse_over_bound_zeta", "refused", "gross", "reserved"}

// store puts rows in the table in the place of those of the same cases.
func store(t *testing.T, rows []effRow) {
	t.Helper()
	kept := map[string][]string{}
	for _, line := range tableLines(t) {
		kept[fmt.Sprint(line[:5])] = line
	}
	g := func(v float64) string { return strconv.FormatFloat(v, 'g', 4, 64) }
	for _, r := range rows {
		line := []string{r.edge, g(r.fn), g(r.zeta), g(r.rate), g(r.noise), strconv.Itoa(r.samples()), strconv.Itoa(r.trials),
			g(r.boundFn), g(r.boundZeta), g(r.ratioFn), g(r.ratioZeta), strconv.Itoa(r.refused), strconv.Itoa(r.gross), strconv.Itoa(r.reserved)}
		kept[fmt.Sprint(line[:5])] = line
	}
	file, err := os.Create(efficiencyTable)
	if err != nil {
		t.Fatal(err)
	}
	w := csv.NewWriter(file)
	w.Write(effHeader)
	for _, c := range effCases() {
		if line, ok := kept[fmt.Sprint([]string{c.edge, g(c.fn), g(c.zeta), g(c.rate), g(c.noise)})]; ok {
			w.Write(line)
		}
	}
	w.Flush()
	if err := file.Close(); w.Error() != nil || err != nil {
		t.Fatal(w.Error(), err)
	}
}

func tableLines(t *testing.T) [][]string {
	t.Helper()
	file, err := os.Open(efficiencyTable)
	if os.IsNotExist(err) {
		return nil
	}
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	lines, err := csv.NewReader(file).ReadAll()
	if err != nil || len(lines) == 0 || !slices.Equal(lines[0], effHeader) {
		t.Fatalf("%s: %v", efficiencyTable, err)
	}
	return lines[1:]
}

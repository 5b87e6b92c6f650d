package step

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"strings"
	"testing"
)

// checkCoverage wants 93 % to most, widened by three standard deviations of
// a count of n.
func checkCoverage(t *testing.T, name string, fn, zeta float64, n int, most float64) {
	t.Helper()
	slack := 3 * math.Sqrt(0.95*0.05/float64(n))
	for _, c := range []float64{fn, zeta} {
		if c < 0.93-slack || c > most+slack {
			t.Errorf("%s: the 95 %% intervals cover %.3f and %.3f in %d trials", name, fn, zeta, n)
			return
		}
	}
}

// The 95 % intervals: white noise, noise correlated from sample to sample,
// coarse digits, several steps with and without a spread of their own three
// times what the fits claim, edges known, stated and fitted.
//
//	KYMOBENCH_FULL=1 go test -run 'TestCoverage$' -v -timeout 90m ./procedures/step
//
// makes 5,000 trials a row; KYMOBENCH_ROWS picks rows by a part of their name.
func TestCoverage(t *testing.T) {
	type row struct {
		name  string
		plan  plan
		s     Settings
		count int
	}
	var rows []row
	known := Settings{EdgeStated: true, ReadoutStated: true, MinimumStep: 8}
	base := func(fn, zeta float64) plan {
		return plan{fn: fn, zeta: zeta, rate: max(250, 20*fn), before: 0.4, spacing: 25*slowest(fn, zeta) + 0.2, heights: []float64{100}, sigma: 0.5}
	}
	for _, fn := range []float64{8, 24} {
		for _, zeta := range []float64{0.2, 0.64, 1} {
			if !full() && (fn == 8) != (zeta == 0.64) {
				continue
			}
			for _, phi := range []float64{0, 0.5, 0.9} {
				p := base(fn, zeta)
				p.phi = phi
				p.sigma = 0.3
				rows = append(rows, row{fmt.Sprintf("AR(1) %.1f", phi), p, known, 400})
			}
			p := base(fn, zeta)
			p.heights = []float64{100, -100, 100, -100, 100}
			p.spacing += 0.7
			rows = append(rows, row{"five steps", p, known, 150})
			p.heights = p.heights[:1]
			if p.spreadFn, p.spreadZeta = p.bound(false); true {
				p.spreadFn, p.spreadZeta = 3*p.spreadFn, 3*p.spreadZeta
			}
			p.heights = []float64{100, -100, 100, -100, 100}
			rows = append(rows, row{"five steps, spread", p, known, 150})
			p = base(fn, zeta)
			p.sigma = 0.2
			rows = append(rows, row{"width fitted, T fn 0", p, Settings{MinimumStep: 8}, 400})
			p.width = 0.2 / fn
			rows = append(rows, row{"width fitted, T fn 0.2", p, Settings{MinimumStep: 8}, 400})
			rows = append(rows, row{"ramp stated, T fn 0.2", p, Settings{EdgeStated: true, EdgeTime: 0.8 * p.width, EdgeTolerance: 0.01, ReadoutStated: true, MinimumStep: 8}, 400})
			p = base(fn, zeta)
			p.quantum, p.sigma = 0.5, 0.2
			rows = append(rows, row{"quantised, sigma/LSB 0.4", p, known, 400})
		}
	}
	var pooled, inside float64
	for _, row := range rows {
		if rows := os.Getenv("KYMOBENCH_ROWS"); full() && !strings.Contains(row.name, rows) {
			continue
		}
		sum := simulate(t, row.plan, row.s, trials(row.count/16, 5000), campaignSeed(3))
		n := float64(sum.count - sum.refused)
		rmseFn, rmseZeta := sum.rmse()
		p := row.plan
		p.heights = p.heights[:1]
		b, z := p.bound(!row.s.EdgeStated)
		root := math.Sqrt(float64(len(row.plan.heights)))
		most := 0.97
		if row.plan.width == 0 && !row.s.EdgeStated {
			most = 0.985 // the width is held at 0 in half of the trials
		}
		pooled += 2 * n
		inside += float64(sum.coverFn + sum.coverZeta)
		checkCoverage(t, row.name, float64(sum.coverFn)/n, float64(sum.coverZeta)/n, int(n), most)
		if float64(sum.refused) > 0.02*float64(sum.count) {
			t.Errorf("%s: %d refused of %d", row.name, sum.refused, sum.count)
		}
		t.Logf("%-25s fn %2g zeta %.2f cover %.3f %.3f  rmse/bound(white) %.3f %.3f refused %d of %d reserved %d", row.name, row.plan.fn, row.plan.zeta, float64(sum.coverFn)/n, float64(sum.coverZeta)/n, root*rmseFn/b, root*rmseZeta/z, sum.refused, sum.count, sum.reserved)
	}
	// A row of a daily test is too short to find intervals too wide; all
	// rows together are not.
	t.Logf("all rows: cover %.4f", inside/pooled)
	if inside/pooled < 0.935 || inside/pooled > 0.97 {
		t.Errorf("over all rows the 95 %% intervals cover %.4f", inside/pooled)
	}
}

// appliedTrace puts an exponential edge of time constant tau through a line
// and measures it where it enters.
func appliedTrace(p plan, tau, sigmaApplied float64, r *rand.Rand) Trace {
	n := int((p.before + p.spacing) * p.rate)
	t := Trace{Rate: p.rate, Pressure: make([]float64, n), Applied: make([]float64, n)}
	const fine = 16
	u := make([]float64, n*fine)
	for i := range u {
		since := float64(i)/fine/p.rate - p.at(0)
		if since > 0 {
			u[i] = 100 * (1 - math.Exp(-since/tau))
		}
	}
	y := filtered(u, 1/p.rate/fine, p.fn, p.zeta)
	for i := range n {
		t.Applied[i] = u[i*fine] + sigmaApplied*r.NormFloat64()
		t.Pressure[i] = p.level + y[i*fine] + p.sigma*r.NormFloat64()
	}
	return t
}

func TestAppliedPressure(t *testing.T) {
	for _, fn := range []float64{8, 24, 60} {
		for _, zeta := range []float64{0.2, 0.64, 1} {
			if !full() && (fn != 24 || zeta == 1) {
				continue
			}
			for _, part := range []float64{0.02, 0.2, 0.6} {
				p := plan{fn: fn, zeta: zeta, rate: max(500, 20*fn), before: 0.4, sigma: 0.2, level: 5, heights: []float64{100}}
				tau := part / fn
				p.spacing = 25*slowest(fn, zeta) + 12*tau
				r := rand.New(rand.NewPCG(5, 5))
				var sum tally
				for range trials(25, 300) {
					p.phase = r.Float64()
					_, c, reservations, err := Analyse(appliedTrace(p, tau, 0.1, r), Settings{MinimumStep: 8})
					if err != nil {
						t.Fatal(err)
					}
					sum.add(p, c, reservations)
				}
				rmseFn, rmseZeta := sum.rmse()
				n := float64(sum.count - sum.refused)
				name := fmt.Sprintf("applied, tau fn %g, fn %g, zeta %g", part, fn, zeta)
				checkCoverage(t, name, float64(sum.coverFn)/n, float64(sum.coverZeta)/n, int(n), 1)
				if sum.gross > 0 || float64(sum.refused+sum.reserved) > 0.08*float64(sum.count) && full() {
					t.Errorf("%s: refused %d reserved %d gross %d of %d", name, sum.refused, sum.reserved, sum.gross, sum.count)
				}
				t.Logf("applied tau fn %.2f fn %2g zeta %.2f rmse %.3f %% %.4f cover %.3f %.3f refused %d reserved %d of %d", part, fn, zeta, 100*rmseFn, rmseZeta, float64(sum.coverFn)/n, float64(sum.coverZeta)/n, sum.refused, sum.reserved, sum.count)
			}
		}
	}
}

package layout1

import (
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"strings"
	"testing"

	"kymobench/procedures/results"
)

// Reports of varied content, from a seed: no text outside the margins and none
// on another. KYMOBENCH_REPORTS says how many; the default keeps the test short.
func TestManyReports(t *testing.T) {
	n := 20
	if s, err := strconv.Atoi(os.Getenv("KYMOBENCH_REPORTS")); err == nil && s > 0 {
		n = s
	}
	for seed := range n {
		m := varied(t, rand.New(rand.NewPCG(uint64(seed), 1)))
		name := fmt.Sprintf("seed %d", seed)
		pages := pagesOf(t, render(t, m))
		boxes(t, name, pages)
		for i, p := range pages {
			// Head and foot alone, without a line between, are a page too many.
			if len(p) < 6 {
				t.Errorf("%s, page %d is empty", name, i+1)
			}
		}
	}
}

func varied(t testing.TB, r *rand.Rand) made {
	w := plainWords()
	if r.IntN(2) == 0 {
		w = longWords()
	}
	w.simulated = r.IntN(2) == 0
	prose := func(most int) string {
		var s []string
		for range 1 + r.IntN(most) {
			s = append(s, strings.Repeat("word", 1+r.IntN(4)))
		}
		return strings.Join(s, " ")
	}
	list := func(most int) []results.Reason {
		var out []results.Reason
		for i := range r.IntN(most) {
			out = append(out, results.Reason{Code: strconv.Itoa(i), Text: strconv.Itoa(i) + " " + prose(40)})
		}
		return out
	}
	m := accepted(t)
	m.run = w.run
	m.events = events(t, w, "", nil)
	m.statement = statement(w, len(m.events))
	m.statement.Meaning = prose(30)
	res := &m.results
	set(t, res, []string{"accepted", "rejected", "inconclusive"}[r.IntN(3)])
	res.Reasons, res.Reservations = list(5), list(12)
	cycles := 1 + r.IntN(5)
	res.Static, res.Curve = static(cycles), curve(math.Pow(10, 3*r.Float64()-1), cycles)
	if r.IntN(4) == 0 {
		res.Static, res.Curve = nil, nil
	}
	if count := r.IntN(13); count > 0 {
		var missing []int
		for i := range r.IntN(count) {
			missing = append(missing, i+1)
		}
		res.Step, res.Traces = steps(math.Pow(10, 0.8+1.5*r.Float64()), 0.05+0.9*r.Float64(), count, missing...)
	} else {
		res.Step, res.Traces = nil, nil
	}
	for range r.IntN(8) {
		l := res.Limits[r.IntN(len(res.Limits))]
		l.Origin, l.Reason = prose(60), prose(30)
		value, u := (r.Float64()-0.5)*math.Pow(10, 6*r.Float64()-2), math.Pow(10, 4*r.Float64()-3)
		l.Value, l.Expanded = &value, &u
		if r.IntN(3) == 0 {
			l.Value, l.Expanded, l.Budget = nil, nil, nil
		}
		if err := l.Outcome.UnmarshalText([]byte([]string{"pass", "conditional_pass", "conditional_fail", "fail", "undetermined"}[r.IntN(5)])); err != nil {
			t.Fatal(err)
		}
		res.Limits = append(res.Limits, l)
	}
	if r.IntN(3) == 0 {
		res.Leak = nil
	}
	return m
}

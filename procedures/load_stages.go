package procedures

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
)

// stageFile holds the keys of all kinds of stage; stageKeys says which of them
// a kind has.
type stageFile struct {
	Kind                string   `toml:"kind"`
	Minimum             string   `toml:"minimum"`
	LongestWait         string   `toml:"longest_wait"`
	For                 string   `toml:"for"`
	Cycles              int      `toml:"cycles"`
	To                  string   `toml:"to"`
	Dwell               string   `toml:"dwell"`
	At                  string   `toml:"at"`
	Settle              string   `toml:"settle"`
	HighestRate         string   `toml:"highest_rate"`
	SetPressures        []string `toml:"set_pressures"`
	Window              string   `toml:"window"`
	Overshoot           string   `toml:"overshoot"`
	ShareOfLimit        string   `toml:"share_of_limit"`
	StandardUncertainty string   `toml:"standard_uncertainty"`
	LeastReadings       int      `toml:"least_readings"`
	Count               int      `toml:"count"`
	LeastCount          int      `toml:"least_count"`
	MostCount           int      `toml:"most_count"`
	Size                string   `toml:"size"`
	Direction           string   `toml:"direction"`
	Before              string   `toml:"before"`
	After               string   `toml:"after"`
	Place               string   `toml:"place"`
	LineLength          string   `toml:"line_length"`
	Bore                string   `toml:"bore"`
	Fluid               string   `toml:"fluid"`
	FlushDevice         string   `toml:"flush_device"`
	VentedWithin        string   `toml:"vented_within"`
	LongestFor          string   `toml:"longest_for"`
	Relaxation          string   `toml:"relaxation"`
	LongestTau          string   `toml:"longest_time_constant"`
	FluidDensity        string   `toml:"fluid_density"`
	FluidViscosity      string   `toml:"fluid_viscosity"`
	DesignedFrequency   string   `toml:"designed_frequency"`
	DesignedDamping     string   `toml:"designed_damping"`
}

// mayHave lists the keys that a kind of stage may have or not.
func mayHave(kind string) []string {
	switch kind {
	case "leak":
		return []string{"longest_for", "relaxation", "longest_time_constant"}
	case "zero":
		return []string{"vented_within", "share_of_limit", "standard_uncertainty", "least_readings"}
	case "step":
		return []string{"count", "least_count", "most_count", "fluid_density", "fluid_viscosity", "designed_frequency", "designed_damping"}
	}
	return nil
}

// stageKeys lists the keys that each kind of stage must have.
func stageKeys(kind string) []string {
	keys := map[string]string{
		"warm_up":  "minimum longest_wait",
		"zero":     "for longest_wait",
		"exercise": "cycles to dwell longest_wait",
		"leak":     "at settle for highest_rate longest_wait",
		"static": "set_pressures cycles window overshoot share_of_limit standard_uncertainty least_readings " +
			"longest_wait",
		"step": "size direction settle before after longest_wait place line_length bore fluid flush_device",
	}
	return strings.Fields(keys[kind])
}

func (l *loader) stages(d *Definition) {
	kinds := []string{"warm_up", "zero", "exercise", "leak", "static", "step"}
	l.demand(len(l.file.Stages) > 0, "the procedure has no stages, so nothing would be done", "", "stage")
	for i := range l.file.Stages {
		kind := tomlfile.TakeWord(l.doc, &l.err, kinds, "stage", i, "kind")
		if l.err != nil {
			return
		}
		l.keysOf(kind, i)
		var stage Stage
		switch kind {
		case "warm_up":
			stage = WarmUp{Minimum: l.span(i, "minimum"), LongestWait: l.span(i, "longest_wait")}
		case "zero":
			stage = l.zero(i)
		case "exercise":
			stage = Exercise{
				Cycles: l.count(i, "cycles", l.file.Stages[i].Cycles, 100), To: l.setPressure(d, i, "to"),
				Dwell: l.span(i, "dwell"), LongestWait: l.span(i, "longest_wait"),
			}
		case "leak":
			stage = l.leak(d, i)
		case "static":
			stage = l.static(d, i)
		case "step":
			stage = l.step(d, i)
		}
		d.Stages = append(d.Stages, stage)
	}
}

// keysOf refuses keys that another kind of stage has and asks for all of its own.
func (l *loader) keysOf(kind string, i int) {
	own, optional := stageKeys(kind), mayHave(kind)
	for _, key := range l.doc.Keys("stage", i) {
		if key != "kind" && !slices.Contains(own, key) && !slices.Contains(optional, key) {
			l.refuse(l.doc.RefuseKey(fmt.Sprintf("a %s stage has no key %q", kind, key),
				"it has: "+strings.Join(slices.Concat(own, optional), ", "), "stage", i, key))
		}
	}
	for _, key := range own {
		if !l.doc.Has("stage", i, key) {
			l.refuse(l.doc.Missing("", "stage", i, key))
		}
	}
}

// zero takes a zero stage; how well it must be known has defaults.
func (l *loader) zero(i int) Zero {
	s := Zero{
		For: l.span(i, "for"), LongestWait: l.span(i, "longest_wait"),
		VentedWithin: quantity.MmHg(5), ShareOfLimit: 0.05, StandardUncertainty: quantity.MmHg(0.05), LeastReadings: 8,
	}
	if l.doc.Has("stage", i, "vented_within") {
		s.VentedWithin = l.above(i, "vented_within")
	}
	if l.doc.Has("stage", i, "share_of_limit") {
		s.ShareOfLimit = l.shareOfLimit(i)
	}
	if l.doc.Has("stage", i, "standard_uncertainty") {
		s.StandardUncertainty = l.above(i, "standard_uncertainty")
	}
	if l.doc.Has("stage", i, "least_readings") {
		s.LeastReadings = l.leastReadings(i)
	}
	return s
}

func (l *loader) shareOfLimit(i int) float64 {
	share := tomlfile.Take(l.doc, &l.err, parseShare, "stage", i, "share_of_limit")
	l.demand(share > 0 && share <= 0.5, "the share is above 0 % and at most 50 %", "", "stage", i, "share_of_limit")
	return share
}

func (l *loader) leastReadings(i int) int {
	n := l.count(i, "least_readings", l.file.Stages[i].LeastReadings, 1000)
	l.demand(n >= 5, "a mean of fewer than five readings says nothing of its noise", "", "stage", i, "least_readings")
	return n
}

func (l *loader) leak(d *Definition, i int) Leak {
	s := Leak{
		At: l.setPressure(d, i, "at"), Settle: l.span(i, "settle"), For: l.span(i, "for"),
		HighestRate: tomlfile.Take(l.doc, &l.err, parseRate, "stage", i, "highest_rate"),
		LongestWait: l.span(i, "longest_wait"), Relaxation: quantity.MmHg(5), LongestTau: 90 * time.Second,
	}
	s.LongestFor = 4 * s.For
	if l.doc.Has("stage", i, "longest_for") {
		s.LongestFor = l.span(i, "longest_for")
		l.demand(s.LongestFor >= s.For, "the longest hold is shorter than the hold", "", "stage", i, "longest_for")
	}
	if l.doc.Has("stage", i, "relaxation") {
		s.Relaxation = l.above(i, "relaxation")
	}
	if l.doc.Has("stage", i, "longest_time_constant") {
		s.LongestTau = l.span(i, "longest_time_constant")
		l.demand(s.LongestTau >= time.Second && s.LongestTau <= time.Hour, "a time constant from 1 s to 1 h is meant", "", "stage", i, "longest_time_constant")
	}
	l.demand(s.At > 0, "a leak test needs a pressure above atmosphere", "", "stage", i, "at")
	l.demand(s.HighestRate > 0, "the highest rate is the fall that is allowed, above zero", "", "stage", i, "highest_rate")
	l.demand(s.For >= 10*time.Second, "a leak test of less than 10 s cannot tell a leak from noise", "", "stage", i, "for")
	return s
}

func (l *loader) static(d *Definition, i int) Static {
	f := l.file.Stages[i]
	s := Static{
		Cycles:              l.count(i, "cycles", f.Cycles, 20),
		Window:              l.above(i, "window"),
		Overshoot:           l.above(i, "overshoot"),
		ShareOfLimit:        l.shareOfLimit(i),
		StandardUncertainty: l.above(i, "standard_uncertainty"),
		LeastReadings:       l.leastReadings(i),
		LongestWait:         l.span(i, "longest_wait"),
	}
	for j := range f.SetPressures {
		p := l.pressure("stage", i, "set_pressures", j)
		l.inside(d, p, "stage", i, "set_pressures", j)
		s.SetPressures = append(s.SetPressures, p)
	}
	if l.err != nil {
		return s
	}
	l.demand(len(s.SetPressures) >= 3, "fewer than three set pressures cannot show linearity", "", "stage", i, "set_pressures")
	l.demand(s.StandardUncertainty < s.Window, "the standard uncertainty asked is not below the window", "", "stage", i, "standard_uncertainty")
	falling := false
	for j := 1; j < len(s.SetPressures); j++ {
		step := s.SetPressures[j] - s.SetPressures[j-1]
		l.demand(step != 0, "the same set pressure as the one before", "", "stage", i, "set_pressures", j)
		l.demand(step < 0 || !falling, "the set pressures rise once more after falling",
			"one cycle goes up to its top and down again; repeat it with cycles", "stage", i, "set_pressures", j)
		falling = falling || step < 0
		if step < 0 {
			step = -step
		}
		l.demand(2*s.Window < step, "nearer to the one before than two windows", "", "stage", i, "set_pressures", j)
	}
	if l.err == nil {
		l.demand(s.SetPressures[1] > s.SetPressures[0], "the first leg does not go up", "", "stage", i, "set_pressures", 1)
		top := slices.Max(s.SetPressures)
		const bits = 1e-9 // sums of decimals in pascals: 300 + 2 mmHg is not quite 302 mmHg
		l.demand(top+s.Window <= d.Highest*(1+bits), "the window at the top reaches beyond the highest pressure", "", "stage", i, "window")
	}
	return s
}

// positive takes an optional quantity above zero, as stated.
func (l *loader) positive(d quantity.Dimension, i int, key string) string {
	return tomlfile.TakeIf(l.doc, &l.err, func(s string) (string, error) {
		v, err := quantity.ParseAs(s, d)
		if err == nil && !(v.SI > 0) {
			err = fmt.Errorf("%q is not above zero", s)
		}
		return s, err
	}, "stage", i, key)
}

// ratio takes an optional plain number above zero, as stated.
func (l *loader) ratio(i int, key string) string {
	return tomlfile.TakeIf(l.doc, &l.err, func(s string) (string, error) {
		x, err := quantity.ParseDecimal(s)
		if err == nil && !(x > 0) {
			err = fmt.Errorf("%q is not above zero", s)
		}
		return s, err
	}, "stage", i, key)
}

func (l *loader) step(d *Definition, i int) Step {
	s := Step{
		Size:        l.setPressure(d, i, "size"),
		Direction:   tomlfile.TakeWord(l.doc, &l.err, []Direction{Release}, "stage", i, "direction"),
		Settle:      l.span(i, "settle"),
		Before:      l.span(i, "before"),
		After:       l.span(i, "after"),
		LongestWait: l.span(i, "longest_wait"),
		Place:       l.text(longestText, "stage", i, "place"),
		LineLength:  l.text(tomlfile.LongestIdentity, "stage", i, "line_length"),
		Bore:        l.text(tomlfile.LongestIdentity, "stage", i, "bore"),
		Fluid:       l.text(tomlfile.LongestIdentity, "stage", i, "fluid"),
		FlushDevice: l.text(longestText, "stage", i, "flush_device"),

		FluidDensity:      l.positive(quantity.DimDensity, i, "fluid_density"),
		FluidViscosity:    l.positive(quantity.DimViscosity, i, "fluid_viscosity"),
		DesignedFrequency: l.positive(quantity.DimFrequency, i, "designed_frequency"),
		DesignedDamping:   l.ratio(i, "designed_damping"),
	}
	known := func(key string) bool { return l.doc.Has("stage", i, key) }
	if known("least_count") || known("most_count") {
		l.untilDecided(i, &s)
	} else if known("count") {
		s.Count = l.count(i, "count", l.file.Stages[i].Count, 100)
	} else {
		l.refuse(l.doc.Missing("say how many steps with count, or leave it to the limits between least_count and most_count", "stage", i, "count"))
	}
	l.demand(known("fluid_density") == known("fluid_viscosity"), "density without viscosity, or viscosity without density", "state both, or neither", "stage", i, "fluid")
	l.demand(known("designed_frequency") || !known("designed_damping"), "a designed damping without a designed frequency", "", "stage", i, "designed_damping")
	l.demand(s.Size > 0, "a release begins above atmosphere", "", "stage", i, "size")
	l.demand(s.Before+s.After <= time.Minute, "a capture of more than a minute", "", "stage", i, "after")
	return s
}

// untilDecided takes the range within which the limits decide how many steps
// are made: below 3 a scatter says next to nothing, and the intervals that
// allow for looking after every step are known up to 30.
func (l *loader) untilDecided(i int, s *Step) {
	f := l.file.Stages[i]
	l.demand(!l.doc.Has("stage", i, "count"), "count beside least_count or most_count", "a fixed count, or a range: not both", "stage", i, "count")
	for _, key := range []string{"least_count", "most_count"} {
		if l.err == nil && !l.doc.Has("stage", i, key) {
			l.refuse(l.doc.Missing("", "stage", i, key))
		}
	}
	l.demand(f.LeastCount >= 3 && f.LeastCount <= 30, "least_count is from 3 to 30", "", "stage", i, "least_count")
	l.demand(f.MostCount > f.LeastCount && f.MostCount <= 30, "most_count is above least_count and at most 30", "", "stage", i, "most_count")
	s.Least, s.Count = f.LeastCount, f.MostCount
}

// together looks for what no single stage or limit shows: order, and limits
// that nothing measures.
func (l *loader) together(d *Definition) {
	at := map[string]int{}
	for i, s := range d.Stages {
		if l.err != nil {
			return
		}
		_, twice := at[s.Kind()]
		l.demand(!twice, fmt.Sprintf("a second %s stage", s.Kind()), "a procedure has one of each kind; use cycles or count", "stage", i, "kind")
		_, zeroed := at["zero"]
		_, judged := at["static"]
		l.demand(s.Kind() != "warm_up" || i == 0, "warming up comes first", "", "stage", i, "kind")
		l.demand(s.Kind() != "static" || zeroed, "a static stage before the zero stage", "errors are counted from the zero: put zero first", "stage", i, "kind")
		l.demand(s.Kind() != "exercise" || !judged, "exercise after the static stage", "exercising comes before the first judged cycle", "stage", i, "kind")
		at[s.Kind()] = i
	}
	needs := map[LimitName]string{
		ZeroOffset: "zero", Sensitivity: "static", Accuracy: "static", Hysteresis: "static", ZeroReturn: "static", Repeatability: "static",
		Noise: "static", LinearityIndependent: "static", LinearityTerminal: "static", LinearityZeroBased: "static", LinearityLeastSquares: "static",
		NaturalFrequency: "step", DampingRatio: "step",
	}
	for i, lim := range d.Limits {
		stage, there := at[needs[lim.Name]]
		l.demand(there, fmt.Sprintf("no %s stage, which the limit for %s needs", needs[lim.Name], lim.Name), "", "limit", i, "name")
		if l.err != nil {
			return
		}
		if s, ok := d.Stages[stage].(Static); ok {
			l.carries(s, lim.Name, stage)
		}
	}
}

// carries refuses a static stage that cannot give what a limit is about.
func (l *loader) carries(s Static, name LimitName, stage int) {
	points := s.Points()
	last := points[len(points)-1]
	needs := func(ok bool, what, key string) {
		l.demand(ok, fmt.Sprintf("no %s, which the limit for %s needs", what, name), "", "stage", stage, key)
	}
	switch name {
	case Hysteresis:
		needs(last.Leg == Down, "down leg", "set_pressures")
	case ZeroReturn:
		needs(last.Leg == Down && last.Set == points[0].Set, "down leg back to where the cycle began", "set_pressures")
	case Repeatability:
		needs(s.Cycles > 1, "second cycle", "cycles")
	}
}

// longestSpan is longer than any wait that makes sense on a bench.
const longestSpan = 24 * time.Hour

func (l *loader) span(i int, key string) time.Duration {
	s := tomlfile.Take(l.doc, &l.err, parseSpan, "stage", i, key)
	l.demand(s > 0 && s <= longestSpan, "a time is above 0 s and at most 24 h", "", "stage", i, key)
	return s
}

func (l *loader) count(i int, key string, n, most int) int {
	l.demand(n >= 1 && n <= most, fmt.Sprintf("%s is from 1 to %d", key, most), "", "stage", i, key)
	return n
}

// above takes a pressure that is a width, so above zero.
func (l *loader) above(i int, key string) quantity.Pressure {
	p := l.pressure("stage", i, key)
	l.demand(p > 0, fmt.Sprintf("%s is not above zero", key), "", "stage", i, key)
	return p
}

// setPressure takes a pressure that a stage goes to.
func (l *loader) setPressure(d *Definition, i int, key string) quantity.Pressure {
	p := l.pressure("stage", i, key)
	l.inside(d, p, "stage", i, key)
	return p
}

func (l *loader) inside(d *Definition, p quantity.Pressure, path ...any) {
	l.demand(p <= d.Highest, "above the highest pressure of this procedure", "", path...)
	l.demand(p >= d.Lowest, "below the lowest pressure of this procedure", "", path...)
}

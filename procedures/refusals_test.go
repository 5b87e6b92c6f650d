package procedures

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"unicode/utf8"

	"kymobench/bench/tomlfile"
)

// The words were read by eye, once, for what the author of a procedure is to
// make of them. The mark « shows where the refusal belongs.
func TestRefusals(t *testing.T) {
	d, err := Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	good := string(d.Source)
	hysteresis := "name = \"hysteresis\"\nlow = \"-1 mmHg\"\nhigh = \"1 mmHg\"\nresolution = \"0.01 mmHg\""
	zero := "[[stage]]\nkind = \"zero\"\nfor = \"5 s\"\nlongest_wait = \"30 s\"\n" +
		"vented_within = \"5 mmHg\"\nshare_of_limit = \"5 %\"\nstandard_uncertainty = \"0.05 mmHg\"\nleast_readings = 8\n"
	warmUp := "[[stage]]\nkind = \"warm_up\"\nminimum = \"10 min\"\nlongest_wait = \"20 min\"\n"
	exercise := "[[stage]]\nkind = \"exercise\"\ncycles = 3\nto = \"300 mmHg\"\ndwell = \"1 s\"\nlongest_wait = \"30 s\"\n"
	step := "[[stage]]\nkind = \"step\"\ncount"
	list := good[strings.Index(good, "set_pressures = "):strings.Index(good, "cycles = 1\n")]
	down := "\n  \"200 mmHg\", \"100 mmHg\", \"50 mmHg\", \"0 mmHg\",\n"
	for _, c := range []struct{ from, to, text, hint string }{
		// head
		{`schema = "kymobench/procedure/1"`, `schema = «"kymobench/bench/1"`, `"kymobench/bench/1" is no schema`, "it is one of: kymobench/procedure/1"},
		{`id = "incoming"`, `id = «"Incoming"`, "an id is up to 64 small letters, digits and hyphens, beginning with a letter", ""},
		{`id = "incoming"`, `id = «"incoming\nx"`, "text with a character that does not show (U+000A)", ""},
		{`revision = 1`, `revision = «0`, "the revision is counted from 1", "revision = 1"},
		{`title = "Incoming inspection"`, `title = «"` + strings.Repeat("t", 65) + `"`, `key "title" has 65 characters, more than 64`, ""},
		{`uut_kind = "bare transducer"`, `uut_kind = «"bare transduser"`, `"bare transduser" is no uut_kind`, `did you mean "bare transducer"?`},
		{`highest = "310 mmHg"`, `highest = «"310"`, `"310": a number, a blank and a unit are expected, as in "300 mmHg"`, ""},
		{`lowest = "-5 mmHg"`, `lowest = «"310 mmHg"`, "the lowest pressure is not below the highest", ""},
		{`lowest = "-5 mmHg"`, `lowest = «"1 mmHg"`, "the lowest pressure is above atmosphere, where every run begins", ""},

		// steps until decided
		{"kind = \"step\"\ncount = 5", "kind = \"step\"\ncount = «5\nleast_count = 3\nmost_count = 10", "count beside least_count or most_count", "a fixed count, or a range: not both"},
		{"kind = \"step\"\ncount = 5", "kind = \"step\"\nleast_count = «2\nmost_count = 10", "least_count is from 3 to 30", ""},
		{"kind = \"step\"\ncount = 5", "kind = \"step\"\nleast_count = 5\nmost_count = «5", "most_count is above least_count and at most 30", ""},
		{"kind = \"step\"\ncount = 5", "kind = \"step\"\nleast_count = 5\nmost_count = «31", "most_count is above least_count and at most 30", ""},

		// decision
		{"[decision]\n", "[decision]\n«guard = 1\n", `unknown key "guard" in [decision]`, "it is one of: rule, guard_factor, conditional_pass, conditional_fail"},
		{`rule = "four_outcome"`, `rule = «"four_outcomes"`, `"four_outcomes" is no rule`, `did you mean "four_outcome"?`},
		{"[decision]\nrule = \"four_outcome\"\nguard_factor = 1.0\n", "[«decision]\nrule = \"guarded\"\n", `key "guard_factor" is missing in [decision]`, "guard_factor = 1.0 makes the guard band as wide as the expanded uncertainty"},
		{`guard_factor = 1.0`, `guard_factor = «3.5`, "the guard factor is above 0 and at most 3", ""},
		{`guard_factor = 1.0`, `guard_factor = «0`, "the guard factor is above 0 and at most 3", ""},
		{"rule = \"four_outcome\"\nguard_factor = 1.0", "rule = \"simple\"\nguard_factor = «1.0", "the simple rule has no guard band", "leave out guard_factor"},
		{"[decision]\nrule = \"four_outcome\"\nguard_factor = 1.0\nconditional_pass = \"inconclusive\"\n", "[«decision]\nrule = \"four_outcome\"\nguard_factor = 1.0\n", `key "conditional_pass" is missing in [decision]`, ""},
		{`conditional_pass = "inconclusive"`, `conditional_pass = «"pass"`, `"pass" is no verdict`, ""},
		{`conditional_fail = "inconclusive"`, `conditional_fail = «"accepted"`, "a unit measured outside a limit cannot be accepted", "conditional_fail is rejected or inconclusive"},

		// limits
		{`name = "zero_offset"`, `name = «"zero offset"`, `"zero offset" is no name`, `did you mean "zero_offset"?`},
		{`name = "hysteresis"`, `name = «"zero_offset"`, "a second limit for zero_offset", ""},
		{`low = "-25 mmHg"`, `low = «"-25"`, `"-25": a number, a blank and a unit are expected, as in "300 mmHg"`, ""},
		{`low = "-25 mmHg"`, `low = «"-25 Hz"`, `"-25 Hz": Hz is a unit of something else`, ""},
		{`low = "-25 mmHg"`, `low = «"25 mmHg"`, "low is not below high", ""},
		{`resolution = "0.1 mmHg"`, `resolution = «"0 mmHg"`, "the resolution is not above zero", ""},
		{`resolution = "0.1 mmHg"`, `resolution = «"25 mmHg"`, "results rounded to this resolution could not be told from the limits", ""},
		{"[[limit]]\nname = \"zero_offset\"\nlow = \"-25 mmHg\"\nhigh = \"25 mmHg\"\n", "[[«limit]]\nname = \"zero_offset\"\n", "the limit for zero_offset has neither low nor high", ""},
		{`low = "4.95 uV/V/mmHg"`, `low = «"-4.95 uV/V/mmHg"`, "sensitivity is always above zero", ""},
		{"low = \"24 Hz\"", "high = «\"0 Hz\"", "natural_frequency is always above zero", ""},
		{`low = "0.15"`, `low = «"0.15 1"`, `"0.15 1" is no decimal number`, ""},
		{`origin_status = "department"`, `origin_status = «"sure"`, `"sure" is no origin_status`, "it is one of: seen, second-hand, from memory, common practice, no source, department"},
		{`origin = "Eight harmonics of a pulse of 180 beats a minute"`, `origin = «""`, `key "origin" is empty`, ""},

		// bands
		{hysteresis, "name = \"hysteresis\"\nband = «[{constant = \"1 mmHg\"}]\nresolution = \"0.01 mmHg\"", "only accuracy has bands", "state low and high"},
		{"of_reading = \"3 %\"", "of_reading = \"3 %\"\nup_to = «\"300 mmHg\"", "the last band holds for all higher pressures", "leave out up_to"},
		{`of_reading = "3 %"`, `of_reading = «"-3 %"`, "a band cannot be negative", ""},
		{`constant = "1 mmHg"`, `constant = «"-1 mmHg"`, "a band cannot be negative", ""},
		{`of_reading = "3 %"`, `of_reading = «"3"`, `"3": a number, a blank and a unit are expected, as in "300 mmHg"`, ""},
		{"[[limit.band]]\nof_reading = \"3 %\"", "[[limit.«band]]\nof_reading = \"0 %\"", "a band of no width", "state constant, of_reading or both"},
		{"[[limit.band]]\nof_reading = \"3 %\"", "[[limit.band]]\nup_to = «\"50 mmHg\"\nof_reading = \"2 %\"\n[[limit.band]]\nof_reading = \"3 %\"", "up_to is not above that of the band before", ""},

		// stages
		{`kind = "zero"`, `kind = «"zeroing"`, `"zeroing" is no kind`, "it is one of: warm_up, zero, exercise, leak, static, step"},
		{"kind = \"zero\"\n", "kind = \"zero\"\n«cycles = 1\n", `a zero stage has no key "cycles"`, "it has: for, longest_wait, vented_within, share_of_limit, standard_uncertainty, least_readings"},
		{zero, "[[«stage]]\nkind = \"zero\"\nfor = \"5 s\"\n", `key "longest_wait" is missing in [[stage]] number 2`, ""},
		{`for = "5 s"`, `for = «"0 s"`, "a time is above 0 s and at most 24 h", ""},
		{`minimum = "10 min"`, `minimum = «"25 h"`, "a time is above 0 s and at most 24 h", ""},
		{`cycles = 3`, `cycles = «0`, "cycles is from 1 to 100", ""},
		{`to = "300 mmHg"`, `to = «"320 mmHg"`, "above the highest pressure of this procedure", ""},
		{`to = "300 mmHg"`, `to = «"-6 mmHg"`, "below the lowest pressure of this procedure", ""},
		{`at = "300 mmHg"`, `at = «"0 mmHg"`, "a leak test needs a pressure above atmosphere", ""},
		{`longest_for = "2 min"`, `longest_for = «"20 s"`, "the longest hold is shorter than the hold", ""},
		{`relaxation = "5 mmHg"`, `relaxation = «"0 mmHg"`, "relaxation is not above zero", ""},
		{`longest_time_constant = "90 s"`, `longest_time_constant = «"90 ms"`, "a time constant from 1 s to 1 h is meant", ""},
		{`for = "30 s"`, `for = «"9 s"`, "a leak test of less than 10 s cannot tell a leak from noise", ""},
		{`highest_rate = "0.1 mmHg/s"`, `highest_rate = «"0.1 mmHg"`, `"0.1 mmHg": mmHg is a unit of something else`, ""},
		{`highest_rate = "0.1 mmHg/s"`, `highest_rate = «"-0.1 mmHg/s"`, "the highest rate is the fall that is allowed, above zero", ""},
		{`"200 mmHg", "300 mmHg",`, `"200 mmHg", «"320 mmHg",`, "above the highest pressure of this procedure", ""},
		{`"200 mmHg", "300 mmHg",`, `"200 mmHg", «300,`, `key "set_pressures", item 5, takes text in quotes, not a whole number`, `write it in quotes, with its unit if it has one: "300 mmHg"`},
		{`"200 mmHg", "300 mmHg",`, `"200 mmHg", «"200 mmHg", "300 mmHg",`, "the same set pressure as the one before", ""},
		{`"200 mmHg", "300 mmHg",`, `"200 mmHg", «"203 mmHg", "300 mmHg",`, "nearer to the one before than two windows", ""},
		{down, "\n  \"200 mmHg\", «\"250 mmHg\",\n", "the set pressures rise once more after falling", "one cycle goes up to its top and down again; repeat it with cycles"},
		{list, "set_pressures = [\"300 mmHg\", «\"200 mmHg\", \"100 mmHg\"]\n", "the first leg does not go up", ""},
		{list, "set_pressures = «[\"0 mmHg\", \"300 mmHg\"]\n", "fewer than three set pressures cannot show linearity", ""},
		{`window = "2 mmHg"`, `window = «"-2 mmHg"`, "window is not above zero", ""},
		{`window = "2 mmHg"`, `window = «"11 mmHg"`, "the window at the top reaches beyond the highest pressure", ""},
		{`share_of_limit = "3 %"`, `share_of_limit = «"60 %"`, "the share is above 0 % and at most 50 %", ""},
		{`standard_uncertainty = "0.02 mmHg"`, `standard_uncertainty = «"2 mmHg"`, "the standard uncertainty asked is not below the window", ""},
		{`vented_within = "5 mmHg"`, `vented_within = «"0 mmHg"`, "vented_within is not above zero", ""},
		{`share_of_limit = "5 %"`, `share_of_limit = «"0 %"`, "the share is above 0 % and at most 50 %", ""},
		{`least_readings = 8`, `least_readings = «1`, "a mean of fewer than five readings says nothing of its noise", ""},
		{`least_readings = 15`, `least_readings = «4`, "a mean of fewer than five readings says nothing of its noise", ""},
		{`count = 5`, `count = «101`, "count is from 1 to 100", ""},
		{`size = "100 mmHg"`, `size = «"0 mmHg"`, "a release begins above atmosphere", ""},
		{`direction = "release"`, `direction = «"up"`, `"up" is no direction`, "it is one of: release"},
		{`after = "2 s"`, `after = «"1 min"`, "a capture of more than a minute", ""},
		{`place = "at`, `place = «" at`, `key "place" begins or ends with a blank`, ""},

		// order and together
		{exercise, exercise + "\n" + strings.Replace(exercise, `kind = "`, `kind = «"`, 1), "a second exercise stage", "a procedure has one of each kind; use cycles or count"},
		{warmUp + "\n" + zero, zero + "\n" + strings.Replace(warmUp, `kind = "`, `kind = «"`, 1), "warming up comes first", ""},
	} {
		head, tail, marked := strings.Cut(strings.Replace(good, c.from, c.to, 1), "«")
		if !strings.Contains(good, c.from) || !marked {
			t.Fatalf("nothing stands where %q is to be %q", c.from, c.to)
		}
		refused(t, head, tail, c.text, c.hint)
	}
	// A stage out of its place, and what a limit needs.
	without := strings.Replace(good, zero, "", 1)
	head, tail, _ := strings.Cut(without, `"static"`)
	refused(t, head, `"static"`+tail, "a static stage before the zero stage", "errors are counted from the zero: put zero first")
	late := strings.Replace(good, exercise, "", 1)
	late = strings.Replace(late, step, exercise+"\n"+step, 1)
	head, tail, _ = strings.Cut(late, `"exercise"`)
	refused(t, head, `"exercise"`+tail, "exercise after the static stage", "exercising comes before the first judged cycle")
	before, _, _ := strings.Cut(good, step)
	head, tail, _ = strings.Cut(before, `"natural_frequency"`)
	refused(t, head, `"natural_frequency"`+tail, "no step stage, which the limit for natural_frequency needs", "")
	head, tail, _ = strings.Cut(strings.Replace(good, down, "\n", 1), "[\n  \"0 mmHg\"")
	refused(t, head, "[\n  \"0 mmHg\""+tail, "no down leg, which the limit for hysteresis needs", "")
	both := strings.Replace(good, "name = \"accuracy\"\n", "name = \"accuracy\"\nhigh = \"9 mmHg\"\n", 1)
	head, tail, _ = strings.Cut(both, "band]]")
	refused(t, head, "band]]"+tail, "bands beside low or high", "state one or the other")
	refused(t, "", "schema = \"kymobench/procedure/1\"\n", `key "id" is missing in the file`, "")
	front, _, _ := strings.Cut(good, "[[limit]]")
	refused(t, "", front, "the procedure has no limits, so nothing can be judged", "")
	limits, _, _ := strings.Cut(good, "[[stage]]")
	refused(t, "", limits, "the procedure has no stages, so nothing would be done", "")
	nothing, rest, _ := strings.Cut(good, "[decision]")
	_, rest, _ = strings.Cut(rest, "\n\n")
	refused(t, "", nothing+rest, `key "decision" is missing in the file`, "a table [decision] with rule, guard_factor, conditional_pass, conditional_fail")
}

// refused loads head+tail and wants the refusal at the end of head.
func refused(t *testing.T, head, tail, text, hint string) {
	t.Helper()
	column := 1 + utf8.RuneCountInString(head[strings.LastIndex(head, "\n")+1:])
	want := fmt.Sprintf("my.toml:%d:%d: %s", 1+strings.Count(head, "\n"), column, text)
	d, err := Load("my.toml", []byte(head+tail))
	var e *tomlfile.Error
	if !errors.As(err, &e) || d != nil {
		t.Errorf("not refused (%v); want %s", err, want)
		return
	}
	if e.Error() != want || e.Hint != hint {
		t.Errorf("said %s\nwant %s\nhint %s\nwant %s", e, want, e.Hint, hint)
	}
}

// Sums of decimals in another unit do not refuse what stands exactly on a bound.
func TestExactlyOnTheBound(t *testing.T) {
	d, err := Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	for _, highest := range []string{"302 mmHg", "40.26336099933 kPa"} { // 302 x 133.322387415 Pa
		if _, err := Load("my.toml", []byte(strings.Replace(string(d.Source), `"310 mmHg"`, `"`+highest+`"`, 1))); err != nil {
			t.Errorf("%s: %v", highest, err)
		}
	}
}

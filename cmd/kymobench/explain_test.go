package main

import (
	"bytes"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"kymobench/bench/simulated"
)

// calculator works arithmetic out as a person with a pocket calculator does:
// + - x / ^, brackets and sqrt.
type calculator struct {
	text string
	at   int
}

func (c *calculator) blank() {
	for c.at < len(c.text) && c.text[c.at] == ' ' {
		c.at++
	}
}

func (c *calculator) take(sign string) bool {
	c.blank()
	if strings.HasPrefix(c.text[c.at:], sign) {
		c.at += len(sign)
		return true
	}
	return false
}

func (c *calculator) sum() (v float64, err error) {
	if v, err = c.product(); err != nil {
		return v, err
	}
	for {
		switch {
		case c.take("+ "):
			x, err := c.product()
			if err != nil {
				return v, err
			}
			v += x
		case c.take("- "):
			x, err := c.product()
			if err != nil {
				return v, err
			}
			v -= x
		default:
			return v, nil
		}
	}
}

func (c *calculator) product() (v float64, err error) {
	if v, err = c.power(); err != nil {
		return v, err
	}
	for {
		divide := false
		switch {
		case c.take("x "):
		case c.take("/ "):
			divide = true
		default:
			return v, nil
		}
		x, err := c.power()
		if err != nil {
			return v, err
		}
		if divide {
			v /= x
		} else {
			v *= x
		}
	}
}

func (c *calculator) power() (float64, error) {
	v, err := c.number()
	if err == nil && c.take("^") {
		n, err := c.number()
		return math.Pow(v, n), err
	}
	return v, err
}

var digits = regexp.MustCompile(`^-?[0-9]+(\.[0-9]+)?(e-?[0-9]+)?`)

func (c *calculator) number() (float64, error) {
	if root := c.take("sqrt("); root || c.take("(") {
		v, err := c.sum()
		if err == nil && !c.take(")") {
			err = fmt.Errorf("no closing bracket at %q", c.text[c.at:])
		}
		if root {
			v = math.Sqrt(v)
		}
		return v, err
	}
	c.blank()
	n := digits.FindString(c.text[c.at:])
	if n == "" {
		return 0, fmt.Errorf("no number at %q", c.text[c.at:])
	}
	c.at += len(n)
	return strconv.ParseFloat(n, 64)
}

func evaluate(text string) (float64, error) {
	c := &calculator{text: text}
	v, err := c.sum()
	if err == nil && c.at != len(c.text) {
		err = fmt.Errorf("left over: %q", c.text[c.at:])
	}
	return v, err
}

var arithmetic = regexp.MustCompile(`^  .*: (\S.*) = (-?[0-9][0-9.e-]*)( \S+)?$`)

// checkByHand reads an explanation as it is printed, works out every line of
// arithmetic again, and looks up where each long number comes from: it has to
// have been printed before. It returns how many lines it worked out.
func checkByHand(text string) (int, error) {
	var lines []string
	for line := range strings.Lines(text) {
		line = strings.TrimRight(line, "\n")
		if len([]rune(line)) > budgetWidth {
			return 0, fmt.Errorf("longer than %d: %s", budgetWidth, line)
		}
		if strings.HasPrefix(line, "      ") && len(lines) > 0 {
			lines[len(lines)-1] += " " + strings.TrimSpace(line)
			continue
		}
		lines = append(lines, line)
	}
	checked := 0
	before := ""
	long := regexp.MustCompile(`[0-9]+\.[0-9]+`)
	for _, line := range lines {
		m := arithmetic.FindStringSubmatch(line)
		if m == nil {
			before += line + "\n"
			continue
		}
		v, err := evaluate(m[1])
		if err != nil {
			return checked, fmt.Errorf("%s: %w", line, err)
		}
		said, err := strconv.ParseFloat(m[2], 64)
		if err != nil {
			return checked, err
		}
		if math.Abs(v-said) > 6e-10*math.Max(math.Abs(v), 1e-300) && math.Abs(v-said) > 1e-13 {
			return checked, fmt.Errorf("%s: %.12g by hand", line, v)
		}
		for _, n := range long.FindAllString(m[1], -1) {
			// Variances and slopes of a point's own readings are the run's.
			if len(n) >= 11 && !strings.Contains(before, n) && !strings.Contains(line, "pooled over") && !strings.Contains(line, "settling left, in") {
				return checked, fmt.Errorf("%s: %s comes from nowhere", line, n)
			}
		}
		before += line + "\n"
		checked++
	}
	if strings.Contains(text, "DIFFERS") {
		return checked, fmt.Errorf("the arithmetic gives another figure than the program has")
	}
	return checked, nil
}

// moreLimits are those that the shipped procedure does not have.
const moreLimits = `schema = "kymobench/limits/1"
title = "Every other figure"
uut_kind = "bare transducer"
[decision]
rule = "guarded"
guard_factor = 0.83
conditional_pass = "inconclusive"
conditional_fail = "rejected"
`

// Every limit is laid out so that each line can be checked by hand.
func TestExplainedByHand(t *testing.T) {
	out, _ := simulatedRun(t, t.TempDir(), 5, simulated.Good)
	extra := moreLimits
	var others []string
	for _, name := range []string{"noise", "zero_return", "linearity_independent", "linearity_terminal", "linearity_zero_based", "linearity_least_squares", "hysteresis"} {
		extra += "[[limit]]\nname = \"" + name + "\"\nhigh = \"1 mmHg\"\nresolution = \"0.001 mmHg\"\norigin = \"x\"\norigin_status = \"department\"\n"
		others = append(others, name)
	}
	path := filepath.Join(t.TempDir(), "more.toml")
	if err := os.WriteFile(path, []byte(extra), 0o600); err != nil {
		t.Fatal(err)
	}
	explained := func(limit, limits string) string {
		var text bytes.Buffer
		if err := runExplain(out.record, limit, explainOptions{limits: limits}, streams{out: &text, err: io.Discard}); err != nil {
			t.Fatalf("%s: %v", limit, err)
		}
		return text.String()
	}
	total := 0
	for _, limit := range []string{"zero_offset", "sensitivity", "accuracy", "hysteresis", "natural_frequency", "damping_ratio"} {
		text := explained(limit, "")
		n, err := checkByHand(text)
		if err != nil {
			t.Errorf("%s: %v", limit, err)
		}
		total += n
		if !strings.Contains(text, "outcome: pass") || !strings.Contains(text, "as the program has it") && !strings.Contains(text, "by Monte Carlo") {
			t.Errorf("%s has no outcome:\n%s", limit, text)
		}
	}
	for _, limit := range others {
		n, err := checkByHand(explained(limit, path))
		if err != nil {
			t.Errorf("%s: %v", limit, err)
		}
		total += n
	}
	t.Logf("%d lines worked out by hand", total)
	if total < 300 {
		t.Errorf("only %d lines", total)
	}
	// The checker notices a wrong digit, a lost bracket and a number from nowhere.
	good := explained("accuracy", "")
	if _, err := checkByHand(good); err != nil {
		t.Fatal(err)
	}
	for _, change := range [][2]string{{"0.0006 / 2 x", "0.0006 / 3 x"}, {"sqrt(1^2 + 1^2)", "sqrt(1^2 + 1^2"}, {"largest error after zero: ", "largest error after zero: 1.234567891 + "}} {
		if !strings.Contains(good, change[0]) {
			t.Fatalf("nothing to break: %q", change[0])
		}
		if _, err := checkByHand(strings.Replace(good, change[0], change[1], 1)); err == nil {
			t.Errorf("broken at %q, and nothing noticed", change[0])
		}
	}
}

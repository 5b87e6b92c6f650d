package results

import (
	"math"
	"strconv"
	"strings"
)

// Explanation lays out how one limit came out, as arithmetic on printed numbers
// that can be checked with a pocket calculator.
type Explanation struct {
	Limit    string    `json:"limit"`
	Outcome  string    `json:"outcome"`
	Sections []Section `json:"sections"`
}

// Section is one part of an explanation.
type Section struct {
	Title string     `json:"title"`
	Steps []Workings `json:"steps"`
}

// Workings is one line: arithmetic with its result, or a text alone. The result is
// what the printed arithmetic gives, rounded to as many digits as are printed;
// later steps go on with the printed number.
type Workings struct {
	Name       string `json:"name"`
	Arithmetic string `json:"arithmetic"` // "" for a text
	Result     string `json:"result"`
	Unit       string `json:"unit"`
	Note       string `json:"note"`
}

// term is a piece of arithmetic as it is printed, and its value.
type term struct {
	text string
	v    float64
	tie  int // 2 a number or a call, 1 a product, 0 a sum
}

// shown is how many digits are printed: what a pocket calculator holds.
const shown = 10

// figure is a number as printed.
func figure(x float64) term {
	text := plain(x, shown)
	v, _ := strconv.ParseFloat(text, 64)
	if v < 0 {
		return term{text, v, 0}
	}
	return term{text, v, 2}
}

// plain writes x to so many significant digits, without an exponent where the
// number has a common size.
func plain(x float64, digits int) string {
	text := strconv.FormatFloat(x, 'g', digits, 64)
	if !strings.ContainsRune(text, 'e') || math.Abs(x) > 1e15 || math.Abs(x) < 1e-9 {
		return text
	}
	v, _ := strconv.ParseFloat(text, 64)
	return strconv.FormatFloat(v, 'f', -1, 64)
}

// in puts a term into brackets where it binds weaker than what stands around it.
func (t term) in(tie int) string {
	if t.tie < tie {
		return "(" + t.text + ")"
	}
	return t.text
}

func plus(terms ...term) term {
	if len(terms) == 1 {
		return terms[0]
	}
	out := term{tie: 0}
	for i, t := range terms {
		if i > 0 {
			out.text += " + "
		}
		out.text += t.in(map[bool]int{true: 0, false: 1}[i == 0])
		out.v += t.v
	}
	return out
}

func minus(a, b term) term { return term{a.in(0) + " - " + b.in(1), a.v - b.v, 0} }

func times(a, b term) term { return term{a.in(1) + " x " + b.in(2), a.v * b.v, 1} }

func over(a, b term) term { return term{a.in(1) + " / " + b.in(2), a.v / b.v, 1} }

func root(a term) term { return term{"sqrt(" + a.text + ")", math.Sqrt(a.v), 2} }

func power(a term, n int) term {
	return term{a.in(2) + "^" + strconv.Itoa(n), math.Pow(a.v, float64(n)), 1}
}

// sheet collects the steps of one section.
type sheet struct {
	section Section
}

// calculate writes a step and returns its printed result.
func (s *sheet) calculate(name string, t term, unit string) term {
	result := figure(t.v)
	if t.text == result.text {
		s.say(name, strings.TrimSpace(result.text+" "+unit))
		return result
	}
	s.section.Steps = append(s.section.Steps, Workings{Name: name, Arithmetic: t.text, Result: result.text, Unit: unit})
	return result
}

// say writes a text.
func (s *sheet) say(name, note string) {
	s.section.Steps = append(s.section.Steps, Workings{Name: name, Note: note})
}

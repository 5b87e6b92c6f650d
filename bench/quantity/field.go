// Package quantity holds what a number with a unit is, as instruments and
// files state it. It measures and judges nothing.
//
// Field is the place of one number in a line of text or in a frame of bytes;
// Parse reads "300 mmHg", and the Parse functions of each quantity read it into
// a named type. Unit and Value turn numbers into SI and back; RoundTo and the
// Format functions write them.
package quantity

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"kymobench/bench/checksum"
)

// Field says how one number stands in a line of text received from an
// instrument, or with Frame in a frame of bytes. Zero value: the whole line is
// the number. It is part of records, so that a text kept there can be read
// again.
type Field struct {
	Separator  string `json:"separator,omitempty"` // columns stand between these
	Column     int    `json:"column,omitempty"`    // of the number, from 0
	Prefix     string `json:"prefix,omitempty"`    // before the number, in its place
	Suffix     string `json:"suffix,omitempty"`    // after it
	Width      int    `json:"width,omitempty"`     // of the number, in characters; 0: any
	Unit       string `json:"unit"`
	UnitInText bool   `json:"unit_in_text,omitempty"` // the unit follows the number

	Columns  int    `json:"columns,omitempty"`       // there are exactly as many; 0: any
	Length   int    `json:"length,omitempty"`        // of the line, in characters; 0: any
	Cut      bool   `json:"cut,omitempty"`           // the number is the Width characters after the first Start
	Start    int    `json:"start,omitempty"`         //
	Comma    bool   `json:"decimal_comma,omitempty"` // a comma, and no point, parts off the decimals
	UnitText string `json:"unit_text,omitempty"`     // the unit as the instrument spells it; "": Unit
	UnitAt   *Place `json:"unit_at,omitempty"`       // the unit stands in a place of its own

	StatusAt   *Place   `json:"status_at,omitempty"`
	Fine       []string `json:"fine,omitempty"`        // statuses with which the number is good
	OverStatus []string `json:"over_status,omitempty"` // statuses that say "out of range"
	Over       []string `json:"over,omitempty"`        // words in the number's place that say so

	Begins string `json:"begins,omitempty"` // what every line begins with
	Check  Check  `json:"check,omitzero"`
	Frame  Frame  `json:"frame,omitzero"`
}

// Place is where something stands beside the number: a column where columns
// are separated, else a stretch of characters.
type Place struct {
	Column int `json:"column,omitempty"` // from 0
	Start  int `json:"start,omitempty"`  // characters before it
	Width  int `json:"width,omitempty"`  // characters it has
}

// Check is a check value in hexadecimal digits at the end of a line.
type Check struct {
	Name         string `json:"name,omitempty"`          // of checksum.Named; "": there is none
	Mark         string `json:"mark,omitempty"`          // what stands before the digits
	CoversBegins bool   `json:"covers_begins,omitempty"` // Field.Begins is part of what is checked
	CoversMark   bool   `json:"covers_mark,omitempty"`   // and so is Mark
	Lower        bool   `json:"lower,omitempty"`         // the digits a to f are small letters
}

// What a line can be apart from a number and nonsense; errors.Is tells.
var (
	// ErrOverRange: the instrument says that what is there is out of its range.
	ErrOverRange = errors.New("out of its range")
	// ErrStatus: the status is none of those stated as fine.
	ErrStatus = errors.New("its status is not stated as fine")
	// ErrUnit: the unit is another than the one stated.
	ErrUnit = errors.New("its unit is another")
	// ErrCheck: the check value does not belong to the rest.
	ErrCheck = errors.New("its check value does not belong to it")
)

// overflow is what SCPI puts out for a value beyond the range: 9.9E37 for plus
// infinity, -9.9E37 for minus infinity, 9.91E37 for not a number. Source:
// SCPI-99 volume 1, 7.2.1.4 and 7.2.1.5, from memory.
const overflow = 9.9e37

// Parser reads numbers as one Field says.
type Parser struct {
	f     Field
	plain bool // the whole line is the number
	tens  [16]float64
	unit  string
	check *checksum.Algorithm
	frame *FrameReader
}

// Parser prepares for reading many numbers. It refuses a Field that names an
// unknown checksum or contradicts itself.
func (f Field) Parser() (*Parser, error) {
	p := &Parser{}
	if err := p.prepare(&f); err != nil {
		return nil, err
	}
	return p, nil
}

func (p *Parser) prepare(f *Field) (err error) {
	p.f, p.unit = *f, f.UnitText
	if p.unit == "" {
		p.unit = f.Unit
	}
	if f.Frame.Length > 0 {
		p.frame, err = f.Frame.Reader()
		return err
	}
	if f.Check.Name != "" {
		var ok bool
		if p.check, ok = checksum.Named(f.Check.Name); !ok {
			return fmt.Errorf("%q is no checksum known here", f.Check.Name)
		}
	}
	p.tens = powers()
	p.plain = f.Separator == "" && !f.Cut && f.Prefix == "" && f.Suffix == "" && f.Length == 0 && f.Begins == "" &&
		p.check == nil && !f.UnitInText && f.UnitAt == nil && f.StatusAt == nil && len(f.Over) == 0 && !f.Comma
	return nil
}

// Frame is the reader of a field in frames, nil for one in lines of text.
func (p *Parser) Frame() *FrameReader { return p.frame }

// Number returns the number in the text, or an error that quotes the text. It
// allocates nothing unless it refuses: fast streams come through here.
func (p *Parser) Number(text string) (float64, error) {
	if p.plain && (p.f.Width == 0 || len(text) == p.f.Width) {
		if x, ok := plainDecimal(text, '.'); ok {
			return x, nil
		}
	}
	if p.frame != nil {
		return p.frame.text(text)
	}
	s, err := p.place(text)
	if err != nil {
		return 0, err
	}
	for _, word := range p.f.Over {
		if s == word {
			return 0, fmt.Errorf("%q: %w", text, ErrOverRange)
		}
	}
	if p.f.Width > 0 && len(s) != p.f.Width {
		if saysOverRange(s) {
			return 0, fmt.Errorf("%q: %w", text, ErrOverRange)
		}
		return 0, fmt.Errorf("%q: the number has %d characters, %d are stated", text, len(s), p.f.Width)
	}
	x, err := p.decimal(strings.TrimLeft(s, " "))
	if err == nil && math.Abs(x) >= overflow || err != nil && saysOverRange(s) {
		return 0, fmt.Errorf("%q: %w", text, ErrOverRange)
	}
	return x, err
}

// Line reads the line that text begins with if all of it is a number and a CR
// or LF follows, and returns the number and the line's length. The length is 0
// for every other line, which Number may still be able to read: this is the
// short way for fast streams, which looks at each character once.
func (p *Parser) Line(text string) (x float64, length int) {
	if !p.plain {
		return 0, 0
	}
	whole, decimals, n, negative := leading(text, '.')
	if n == 0 || n == len(text) || text[n] != '\n' && text[n] != '\r' || p.f.Width > 0 && n != p.f.Width {
		return 0, 0
	}
	return signed(float64(whole)/p.tens[decimals&15], negative), n
}

func (p *Parser) decimal(s string) (float64, error) {
	if !p.f.Comma {
		return ParseDecimal(s)
	}
	if x, ok := plainDecimal(s, ','); ok {
		return x, nil
	}
	if strings.Contains(s, ".") {
		return 0, fmt.Errorf("%q is no decimal number with a comma", s)
	}
	return anyDecimal(strings.Replace(s, ",", ".", 1))
}

// place finds the number's place in a line, when all that stands around it is
// as stated.
func (p *Parser) place(text string) (string, error) {
	f := &p.f
	if f.Length > 0 && len(text) != f.Length {
		return "", fmt.Errorf("%q has %d characters, %d are stated", text, len(text), f.Length)
	}
	s, err := p.checked(text)
	if err != nil {
		return "", err
	}
	number := s
	switch {
	case f.Separator != "":
		if f.Columns > 0 && strings.Count(s, f.Separator) != f.Columns-1 {
			return "", fmt.Errorf("%q has not %d columns", text, f.Columns)
		}
		var ok bool
		if number, ok = column(s, f.Separator, f.Column); !ok {
			return "", fmt.Errorf("%q has no column %d", text, f.Column)
		}
	case f.Cut:
		var ok bool
		if number, ok = stretch(s, f.Start, f.Width); !ok {
			return "", fmt.Errorf("%q ends before the number's place", text)
		}
	}
	if err := p.around(text, s); err != nil {
		return "", err
	}
	var ok bool
	if number, ok = strings.CutPrefix(number, f.Prefix); !ok {
		return "", fmt.Errorf("%q lacks %q before the number", text, f.Prefix)
	}
	if number, ok = strings.CutSuffix(number, f.Suffix); !ok {
		return "", fmt.Errorf("%q lacks %q after the number", text, f.Suffix)
	}
	if f.UnitInText {
		if number, ok = strings.CutSuffix(number, p.unit); !ok {
			if saysOverRange(number) {
				return "", fmt.Errorf("%q: %w", text, ErrOverRange)
			}
			return "", fmt.Errorf("%q lacks the unit %s: %w", text, p.unit, ErrUnit)
		}
		number = strings.TrimRight(number, " ")
	}
	return number, nil
}

// checked cuts off what a line begins with and the check value at its end, if
// that belongs to it.
func (p *Parser) checked(text string) (string, error) {
	f := &p.f
	s, ok := strings.CutPrefix(text, f.Begins)
	if !ok {
		return "", fmt.Errorf("%q does not begin with %q", text, f.Begins)
	}
	if p.check == nil {
		return s, nil
	}
	n := 2 * p.check.Size()
	if len(s) < n+len(f.Check.Mark) {
		return "", fmt.Errorf("%q is too short for its check value", text)
	}
	given := s[len(s)-n:]
	if s, ok = strings.CutSuffix(s[:len(s)-n], f.Check.Mark); !ok || f.Length == 0 && f.Check.Mark != "" && strings.Contains(s, f.Check.Mark) {
		return "", fmt.Errorf("%q has not one %q, before its check value", text, f.Check.Mark)
	}
	if f.Length == 0 && f.Begins != "" && strings.Contains(s, f.Begins) {
		return "", fmt.Errorf("%q has a second %q and no stated length: it could be the end of a longer line", text, f.Begins)
	}
	from, to := len(f.Begins), len(text)-n-len(f.Check.Mark)
	if f.Check.CoversBegins {
		from = 0
	}
	if f.Check.CoversMark {
		to += len(f.Check.Mark)
	}
	if want := p.check.OfText(text[from:to]); !isHex(given, want, f.Check.Lower) {
		return "", fmt.Errorf("%q: %w, %s of the rest is %0*X", text, ErrCheck, p.check.Name(), n, want)
	}
	return s, nil
}

// isHex says that s is x in hexadecimal digits. Letters of the other size are
// another text: one changed byte must not pass.
func isHex(s string, x uint32, lower bool) bool {
	letters := "0123456789ABCDEF"
	if lower {
		letters = "0123456789abcdef"
	}
	for i := len(s) - 1; i >= 0; i-- {
		if s[i] != letters[x&15] {
			return false
		}
		x >>= 4
	}
	return x == 0
}

// around looks at the unit and the status, where they have places of their own.
func (p *Parser) around(text, s string) error {
	f := &p.f
	if f.UnitAt != nil {
		unit, ok := p.at(s, *f.UnitAt)
		if !ok || unit != p.unit {
			return fmt.Errorf("%q: %w, %q instead of %s", text, ErrUnit, unit, p.unit)
		}
	}
	if f.StatusAt == nil {
		return nil
	}
	status, ok := p.at(s, *f.StatusAt)
	if !ok {
		return fmt.Errorf("%q has no status: %w", text, ErrStatus)
	}
	for _, over := range f.OverStatus {
		if status == over {
			return fmt.Errorf("%q: status %q: %w", text, status, ErrOverRange)
		}
	}
	for _, fine := range f.Fine {
		if status == fine {
			return nil
		}
	}
	return fmt.Errorf("%q: status %q: %w", text, status, ErrStatus)
}

// at returns what stands in a place, without blanks around it.
func (p *Parser) at(s string, place Place) (part string, ok bool) {
	if p.f.Separator != "" {
		part, ok = column(s, p.f.Separator, place.Column)
	} else {
		part, ok = stretch(s, place.Start, place.Width)
	}
	return strings.Trim(part, " "), ok
}

// Number is that of the Field's Parser, which is the quicker way to many.
func (f Field) Number(text string) (float64, error) {
	var p Parser
	if err := p.prepare(&f); err != nil {
		return 0, err
	}
	return p.Number(text)
}

// Value is Number with the field's unit. A field that names no known unit, and
// a number too large for SI, are refused.
func (f Field) Value(text string) (Value, error) {
	u, ok := UnitNamed(f.Unit)
	if !ok {
		return Value{}, fmt.Errorf("%q is no unit known here", f.Unit)
	}
	x, err := f.Number(text)
	if err != nil {
		return Value{}, err
	}
	return valueOf(x, u)
}

// column returns the part of s between separators, from 0.
func column(s, separator string, n int) (part string, ok bool) {
	for ; n > 0; n-- {
		if _, s, ok = strings.Cut(s, separator); !ok {
			return "", false
		}
	}
	part, _, _ = strings.Cut(s, separator)
	return part, n == 0
}

func stretch(s string, start, width int) (part string, ok bool) {
	if start < 0 || width < 0 || len(s) < start || len(s)-start < width {
		return "", false
	}
	return s[start : start+width], true
}

// saysOverRange knows the words that instruments put in a number's place
// (common practice, no source).
func saysOverRange(text string) bool {
	word := strings.ToUpper(strings.Trim(text, " +-.\""))
	switch word {
	case "OL", "OVL", "OVLD", "OVFL", "OFL", "OVER", "OVERLOAD", "OVERFLOW", "OVERRANGE", "UNDER", "UNDERRANGE":
		return true
	case "":
		return strings.Contains(text, "-") && len(strings.Trim(text, " ")) > 2 // "-----"
	}
	return false
}

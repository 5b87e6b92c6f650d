package modbus

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"kymobench/bench/quantity"
)

// Question is what is read, as the bench file words it:
//
//	holding 100 float32     the number in holding registers 100 and 101
//	input 0 int16           the number in input register 0
//	holding 20 text16       sixteen characters, two in each register
//
// Registers are numbered as they stand in the message, from 0.
type Question struct {
	Input bool   // input registers, function 04; else holding registers, 03
	At    uint16 // the first register
	Type  string // of the number; "" for text
	Text  int    // characters; 0 for a number
}

// ParseQuestion reads a Question.
func ParseQuestion(s string) (Question, error) {
	var q Question
	words := strings.Fields(s)
	if len(words) != 3 || words[0] != "holding" && words[0] != "input" {
		return q, fmt.Errorf("%q is no question like \"holding 100 float32\" or \"input 0 int16\"", s)
	}
	q.Input = words[0] == "input"
	var err error
	if q.At, err = register(words[1]); err != nil {
		return q, err
	}
	if n, ok := strings.CutPrefix(words[2], "text"); ok {
		if q.Text, err = strconv.Atoi(n); err != nil || q.Text < 1 || q.Text > 64 {
			return q, fmt.Errorf("%q: a text has 1 to 64 characters, as in text16", s)
		}
	} else if !knownType(words[2]) {
		return q, fmt.Errorf("%q: %q is no type of register: they are int16, uint16, int32, uint32, float32 and text", s, words[2])
	} else {
		q.Type = words[2]
	}
	if int(q.At)+q.registers() > 1<<16 {
		return q, fmt.Errorf("%q: there are registers 0 to 65535", s)
	}
	return q, nil
}

func register(s string) (uint16, error) {
	n, err := strconv.ParseUint(s, 10, 16)
	if err != nil || strings.HasPrefix(s, "+") {
		return 0, fmt.Errorf("%q is no register from 0 to 65535", s)
	}
	return uint16(n), nil
}

func knownType(s string) bool {
	switch s {
	case "int16", "uint16", "int32", "uint32", "float32":
		return true
	}
	return false
}

// registers is how many the answer holds.
func (q Question) registers() int {
	if q.Type == "" {
		return (q.Text + 1) / 2
	}
	return quantity.Layout{Type: q.Type}.Size() / 2
}

func (q Question) function() byte {
	if q.Input {
		return 4
	}
	return 3
}

// Command is what is written, as the bench file words it:
//
//	holding 12 uint16 = 1            function 06
//	holding 12 uint16 = 1 by 16      the same by function 16
//	holding 10 float32 = {kPa}       the pressure asked for, in kPa
//	holding 10 int16 = 10 {mmHg}     the same in tenths of 1 mmHg
type Command struct {
	At     uint16
	Type   string
	Value  float64       // times the pressure, if there is a Unit
	Unit   quantity.Unit // of the pressure that is asked for; none: Value as it is
	Many   bool          // function 16 also for a single register
	Worded string        // as the bench file has it
}

// ParseCommand reads a Command.
func ParseCommand(s string) (Command, error) {
	c := Command{Worded: s, Value: 1}
	bad := fmt.Errorf("%q is no command like \"holding 12 uint16 = 1\" or \"holding 10 float32 = {kPa}\"", s)
	left, right, ok := strings.Cut(s, "=")
	words := strings.Fields(left)
	if !ok || len(words) != 3 || words[0] != "holding" {
		return c, bad
	}
	var err error
	if c.At, err = register(words[1]); err != nil {
		return c, err
	}
	if c.Type = words[2]; !knownType(c.Type) {
		return c, fmt.Errorf("%q: %q is no type of register: they are int16, uint16, int32, uint32 and float32", s, c.Type)
	}
	if before, ok := strings.CutSuffix(right, " by 16"); ok {
		c.Many, right = true, before
	}
	number, unit, isPressure := strings.Cut(strings.TrimSpace(right), "{")
	if isPressure {
		name, rest, closed := strings.Cut(unit, "}")
		if !closed || rest != "" {
			return c, bad
		}
		if c.Unit, ok = quantity.UnitNamed(name); !ok || c.Unit.Dimension != quantity.DimPressure {
			return c, fmt.Errorf("%q in %q is no unit of pressure", name, s)
		}
	}
	if number = strings.TrimSpace(number); number != "" || !isPressure {
		if c.Value, err = quantity.ParseDecimal(number); err != nil {
			return c, bad
		}
	}
	if c.size() == 4 {
		c.Many = true
	}
	if int(c.At)+c.size()/2 > 1<<16 {
		return c, fmt.Errorf("%q: there are registers 0 to 65535", s)
	}
	if !isPressure {
		if _, err := c.bytes(c.Value, ""); err != nil {
			return c, err
		}
	}
	return c, nil
}

func (c Command) size() int { return quantity.Layout{Type: c.Type}.Size() }

// bytes are a number's bytes as registers hold it, in the order of the bytes.
func (c Command) bytes(x float64, order string) ([]byte, error) {
	low, high := math.Inf(-1), math.Inf(1)
	switch c.Type {
	case "int16":
		low, high = math.MinInt16, math.MaxInt16
	case "uint16":
		low, high = 0, math.MaxUint16
	case "int32":
		low, high = math.MinInt32, math.MaxInt32
	case "uint32":
		low, high = 0, math.MaxUint32
	}
	whole := c.Type != "float32"
	if whole {
		x = math.Round(x)
	}
	if !(x >= low && x <= high) || !whole && math.Abs(x) > math.MaxFloat32 {
		return nil, fmt.Errorf("%q: %v is no %s", c.Worded, x, c.Type)
	}
	var bits uint32
	if whole {
		bits = uint32(int64(x))
	} else {
		bits = math.Float32bits(float32(x))
	}
	out := make([]byte, c.size())
	for i := range out {
		out[place(i, len(out), order)] = byte(bits >> (8 * (len(out) - 1 - i)))
	}
	return out, nil
}

// place is where the byte i, counted from the most significant, stands.
func place(i, size int, order string) int {
	switch order {
	case "little-endian":
		return size - 1 - i
	case "big-endian-swapped":
		return i ^ 2&(size-1)
	case "little-endian-swapped":
		return i ^ 1
	}
	return i
}

package record

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"strconv"
	"unicode/utf16"
	"unicode/utf8"
)

// deepest is how far objects and arrays of a payload may stand in each other.
const deepest = 32

// encodePayload returns v as a canonical JSON object.
func encodePayload(v any) ([]byte, error) {
	var b bytes.Buffer
	e := json.NewEncoder(&b)
	e.SetEscapeHTML(false)
	if err := e.Encode(v); err != nil {
		return nil, err
	}
	return canonicalObject(bytes.TrimSuffix(b.Bytes(), []byte("\n")))
}

// canonicalObject writes a JSON object in the one way a record holds it. The
// writer takes what it returns; the reader compares it with what it was given.
// Keys keep their order, for a reader cannot know the order of a struct it has
// not met; Decode holds a payload to the order of its type.
func canonicalObject(src []byte) ([]byte, error) {
	c := canonical{src: src, dst: make([]byte, 0, len(src))}
	if len(src) == 0 || src[0] != '{' {
		return nil, errors.New("payload is not a JSON object")
	}
	if err := c.value(0); err != nil {
		return nil, fmt.Errorf("payload at byte %d: %w", c.at, err)
	}
	if c.at != len(src) {
		return nil, fmt.Errorf("payload at byte %d: something after the object", c.at)
	}
	return c.dst, nil
}

// canonical walks JSON without white space from src to dst.
type canonical struct {
	src []byte
	at  int
	dst []byte
}

var errEnds = errors.New("ends too early")

func (c *canonical) value(depth int) error {
	if c.at >= len(c.src) {
		return errEnds
	}
	switch ch := c.src[c.at]; {
	case ch == '{':
		return c.object(depth + 1)
	case ch == '[':
		return c.array(depth + 1)
	case ch == '"':
		return c.text()
	case ch == '-' || ch >= '0' && ch <= '9':
		return c.number()
	}
	for _, word := range []string{"true", "false", "null"} {
		if bytes.HasPrefix(c.src[c.at:], []byte(word)) {
			c.at += len(word)
			c.dst = append(c.dst, word...)
			return nil
		}
	}
	return errors.New("no JSON value")
}

// take moves over ch if it is next.
func (c *canonical) take(ch byte) bool {
	if c.at >= len(c.src) || c.src[c.at] != ch {
		return false
	}
	c.at++
	c.dst = append(c.dst, ch)
	return true
}

func (c *canonical) object(depth int) error {
	if depth > deepest {
		return fmt.Errorf("more than %d levels", deepest)
	}
	c.take('{')
	if c.take('}') {
		return nil
	}
	var few [16][]byte // most objects have few keys, so most need no map
	keys := few[:0]
	var many map[string]bool
	for {
		start := len(c.dst)
		if c.at >= len(c.src) || c.src[c.at] != '"' {
			return errors.New("no key")
		}
		if err := c.text(); err != nil {
			return err
		}
		key := c.dst[start:]
		if many == nil && len(keys) == len(few) {
			many = make(map[string]bool)
			for _, k := range keys {
				many[string(k)] = true
			}
		}
		if many != nil {
			if many[string(key)] {
				return fmt.Errorf("key %s twice", key)
			}
			many[string(key)] = true
		} else {
			for _, k := range keys {
				if bytes.Equal(k, key) {
					return fmt.Errorf("key %s twice", key)
				}
			}
			keys = append(keys, key)
		}
		if !c.take(':') {
			return errors.New("no colon after a key")
		}
		if err := c.value(depth); err != nil {
			return err
		}
		if c.take('}') {
			return nil
		}
		if !c.take(',') {
			return errors.New("neither a comma nor the end of the object")
		}
	}
}

func (c *canonical) array(depth int) error {
	if depth > deepest {
		return fmt.Errorf("more than %d levels", deepest)
	}
	c.take('[')
	if c.take(']') {
		return nil
	}
	for {
		if err := c.value(depth); err != nil {
			return err
		}
		if c.take(']') {
			return nil
		}
		if !c.take(',') {
			return errors.New("neither a comma nor the end of the array")
		}
	}
}

// text reads one string. The escape for U+FFFD is refused: encoding/json
// writes it for bytes that are not UTF-8, and what an instrument sent must not
// be changed on its way into the record. Such bytes are escaped by the caller.
func (c *canonical) text() error {
	c.at++
	c.dst = append(c.dst, '"')
	for c.at < len(c.src) {
		switch ch := c.src[c.at]; {
		case ch == '"':
			c.at++
			c.dst = append(c.dst, '"')
			return nil
		case ch < 0x20:
			return errors.New("control character in a string")
		case ch == '\\':
			r, n, err := escape(c.src[c.at:])
			if err != nil {
				return err
			}
			c.at += n
			c.dst = appendRune(c.dst, r)
		case ch < utf8.RuneSelf:
			c.at++
			c.dst = append(c.dst, ch)
		default:
			r, n := utf8.DecodeRune(c.src[c.at:])
			if r == utf8.RuneError && n == 1 {
				return errors.New("string is not UTF-8")
			}
			c.at += n
			c.dst = appendRune(c.dst, r)
		}
	}
	return errEnds
}

// escape reads one escape sequence and returns its rune and length.
func escape(s []byte) (rune, int, error) {
	if len(s) < 2 {
		return 0, 0, errEnds
	}
	switch s[1] {
	case '"', '\\', '/':
		return rune(s[1]), 2, nil
	case 'b':
		return '\b', 2, nil
	case 'f':
		return '\f', 2, nil
	case 'n':
		return '\n', 2, nil
	case 'r':
		return '\r', 2, nil
	case 't':
		return '\t', 2, nil
	case 'u':
		r, ok := hexRune(s)
		if !ok {
			return 0, 0, errors.New(`\u without four hexadecimal digits`)
		}
		if utf16.IsSurrogate(r) {
			low, _ := hexRune(s[6:])
			if r = utf16.DecodeRune(r, low); r == utf8.RuneError {
				return 0, 0, errors.New("half a surrogate pair")
			}
			return r, 12, nil
		}
		if r == utf8.RuneError {
			return 0, 0, errors.New("text that was not UTF-8")
		}
		return r, 6, nil
	}
	return 0, 0, errors.New("unknown escape")
}

func hexRune(s []byte) (rune, bool) {
	if len(s) < 6 || s[0] != '\\' || s[1] != 'u' {
		return 0, false
	}
	var r rune
	for _, ch := range s[2:6] {
		switch {
		case ch >= '0' && ch <= '9':
			r = r<<4 | rune(ch-'0')
		case ch >= 'a' && ch <= 'f':
			r = r<<4 | rune(ch-'a'+10)
		case ch >= 'A' && ch <= 'F':
			r = r<<4 | rune(ch-'A'+10)
		default:
			return 0, false
		}
	}
	return r, true
}

// appendRune writes a rune of a string as encoding/json does without its
// escaping for HTML; the two line separators are escaped there always.
func appendRune(dst []byte, r rune) []byte {
	const digits = "0123456789abcdef"
	switch {
	case r == '"' || r == '\\':
		return append(dst, '\\', byte(r))
	case r == '\b':
		return append(dst, `\b`...)
	case r == '\f':
		return append(dst, `\f`...)
	case r == '\n':
		return append(dst, `\n`...)
	case r == '\r':
		return append(dst, `\r`...)
	case r == '\t':
		return append(dst, `\t`...)
	case r < 0x20:
		return append(dst, '\\', 'u', '0', '0', digits[r>>4], digits[r&15])
	case r == '\u2028' || r == '\u2029':
		return append(dst, '\\', 'u', '2', '0', '2', digits[r&15])
	}
	return utf8.AppendRune(dst, r)
}

// number reads one number. An integer that fits 64 bits stays as it is;
// everything else is a float64 and is written as encoding/json writes it.
func (c *canonical) number() error {
	start := c.at
	digits := func() int {
		from := c.at
		for c.at < len(c.src) && c.src[c.at] >= '0' && c.src[c.at] <= '9' {
			c.at++
		}
		return c.at - from
	}
	if c.src[c.at] == '-' {
		c.at++
	}
	whole := c.at
	n := digits()
	if n == 0 || n > 1 && c.src[whole] == '0' {
		return errors.New("number is not JSON")
	}
	integer := true
	if c.at < len(c.src) && c.src[c.at] == '.' {
		integer = false
		c.at++
		if digits() == 0 {
			return errors.New("number is not JSON")
		}
	}
	if c.at < len(c.src) && (c.src[c.at] == 'e' || c.src[c.at] == 'E') {
		integer = false
		c.at++
		if c.at < len(c.src) && (c.src[c.at] == '+' || c.src[c.at] == '-') {
			c.at++
		}
		if digits() == 0 {
			return errors.New("number is not JSON")
		}
	}
	s := c.src[start:c.at]
	if integer {
		_, err := strconv.ParseInt(string(s), 10, 64)
		if err != nil {
			_, err = strconv.ParseUint(string(s), 10, 64)
		}
		if err == nil {
			c.dst = append(c.dst, s...)
			return nil
		}
	}
	f, err := strconv.ParseFloat(string(s), 64)
	if err != nil {
		return errors.New("number is too large")
	}
	c.dst = appendFloat(c.dst, f)
	return nil
}

// appendFloat writes f as encoding/json does: the shortest decimals that give
// f back, with an exponent below 1e-6 and from 1e21.
func appendFloat(dst []byte, f float64) []byte {
	a := math.Abs(f)
	if a == 0 || a >= 1e-6 && a < 1e21 {
		return strconv.AppendFloat(dst, f, 'f', -1, 64)
	}
	dst = strconv.AppendFloat(dst, f, 'e', -1, 64)
	if n := len(dst); dst[n-4] == 'e' && dst[n-2] == '0' { // e-07 to e-7
		dst[n-2] = dst[n-1]
		dst = dst[:n-1]
	}
	return dst
}

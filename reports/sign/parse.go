package sign

import (
	"bytes"
	"encoding/hex"
	"slices"
	"strconv"
)

// Bounds of what is read at all. A report with a large record has some 3 MB
// and under 200 objects.
const (
	mostFile    = 64 << 20
	mostObjects = 10_000
	mostDepth   = 12
)

// parse reads a whole file from its first byte to its last: header, objects
// one after the other, table, trailer, end mark. Nothing is searched for, so
// nothing can hide between. It serves both the layout's output, whose header
// is one of those given, and our own.
func parse(file []byte, headers ...string) (*document, error) {
	if len(file) > mostFile {
		return nil, problem(TooLarge, "%d bytes, at most %d", len(file), mostFile)
	}
	s := &scanner{b: file}
	at := slices.IndexFunc(headers, func(h string) bool { return bytes.HasPrefix(file, []byte(h)) })
	if at < 0 {
		return nil, problem(Header, "")
	}
	s.at = len(headers[at])
	// Readers look for these from the end of the file, so each stands there
	// once; by chance they do not occur in compressed bytes.
	for _, word := range []string{"startxref", "%%EOF"} {
		if n := bytes.Count(file, []byte(word)); n != 1 {
			return nil, problem(Revisions, "%q stands %d times in the file", word, n)
		}
	}
	d := &document{objects: make([]object, 1)}
	offsets := map[int]int{}
	for s.err == nil && !s.starts("xref\n") {
		start := s.at
		n := s.unsigned()
		s.expect(" 0 obj\n")
		if s.err != nil {
			break
		}
		if _, twice := offsets[n]; twice || n < 1 || n > mostObjects {
			return nil, problem(Objects, "object number %d is repeated or out of range", n)
		}
		offsets[n] = start
		for len(d.objects) <= n {
			d.objects = append(d.objects, object{})
		}
		d.objects[n] = s.object()
	}
	table := s.at
	s.expect("xref\n0 ")
	size := s.unsigned()
	s.expect("\n0000000000 65535 f \n")
	if s.err != nil {
		return nil, s.err
	}
	if size != len(d.objects) || len(offsets) != size-1 {
		return nil, problem(CrossReference, "%d entries for %d objects", size-1, len(offsets))
	}
	for n := 1; n < size && s.err == nil; n++ {
		line := s.take(20)
		if s.err == nil && string(line) != tenDigits(offsets[n])+" 00000 n \n" {
			return nil, problem(CrossReference, "the entry of object %d does not lead to it", n)
		}
	}
	s.expect("trailer\n")
	trailer, ok := s.value(0).(dict)
	s.expect("\nstartxref\n")
	if s.err != nil || !ok {
		return nil, s.failed("trailer")
	}
	if s.unsigned() != table {
		return nil, problem(CrossReference, "the end of the file leads to another table")
	}
	s.expect("\n%%EOF\n")
	if s.err != nil {
		return nil, s.err
	}
	if s.at != len(file) {
		return nil, problem(Revisions, "%d bytes after the end mark", len(file)-s.at)
	}
	for _, key := range []name{"Prev", "XRefStm"} {
		if _, has := trailer[key]; has {
			return nil, problem(Revisions, "the trailer points to an earlier table (/%s)", key)
		}
	}
	if _, has := trailer["Encrypt"]; has {
		return nil, problem(Encrypted, "")
	}
	if trailer["Size"] != number(strconv.Itoa(size)) {
		return nil, problem(CrossReference, "/Size is not %d", size)
	}
	d.trailer = trailer
	return d, nil
}

// scanner reads from left to right; the first error stays.
type scanner struct {
	b   []byte
	at  int
	err error
}

func (s *scanner) failed(what string) error {
	if s.err == nil {
		s.err = problem(Syntax, "%s expected at byte %d", what, s.at)
	}
	return s.err
}

func (s *scanner) starts(word string) bool {
	return s.err == nil && len(s.b)-s.at >= len(word) && string(s.b[s.at:s.at+len(word)]) == word
}

func (s *scanner) expect(word string) {
	if !s.starts(word) {
		s.failed(strconv.Quote(word))
		return
	}
	s.at += len(word)
}

func (s *scanner) take(n int) []byte {
	if s.err != nil || n < 0 || n > len(s.b)-s.at {
		s.failed(strconv.Itoa(n) + " bytes")
		return nil
	}
	s.at += n
	return s.b[s.at-n : s.at : s.at]
}

func (s *scanner) peek() byte {
	if s.err != nil || s.at >= len(s.b) {
		return 0
	}
	return s.b[s.at]
}

// blanks skips what the layout writes between values.
func (s *scanner) blanks() {
	for c := s.peek(); c == ' ' || c == '\n'; c = s.peek() {
		s.at++
	}
}

// unsigned reads decimal digits, at most ten of them.
func (s *scanner) unsigned() int {
	start := s.at
	for c := s.peek(); c >= '0' && c <= '9' && s.at-start < 10; c = s.peek() {
		s.at++
	}
	n, err := strconv.Atoi(string(s.b[start:s.at]))
	if s.err != nil || err != nil || (s.at-start > 1 && s.b[start] == '0') {
		s.failed("whole number")
		return 0
	}
	return n
}

// object reads from behind "obj" to behind "endobj".
func (s *scanner) object() object {
	o := object{value: s.value(0)}
	s.blanks()
	if s.starts("stream\n") {
		s.at += len("stream\n")
		d, _ := o.value.(dict)
		length, _ := d["Length"].(number)
		n, err := strconv.Atoi(string(length))
		if err != nil || strconv.Itoa(n) != string(length) {
			s.failed("stream with a direct length")
			return o
		}
		o.raw = s.take(n)
		if o.raw == nil {
			o.raw = []byte{}
		}
		s.expect("\nendstream\n")
	}
	s.expect("endobj\n")
	return o
}

func (s *scanner) value(depth int) value {
	s.blanks()
	if depth > mostDepth {
		s.failed("less nesting")
		return nil
	}
	switch c := s.peek(); {
	case c == '/':
		return s.name()
	case c == '(':
		return s.literal()
	case c == '[':
		s.at++
		out := array{}
		for s.blanks(); s.err == nil && s.peek() != ']'; s.blanks() {
			out = append(out, s.value(depth+1))
		}
		s.expect("]")
		return out
	case s.starts("<<"):
		return s.dict(depth)
	case c == '<':
		return s.hex()
	case c == '-' || c >= '0' && c <= '9':
		return s.number()
	}
	s.failed("value")
	return nil
}

func (s *scanner) dict(depth int) dict {
	s.at += len("<<")
	out := dict{}
	for s.blanks(); s.err == nil && !s.starts(">>"); s.blanks() {
		key := s.name()
		if _, twice := out[key]; twice && s.err == nil {
			s.err = problem(DuplicateKey, "/%s at byte %d", key, s.at)
		}
		out[key] = s.value(depth + 1)
	}
	s.expect(">>")
	return out
}

func (s *scanner) name() name {
	s.expect("/")
	var out []byte
	for regular(s.peek()) && len(out) < 128 {
		c := s.peek()
		s.at++
		if c == '#' {
			decoded, err := hex.DecodeString(string(s.take(2)))
			if s.err != nil || err != nil {
				s.failed("name")
				return ""
			}
			c = decoded[0]
		}
		out = append(out, c)
	}
	if len(out) == 0 {
		s.failed("name")
	}
	return name(out)
}

func (s *scanner) hex() text {
	s.expect("<")
	end := bytes.IndexByte(s.b[s.at:], '>')
	if s.err != nil || end < 0 {
		s.failed("end of string")
		return nil
	}
	out, err := hex.DecodeString(string(s.take(end)))
	if err != nil {
		s.failed("hex string")
		return nil
	}
	s.expect(">")
	return out
}

// literal reads the strings of the layout; our own are always hex.
func (s *scanner) literal() text {
	s.expect("(")
	out := text{}
	for s.err == nil {
		c := s.take(1)
		if s.err != nil {
			break
		}
		switch c[0] {
		case ')':
			return out
		case '(':
			s.failed("escaped bracket")
		case '\\':
			escaped := s.take(1)
			if s.err != nil {
				break
			}
			switch escaped[0] {
			case '\\', '(', ')':
				out = append(out, escaped[0])
			case 'r':
				out = append(out, '\r')
			default:
				s.failed("known escape")
			}
		default:
			out = append(out, c[0])
		}
	}
	return nil
}

// number reads a number, or a reference if " 0 R" follows.
func (s *scanner) number() value {
	start := s.at
	if s.peek() == '-' {
		s.at++
	}
	digits, points := 0, 0
	for c := s.peek(); c >= '0' && c <= '9' || c == '.'; c = s.peek() {
		if c == '.' {
			points++
		} else {
			digits++
		}
		s.at++
	}
	if digits == 0 || points > 1 || s.at-start > 20 || regular(s.peek()) {
		s.failed("number")
		return nil
	}
	written := string(s.b[start:s.at])
	if s.starts(" 0 R") && (s.at+4 >= len(s.b) || !regular(s.b[s.at+4])) {
		n, err := strconv.Atoi(written)
		if err == nil && n > 0 && n <= mostObjects && strconv.Itoa(n) == written {
			s.at += len(" 0 R")
			return ref(n)
		}
		s.failed("reference")
		return nil
	}
	return number(written)
}

func tenDigits(n int) string {
	digits := strconv.Itoa(n)
	return "0000000000"[:10-len(digits)] + digits
}

package quantity

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"strings"
	"testing"
)

// Places, units, statuses, words and check values of made-up instruments; the
// check values were worked out by hand (sum and exclusive-or of the characters)
// or with crcmod 1.7 (CRC-16/MODBUS, CRC-32).
func TestPlaces(t *testing.T) {
	cut := Field{Cut: true, Start: 2, Width: 7, Unit: "mmHg", UnitText: "MMHG", UnitAt: &Place{Start: 10, Width: 4},
		StatusAt: &Place{Start: 0, Width: 1}, Fine: []string{"N", "S"}, OverStatus: []string{"O"}, Length: 14}
	columns := Field{Separator: ";", Columns: 4, Column: 1, Unit: "kPa", UnitAt: &Place{Column: 2}, StatusAt: &Place{Column: 3}, Fine: []string{"0"}, OverStatus: []string{"7"}, Comma: true}
	words := Field{Unit: "mmHg", Over: []string{"9999.99", "-----", "E1"}}
	nmea := Field{Separator: ",", Column: 1, Begins: "$", Unit: "mmHg", Check: Check{Name: "xor8", Mark: "*"}}
	sum := Field{Unit: "mmHg", Width: 6, Length: 8, Check: Check{Name: "sum8", Lower: true}}
	crc := Field{Unit: "mmHg", Begins: "\x02", Length: 13, Width: 7, Check: Check{Name: "crc-16/modbus", Mark: "\x03", CoversBegins: true, CoversMark: true}}
	for _, c := range []struct {
		f    Field
		text string
		want float64
		err  error
	}{
		{cut, "N +012.50 MMHG", 12.5, nil}, {cut, "S -300.00 MMHG", -300, nil}, {cut, "O +012.50 MMHG", 0, ErrOverRange}, {cut, "? +012.50 MMHG", 0, ErrStatus},
		{cut, "N +012.50 KPA ", 0, ErrUnit}, {cut, "N    OL   MMHG", 0, ErrOverRange},
		{columns, "P;12,5;kPa;0", 12.5, nil}, {columns, "P; -0,25 ;kPa;0", 0, errAny}, {columns, "P;-0,25; kPa ; 0", -0.25, nil}, {columns, "P;1.234,5;kPa;0", 0, errAny},
		{columns, "P;12.5;kPa;0", 0, errAny}, {columns, "P;12,5;mmHg;0", 0, ErrUnit}, {columns, "P;12,5;kPa;7", 0, ErrOverRange}, {columns, "P;12,5;kPa;1", 0, ErrStatus},
		{columns, "P;12,5;kPa", 0, errAny}, {columns, "P;12,5;kPa;0;", 0, errAny}, {columns, "P;1,2,3;kPa;0", 0, errAny}, {columns, "P;1e2;kPa;0", 100, nil},
		{words, "9999.99", 0, ErrOverRange}, {words, "E1", 0, ErrOverRange}, {words, "9999.98", 9999.98, nil}, {words, "9.9E37", 0, ErrOverRange},
		{nmea, "$P,12.5,x*30", 12.5, nil}, {nmea, "$P,12.6,x*30", 0, ErrCheck}, {nmea, "$P,12.5,x*5a", 0, ErrCheck}, {nmea, "$P,12.5,x59", 0, errAny},
		{nmea, "P,12.5,x*30", 0, errAny}, {nmea, "$$P,12.5,x*30", 0, errAny}, {nmea, "$P,12.5,x*2*30", 0, errAny}, {nmea, "$*00", 0, errAny}, {nmea, "$", 0, errAny},
		{sum, "+12.504e", 0, ErrCheck}, {sum, "+12.5021", 12.5, nil}, {sum, "+12.502", 0, errAny},
		{crc, "\x02+012.50\x03FA10", 12.5, nil}, {crc, "\x02+012.50\x03fA10", 0, ErrCheck}, {crc, "\x02+012.51\x03FA10", 0, ErrCheck},
	} {
		x, err := c.f.Number(c.text)
		switch {
		case c.err == nil && (err != nil || x != c.want):
			t.Errorf("%q: %v, %v, want %v", c.text, x, err, c.want)
		case c.err != nil && (err == nil || x != 0 || c.err != errAny && !errors.Is(err, c.err)):
			t.Errorf("%q: %v, %v, want %v", c.text, x, err, c.err)
		}
	}
	if _, err := (Field{Check: Check{Name: "crc-17"}}).Number("1"); err == nil {
		t.Error("a checksum that nobody knows")
	}
}

var errAny = errors.New("any")

// mutations is how many damaged lines are tried of each kind.
func mutations() int {
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		return 1_000_000
	}
	return 20_000
}

// No change of one byte makes a number of a line with a checksum, whatever it
// is changed to; one that ends the line leaves two pieces, none of which is a
// line. Nothing panics.
func TestLineMutations(t *testing.T) {
	kinds := map[string]struct {
		f    Field
		make func(x float64) string
	}{
		"xor8": {Field{Separator: ",", Column: 0, Begins: "$", Unit: "mmHg", Check: Check{Name: "xor8", Mark: "*"}}, func(x float64) string {
			s := fmt.Sprintf("%.2f,0", x)
			var sum byte
			for i := range len(s) {
				sum ^= s[i]
			}
			return fmt.Sprintf("$%s*%02X", s, sum)
		}},
		"sum8": {Field{Length: 10, Width: 8, Unit: "mmHg", Check: Check{Name: "sum8"}}, func(x float64) string {
			s := fmt.Sprintf("%+08.2f", x)
			var sum byte
			for i := range len(s) {
				sum += s[i]
			}
			return fmt.Sprintf("%s%02X", s, sum)
		}},
		"crc16": {Field{Length: 16, Separator: ";", Column: 1, Unit: "mmHg", Check: Check{Name: "crc-16/modbus", Mark: ";"}}, func(x float64) string {
			s := fmt.Sprintf("mm;%+08.2f", x)
			r := uint16(0xffff)
			for i := range len(s) {
				r ^= uint16(s[i])
				for range 8 {
					low := r & 1
					if r >>= 1; low == 1 {
						r ^= 0xA001
					}
				}
			}
			return fmt.Sprintf("%s;%04X", s, r)
		}},
		"none": {Field{Width: 8, Unit: "mmHg"}, func(x float64) string { return fmt.Sprintf("%+08.2f", x) }},
	}
	r := rand.New(rand.NewPCG(7, 8))
	for name, k := range kinds {
		p, err := k.f.Parser()
		if err != nil {
			t.Fatal(err)
		}
		done, accepted := 0, 0
		for range mutations() {
			x := float64(r.IntN(100_000)-50_000) / 100
			line := k.make(x)
			if got, err := p.Number(line); err != nil || math.Abs(got-x) > 1e-9 {
				t.Fatalf("%s: %q is %v, %v", name, line, got, err)
			}
			at := r.IntN(len(line))
			damaged := line[:at] + string([]byte{line[at] ^ byte(1+r.IntN(255))}) + line[at+1:]
			for _, piece := range strings.FieldsFunc(damaged, func(c rune) bool { return c == '\r' || c == '\n' }) {
				if got, err := p.Number(piece); err == nil {
					accepted++
					if name != "none" {
						t.Errorf("%s: %q from %q is taken for %v", name, piece, line, got)
					}
				}
			}
			done++
		}
		if done != mutations() {
			t.Errorf("%s: %d", name, done)
		}
		t.Logf("%s: %d damaged lines, %d taken for numbers", name, done, accepted)
	}
}

// Line agrees with Number on every line that it reads, and reads plain ones.
func TestLineIsNumber(t *testing.T) {
	r := rand.New(rand.NewPCG(9, 10))
	p, err := Field{Unit: "mmHg"}.Parser()
	if err != nil {
		t.Fatal(err)
	}
	letters := "0123456789+-..\r\n e"
	read := 0
	for range 200_000 {
		b := make([]byte, r.IntN(20))
		for i := range b {
			b[i] = letters[r.IntN(len(letters))]
		}
		x, n := p.Line(string(b))
		if n == 0 {
			continue
		}
		read++
		want, err := p.Number(string(b[:n]))
		if err != nil || want != x && !(x == 0 && want == 0) || b[n] != '\r' && b[n] != '\n' {
			t.Fatalf("%q: %v and %v, %v", b, x, want, err)
		}
	}
	if read < 1000 {
		t.Errorf("only %d lines were read", read)
	}
	for text, want := range map[string]float64{"+1500.02\r": 1500.02, "-0.5\n1": -0.5, "123456789012345\n": 123456789012345} {
		if x, n := p.Line(text); n == 0 || x != want {
			t.Errorf("%q: %v, %d", text, x, n)
		}
	}
	for _, text := range []string{"1.5", "1.\n", ".5\n", "1e3\n", "1234567890123456\n", "1 \n", "", "\n", "+\n", "1.2.3\n"} {
		if x, n := p.Line(text); n != 0 {
			t.Errorf("%q is taken for %v", text, x)
		}
	}
}

func FuzzPlaces(f *testing.F) {
	f.Add("$P,12.5,x*30", "$", ",", "*", "xor8", 0, 1)
	f.Add("N +012.50 MMHG", "", "", "", "", 14, 0)
	f.Fuzz(func(t *testing.T, text, begins, separator, mark, check string, length, column int) {
		field := Field{Begins: begins, Separator: separator, Column: column % 100, Length: length % 300, Unit: "mmHg", Check: Check{Name: check, Mark: mark},
			StatusAt: &Place{Column: column % 7, Start: length % 9, Width: 1}, Fine: []string{"0"}}
		x, err := field.Number(text)
		if err != nil && x != 0 || math.IsNaN(x) || math.Abs(x) >= 9.9e37 {
			t.Fatalf("%+v on %q: %v, %v", field, text, x, err)
		}
	})
}

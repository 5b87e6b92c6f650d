package instrumenttest_test

import (
	"encoding/binary"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"kymobench/bench"
	"kymobench/bench/instruments/frames"
	"kymobench/bench/instruments/lines"
	"kymobench/bench/instruments/modbus"
	"kymobench/bench/instruments/running"
	"kymobench/bench/instruments/scpi"
	"kymobench/bench/instrumenttest"
	"kymobench/bench/line"
	"kymobench/bench/quantity"
)

// crc is CRC-16/MODBUS from its definition, bit by bit.
func crc(data []byte) uint16 {
	r := uint16(0xffff)
	for _, b := range data {
		r ^= uint16(b)
		for range 8 {
			low := r & 1
			if r >>= 1; low == 1 {
				r ^= 0xA001
			}
		}
	}
	return r
}

func sealed(data ...byte) []byte { return binary.LittleEndian.AppendUint16(data, crc(data)) }

const within = time.Second

func TestSCPI(t *testing.T) {
	field := quantity.Field{Unit: "mmHg", UnitInText: true}
	s := scpi.Settings{Identify: "*IDN?", Identity: "Hollerbrook,gauge,7,1", Within: within, Read: "MEAS:PRES?", Zero: "CAL:ZERO", Field: field}
	instrumenttest.Run(t, instrumenttest.Family{
		New:   func(l *line.Line) (bench.Manometer, error) { return scpi.New(l, s), nil },
		Field: field, Read: "MEAS:PRES?\n", Who: "*IDN?\n", Zero: "CAL:ZERO\n", Identity: s.Identity,
		Me: []byte(s.Identity + "\r\n"), Somebody: []byte("Hollerbrook,gauge,8,1\r\n"),
		Reading:   func(x float64) []byte { return fmt.Appendf(nil, "%+.2f mmHg\r\n", x) },
		OverRange: []byte("9.9E37 mmHg\n"), OtherUnit: []byte("12.5 kPa\n"), Resolution: 0.01,
		Garbage: [][]byte{[]byte("nan mmHg\n"), []byte("12,5 mmHg\n"), []byte("1_0 mmHg\n"), []byte("0x1p4 mmHg\n"), []byte("-113,\"Undefined header\"\n"),
			[]byte(strings.Repeat("9", 300) + "\n"), []byte("\x0012.5 mmHg\n"), []byte("１２ mmHg\n"), []byte(s.Identity + "\n")},
	})
}

// An asked dialogue of its own: terminator CR, decimal comma, columns, status,
// CRC, acknowledged commands.
func TestLinesAsked(t *testing.T) {
	field := quantity.Field{Separator: ";", Columns: 3, Column: 1, Unit: "kPa", Comma: true, StatusAt: &quantity.Place{Column: 2}, Fine: []string{"0"}, OverStatus: []string{"7"},
		Begins: "#", Check: quantity.Check{Name: "crc-16/modbus", Mark: "*"}}
	s := scpi.Settings{Identify: "ID", Identity: "gauge 7", Within: within, Read: "P", Zero: "Z", Acknowledged: "OK", Field: field}
	answer := func(number string, status int) []byte {
		text := fmt.Sprintf("P;%s;%d", number, status)
		return fmt.Appendf(nil, "#%s*%04X\r", text, crc([]byte(text)))
	}
	f := instrumenttest.Family{
		Line:  line.Settings{Terminator: "\r"},
		New:   func(l *line.Line) (bench.Manometer, error) { return scpi.New(l, s), nil },
		Field: field, Read: "P\r", Who: "ID\r", Zero: "Z\r", Zeroed: []byte("OK\r"), Identity: s.Identity,
		Me: []byte("gauge 7\r"), Somebody: []byte("gauge 17\r"), Proved: true, Resolution: 0.01,
		Reading: func(x float64) []byte {
			return answer(strings.Replace(fmt.Sprintf("%.2f", x), ".", ",", 1), 0)
		},
		OverRange: answer("0,00", 7),
		Garbage:   [][]byte{answer("12.50", 0), answer("12,50", 3), []byte("#P;12,50;0*0000\r"), []byte("OK\r"), []byte("P;12,50;0\r"), answer("1,2,3", 0)},
	}
	instrumenttest.Run(t, f)
}

func TestModbus(t *testing.T) {
	s := modbus.Settings{Station: 17, Identify: "holding 100 text4", Identity: "GA-7", Within: within, Read: "input 0 float32", Unit: "mmHg", Zero: "holding 16 uint16 = 1"}
	field, err := s.Field()
	if err != nil {
		t.Fatal(err)
	}
	answer := func(bits uint32) []byte {
		return sealed(append([]byte{17, 4, 4}, binary.BigEndian.AppendUint32(nil, bits)...)...)
	}
	zero := sealed(17, 6, 0, 16, 0, 1)
	instrumenttest.Run(t, instrumenttest.Family{
		Line:  modbus.LineSettings("", 9600),
		New:   func(l *line.Line) (bench.Manometer, error) { return modbus.New(l, s) },
		Field: field, Read: string(sealed(17, 4, 0, 0, 0, 2)), Who: string(sealed(17, 3, 0, 100, 0, 2)), Zero: string(zero), Zeroed: zero, Identity: "GA-7",
		Me: sealed(17, 3, 4, 'G', 'A', '-', '7'), Somebody: sealed(17, 3, 4, 'G', 'A', '-', '8'), Proved: true, Resolution: 0.001,
		Reading: func(x float64) []byte { return answer(math.Float32bits(float32(x))) },
		Garbage: [][]byte{answer(0x7fc00000), sealed(18, 4, 4, 0, 0, 0, 0), sealed(17, 3, 4, 0, 0, 0, 0), sealed(17, 4, 2, 0, 0), {17, 4, 4, 0, 0, 0, 0, 0, 0}, {0xff}, {0, 0, 0, 0, 0, 0, 0, 0}},
	})
}

func TestLinesRunning(t *testing.T) {
	field := quantity.Field{Width: 8, Length: 16, Unit: "mmHg", UnitInText: true, Check: quantity.Check{Name: "sum8", Mark: " "}}
	sent := func(text string) []byte {
		var sum byte
		for i := range len(text) {
			sum += text[i]
		}
		return fmt.Appendf(nil, "%s %02X\r\n", text, sum)
	}
	instrumenttest.Run(t, instrumenttest.Family{
		New: func(l *line.Line) (bench.Manometer, error) {
			stream, err := lines.New(l, lines.Settings{Field: field})
			return running.New(l, stream, running.Settings{Zero: "Z", Within: within}), err
		},
		Field: field, Zero: "Z\n", Proved: true, Resolution: 0.01,
		Reading:   func(x float64) []byte { return sent(fmt.Sprintf("%+08.2f mmHg", x)) },
		OverRange: sent("      OL mmHg"), OtherUnit: sent("+0012.50 kPa "),
		Garbage: [][]byte{[]byte("\r\n+0012.50 mmHg 00\r\n"), []byte(strings.Repeat("7", 400) + "\r\n"), []byte("+0012\n.50 mmHg A4\r\n"), []byte("\x00\xff\r\n")},
	})
}

func TestFrames(t *testing.T) {
	frame := quantity.Frame{Length: 7, Sync: "A55A", Number: quantity.Layout{Type: "int24", At: 2}, Scale: 0.01, Over: []int64{8388607, -8388608}, Check: "crc-16/modbus", CheckAt: 5, CheckLittle: true}
	field := quantity.Field{Unit: "mmHg", Frame: frame}
	sent := func(n int32) []byte { return sealed(0xA5, 0x5A, byte(n>>16), byte(n>>8), byte(n)) }
	instrumenttest.Run(t, instrumenttest.Family{
		New: func(l *line.Line) (bench.Manometer, error) {
			stream, err := frames.NewPort(l).Channel(frames.Settings{Field: field})
			return running.New(l, stream, running.Settings{Within: within}), err
		},
		Field: field, Proved: true, Resolution: 0.01,
		Reading:   func(x float64) []byte { return sent(int32(math.Round(x * 100))) },
		OverRange: sent(8388607),
		Garbage:   [][]byte{{0xA5}, {0xA5, 0x5A, 0, 0, 0, 0, 0}, []byte("+12.50\r\n"), make([]byte, 300)},
	})
}

package checksum

import (
	"encoding/csv"
	"hash/crc32"
	"math/rand/v2"
	"os"
	"strconv"
	"strings"
	"testing"
)

// Every algorithm of the published catalogue is carried, with its parameters,
// and gives the published check value of "123456789".
func TestCatalogue(t *testing.T) {
	file, err := os.Open("../../testdata/sources/crc-catalogue/crc-catalogue.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil || len(rows) != 64 || strings.Join(rows[0], ",") != "name,width,poly,init,reflected,xorout,check" {
		t.Fatal(len(rows), err)
	}
	hex := func(s string) uint32 {
		x, err := strconv.ParseUint(s, 16, 32)
		if err != nil {
			t.Fatal(err)
		}
		return uint32(x)
	}
	carried := catalogue()
	if len(carried) != len(rows)-1 || len(Names()) != len(carried)+3 {
		t.Fatalf("%d carried, %d published", len(carried), len(rows)-1)
	}
	for i, row := range rows[1:] {
		want := parameters{strings.ToLower(row[0]), int(hex(row[1])), hex(row[2]), hex(row[3]), row[4] == "true", hex(row[5])}
		want.bits, _ = strconv.Atoi(row[1])
		if carried[i] != want {
			t.Errorf("%+v carried, %+v published", carried[i], want)
		}
		a, ok := Named(row[0])
		if !ok || a.Name() != want.name || a.Size()*8 != want.bits {
			t.Fatalf("%s: %v", row[0], a)
		}
		check := []byte("123456789")
		for _, got := range []uint32{a.Of(check), a.OfText("123456789"), a.Fixed(9).Of(check)} {
			if got != hex(row[6]) {
				t.Errorf("%s: %x, published %s", row[0], got, row[6])
			}
		}
	}
}

// Other names lead to entries of the catalogue; what is not there is refused.
func TestNames(t *testing.T) {
	for other, name := range map[string]string{
		"CRC-16/CCITT-FALSE": "crc-16/ibm-3740", "crc-16/x-25": "crc-16/ibm-sdlc", "crc-32": "crc-32/iso-hdlc", "crc-8": "crc-8/smbus",
		"modbus": "crc-16/modbus", "crc-16/ccitt": "crc-16/kermit", "crc-32c": "crc-32/iscsi", "crc-16/buypass": "crc-16/umts",
		"crc-16": "crc-16/arc", "crc-32/posix": "crc-32/cksum", "crc-8/maxim": "crc-8/maxim-dow", "crc-16/maxim": "crc-16/maxim-dow", "xmodem": "crc-16/xmodem",
	} {
		if a, ok := Named(other); !ok || a.Name() != name {
			t.Errorf("%s is %v, not %s", other, a, name)
		}
	}
	for _, name := range []string{"", "crc-16/modbuss", "sum16", "crc"} {
		if _, ok := Named(name); ok {
			t.Errorf("%q is known", name)
		}
	}
}

// Sums by hand arithmetic: 1+2+250+7 = 260 = 4 mod 256, and 256-4 = 252;
// 1^2^250^7 = 254.
func TestSums(t *testing.T) {
	data := []byte{1, 2, 250, 7}
	for name, want := range map[string]uint32{"sum8": 4, "lrc8": 252, "xor8": 254} {
		a, _ := Named(name)
		if got := a.Of(data); got != want || a.Fixed(4).Of(data) != want || a.Size() != 1 {
			t.Errorf("%s: %d, want %d", name, got, want)
		}
	}
}

// Against the standard library's own CRC-32, and Fixed against Of, over random
// messages of every length.
func TestRandom(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	iso, _ := Named("crc-32/iso-hdlc")
	iscsi, _ := Named("crc-32/iscsi")
	for _, name := range Names() {
		a, _ := Named(name)
		for n := range 40 {
			data := make([]byte, n)
			for i := range data {
				data[i] = byte(r.Uint32())
			}
			if a.Fixed(n).Of(data) != a.Of(data) || a.OfText(string(data)) != a.Of(data) {
				t.Fatalf("%s of %x", name, data)
			}
			if iso.Of(data) != crc32.ChecksumIEEE(data) || iscsi.Of(data) != crc32.Checksum(data, crc32.MakeTable(crc32.Castagnoli)) {
				t.Fatalf("crc-32 of %x", data)
			}
		}
	}
}

// One byte changed changes every check value: all places, all 255 changes.
func TestOneByte(t *testing.T) {
	message := []byte{0xA5, 0x10, 0x20, 0x30, 0x40}
	for _, name := range Names() {
		a, _ := Named(name)
		want, f := a.Of(message), a.Fixed(len(message))
		for i := range message {
			for change := 1; change < 256; change++ {
				message[i] ^= byte(change)
				if a.Of(message) == want || f.Of(message) == want {
					t.Fatalf("%s does not see byte %d changed by %02x", name, i, change)
				}
				message[i] ^= byte(change)
			}
		}
	}
}

func BenchmarkFixed(b *testing.B) {
	a, _ := Named("crc-16/modbus")
	f, data := a.Fixed(5), []byte{1, 2, 3, 4, 5}
	for b.Loop() {
		data[0] = byte(f.Of(data))
	}
}

func BenchmarkLoop(b *testing.B) {
	a, _ := Named("crc-16/modbus")
	data := []byte{1, 2, 3, 4, 5}
	for b.Loop() {
		data[0] = byte(a.Of(data))
	}
}

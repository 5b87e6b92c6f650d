package frames

import (
	"math/rand/v2"
	"os"
	"slices"
	"testing"

	"kymobench/bench/line"
)

// mutations is how many damaged streams are tried of each kind of frame.
func mutations() int {
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		return 1_000_000
	}
	return 20_000
}

// mutant damages a stream by one byte changed, or else lost, doubled or put in.
func mutant(r *rand.Rand, data []byte, change bool) []byte {
	at := r.IntN(len(data))
	if change {
		data[at] ^= byte(1 + r.IntN(255))
		return data
	}
	switch r.IntN(3) {
	case 0:
		return slices.Delete(data, at, at+1)
	case 1:
		return slices.Insert(data, at, data[at])
	}
	return slices.Insert(data, at, byte(r.Uint32()))
}

// No change of one byte makes a number that was not sent, where a checksum is
// stated, and no byte lost, doubled or put in where it has 16 bits; one of
// eight bits may fit shifted bytes by chance, which is counted. Nothing panics
// anywhere.
func TestMutations(t *testing.T) {
	for _, k := range kinds() {
		r := rand.New(rand.NewPCG(5, 6))
		reader := must(t, k.frame)
		done, numbers, wrong := 0, 0, 0
		sent := map[float64]bool{}
		stream := make([]byte, 0, 100)
		for range mutations() {
			stream = stream[:0]
			clear(sent)
			count := uint8(r.Uint32())
			value := int32(r.IntN(1<<24) - 1<<23)
			for i := range 12 {
				if r.IntN(3) > 0 { // else it stands still
					value = int32(r.IntN(1<<24) - 1<<23)
				}
				f := k.make(value, count+uint8(i))
				x, err := reader.Number(f)
				if err != nil {
					t.Fatal(err)
				}
				sent[x] = true
				stream = append(stream, f...)
			}
			change := r.IntN(2) == 0
			data := mutant(r, stream, change)
			damaged := slices.Clone(data)
			whole := func(frames []byte, _ line.Instant) {
				for f := range slices.Chunk(frames, reader.Length()) {
					numbers++
					if x, err := reader.Number(f); err == nil && !sent[x] {
						wrong++
						if change && reader.CheckBits() > 0 || reader.CheckBits() >= 16 {
							t.Errorf("%s: % X from % X", k.name, f, damaged)
						}
					}
				}
			}
			c := newCutter(reader, whole, func([]byte, line.Instant) {})
			for size := 1 + r.IntN(40); len(data) > 0; data = data[min(size, len(data)):] {
				c.take(data[:min(size, len(data))], 0)
			}
			done++
		}
		if done != mutations() || numbers < done {
			t.Errorf("%s: %d streams, %d numbers", k.name, done, numbers)
		}
		t.Logf("%s: %d damaged streams, %d numbers, %d wrong", k.name, done, numbers, wrong)
	}
}

// Whatever comes: no panic, memory stays bounded, and every frame handed over
// is whole.
func FuzzCut(f *testing.F) {
	for _, k := range kinds() {
		f.Add(stream(k, 10), uint8(3))
	}
	f.Fuzz(func(t *testing.T, data []byte, size uint8) {
		for _, k := range kinds() {
			reader := must(t, k.frame)
			c := newCutter(reader, func(frames []byte, _ line.Instant) {
				for f := range slices.Chunk(frames, reader.Length()) {
					if !reader.Whole(f) {
						t.Fatalf("% X", f)
					}
				}
			}, func(f []byte, _ line.Instant) {
				if len(f) != reader.Length() {
					t.Fatalf("% X", f)
				}
			})
			for _, piece := range pieces(data, 1+int(size)) {
				c.take(piece, 0)
				if len(c.part) > (c.need+c.ahead+2)*reader.Length()+int(size) {
					t.Fatalf("%d bytes are kept", len(c.part))
				}
			}
		}
	})
}

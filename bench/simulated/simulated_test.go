package simulated

import (
	"bytes"
	"testing"
)

func BenchmarkRun(b *testing.B) {
	for i := range b.N {
		s := start(b, Settings{Seed: uint64(i)})
		s.usual()
	}
}

func TestSameSeedSameBytes(t *testing.T) {
	for _, condition := range []string{Good, AirBubble} {
		settings := Settings{Seed: 7, Condition: condition}
		one, two := start(t, settings), start(t, settings)
		one.usual()
		two.usual()
		t.Logf("%v virtual", one.now)
		for _, role := range Roles() {
			if !bytes.Equal(one.out[role], two.out[role]) {
				t.Errorf("%s: %s differs between two runs of one seed", condition, role)
			}
		}
		if !bytes.Equal(one.b.BenchFile(nil), two.b.BenchFile(nil)) {
			t.Errorf("%s: bench files differ", condition)
		}
	}
}

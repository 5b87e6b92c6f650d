package line

import (
	"bytes"
	"reflect"
	"strings"
	"testing"
)

func frames(f *Framer, parts ...string) (got []string) {
	for _, p := range parts {
		_ = f.Take([]byte(p), func(b []byte) error { got = append(got, string(b)); return nil })
	}
	return got
}

func TestFramer(t *testing.T) {
	for _, c := range []struct {
		in   []string
		want []string
	}{
		{[]string{"a\nb\r\nc\r"}, []string{"a", "b", "c"}},
		{[]string{"1", "2\r", "\n3\n"}, []string{"12", "3"}},
		{[]string{"\n\n"}, nil},
		{[]string{strings.Repeat("x", 256) + "\n"}, []string{strings.Repeat("x", 256)}},
		{[]string{strings.Repeat("x", 257) + "\nok\n"}, []string{"ok"}},
		{[]string{strings.Repeat("x", 200), strings.Repeat("x", 200), "y\nok\n"}, []string{"ok"}},
	} {
		if got := frames(&Framer{}, c.in...); !reflect.DeepEqual(got, c.want) {
			t.Errorf("%q: %q, want %q", c.in, got, c.want)
		}
	}
}

// However the bytes are split over reads, the frames are the same, and none
// holds a terminator or more than LongestLine bytes.
func FuzzFramer(f *testing.F) {
	f.Add([]byte("a\r\nbb\n\nc"), 2)
	f.Fuzz(func(t *testing.T, data []byte, at int) {
		if at < 0 || at > len(data) {
			return
		}
		whole := frames(&Framer{}, string(data))
		split := frames(&Framer{}, string(data[:at]), string(data[at:]))
		if !reflect.DeepEqual(whole, split) {
			t.Fatalf("%q and %q", whole, split)
		}
		for _, s := range whole {
			if len(s) > LongestLine || bytes.ContainsAny([]byte(s), "\r\n") {
				t.Fatalf("frame %q", s)
			}
		}
	})
}

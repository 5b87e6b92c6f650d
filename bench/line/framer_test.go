package line

import (
	"bytes"
	"reflect"
	"strings"
	"testing"
)

func cut(f *framer, parts ...string) (got []string) {
	for _, p := range parts {
		f.take([]byte(p), func(b []byte, long bool) {
			if long {
				b = []byte("(long)")
			}
			got = append(got, string(b))
		})
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
		{[]string{strings.Repeat("x", 257) + "\nok\n"}, []string{"(long)", "ok"}},
		{[]string{strings.Repeat("x", 200), strings.Repeat("x", 200), "y\nok\n"}, []string{"(long)", "ok"}},
		{[]string{strings.Repeat("x", 200), strings.Repeat("x", 56) + "\nok\n"}, []string{strings.Repeat("x", 256), "ok"}},
	} {
		if got := cut(&framer{cap: 256}, c.in...); !reflect.DeepEqual(got, c.want) {
			t.Errorf("%q: %q, want %q", c.in, got, c.want)
		}
	}
	f := &framer{cap: 256}
	f.lose()
	if got := cut(f, "00.02", "\r\n+1.00\r\n"); !reflect.DeepEqual(got, []string{"+1.00"}) {
		t.Errorf("a line without its beginning: %q", got)
	}
	f.take([]byte("half"), func([]byte, bool) {})
	f.reset()
	if got := cut(f, "whole\n"); !reflect.DeepEqual(got, []string{"whole"}) {
		t.Errorf("after a reset: %q", got)
	}
}

// However the bytes are split over reads, the lines are the same: those that
// strings.FieldsFunc finds, which knows nothing of the framer, up to the last
// terminator.
func FuzzFramer(f *testing.F) {
	f.Add([]byte("a\r\nbb\n\nc"), 2)
	f.Add([]byte(strings.Repeat("x", 20)+"\nshort\r"), 17)
	f.Fuzz(func(t *testing.T, data []byte, at int) {
		if at < 0 || at > len(data) {
			return
		}
		const limit = 16
		var want []string
		for _, s := range strings.FieldsFunc(string(data[:1+bytes.LastIndexAny(data, "\r\n")]), func(r rune) bool { return r == '\r' || r == '\n' }) {
			if len(s) > limit {
				s = "(long)"
			}
			want = append(want, s)
		}
		if got := cut(&framer{cap: limit}, string(data)); !reflect.DeepEqual(got, want) {
			t.Fatalf("%q, want %q", got, want)
		}
		if got := cut(&framer{cap: limit}, string(data[:at]), string(data[at:])); !reflect.DeepEqual(got, want) {
			t.Fatalf("in two pieces: %q, want %q", got, want)
		}
	})
}

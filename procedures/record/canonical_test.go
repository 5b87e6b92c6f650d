package record

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"strings"
	"testing"
)

// TestCanonicalAgainstEncodingJSON holds our canonical form against
// encoding/json (Go's own, without HTML escaping), which writes the payloads.
func TestCanonicalAgainstEncodingJSON(t *testing.T) {
	for _, v := range []any{
		0.0, math.Copysign(0, -1), 1.0, 0.1, 1e20, 1e21, 1e-6, 9.999e-7, 1e-7, -1e-10, 5e-324, 1.7976931348623157e308, 123456789012345680000.0,
		int64(-1 << 63), uint64(1<<64 - 1), float32(0.1), float32(3.4e38), float32(1e-7), "", "\x00\x1f\x7f\"\\/\b\f\n\r\t<>&", "\u2028\u2029\ufffd\U0001f4a7é",
		true, false, nil, []int{}, []any{1, "a", nil}, map[string]any{"b": 1, "a": map[string]any{}},
	} {
		var b bytes.Buffer
		e := json.NewEncoder(&b)
		e.SetEscapeHTML(false)
		if err := e.Encode(map[string]any{"x": v}); err != nil {
			t.Fatal(err)
		}
		want := bytes.TrimSuffix(b.Bytes(), []byte("\n"))
		got, err := canonicalObject(want)
		if err != nil || !bytes.Equal(got, want) {
			t.Errorf("%s: %s, %v", want, got, err)
		}
		// Escaped for HTML it is another text of the same value.
		escaped, err := json.Marshal(map[string]any{"x": v})
		if err != nil {
			t.Fatal(err)
		}
		if got, err := canonicalObject(escaped); err != nil || !bytes.Equal(got, want) {
			t.Errorf("%s: %s, %v", escaped, got, err)
		}
	}
	wide := map[string]int{}
	for i := range 100 {
		wide[fmt.Sprint("key ", i)] = i
	}
	payload, err := encodePayload(wide)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := canonicalObject(bytes.Replace(payload, []byte(`"key 99"`), []byte(`"key 98"`), 1)); err == nil {
		t.Error("a key twice among a hundred is taken")
	}
}

// FuzzRead: what is accepted is written again byte for byte, by our encoder
// and, payload by payload, by encoding/json; what is refused gives no Run.
// The input is taken as it is, and as bodies whose chain is made anew, because
// no mutation would ever find a hash.
func FuzzRead(f *testing.F) {
	hash := chainStart(testRun)
	var data []byte
	var bodies []string
	for i := 1; i <= 8; i++ {
		kind, payload := somePayload(i)
		body, err := encodeEvent(nil, &Event{Line: int64(i), Durable: int64(i / 2), Wall: testWall(), Kind: kind}, payload, testRun)
		if err != nil {
			f.Fatal(err)
		}
		hash = chainNext(hash, body)
		data = appendLine(data, body, hash)
		bodies = append(bodies, string(body))
	}
	f.Add(data)
	f.Add(data[:len(data)-9])
	f.Add([]byte(strings.Join(bodies, "\n")))
	f.Add([]byte(strings.Join(bodies, "\n") + "\n" + `{"n":9,"d":8,"t":0,"w":"2026-01-02T03:04:05.000000006Z","k":"closed","v":{"lines":9}}`))
	f.Fuzz(func(t *testing.T, data []byte) {
		checkRead(t, data)
		checkRead(t, rechain(testRun, strings.Split(string(data), "\n")))
	})
}

func checkRead(t *testing.T, data []byte) {
	run, err := Read(bytes.NewReader(data), Limit{Line: 1 << 14, Total: 1 << 17})
	if err != nil {
		if run.Events != nil || run.Torn != nil || run.Closed || run.Head != (Head{}) {
			t.Fatalf("%v, and a run", err)
		}
		return
	}
	if !bytes.Equal(append(encodeRun(run), run.Torn...), data) {
		t.Fatal("written again, the record differs")
	}
	if run.Closed && len(run.Torn) > 0 {
		t.Fatal("closed and torn")
	}
	for _, e := range run.Events {
		if again := reencode(t, e.Payload); !bytes.Equal(again, e.Payload) {
			t.Fatalf("line %d: encoding/json writes %s for %s", e.Line, again, e.Payload)
		}
	}
}

// reencode writes JSON again token by token with encoding/json, keys in order.
func reencode(t *testing.T, payload []byte) []byte {
	d := json.NewDecoder(bytes.NewReader(payload))
	d.UseNumber()
	var b bytes.Buffer
	put := func(v any) {
		e := json.NewEncoder(&b)
		e.SetEscapeHTML(false)
		if err := e.Encode(v); err != nil {
			t.Fatal(err)
		}
		b.Truncate(b.Len() - 1)
	}
	var value func()
	value = func() {
		token, err := d.Token()
		if err != nil {
			t.Fatal(err)
		}
		switch v := token.(type) {
		case json.Delim:
			b.WriteRune(rune(v))
			for first := true; d.More(); first = false {
				if !first {
					b.WriteByte(',')
				}
				if v == '{' {
					value()
					b.WriteByte(':')
				}
				value()
			}
			end, err := d.Token()
			if err != nil {
				t.Fatal(err)
			}
			b.WriteRune(rune(end.(json.Delim)))
		case json.Number:
			var whole int64
			var large uint64
			var f float64
			switch {
			case json.Unmarshal([]byte(v), &whole) == nil && v != "-0":
				put(whole)
			case json.Unmarshal([]byte(v), &large) == nil && v != "-0":
				put(large)
			case json.Unmarshal([]byte(v), &f) == nil:
				put(f)
			default:
				t.Fatalf("number %s", v)
			}
		default:
			put(v)
		}
	}
	value()
	return b.Bytes()
}

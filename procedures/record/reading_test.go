package record

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/iotest"
)

// lineEnds returns where each line of a good record begins, and its length.
func lineEnds(data []byte) []int {
	ends := []int{0}
	for i, ch := range data {
		if ch == '\n' {
			ends = append(ends, i+1)
		}
	}
	return ends
}

// TestEveryCut cuts a closed record at every byte: what is left is never
// closed, never wrong, and holds every line that lies before the cut.
func TestEveryCut(t *testing.T) {
	data, err := os.ReadFile(writeRecord(t, 60, true))
	if err != nil {
		t.Fatal(err)
	}
	whole, err := parse(data, Limit{}.orUsual())
	if err != nil {
		t.Fatal(err)
	}
	ends := lineEnds(data)
	cuts, clean, torn, nothing := 0, 0, 0, 0
	for cut := range data {
		cuts++
		lines := 0
		for lines+1 < len(ends) && ends[lines+1] <= cut {
			lines++
		}
		run, err := parse(data[:cut], Limit{}.orUsual())
		if lines == 0 {
			if !errors.Is(err, ErrNoOpening) {
				t.Fatalf("cut at %d: %v", cut, err)
			}
			nothing++
			continue
		}
		if err != nil || run.Closed || int(run.Head.Lines) != lines {
			t.Fatalf("cut at %d: %v, closed %v, %d lines, want %d", cut, err, run.Closed, run.Head.Lines, lines)
		}
		if !bytes.Equal(append(encodeRun(run), run.Torn...), data[:cut]) {
			t.Fatalf("cut at %d: good lines and tail are not the file", cut)
		}
		if run.Head == whole.Head {
			t.Fatalf("cut at %d: head is that of the whole record", cut)
		}
		if len(run.Torn) == 0 {
			clean++
		} else {
			torn++
		}
	}
	// 61 lines have 60 ends inside the file; the first line's own bytes give nothing.
	if cuts != len(data) || clean != 60 || nothing != ends[1] || torn != cuts-clean-nothing {
		t.Errorf("%d cuts of %d bytes: %d clean, %d torn, %d without an opening", cuts, len(data), clean, torn, nothing)
	}
	t.Logf("%d cuts: %d clean and open, %d torn, %d without an opening, 0 wrong", cuts, clean, torn, nothing)
}

// TestEveryDamage changes every byte of a closed record, in one of nine ways
// by turns and under KYMOBENCH_FULL=1 in all nine. The record is never read as closed and whole; damage before the closing line is
// always told as damage at its line, for the closing line knew all to be durable.
func TestEveryDamage(t *testing.T) {
	data, err := os.ReadFile(writeRecord(t, 60, true))
	if err != nil {
		t.Fatal(err)
	}
	ends := lineEnds(data)
	changes := []byte{1, 2, 4, 8, 16, 32, 64, 128, 255}
	each := 1
	if os.Getenv("KYMOBENCH_FULL") == "1" {
		each = len(changes)
	}
	damages, damaged, torn := 0, 0, 0
	broken := make([]byte, len(data))
	for at := range data {
		number := 1
		for ends[number] <= at {
			number++
		}
		for i := range each {
			copy(broken, data)
			broken[at] ^= changes[(at+i)%len(changes)]
			damages++
			run, err := parse(broken, Limit{}.orUsual())
			var chain *ChainError
			switch {
			case errors.As(err, &chain):
				damaged++
				if chain.Line != int64(number) || chain.Offset != int64(ends[number-1]) {
					t.Fatalf("byte %d of line %d: %v", at, number, err)
				}
			case err == nil && number == 61 && !run.Closed && run.Head.Lines == 60 && len(run.Torn) == len(data)-ends[60]:
				torn++
			default:
				t.Fatalf("byte %d of line %d: %v, %d lines, closed %v", at, number, err, run.Head.Lines, run.Closed)
			}
		}
	}
	last := len(data) - ends[60]
	if damages != each*len(data) || damaged != each*ends[60] || torn != damages-damaged {
		t.Errorf("%d damages of %d bytes: %d damaged, %d torn", damages, len(data), damaged, torn)
	}
	t.Logf("%d damages: %d damaged, %d look torn (all in the %d bytes of the closing line), 0 clean", damages, damaged, torn, last)
}

// TestDamageOfOpenRecord: of an open record's lines those not known to be
// durable may look torn, the others may not.
func TestDamageOfOpenRecord(t *testing.T) {
	data, err := os.ReadFile(writeRecord(t, 24, false))
	if err != nil {
		t.Fatal(err)
	}
	run, err := parse(data, Limit{}.orUsual())
	if err != nil {
		t.Fatal(err)
	}
	known := run.Events[23].Durable
	if known != 21 {
		t.Fatalf("last line knew %d", known)
	}
	ends := lineEnds(data)
	for at := range data {
		number := int64(1)
		for ends[number] <= at {
			number++
		}
		broken := bytes.Clone(data)
		broken[at] ^= 0x40
		run, err := parse(broken, Limit{}.orUsual())
		var chain *ChainError
		if number <= known && (!errors.As(err, &chain) || chain.Line != number) {
			t.Fatalf("byte %d of line %d: %v", at, number, err)
		}
		if number > known && (err != nil || run.Head.Lines != number-1 || len(run.Torn) != len(data)-ends[number-1]) {
			t.Fatalf("byte %d of line %d: %v, %d lines", at, number, err, run.Head.Lines)
		}
	}
}

// rechain makes the chain of a record anew after its bodies were changed.
func rechain(run string, bodies []string) []byte {
	hash := chainStart(run)
	var data []byte
	for _, b := range bodies {
		hash = chainNext(hash, []byte(b))
		data = appendLine(data, []byte(b), hash)
	}
	return data
}

func bodiesOf(t *testing.T, data []byte) []string {
	t.Helper()
	var bodies []string
	for _, l := range strings.Split(strings.TrimSuffix(string(data), "\n"), "\n") {
		body, _, ok := strings.Cut(l, "\t")
		if !ok {
			t.Fatal("line without a hash")
		}
		bodies = append(bodies, body)
	}
	return bodies
}

// TestChainMadeAnew states what the chain cannot do: a body edited and the
// chain made anew reads as a good record. Only its head is another, and that
// is what is signed.
func TestChainMadeAnew(t *testing.T) {
	data, err := os.ReadFile(writeRecord(t, 60, true))
	if err != nil {
		t.Fatal(err)
	}
	whole, err := parse(data, Limit{}.orUsual())
	if err != nil {
		t.Fatal(err)
	}
	bodies := bodiesOf(t, data)
	edited := 0
	for i, b := range bodies {
		changed := strings.Replace(b, `"role":"reference"`, `"role":"someone"`, 1)
		if changed == b {
			continue
		}
		edited++
		remade := append([]string{}, bodies...)
		remade[i] = changed
		run, err := parse(rechain(testRun, remade), Limit{}.orUsual())
		if err != nil || !run.Closed {
			t.Fatalf("line %d: %v", i+1, err)
		}
		if run.Head == whole.Head || run.Head.Lines != whole.Head.Lines {
			t.Fatalf("line %d: head %+v", i+1, run.Head)
		}
	}
	if edited < 30 {
		t.Errorf("only %d lines edited", edited)
	}
}

// TestChainedButNotOurs: a line that is chained cannot be what a crash left,
// so what is wrong with it is damage, at the end of the record too.
func TestChainedButNotOurs(t *testing.T) {
	data, err := os.ReadFile(writeRecord(t, 8, true))
	if err != nil {
		t.Fatal(err)
	}
	bodies := bodiesOf(t, data)
	n := len(bodies)
	if n != 9 {
		t.Fatalf("%d lines", n)
	}
	replace := func(i int, old, new string) func([]string) []string {
		return func(b []string) []string {
			r := strings.Replace(b[i-1], old, new, 1)
			if r == b[i-1] {
				t.Fatalf("line %d has no %s: %s", i, old, b[i-1])
			}
			b[i-1] = r
			return b
		}
	}
	for name, c := range map[string]struct {
		at     int64
		change func([]string) []string
	}{
		"repeated":             {4, func(b []string) []string { return append(append(append([]string{}, b[:3]...), b[2]), b[3:]...) }},
		"left out":             {3, func(b []string) []string { return append(append([]string{}, b[:2]...), b[3:]...) }},
		"swapped":              {2, func(b []string) []string { b[1], b[2] = b[2], b[1]; return b }},
		"after the end":        {10, func(b []string) []string { return append(b, b[7]) }},
		"closed twice":         {10, func(b []string) []string { return append(b, b[8]) }},
		"opened later":         {3, replace(3, `"k":"block"`, `"k":"opened"`)},
		"d too large":          {5, replace(5, `"d":1`, `"d":5`)},
		"d falls":              {8, replace(8, `"d":6`, `"d":5`)},
		"n with a zero":        {2, replace(2, `"n":2`, `"n":02`)},
		"n huge":               {2, replace(2, `"n":2`, `"n":99999999999999999999`)},
		"t before the start":   {2, replace(2, `"t":`, `"t":-`)},
		"wall in tenths":       {2, replace(2, `000006Z`, `6Z`)},
		"wall with an offset":  {2, replace(2, `006Z"`, `006+00:00"`)},
		"wall impossible":      {2, replace(2, `2026-01-02`, `2026-02-30`)},
		"kind in capitals":     {2, replace(2, `"k":"reading"`, `"k":"Reading"`)},
		"white space":          {2, replace(2, `"v":{`, `"v":{ `)},
		"white space before":   {2, replace(2, `"v":{`, `"v": {`)},
		"key before k":         {2, replace(2, `"k":`, `"x":1,"k":`)},
		"key after v":          {2, func(b []string) []string { b[1] = b[1][:len(b[1])-1] + `,"x":1}`; return b }},
		"key twice":            {2, replace(2, `"v":{`, `"v":{"role":"uut",`)},
		"float not shortest":   {2, replace(2, `"text":"3.40"`, `"text":3.40`)},
		"float with exponent":  {2, replace(2, `"text":"3.40"`, `"text":1e3`)},
		"float too large":      {2, replace(2, `"text":"3.40"`, `"text":1e999`)},
		"escape not needed":    {2, replace(2, `"text":"3.40"`, `"text":"3\u002e40"`)},
		"escape in capitals":   {7, replace(7, `\u0001`, `\u001F`)},
		"half a surrogate":     {2, replace(2, `"text":"3.40"`, `"text":"\ud800"`)},
		"not UTF-8":            {2, replace(2, `"text":"3.40"`, "\"text\":\"\xff\"")},
		"line separator":       {7, replace(7, `\u2028`, "\u2028")},
		"too deep":             {2, replace(2, `"text":"3.40"`, `"text":`+strings.Repeat("[", 40)+strings.Repeat("]", 40))},
		"not an object":        {2, func(b []string) []string { b[1] = b[1][:strings.Index(b[1], `"v":`)] + `"v":[]}`; return b }},
		"two bodies":           {2, func(b []string) []string { b[1] += b[1]; return b }},
		"closing says less":    {9, replace(9, `"lines":9`, `"lines":8`)},
		"closing says more":    {9, replace(9, `"lines":9`, `"lines":9,"x":1`)},
		"closing says nothing": {9, replace(9, `"lines":9`, ``)},
	} {
		remade := rechain(testRun, c.change(append([]string{}, bodies...)))
		run, err := parse(remade, Limit{}.orUsual())
		var chain *ChainError
		if !errors.As(err, &chain) || chain.Line != c.at || run.Events != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
	// The same machinery with nothing changed, so that the table can fail.
	if run, err := parse(rechain(testRun, bodies), Limit{}.orUsual()); err != nil || !run.Closed {
		t.Errorf("unchanged: %v", err)
	}
	for _, other := range []string{"R-20260102-0008", "r-20260102-0007"} {
		if _, err := parse(rechain(other, bodies), Limit{}.orUsual()); err == nil {
			t.Errorf("chain started from %s is taken", other)
		}
	}
}

func TestReadLimits(t *testing.T) {
	data, err := os.ReadFile(writeRecord(t, 20, false))
	if err != nil {
		t.Fatal(err)
	}
	size := int64(len(data))
	if _, err := Read(bytes.NewReader(data), Limit{Total: size}); err != nil {
		t.Errorf("a record as long as the limit: %v", err)
	}
	_, err = Read(bytes.NewReader(data), Limit{Total: size - 1})
	var chain *ChainError
	if !errors.As(err, &chain) || chain.Line != 20 {
		t.Errorf("a byte longer than the limit: %v", err)
	}
	_, err = Read(strings.NewReader(strings.Repeat("a", 200)), Limit{Total: 100})
	if !errors.As(err, &chain) || chain.Line != 1 {
		t.Errorf("one long line: %v", err)
	}
	// Lines longer than the limit are not good; here later ones knew them.
	if _, err = Read(bytes.NewReader(data), Limit{Line: 300}); !errors.As(err, &chain) && !errors.Is(err, ErrNoOpening) {
		t.Errorf("lines longer than the limit: %v", err)
	}
	// An endless tail without a line's end is torn, whatever its length.
	run, err := Read(bytes.NewReader(append(bytes.Clone(data), make([]byte, 2*longestLine)...)), Limit{})
	if err != nil || len(run.Torn) != 2*longestLine || run.Head.Lines != 20 {
		t.Errorf("zeros after the record: %v, %d bytes torn", err, len(run.Torn))
	}
	broken := errors.New("cable fell out")
	if _, err := Read(iotest.ErrReader(broken), Limit{}); !errors.Is(err, broken) {
		t.Errorf("reader that fails: %v", err)
	}
}

func TestReadFileAndClosed(t *testing.T) {
	if _, err := ReadFile(t.TempDir()); err == nil {
		t.Error("a folder is read")
	}
	if _, err := ReadFile(filepath.Join(t.TempDir(), "none")); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("no file: %v", err)
	}
	path := writeRecord(t, 9, false)
	if _, err := ReadClosed(path); !errors.Is(err, ErrNotClosed) || errors.Is(err, ErrTorn) {
		t.Errorf("open record: %v", err)
	}
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(path, data[:len(data)-1], 0o600); err != nil {
		t.Fatal(err)
	}
	if run, err := ReadFile(path); err != nil || run.Head.Lines != 8 || run.TornWhy == "" {
		t.Errorf("torn record: %v", err)
	}
	if _, err := ReadClosed(path); !errors.Is(err, ErrTorn) || !errors.Is(err, ErrNotClosed) {
		t.Errorf("torn record: %v", err)
	}
	if err := os.WriteFile(path, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadClosed(path); !errors.Is(err, ErrNoOpening) {
		t.Errorf("empty record: %v", err)
	}
}

// TestCanonicalAgainstEncodingJSON holds our canonical form against
// encoding/json (Go's own, without HTML escaping), which writes the payloads.
func TestCanonicalAgainstEncodingJSON(t *testing.T) {
	for _, v := range []any{
		0.0, -0.0, 1.0, 0.1, 1e20, 1e21, 1e-6, 9.999e-7, 1e-7, -1e-10, 5e-324, 1.7976931348623157e308, 123456789012345680000.0,
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
		body, err := encodeEvent(nil, Event{Line: int64(i), Durable: int64(i / 2), Wall: testWall(), Kind: kind}, payload, testRun)
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

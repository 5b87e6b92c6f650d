package record

import (
	"bytes"
	"errors"
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
	for _, more := range []string{"x", "\n", "\x00", string(data)} {
		var chain *ChainError
		if _, err := parse(append(bytes.Clone(data), more...), Limit{}.orUsual()); !errors.As(err, &chain) || chain.Line != 10 {
			t.Errorf("%.9q after the end: %v", more, err)
		}
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

package sign

import (
	"bytes"
	"fmt"
	"maps"
	"slices"
)

// The PDF objects that a report is made of. Booleans, null, indirect lengths,
// comments and object streams do not occur, so they do not exist here.
type (
	name   string  // without the slash, decoded
	number string  // as written
	text   []byte  // a string, decoded
	ref    int     // of generation 0
	array  []value // of anything
	dict   map[name]value
	value  any // one of the above
)

// object is an indirect object; a stream if raw is not nil.
type object struct {
	value value
	raw   []byte // as stored, still compressed
}

// document is a whole file. objects[0] is unused.
type document struct {
	objects []object
	trailer dict
}

const (
	header = "%PDF-1.7\n%\xe2\xe3\xcf\xd3\n"
	// byteRangeWidth is the room for the four numbers with their brackets.
	byteRangeWidth = 48
)

// gapAt is the place of the signature's hex string in the file, brackets included.
type gapAt struct{ start, end int }

// write gives the one and only form of a document: keys sorted, one blank
// between values, strings in lower-case hex, objects in order of number. The
// reader writes again what it has read and compares every byte, so a second
// spelling of the same document cannot exist. It returns where the gap of the
// signature dictionary lies, if there is one.
func (d *document) write() ([]byte, gapAt) {
	size := 1024
	for _, o := range d.objects {
		size += len(o.raw) + 256
	}
	w := &writer{}
	w.Grow(size)
	w.WriteString(header)
	offsets := make([]int, len(d.objects))
	for n := 1; n < len(d.objects); n++ {
		offsets[n] = w.Len()
		fmt.Fprintf(w, "%d 0 obj\n", n)
		w.value(d.objects[n].value)
		if raw := d.objects[n].raw; raw != nil {
			w.WriteString("\nstream\n")
			w.Write(raw)
			w.WriteString("\nendstream")
		}
		w.WriteString("\nendobj\n")
	}
	at := w.Len()
	fmt.Fprintf(w, "xref\n0 %d\n0000000000 65535 f \n", len(d.objects))
	for _, offset := range offsets[1:] {
		fmt.Fprintf(w, "%010d 00000 n \n", offset)
	}
	w.WriteString("trailer\n")
	w.value(d.trailer)
	fmt.Fprintf(w, "\nstartxref\n%d\n%%%%EOF\n", at)
	return w.Bytes(), w.gap
}

type writer struct {
	bytes.Buffer
	gap gapAt
}

func (w *writer) value(v value) {
	switch v := v.(type) {
	case name:
		w.name(v)
	case number:
		w.WriteString(string(v))
	case text:
		fmt.Fprintf(w, "<%x>", []byte(v))
	case ref:
		fmt.Fprintf(w, "%d 0 R", int(v))
	case array:
		w.WriteByte('[')
		for i, member := range v {
			if i > 0 {
				w.WriteByte(' ')
			}
			w.value(member)
		}
		w.WriteByte(']')
	case dict:
		w.dict(v)
	}
}

func (w *writer) dict(d dict) {
	signature := d["Type"] == name("Sig")
	w.WriteString("<<")
	for i, key := range slices.Sorted(maps.Keys(d)) {
		if i > 0 {
			w.WriteByte(' ')
		}
		w.name(key)
		w.WriteByte(' ')
		start := w.Len()
		w.value(d[key])
		switch {
		case signature && key == "Contents":
			w.gap = gapAt{start, w.Len()}
		case signature && key == "ByteRange":
			// Padded with blanks, for its numbers are known only afterwards.
			for w.Len() < start+byteRangeWidth {
				w.WriteByte(' ')
			}
		}
	}
	w.WriteString(">>")
}

func (w *writer) name(n name) {
	w.WriteByte('/')
	for i := 0; i < len(n); i++ {
		if c := n[i]; regular(c) && c != '#' {
			w.WriteByte(c)
		} else {
			fmt.Fprintf(w, "#%02X", c)
		}
	}
}

// regular characters stand for themselves in names. Source: ISO 32000-1, 7.2.2 and 7.3.5.
func regular(c byte) bool {
	return c > ' ' && c < 0x7f && !bytes.ContainsRune([]byte("()<>[]{}/%"), rune(c))
}

// order lists the numbers of the objects in the order of their first mention,
// breadth first from the trailer. Objects never mentioned are not in it.
func (d *document) order() []int {
	var found []int
	seen := make([]bool, len(d.objects))
	look := func(v value) {
		references(v, func(n ref) {
			if n > 0 && int(n) < len(seen) && !seen[n] {
				seen[n] = true
				found = append(found, int(n))
			}
		})
	}
	look(d.trailer)
	for i := 0; i < len(found); i++ {
		look(d.objects[found[i]].value)
	}
	return found
}

// renumbered gives the document with its objects in that order, and without
// those that nothing mentions.
func (d *document) renumbered() *document {
	order := d.order()
	numbers := make(map[ref]ref, len(order))
	for i, old := range order {
		numbers[ref(old)] = ref(i + 1)
	}
	out := &document{objects: make([]object, 1, len(order)+1)}
	for _, old := range order {
		o := d.objects[old]
		out.objects = append(out.objects, object{value: replaced(o.value, numbers), raw: o.raw})
	}
	out.trailer = replaced(d.trailer, numbers).(dict)
	out.trailer["Size"] = number(fmt.Sprint(len(out.objects)))
	return out
}

func references(v value, visit func(ref)) {
	switch v := v.(type) {
	case ref:
		visit(v)
	case array:
		for _, member := range v {
			references(member, visit)
		}
	case dict:
		for _, key := range slices.Sorted(maps.Keys(v)) {
			references(v[key], visit)
		}
	}
}

func replaced(v value, numbers map[ref]ref) value {
	switch v := v.(type) {
	case ref:
		return numbers[v]
	case array:
		out := make(array, len(v))
		for i, member := range v {
			out[i] = replaced(member, numbers)
		}
		return out
	case dict:
		out := make(dict, len(v))
		for key, member := range v {
			out[key] = replaced(member, numbers)
		}
		return out
	}
	return v
}

package tomlfile

import (
	"bytes"
	"errors"
	"fmt"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2/unstable"
)

// kind is what a value is, in the words used for it.
type kind string

const (
	kindTable   kind = "a table"
	kindList    kind = "a list"
	kindText    kind = "text"
	kindTruth   kind = "true or false"
	kindWhole   kind = "a whole number"
	kindNumber  kind = "a number"
	kindMoment  kind = "a date or time"
	kindUnknown kind = "something else"
)

// node is one table, list or value of the file with its place.
type node struct {
	kind  kind
	key   int // offset of its key; -1 in a list, and for the file itself
	value int // offset of its value; of its name for a table under a header
	text  string
	keys  []string // of a table, in the order of the file
	table map[string]*node
	items []*node // of a list
	named bool    // defined whole: a table by its header or in line, a list by its brackets
}

func newTable(key, value int) *node {
	return &node{kind: kindTable, key: key, value: value, table: map[string]*node{}}
}

func (n *node) put(key string, child *node) {
	n.keys = append(n.keys, key)
	n.table[key] = child
}

// index builds the tree of places. It refuses what it cannot make sense of;
// the finer points of which table may be extended where are the decoder's.
func (d *Document) index() error {
	d.root = newTable(-1, 0)
	current, depth := d.root, 0
	var p unstable.Parser
	p.Reset(d.data)
	for p.NextExpression() {
		e := p.Expression()
		var err error
		switch e.Kind {
		case unstable.Table, unstable.ArrayTable:
			current, depth, err = d.header(e)
		case unstable.KeyValue:
			err = d.keyValue(&p, current, e, depth)
		}
		if err != nil {
			return err
		}
	}
	var syntax *unstable.ParserError
	switch err := p.Error(); {
	case errors.As(err, &syntax):
		offset := int(p.Range(syntax.Highlight).Offset)
		return d.errorAt(offset, plain(syntax.Message), d.syntaxHint(offset, syntax.Message))
	case err != nil:
		return &Error{File: d.name, Text: "not readable as TOML"}
	}
	return nil
}

// header enters the table of [a.b] or appends one to the list of [[a.b]].
func (d *Document) header(e *unstable.Node) (*node, int, error) {
	at, depth := d.root, 0
	for it := e.Key(); it.Next(); {
		part := it.Node()
		key, offset := string(part.Data), int(part.Raw.Offset)
		if depth++; depth > DeepestNesting {
			return nil, 0, d.tooDeep(offset)
		}
		child, there := at.table[key]
		last := it.IsLast()
		if !there {
			child = newTable(offset, offset)
			if last && e.Kind == unstable.ArrayTable {
				child = &node{kind: kindList, key: offset, value: offset}
			}
			at.put(key, child)
		}
		switch {
		case last && e.Kind == unstable.ArrayTable:
			if child.kind != kindList || child.named {
				return nil, 0, d.standsTwice(child, key, offset)
			}
			item := newTable(offset, offset)
			child.items = append(child.items, item)
			return item, depth + 1, nil
		case child.kind == kindList && !last && len(child.items) > 0:
			child = child.items[len(child.items)-1]
		}
		if child.kind != kindTable || last && child.named {
			return nil, 0, d.standsTwice(child, key, offset)
		}
		child.named = child.named || last
		at = child
	}
	return at, depth, nil
}

// keyValue puts a.b = value into the table.
func (d *Document) keyValue(p *unstable.Parser, at *node, e *unstable.Node, depth int) error {
	end := 0
	for it := e.Key(); it.Next(); {
		part := it.Node()
		key, offset := string(part.Data), int(part.Raw.Offset)
		end = offset + int(part.Raw.Length)
		if depth++; depth > DeepestNesting {
			return d.tooDeep(offset)
		}
		child, there := at.table[key]
		if !it.IsLast() {
			if !there {
				child = newTable(offset, offset)
				at.put(key, child)
			}
			if child.kind != kindTable {
				return d.standsTwice(child, key, offset)
			}
			at = child
			continue
		}
		if there {
			return d.standsTwice(child, key, offset)
		}
		// A list has no place of its own in the parser's tree; every value
		// begins after the equals sign.
		begin := end + bytes.IndexByte(d.data[end:], '=') + 1
		begin += len(d.data[begin:]) - len(bytes.TrimLeft(d.data[begin:], " \t"))
		value, err := d.value(p, e.Value(), begin, depth)
		if err != nil {
			return err
		}
		value.key = offset
		at.put(key, value)
	}
	return nil
}

// value makes the node of a value that begins at an offset.
func (d *Document) value(p *unstable.Parser, e *unstable.Node, begin, depth int) (*node, error) {
	n := &node{kind: kindUnknown, key: -1, value: begin}
	switch e.Kind {
	case unstable.String:
		n.kind, n.text = kindText, string(e.Data)
		return n, d.checkText(n)
	case unstable.Bool:
		n.kind = kindTruth
	case unstable.Integer:
		n.kind, n.text = kindWhole, string(e.Data)
	case unstable.Float:
		n.kind, n.text = kindNumber, string(e.Data)
	case unstable.LocalDate, unstable.LocalTime, unstable.LocalDateTime, unstable.DateTime:
		n.kind = kindMoment
	case unstable.Array:
		n.kind, n.named = kindList, true
		if depth++; depth > DeepestNesting {
			return nil, d.tooDeep(begin)
		}
		for it := e.Children(); it.Next(); {
			at := begin // a list in a list takes the place of the outer one
			if raw := it.Node().Raw; raw.Length > 0 {
				at = int(raw.Offset)
			}
			item, err := d.value(p, it.Node(), at, depth)
			if err != nil {
				return nil, err
			}
			n.items = append(n.items, item)
		}
	case unstable.InlineTable:
		n.kind, n.table, n.named = kindTable, map[string]*node{}, true
		for it := e.Children(); it.Next(); {
			if err := d.keyValue(p, n, it.Node(), depth); err != nil {
				return nil, err
			}
		}
	}
	return n, nil
}

func (d *Document) tooDeep(offset int) *Error {
	return d.errorAt(offset, fmt.Sprintf("more than %d tables and lists inside each other", DeepestNesting), "")
}

func (d *Document) standsTwice(first *node, key string, offset int) *Error {
	place := first.key
	if place < 0 {
		place = first.value
	}
	line, _ := d.position(place)
	hint := ""
	if first.kind == kindTable && first.named {
		hint = fmt.Sprintf("put all its keys under one [%s]", short(key))
	}
	return d.errorAt(offset, fmt.Sprintf("key %q stands twice, first on line %d", short(key), line), hint)
}

// find follows a path as far as it goes and tells whether that was all of it.
func (d *Document) find(path []any) (*node, bool) {
	n := d.root
	for _, step := range path {
		var child *node
		switch step := step.(type) {
		case string:
			child = n.table[step]
		case int:
			if step >= 0 && step < len(n.items) {
				child = n.items[step]
			}
		}
		if child == nil {
			return n, false
		}
		n = child
	}
	return n, true
}

// pathName writes a path as a header would: [reference.certificate]; an index
// is counted from one: [[limit]] number 2.
func pathName(path []any) string {
	var keys []string
	number := 0
	for _, step := range path {
		switch step := step.(type) {
		case string:
			keys = append(keys, step)
			number = 0
		case int:
			number = step + 1
		}
	}
	switch name := strings.Join(keys, "."); {
	case name == "":
		return ""
	case number > 0:
		return fmt.Sprintf("[[%s]] number %d", name, number)
	default:
		return "[" + name + "]"
	}
}

// lastKey is the last key of a path, whatever indices follow it.
func lastKey(path []any) string {
	for i := len(path) - 1; i >= 0; i-- {
		if key, ok := path[i].(string); ok {
			return key
		}
	}
	return ""
}

// position turns an offset into line and column, both from 1, the column in
// characters.
func (d *Document) position(offset int) (line, column int) {
	offset = min(max(offset, 0), len(d.data))
	before := d.data[:offset]
	start := bytes.LastIndexByte(before, '\n') + 1
	return bytes.Count(before, []byte{'\n'}) + 1, utf8.RuneCount(before[start:]) + 1
}

// offset turns the decoder's line and column, which counts bytes, into an offset.
func (d *Document) offset(line, column int) int {
	start := 0
	for ; line > 1; line-- {
		next := bytes.IndexByte(d.data[start:], '\n')
		if next < 0 {
			break
		}
		start += next + 1
	}
	return start + column - 1
}

func (d *Document) errorAt(offset int, text, hint string) *Error {
	line, column := d.position(offset)
	return &Error{File: d.name, Line: line, Column: column, Text: text, Hint: hint}
}

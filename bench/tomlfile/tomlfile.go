// Package tomlfile reads the files people write (procedures, bench files)
// strictly: what is not understood is refused, with row and column, in words
// that say what to do.
//
// It is not a general TOML reader: it knows text, whole numbers, numbers, true
// and false, lists and tables, and refuses dates, special numbers and every key
// that the caller's struct does not name. It knows nothing of units; a value
// with a unit is text to it.
//
// Order of use: Read fills a struct and returns the Document; the caller parses
// the texts and refuses what makes no sense with Document.Refuse, which finds
// the place of any key again.
package tomlfile

import (
	"bytes"
	"errors"
	"fmt"
	"strings"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2"
)

const (
	// LargestFile is the most bytes a file may have: 1 MiB. A real one has a
	// few kilobytes, and its whole text goes into every record.
	LargestFile = 1 << 20
	// DeepestNesting is the most tables and lists that may stand inside each other.
	DeepestNesting = 16
	// LongestIdentity is the most characters of a text that names something in
	// records and reports, where a line must hold it.
	LongestIdentity = 64
)

// Error is one refusal: where, what, and, when there is something to suggest,
// what to do about it.
type Error struct {
	File   string
	Line   int // from 1; 0 when the file as a whole is meant
	Column int // from 1, in characters
	Text   string
	Hint   string // "" for none; printed on a line of its own
}

// Error gives "file:line:column: text". The hint is left to the command.
func (e *Error) Error() string {
	if e.Line == 0 {
		return e.File + ": " + e.Text
	}
	return fmt.Sprintf("%s:%d:%d: %s", e.File, e.Line, e.Column, e.Text)
}

// Document is a file that was read, with the place of every key.
type Document struct {
	name string
	data []byte // without a byte order mark
	root *node
}

// Read decodes data strictly into the struct that into points to and returns
// the Document. Every error is an *Error. The struct's fields are string, bool,
// int, int64, float64, structs, pointers to these (nil when the key is absent)
// and slices, each with a toml tag; keys match it exactly, capitals too. The
// fields of an embedded struct count as the struct's own.
//
// A byte order mark, which some editors write, is skipped.
func Read(name string, data []byte, into any) (*Document, error) {
	if len(data) > LargestFile {
		return nil, &Error{File: name, Text: fmt.Sprintf("the file has %d bytes, more than %d", len(data), LargestFile)}
	}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	d := &Document{name: name, data: data}
	if err := d.checkCharacters(); err != nil {
		return nil, err
	}
	if err := d.index(); err != nil {
		return nil, err
	}
	if err := d.checkAgainst(into); err != nil {
		return nil, err
	}
	// The checks above speak plainly; the decoder has the last word on what is
	// TOML, and refuses whatever they may have let through.
	err := toml.NewDecoder(bytes.NewReader(data)).DisallowUnknownFields().Decode(into)
	if err != nil {
		return nil, d.translate(err)
	}
	return d, nil
}

// translate turns an error of the decoder into one of ours.
func (d *Document) translate(err error) *Error {
	var decode *toml.DecodeError
	if errors.As(err, &decode) {
		line, column := decode.Position()
		return d.errorAt(d.offset(line, column), plain(strings.TrimPrefix(decode.Error(), "toml: ")), "")
	}
	var missing *toml.StrictMissingError
	if errors.As(err, &missing) && len(missing.Errors) > 0 {
		line, column := missing.Errors[0].Position()
		return d.errorAt(d.offset(line, column), "unknown key", "")
	}
	return &Error{File: d.name, Text: "not readable as TOML"}
}

// At returns the place of the value at a path of keys (string) and list
// indices (int, from 0). For a table it is the place of its name. Where the
// path ends early, because a key is absent, it is the place of the last table
// that is there; line 1, column 1 for the file itself.
func (d *Document) At(path ...any) (line, column int) {
	n, _ := d.find(path)
	return d.position(n.value)
}

// Has tells whether there is something at the path.
func (d *Document) Has(path ...any) bool {
	_, whole := d.find(path)
	return whole
}

// Keys returns the keys of the table at the path in the order of the file.
func (d *Document) Keys(path ...any) []string {
	n, whole := d.find(path)
	if !whole {
		return nil
	}
	return append([]string(nil), n.keys...)
}

// Refuse makes the error that refuses the value at the path; where that is
// missing, it points at the table it is missing in.
func (d *Document) Refuse(text, hint string, path ...any) *Error {
	n, _ := d.find(path)
	return d.errorAt(n.value, text, hint)
}

// RefuseKey is Refuse, pointing at the key instead of its value.
func (d *Document) RefuseKey(text, hint string, path ...any) *Error {
	n, whole := d.find(path)
	if !whole || n.key < 0 {
		return d.errorAt(n.value, text, hint)
	}
	return d.errorAt(n.key, text, hint)
}

// Missing makes the error for a key that has to be there; hint may give an
// example of its value.
func (d *Document) Missing(hint string, path ...any) *Error {
	if len(path) == 0 {
		return d.errorAt(0, "something is missing", hint)
	}
	table := path[:len(path)-1]
	where := "in the file"
	if name := pathName(table); name != "" {
		where = "in " + name
	}
	return d.Refuse(fmt.Sprintf("key %q is missing %s", fmt.Sprint(path[len(path)-1]), where), hint, table...)
}

// CheckText refuses the text at the path when it is empty, begins or ends with
// a blank, or has more than most characters. Absent or other values pass.
func (d *Document) CheckText(most int, path ...any) error {
	n, whole := d.find(path)
	if !whole || n.kind != kindText {
		return nil
	}
	name := lastKey(path)
	switch count := utf8.RuneCountInString(n.text); {
	case n.text == "":
		return d.Refuse(fmt.Sprintf("key %q is empty", name), "", path...)
	case strings.TrimSpace(n.text) != n.text:
		return d.Refuse(fmt.Sprintf("key %q begins or ends with a blank", name), "", path...)
	case count > most:
		return d.Refuse(fmt.Sprintf("key %q has %d characters, more than %d", name, count, most), "", path...)
	}
	return nil
}

// Package recorded turns CSV files from anywhere into the events that a run
// would have recorded, so that results can compute from them.
//
// It computes nothing itself. Order of use: Static or Step, then
// results.Compute on the events.
package recorded

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"unicode/utf8"

	"kymobench/bench/line"
	"kymobench/bench/quantity"
	"kymobench/procedures/record"
)

// FileError says where a file cannot be read.
type FileError struct {
	File   string
	Line   int // from 1; 0 when the file as a whole is meant
	Column int // in bytes, from 1
	Text   string
}

func (e *FileError) Error() string {
	if e.Line == 0 {
		return fmt.Sprintf("%s: %s", e.File, e.Text)
	}
	return fmt.Sprintf("%s:%d:%d: %s", e.File, e.Line, e.Column, e.Text)
}

// table is a CSV file with its header understood.
type table struct {
	file   string
	csv    *csv.Reader
	header []string
	row    []string
}

// open reads the header. A semicolon separates the columns when the header
// holds one and no comma.
func open(file string, r io.Reader) (*table, error) {
	data, err := io.ReadAll(r)
	if err != nil {
		return nil, fmt.Errorf("read %s: %w", file, err)
	}
	text := strings.TrimPrefix(string(data), "\ufeff")
	if !utf8.ValidString(text) {
		return nil, notUTF8(file, text)
	}
	t := &table{file: file, csv: csv.NewReader(strings.NewReader(text))}
	first, _, _ := strings.Cut(text, "\n")
	if strings.Contains(first, ";") && !strings.Contains(first, ",") {
		t.csv.Comma = ';'
	}
	t.csv.ReuseRecord = true
	head, err := t.csv.Read()
	if errors.Is(err, io.EOF) {
		return nil, &FileError{File: file, Text: "the file is empty"}
	}
	if err != nil {
		return nil, t.broken(err)
	}
	for i, name := range head {
		name = strings.TrimSpace(name)
		if slices.Contains(t.header, name) {
			return nil, t.refuse(i, fmt.Sprintf("a second column %q", name))
		}
		t.header = append(t.header, name)
	}
	return t, nil
}

// notUTF8 names the first byte that is not UTF-8.
func notUTF8(file, text string) error {
	line, column := 1, 1
	for i, r := range text {
		if r == utf8.RuneError {
			if _, size := utf8.DecodeRuneInString(text[i:]); size == 1 {
				break
			}
		}
		column += utf8.RuneLen(r)
		if r == '\n' {
			line, column = line+1, 1
		}
	}
	return &FileError{file, line, column, "the file is not text in UTF-8 from here on"}
}

// next reads a row; false at the end.
func (t *table) next() (bool, error) {
	row, err := t.csv.Read()
	if errors.Is(err, io.EOF) {
		return false, nil
	}
	if err != nil {
		return false, t.broken(err)
	}
	t.row = row
	return true, nil
}

func (t *table) broken(err error) error {
	var p *csv.ParseError
	if errors.As(err, &p) {
		text := p.Err.Error()
		if errors.Is(p.Err, csv.ErrFieldCount) {
			text = fmt.Sprintf("the row has not the %d columns of the header", len(t.header))
		}
		return &FileError{t.file, p.Line, p.Column, text}
	}
	return fmt.Errorf("read %s: %w", t.file, err)
}

// refuse names the place of a field of the present row.
func (t *table) refuse(column int, text string) error {
	line, at := t.csv.FieldPos(column)
	return &FileError{t.file, line, at, text}
}

// column finds "prefix_UNIT" whose unit is of one of the dimensions; -1 when
// there is none, an error when there are two.
func (t *table) column(prefix string, dimensions ...quantity.Dimension) (int, quantity.Unit, error) {
	found, unit := -1, quantity.Unit{}
	for i, name := range t.header {
		rest, ok := strings.CutPrefix(name, prefix+"_")
		if !ok {
			continue
		}
		u, ok := quantity.UnitNamed(rest)
		if !ok || !slices.Contains(dimensions, u.Dimension) {
			return -1, unit, t.refuse(i, fmt.Sprintf("%q: %q is no unit for this column", name, rest))
		}
		if found >= 0 {
			return -1, unit, t.refuse(i, fmt.Sprintf("a second column for %s beside %q", prefix, t.header[found]))
		}
		found, unit = i, u
	}
	return found, unit, nil
}

// number returns the text of a cell that is a plain decimal.
func (t *table) number(column int) (string, error) {
	text := strings.TrimSpace(t.row[column])
	if _, err := quantity.ParseDecimal(text); err != nil {
		return "", t.refuse(column, fmt.Sprintf("column %s: %v", t.header[column], err))
	}
	return strings.Clone(text), nil
}

// events collects what a record would hold.
type events struct {
	all []record.Event
	err error
}

func (e *events) add(at line.Instant, kind string, payload any) int64 {
	n := int64(len(e.all) + 1)
	event, err := record.NewEvent(n, at, kind, payload)
	if err != nil && e.err == nil {
		e.err = err
	}
	e.all = append(e.all, event)
	return n
}

// done returns the events, or the first error and none of them.
func (e *events) done() ([]record.Event, error) {
	if e.err != nil {
		return nil, e.err
	}
	return e.all, nil
}

// ignored reserves that columns were not understood.
func (e *events) ignored(t *table, used ...int) {
	var names []string
	for i, name := range t.header {
		if !slices.Contains(used, i) {
			names = append(names, name)
		}
	}
	if len(names) > 0 {
		e.add(0, record.KindReservation, record.Reservation{Code: "column_ignored", Text: "columns not used: " + strings.Join(names, ", ")})
	}
}

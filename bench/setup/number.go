package setup

import (
	"fmt"
	"strconv"
	"strings"

	"kymobench/bench/checksum"
	"kymobench/bench/quantity"
	"kymobench/bench/tomlfile"
)

// textField takes where a number stands in a line of text.
func (l *loader) textField(in *numberKeys, path ...any) quantity.Field {
	at := func(key string) []any { return to(path, key) }
	has := func(key string) bool { return l.doc.Has(at(key)...) }
	f := quantity.Field{Unit: in.Unit, Column: in.Column, Columns: in.Columns, Width: in.Width, UnitInText: in.UnitInText,
		Length: in.Length, Cut: has("number_at"), Start: in.NumberAt, Fine: in.StatusFine, OverStatus: in.StatusOver, Over: in.OverRange}
	f.Separator = l.onWire(at("separator")...)
	f.Prefix, f.Suffix = l.onWire(at("prefix")...), l.onWire(at("suffix")...)
	f.Begins, f.UnitText = l.onWire(at("begins")...), l.onWire(at("unit_text")...)
	l.demand(in.Width >= 0 && in.Width <= 32, "a number has 1 to 32 characters", "leave width out if it varies", at("width")...)
	l.columns(in, path...)
	if has("decimal") {
		f.Comma = tomlfile.TakeWord(l.doc, &l.err, []string{"point", "comma"}, at("decimal")...) == "comma"
		l.demand(!f.Comma || f.Separator != ",", "a comma can't part columns and decimals too", "", at("decimal")...)
	}
	if has("length") {
		l.demand(in.Length >= 1 && in.Length <= 256, "a line has 1 to 256 characters", "leave length out if it varies", at("length")...)
	}
	switch {
	case has("unit_column"):
		l.demand(f.Separator != "", "a column without a separator", `separator = ","`, at("unit_column")...)
		f.UnitAt = &quantity.Place{Column: in.UnitColumn}
	case has("unit_at"):
		l.demand(f.Cut, "the unit has a place and the number has none", "number_at = 0", at("unit_at")...)
		text := in.UnitText
		if text == "" {
			text = in.Unit
		}
		f.UnitAt = &quantity.Place{Start: in.UnitAt, Width: len(text)}
	}
	l.demand(f.UnitAt == nil || !in.UnitInText, "the unit has a place of its own and follows the number too", "leave one of them out", at("unit_in_text")...)
	l.demand(in.UnitText == "" || f.UnitAt != nil || in.UnitInText, "a spelling of a unit that stands nowhere", "unit_in_text = true", at("unit_text")...)
	l.status(in, &f, path...)
	for i, word := range in.OverRange {
		l.demand(word != "" && len(word) <= 64, "a word has 1 to 64 characters", "", append(at("over_range"), i)...)
	}
	l.lineCheck(in, &f, path...)
	if l.err == nil {
		if _, err := f.Parser(); err != nil {
			l.refuse(l.doc.Refuse(err.Error(), "", at("unit")...))
		}
	}
	return f
}

// columns refuses columns and places that contradict each other.
func (l *loader) columns(in *numberKeys, path ...any) {
	at := func(key string) []any { return to(path, key) }
	for _, c := range []struct {
		key string
		n   int
	}{{"column", in.Column}, {"unit_column", in.UnitColumn}, {"status_column", in.StatusColumn}} {
		l.demand(c.n >= 0 && c.n <= 64, "columns are counted from 0 to 64", "", at(c.key)...)
		l.demand(in.Columns == 0 || c.n < in.Columns, fmt.Sprintf("there are only %d columns, counted from 0", in.Columns), "", at(c.key)...)
	}
	l.demand(in.Column == 0 || in.Separator != "", "a column without a separator", `separator = ","`, at("column")...)
	if l.doc.Has(at("columns")...) {
		l.demand(in.Columns >= 1 && in.Columns <= 64, "a line has 1 to 64 columns", "", at("columns")...)
		l.demand(in.Separator != "", "columns without a separator", `separator = ","`, at("columns")...)
	}
	for _, c := range []struct {
		key string
		n   int
	}{{"number_at", in.NumberAt}, {"unit_at", in.UnitAt}, {"status_at", in.StatusAt}} {
		l.demand(c.n >= 0 && c.n <= 256, "a place is the number of characters before it, 0 to 256", "", at(c.key)...)
	}
	if l.doc.Has(at("number_at")...) {
		l.demand(in.Separator == "", "the number has a place and stands in a column too", "leave out separator or number_at", at("number_at")...)
		l.demand(in.Width > 0, "a place without a width", "width = 8", at("number_at")...)
	}
}

// status takes where a status stands and which are fine.
func (l *loader) status(in *numberKeys, f *quantity.Field, path ...any) {
	at := func(key string) []any { return to(path, key) }
	switch {
	case l.doc.Has(at("status_column")...):
		l.demand(f.Separator != "", "a column without a separator", `separator = ","`, at("status_column")...)
		f.StatusAt = &quantity.Place{Column: in.StatusColumn}
	case l.doc.Has(at("status_at")...):
		l.demand(f.Cut, "the status has a place and the number has none", "number_at = 0", at("status_at")...)
		l.demand(in.StatusWidth >= 1 && in.StatusWidth <= 32, "a status has 1 to 32 characters", "status_width = 1", at("status_width")...)
		f.StatusAt = &quantity.Place{Start: in.StatusAt, Width: in.StatusWidth}
	default:
		for _, key := range []string{"status_fine", "status_over", "status_width"} {
			l.demand(!l.doc.Has(at(key)...), key+" of a status that stands nowhere", "status_column = 1", at(key)...)
		}
		return
	}
	if l.err == nil && len(in.StatusFine) == 0 {
		l.refuse(l.doc.Missing(`status_fine = ["0"]: any other status refuses the reading`, at("status_fine")...))
	}
}

// lineCheck takes a checksum of a line. A changed byte may be one that ends a
// line: then it must show that a piece of a line is none.
func (l *loader) lineCheck(in *numberKeys, f *quantity.Field, path ...any) {
	at := func(key string) []any { return to(path, key) }
	if !l.doc.Has(at("checksum")...) {
		for _, key := range []string{"checksum_mark", "checksum_covers", "checksum_lower"} {
			l.demand(!l.doc.Has(at(key)...), key+" of a checksum that is not named", `checksum = "crc-16/modbus"`, at(key)...)
		}
		return
	}
	a := l.algorithm(at("checksum")...)
	f.Check = quantity.Check{Name: in.Checksum, Lower: in.ChecksumLower, Mark: l.onWire(at("checksum_mark")...)}
	for i, word := range in.ChecksumCovers {
		switch word {
		case "begins":
			f.Check.CoversBegins = true
			l.demand(f.Begins != "", "what a line begins with is not stated", `begins = "$"`, append(at("checksum_covers"), i)...)
		case "mark":
			f.Check.CoversMark = true
			l.demand(f.Check.Mark != "", "the mark is not stated", `checksum_mark = "*"`, append(at("checksum_covers"), i)...)
		default:
			l.refuse(l.doc.Refuse(fmt.Sprintf("%q is neither begins nor mark", word), "", append(at("checksum_covers"), i)...))
		}
	}
	if a == nil {
		return
	}
	if f.Length == 0 && f.Width > 0 && f.Separator == "" && !f.UnitInText {
		f.Length = len(f.Begins) + len(f.Prefix) + f.Width + len(f.Suffix) + len(f.Check.Mark) + 2*a.Size()
	}
	l.demand(f.Length > 0 || f.Begins != "" && f.Check.Mark != "",
		"a piece of a line could pass for a line: the checksum needs the line's length, or what every line begins with and the mark before the check value",
		"length = 14", at("checksum")...)
}

func (l *loader) algorithm(path ...any) *checksum.Algorithm {
	name := tomlfile.Take(l.doc, &l.err, func(s string) (string, error) { return s, nil }, path...)
	if l.err != nil {
		return nil
	}
	a, ok := checksum.Named(name)
	if !ok {
		l.refuse(l.doc.Refuse(fmt.Sprintf("%q is no checksum known here", name), tomlfile.DidYouMean(strings.ToLower(name), checksum.Names()), path...))
	}
	return a
}

// frameField takes where a number stands in a frame of bytes.
func (l *loader) frameField(in *numberKeys, path ...any) quantity.Field {
	at := func(key string) []any { return to(path, key) }
	f := quantity.Frame{Length: in.Length, Scale: in.Scale, Offset: in.Offset, CheckFrom: in.ChecksumFrom}
	l.needs(at("length"), `length = 7`)
	f.Sync = tomlfile.Take(l.doc, &l.err, hexadecimal, at("sync")...)
	f.End = tomlfile.TakeIf(l.doc, &l.err, hexadecimal, at("end")...)
	f.Number = tomlfile.Take(l.doc, &l.err, layout, at("number")...)
	if l.doc.Has(at("sequence")...) {
		p := tomlfile.Take(l.doc, &l.err, layout, at("sequence")...)
		f.Sequence = &p
	}
	if l.doc.Has(at("status")...) {
		p := tomlfile.Take(l.doc, &l.err, layout, at("status")...)
		f.Status, f.Fine = &p, l.wholes(in.StatusFine, at("status_fine")...)
	} else {
		l.demand(!l.doc.Has(at("status_fine")...), "status_fine of a status that stands nowhere", `status = "uint8 at 5"`, at("status_fine")...)
	}
	f.Over = l.wholes(in.OverRange, at("over_range")...)
	l.scale(in, path...)
	if l.doc.Has(at("checksum")...) {
		if a := l.algorithm(at("checksum")...); a != nil {
			f.Check = in.Checksum
			f.CheckAt = f.Length - len(f.End)/2 - a.Size()
		}
		if l.doc.Has(at("checksum_order")...) {
			f.CheckLittle = tomlfile.TakeWord(l.doc, &l.err, []string{"big-endian", "little-endian"}, at("checksum_order")...) == "little-endian"
		}
	} else {
		for _, key := range []string{"checksum_from", "checksum_order"} {
			l.demand(!l.doc.Has(at(key)...), key+" of a checksum that is not named", `checksum = "crc-16/modbus"`, at(key)...)
		}
	}
	if l.err == nil {
		l.framed(f, path...)
	}
	return quantity.Field{Unit: in.Unit, Frame: f}
}

// framed refuses a frame that contradicts itself.
func (l *loader) framed(f quantity.Frame, path ...any) {
	_, err := f.Reader()
	if err == nil {
		return
	}
	key := "number"
	if e, ok := err.(*quantity.FrameError); ok {
		key = map[string]string{"check": "checksum"}[e.Part]
		if key == "" {
			key = e.Part
		}
	}
	l.refuse(l.doc.Refuse(err.Error(), "", to(path, key)...))
}

// scale refuses a scale that makes all numbers one.
func (l *loader) scale(in *numberKeys, path ...any) {
	l.demand(in.Scale != 0 || !l.doc.Has(to(path, "scale")...), "a scale of 0 makes every number the same", "leave scale out if it is 1", to(path, "scale")...)
}

// wholes takes whole numbers, written as texts.
func (l *loader) wholes(texts []string, path ...any) []int64 {
	var out []int64
	for i, s := range texts {
		n, err := strconv.ParseInt(s, 10, 64)
		if err != nil {
			l.refuse(l.doc.Refuse(fmt.Sprintf("%q is no whole number", s), "", append(append([]any{}, path...), i)...))
		}
		out = append(out, n)
	}
	return out
}

// hexadecimal takes bytes such as "A5 5A".
func hexadecimal(s string) (string, error) {
	digits := strings.ToUpper(strings.ReplaceAll(s, " ", ""))
	if digits == "" || len(digits)%2 != 0 || strings.Trim(digits, "0123456789ABCDEF") != "" {
		return "", fmt.Errorf("%q is not one byte or more in hexadecimal digits, such as \"A5 5A\"", s)
	}
	return digits, nil
}

// layout takes a number's place in a frame: "int24 at 2", "uint16 little-endian
// at 5".
func layout(s string) (quantity.Layout, error) {
	bad := fmt.Errorf("%q is no place like \"int24 at 2\" or \"uint16 little-endian at 5\"", s)
	words := strings.Fields(s)
	if len(words) != 3 && len(words) != 4 || words[len(words)-2] != "at" {
		return quantity.Layout{}, bad
	}
	at, err := strconv.Atoi(words[len(words)-1])
	if err != nil {
		return quantity.Layout{}, bad
	}
	p := quantity.Layout{Type: words[0], At: at}
	if p.Size() == 0 {
		return p, fmt.Errorf("%q: %q is no type of number: they are %s", s, words[0], strings.Join(quantity.LayoutTypes(), ", "))
	}
	if len(words) == 4 {
		p.Order = words[1]
		if p.Order != "big-endian" && p.Order != "little-endian" {
			return p, fmt.Errorf("%q: %q is no order of bytes: big-endian or little-endian", s, words[1])
		}
	}
	return p, nil
}

// onWire takes a text that stands on the wire: "<STX>" and the like are the
// control characters of those names, which the file itself may not hold.
func (l *loader) onWire(path ...any) string {
	return tomlfile.TakeIf(l.doc, &l.err, controls, path...)
}

// controls puts control characters in the place of their names in ASCII.
func controls(s string) (string, error) {
	names := [...]string{"NUL", "SOH", "STX", "ETX", "EOT", "ENQ", "ACK", "BEL", "BS", "TAB", "LF", "VT", "FF", "CR", "SO", "SI", "DLE",
		"DC1", "DC2", "DC3", "DC4", "NAK", "SYN", "ETB", "CAN", "EM", "SUB", "ESC", "FS", "GS", "RS", "US"}
	if !strings.Contains(s, "<") {
		return s, nil
	}
	pairs := make([]string, 0, 2*len(names))
	for i, name := range names {
		if name == "LF" || name == "CR" {
			continue // they end lines and stand in none
		}
		pairs = append(pairs, "<"+name+">", string(rune(i)))
	}
	out := strings.NewReplacer(pairs...).Replace(s)
	for _, name := range []string{"<CR>", "<LF>"} {
		if strings.Contains(out, name) {
			return "", fmt.Errorf("%q: CR and LF end a line and stand in none", s)
		}
	}
	return out, nil
}

package sign

import (
	"bytes"
	"compress/zlib"
	"fmt"
	"io"
	"maps"
	"slices"
	"strconv"
	"strings"
)

// A shape says what a kind of object may hold: every entry has a rule, and an
// entry without one is refused. This is the positive list of everything that
// a report consists of; scripts, actions, links, layers, forms inside forms
// and whatever else PDF knows are refused by not being here.
type shape struct {
	entries  map[name]rule
	optional []name
	stream   bool
}

// rule checks one value; where says what it belongs to.
type rule func(w *walk, v value, where string) error

// walk goes through a document along the shapes.
type walk struct {
	d        *document
	shapes   map[string]shape
	kinds    map[ref]string // what each object was visited as
	unpacked map[ref][]byte // the content of compressed streams
	room     int            // bytes that may still be unpacked
}

const (
	mostStream   = 64 << 20  // one stream, unpacked
	mostUnpacked = 192 << 20 // all streams together
)

// active are the entries that make a document do something; an unknown entry
// of one of these names is called so.
var active = []name{"A", "AA", "OpenAction", "JS", "JavaScript", "Launch", "URI", "URLS", "GoToR", "GoToE", "Dest", "Dests",
	"RichMedia", "Rendition", "Movie", "Sound", "XFA", "SubmitForm", "Outlines"}

func newWalk(d *document) *walk {
	return &walk{d: d, shapes: shapes(), kinds: map[ref]string{}, unpacked: map[ref][]byte{}, room: mostUnpacked}
}

// shapes is the table. The lower half mirrors gofpdf v1.16.2 with UTF-8 fonts,
// images and transparency; the upper half is written by Finish.
func shapes() map[string]shape {
	flate := is("FlateDecode")
	return map[string]shape{
		"trailer": {entries: map[name]rule{"ID": list(2, 2, bytesOf(16)), "Info": to("info"), "Root": to("catalog"), "Size": integer}},
		"catalog": {entries: map[name]rule{
			"Type": is("Catalog"), "Pages": to("pages"), "Lang": anyText, "Metadata": to("metadata"),
			"AcroForm": in("form"), "Perms": in("permissions"),
			"Names": in("names"), "AF": list(1, 64, to("file")), "PageLayout": anyName,
		}, optional: []name{"Names", "AF", "PageLayout"}},
		"names":       {entries: map[name]rule{"EmbeddedFiles": in("files")}},
		"files":       {entries: map[name]rule{"Names": pairs(anyText, to("file"))}},
		"form":        {entries: map[name]rule{"Fields": list(1, 1, to("field")), "SigFlags": exactly("3")}},
		"permissions": {entries: map[name]rule{"DocMDP": to("signature")}},
		"field": {entries: map[name]rule{
			"Type": is("Annot"), "Subtype": is("Widget"), "FT": is("Sig"), "T": anyText, "F": exactly("132"),
			"Rect": list(4, 4, decimal), "P": to("page"), "V": to("signature"),
		}},
		"signature": {entries: map[name]rule{
			"Type": is("Sig"), "Filter": is("Adobe.PPKLite"), "SubFilter": is("ETSI.CAdES.detached"),
			"ByteRange": list(4, 4, integer), "Contents": anyText, "Reference": list(1, 1, in("reference")),
			"M": anyText, "Name": anyText, "Reason": anyText, "Location": anyText,
		}},
		"reference":  {entries: map[name]rule{"Type": is("SigRef"), "TransformMethod": is("DocMDP"), "TransformParams": in("parameters")}},
		"parameters": {entries: map[name]rule{"Type": is("TransformParams"), "P": exactly("1"), "V": is("1.2")}},
		"file": {entries: map[name]rule{
			"Type": is("Filespec"), "F": anyText, "UF": anyText, "Desc": anyText, "AFRelationship": anyName, "EF": in("embedding"),
		}},
		"embedding": {entries: map[name]rule{"F": to("embedded"), "UF": to("embedded")}},
		"embedded": {entries: map[name]rule{
			"Type": is("EmbeddedFile"), "Subtype": anyName, "Params": in("file parameters"), "Filter": flate, "Length": integer,
		}, stream: true},
		"file parameters": {entries: map[name]rule{"Size": integer, "ModDate": anyText}},
		"metadata":        {entries: map[name]rule{"Type": is("Metadata"), "Subtype": is("XML"), "Length": integer}, stream: true},
		"info": {entries: map[name]rule{
			"Title": anyText, "Author": anyText, "Producer": anyText, "CreationDate": anyText, "ModDate": anyText,
		}},

		"pages": {entries: map[name]rule{"Type": is("Pages"), "Kids": list(1, 500, to("page")), "Count": integer, "MediaBox": list(4, 4, decimal)}},
		"page": {entries: map[name]rule{
			"Type": is("Page"), "Parent": to("pages"), "Resources": to("resources"), "Contents": to("content"),
			"MediaBox": list(4, 4, decimal), "Group": in("group"), "Annots": list(1, 1, to("field")),
		}, optional: []name{"MediaBox", "Group", "Annots"}},
		"group":   {entries: map[name]rule{"Type": is("Group"), "S": is("Transparency"), "CS": is("DeviceRGB")}},
		"content": {entries: map[name]rule{"Filter": flate, "Length": integer}, optional: []name{"Filter"}, stream: true},
		"resources": {entries: map[name]rule{
			"ProcSet": list(1, 5, anyName), "Font": each(to("font")), "XObject": each(to("image")),
			"ExtGState": each(to("graphics state")), "ColorSpace": each(nothing),
		}, optional: []name{"ExtGState", "ColorSpace"}},
		"graphics state": {entries: map[name]rule{"Type": is("ExtGState"), "ca": decimal, "CA": decimal, "BM": anyName}},
		"font": {entries: map[name]rule{
			"Type": is("Font"), "Subtype": is("Type0"), "BaseFont": anyName, "Encoding": is("Identity-H"),
			"DescendantFonts": list(1, 1, to("descendant")), "ToUnicode": to("unicode map"),
		}},
		"descendant": {entries: map[name]rule{
			"Type": is("Font"), "Subtype": is("CIDFontType2"), "BaseFont": anyName, "CIDSystemInfo": to("character collection"),
			"FontDescriptor": to("font descriptor"), "DW": integer, "W": list(0, 1<<17, widths), "CIDToGIDMap": to("glyph map"),
		}, optional: []name{"DW"}},
		"character collection": {entries: map[name]rule{"Registry": anyText, "Ordering": anyText, "Supplement": integer}},
		"unicode map":          {entries: map[name]rule{"Length": integer}, stream: true},
		"glyph map":            {entries: map[name]rule{"Filter": flate, "Length": integer}, stream: true},
		"font descriptor": {entries: map[name]rule{
			"Type": is("FontDescriptor"), "FontName": anyName, "Ascent": integer, "Descent": integer, "CapHeight": integer,
			"Flags": integer, "FontBBox": list(4, 4, integer), "ItalicAngle": integer, "StemV": integer, "MissingWidth": integer,
			"FontFile2": to("font file"),
		}},
		"font file": {entries: map[name]rule{"Filter": flate, "Length": integer, "Length1": integer}, stream: true},
		"image": {entries: map[name]rule{
			"Type": is("XObject"), "Subtype": is("Image"), "Width": integer, "Height": integer, "BitsPerComponent": integer,
			"ColorSpace": colours, "Filter": flate, "DecodeParms": in("predictor"), "SMask": to("image"), "Length": integer,
		}, optional: []name{"DecodeParms", "SMask"}, stream: true},
		"predictor": {entries: map[name]rule{"Predictor": integer, "Colors": integer, "BitsPerComponent": integer, "Columns": integer}},
		"palette":   {entries: map[name]rule{"Filter": flate, "Length": integer}, optional: []name{"Filter"}, stream: true},
	}
}

// object checks the object n as one of the given kind. Each object is of one
// kind; it is looked at once.
func (w *walk) object(n ref, kind string) error {
	if before, seen := w.kinds[n]; seen {
		if before != kind {
			return problem(Objects, "object %d is used as %s and as %s", n, before, kind)
		}
		return nil
	}
	if n < 1 || int(n) >= len(w.d.objects) {
		return problem(Objects, "object %d is missing", n)
	}
	w.kinds[n] = kind
	o := w.d.objects[n]
	where := fmt.Sprintf("%s (object %d)", kind, n)
	if w.shapes[kind].stream != (o.raw != nil) {
		return problem(Unexpected, "%s: stream or not", where)
	}
	if err := w.dict(o.value, kind, where); err != nil {
		return err
	}
	if o.raw != nil && o.value.(dict)["Filter"] != nil {
		return w.unpack(n, where)
	}
	return nil
}

func (w *walk) dict(v value, kind, where string) error {
	d, ok := v.(dict)
	if !ok {
		return problem(Unexpected, "%s is not a dictionary", where)
	}
	s := w.shapes[kind]
	for _, key := range slices.Sorted(maps.Keys(d)) {
		check, known := s.entries[key]
		if !known {
			return w.unknown(kind, key, where)
		}
		if err := check(w, d[key], where+" /"+string(key)); err != nil {
			return err
		}
	}
	for _, key := range slices.Sorted(maps.Keys(s.entries)) {
		if d[key] == nil && !slices.Contains(s.optional, key) {
			return problem(Unexpected, "%s lacks /%s", where, key)
		}
	}
	return nil
}

func (w *walk) unknown(kind string, key name, where string) error {
	switch {
	case slices.Contains(active, key):
		return problem(ActiveContent, "%s has /%q", where, string(key))
	case kind == "form" || kind == "field":
		return problem(Annotation, "%s has /%q", where, string(key))
	case kind == "signature" || kind == "reference" || kind == "parameters":
		return problem(SignatureField, "%s has /%q", where, string(key))
	}
	return problem(Unexpected, "%s has /%q", where, string(key))
}

// unpack inflates a stream to its last byte, within bounds. Bytes behind the
// compressed data, which no reader shows, are refused.
func (w *walk) unpack(n ref, where string) error {
	source := bytes.NewReader(w.d.objects[n].raw)
	inflater, err := zlib.NewReader(source)
	if err != nil {
		return problem(Compression, "%s: %v", where, err)
	}
	most := min(mostStream, w.room)
	content, err := io.ReadAll(io.LimitReader(inflater, int64(most)+1))
	if err != nil {
		return problem(Compression, "%s: %v", where, err)
	}
	if len(content) > most {
		return problem(TooLarge, "%s unpacks to more than %d bytes", where, most)
	}
	if source.Len() > 0 {
		return problem(Compression, "%s: %d bytes behind the compressed data", where, source.Len())
	}
	w.room -= len(content)
	if w.kinds[n] == "embedded" {
		w.unpacked[n] = content
	}
	return nil
}

// to wants a reference to an object of a kind; in wants a dictionary of a kind
// in place.
func to(kind string) rule {
	return func(w *walk, v value, where string) error {
		n, ok := v.(ref)
		if !ok {
			return problem(Unexpected, "%s is not a reference", where)
		}
		return w.object(n, kind)
	}
}

func in(kind string) rule {
	return func(w *walk, v value, where string) error { return w.dict(v, kind, where) }
}

func is(want name) rule {
	return func(_ *walk, v value, where string) error {
		if got, ok := v.(name); ok && got != want && slices.Contains(active, got) {
			return problem(ActiveContent, "%s is %q", where, string(got))
		}
		if v != want {
			return problem(Unexpected, "%s is not /%s", where, want)
		}
		return nil
	}
}

func exactly(want number) rule {
	return func(_ *walk, v value, where string) error {
		if v != want {
			return problem(Unexpected, "%s is not %s", where, want)
		}
		return nil
	}
}

func list(fewest, most int, member rule) rule {
	return func(w *walk, v value, where string) error {
		members, ok := v.(array)
		if !ok || len(members) < fewest || len(members) > most {
			return problem(Unexpected, "%s is not a list of %d to %d", where, fewest, most)
		}
		for _, m := range members {
			if err := member(w, m, where); err != nil {
				return err
			}
		}
		return nil
	}
}

func pairs(first, second rule) rule {
	return func(w *walk, v value, where string) error {
		members, ok := v.(array)
		if !ok || len(members)%2 != 0 {
			return problem(Unexpected, "%s is not a list of pairs", where)
		}
		for i, m := range members {
			check := first
			if i%2 == 1 {
				check = second
			}
			if err := check(w, m, where); err != nil {
				return err
			}
		}
		return nil
	}
}

// each wants a dictionary with free names.
func each(member rule) rule {
	return func(w *walk, v value, where string) error {
		d, ok := v.(dict)
		if !ok {
			return problem(Unexpected, "%s is not a dictionary", where)
		}
		for _, key := range slices.Sorted(maps.Keys(d)) {
			if err := member(w, d[key], where); err != nil {
				return err
			}
		}
		return nil
	}
}

func nothing(_ *walk, _ value, where string) error {
	return problem(Unexpected, "%s is not empty", where)
}

func integer(_ *walk, v value, where string) error {
	n, ok := v.(number)
	if i, err := strconv.Atoi(string(n)); !ok || err != nil || strconv.Itoa(i) != string(n) {
		return problem(Unexpected, "%s is not a whole number", where)
	}
	return nil
}

func decimal(_ *walk, v value, where string) error {
	n, ok := v.(number)
	if !ok || strings.HasPrefix(string(n), ".") || strings.HasSuffix(string(n), ".") {
		return problem(Unexpected, "%s is not a number", where)
	}
	return nil
}

func anyText(_ *walk, v value, where string) error {
	if _, ok := v.(text); !ok {
		return problem(Unexpected, "%s is not a string", where)
	}
	return nil
}

func anyName(_ *walk, v value, where string) error {
	if n, ok := v.(name); !ok || slices.Contains(active, n) {
		return problem(Unexpected, "%s is not a name", where)
	}
	return nil
}

func bytesOf(n int) rule {
	return func(_ *walk, v value, where string) error {
		if t, ok := v.(text); !ok || len(t) != n {
			return problem(Unexpected, "%s is not of %d bytes", where, n)
		}
		return nil
	}
}

// widths are whole numbers, or a list of them.
func widths(w *walk, v value, where string) error {
	if _, ok := v.(array); ok {
		return list(1, 1<<16, integer)(w, v, where)
	}
	return integer(w, v, where)
}

// colours are those of gofpdf's images: grey, RGB, or a palette.
func colours(w *walk, v value, where string) error {
	if v == name("DeviceGray") || v == name("DeviceRGB") {
		return nil
	}
	members, ok := v.(array)
	if !ok || len(members) != 4 || members[0] != name("Indexed") || members[1] != name("DeviceRGB") {
		return problem(Unexpected, "%s is not grey, RGB or a palette", where)
	}
	if err := integer(w, members[2], where); err != nil {
		return err
	}
	return to("palette")(w, members[3], where)
}

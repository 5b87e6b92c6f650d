package sign

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"encoding/xml"
	"fmt"
	"strconv"
	"time"
	"unicode/utf16"
)

// signatureRoom is how many bytes a CMS signature may have: a chain of four
// certificates with RSA keys of 4096 bits needs some 8 kB.
const signatureRoom = 12288

// Kind says what an attached file is, in the words of PDF.
type Kind struct {
	Name         string // as the layout attached it
	MIME         string // "text/plain"
	Relationship string // Source, Supplement ...
}

// FinishSettings of a report. Everything printed in the file's own description
// comes from here; the bytes are a function of the layout's and these.
type FinishSettings struct {
	Title    string
	Language string // "en"
	ID       [16]byte
	At       time.Time // of signing, as the statement has it
	Signer   string    // name
	Reason   string    // the meaning of the signature
	Location string    // department
	Files    []Kind    // every attached file
}

// Finish turns what the layout wrote (gofpdf v1.16.2, PDF 1.3 to 1.7) into one
// revision with room for one signature: catalog entries, metadata, described
// attachments, an invisible signature field on page one, DocMDP P=1. The room
// holds zeros; SignPDF fills it.
//
// Source: ISO 32000-1, 7.7.2, 7.11.4, 12.7.4.5, 12.8.1, 12.8.2.2; EN 319 142-1
// (no signing time in the CMS, the claimed time in /M), from memory.
func Finish(pdf []byte, s FinishSettings) ([]byte, error) {
	d, err := parse(pdf, "%PDF-1.3\n", "%PDF-1.4\n", "%PDF-1.5\n", "%PDF-1.6\n", "%PDF-1.7\n")
	if err != nil {
		return nil, fmt.Errorf("finish the report: %w", err)
	}
	f := &finisher{d: d, s: s}
	if err := f.finish(); err != nil {
		return nil, fmt.Errorf("finish the report: %w", err)
	}
	out := f.d.renumbered()
	_, gap := out.write()
	signature, ok := out.signature()
	if !ok {
		return nil, problem(LayoutsDocument, "no signature dictionary was made")
	}
	// The numbers are padded to a fixed width, so they move nothing.
	size := len(first(out.write()))
	signature["ByteRange"] = array{number("0"), count(gap.start), count(gap.end), count(size - gap.end)}
	finished := first(out.write())
	if _, err := read(finished, false); err != nil {
		return nil, fmt.Errorf("finish the report: the result would not be read again: %w", err)
	}
	return finished, nil
}

func first(b []byte, _ gapAt) []byte { return b }

func count(n int) number { return number(strconv.Itoa(n)) }

// signature finds the one signature dictionary.
func (d *document) signature() (dict, bool) {
	for _, o := range d.objects {
		if v, ok := o.value.(dict); ok && v["Type"] == name("Sig") {
			return v, true
		}
	}
	return nil, false
}

type finisher struct {
	d *document
	s FinishSettings
}

func (f *finisher) add(o object) ref {
	f.d.objects = append(f.d.objects, o)
	return ref(len(f.d.objects) - 1)
}

func (f *finisher) get(v value) (dict, bool) {
	n, ok := v.(ref)
	if !ok || int(n) >= len(f.d.objects) {
		return nil, false
	}
	got, ok := f.d.objects[n].value.(dict)
	return got, ok
}

func (f *finisher) finish() error {
	catalog, ok := f.get(f.d.trailer["Root"])
	if !ok {
		return problem(LayoutsDocument, "it has no catalog")
	}
	pages, ok := f.get(catalog["Pages"])
	if !ok {
		return problem(LayoutsDocument, "it has no pages")
	}
	kids, ok := pages["Kids"].(array)
	if !ok || len(kids) == 0 {
		return problem(LayoutsDocument, "it has no page")
	}
	firstPage, ok := f.get(kids[0])
	if !ok || firstPage["Annots"] != nil {
		return problem(LayoutsDocument, "its first page is missing or holds annotations")
	}
	if err := f.files(catalog); err != nil {
		return err
	}
	meta, err := f.metadata()
	if err != nil {
		return err
	}
	catalog["Lang"], catalog["Metadata"] = inUTF16(f.s.Language), f.add(object{
		value: dict{"Type": name("Metadata"), "Subtype": name("XML"), "Length": count(len(meta))}, raw: meta})
	signature := f.add(object{value: dict{
		"Type": name("Sig"), "Filter": name("Adobe.PPKLite"), "SubFilter": name("ETSI.CAdES.detached"),
		"ByteRange": array{number("0"), number("0"), number("0"), number("0")}, "Contents": text(make([]byte, signatureRoom)),
		"Reference": array{dict{"Type": name("SigRef"), "TransformMethod": name("DocMDP"),
			"TransformParams": dict{"Type": name("TransformParams"), "P": number("1"), "V": name("1.2")}}},
		"M": text(pdfDate(f.s.At)), "Name": inUTF16(f.s.Signer), "Reason": inUTF16(f.s.Reason), "Location": inUTF16(f.s.Location),
	}})
	field := f.add(object{value: dict{
		"Type": name("Annot"), "Subtype": name("Widget"), "FT": name("Sig"), "T": inUTF16("signature"), "F": number("132"),
		"Rect": array{number("0"), number("0"), number("0"), number("0")}, "P": kids[0], "V": signature,
	}})
	firstPage["Annots"] = array{field}
	catalog["AcroForm"] = dict{"Fields": array{field}, "SigFlags": number("3")}
	catalog["Perms"] = dict{"DocMDP": signature}
	f.d.trailer["ID"] = array{text(f.s.ID[:]), text(f.s.ID[:])}
	return nil
}

// files describes what the layout attached, in the layout's order.
func (f *finisher) files(catalog dict) error {
	names, _ := catalog["Names"].(dict)
	embedded, _ := names["EmbeddedFiles"].(dict)
	pairs, _ := embedded["Names"].(array)
	if len(pairs) != 2*len(f.s.Files) {
		return problem(LayoutsDocument, "it carries %d files, %d were described", len(pairs)/2, len(f.s.Files))
	}
	if len(pairs) == 0 {
		delete(catalog, "Names")
		return nil
	}
	var associated, sorted array
	for i, kind := range f.s.Files {
		spec, ok := f.get(pairs[2*i+1])
		if !ok {
			return problem(LayoutsDocument, "attached file %d is missing", i+1)
		}
		if got, ok := fromUTF16(spec["UF"]); !ok || got != kind.Name {
			return problem(LayoutsDocument, "attached file %d is %q, not %q", i+1, got, kind.Name)
		}
		content, _ := spec["EF"].(dict)
		stream, ok := f.get(content["F"])
		if !ok {
			return problem(LayoutsDocument, "attached file %q has no content", kind.Name)
		}
		parameters, _ := stream["Params"].(dict)
		stream["Subtype"] = name(kind.MIME)
		stream["Params"] = dict{"Size": parameters["Size"], "ModDate": text(pdfDate(f.s.At))}
		spec["F"], spec["UF"] = inUTF16(kind.Name), inUTF16(kind.Name)
		spec["AFRelationship"], spec["EF"] = name(kind.Relationship), dict{"F": content["F"], "UF": content["F"]}
		associated = append(associated, pairs[2*i+1])
		if i > 0 && kind.Name <= f.s.Files[i-1].Name {
			return problem(LayoutsDocument, "attached files stand in the order of their names")
		}
		sorted = append(sorted, inUTF16(kind.Name), pairs[2*i+1])
	}
	catalog["AF"] = associated
	catalog["Names"] = dict{"EmbeddedFiles": dict{"Names": sorted}}
	return nil
}

// metadata is the file's description in XMP. Source: ISO 16684-1, from memory.
func (f *finisher) metadata() ([]byte, error) {
	var title bytes.Buffer
	if err := xml.EscapeText(&title, []byte(f.s.Title)); err != nil {
		return nil, problem(Settings, "title: %v", err)
	}
	at := f.s.At.UTC().Format(time.RFC3339)
	return fmt.Appendf(nil, `<?xpacket begin="%s" id="W5M0MpCehiHzreSzNTczkc9d"?>
<x:xmpmeta xmlns:x="adobe:ns:meta/"><rdf:RDF xmlns:rdf="http://www.w3.org/1999/02/22-rdf-syntax-ns#">
<rdf:Description rdf:about="" xmlns:dc="http://purl.org/dc/elements/1.1/" xmlns:xmp="http://ns.adobe.com/xap/1.0/">
<dc:title><rdf:Alt><rdf:li xml:lang="x-default">%s</rdf:li></rdf:Alt></dc:title>
<xmp:CreateDate>%s</xmp:CreateDate><xmp:ModifyDate>%s</xmp:ModifyDate>
</rdf:Description></rdf:RDF></x:xmpmeta>
<?xpacket end="r"?>`, "\ufeff", title.Bytes(), at, at), nil
}

// SignPDF fills the room of a finished report with the signature over every
// other byte.
func SignPDF(finished []byte, key *Key) ([]byte, error) {
	p, err := read(finished, false)
	if err != nil {
		return nil, err
	}
	if len(p.CMS) != 0 {
		return nil, problem(Gap, "the report is signed already")
	}
	cms, err := SignDetached(p.digest, key)
	if err != nil {
		return nil, err
	}
	if len(cms) > signatureRoom {
		return nil, problem(Gap, "the signature has %d bytes, %d have room", len(cms), signatureRoom)
	}
	signed := bytes.Clone(finished)
	hex.Encode(signed[p.gap.start+1:], cms)
	return signed, nil
}

func digestOutside(file []byte, gap gapAt) [sha256.Size]byte {
	h := sha256.New()
	h.Write(file[:gap.start])
	h.Write(file[gap.end:])
	return [sha256.Size]byte(h.Sum(nil))
}

// inUTF16 writes a text string: big-endian with its mark (ISO 32000-1, 7.9.2.2).
func inUTF16(s string) text {
	out := text{0xfe, 0xff}
	for _, unit := range utf16.Encode([]rune(s)) {
		out = binary.BigEndian.AppendUint16(out, unit)
	}
	return out
}

func fromUTF16(v value) (string, bool) {
	t, ok := v.(text)
	if !ok || len(t) < 2 || len(t)%2 != 0 || t[0] != 0xfe || t[1] != 0xff {
		return "", false
	}
	var units []uint16
	for i := 2; i < len(t); i += 2 {
		units = append(units, binary.BigEndian.Uint16(t[i:]))
	}
	return string(utf16.Decode(units)), true
}

func pdfDate(t time.Time) string { return t.UTC().Format("D:20060102150405Z") }

package sign

import (
	"bytes"
	"crypto/sha256"
	"crypto/x509"
	"slices"
	"strconv"
	"time"
)

// File is an attached file of a report.
type File struct {
	Name string
	Data []byte
}

// SignedPDF is a report that was read strictly. Nothing in it is trusted until
// Verify, and its pages not until SameAs.
type SignedPDF struct {
	Pages                    int
	Files                    []File // in the order of their names
	Signer, Reason, Location string // as the file claims
	At                       time.Time
	CMS                      []byte

	file   []byte
	gap    gapAt
	digest [sha256.Size]byte
}

// ReadSigned reads a report and accepts only what Finish and SignPDF could
// have written: the same spelling to the last byte, every object of a known
// shape, used, and used once; one revision; one signature that covers all but
// its own gap.
func ReadSigned(file []byte) (*SignedPDF, error) { return read(file, true) }

func read(file []byte, signed bool) (*SignedPDF, error) {
	d, err := parse(file, header)
	if err != nil {
		return nil, err
	}
	again, gap := d.write()
	if !bytes.Equal(again, file) {
		return nil, problem(NotCanonical, "they differ at byte %d", firstDifference(again, file))
	}
	w := newWalk(d)
	if err := w.dict(d.trailer, "trailer", "trailer"); err != nil {
		return nil, err
	}
	order := d.order()
	for i, n := range order {
		if n != i+1 {
			return nil, problem(Objects, "object %d stands where %d belongs", n, i+1)
		}
	}
	if len(order) != len(d.objects)-1 || len(w.kinds) != len(order) {
		return nil, problem(Objects, "%d objects, %d of them used", len(d.objects)-1, len(w.kinds))
	}
	p := &SignedPDF{file: file, gap: gap}
	if err := p.structure(d, w); err != nil {
		return nil, err
	}
	return p, p.signature(d, signed)
}

func firstDifference(a, b []byte) int {
	for i := range min(len(a), len(b)) {
		if a[i] != b[i] {
			return i
		}
	}
	return min(len(a), len(b))
}

// structure checks what shapes cannot: who refers to whom.
func (p *SignedPDF) structure(d *document, w *walk) error {
	at := func(v value) dict { return d.objects[v.(ref)].value.(dict) }
	catalog := at(d.trailer["Root"])
	pages := at(catalog["Pages"])
	kids := pages["Kids"].(array)
	p.Pages = len(kids)
	if pages["Count"] != number(strconv.Itoa(len(kids))) {
		return problem(Unexpected, "the number of pages is not %d", len(kids))
	}
	field := catalog["AcroForm"].(dict)["Fields"].(array)[0]
	for i, kid := range kids {
		if slices.Contains(kids[:i], kid) {
			return problem(Objects, "page %d stands twice", i+1)
		}
		if at(kid)["Parent"] != catalog["Pages"] {
			return problem(Objects, "page %d belongs elsewhere", i+1)
		}
		annotations, has := at(kid)["Annots"].(array)
		if has != (i == 0) || has && annotations[0] != field {
			return problem(Annotation, "page %d", i+1)
		}
	}
	if at(field)["P"] != kids[0] || at(field)["V"] != catalog["Perms"].(dict)["DocMDP"] {
		return problem(SignatureField, "the field, its page and the permissions do not belong together")
	}
	return p.attached(d, w, catalog)
}

func (p *SignedPDF) attached(d *document, w *walk, catalog dict) error {
	names, hasNames := catalog["Names"].(dict)
	associated, hasAF := catalog["AF"].(array)
	if hasNames != hasAF {
		return problem(AttachedFile, "files are listed once instead of twice")
	}
	if !hasNames {
		return nil
	}
	pairs := names["EmbeddedFiles"].(dict)["Names"].(array)
	if len(pairs) != 2*len(associated) {
		return problem(AttachedFile, "%d files in one list, %d in the other", len(pairs)/2, len(associated))
	}
	for i, n := range associated {
		spec := d.objects[n.(ref)].value.(dict)
		key, ok := fromUTF16(pairs[2*i])
		if !ok || pairs[2*i+1] != n || !bytes.Equal(spec["UF"].(text), pairs[2*i].(text)) || !bytes.Equal(spec["F"].(text), pairs[2*i].(text)) {
			return problem(AttachedFile, "file %d has two names", i+1)
		}
		if i > 0 && key <= p.Files[i-1].Name {
			return problem(AttachedFile, "files do not stand in the order of their names")
		}
		content := spec["EF"].(dict)
		if content["F"] != content["UF"] {
			return problem(AttachedFile, "file %q has two contents", key)
		}
		stream := content["F"].(ref)
		data := w.unpacked[stream]
		if d.objects[stream].value.(dict)["Params"].(dict)["Size"] != number(strconv.Itoa(len(data))) {
			return problem(AttachedFile, "file %q is not as long as it says", key)
		}
		p.Files = append(p.Files, File{key, data})
	}
	return nil
}

// signature checks byte range and gap, and takes the CMS out of the gap.
func (p *SignedPDF) signature(d *document, signed bool) error {
	s, ok := d.signature()
	if !ok {
		return problem(SignatureField, "there is none")
	}
	r := s["ByteRange"].(array)
	want := array{number("0"), count(p.gap.start), count(p.gap.end), count(len(p.file) - p.gap.end)}
	if !slices.Equal(r, want) {
		return problem(ByteRange, "it says %v, it should say %v", r, want)
	}
	room := s["Contents"].(text)
	if len(room) != signatureRoom {
		return problem(Gap, "its room is of %d bytes, not %d", len(room), signatureRoom)
	}
	cms := bytes.TrimRight(room, "\x00")
	if signed {
		head, size, err := derLength(room)
		if err != nil || room[0] != tagSequence {
			return problem(Gap, "it holds no signature")
		}
		cms = room[:head+size]
		if len(bytes.Trim(room[head+size:], "\x00")) > 0 {
			return problem(Gap, "bytes follow the signature")
		}
	}
	p.CMS = bytes.Clone(cms)
	p.digest = digestOutside(p.file, p.gap)
	var okName, okReason, okLocation bool
	p.Signer, okName = fromUTF16(s["Name"])
	p.Reason, okReason = fromUTF16(s["Reason"])
	p.Location, okLocation = fromUTF16(s["Location"])
	if !okName || !okReason || !okLocation {
		return problem(SignatureField, "a text is not written as the report's")
	}
	at, err := time.Parse("D:20060102150405Z", string(s["M"].(text)))
	if err != nil {
		return problem(SignatureField, "the time of signing is no time")
	}
	p.At = at
	return nil
}

// Verify checks the signature over the whole file against the pinned roots.
func (p *SignedPDF) Verify(trust Trust) (*x509.Certificate, error) {
	return VerifyDetached(p.CMS, p.digest, trust)
}

// SameAs holds the file against a report that was made again by Finish: every
// byte outside the gap is the same, or the place of the first that is not.
func (p *SignedPDF) SameAs(finished []byte) error {
	if len(finished) != len(p.file) {
		return problem(Rendering, "%d bytes, made again %d", len(p.file), len(finished))
	}
	for i := range finished {
		if (i < p.gap.start || i >= p.gap.end) && finished[i] != p.file[i] {
			return problem(Rendering, "first at byte %d", i)
		}
	}
	return nil
}

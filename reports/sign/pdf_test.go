package sign

import (
	"bytes"
	"crypto/x509"
	"errors"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"codeberg.org/go-fonts/liberation/liberationsansregular"
	"github.com/jung-kurt/gofpdf"
)

var noTime time.Time

func at() time.Time { return time.Date(2026, 12, 1, 9, 30, 0, 0, time.UTC) }

// demo makes a root and a key for a demonstration.
func demo(t testing.TB) (*Root, *Key) {
	t.Helper()
	root, err := NewRoot(RootSettings{Department: "Hollerbrook", NotBefore: at().AddDate(0, 0, -1), NotAfter: at().AddDate(1, 0, 0), Demonstration: true})
	if err != nil {
		t.Fatal(err)
	}
	key, err := root.Issue(Person{Name: "Řehoř Ängström", NotBefore: at().AddDate(0, 0, -1), NotAfter: at().AddDate(0, 6, 0)})
	if err != nil {
		t.Fatal(err)
	}
	return root, key
}

func (r *Root) trust() Trust { return Trust{Roots: rootsOf(r), At: at()} }

// layout draws a small document as the layout does.
func layout(t testing.TB, words string) []byte {
	t.Helper()
	pdf := gofpdf.New("P", "mm", "A4", "")
	pdf.SetCatalogSort(true)
	pdf.SetCreationDate(at())
	pdf.SetModificationDate(at())
	pdf.SetTitle("Report", true)
	pdf.SetAuthor("Department", true)
	pdf.SetProducer("test", true)
	pdf.AddUTF8FontFromBytes("sans", "", bytes.Clone(liberationsansregular.TTF))
	pdf.SetFont("sans", "", 12)
	for range 2 {
		pdf.AddPage()
		pdf.Cell(40, 10, words)
	}
	pdf.SetAttachments([]gofpdf.Attachment{
		{Content: bytes.Repeat([]byte("reading\n"), 50), Filename: "a.record", Description: "record"},
		{Content: []byte("statement"), Filename: "b.cms", Description: "statement (signed)"},
	})
	var out bytes.Buffer
	if err := pdf.Output(&out); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

func settings() FinishSettings {
	return FinishSettings{Title: "Report <1> & Ω", Language: "en", ID: [16]byte{1, 2, 3}, At: at(), Signer: "Řehoř Ängström", Reason: "carried out (really)",
		Location: "Hollerbrook", Files: []Kind{{"a.record", "text/plain", "Source"}, {"b.cms", "application/pkcs7-mime", "Supplement"}}}
}

func signed(t testing.TB, key *Key) (finished, file []byte) {
	t.Helper()
	finished, err := Finish(layout(t, "Příliš 120 mmHg"), settings())
	if err != nil {
		t.Fatal(err)
	}
	file, err = SignPDF(finished, key)
	if err != nil {
		t.Fatal(err)
	}
	return finished, file
}

func TestSignedReportReadsBack(t *testing.T) {
	root, key := demo(t)
	finished, file := signed(t, key)
	p, err := ReadSigned(file)
	if err != nil {
		t.Fatal(err)
	}
	signer, err := p.Verify(root.trust())
	if err != nil || signer.Subject.CommonName != "Řehoř Ängström" {
		t.Fatalf("%v, %v", signer, err)
	}
	if err := p.SameAs(finished); err != nil {
		t.Error(err)
	}
	if p.Pages != 2 || len(p.Files) != 2 || p.Files[0].Name != "a.record" || string(p.Files[1].Data) != "statement" ||
		p.Signer != "Řehoř Ängström" || p.Reason != "carried out (really)" || !p.At.Equal(at()) {
		t.Errorf("read as %+v", p)
	}
	again, err := Finish(layout(t, "Příliš 120 mmHg"), settings())
	if err != nil || !bytes.Equal(again, finished) {
		t.Errorf("made again it differs: %v", err)
	}
	if twice, _ := SignPDF(finished, key); !bytes.Equal(twice, file) {
		t.Error("signed again it differs")
	}
	if other, err := SignPDF(file, key); err == nil {
		t.Errorf("signed twice: %d bytes", len(other))
	}
	other, err := Finish(layout(t, "Příliš 121 mmHg"), settings())
	if err != nil {
		t.Fatal(err)
	}
	if err := p.SameAs(other); !errors.Is(err, Rendering) {
		t.Errorf("another page: %v", err)
	}
}

// refused says that a file is neither read nor verified.
func refused(file []byte, trust Trust) error {
	p, err := ReadSigned(file)
	if err != nil {
		return err
	}
	_, err = p.Verify(trust)
	return err
}

// Every single byte changed in three ways is noticed without the pages being
// made again.
func TestEveryByteChanged(t *testing.T) {
	root, key := demo(t)
	_, file := signed(t, key)
	trust := root.trust()
	if err := refused(file, trust); err != nil {
		t.Fatal(err)
	}
	step := 1
	if os.Getenv("KYMOBENCH_FULL") != "1" {
		step = 37 // a prime, so that every kind of place is met
	}
	tried := 0
	damaged := bytes.Clone(file)
	for i := 0; i < len(file); i += step {
		for _, flip := range []byte{0x01, 0x20, 0x80} {
			damaged[i] = file[i] ^ flip
			if refused(damaged, trust) == nil {
				t.Fatalf("byte %d, %#x to %#x: not noticed", i, file[i], damaged[i])
			}
			tried++
		}
		damaged[i] = file[i]
	}
	t.Logf("%d changes of %d bytes, all noticed", tried, len(file))
	if tried < 3*len(file)/step {
		t.Errorf("only %d changes tried", tried)
	}
}

// The published ways of keeping a signature valid while changing the document,
// each in its plainest form.
func TestAttacks(t *testing.T) {
	root, key := demo(t)
	finished, file := signed(t, key)
	other, otherKey := demo(t)
	_, foreign := signed(t, otherKey)
	replace := func(from, to string) []byte { return bytes.Replace(file, []byte(from), []byte(to), 1) }
	update := append(bytes.Clone(file), []byte("5 0 obj\n<</Type /Page>>\nendobj\nxref\n0 0\ntrailer\n<</Prev 10>>\nstartxref\n10\n%%EOF\n")...)
	for name, attack := range map[string]struct {
		file  []byte
		trust Trust
		code  Code
	}{
		"bytes appended":     {append(bytes.Clone(file), '\n'), root.trust(), Revisions},
		"saved again":        {update, root.trust(), Revisions},
		"not signed":         {finished, root.trust(), Gap},
		"foreign root":       {foreign, root.trust(), UntrustedRoot},
		"own root pinned":    {file, other.trust(), UntrustedRoot},
		"expired":            {file, Trust{Roots: rootsOf(root), At: at().AddDate(2, 0, 0)}, Validity},
		"no time":            {file, Trust{Roots: rootsOf(root), At: noTime}, Settings},
		"upper-case hex":     {replace("/Contents <30", "/Contents <3A"), root.trust(), ""},
		"prefix":             {append([]byte("\n"), file...), root.trust(), Header},
		"byte range zero":    {replace("/ByteRange [0", "/ByteRange [1"), root.trust(), ByteRange},
		"permissions raised": {replace("/P 1 ", "/P 3 "), root.trust(), Unexpected},
		"action":             {replace("/PageLayout", "/OpenAction"), root.trust(), ""},
		"blank added":        {replace("/Kids [", "/Kids [ "), root.trust(), CrossReference},
		"cut":                {file[:len(file)-1], root.trust(), ""},
		"empty":              {nil, root.trust(), Header},
	} {
		err := refused(attack.file, attack.trust)
		if err == nil && !bytes.Equal(attack.file, file) {
			t.Errorf("%s: accepted", name)
		}
		if bytes.Equal(attack.file, file) && attack.code == "" {
			continue // the attack found nothing to replace in this document
		}
		if attack.code != "" && !errors.Is(err, attack.code) {
			t.Errorf("%s: %v, wanted the class %s", name, err, string(attack.code))
		}
	}
	// Hidden bytes in the gap behind the signature.
	p, err := ReadSigned(file)
	if err != nil {
		t.Fatal(err)
	}
	hidden := bytes.Clone(file)
	hidden[p.gap.end-2] = '1'
	if err := refused(hidden, root.trust()); !errors.Is(err, Gap) {
		t.Errorf("hidden byte in the gap: %v", err)
	}
}

// outside runs a program that must be there when KYMOBENCH_OUTSIDE=1.
func outside(t *testing.T, program string, args ...string) string {
	t.Helper()
	if _, err := exec.LookPath(program); err != nil {
		if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
			t.Fatal(err)
		}
		t.Skipf("%s is not installed", program)
	}
	out, err := exec.Command(program, args...).CombinedOutput()
	if err != nil {
		t.Fatalf("%s %v: %v\n%s", program, args, err, out)
	}
	return string(out)
}

func TestOtherProgramsAgree(t *testing.T) {
	root, key := demo(t)
	_, file := signed(t, key)
	dir := t.TempDir()
	write := func(name string, data []byte) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, data, 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	pdf := write("report.pdf", file)
	pem := write("root.pem", EncodeRoots(root.Certificate))
	p, err := ReadSigned(file)
	if err != nil {
		t.Fatal(err)
	}
	t.Run("openssl", func(t *testing.T) {
		cms := write("report.cms", p.CMS)
		content := write("covered", append(bytes.Clone(file[:p.gap.start]), file[p.gap.end:]...))
		// openssl looks at the validity now; the test's certificates live in 2026 and 2027.
		outside(t, "openssl", "cms", "-verify", "-cades", "-binary", "-purpose", "any", "-inform", "DER", "-in", cms, "-content", content,
			"-CAfile", pem, "-attime", "1796117400", "-out", filepath.Join(dir, "out"))
		attached, err := SignAttached([]byte("statement"), key)
		if err != nil {
			t.Fatal(err)
		}
		got := outside(t, "openssl", "cms", "-verify", "-cades", "-binary", "-purpose", "any", "-inform", "DER", "-in", write("s.cms", attached),
			"-CAfile", pem, "-attime", "1796117400")
		if !strings.Contains(got, "statement") {
			t.Errorf("content %q", got)
		}
	})
	t.Run("qpdf", func(t *testing.T) {
		if got := outside(t, "qpdf", "--check", pdf); !strings.Contains(got, "No syntax or stream encoding errors found") || strings.Contains(got, "WARNING") {
			t.Error(got)
		}
	})
	t.Run("pdfsig", func(t *testing.T) {
		db := filepath.Join(dir, "nss")
		if err := os.Mkdir(db, 0o700); err != nil {
			t.Fatal(err)
		}
		outside(t, "certutil", "-N", "-d", "sql:"+db, "--empty-password")
		outside(t, "certutil", "-A", "-d", "sql:"+db, "-n", "root", "-t", "CT,C,C", "-i", pem)
		got := outside(t, "pdfsig", "-nssdir", "sql:"+db, pdf)
		for _, want := range []string{"Signature is Valid", "Total document signed", "ETSI.CAdES.detached"} {
			if !strings.Contains(got, want) {
				t.Errorf("%q is not said:\n%s", want, got)
			}
		}
	})
}

func rootsOf(r *Root) []*x509.Certificate { return []*x509.Certificate{r.Certificate} }

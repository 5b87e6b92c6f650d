package verify

import (
	"bytes"
	"crypto/x509"
	"fmt"

	"kymobench/procedures/record"
	"kymobench/procedures/results"
	"kymobench/reports/sign"
)

// Finding is one thing that was checked.
type Finding struct {
	Check string `json:"check"`
	OK    bool   `json:"ok"`
	Text  string `json:"text"`
}

// Findings are everything that was checked, up to the first that failed.
type Findings struct {
	Verified bool      `json:"verified"`
	Run      string    `json:"run"`
	Verdict  string    `json:"verdict"`
	Signer   string    `json:"signer"`
	Pages    string    `json:"pages"` // checked, not_checked
	Checks   []Finding `json:"checks"`
	Unknown  []string  `json:"not_known"` // what no check here can tell
}

func (f *Findings) pass(check, text string, a ...any) {
	f.Checks = append(f.Checks, Finding{check, true, fmt.Sprintf(text, a...)})
}

func (f *Findings) fail(check string, err error) Findings {
	f.Checks = append(f.Checks, Finding{check, false, err.Error()})
	f.Verified = false
	return *f
}

// Record checks the chain of a closed record and computes its results anew.
// It shows that the record holds together, not who made it.
func Record(file []byte) Findings {
	f := Findings{Pages: "not_checked", Checks: []Finding{}, Unknown: []string{"who made the record: its head is signed in the report, not in it"}}
	if err := f.record(file); err != nil {
		return f.fail("record", err)
	}
	f.Verified = true
	return f
}

func (f *Findings) record(file []byte) error {
	run, err := record.Read(bytes.NewReader(file), record.Limit{})
	if run.Head.Run != "" {
		f.Run = run.Head.Run
	}
	if err != nil {
		return err
	}
	if !run.Closed {
		return fmt.Errorf("%w: %d lines are whole, up to the last that was durable", record.ErrNotClosed, run.Head.Lines)
	}
	f.pass("record", "%d lines are chained and closed, head %s", run.Head.Lines, run.Head.Hash)
	stored, kept, err := results.Stored(run.Events)
	if err != nil {
		return err
	}
	if kept.Version != results.Version {
		return fmt.Errorf("the results were computed by version %d, this program has %d", kept.Version, results.Version)
	}
	computed, err := results.Compute(run.Events)
	if err != nil {
		return fmt.Errorf("compute the results anew: %w", err)
	}
	difference, err := results.Compare(stored, computed)
	if err != nil {
		return err
	}
	if difference != "" {
		return fmt.Errorf("computed anew, the results differ first in %s", difference)
	}
	f.Verdict = stored.Verdict.String()
	f.pass("results", "computed anew from the readings they are the same, verdict %s", f.Verdict)
	return nil
}

// Report checks a signed report against the pinned roots: its structure to the
// last byte, the signature, the record and statement it carries, the results,
// and the pages, made again.
func Report(file []byte, roots []*x509.Certificate) Findings {
	f := Findings{Pages: "not_checked", Checks: []Finding{}, Unknown: []string{
		"the time of signing: it is the computer's clock, no time-stamp vouches for it",
		"whether a certificate was revoked: no revocation list was given",
	}}
	p, err := sign.ReadSigned(file)
	if err != nil {
		return f.fail("structure", err)
	}
	f.pass("structure", "one revision of %d pages and %d files, nothing in it but what this program writes", p.Pages, len(p.Files))
	signer, err := p.Verify(sign.Trust{Roots: roots, At: p.At})
	if err != nil {
		return f.fail("signature", err)
	}
	f.Signer = signer.Subject.CommonName
	f.pass("signature", "by %s, over every byte of the file, under a trusted root", f.Signer)
	for _, root := range roots {
		f.pass("root", "trusted because it was given: %s, SHA-256 %s", root.Subject.CommonName, sign.Fingerprint(root))
	}
	if len(p.Files) != 2 {
		return f.fail("files", fmt.Errorf("%d files are attached, record and statement belong there", len(p.Files)))
	}
	statementFile, recordFile := p.Files[0], p.Files[1]
	if err := f.record(recordFile.Data); err != nil {
		return f.fail("record", err)
	}
	if recordFile.Name != recordName(f.Run) || statementFile.Name != statementName(f.Run) {
		return f.fail("files", fmt.Errorf("the files %q and %q are not named after run %s", statementFile.Name, recordFile.Name, f.Run))
	}
	content, stated, err := sign.VerifyAttached(statementFile.Data, sign.Trust{Roots: roots, At: p.At})
	if err != nil {
		return f.fail("statement", err)
	}
	if !stated.Equal(signer) {
		return f.fail("statement", fmt.Errorf("statement and report are signed by different certificates"))
	}
	statement, err := decodeStatement(content)
	if err != nil {
		return f.fail("statement", err)
	}
	if statement.Name != f.Signer {
		return f.fail("statement", fmt.Errorf("it names %q, the certificate names %q", statement.Name, f.Signer))
	}
	f.pass("statement", "%s at %s: %s", statement.Name, statement.Time, statement.Meaning)
	again, err := Compose(recordFile.Data, statementFile.Data, statement)
	if err != nil {
		return f.fail("pages", err)
	}
	if err := p.SameAs(again); err != nil {
		return f.fail("pages", err)
	}
	f.Pages = "checked"
	f.pass("pages", "made again from the record they are the same to the last byte")
	f.Verified = true
	return f
}

// Package verify makes a report out of a closed record and its signed
// statement, and checks a report or a record by making everything again.
//
// It holds no keys but those it is given and trusts nothing in a file. It
// shows what was found; it repairs nothing.
//
// Order of use: Compose and sign.SignPDF to make a report; Report or Record to
// check one.
package verify

import (
	"bytes"
	"crypto/sha256"
	"crypto/x509"
	"encoding/json"
	"fmt"
	"time"

	"kymobench/procedures/record"
	"kymobench/procedures/results"
	"kymobench/reports"
	"kymobench/reports/layout1"
	"kymobench/reports/sign"
)

// Names of the files that a report carries.
func recordName(run string) string    { return run + ".record" }
func statementName(run string) string { return run + ".performed.cms" }

// ErrLayout: this program does not carry the page layout of the record.
var ErrLayout = fmt.Errorf("this program does not carry the record's page layout")

// Compose makes the finished report, with room for its signature, out of the
// bytes of a closed record and of the performed-by statement's CMS; from them
// and nothing else. The statement is taken as read: who made it is checked
// elsewhere.
func Compose(recordFile, statementCMS []byte, statement reports.Statement) ([]byte, error) {
	run, err := record.Read(bytes.NewReader(recordFile), record.Limit{})
	if err != nil {
		return nil, err
	}
	if !run.Closed {
		return nil, record.ErrNotClosed
	}
	res, stored, err := results.Stored(run.Events)
	if err != nil {
		return nil, err
	}
	if stored.Layout != layout1.Number {
		return nil, fmt.Errorf("%w: %d", ErrLayout, stored.Layout)
	}
	d, err := reports.New(run.Events, run.Head, res, stored.Layout, statement)
	if err != nil {
		return nil, err
	}
	at, err := time.Parse(time.RFC3339, statement.Time)
	if err != nil {
		return nil, fmt.Errorf("statement: time %q is not RFC 3339", statement.Time)
	}
	id := run.Head.Run
	pages, err := layout1.Render(d, []layout1.Attachment{
		{Name: statementName(id), Description: "performed-by statement, signed", Data: statementCMS},
		{Name: recordName(id), Description: "record of the run", Data: recordFile},
	})
	if err != nil {
		return nil, err
	}
	sum := sha256.Sum256(append([]byte(run.Head.Hash), statementCMS...))
	return sign.Finish(pages, sign.FinishSettings{
		Title: "Report " + id, Language: "en", ID: [16]byte(sum[:16]), At: at,
		Signer: statement.Name, Reason: statement.Meaning, Location: d.Department,
		Files: []sign.Kind{
			{Name: statementName(id), MIME: "application/pkcs7-mime", Relationship: "Supplement"},
			{Name: recordName(id), MIME: "text/plain", Relationship: "Source"},
		},
	})
}

// EncodeStatement writes the JSON that is signed.
func EncodeStatement(s reports.Statement) ([]byte, error) {
	data, err := json.Marshal(s)
	if err != nil {
		return nil, fmt.Errorf("statement: %w", err)
	}
	return data, nil
}

// decodeStatement reads it back, strictly: encoded again it is the same.
func decodeStatement(data []byte) (reports.Statement, error) {
	var s reports.Statement
	d := json.NewDecoder(bytes.NewReader(data))
	d.DisallowUnknownFields()
	if err := d.Decode(&s); err != nil {
		return reports.Statement{}, fmt.Errorf("statement: %w", err)
	}
	if again, err := EncodeStatement(s); err != nil || !bytes.Equal(again, data) {
		return reports.Statement{}, fmt.Errorf("statement: it is not written as this program writes one")
	}
	return s, nil
}

// Statement reads a signed statement that was made under one of the roots.
func Statement(cms []byte, roots []*x509.Certificate, at time.Time) (reports.Statement, error) {
	content, signer, err := sign.VerifyAttached(cms, sign.Trust{Roots: roots, At: at})
	if err != nil {
		return reports.Statement{}, err
	}
	s, err := decodeStatement(content)
	if err == nil && s.Name != signer.Subject.CommonName {
		err = fmt.Errorf("statement: it names %q, the certificate names %q", s.Name, signer.Subject.CommonName)
	}
	return s, err
}

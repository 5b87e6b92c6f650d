package main

import (
	"crypto/x509"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"time"

	"kymobench/procedures/record"
	"kymobench/procedures/results"
	"kymobench/reports"
	"kymobench/reports/sign"
	"kymobench/reports/verify"
)

// demonstrator signs what a simulated bench makes.
const demonstrator = "Dana Example (demonstration)"

// demonstrationPhrase is no secret: the keys it opens are marked as made for a
// demonstration in every name.
const demonstrationPhrase = "demonstration"

// signer is who signs, and where their department's root lies.
type signer struct {
	key  *sign.Key
	root string // path of root.pem
}

// newDemonstrationKeys makes a root and a person's key in a folder.
func newDemonstrationKeys(dir string) (signer, error) {
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return signer{}, err
	}
	now := time.Now()
	root, err := sign.NewRoot(sign.RootSettings{Department: "Hollerbrook Infirmary", NotBefore: now.Add(-time.Hour), NotAfter: now.AddDate(2, 0, 0), Demonstration: true})
	if err != nil {
		return signer{}, err
	}
	key, err := root.Issue(sign.Person{Name: demonstrator, NotBefore: now.Add(-time.Hour), NotAfter: now.AddDate(1, 0, 0)})
	if err != nil {
		return signer{}, err
	}
	s := signer{key: key, root: filepath.Join(dir, "root.pem")}
	if err := sign.SaveP12(filepath.Join(dir, "demonstration.p12"), key, demonstrationPhrase); err != nil {
		return signer{}, err
	}
	return s, writeWhole(s.root, sign.EncodeRoots(root.Certificate))
}

// demonstrationKeys loads what newDemonstrationKeys left.
func demonstrationKeys(dir string) (signer, error) {
	key, err := sign.LoadP12(filepath.Join(dir, "demonstration.p12"), demonstrationPhrase)
	return signer{key: key, root: filepath.Join(dir, "root.pem")}, err
}

// sealReport signs the performed-by statement of a closed record, once, makes
// the report and signs it. The statement stays beside the record and is used
// again when the report is made again.
func sealReport(recordPath, reportPath string, keys signer) error {
	data, err := os.ReadFile(recordPath)
	if err != nil {
		return err
	}
	run, err := record.ReadClosed(recordPath)
	if err != nil {
		return err
	}
	if _, _, err := results.Stored(run.Events); err != nil {
		return err
	}
	cmsPath := strings.TrimSuffix(recordPath, ".record") + ".performed.cms"
	cms, statement, err := statementFor(cmsPath, run.Head, keys)
	if err != nil {
		return err
	}
	finished, err := verify.Compose(data, cms, statement)
	if err != nil {
		return err
	}
	signed, err := sign.SignPDF(finished, keys.key)
	if err != nil {
		return err
	}
	return writeWhole(reportPath, signed)
}

// statementFor reads the statement that stands beside the record, or makes and
// signs it.
func statementFor(path string, head record.Head, keys signer) ([]byte, reports.Statement, error) {
	roots := []*x509.Certificate{keys.key.Chain[len(keys.key.Chain)-1]}
	if cms, err := os.ReadFile(path); err == nil {
		s, err := verify.Statement(cms, roots, time.Now())
		return cms, s, err
	} else if !errors.Is(err, os.ErrNotExist) {
		return nil, reports.Statement{}, err
	}
	s := reports.Statement{
		Schema: reports.StatementSchema, Run: head.Run, Lines: head.Lines, Bytes: head.Bytes, Head: head.Hash, Role: reports.Performed,
		Name: keys.key.Certificate.Subject.CommonName, Meaning: "I carried out this run and stand for its record.",
		Time: time.Now().UTC().Format(time.RFC3339),
	}
	data, err := verify.EncodeStatement(s)
	if err != nil {
		return nil, s, err
	}
	cms, err := sign.SignAttached(data, keys.key)
	if err != nil {
		return nil, s, err
	}
	return cms, s, writeWhole(path, cms)
}

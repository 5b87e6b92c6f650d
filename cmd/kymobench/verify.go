package main

import (
	"bytes"
	"crypto/x509"
	"fmt"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"kymobench/reports/sign"
	"kymobench/reports/verify"
)

type verifyOptions struct {
	trust string
	json  bool
}

func newVerifyCommand(io streams) *cobra.Command {
	var o verifyOptions
	cmd := &cobra.Command{
		Use:   "verify FILE.pdf|FILE.record",
		Short: "Check a signed report or a record",
		Long: `Checks a report to the last byte: structure, signature under the department's
root, the record and statement it carries, every result computed anew, every
page made again. The root is --trust, or trust/root.pem beside the report's
folder. Exit 5 when anything does not verify.`,
		Example: `  kymobench verify reports/20260601T133700Z-0001.pdf --trust trust/root.pem`,
		Args:    oneFile,
		RunE:    func(_ *cobra.Command, args []string) error { return runVerify(args[0], o, io) },
	}
	cmd.Flags().StringVar(&o.trust, "trust", "", "the department's root, a PEM file")
	cmd.Flags().BoolVar(&o.json, "json", false, "one JSON document on stdout")
	return cmd
}

func runVerify(path string, o verifyOptions, io streams) error {
	data, err := os.ReadFile(path)
	if err != nil {
		return err
	}
	var f verify.Findings
	if bytes.HasPrefix(data, []byte(`{"n":`)) {
		f = verify.Record(data)
	} else {
		roots, err := rootsFor(path, o.trust)
		if err != nil {
			return err
		}
		f = verify.Report(data, roots)
	}
	if o.json {
		err = encode(io.out, struct {
			Schema string `json:"schema"`
			verify.Findings
		}{"kymobench/verify/1", f})
	} else {
		err = printFindings(path, f, io)
	}
	if err == nil && !f.Verified {
		return ended{exitNotVerified}
	}
	return err
}

func printFindings(path string, f verify.Findings, io streams) error {
	for _, c := range f.Checks {
		word := "ok    "
		if !c.OK {
			word = "FAILED"
		}
		fmt.Fprintf(io.out, "%s %-10s %s\n", word, c.Check, c.Text)
	}
	for _, u := range f.Unknown {
		fmt.Fprintf(io.out, "cannot be known here: %s\n", u)
	}
	result := "verified"
	if !f.Verified {
		result = "NOT verified"
	}
	_, err := fmt.Fprintf(io.out, "%s: %s\n", path, result)
	return err
}

// rootsFor reads the root to trust; nothing is trusted because a report says so.
func rootsFor(path, trust string) ([]*x509.Certificate, error) {
	if trust == "" {
		absolute, err := filepath.Abs(path)
		if err != nil {
			return nil, err
		}
		trust = filepath.Join(folder{filepath.Dir(filepath.Dir(absolute))}.trust(), "root.pem")
	}
	text, err := os.ReadFile(trust)
	if err != nil {
		return nil, usageError{fmt.Errorf("the root to trust, named with --trust: %w", err)}
	}
	roots, err := sign.LoadRoots(text)
	if err != nil {
		return nil, usageError{fmt.Errorf("%s: %w", trust, err)}
	}
	return roots, nil
}

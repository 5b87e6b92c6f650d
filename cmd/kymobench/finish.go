package main

import (
	"context"
	"fmt"
	"path/filepath"
	"strings"

	"kymobench/procedures/results"
)

// finish carries the job, seals its reports and shows how it went. truths are
// those of a simulated bench's UUTs, or none.
func finish(ctx context.Context, j job, keys signer, asJSON bool, truths []truth, io streams) error {
	all, err := j.carry(ctx)
	if err != nil {
		return err
	}
	var documents []runDocument
	code := exitDone
	for i, out := range all {
		path, err := j.seal(out, keys, io)
		if err != nil {
			return err
		}
		d := documentOf(out.Results, out.record)
		if out.Stopped {
			d = runDocument{Schema: "kymobench/run/1", Verdict: "inconclusive", Record: out.record}
			d.Reasons, d.Limits = []results.Reason{{Code: "stopped", Text: out.Why}}, []results.Limit{}
		}
		if len(all) > 1 {
			d.SerialNumber = out.serial
		}
		if i < len(truths) {
			d.Truth = &truths[i]
		}
		if path != "" {
			d.Report = &path
		}
		documents = append(documents, d)
		if !asJSON && !out.Stopped {
			if len(all) > 1 {
				fmt.Fprintf(io.out, "UUT %s\n", out.serial)
			}
			show(out, path, keys, io)
		}
		code = worse(code, out)
	}
	if asJSON {
		var document any = documents[0]
		if len(documents) > 1 {
			document = runsDocument{"kymobench/runs/1", documents}
		}
		if err := encode(io.out, document); err != nil {
			return err
		}
	}
	if code != exitDone {
		return ended{code}
	}
	return nil
}

// runsDocument is the public JSON of a run with several UUTs.
type runsDocument struct {
	Schema string        `json:"schema"`
	Runs   []runDocument `json:"runs"`
}

// worse is the exit code of UUTs together: rejected when one is, else
// inconclusive when one is.
func worse(code int, out outcome) int {
	own := exitInconclusive
	if !out.Stopped {
		own = exitFor(out.Results)
	}
	switch {
	case code == exitRejected || own == exitDone:
		return code
	default:
		return own
	}
}

// seal makes the signed report of a closed record and returns its path, "" when
// there is none.
func (j job) seal(out outcome, keys signer, io streams) (string, error) {
	switch {
	case out.Stopped:
		fmt.Fprintf(io.err, "stopped and vented: %s\nthe record stays open: %s\n", out.Why, out.record)
		return "", nil
	case keys.key == nil:
		fmt.Fprintln(io.err, "record closed; no key is named in the bench file, so no report was signed")
		return "", nil
	}
	fmt.Fprintln(io.err, "record closed, making the report")
	path := filepath.Join(j.folder.reports(), strings.TrimSuffix(filepath.Base(out.record), ".record")+".pdf")
	return path, sealReport(out.record, path, keys)
}

// show prints what a run found and the files it left.
func show(out outcome, path string, keys signer, io streams) {
	printRun(io.out, out.Results)
	fmt.Fprintf(io.out, "record: %s\n", out.record)
	if path != "" {
		fmt.Fprintf(io.out, "report: %s\ntrust:  %s\n", path, keys.root)
	}
}

package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"slices"

	"github.com/spf13/cobra"

	"kymobench/bench/tomlfile"
	"kymobench/procedures/record"
	"kymobench/procedures/recorded"
)

// streams are the three files of the command.
type streams struct {
	in       io.Reader
	out, err io.Writer
}

// Exit codes of the command.
const (
	exitDone         = 0
	exitError        = 1
	exitUsage        = 2 // or a file that was refused
	exitRejected     = 3
	exitInconclusive = 4 // or undetermined
	exitNotVerified  = 5
)

// version of the program, in records and reports.
const version = "0.1.0"

// ended carries an exit code that is no error: the command did its work, and
// its output says what it found.
type ended struct{ code int }

func (e ended) Error() string { return fmt.Sprintf("exit %d", e.code) }

// usageError is a wrong call, or a file that cannot be taken.
type usageError struct{ err error }

func (e usageError) Error() string { return e.err.Error() }
func (e usageError) Unwrap() error { return e.err }

func usagef(format string, a ...any) error { return usageError{fmt.Errorf(format, a...)} }

func newRootCommand(io streams) *cobra.Command {
	root := &cobra.Command{
		Use:   "kymobench",
		Short: "Test invasive blood-pressure transducers on the bench",
		Long: `Kymobench takes an invasive blood-pressure transducer through an inspection on
the bench: zero, leak, set pressures up and down, step response; judges it
against limits knowing its own uncertainty; and leaves a signed report.

Exit codes: 0 done; 1 error; 2 usage or a refused file; 3 rejected;
4 inconclusive or undetermined; 5 does not verify.`,
		Example:       `  kymobench demo`,
		SilenceErrors: true,
		SilenceUsage:  true,
		Args:          cobra.ArbitraryArgs,
		RunE: func(cmd *cobra.Command, args []string) error {
			if len(args) == 0 {
				return cmd.Help()
			}
			if like := cmd.SuggestionsFor(args[0]); len(like) > 0 {
				return usagef("there is no command %q; did you mean %q?", args[0], like[0])
			}
			return usagef("there is no command %q; kymobench --help lists them", args[0])
		},
	}
	root.SuggestionsMinimumDistance = 2
	root.SetIn(io.in)
	root.SetOut(io.out)
	root.SetErr(io.err)
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error { return usageError{err} })
	root.AddCommand(newDemoCommand(io), newRunCommand(io), newSimulateCommand(io), newReportCommand(io), newReplayCommand(io), newPortsCommand(io), newExchangeCommand(io), newCheckCommand(io), newPrimeCommand(io), newVerifyCommand(io), newJudgeCommand(io), newExplainCommand(io), newFitCommand(io), newVersionCommand(io))
	return root
}

func newVersionCommand(io streams) *cobra.Command {
	return &cobra.Command{
		Use: "version", Short: "Print the version", Args: cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			_, err := fmt.Fprintln(io.out, "kymobench "+version)
			return err
		},
	}
}

// problem is an error for programs.
type problem struct {
	Schema string `json:"schema"`
	Code   string `json:"code"`
	Text   string `json:"text"`
	File   string `json:"file"`
	Line   int    `json:"line"`
	Column int    `json:"column"`
}

// report shows an error, where --json was asked for as one document, and
// returns the exit code.
func report(err error, args []string, io streams) int {
	var done ended
	switch {
	case err == nil:
		return exitDone
	case errors.As(err, &done):
		return done.code
	}
	code, p := classify(err)
	if slices.Contains(args, "--json") {
		encoder := json.NewEncoder(io.out)
		if err := encoder.Encode(p); err != nil {
			return exitError
		}
		return code
	}
	fmt.Fprintln(io.err, "kymobench: "+p.Text)
	return code
}

// classify is the table of error codes and exit codes.
func classify(err error) (int, problem) {
	p := problem{Schema: "kymobench/error/1", Code: "error", Text: err.Error()}
	var file *recorded.FileError
	var toml *tomlfile.Error
	var chain *record.ChainError
	var usage usageError
	switch {
	case errors.As(err, &file):
		p.Code, p.File, p.Line, p.Column = "file_refused", file.File, file.Line, file.Column
		return exitUsage, p
	case errors.As(err, &toml):
		p.Code, p.File, p.Line, p.Column = "file_refused", toml.File, toml.Line, toml.Column
		return exitUsage, p
	case errors.As(err, &chain):
		p.Code = "record_damaged"
		return exitNotVerified, p
	case errors.Is(err, record.ErrNotClosed), errors.Is(err, record.ErrTorn):
		p.Code, p.Text = "record_open", p.Text+"; the run was stopped or is still going, and only a closed record has a report"
		return exitUsage, p
	case errors.Is(err, record.ErrNoOpening):
		p.Code = "no_record"
		return exitUsage, p
	case errors.Is(err, fs.ErrNotExist):
		p.Code = "file_missing"
		return exitUsage, p
	case errors.As(err, &usage):
		p.Code = "usage"
		return exitUsage, p
	}
	return exitError, p
}

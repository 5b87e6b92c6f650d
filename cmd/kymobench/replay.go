package main

import (
	"bytes"
	"context"
	"fmt"
	"os"
	"path/filepath"

	"github.com/spf13/cobra"

	"kymobench/bench/line"
	"kymobench/bench/setup"
	"kymobench/bench/transcript"
	"kymobench/procedures"
	"kymobench/procedures/record"
	"kymobench/procedures/run"
)

func newReplayCommand(io streams) *cobra.Command {
	var out string
	cmd := &cobra.Command{
		Use:   "replay TRANSCRIPT RECORD...",
		Short: "Run a transcript through the drivers again and compare the records",
		Long: `Takes the bytes that a run kept with --transcript through the same drivers again,
with the bench file and the procedure that stand in its records (one for each
UUT, in order), and compares the new records with them byte by byte.

Exit codes: 0 the same records; 5 another one.`,
		Example: `  kymobench replay run.transcript runs/20260601T110310Z-0001.record`,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) < 2 {
				return usagef("a transcript and a record are needed")
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			return runReplay(cmd.Context(), args[0], args[1:], out, io)
		},
	}
	cmd.Flags().StringVar(&out, "out", "", "folder to leave the new records in; default none")
	return cmd
}

func runReplay(ctx context.Context, path string, records []string, out string, io streams) error {
	file, err := os.Open(path)
	if err != nil {
		return err
	}
	defer file.Close()
	player, err := transcript.Read(file)
	if err != nil {
		return usageError{fmt.Errorf("%s: %w", path, err)}
	}
	dir := out
	if dir == "" {
		if dir, err = os.MkdirTemp("", "kymobench-replay-"); err != nil {
			return err
		}
		defer os.RemoveAll(dir)
	}
	j, err := jobOf(records)
	if err != nil {
		return err
	}
	j.ports, j.folder = playedPorts{player}, folder{dir}
	if err := j.folder.make(); err != nil {
		return err
	}
	all, err := j.carry(ctx)
	if player.Err() != nil {
		return usageError{fmt.Errorf("%s: %w", path, player.Err())}
	}
	if err != nil {
		return err
	}
	same := true
	for i, o := range all {
		line, err := firstDifference(records[i], o.record)
		if err != nil {
			return err
		}
		if line == 0 {
			fmt.Fprintf(io.out, "the same record: %s\n", filepath.Base(records[i]))
			continue
		}
		same = false
		fmt.Fprintf(io.out, "another record: %s differs from line %d on\n", filepath.Base(records[i]), line)
	}
	if !same {
		return ended{exitNotVerified}
	}
	return nil
}

// jobOf puts together the job that left these records.
func jobOf(records []string) (job, error) {
	j := job{covered: func(string) error { return nil }, committer: func(p record.Poster) record.Committer { return record.NewDisk(p) }}
	for i, path := range records {
		read, err := record.ReadFile(path)
		if err != nil {
			return j, err
		}
		var stored record.StoredResults
		var uut record.UUT
		for _, e := range read.Events {
			switch e.Kind {
			case record.KindOpened:
				var opened record.Opened
				if opened, err = record.Decode[record.Opened](e); err == nil {
					j.opened = append(j.opened, opened)
				}
			case record.KindProcedure:
				var f record.File
				if f, err = record.Decode[record.File](e); err == nil && i == 0 {
					j.definition, err = procedures.Load(f.Name, []byte(f.Text))
				}
			case record.KindBenchFile:
				var f record.File
				if f, err = record.Decode[record.File](e); err == nil && i == 0 {
					j.file, err = setup.Load(f.Name, []byte(f.Text))
				}
			case record.KindOverride:
				var o record.Override
				o, err = record.Decode[record.Override](e)
				j.overdue = o.Reason
			case record.KindUUT:
				uut, err = record.Decode[record.UUT](e)
			case record.KindResults:
				stored, err = record.Decode[record.StoredResults](e)
			}
			if err != nil {
				return j, fmt.Errorf("%s, line %d: %w", path, e.Line, err)
			}
		}
		j.uuts = append(j.uuts, marks{uut.SerialNumber, uut.Model, uut.Lot})
		if j.layout = stored.Layout; j.layout == 0 {
			return j, usagef("%s is not closed: only a whole run can be held against its transcript", path)
		}
	}
	if j.file == nil || j.definition == nil || len(j.opened) != len(records) {
		return j, usagef("%s names no bench file or procedure", records[0])
	}
	j.console = func(line.Inbox) run.Operator { return silent{} }
	return j, nil
}

// silent is nobody: the answers come from the transcript.
type silent struct{}

func (silent) Tell(string)   {}
func (silent) Prompt(string) {}

// firstDifference gives the first line in which two files differ, 0 for none.
func firstDifference(a, b string) (int, error) {
	x, err := os.ReadFile(a)
	if err != nil {
		return 0, err
	}
	y, err := os.ReadFile(b)
	if err != nil || bytes.Equal(x, y) {
		return 0, err
	}
	one, other := bytes.Split(x, []byte("\n")), bytes.Split(y, []byte("\n"))
	for i := range min(len(one), len(other)) {
		if !bytes.Equal(one[i], other[i]) {
			return i + 1, nil
		}
	}
	return min(len(one), len(other)) + 1, nil
}

package main

import (
	"bytes"
	"errors"
	"io"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"kymobench/bench/simulated"
)

// A judgement has the exit codes of a run, and leaves the record as it is, byte
// for byte. A record that is damaged is not judged.
func TestJudgeExitCodes(t *testing.T) {
	out, _ := simulatedRun(t, t.TempDir(), 5, simulated.Good)
	before, err := os.ReadFile(out.record)
	if err != nil {
		t.Fatal(err)
	}
	limits := func(low, high string) string {
		path := filepath.Join(t.TempDir(), "limits.toml")
		text := "schema = \"kymobench/limits/1\"\ntitle = \"x\"\nuut_kind = \"bare transducer\"\n[decision]\nrule = \"four_outcome\"\nguard_factor = 1.0\n" +
			"conditional_pass = \"inconclusive\"\nconditional_fail = \"rejected\"\n[[limit]]\nname = \"sensitivity\"\nlow = \"" + low + " uV/V/mmHg\"\nhigh = \"" + high +
			" uV/V/mmHg\"\nresolution = \"0.00001 uV/V/mmHg\"\norigin = \"x\"\norigin_status = \"department\"\n"
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	for _, c := range []struct {
		low, high string
		code      int
	}{{"4.9", "5.1", exitDone}, {"5.2", "5.3", exitRejected}, {"4.9999", "5.0001", exitInconclusive}} {
		var text bytes.Buffer
		err := runJudge(out.record, judgeOptions{limits: limits(c.low, c.high)}, streams{out: &text, err: io.Discard})
		code := exitDone
		var done ended
		if errors.As(err, &done) {
			code = done.code
		} else if err != nil {
			t.Fatal(err)
		}
		// The measured 5 uV/V/mmHg within 0.4 % may by chance lie outside the last,
		// narrow limit by more than its uncertainty: a rejection then.
		if code != c.code && !(c.code == exitInconclusive && code == exitRejected) {
			t.Errorf("%s to %s: exit %d, want %d\n%s", c.low, c.high, code, c.code, text.String())
		}
		if !strings.HasPrefix(text.String(), notItsOwn+"\n") {
			t.Errorf("it does not say on top what it is: %s", text.String())
		}
	}
	if after, err := os.ReadFile(out.record); err != nil || !bytes.Equal(before, after) {
		t.Errorf("the record was touched, %v", err)
	}
	damaged := bytes.Replace(before, []byte(`"k":"point"`), []byte(`"k":"Point"`), 1)
	path := filepath.Join(t.TempDir(), "damaged.record")
	if err := os.WriteFile(path, damaged, 0o600); err != nil {
		t.Fatal(err)
	}
	err = runJudge(path, judgeOptions{limits: "incoming"}, streams{out: io.Discard, err: io.Discard})
	if code, _ := classify(err); code != exitNotVerified {
		t.Errorf("a damaged record: %v", err)
	}
}

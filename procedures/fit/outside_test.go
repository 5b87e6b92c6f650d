package fit

import (
	"bytes"
	"encoding/json"
	"os"
	"os/exec"
	"strings"
	"testing"
)

// python runs a script of testdata with a JSON document on its input and reads
// one from its output. Debian's python3 stands second, for the first on the
// path may be one without numpy, scipy and statsmodels. Without any the test is
// skipped, and fails where KYMOBENCH_OUTSIDE=1 says that all programs are there.
func python(t testing.TB, script string, in, out any) {
	t.Helper()
	text, err := json.Marshal(in)
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"python3", "/usr/bin/python3"} {
		var stderr bytes.Buffer
		cmd := exec.Command(name, "testdata/"+script)
		cmd.Stdin, cmd.Stderr = bytes.NewReader(text), &stderr
		// One thread: numpy's own would spend longer starting than working.
		cmd.Env = append(os.Environ(), "OMP_NUM_THREADS=1", "OPENBLAS_NUM_THREADS=1")
		answer, err := cmd.Output()
		switch {
		case err == nil:
			if err := json.Unmarshal(answer, out); err != nil {
				t.Fatalf("%s: %v", script, err)
			}
			return
		case cmd.ProcessState != nil && !strings.Contains(stderr.String(), "ModuleNotFoundError"):
			t.Fatalf("%s: %v\n%s", script, err, stderr.String())
		}
	}
	if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
		t.Fatal("no python3 with numpy, scipy and statsmodels, and KYMOBENCH_OUTSIDE=1 says there is one")
	}
	t.Skip("no python3 with numpy, scipy and statsmodels")
}

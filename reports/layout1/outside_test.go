package layout1

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// program finds a program that is not part of Go. Without it the test is
// skipped, and fails when KYMOBENCH_OUTSIDE=1 says that all of them are there.
func program(t *testing.T, name string) string {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
			t.Fatalf("%s is not installed, and KYMOBENCH_OUTSIDE=1 says it is", name)
		}
		t.Skipf("%s is not installed", name)
	}
	return path
}

func onDisk(t *testing.T, pdf []byte) string {
	t.Helper()
	file := filepath.Join(t.TempDir(), "report.pdf")
	if err := os.WriteFile(file, pdf, 0o600); err != nil {
		t.Fatal(err)
	}
	return file
}

func TestQpdfFindsNothing(t *testing.T) {
	qpdf := program(t, "qpdf")
	for name, m := range kinds(t) {
		pdf := render(t, m)
		if out, err := exec.Command(qpdf, "--check", onDisk(t, pdf)).CombinedOutput(); err != nil {
			t.Errorf("%s: %v\n%s", name, err, out)
		}
		// It notices a page whose content was cut off.
		broken := bytes.Replace(pdf, []byte("endstream"), []byte("endstrea "), 1)
		if _, err := exec.Command(qpdf, "--check", onDisk(t, broken)).CombinedOutput(); err == nil {
			t.Errorf("%s: qpdf took a broken stream for sound", name)
		}
	}
}

// What another program reads from the pages: the run on each, its number, and
// every figure of the limits.
func TestPdftotextReadsEverything(t *testing.T) {
	pdftotext := program(t, "pdftotext")
	for name, m := range kinds(t) {
		d := m.document(t)
		out, err := exec.Command(pdftotext, "-layout", onDisk(t, render(t, m)), "-").Output()
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		pages := strings.Split(strings.TrimSuffix(string(out), "\f"), "\f")
		for i, p := range pages {
			for _, want := range []string{"Run " + m.run, fmt.Sprintf("page %d of %d", i+1, len(pages))} {
				if !strings.Contains(p, want) {
					t.Errorf("%s, page %d: no %q", name, i+1, want)
				}
			}
		}
		squeeze := strings.NewReplacer(" ", "", "\u00a0", "").Replace
		for _, l := range d.Limits {
			want := l.Name + l.Value
			if l.Expanded != "" {
				want += "±" + l.Expanded
			}
			want = squeeze(want + l.Unit + l.Limit)
			found := false
			for _, line := range strings.Split(string(out), "\n") {
				line = squeeze(line)
				found = found || strings.HasPrefix(line, want) && strings.HasSuffix(line, squeeze(l.Risk))
			}
			if !found {
				t.Errorf("%s: no line says %s, risk %s", name, want, l.Risk)
			}
		}
	}
}

func TestAttachmentsComeOutAsTheyWentIn(t *testing.T) {
	pdfdetach := program(t, "pdfdetach")
	m := rejected(t)
	file := onDisk(t, render(t, m))
	attached := m.attachments()
	slices.Reverse(attached) // the pages have them by name
	for i, a := range attached {
		out := filepath.Join(t.TempDir(), "out")
		if text, err := exec.Command(pdfdetach, "-save", fmt.Sprint(i+1), "-o", out, file).CombinedOutput(); err != nil {
			t.Fatalf("%v\n%s", err, text)
		}
		got, err := os.ReadFile(out)
		if err != nil || !bytes.Equal(got, a.Data) {
			t.Errorf("%s: %v, %d bytes of %d", a.Name, err, len(got), len(a.Data))
		}
	}
	list, err := exec.Command(pdfdetach, "-list", file).Output()
	if err != nil || !strings.Contains(string(list), m.run+".record") || !strings.Contains(string(list), m.run+".performed.cms") {
		t.Errorf("%v\n%s", err, list)
	}
}

package layout1

import (
	"os"
	"path/filepath"
	"testing"
)

// KYMOBENCH_PAGES names a folder in which the test documents are left, to be
// looked at.
func TestLook(t *testing.T) {
	dir := os.Getenv("KYMOBENCH_PAGES")
	if dir == "" {
		t.Skip("KYMOBENCH_PAGES names no folder to leave the pages in")
	}
	for name, m := range kinds(t) {
		if err := os.WriteFile(filepath.Join(dir, name+".pdf"), render(t, m), 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

package main

import (
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/pelletier/go-toml/v2"
)

// note is a SOURCE.toml: where data come from.
type note struct {
	Title       string            `toml:"title"`
	Author      string            `toml:"author"`
	Edition     string            `toml:"edition"`
	Year        int               `toml:"year"`
	Page        string            `toml:"page"`
	Obtained    string            `toml:"obtained"`
	Date        toml.LocalDate    `toml:"date"`
	Terms       string            `toml:"terms"`
	Transcribed string            `toml:"transcribed"`
	Errata      string            `toml:"errata"`
	SHA256      map[string]string `toml:"sha256"`
}

// Every folder of published data has its note, every file the digest noted,
// and a test that reads it by name.
func TestSources(t *testing.T) {
	var tests bytes.Buffer
	sources(t, func(_, path string, text []byte) {
		if strings.HasSuffix(path, "_test.go") && filepath.Base(path) != "sources_test.go" {
			tests.Write(text)
		}
	})
	notes := 0
	for _, room := range []string{"testdata", "procedures", "bench", "reports"} {
		err := filepath.WalkDir(filepath.Join(root, room), func(path string, e fs.DirEntry, err error) error {
			if err != nil || e.Name() != "SOURCE.toml" {
				return err
			}
			notes++
			checkNote(t, path, tests.Bytes())
			return nil
		})
		if err != nil {
			t.Fatal(err)
		}
	}
	if notes == 0 {
		t.Fatal("no SOURCE.toml was found")
	}
	entries, err := os.ReadDir(filepath.Join(root, "testdata/sources"))
	if err != nil || len(entries) == 0 {
		t.Fatalf("testdata/sources: %v", err)
	}
	for _, e := range entries {
		if _, err := os.Stat(filepath.Join(root, "testdata/sources", e.Name(), "SOURCE.toml")); err != nil {
			t.Errorf("%s has no SOURCE.toml", e.Name())
		}
	}
}

func checkNote(t *testing.T, path string, tests []byte) {
	t.Helper()
	text, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	var n note
	d := toml.NewDecoder(bytes.NewReader(text))
	d.DisallowUnknownFields()
	if err := d.Decode(&n); err != nil {
		t.Errorf("%s: %v", path, err)
		return
	}
	if n.Title == "" || n.Author == "" || n.Obtained == "" || n.Terms == "" || n.Transcribed == "" || n.Date.Year == 0 || len(n.SHA256) == 0 {
		t.Errorf("%s is not complete", path)
	}
	dir := filepath.Dir(path)
	files, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		if f.Name() == "SOURCE.toml" {
			continue
		}
		data, err := os.ReadFile(filepath.Join(dir, f.Name()))
		if err != nil {
			t.Fatal(err)
		}
		sum := sha256.Sum256(data)
		if n.SHA256[f.Name()] != hex.EncodeToString(sum[:]) {
			t.Errorf("%s/%s is not the file that the note names", dir, f.Name())
		}
		// A script that made the other files is named where the note says how.
		made := strings.Contains(n.Obtained+n.Transcribed, f.Name())
		if !made && !bytes.Contains(tests, []byte(f.Name())) {
			t.Errorf("%s/%s is read by no test", dir, f.Name())
		}
	}
	if len(files)-1 != len(n.SHA256) {
		t.Errorf("%s names %d files, %d are there", path, len(n.SHA256), len(files)-1)
	}
}

package main

import (
	"bytes"
	"fmt"
	"go/parser"
	"go/token"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

const root = "../.."

// mayImport says which packages of ours a package may import in its own files
// (tests are exempt). A name stands for that package alone; a leaf has none.
func mayImport() map[string][]string {
	return map[string][]string{
		"bench":            {"bench/line", "bench/quantity"},
		"bench/quantity":   {"bench/checksum"},
		"bench/line":       {},
		"bench/checksum":   {},
		"bench/clock":      {},
		"bench/tomlfile":   {},
		"bench/serialport": {"bench/line"},
		"bench/transcript": {"bench/line"},
		"bench/simulated":  {"bench/line", "bench/quantity"},
		"bench/setup": {"bench", "bench/line", "bench/quantity", "bench/tomlfile", "bench/checksum", "bench/instruments/scpi", "bench/instruments/lines",
			"bench/instruments/frames", "bench/instruments/modbus", "bench/instruments/relay", "bench/instruments/running"},

		"bench/instrumenttest":      {"bench", "bench/line", "bench/quantity"},
		"bench/instruments/asked":   {"bench", "bench/line", "bench/quantity"},
		"bench/instruments/scpi":    {"bench", "bench/instruments/asked", "bench/line", "bench/quantity"},
		"bench/instruments/lines":   {"bench", "bench/line", "bench/quantity"},
		"bench/instruments/modbus":  {"bench", "bench/instruments/asked", "bench/checksum", "bench/line", "bench/quantity"},
		"bench/instruments/running": {"bench", "bench/instruments/asked", "bench/line", "bench/quantity"},
		"bench/instruments/relay":   {"bench", "bench/line"},
		"bench/instruments/frames":  {"bench", "bench/line", "bench/quantity"},

		"procedures":             {"bench/quantity", "bench/tomlfile", "procedures/verdict"},
		"procedures/fit":         {},
		"procedures/step":        {},
		"procedures/pulse":       {},
		"procedures/tubing":      {},
		"procedures/ready":       {},
		"procedures/uncertainty": {},
		"procedures/verdict":     {"bench/quantity", "procedures/uncertainty"}, // the risk of a decision and its interval are of one distribution
		"procedures/record":      {"bench", "bench/line", "bench/quantity"},
		"procedures/results": {"bench/line", "bench/quantity", "procedures", "procedures/record", "procedures/verdict",
			"procedures/fit", "procedures/step", "procedures/pulse", "procedures/tubing", "procedures/ready", "procedures/uncertainty"},
		"procedures/recorded": {"bench/line", "bench/quantity", "procedures/record"},
		"procedures/run": {"bench", "bench/clock", "bench/line", "bench/quantity", "procedures", "procedures/record", "procedures/ready",
			"procedures/results"},
		"reports":         {"bench/quantity", "procedures/record", "procedures/results"},
		"reports/layout1": {"bench/quantity", "procedures/record", "procedures/results", "reports"},
		"reports/sign":    {},
		"reports/verify": {"bench/quantity", "procedures/record", "procedures/results", "reports", "reports/layout1",
			"reports/sign"},
	}
}

// onlyImporter says who alone may import a library.
func onlyImporter() map[string]string {
	return map[string]string{"go.bug.st/serial": "bench/serialport", "github.com/pelletier/go-toml/v2": "bench/tomlfile"}
}

// breaches holds the imports of one package against the rules.
func breaches(pkg string, imports []string) []string {
	var out []string
	allowed, known := mayImport()[pkg]
	for _, path := range imports {
		own, ours := strings.CutPrefix(path, "kymobench/")
		switch {
		case ours && pkg == "cmd/kymobench":
		case ours && !known:
			out = append(out, fmt.Sprintf("%s: there is no rule for this package", pkg))
		case ours && !slices.Contains(allowed, own):
			out = append(out, fmt.Sprintf("%s must not import %s", pkg, own))
		}
		for library, owner := range onlyImporter() {
			if (path == library || strings.HasPrefix(path, library+"/")) && pkg != owner {
				out = append(out, fmt.Sprintf("%s must not import %s: only %s does", pkg, path, owner))
			}
		}
	}
	return out
}

// sources walks the Go files of the house.
func sources(t *testing.T, visit func(pkg, path string, text []byte)) {
	t.Helper()
	for _, room := range []string{"bench", "cmd", "procedures", "reports"} {
		err := filepath.WalkDir(filepath.Join(root, room), func(path string, e fs.DirEntry, err error) error {
			if err != nil || e.IsDir() || !strings.HasSuffix(path, ".go") {
				return err
			}
			text, err := os.ReadFile(path)
			if err != nil {
				return err
			}
			pkg, err := filepath.Rel(root, filepath.Dir(path))
			visit(filepath.ToSlash(pkg), path, text)
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
	}
}

func importsOf(t *testing.T, path string, text []byte) []string {
	t.Helper()
	file, err := parser.ParseFile(token.NewFileSet(), path, text, parser.ImportsOnly)
	if err != nil {
		t.Fatal(err)
	}
	var out []string
	for _, i := range file.Imports {
		p, err := strconv.Unquote(i.Path.Value)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, p)
	}
	return out
}

func TestLayout(t *testing.T) {
	seen := map[string]bool{}
	sources(t, func(pkg, path string, text []byte) {
		seen[pkg] = true
		lines := bytes.Count(text, []byte("\n"))
		if strings.HasSuffix(path, "_test.go") {
			if strings.HasPrefix(pkg, "bench/simulated") {
				for _, i := range importsOf(t, path, text) {
					if strings.HasPrefix(i, "kymobench/bench/instruments") || i == "kymobench/bench/setup" {
						t.Errorf("%s imports %s: a shared mistake must not confirm itself", path, i)
					}
				}
			}
			return
		}
		if lines > 450 {
			t.Errorf("%s has %d lines: split it by topic", path, lines)
		}
		if pkg == "cmd/kymobench" && filepath.Base(path) == "main.go" && lines > 40 {
			t.Errorf("main.go has %d lines, 40 at most", lines)
		}
		for _, b := range breaches(pkg, importsOf(t, path, text)) {
			t.Error(b)
		}
	})
	for pkg := range mayImport() {
		if !seen[pkg] {
			t.Errorf("a rule names the package %s, which is not there", pkg)
		}
	}
	for _, owner := range onlyImporter() {
		if !seen[owner] {
			t.Errorf("a rule names the package %s, which is not there", owner)
		}
	}
}

// A planted breach of each kind is found.
func TestLayoutFindsBreaches(t *testing.T) {
	planted := []byte("package simulated\nimport (\n\t_ \"kymobench/bench/instruments/scpi\"\n\t_ \"go.bug.st/serial/enumerator\"\n)\n")
	if got := breaches("bench/simulated", importsOf(t, "planted.go", planted)); len(got) != 2 {
		t.Errorf("found %q", got)
	}
	if got := breaches("procedures/elsewhere", []string{"kymobench/bench"}); len(got) != 1 {
		t.Errorf("a package without a rule: %q", got)
	}
	if got := breaches("reports", []string{"kymobench/procedures/step"}); len(got) != 1 {
		t.Errorf("a report that reaches the numerics: %q", got)
	}
	if got := breaches("procedures/run", []string{"fmt", "kymobench/bench/line"}); len(got) != 0 {
		t.Errorf("allowed imports: %q", got)
	}
}

// The top level holds the rooms and nothing else.
func TestTopLevel(t *testing.T) {
	entries, err := os.ReadDir(root)
	if err != nil {
		t.Fatal(err)
	}
	allowed := []string{"cmd", "bench", "procedures", "reports", "testdata", "go.mod", "go.sum", "README.md", "DEVELOPERS.md"}
	for _, e := range entries {
		name := e.Name()
		if !strings.HasPrefix(name, ".") && !slices.Contains(allowed, name) && !strings.HasPrefix(name, "kymobench") {
			t.Errorf("%s does not belong at the top level", name)
		}
	}
}

// The check printed in DEVELOPERS.md is the one that is tested.
func TestDevelopersPrintsTheCheck(t *testing.T) {
	text, err := os.ReadFile(filepath.Join(root, "DEVELOPERS.md"))
	if err != nil {
		t.Fatal(err)
	}
	script, err := os.ReadFile(filepath.Join(root, "procedures/record/testdata/check-record.sh"))
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Contains(text, script) || bytes.Count(script, []byte("\n")) > 12 {
		t.Errorf("DEVELOPERS.md does not print check-record.sh, or it has more than 12 lines")
	}
}

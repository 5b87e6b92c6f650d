package layout1

import (
	"bytes"
	"encoding/xml"
	"errors"
	"io"
	"regexp"
	"strings"
	"testing"

	"kymobench/procedures/results"
	"kymobench/reports"
)

func charted(fn, zeta float64, missing ...int) *reports.Step {
	s, traces := steps(fn, zeta, 3, missing...)
	return reports.StepOf(results.Results{Step: s, Traces: traces})
}

// The chart is one page, reads the same twice, and no text lies on another.
func TestStepChart(t *testing.T) {
	for _, s := range []*reports.Step{charted(12, 0.2), charted(40, 0.64), charted(20, 1.4, 1, 2)} {
		pdf, err := StepChart(s, "trace.csv", "pdf")
		if err != nil {
			t.Fatal(err)
		}
		again, _ := StepChart(s, "trace.csv", "pdf")
		pages := pagesOf(t, pdf)
		boxes(t, "chart", pages)
		if len(pages) != 1 || !bytes.Equal(pdf, again) {
			t.Errorf("%d pages, same again %v", len(pages), bytes.Equal(pdf, again))
		}
		svg, err := StepChart(s, "trace <&> \".csv", "svg")
		if err != nil {
			t.Fatal(err)
		}
		// Every text of the page is in the drawing, at its place; the drawing is XML.
		var words []string
		d := xml.NewDecoder(bytes.NewReader(svg))
		for {
			token, err := d.Token()
			if errors.Is(err, io.EOF) {
				break
			}
			if err != nil {
				t.Fatal(err)
			}
			if c, ok := token.(xml.CharData); ok && strings.TrimSpace(string(c)) != "" {
				words = append(words, strings.TrimSpace(string(c)))
			}
		}
		all := strings.Join(words, "\n")
		for _, w := range pages[0] {
			if w.text != "trace.csv" && !strings.Contains(all, strings.TrimSpace(w.text)) {
				t.Errorf("%q is not in the SVG", w.text)
			}
		}
		paths := len(regexp.MustCompile(`(?m) [fSs] Q`).FindAll(contentsOf(t, pdf)[0], -1))
		if n := bytes.Count(svg, []byte("<path")); n < 20 || n < paths/2 {
			t.Errorf("%d paths in the SVG, %d in the PDF", n, paths)
		}
		if bytes.Contains(svg, []byte("NaN")) || bytes.Contains(svg, []byte("Inf")) {
			t.Error("a number that is none")
		}
	}
	if b, err := StepChart(nil, "", "svg"); !errors.Is(err, ErrNoStep) || b != nil {
		t.Errorf("nothing drawn: %v", err)
	}
	if b, err := StepChart(charted(12, 0.2), "", "png"); err == nil || b != nil {
		t.Error("png was drawn")
	}
}

// Operators that this package does not write are refused, not passed over.
func TestDrawingRefuses(t *testing.T) {
	for _, raw := range []string{"q 1 0 0 rg 1 2 m 3 4 l b Q", "q 1 0 rg Q", "q 1 2 3 m S Q"} {
		var d drawing
		if err := d.operators([]byte(raw)); err == nil {
			t.Errorf("%q was drawn: %s", raw, d.body.String())
		}
	}
	var d drawing
	if err := d.operators([]byte("q 1 0 0.5 RG 2 w [3 1] 0 d 10 20 m 30 40 l S Q")); err != nil {
		t.Fatal(err)
	}
	// 841.890 points less 20 and 40.
	if want := `<path d="M10 821.89L30 801.89" fill="none" stroke="#ff0080" stroke-width="2" stroke-dasharray="3 1"/>` + "\n"; d.body.String() != want {
		t.Errorf("%q", d.body.String())
	}
}

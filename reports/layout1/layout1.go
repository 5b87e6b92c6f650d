// Package layout1 is page layout number 1: it turns a reports.Document into the
// bytes of a PDF, charts and all.
//
// It decides nothing about what a report says, and it signs nothing. The same
// document and attachments give the same bytes, in any number of goroutines at
// once, as long as the program is the same build. A layout that was released
// is frozen: what must look otherwise becomes layout2.
//
// Order of use: Covered on every text that a person typed, before the run;
// Render after it.
package layout1

import (
	"bytes"
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/jung-kurt/gofpdf"

	"kymobench/reports"
)

// Number is the number of this layout, kept with the results of every record
// that is reported with it.
const Number = 1

// Attachment is a file that the report carries.
type Attachment struct {
	Name, Description string
	Data              []byte
}

// ErrOtherLayout: the document was made for another layout.
var ErrOtherLayout = errors.New("document is made for another page layout")

// Render returns the pages of d with the attachments, as one PDF without a
// signature. Text that the fonts do not cover is an error, never a box.
// Attachments stand in the order of their names, whatever order they are given
// in; no two may have the same name.
func Render(d *reports.Document, attachments []Attachment) ([]byte, error) {
	if d.Layout != Number {
		return nil, fmt.Errorf("%w: %d, this is layout %d", ErrOtherLayout, d.Layout, Number)
	}
	pdf := blank(d.Made)
	pdf.SetTitle("Report "+d.Run, true)
	author := d.Department
	if author == "" {
		author = "Kymobench"
	}
	pdf.SetAuthor(author, true)
	p := &paper{pdf: pdf, d: d, cover: newCoverage()}
	p.check(d.Department)
	attachments = slices.SortedFunc(slices.Values(attachments), func(a, b Attachment) int { return strings.Compare(a.Name, b.Name) })
	for i, a := range attachments {
		p.check(a.Name)
		p.check(a.Description)
		if i > 0 && a.Name == attachments[i-1].Name {
			return nil, fmt.Errorf("report %s: two attachments are called %q", d.Run, a.Name)
		}
	}
	p.front()
	p.pressure()
	p.response()
	p.follow()
	p.budgets()
	p.back()
	p.finish()
	if p.err != nil {
		return nil, fmt.Errorf("report %s: %w", d.Run, p.err)
	}
	files := make([]gofpdf.Attachment, len(attachments))
	for i, a := range attachments {
		files[i] = gofpdf.Attachment{Content: a.Data, Filename: a.Name, Description: a.Description}
	}
	pdf.SetAttachments(files)
	var out bytes.Buffer
	if err := pdf.Output(&out); err != nil {
		return nil, fmt.Errorf("report %s: write the pages: %w", d.Run, err)
	}
	return out.Bytes(), nil
}

// blank is a PDF without a page, with the layout's fonts.
func blank(made time.Time) *gofpdf.Fpdf {
	pdf := gofpdf.New("P", "mm", "A4", "")
	pdf.SetCatalogSort(true)
	pdf.SetCreationDate(made)
	pdf.SetModificationDate(made)
	pdf.SetProducer("Kymobench, page layout 1", true)
	pdf.SetAutoPageBreak(false, 0)
	pdf.SetMargins(0, 0, 0)
	pdf.SetCellMargin(0)
	for _, f := range faces() {
		pdf.AddUTF8FontFromBytes(f.family, "", bytes.Clone(f.ttf))
	}
	return pdf
}

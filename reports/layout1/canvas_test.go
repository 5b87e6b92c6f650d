package layout1

import (
	"bytes"
	"fmt"
	"image/color"
	"math"
	"strings"
	"testing"

	"github.com/jung-kurt/gofpdf"
	"gonum.org/v1/plot/vg"

	"kymobench/reports"
)

// canvasOf gives a canvas whose origin is the page's lower left, and what was
// written on the page.
func canvasOf(t *testing.T) (*canvas, func() string) {
	t.Helper()
	pdf := gofpdf.New("P", "mm", "A4", "")
	pdf.SetCompression(false)
	pdf.AddPage()
	p := &paper{pdf: pdf, d: &reports.Document{}, cover: newCoverage()}
	return newCanvas(p, 0, 0, pageHeight), func() string {
		if p.err != nil {
			t.Fatal(p.err)
		}
		var b bytes.Buffer
		if err := pdf.Output(&b); err != nil {
			t.Fatal(err)
		}
		s := b.String()
		s = s[strings.Index(s, "stream\n")+7:]
		return s[:strings.Index(s, "endstream")]
	}
}

// A circle drawn by an arc stays within 3e-4 of its radius, which is what four
// cubic curves can do, and closes.
func TestArcIsACircle(t *testing.T) {
	for _, sweep := range []float64{2 * math.Pi, -2 * math.Pi, math.Pi / 3, 4} {
		c, content := canvasOf(t)
		var path vg.Path
		at := vg.Point{X: 200, Y: 300}
		const r = 100
		path.Move(vg.Point{X: at.X + r*vg.Length(math.Cos(0.7)), Y: at.Y + r*vg.Length(math.Sin(0.7))})
		path.Arc(at, r, 0.7, sweep)
		c.Stroke(path)
		var here, a, b, end [2]float64
		turned := 0.0
		for _, part := range strings.Split(strings.TrimSpace(content()), "\n") {
			if !strings.HasPrefix(part, "q ") || !strings.Contains(part, " c ") {
				continue
			}
			part = part[strings.Index(part, " w ")+3:]
			if _, err := fmt.Sscanf(part, "%f %f m", &here[0], &here[1]); err != nil {
				t.Fatal(err)
			}
			part = part[strings.Index(part, " m ")+3:]
			for strings.Contains(part, " c ") {
				if _, err := fmt.Sscanf(part, "%f %f %f %f %f %f c", &a[0], &a[1], &b[0], &b[1], &end[0], &end[1]); err != nil {
					t.Fatalf("%q: %v", part, err)
				}
				for i := range 11 {
					s := float64(i) / 10
					var p [2]float64
					for k := range p {
						p[k] = math.Pow(1-s, 3)*here[k] + 3*s*math.Pow(1-s, 2)*a[k] + 3*s*s*(1-s)*b[k] + s*s*s*end[k]
					}
					if d := math.Hypot(p[0]-200, p[1]-300); math.Abs(d-r) > 3e-4*r+2e-3 {
						t.Errorf("sweep %v: %.4f from the centre", sweep, d)
					}
				}
				from, to := math.Atan2(here[1]-300, here[0]-200), math.Atan2(end[1]-300, end[0]-200)
				turned += math.Remainder(to-from, 2*math.Pi)
				here = end
				part = part[strings.Index(part, " c ")+3:]
			}
		}
		if math.Abs(turned-sweep) > 1e-4 {
			t.Errorf("swept %v, want %v", turned, sweep)
		}
	}
}

// Rotating, moving and scaling act on what is drawn next, and Pop takes them
// back: a quarter turn sends x to y.
func TestTransformations(t *testing.T) {
	c, _ := canvasOf(t)
	near := func(x, y, wx, wy float64) {
		t.Helper()
		gx, gy := c.place(x, y)
		if math.Hypot(gx-wx, gy-wy) > 1e-9 {
			t.Errorf("%v, %v is at %v, %v, want %v, %v", x, y, gx, gy, wx, wy)
		}
	}
	near(3, 4, 3, 4)
	c.Push()
	c.Translate(vg.Point{X: 10, Y: 20})
	c.Rotate(math.Pi / 2)
	near(1, 0, 10, 21)
	near(0, 1, 9, 20)
	c.Scale(2, 3)
	near(1, 1, 7, 22)
	if math.Abs(c.scale()-math.Sqrt(6)) > 1e-12 {
		t.Errorf("scale %v", c.scale())
	}
	c.Pop()
	near(3, 4, 3, 4)
	c.Pop() // one too many changes nothing
	near(3, 4, 3, 4)
}

// Every operator that a canvas or the paper writes leaves the graphics state
// as it was.
func TestStateIsRestored(t *testing.T) {
	c, content := canvasOf(t)
	var path vg.Path
	path.Move(vg.Point{X: 1, Y: 1})
	path.Line(vg.Point{X: 5, Y: 9})
	path.QuadTo(vg.Point{X: 6, Y: 7}, vg.Point{X: 2, Y: 3})
	path.CubeTo(vg.Point{X: 6, Y: 7}, vg.Point{X: 2, Y: 3}, vg.Point{X: 4, Y: 4})
	path.Close()
	c.SetLineWidth(2)
	c.SetLineDash([]vg.Length{3, 1}, 0.5)
	c.SetColor(color.NRGBA{255, 0, 0, 128})
	c.Stroke(path)
	c.Fill(path)
	c.p.disc(10, 10, 3, ink(), true, 0)
	c.p.polygon(ink(), false, 0.3, 1, 1, 2, 2, 3, 1)
	var state []string
	for _, l := range strings.Split(strings.TrimSpace(content()), "\n") {
		if strings.HasPrefix(l, "q ") {
			state = append(state, l)
			if !strings.HasSuffix(l, " Q") || strings.Count(l, "q ") != 1 {
				t.Errorf("not closed: %s", l)
			}
		}
	}
	if len(state) != 4 || !strings.Contains(state[0], "[3 1] 0.5 d ") || !strings.HasPrefix(state[0], "q 1 0.498 0.498 RG 2 w ") {
		t.Errorf("%q", state)
	}
}

func TestImagesAreRefused(t *testing.T) {
	c, _ := canvasOf(t)
	c.DrawImage(vg.Rectangle{}, nil)
	if c.p.err == nil {
		t.Error("an image was passed over in silence")
	}
}

func TestAppendNumber(t *testing.T) {
	for x, want := range map[float64]string{0: "0", -0.0001: "0", 1.5: "1.5", 100: "100", -2.3456: "-2.346", 1e-9: "0", 12345.678: "12345.678", math.Inf(1): "20000", math.NaN(): "0", -1e300: "-20000"} {
		if got := string(appendNumber(nil, x)); got != want {
			t.Errorf("%v: %s, want %s", x, got, want)
		}
	}
}

// Ticks are multiples of 1, 2 or 5 times a power of ten, inside the range, and
// not many more than were asked for.
func TestTicks(t *testing.T) {
	for _, c := range [][2]float64{{0, 1}, {-9.5, 9.5}, {0, 300}, {-0.07, 0.61}, {1e-6, 3e-6}, {-1e5, 2e6}, {24, 24.001}, {0.99, 1.01}} {
		for about := 3; about < 9; about++ {
			list := ticks{about}.Ticks(c[0], c[1])
			if len(list) < 2 || len(list) > about+2 {
				t.Errorf("%v, about %d: %d ticks", c, about, len(list))
				continue
			}
			step := list[1].Value - list[0].Value
			m := step / math.Pow(10, math.Floor(math.Log10(step)+1e-9))
			if math.Min(math.Abs(m-1), math.Min(math.Abs(m-2), math.Abs(m-5))) > 1e-6 {
				t.Errorf("%v: step %v", c, step)
			}
			for _, k := range list {
				var v float64
				if _, err := fmt.Sscanf(strings.Replace(k.Label, "\u2212", "-", 1), "%f", &v); err != nil || math.Abs(v-k.Value) > 1e-6*step {
					t.Errorf("%v: tick %v is labelled %s", c, k.Value, k.Label)
				}
				if k.Value < c[0]-1e-6*step || k.Value > c[1]+1e-6*step {
					t.Errorf("%v: tick %v outside", c, k.Value)
				}
			}
		}
	}
	for _, c := range [][2]float64{{1, 1}, {2, 1}, {math.NaN(), 1}, {0, math.Inf(1)}} {
		if list := (ticks{5}).Ticks(c[0], c[1]); len(list) != 0 {
			t.Errorf("%v: %v", c, list)
		}
	}
}

package step

import (
	"bufio"
	"bytes"
	"encoding/json"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// nistModel gives the value and fills the derivatives with respect to b.
type nistModel func(b, x, d []float64) float64

// nistModels are the 27 models as the files of the data sets state them;
// derivatives by hand, held against differences in TestNISTDerivatives.
func nistModels() map[string]nistModel {
	exp, pow := math.Exp, math.Pow
	chwirut := func(b, x, d []float64) float64 {
		u := b[1] + b[2]*x[0]
		y := exp(-b[0]*x[0]) / u
		d[0], d[1], d[2] = -x[0]*y, -y/u, -x[0]*y/u
		return y
	}
	lanczos := func(b, x, d []float64) float64 {
		y := 0.0
		for i := 0; i < 6; i += 2 {
			e := exp(-b[i+1] * x[0])
			d[i], d[i+1] = e, -b[i]*x[0]*e
			y += b[i] * e
		}
		return y
	}
	gauss := func(b, x, d []float64) float64 {
		e := exp(-b[1] * x[0])
		d[0], d[1] = e, -b[0]*x[0]*e
		y := b[0] * e
		for i := 2; i < 8; i += 3 {
			u := (x[0] - b[i+1]) / b[i+2]
			g := exp(-u * u)
			d[i], d[i+1], d[i+2] = g, b[i]*g*2*u/b[i+2], b[i]*g*2*u*u/b[i+2]
			y += b[i] * g
		}
		return y
	}
	rational := func(b, x, d []float64) float64 { // of two cubics, or of two parabolas for five parameters
		n := (len(b) + 1) / 2
		num, den, p := 0.0, 1.0, 1.0
		for i := range n {
			num += b[i] * p
			d[i] = p
			p *= x[0]
		}
		p = x[0]
		for i := n; i < len(b); i++ {
			den += b[i] * p
			p *= x[0]
		}
		y := num / den
		p = x[0]
		for i := n; i < len(b); i++ {
			d[i] = -y * p / den
			p *= x[0]
		}
		for i := range n {
			d[i] /= den
		}
		return y
	}
	return map[string]nistModel{
		"Misra1a.dat": func(b, x, d []float64) float64 {
			e := exp(-b[1] * x[0])
			d[0], d[1] = 1-e, b[0]*x[0]*e
			return b[0] * (1 - e)
		},
		"Misra1b.dat": func(b, x, d []float64) float64 {
			u := 1 + b[1]*x[0]/2
			d[0], d[1] = 1-1/(u*u), b[0]*x[0]/(u*u*u)
			return b[0] * (1 - 1/(u*u))
		},
		"Misra1c.dat": func(b, x, d []float64) float64 {
			u := 1 + 2*b[1]*x[0]
			d[0], d[1] = 1-pow(u, -0.5), b[0]*x[0]*pow(u, -1.5)
			return b[0] * (1 - pow(u, -0.5))
		},
		"Misra1d.dat": func(b, x, d []float64) float64 {
			u := 1 + b[1]*x[0]
			d[0], d[1] = b[1]*x[0]/u, b[0]*x[0]/(u*u)
			return b[0] * b[1] * x[0] / u
		},
		"Chwirut1.dat": chwirut, "Chwirut2.dat": chwirut,
		"Lanczos1.dat": lanczos, "Lanczos2.dat": lanczos, "Lanczos3.dat": lanczos,
		"Gauss1.dat": gauss, "Gauss2.dat": gauss, "Gauss3.dat": gauss,
		"Kirby2.dat": rational, "Hahn1.dat": rational, "Thurber.dat": rational,
		"DanWood.dat": func(b, x, d []float64) float64 {
			p := pow(x[0], b[1])
			d[0], d[1] = p, b[0]*p*math.Log(x[0])
			return b[0] * p
		},
		"Nelson.dat": func(b, x, d []float64) float64 { // of the logarithm of y
			e := exp(-b[2] * x[1])
			d[0], d[1], d[2] = 1, -x[0]*e, b[1]*x[0]*x[1]*e
			return b[0] - b[1]*x[0]*e
		},
		"MGH09.dat": func(b, x, d []float64) float64 {
			num, den := x[0]*x[0]+x[0]*b[1], x[0]*x[0]+x[0]*b[2]+b[3]
			y := b[0] * num / den
			d[0], d[1], d[2], d[3] = num/den, b[0]*x[0]/den, -y*x[0]/den, -y/den
			return y
		},
		"MGH10.dat": func(b, x, d []float64) float64 {
			u := x[0] + b[2]
			e := exp(b[1] / u)
			d[0], d[1], d[2] = e, b[0]*e/u, -b[0]*e*b[1]/(u*u)
			return b[0] * e
		},
		"MGH17.dat": func(b, x, d []float64) float64 {
			e, f := exp(-x[0]*b[3]), exp(-x[0]*b[4])
			d[0], d[1], d[2], d[3], d[4] = 1, e, f, -b[1]*x[0]*e, -b[2]*x[0]*f
			return b[0] + b[1]*e + b[2]*f
		},
		"Rat42.dat": func(b, x, d []float64) float64 {
			e := exp(b[1] - b[2]*x[0])
			y := b[0] / (1 + e)
			d[0], d[1], d[2] = 1/(1+e), -y*e/(1+e), y*e*x[0]/(1+e)
			return y
		},
		"Rat43.dat": func(b, x, d []float64) float64 {
			e := exp(b[1] - b[2]*x[0])
			p := pow(1+e, -1/b[3])
			y := b[0] * p
			d[0], d[1], d[2], d[3] = p, -y*e/(1+e)/b[3], y*e*x[0]/(1+e)/b[3], y*math.Log1p(e)/(b[3]*b[3])
			return y
		},
		"Roszman1.dat": func(b, x, d []float64) float64 {
			u := x[0] - b[3]
			r := b[2] / u
			w := 1 / (math.Pi * (1 + r*r))
			d[0], d[1], d[2], d[3] = 1, -x[0], -w/u, -w*r/u
			return b[0] - b[1]*x[0] - math.Atan(r)/math.Pi
		},
		"ENSO.dat": func(b, x, d []float64) float64 {
			sin, cos := math.Sincos(2 * math.Pi * x[0] / 12)
			d[0], d[1], d[2] = 1, cos, sin
			y := b[0] + b[1]*cos + b[2]*sin
			for i := 3; i < 9; i += 3 {
				a := 2 * math.Pi * x[0] / b[i]
				sin, cos := math.Sincos(a)
				d[i], d[i+1], d[i+2] = (b[i+1]*sin-b[i+2]*cos)*a/b[i], cos, sin
				y += b[i+1]*cos + b[i+2]*sin
			}
			return y
		},
		"Eckerle4.dat": func(b, x, d []float64) float64 {
			u := (x[0] - b[2]) / b[1]
			e := exp(-u*u/2) / b[1]
			d[0], d[1], d[2] = e, b[0]*e*(u*u-1)/b[1], b[0]*e*u/b[1]
			return b[0] * e
		},
		"BoxBOD.dat": func(b, x, d []float64) float64 {
			e := exp(-b[1] * x[0])
			d[0], d[1] = 1-e, b[0]*x[0]*e
			return b[0] * (1 - e)
		},
		"Bennett5.dat": func(b, x, d []float64) float64 {
			u := b[1] + x[0]
			p := pow(u, -1/b[2])
			d[0], d[1], d[2] = p, -b[0]*p/(u*b[2]), b[0]*p*math.Log(u)/(b[2]*b[2])
			return b[0] * p
		},
	}
}

// nistSet is one data set with its starts and certified values.
type nistSet struct {
	name          string
	model         nistModel
	start         [2][]float64
	certified, sd []float64
	rss           float64
	y             []float64
	x             [][]float64
	row           []float64
}

func readNIST(t testing.TB) []*nistSet {
	t.Helper()
	paths, err := filepath.Glob("../../testdata/sources/nist-strd-nonlinear/*.dat")
	if err != nil || len(paths) != 27 {
		t.Fatalf("%d sets, %v", len(paths), err)
	}
	var sets []*nistSet
	for _, path := range paths {
		s := &nistSet{name: strings.TrimSuffix(filepath.Base(path), ".dat")}
		s.model = nistModels()[filepath.Base(path)]
		if s.model == nil {
			t.Fatalf("no model for %s", path)
		}
		f, err := os.Open(path)
		if err != nil {
			t.Fatal(err)
		}
		data, n := false, 0
		for lines := bufio.NewScanner(f); lines.Scan(); {
			n++
			words := strings.Fields(lines.Text())
			switch {
			case n > 60 && data:
				var row []float64
				for _, w := range words {
					v, err := strconv.ParseFloat(w, 64)
					if err != nil {
						t.Fatalf("%s:%d: %v", path, n, err)
					}
					row = append(row, v)
				}
				if len(row) >= 2 {
					s.y, s.x = append(s.y, row[0]), append(s.x, row[1:])
				}
			case len(words) == 6 && words[1] == "=" && strings.HasPrefix(words[0], "b"):
				var v [4]float64
				for i := range v {
					if v[i], err = strconv.ParseFloat(words[2+i], 64); err != nil {
						t.Fatalf("%s:%d: %v", path, n, err)
					}
				}
				s.start[0], s.start[1] = append(s.start[0], v[0]), append(s.start[1], v[1])
				s.certified, s.sd = append(s.certified, v[2]), append(s.sd, v[3])
			case strings.HasPrefix(lines.Text(), "Residual Sum of Squares"):
				if s.rss, err = strconv.ParseFloat(words[len(words)-1], 64); err != nil {
					t.Fatal(err)
				}
			}
			data = data || n > 50 && len(words) > 1 && words[0] == "Data:"
		}
		f.Close()
		if len(s.certified) < 2 || len(s.y) < 6 {
			t.Fatalf("%s read as %d parameters, %d rows", path, len(s.certified), len(s.y))
		}
		if s.name == "Roszman1" {
			// This copy prints 1.20196866396E-0; with 2.0196866396E-01 the sum of
			// squares is the certified one (TestNISTCertified).
			s.certified[0] = 2.0196866396e-01
		}
		if s.name == "Nelson" {
			for i := range s.y {
				s.y[i] = math.Log(s.y[i])
			}
		}
		s.row = make([]float64, len(s.certified))
		sets = append(sets, s)
	}
	return sets
}

// normalAt is the sum of squares of the set, for the same search that fits
// steps. Sums are compensated (Neumaier), for squares of condition numbers
// meet the last digits of a double here.
func (s *nistSet) normalAt(theta *[most]float64, n *normal) {
	k := len(s.certified)
	n.size, n.cost, n.rounding = k, math.Inf(1), 0
	var sums [1 + most + most*most]compensated
	for i, y := range s.y {
		f := s.model(theta[:k], s.x[i], s.row)
		r := y - f
		if math.IsNaN(r) || math.IsInf(r, 0) {
			return
		}
		sums[0].add(r, r)
		for a := range k {
			sums[1+a].add(s.row[a], r)
			for b := range a + 1 {
				sums[1+most+a*most+b].add(s.row[a], s.row[b])
			}
		}
	}
	n.cost = sums[0].sum()
	for a := range k {
		n.gradient[a] = sums[1+a].sum()
		for b := range a + 1 {
			n.hessian[a][b] = sums[1+most+a*most+b].sum()
			n.hessian[b][a] = n.hessian[a][b]
		}
	}
}

// compensated is a sum of products with the rounding of each kept.
type compensated struct{ high, low float64 }

func (c *compensated) add(a, b float64) {
	p := a * b
	e := math.FMA(a, b, -p)
	t := c.high + p
	if math.Abs(c.high) >= math.Abs(p) {
		c.low += (c.high - t) + p
	} else {
		c.low += (p - t) + c.high
	}
	c.high = t
	c.low += e
}

func (c *compensated) sum() float64 { return c.high + c.low }

// digits is how many of the certified digits the parameters have, at worst.
func (s *nistSet) digits(theta *[most]float64) float64 {
	worst := 11.0
	for i, want := range s.certified {
		worst = math.Min(worst, -math.Log10(math.Abs(theta[i]-want)/math.Abs(want)+1e-20))
	}
	return worst
}

// The derivatives against central differences.
func TestNISTDerivatives(t *testing.T) {
	for _, s := range readNIST(t) {
		b := append([]float64(nil), s.certified...)
		scratch := make([]float64, len(b))
		for _, x := range [][]float64{s.x[0], s.x[len(s.x)/2], s.x[len(s.x)-1]} {
			s.model(b, x, s.row)
			for i := range b {
				h := 1e-5 * math.Abs(b[i])
				old := b[i]
				b[i] = old + h
				up := s.model(b, x, scratch)
				b[i] = old - h
				down := s.model(b, x, scratch)
				b[i] = old
				want := (up - down) / (2 * h)
				size := math.Abs(want) + math.Abs(up)/math.Abs(b[i])*1e-5
				if math.Abs(s.row[i]-want) > 1e-4*size {
					t.Errorf("%s: d/db%d %v, difference %v", s.name, i+1, s.row[i], want)
				}
			}
		}
	}
}

// The certified values have the certified sum of squares, as far as eleven
// printed digits of them go.
func TestNISTCertified(t *testing.T) {
	for _, s := range readNIST(t) {
		var theta [most]float64
		var at normal
		copy(theta[:], s.certified)
		s.normalAt(&theta, &at)
		if s.name != "Lanczos1" && math.Abs(at.cost/s.rss-1) > 1e-6 { // its 1.4e-25 is beyond the digits printed
			t.Errorf("%s: sum of squares %v at the certified values, certified %v", s.name, at.cost, s.rss)
		}
	}
}

// The search that fits steps, on NIST's nonlinear sets: at least 25 of 27 to
// six digits from the second start; from the first as many as MINPACK solves
// (TestNISTBesideMINPACK counts those).
func TestNISTNonlinear(t *testing.T) {
	solved := [2]int{}
	for _, s := range readNIST(t) {
		for k := range 2 {
			theta := [most]float64{}
			copy(theta[:], s.start[k])
			var at normal
			evaluations := search{floor: -1, iterations: 20000, tolerance: 1e-25}.minimise(s, &theta, &at)
			d := s.digits(&theta)
			if d >= 6 {
				solved[k]++
			}
			t.Logf("%-9s start %d: %4.1f digits, %5d evaluations, RSS %.10g (certified %.10g)", s.name, k+1, d, evaluations, at.cost, s.rss)
		}
	}
	t.Logf("six digits from start 1: %d, from start 2: %d of 27", solved[0], solved[1])
	if solved[1] < 25 || solved[0] < nistFirst {
		t.Errorf("six digits from start 1: %d, from start 2: %d of 27", solved[0], solved[1])
	}
}

// nistFirst is how many of 27 are solved from the first start at least: what
// MINPACK of scipy 1.10.1 solves, by TestNISTBesideMINPACK.
const nistFirst = 25

// As many from the first start as MINPACK solves.
func TestNISTBesideMINPACK(t *testing.T) {
	python := outsidePython(t)
	type set struct {
		Name      string       `json:"name"`
		Start     [2][]float64 `json:"start"`
		Certified []float64    `json:"certified"`
		Y         []float64    `json:"y"`
		X         [][]float64  `json:"x"`
	}
	var sets []set
	ours := 0
	for _, s := range readNIST(t) {
		sets = append(sets, set{s.name, s.start, s.certified, s.y, s.x})
		theta := [most]float64{}
		copy(theta[:], s.start[0])
		var at normal
		search{floor: -1, iterations: 20000, tolerance: 1e-25}.minimise(s, &theta, &at)
		if s.digits(&theta) >= 6 {
			ours++
		}
	}
	text, err := json.Marshal(sets)
	if err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command(python, "testdata/minpack.py")
	cmd.Stdin = bytes.NewReader(text)
	out, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	var theirs [2]int
	if err := json.Unmarshal(out, &theirs); err != nil {
		t.Fatalf("%s: %v", out, err)
	}
	t.Logf("six digits from the first start: ours %d, MINPACK %d (from the second %d)", ours, theirs[0], theirs[1])
	if ours < theirs[0] {
		t.Errorf("six digits from the first start: ours %d, MINPACK %d", ours, theirs[0])
	}
}

// outsidePython finds a python3 with scipy, or skips; with KYMOBENCH_OUTSIDE=1
// there must be one.
func outsidePython(t testing.TB) string {
	t.Helper()
	for _, name := range []string{"python3", "/usr/bin/python3"} {
		if exec.Command(name, "-c", "import scipy.optimize").Run() == nil {
			return name
		}
	}
	if os.Getenv("KYMOBENCH_OUTSIDE") == "1" {
		t.Fatal("no python3 with scipy, and KYMOBENCH_OUTSIDE=1 says there is one")
	}
	t.Skip("no python3 with scipy")
	return ""
}

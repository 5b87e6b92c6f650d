package procedures

import (
	"errors"
	"math"
	"reflect"
	"strings"
	"testing"

	"kymobench/bench/tomlfile"
)

func TestShippedProceduresLoad(t *testing.T) {
	names := ShippedNames()
	if len(names) == 0 {
		t.Fatal("no procedure is shipped")
	}
	for _, name := range names {
		d, err := Shipped(name)
		if err != nil {
			t.Fatal(err)
		}
		for _, l := range d.Limits {
			if l.Origin == "" || l.OriginStatus == "" {
				t.Errorf("%s: the limit for %s has no origin", name, l.Name)
			}
		}
	}
}

// The incoming inspection is what was agreed: stages in their order, and the
// set pressures 0-50-100-200-300-200-100-50-0 mmHg.
func TestIncoming(t *testing.T) {
	d, err := Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	var kinds []string
	for _, s := range d.Stages {
		kinds = append(kinds, s.Kind())
		if st, ok := s.(Static); ok {
			want := []float64{0, 50, 100, 200, 300, 200, 100, 50, 0}
			if len(st.Points()) != len(want) {
				t.Fatalf("%d points", len(st.Points()))
			}
			for i, p := range st.Points() {
				if down := p.Leg == Down; math.Abs(p.Set.MmHg()-want[i]) > 1e-9 || down != (i > 4) {
					t.Errorf("point %d: %+v", i, p)
				}
			}
		}
	}
	if got := strings.Join(kinds, " "); got != "warm_up zero exercise leak static step" {
		t.Errorf("stages %s", got)
	}
	low, high := d.Limits[2].At(d.HighestPressure())
	if d.Limits[2].Name != Accuracy || low == nil || math.Abs(*low+9) > 1e-9 || math.Abs(*high-9) > 1e-9 { // 3 % of 300 mmHg
		t.Errorf("accuracy at the top: %v, %v", low, high)
	}
	if len(d.Limits) != 6 {
		t.Errorf("%d limits", len(d.Limits))
	}
}

// Each change to the shipped file is refused at the line that was changed.
func TestLoadRefuses(t *testing.T) {
	d, err := Shipped("incoming")
	if err != nil {
		t.Fatal(err)
	}
	good := string(d.Source)
	for _, c := range []struct{ from, to, want string }{
		{`kind = "zero"`, `kind = "zeroo"`, "zeroo"},
		{`low = "-25 mmHg"`, `low = "-25"`, "unit"},
		{`low = "-25 mmHg"`, `low = "25 mmHg"`, "low is not below high"},
		{`name = "hysteresis"`, `name = "accuracy"`, "second limit"},
		{`rule = "four_outcome"`, `rule = "four_outcomes"`, "four_outcome"},
		{`conditional_fail = "inconclusive"`, `conditional_fail = "accepted"`, "outside a limit"},
		{`to = "300 mmHg"`, `to = "400 mmHg"`, "highest pressure"},
		{`count = 5`, `cuont = 5`, "cuont"},
		{`highest_rate = "0.1 mmHg/s"`, `highest_rate = "0.1 mmHg"`, "mmHg"},
		{`origin_status = "department"`, `origin_status = "sure"`, "sure"},
	} {
		if strings.Count(good, c.from) == 0 {
			t.Fatalf("the shipped file has no %s", c.from)
		}
		line := 1 + strings.Count(good[:strings.Index(good, c.from)], "\n")
		got, err := Load("my.toml", []byte(strings.Replace(good, c.from, c.to, 1)))
		var e *tomlfile.Error
		if !errors.As(err, &e) || got != nil {
			t.Errorf("%s: taken, %v", c.to, err)
			continue
		}
		if e.Line != line || e.Column < 1 || !strings.Contains(e.Error(), c.want) {
			t.Errorf("%s: refused as %v, wanted line %d and %q", c.to, e, line, c.want)
		}
	}
}

// No input makes Load panic; what it takes is finite, in order and judgeable,
// and the same again from its own Source.
func FuzzLoad(f *testing.F) {
	d, err := Shipped("incoming")
	if err != nil {
		f.Fatal(err)
	}
	f.Add(d.Source)
	f.Add([]byte(strings.Replace(string(d.Source), `"four_outcome"`+"\nguard_factor = 1.0", `"simple"`, 1)))
	f.Add([]byte(strings.ReplaceAll(string(d.Source), `300 mmHg"`, `40 kPa"`)))
	f.Add([]byte(strings.Replace(string(d.Source), `highest = "310 mmHg"`, `highest = "1e308 kPa"`, 1)))
	f.Fuzz(func(t *testing.T, data []byte) {
		d, err := Load("my.toml", data)
		var e *tomlfile.Error
		if err != nil {
			if !errors.As(err, &e) || d != nil || e.Text == "" || len(e.Text) > 2000 {
				t.Fatalf("refused as %v with %v", err, d)
			}
			return
		}
		again, err := Load("my.toml", d.Source)
		if err != nil || !reflect.DeepEqual(d, again) {
			t.Fatalf("another procedure from its own source: %v", err)
		}
		finite := func(x float64) {
			if math.IsNaN(x) || math.IsInf(x, 0) {
				t.Fatalf("%q holds %v", data, x)
			}
		}
		finite(float64(d.Highest))
		finite(float64(d.Lowest))
		if len(d.Limits) == 0 || len(d.Stages) == 0 || d.HighestPressure() > d.Highest {
			t.Fatalf("%q: %+v", data, d)
		}
		for _, l := range d.Limits {
			low, high := l.At(d.Highest)
			if low == nil && high == nil || low != nil && high != nil && *low >= *high || l.Origin == "" {
				t.Fatalf("limit %+v", l)
			}
			for _, side := range []*float64{low, high, &l.Resolution} {
				if side != nil {
					finite(*side)
				}
			}
		}
	})
}

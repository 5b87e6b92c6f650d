package step

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
)

// filtered runs samples through a second-order system by small exact steps
// of a held input, for inputs that have no closed form here.
func filtered(u []float64, dt, fn, zeta float64) []float64 {
	y := make([]float64, len(u))
	w := 2 * math.Pi * fn
	p, q := u[0], 0.0
	sub := max(1, int(math.Ceil(w*dt/0.02)))
	h := dt / float64(sub)
	for i := 1; i < len(u); i++ {
		for s := range sub {
			at := u[i-1] + (u[i]-u[i-1])*(float64(s)+0.5)/float64(sub)
			f := func(p, q float64) float64 { return w*w*(at-p) - 2*zeta*w*q }
			k1p, k1q := q, f(p, q)
			k2p, k2q := q+h/2*k1q, f(p+h/2*k1p, q+h/2*k1q)
			k3p, k3q := q+h/2*k2q, f(p+h/2*k2p, q+h/2*k2q)
			k4p, k4q := q+h*k3q, f(p+h*k3p, q+h*k3q)
			p += h / 6 * (k1p + 2*k2p + 2*k3p + k4p)
			q += h / 6 * (k1q + 2*k2q + 2*k3q + k4q)
		}
		y[i] = p
	}
	return y
}

func noisy(y []float64, sigma float64, r *rand.Rand) {
	for i := range y {
		y[i] += sigma * r.NormFloat64()
	}
}

// hostile draws one trace of a class. fn is the truth, 0 where any answer at
// all would be wrong.
func hostile(class string, r *rand.Rand) (Trace, Settings, float64, string) {
	p := plan{
		fn: 6 * math.Pow(8, r.Float64()), zeta: 0.1 * math.Pow(10, r.Float64()), before: 0.5, phase: r.Float64(),
		heights: []float64{100}, sigma: 0.1 * math.Pow(10, r.Float64()),
	}
	p.rate = math.Max(500, p.fn*(10+40*r.Float64()))
	p.spacing = math.Min(3, 1+20*slowest(p.fn, p.zeta))
	s := Settings{EdgeStated: true, MinimumStep: 8}
	truth := p.fn
	n := int((p.before + p.spacing) * p.rate)
	at := func(i int) float64 { return float64(i)/p.rate - p.at(0) }
	var t Trace
	note := ""
	switch class {
	case "clipped":
		quiet := r.IntN(3) == 0
		if quiet {
			p.sigma = 0
		}
		if r.IntN(2) == 0 {
			p.quantum = 0.1 + 0.4*r.Float64()
		}
		t = p.make(r)
		top := 0.0
		for i := range t.Pressure {
			top = math.Max(top, 100*trueEdge(at(i), 0, p.fn, p.zeta))
		}
		rail := 60 + (top-1-60)*r.Float64()
		if p.quantum > 0 {
			rail = math.Round(rail/p.quantum) * p.quantum
		}
		note = fmt.Sprintf("rail %.1f top %.1f", rail, top)
		for i, v := range t.Pressure {
			t.Pressure[i] = math.Min(v, rail)
		}
	case "bounced":
		t = p.make(r)
		gapTime := 0.002 + 0.03*r.Float64()
		depth := 0.2 + 0.7*r.Float64()
		note = fmt.Sprintf("bounce %.4f s depth %.2f", gapTime, depth)
		for i := range t.Pressure {
			t.Pressure[i] += 100 * depth * (trueEdge(at(i)-2*gapTime, 0, p.fn, p.zeta) - trueEdge(at(i)-gapTime, 0, p.fn, p.zeta))
		}
	case "under-sampled":
		p.rate = p.fn * (1 + 3*r.Float64())
		p.spacing += 40 / p.rate
		p.before = 0.5 + 40/p.rate
		t = p.make(r)
	case "edge":
		// Stated at its bound, in truth anything down to an ideal step.
		stated := 0.35 * 0.8 / p.fn * r.Float64()
		p.width = stated / 0.8 * r.Float64()
		s.EdgeTime = stated
		t = p.make(r)
		note = fmt.Sprintf("T fn %.3f stated %.3f", p.width*p.fn, stated/0.8*p.fn)
	case "second mode":
		t = p.make(r)
		f2, z2, a := p.fn*(1.5+3*r.Float64()), 0.02+0.2*r.Float64(), 0.03+0.17*r.Float64()
		note = fmt.Sprintf("mode x%.2f zeta %.2f part %.2f", f2/p.fn, z2, a)
		for i := range t.Pressure {
			t.Pressure[i] += 100 * a * (trueEdge(at(i), 0, f2, z2) - trueEdge(at(i), 0, p.fn, p.zeta))
		}
	case "low-pass":
		corner := p.fn * (1 + 3*r.Float64())
		note = fmt.Sprintf("corner x%.2f noise %.2f", corner/p.fn, p.sigma)
		sigma := p.sigma
		p.sigma = 0
		t = p.make(r)
		v := t.Pressure[0]
		sub := 20
		for i := 1; i < n; i++ {
			a, b := 100*trueEdge(at(i-1), 0, p.fn, p.zeta), 100*trueEdge(at(i), 0, p.fn, p.zeta)
			for k := range sub {
				u := a + (b-a)*(float64(k)+0.5)/float64(sub)
				v += (u - v) * (1 - math.Exp(-2*math.Pi*corner/p.rate/float64(sub)))
			}
			t.Pressure[i] = v
		}
		noisy(t.Pressure, sigma, r)
	case "no step":
		truth = 0
		t = Trace{Rate: p.rate, Pressure: make([]float64, n)}
		kind := r.IntN(5)
		note = fmt.Sprintf("kind %d", kind)
		speed, f, amplitude := 5+45*r.Float64(), 1+2*r.Float64(), 10+30*r.Float64()
		for i := range t.Pressure {
			x := float64(i) / p.rate
			switch kind {
			case 1:
				t.Pressure[i] = speed * x
			case 2:
				t.Pressure[i] = speed * math.Max(0, x-0.5)
			case 3:
				t.Pressure[i] = amplitude * math.Sin(2*math.Pi*50*x)
			case 4: // a pulse wave
				c := math.Mod(x*f, 1)
				t.Pressure[i] = 80 + amplitude*(math.Exp(-math.Pow((c-0.2)/0.08, 2))+0.3*math.Exp(-math.Pow((c-0.5)/0.1, 2)))
			}
		}
		noisy(t.Pressure, p.sigma, r)
	case "drift":
		p.drift = 40 * (2*r.Float64() - 1)
		t = p.make(r)
		bend := 10 * r.NormFloat64()
		note = fmt.Sprintf("drift %.1f bend %.1f", p.drift, bend)
		for i := range t.Pressure {
			t.Pressure[i] += bend * at(i) * at(i)
		}
	case "spikes":
		t = p.make(r)
		for range 1 + r.IntN(10) {
			t.Pressure[r.IntN(n)] += 200 * (2*r.Float64() - 1)
		}
	case "overlapping":
		t = p.make(r)
		after, part := 0.01+0.4*r.Float64(), 0.2+0.8*r.Float64()
		if r.IntN(2) == 0 {
			part = -part
		}
		note = fmt.Sprintf("after %.3f part %.2f", after, part)
		for i := range t.Pressure {
			t.Pressure[i] += 100 * part * trueEdge(at(i)-after, 0, p.fn, p.zeta)
		}
	case "truncated":
		t = p.make(r)
		if r.IntN(2) == 0 {
			end := int((p.before + (0.1+1.9*r.Float64())/p.fn) * p.rate)
			t.Pressure = t.Pressure[:min(n, end)]
			note = fmt.Sprintf("%.2f periods after", (float64(end)/p.rate-p.before)*p.fn)
		} else {
			cut := int((p.before + (0.6*r.Float64()-0.3)/p.fn) * p.rate)
			t.Pressure = t.Pressure[max(0, cut):]
			note = fmt.Sprintf("%.2f periods before", (p.before-float64(cut)/p.rate)*p.fn)
		}
	}
	note += fmt.Sprintf(" fn %.2f zeta %.2f fs/fn %.1f sigma %.2f quantum %.2f", p.fn, p.zeta, p.rate/p.fn, p.sigma, p.quantum)
	return t, s, truth, note
}

func hostileClasses() []string {
	return []string{"clipped", "bounced", "under-sampled", "edge", "second mode", "low-pass", "no step", "drift", "spikes", "overlapping", "truncated"}
}

// A silent wrong answer is an error of over 20 % in fn, or any answer where
// there is none, without refusal or reservation.
func TestHostileTraces(t *testing.T) {
	all, bad := 0, 0
	for _, class := range hostileClasses() {
		r := rand.New(rand.NewPCG(11, 5))
		var silent, refused, reserved, right, wrongSaid int
		for range trials(12, 1000) {
			all++
			trace, s, fn, note := hostile(class, r)
			steps, c, reservations, err := Analyse(trace, s)
			if err != nil {
				t.Fatal(err)
			}
			wrong := c.Determined && (fn == 0 || math.Abs(c.Frequency.Value/fn-1) > 0.2)
			switch {
			case !c.Determined:
				refused++
			case wrong && len(reservations) == 0:
				silent++
				t.Logf("%s: silent fn %.3g (%.2g) zeta %.3g in %d steps, %s", class, c.Frequency.Value, c.Frequency.StandardUncertainty, c.Damping.Value, len(steps), note)
			case wrong:
				wrongSaid++
				if fn == 0 {
					t.Logf("%s: fn %.3g zeta %.3g in %d steps, %s %v", class, c.Frequency.Value, c.Damping.Value, len(steps), note, reservations)
				}
			case len(reservations) > 0:
				reserved++
			default:
				right++
			}
		}
		bad += silent
		// A wrong model must mostly be told, and no step hardly ever be one.
		count := refused + reserved + right + wrongSaid + silent
		if class == "second mode" && right > count/10 || class == "no step" && wrongSaid > count/200 {
			t.Errorf("%s: right without a word %d, wrong %d of %d", class, right, wrongSaid, count)
		}
		t.Logf("%-14s silent wrong %d, wrong with reservation %d, refused %d, right with reservation %d, right %d", class, silent, wrongSaid, refused, reserved, right)
	}
	if bad > max(1, all/500) {
		t.Errorf("%d silent wrong answers in %d hostile traces", bad, all)
	}
}

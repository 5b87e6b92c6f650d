package clock

import (
	"math"
	"math/rand/v2"
	"testing"
)

// stream makes arrivals: samples at rate (Hz, off by ppm), a timer that hands
// over what there is every chunk seconds, and a scheduler that is late.
type stream struct {
	rate, ppm, chunk, late float64
	lose                   map[int]int // at this sample so many are lost (or, below 0, doubled)
	r                      *rand.Rand
}

// arrivals gives times of samples and when they arrive.
func (s stream) arrivals(seconds float64) (taken, arrived []float64) {
	period := (1 + s.ppm*1e-6) / s.rate
	phase, first := s.r.Float64()*s.chunk, s.r.Float64()*period
	last, due, delay := 0.0, -1.0, 0.0
	for i := 0; ; i++ {
		t := first + float64(i)*period
		if t > seconds {
			return taken, arrived
		}
		k := s.lose[i]
		if k > 0 {
			i += k - 1
			continue
		}
		at := t
		if s.chunk > 0 {
			at = phase + math.Ceil((t-phase)/s.chunk)*s.chunk
		}
		if at != due { // a chunk is late as a whole, one in four much later
			due, delay = at, 50e-6
			if s.late > 0 {
				delay += s.late * s.r.ExpFloat64() * float64(1+9*s.r.IntN(2)*s.r.IntN(2))
			}
		}
		at = math.Max(at+delay, last)
		last = at
		for range 1 - min(k, 0) {
			taken, arrived = append(taken, t), append(arrived, at)
		}
	}
}

// recovered gives the error of the period (share) and the rms error of the
// stamps, with the constant least delay taken out or not.
func recovered(t *testing.T, taken, arrived []float64, truth float64) (period, rms, naive float64, l Line, r *Recovery) {
	t.Helper()
	r = &Recovery{}
	for _, a := range arrived {
		r.Add(a)
	}
	l, ok := r.Line()
	if !ok {
		t.Fatal("no line")
	}
	for i, at := range taken {
		e := l.At(int64(i)) - at - 50e-6
		rms += e * e / float64(len(taken))
		n := arrived[i] - at
		naive += n * n / float64(len(taken))
	}
	return l.Period/truth - 1, math.Sqrt(rms), math.Sqrt(naive), l, r
}

// 960 samples a second in 16 ms chunks: after 10 s the period is known to 20
// parts in a million and the stamps to 50 us rms, where arrival times are off
// by some milliseconds.
func TestChunks(t *testing.T) {
	var worst, worstRMS, worstNaive float64
	for seed := range uint64(300) {
		r := rand.New(rand.NewPCG(seed, 1))
		s := stream{rate: 960, ppm: 100 * (2*r.Float64() - 1), chunk: 0.016, r: r}
		taken, arrived := s.arrivals(10)
		period, rms, naive, l, _ := recovered(t, taken, arrived, (1+s.ppm*1e-6)/960)
		worst, worstRMS, worstNaive = math.Max(worst, math.Abs(period)), math.Max(worstRMS, rms), math.Max(worstNaive, naive)
		if off := math.Abs(period) * l.Period; off > 3*l.Uncertainty {
			t.Errorf("seed %d: period off by %.3g s, stated %.3g s", seed, off, l.Uncertainty)
		}
	}
	t.Logf("worst of 300: period %.2f ppm, stamps %.1f us rms, arrival times %.0f us rms", worst*1e6, worstRMS*1e6, worstNaive*1e6)
	if worst > 20e-6 || worstRMS > 50e-6 {
		t.Errorf("worst of 300: period %.2f ppm, stamps %.1f us rms", worst*1e6, worstRMS*1e6)
	}
}

// A loaded machine delivers late, never early.
func TestLate(t *testing.T) {
	for seed := range uint64(30) {
		r := rand.New(rand.NewPCG(seed, 2))
		s := stream{rate: 960, ppm: 40, chunk: 0.016, late: 2e-3, r: r}
		taken, arrived := s.arrivals(30)
		period, rms, naive, l, _ := recovered(t, taken, arrived, (1+s.ppm*1e-6)/960)
		if math.Abs(period)*l.Period > 4*l.Uncertainty || rms > naive/20 {
			t.Errorf("seed %d: period %.1f ppm, stamps %.0f us, arrival times %.0f us", seed, period*1e6, rms*1e6, naive*1e6)
		}
	}
}

// One reading lost or doubled is suspected, and nothing else is, where chunks
// do not beat with samples.
func TestSuspects(t *testing.T) {
	for seed := range uint64(60) {
		r := rand.New(rand.NewPCG(seed, 3))
		s := stream{rate: 960, ppm: 60 * (2*r.Float64() - 1), chunk: 0.016, late: 1e-4, r: r}
		at := 6000 + r.IntN(10000)
		k := []int{0, 1, 2, 5, -1}[seed%5]
		if k != 0 {
			s.lose = map[int]int{at: k}
		}
		_, arrived := s.arrivals(30)
		rec := &Recovery{}
		for _, a := range arrived {
			rec.Add(a)
		}
		got := rec.Suspects()
		switch {
		case k == 0 && len(got) > 0:
			t.Errorf("seed %d: a whole stream is suspected: %v", seed, got)
		case k != 0 && (len(got) != 1 || math.Abs(got[0].Readings-float64(k)) > 0.5 || math.Abs(float64(got[0].After)-float64(at)) > 3000):
			t.Errorf("seed %d: %d lost at %d: %v", seed, k, at, got)
		}
	}
}

// A chunk timer that beats with the samples moves the delay floor over a whole
// sample by itself: nobody is suspected for that, but for a reading lost beside.
func TestBeat(t *testing.T) {
	for seed := range uint64(40) {
		r := rand.New(rand.NewPCG(seed, 4))
		s := stream{rate: 1000, ppm: 100 * (2*r.Float64() - 1), chunk: 0.016, late: 5e-5, r: r}
		_, arrived := s.arrivals(120)
		rec := &Recovery{}
		for _, a := range arrived {
			rec.Add(a)
		}
		l, _ := rec.Line()
		off := l.Period - (1+s.ppm*1e-6)/1000
		if got := rec.Suspects(); len(got) > 0 || math.Abs(off) > 20e-9 || math.Abs(off) > 2.5*l.Uncertainty {
			t.Errorf("seed %d, %.1f ppm: suspected %v, period off by %.1f ppm", seed, s.ppm, got, (l.Period/((1+s.ppm*1e-6)/1000)-1)*1e6)
		}
	}
}

// Too few readings, one burst and a standing clock give no line.
func TestNoLine(t *testing.T) {
	var r Recovery
	if _, ok := r.Line(); ok {
		t.Error("a line of nothing")
	}
	for range 1000 {
		r.Add(1)
	}
	if l, ok := r.Line(); ok {
		t.Errorf("a line of one burst: %+v", l)
	}
}

// Cost of a reading.
func BenchmarkAdd(b *testing.B) {
	s := stream{rate: 1000, chunk: 0.016, r: rand.New(rand.NewPCG(1, 1))}
	_, arrived := s.arrivals(60)
	b.ReportAllocs()
	b.ResetTimer()
	for i := 0; b.Loop(); {
		var r Recovery
		for _, a := range arrived {
			r.Add(a)
		}
		i++
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(len(arrived)), "ns/reading")
}

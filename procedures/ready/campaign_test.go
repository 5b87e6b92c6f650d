package ready

import (
	"math"
	"math/rand/v2"
	"os"
	"testing"
)

// full says whether whole campaigns are asked for.
func full() bool { return os.Getenv("KYMOBENCH_FULL") != "" }

// allowed is the error of the difference that a point may have, mmHg, and the
// rule's settings for it: lag 0.5 s known to 0.1 s, skew 50 ms, 15 readings.
const allowed = 0.1

func campaignSettings() Settings {
	return Settings{
		Standard: StandardFor(allowed, 0.003), Delay: 0.5, DelayUncertainty: math.Hypot(0.1, 0.05),
		Settling: 0.5, LeastReadings: 15,
	}
}

// tally is what a campaign counts.
type tally struct {
	points, ready, wrong int
	seconds              float64
}

func (t *tally) add(o outcome) {
	t.points++
	t.seconds += o.seconds
	if o.ready {
		t.ready++
		if math.Abs(o.err) > allowed {
			t.wrong++
		}
	}
}

func (t tally) wrongShare() float64 { return float64(t.wrong) / float64(t.points) }
func (t tally) mean() float64       { return t.seconds / float64(t.points) }

// mayBe is how many of n may be wrong at a probability p without giving it the
// lie: 3 standard deviations more, and one.
func mayBe(p float64, n int) int {
	return int(p*float64(n) + 3*math.Sqrt(p*float64(n)) + 1)
}

// The whole campaign is 45 cells x 1,000 points; the bounds are its own there,
// with no allowance for chance. Points not ready in a minute count as a minute.
func TestTimeAtAPoint(t *testing.T) {
	points := 40
	if full() {
		points = 1000
	}
	rule := NewWatch(campaignSettings())
	var all tally
	for i, c := range grid() {
		var one tally
		for k := range points {
			o := c.point(rand.New(rand.NewPCG(uint64(i), uint64(k)))).take(rule, 60)
			one.add(o)
			all.add(o)
		}
		if full() {
			t.Logf("tau %2.0f s, noise %.2f, leak %.2f: mean %5.2f s, not ready %d, wrong %d of %d",
				c.tau, c.noise, c.leak, one.mean(), one.points-one.ready, one.wrong, one.points)
		}
		most := mayBe(0.01, points)
		if full() {
			most = points / 100
		}
		if one.wrong > most {
			t.Errorf("tau %g s, noise %g, leak %g: the difference is off by more than %g in %d of %d", c.tau, c.noise, c.leak, allowed, one.wrong, points)
		}
	}
	t.Logf("mean %.2f s, wrong %.3f %%, not ready %d of %d", all.mean(), all.wrongShare()*100, all.points-all.ready, all.points)
	if most := 0.003; all.wrongShare() > most {
		t.Errorf("off by more than %g in %.3f %% of all points, at most %.1f %% may be", allowed, all.wrongShare()*100, most*100)
	}
	if all.mean() > 7 {
		t.Errorf("a point takes %.2f s on average, 7 s are allowed", all.mean())
	}
}

// The generator must be able to give the rule the lie: what is known to fail,
// a fixed dwell on the raw difference and a rule that believes in no delay,
// fails here.
func TestCampaignCatchesBadRules(t *testing.T) {
	hurried := campaignSettings()
	hurried.Delay, hurried.DelayUncertainty = 0, 0
	careless := campaignSettings()
	careless.Standard *= 3
	for name, settings := range map[string]Settings{"no delay": hurried, "three times the uncertainty": careless} {
		rule := NewWatch(settings)
		var all tally
		for i, c := range grid() {
			for k := range 20 {
				all.add(c.point(rand.New(rand.NewPCG(uint64(i), uint64(k)))).take(rule, 60))
			}
		}
		if all.wrongShare() < 0.02 {
			t.Errorf("%s: only %.2f %% wrong, so the campaign sees nothing", name, all.wrongShare()*100)
		}
	}
}

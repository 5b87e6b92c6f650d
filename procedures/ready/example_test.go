package ready_test

import (
	"fmt"
	"math"

	"kymobench/procedures/ready"
)

// A difference that is to be off by more than 0.1 mmHg in 0.3 % of all points,
// with a reference that lags by 0.5 s, known to 0.1 s, and a skew of 50 ms.
func ExampleWatch() {
	watch := ready.NewWatch(ready.Settings{
		Standard:         ready.StandardFor(0.1, 0.003),
		Delay:            0.5,
		DelayUncertainty: math.Hypot(0.1, 0.05),
		Settling:         0.5,
		LeastReadings:    15,
	})
	told := ready.Nothing
	for i := 0; ; i++ {
		t := float64(i) / 10
		p := 2 * math.Exp(-t/4) // what still relaxes
		wiggle := 0.02 * math.Sin(float64(7*i*i))
		state := watch.Add(ready.Sample{Time: t, Reference: 200 + p/(1-0.5/4), UUT: 200.7 + p + wiggle})
		if state.Ready {
			fmt.Printf("%.1f s: %.2f mmHg over %.1f s\n", t, state.Mean, state.Seconds)
			return
		}
		if state.Status.Kind != told {
			told = state.Status.Kind
			fmt.Printf("%.1f s: %s\n", t, state.Status.Text("mmHg"))
		}
	}
	// Output:
	// 0.0 s: readings: 0 of 15
	// 1.9 s: reference still moving 0.43 mmHg/s, about 2 s
	// 4.2 s: 0.69 mmHg over 1.4 s
}

package settle_test

import (
	"fmt"
	"time"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/settle"
)

func Example() {
	const psi = 6894.757293168361 // Pa
	var readings []settle.Reading
	for _, r := range []struct {
		minutes  time.Duration
		pressure quantity.GaugePressure
	}{{1, 1568}, {3, 1541}, {6, 1535}, {10, 1529}, {15, 1523}, {25, 1514}, {40, 1506}, {60, 1502}} {
		readings = append(readings, settle.Reading{After: r.minutes * time.Minute, Pressure: r.pressure * psi, U: 1.5 * psi})
	}
	f, err := settle.New(readings, settle.Options{})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("settles at %.0f psi, 95 %% between %.0f and %.0f\n", float64(f.Settled/psi), float64(f.Low/psi), float64(f.High/psi))
	r, err := f.Retest(20*time.Minute, 5*psi)
	fmt.Println("a retest after 20 min is too early:", r.TooEarly, err)
	fmt.Println("wait", r.Earliest.Round(time.Minute))
	// Output:
	// settles at 1498 psi, 95 % between 1492 and 1503
	// a retest after 20 min is too early: true <nil>
	// wait 1h9m0s
}

package trend_test

import (
	"fmt"
	"time"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/trend"
)

const psi = 6894.757293168361 // Pa

func week(n int) time.Time { return time.Date(2031, 3, 1+7*n, 6, 0, 0, 0, time.UTC) }

func Example() {
	var points []trend.Point
	for i, p := range []quantity.GaugePressure{1502, 1491, 1478, 1475, 1457, 1449, 1441, 1428, 1424, 1407} {
		points = append(points, trend.Point{At: week(i), Pressure: p * psi, U: 6 * psi, Gauge: "G-7", Bias: 4 * psi, Segment: "charge of 1 March"})
	}
	f, err := trend.New(points, trend.Options{})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%.2f psi a day, 95 %% between %.2f and %.2f\n", f.Rate.PsiPerDay(), f.Low.PsiPerDay(), f.High.PsiPerDay())
	p, _ := f.Exceeds(trend.PerDay(1.2 * psi))
	fmt.Printf("leak seen: %v; above 1.2 psi a day with a chance of %.1f %%\n", f.LeakSeen(), 100*p)
	d, err := f.Forecast(1350*psi, 1600*psi)
	fmt.Println("leaves its limits between", d.NotBefore.Format(time.DateOnly), "and", d.By.Format(time.DateOnly), err)
	// Output:
	// -1.46 psi a day, 95 % between -1.64 and -1.27
	// leak seen: true; above 1.2 psi a day with a chance of 99.7 %
	// leaves its limits between 2031-06-03 and 2031-06-25 <nil>
}

func ExampleFit_LossBelow() {
	var points []trend.Point
	for i, p := range []quantity.GaugePressure{1502, 1497, 1503, 1499, 1501, 1498} {
		points = append(points, trend.Point{At: week(i), Pressure: p * psi, U: 6 * psi, Gauge: "G-7", Bias: 4 * psi})
	}
	f, err := trend.New(points, trend.Options{})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("no leak seen above %.1f psi a day\n", f.LossBelow().PsiPerDay())
	// Output:
	// no leak seen above 0.5 psi a day
}

package trend

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

const psi = 6894.757293168361 // Pa

func sheet() calc.Limits {
	return calc.Limits{Gas: gas.Nitrogen(), Ambient: quantity.StandardAtmosphere, Reference: 293.15, Charge: 1500 * psi, Minus: 100 * psi, Plus: 100 * psi}
}

func dial(t testing.TB, name, accuracy string, division quantity.GaugePressure) calc.Gauge {
	t.Helper()
	a, err := calc.ParseAccuracy(accuracy)
	if err != nil {
		t.Fatal(err)
	}
	return calc.Gauge{Name: name, Span: 3000 * psi, Accuracy: a, Graduation: division, InCalibration: true}
}

func reading(gauge calc.Gauge, at time.Time, pressure quantity.GaugePressure, temperature quantity.Temperature) Reading {
	return Reading{at, gauge, calc.Reading{
		Gauge: pressure, Temperature: temperature, TemperatureFrom: calc.ShellProbe, Ambient: quantity.StandardAtmosphere, AmbientKnown: true,
		Relieved: calc.Relief{How: "pedal", Seen: true},
	}}
}

// kind of invented history.
type kind struct {
	odd      float64 // chance that a reading is mistyped or hot
	leak     float64 // the greatest loss, psi a day
	gauges   int     // at most
	charges  int     // at most, in between
	readings int     // at least
	season   bool    // the gas cools from 30 to -5 degC along the history, by weather up to 5 K off, in place of at random
	bias     string  // of the gauges: "drawn" within the class; "high", all at its upper end; "apart", in turn at either end
}

// invented is a history whose truth is known.
type invented struct {
	points []Point
	rate   Rate
	level  func(at time.Time) quantity.GaugePressure // of the last segment
	n      int                                       // charges
}

// invent makes up to 24 readings over 30 to 200 days, with gauges changed and charges made in between. The gas is at -10 to
// 35 degC and its temperature is read up to 1 K wrong; the dials' coefficients of temperature are anywhere up to 0.04 % of span a
// kelvin; a dial sticks by a fifth of its class and is read to a division. Odd readings are 40 to 150 psi off. Each goes through
// the correction and its budget like a real one.
func invent(t testing.TB, r *rand.Rand, k kind) invented {
	const class, division = 30 * psi, 10 * psi
	n := k.readings + r.IntN(25-k.readings)
	span := (30 + 170*r.Float64()) * day
	h := invented{rate: Rate(-k.leak * r.Float64() * psi / day), n: r.IntN(k.charges + 1)}
	gauges := 1 + r.IntN(k.gauges)
	if k.bias == "apart" {
		gauges = k.gauges
	}
	var dials []calc.Gauge
	var bias, coefficient []float64
	sides := func() float64 { return 2*r.Float64() - 1 }
	for i := range gauges {
		coefficient = append(coefficient, 0.0004*3000*psi*sides())
		dials = append(dials, dial(t, fmt.Sprint("G-", i), "ASME A", division))
		b := class * (2*r.Float64() - 1)
		switch k.bias {
		case "high":
			b = class
		case "apart":
			b = class * float64(1-2*(i%2))
		}
		bias = append(bias, b)
	}
	base, segment := 1500*psi, 0
	for i := range n {
		at := span * (float64(i) + 0.8*r.Float64()) / float64(n)
		if s := i * (h.n + 1) / n; s != segment {
			segment = s
			base = 1500*psi + sides()*40*psi - float64(h.rate)*at
		}
		g := i * gauges / n
		warm := quantity.Temperature(263.15 + 45*r.Float64())
		if k.season {
			warm = quantity.Temperature(303.15 - 35*at/span + 5*sides())
		}
		p, err := calc.Correct(gas.Nitrogen(), quantity.Pressure(base+float64(h.rate)*at)+quantity.StandardAtmosphere, 293.15, warm)
		if err != nil {
			t.Fatal(err)
		}
		shown := float64(p.Gauge(quantity.StandardAtmosphere)) + bias[g] + coefficient[g]*float64(warm-293.15) + repeatable*class*sides()
		if r.Float64() < k.odd {
			shown += math.Copysign(40+110*r.Float64(), sides()) * psi
		}
		shown = math.Round(shown/division) * division
		point, err := reading(dials[g], after(at), quantity.GaugePressure(shown), warm+quantity.Temperature(sides())).Point(sheet(), fmt.Sprint("S-", segment))
		if err != nil {
			t.Fatal(err)
		}
		h.points = append(h.points, point)
	}
	h.level = func(at time.Time) quantity.GaugePressure {
		return quantity.GaugePressure(base + float64(h.rate)*at.Sub(start).Seconds())
	}
	return h
}

func (f *Fit) holds(r Rate) bool { return f.Low <= r && r <= f.High }

// The truth is invented. 1,000 histories, since 500 leave a standard error of 1 % and the bar is near: it is 93 to 97 % of
// intervals, for the fit of all readings. The fit without the odd ones is shown beside it and has no bar of its own: leaving out
// what was pointed at makes it too sure of itself when many are odd. Over 2,500 histories the five cover in 95.6, 95.8, 93.9, 94.5
// and 96.3 %.
func TestCoverage(t *testing.T) {
	for name, k := range map[string]struct {
		kind
		bar int
	}{
		"temperature errors, gauges changed":                 {kind{0, 4, 3, 2, 4, false, "drawn"}, 93},
		"the same, one reading in twenty odd":                {kind{0.05, 4, 3, 2, 4, false, "drawn"}, 93},
		"the same, one reading in ten odd":                   {kind{0.1, 4, 3, 2, 4, false, "drawn"}, 93},
		"one gauge, from summer to winter":                   {kind{0, 4, 1, 0, 4, true, "drawn"}, 93},
		"one gauge, no charge in between, one in twenty odd": {kind{0.05, 4, 1, 0, 4, false, "drawn"}, 93},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			const n = 1000
			r := rand.New(rand.NewPCG(2031, 500))
			var all, without, odd, robust, robusts, leaks int
			for range n {
				h := invent(t, r, k.kind)
				f, err := New(h.points, Options{})
				if err != nil {
					t.Fatal(err)
				}
				w := f
				if f.Without != nil {
					w = f.Without
				}
				odd += len(f.Odd)
				if f.holds(h.rate) {
					all++
				}
				if w.holds(h.rate) {
					without++
				}
				if f.LeakSeen() {
					leaks++
				}
				if f.Robust != nil && f.Standing >= Warning {
					robusts++
					if f.Robust.Low <= h.rate && h.rate <= f.Robust.High {
						robust++
					}
				}
			}
			t.Logf("of %d histories, intervals of 95 %% hold the truth: all readings %.1f %%; without those pointed at %.1f %% (%.2f a history); "+
				"Theil-Sen, from six on, %.1f %%; leaks of 0 to 4 psi a day seen in %.0f %%",
				n, 100*float64(all)/n, 100*float64(without)/n, float64(odd)/n, 100*float64(robust)/float64(robusts), 100*float64(leaks)/n)
			if all < n*k.bar/100 || all > n*97/100 {
				t.Errorf("coverage %d of %d is not %d to 97 %%", all, n, k.bar)
			}
		})
	}
}

// Invented units that do not leak: a steady bias of the whole class, and gauges changed, are leaks in at most 5 %.
func TestFalseAlarms(t *testing.T) {
	for name, k := range map[string]kind{
		"one gauge, high by its whole class":             {0, 0, 1, 1, 6, false, "high"},
		"gauges changed, biases anywhere in their class": {0, 0, 3, 2, 6, false, "drawn"},
		"gauges changed, one reading in twenty odd":      {0.05, 0, 3, 2, 6, false, "drawn"},
		"one gauge, from summer to winter":               {0, 0, 1, 0, 6, true, "drawn"},
		"two gauges at either end of their class":        {0, 0, 2, 0, 6, false, "apart"},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			const n = 500
			r := rand.New(rand.NewPCG(12, 500))
			alarms := 0
			for range n {
				f, err := New(invent(t, r, k).points, Options{})
				if err != nil {
					t.Fatal(err)
				}
				if f.LeakSeen() {
					alarms++
				}
			}
			t.Logf("%d leaks claimed in %d tight units", alarms, n)
			if alarms > n*5/100 {
				t.Errorf("%d of %d is more than 5 %%", alarms, n)
			}
		})
	}
}

// Invented leaks, with the day of leaving the limit known.
func TestForecastCoverage(t *testing.T) {
	const n = 500
	r := rand.New(rand.NewPCG(13, 500))
	forecasts, held, ended := 0, 0, 0
	for range n {
		h := invent(t, r, kind{0.05, 4, 3, 1, 10, false, "drawn"})
		f, err := New(h.points, Options{})
		if err != nil {
			t.Fatal(err)
		}
		low := h.level(f.last) - quantity.GaugePressure((20+150*r.Float64())*psi)
		day, err := f.Forecast(low, 3000*psi)
		if err != nil {
			continue // a history too short for a date
		}
		truth := f.last.Add(time.Duration(min(float64(low-h.level(f.last))/float64(h.rate), horizon) * 1e9))
		forecasts++
		if !truth.Before(day.NotBefore) && (day.By.IsZero() || !truth.After(day.By)) {
			held++
		}
		if !day.By.IsZero() {
			ended++
		}
	}
	t.Logf("%d of %d forecasts hold the day; %d have an end", held, forecasts, ended)
	if forecasts < n/2 || held < forecasts*93/100 || ended < forecasts/3 {
		t.Errorf("%d of %d hold, %d have an end", held, forecasts, ended)
	}
}

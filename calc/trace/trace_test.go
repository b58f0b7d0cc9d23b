package trace_test

import (
	"math"
	"testing"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/trace"
)

const psi = 6894.757293168361 // Pa

// The printed case: TM 5-3805-290-23-2, WP 0126: the system at 450 +/-25 psi; on working the lever the pressure falls steadily
// and near 125 psi drops to zero; that is about the charge. The readings between are made up: an isotherm of an ideal gas to
// 125 psi over ten strokes, read to 5 psi.
func TestPrintedCase(t *testing.T) {
	var ps []trace.Pair
	for x := range 11 {
		p := (450+14.696)/(1+0.2211*float64(x)) - 14.696
		ps = append(ps, trace.Pair{Drawn: float64(x), Pressure: quantity.GaugePressure(5*math.Round(p/5)) * psi})
	}
	ps = append(ps, trace.Pair{Drawn: 11}, trace.Pair{Drawn: 12})
	f, err := trace.New(ps, trace.Options{Temperature: 294, U: 1.5 * psi, Bias: 1.5 * psi})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%.1f psi, 95 %% %.1f to %.1f, break at %.2f, gas volume %.1f strokes, cooled %.2f, scatter %.2f, %q", f.Charge/psi, f.Low/psi, f.High/psi, f.Break, f.GasVolume, f.Cooled, f.Scatter, f.Flags())
	if math.Abs(float64(f.Charge)-125*psi) > 5*psi || !(f.Low < 125*psi && f.High > 125*psi) {
		t.Errorf("%.1f psi, 95 %% %.1f to %.1f; printed about 125", f.Charge/psi, f.Low/psi, f.High/psi)
	}
}

func BenchmarkNew(b *testing.B) {
	var ps []trace.Pair
	for x := range 11 {
		p := (450+14.696)/(1+0.2211*float64(x)) - 14.696
		ps = append(ps, trace.Pair{Drawn: float64(x), Pressure: quantity.GaugePressure(5*math.Round(p/5)) * psi})
	}
	ps = append(ps, trace.Pair{Drawn: 11}, trace.Pair{Drawn: 12})
	for range b.N {
		if _, err := trace.New(ps, trace.Options{Temperature: 294, U: 1.5 * psi, Bias: 1.5 * psi}); err != nil {
			b.Fatal(err)
		}
	}
}

package gas

import (
	"errors"
	"math"
	"strings"
	"testing"

	"example.org/chargehand/calc/quantity"
)

// Source: a standard textbook example of thermodynamics, from memory: nitrogen at 175 K and 0.00375 m3/kg, by experiment
// 10,000 kPa, by the ideal gas law 13,851 kPa, by older equations 10,110 kPa (Beattie and Bridgeman) and 10,009 kPa (Benedict,
// Webb and Rubin). The reference equation gives 10,001 kPa, evaluated apart from this program. That is colder than a charge can
// be, so only this package can ask for it; everybody else is told the limit.
func TestColderThanTheTool(t *testing.T) {
	const T, v = 175., 0.00375
	g := Nitrogen()
	p := float64(g.state(T, 1/v).P) / 1e3
	if math.Abs(p-10_001) > 0.5 {
		t.Errorf("%.1f kPa, the reference equation gives 10,001", p)
	}
	if math.Abs(p/10_000-1) > 0.001 {
		t.Errorf("%.1f kPa, by experiment 10,000", p)
	}
	if ideal := g.SpecificGasConstant() * T / v / 1e3; math.Abs(ideal-13_851) > 1 || math.Abs(p-10_000) > math.Abs(10_009-10_000) {
		t.Errorf("ideal %.1f kPa, printed 13,851; and no nearer to the experiment than the older equations: %.1f kPa", ideal, p)
	}
	rho, err := g.density(T, 10_000e3)
	if err != nil || math.Abs(float64(rho)*v-1) > 0.001 {
		t.Errorf("%v kg/m3 at 10,000 kPa, %v; by experiment %v", rho, err, 1/v)
	}

	_, errDensity := g.Density(T, 10_000e3)
	_, errPressure := g.Pressure(T, 1/v)
	_, errState := g.State(T, 1/v)
	for what, err := range map[string]error{"Density": errDensity, "Pressure": errPressure, "State": errState} {
		var r *quantity.RangeError
		if !errors.As(err, &r) || r.Value != T || r.Low != float64(MinTemperature) || !strings.Contains(err.Error(), "200 to 420 K") {
			t.Errorf("%s at 175 K: %v; want the limit", what, err)
		}
	}
}

// Source: the reference equation of nitrogen evaluated apart from this program, at 20 degC. Mass of 50 in3; slope of a locked
// volume; exponent of an isentropic change; and how far the gas shrinks at one temperature from 1,000 to 3,000 psig. Beside them
// the ideal gas law, which is off by as much as stated there.
func TestChargeOfAUnit(t *testing.T) {
	const volume = 50 * 16.387064e-6 // m3
	at := func(psig, celsius float64) State {
		p := quantity.GaugePressure(psig * 6894.757293168361).Abs(quantity.StandardAtmosphere)
		T := quantity.Temperature(celsius + 273.15)
		rho, err := Nitrogen().density(float64(T), float64(p))
		if err != nil {
			t.Fatal(err)
		}
		return Nitrogen().state(float64(T), float64(rho))
	}
	ideal := func(s State) float64 { return float64(s.P) / (Nitrogen().SpecificGasConstant() * float64(s.T)) }
	for _, x := range []struct{ psig, grams, percent float64 }{{1000, 66.21, -0.5}, {1500, 98.15, 0.2}, {3000, 185.07, 5.8}} {
		s := at(x.psig, 20)
		if got := float64(s.Rho) * volume * 1e3; math.Abs(got-x.grams) > 0.005 {
			t.Errorf("%v psig: %.3f g, want %v", x.psig, got, x.grams)
		}
		if got := 100 * (ideal(s)/float64(s.Rho) - 1); math.Abs(got-x.percent) > 0.05 {
			t.Errorf("%v psig: the ideal law is off by %.2f %%, want %v", x.psig, got, x.percent)
		}
	}
	for _, x := range []struct{ psig, slope, ideal float64 }{{1000, 4.04, 3.46}, {1500, 6.42, 5.17}, {3000, 14.6, 10.3}} {
		s, digit := at(x.psig, 20), 0.005
		if x.psig == 3000 {
			digit = 0.05
		}
		if got, law := s.DpDT/6894.757293168361, float64(s.P)/float64(s.T)/6894.757293168361; math.Abs(got-x.slope) > digit || math.Abs(law-x.ideal) > digit {
			t.Errorf("%v psig: %.3f psi/K, ideal %.3f; want %v, %v", x.psig, got, law, x.slope, x.ideal)
		}
	}
	for _, x := range []struct{ psig, celsius, n float64 }{{0, 20, 1.40}, {1000, 20, 1.54}, {1500, 20, 1.63}, {3000, 20, 1.98}, {5000, 20, 2.52}, {3000, -20, 2.22}, {3000, 60, 1.86}} {
		if got := at(x.psig, x.celsius).Isentropic; math.Abs(got-x.n) > 0.005 {
			t.Errorf("%v psig, %v C: exponent %.4f, want %v", x.psig, x.celsius, got, x.n)
		}
	}
	low, high := at(1000, 20), at(3000, 20)
	if got, law := float64(low.Rho/high.Rho), ideal(low)/ideal(high); math.Abs(got-0.3577) > 0.5e-4 || math.Abs(law-0.3366) > 0.5e-4 {
		t.Errorf("1,000 to 3,000 psig: shrinks to %.5f, ideal %.5f; want 0.3577, 0.3366", got, law)
	}
}

package quantity

import (
	"errors"
	"math"
	"testing"
)

// Source: NIST SP 811 (2008) appendix B.8, factors to seven digits; the exact ones from the definitions of the pound, the inch
// and standard gravity.
func TestFactors(t *testing.T) {
	for _, c := range []struct {
		in   string
		want float64
		rel  float64
	}{
		{"1psi", 6894.757293168361, 1e-15},
		{"1bar", 1e5, 0},
		{"1kgf/cm2", 98066.5, 0},
		{"1inHg", 3386.389, 2e-7},
	} {
		g, err := ParseGauge(c.in)
		if err != nil || math.Abs(float64(g)/c.want-1) > c.rel {
			t.Errorf("%s = %v Pa, %v; want %v", c.in, g, err, c.want)
		}
	}
	for in, want := range map[string]float64{"32F": 273.15, "70F": 294.26111111111111, "-40C": 233.15, "-40F": 233.15, "300K": 300} {
		if got, err := ParseTemperature(in); err != nil || math.Abs(float64(got)-want) > 1e-12*want {
			t.Errorf("%s = %v K, %v; want %v", in, got, err, want)
		}
	}
	if v, err := ParseVolume("1in3"); err != nil || math.Abs(float64(v)/16.387064e-6-1) > 1e-15 {
		t.Errorf("1in3 = %v, %v", v, err)
	}
}

// Source: U.S. Standard Atmosphere, 1976, pressures by altitude in feet (hPa, two decimals) and its layer base at 11,000 m.
func TestStandardAtmosphere(t *testing.T) {
	for ft, hPa := range map[float64]float64{0: 1013.25, 1000: 977.17, 2000: 942.13, 4000: 875.11, 6000: 812.00, 8000: 752.62, 10000: 696.82, 15000: 571.82, 11000 / 0.3048: 226.32} {
		p, err := StandardAtmosphereAt(Elevation(ft * 0.3048))
		if err != nil || math.Abs(float64(p)/100-hPa) > 0.006 {
			t.Errorf("%v ft: %v Pa, %v; want %v hPa", ft, p, err, hPa)
		}
	}
	for _, h := range []Elevation{-501, 11001, Elevation(math.NaN())} {
		if _, err := StandardAtmosphereAt(h); !errors.Is(err, ErrOutOfRange) {
			t.Errorf("%v m: %v", h, err)
		}
	}
}

func TestParseKeepsWhatWasTyped(t *testing.T) {
	for in, want := range map[string]Written{
		"1180psi": {1180, 0, "psi"}, "1,180 psi": {1180, 0, "psi"}, "81.4 bar": {814, -1, "bar"}, "-12C": {-12, 0, "C"},
		"70.0F": {700, -1, "F"}, "1180": {1180, 0, ""}, " 0.05 MPa ": {5, -2, "MPa"}, "29.92inhg": {2992, -2, "inHg"}, "+5 K": {5, 0, "K"},
	} {
		got, err := Parse(in)
		if err != nil || got != want {
			t.Errorf("Parse(%q) = %+v, %v; want %+v", in, got, err, want)
		}
	}
	for _, in := range []string{"", "psi", "abc", "1180psix", "1.psi", "1,18psi", "1180,5psi", "1e3psi", "--5C", "NaNpsi", "Infpsi", "1 1psi", "99999999999999999psi", "5mPa", "1.1.1psi"} {
		if got, err := Parse(in); err == nil {
			t.Errorf("Parse(%q) = %+v, want an error", in, got)
		}
	}
}

func TestKindsDoNotMix(t *testing.T) {
	for in, parse := range map[string]func(string) error{
		"70F":    func(s string) error { _, err := ParseGauge(s); return err },
		"1180":   func(s string) error { _, err := ParseGauge(s); return err },
		"5psi":   func(s string) error { _, err := ParseTemperature(s); return err },
		"-500F":  func(s string) error { _, err := ParseTemperature(s); return err },
		"0psi":   func(s string) error { _, err := ParsePressure(s); return err },
		"100psi": func(s string) error { _, err := ParseElevation(s); return err },
	} {
		if err := parse(in); err == nil {
			t.Errorf("%q was taken", in)
		}
	}
}

func FuzzParse(f *testing.F) {
	for _, s := range []string{"1180psi", "-0.5 C", "1,180 psi", "000.10bar", "1e9psi"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		w, err := Parse(s)
		if err != nil {
			return
		}
		again, err := Parse(w.String())
		if err != nil || again != w {
			t.Errorf("%q is %+v, printed %q, read back %+v, %v", s, w, w.String(), again, err)
		}
	})
}

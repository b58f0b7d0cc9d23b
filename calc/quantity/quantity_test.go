package quantity

import (
	"errors"
	"math"
	"testing"
)

// Source: NIST SP 811 (2008) appendix B.8, factors to seven digits; the exact ones from the definitions of the pound, the inch,
// the gallon and standard gravity.
func TestFactors(t *testing.T) {
	gauge := func(s string) (float64, error) { v, err := ParseGauge(s); return float64(v), err }
	volume := func(s string) (float64, error) { v, err := ParseVolume(s); return float64(v), err }
	flow := func(s string) (float64, error) { v, err := parseAs(s, Written.VolumeRate); return float64(v), err }
	leak := func(s string) (float64, error) { v, err := parseAs(s, Written.PressureRate); return float64(v), err }
	elevation := func(s string) (float64, error) { v, err := ParseElevation(s); return float64(v), err }
	for _, c := range []struct {
		in    string
		parse func(string) (float64, error)
		want  float64
		rel   float64
	}{
		{"1psi", gauge, 6894.757, 1e-7},
		{"1psi", gauge, 6894.757293168361, 1e-15},
		{"1bar", gauge, 1e5, 0},
		{"1kPa", gauge, 1e3, 0},
		{"1MPa", gauge, 1e6, 0},
		{"1hPa", gauge, 100, 0},
		{"1kgf/cm2", gauge, 98066.5, 0},
		{"1inHg", gauge, 3386.389, 2e-7},
		{"1in3", volume, 16.387064e-6, 1e-15},
		{"1cm3", volume, 1e-6, 0},
		{"1mL", volume, 1e-6, 0},
		{"1L", volume, 1e-3, 0},
		{"1USgal", volume, 3.785412e-3, 1e-7},
		{"1in3/min", flow, 2.731177e-7, 2e-7},   // from memory of the same appendix
		{"1USgal/min", flow, 6.309020e-5, 1e-7}, // from memory of the same appendix
		{"1L/min", flow, 1e-3 / 60, 1e-15},
		{"3600mL/h", flow, 1e-6, 1e-15},
		{"60cm3/min", flow, 1e-6, 1e-15},
		{"60in3/min", flow, 16.387064e-6, 1e-15},
		{"1in3/s", flow, 16.387064e-6, 1e-15},
		{"86400psi/day", leak, 6894.757293168361, 1e-15},
		{"0.864bar/day", leak, 1, 1e-15},
		{"60psi/min", leak, 6894.757293168361, 1e-15},
		{"0.0006bar/min", leak, 1, 1e-15},
		{"1ft", elevation, 0.3048, 0},
		{"1m", elevation, 1, 0},
	} {
		v, err := c.parse(c.in)
		if err != nil || math.Abs(v/c.want-1) > c.rel {
			t.Errorf("%s = %v, %v; want %v", c.in, v, err, c.want)
		}
	}
	for in, want := range map[string]float64{"9F": 5, "5C": 5, "5K": 5, "-9F": -5} {
		w, err := Parse(in)
		if err != nil {
			t.Fatal(err)
		}
		if d, err := w.TemperatureDifference(); err != nil || math.Abs(float64(d)-want) > 1e-15*math.Abs(want) {
			t.Errorf("a difference of %s = %v K, %v; want %v", in, d, err, want)
		}
	}
	for in, want := range map[string]float64{"32F": 273.15, "70F": 294.26111111111111, "-40C": 233.15, "-40F": 233.15, "300K": 300} {
		if got, err := ParseTemperature(in); err != nil || math.Abs(float64(got)-want) > 1e-12*want {
			t.Errorf("%s = %v K, %v; want %v", in, got, err, want)
		}
	}
}

// Source: U.S. Standard Atmosphere, 1976, pressures by altitude in feet (hPa, two decimals) and its layer base at 11,000 m.
func TestStandardAtmosphere(t *testing.T) {
	for ft, hPa := range map[float64]float64{
		0: 1013.25, 1000: 977.17, 2000: 942.13, 3000: 908.12, 4000: 875.11, 5000: 843.07, 6000: 812.00, 7000: 781.85,
		8000: 752.62, 9000: 724.29, 10000: 696.82, 11000: 670.20, 12000: 644.41, 13000: 619.43, 14000: 595.24, 15000: 571.82,
		11000 / 0.3048: 226.32,
	} {
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
	for _, in := range []string{"", "psi", "abc", "1180psix", "1.psi", "1,18psi", "1180,5psi", "1e3psi", "--5C", "-+5C", "+-5C", "NaNpsi", "Infpsi", "1 1psi", "99999999999999999psi", "5mPa", "1.1.1psi"} {
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

// A value shown in a unit and read again is the same value, whatever the unit.
func TestInUnitUndoesTheFactor(t *testing.T) {
	for _, u := range units {
		w := Written{1234, -1, u.name}
		var back float64
		var err error
		switch u.kind {
		case pressure:
			g, _ := w.Gauge()
			p, _ := w.Absolute()
			if back, err = g.InUnit(u.name); err == nil {
				var other float64
				if other, err = p.InUnit(u.name); other != back {
					t.Errorf("%s: gauge %v, absolute %v", w, back, other)
				}
			}
		case temperature:
			k, _ := w.Temperature()
			back, err = k.InUnit(u.name)
		default:
			continue
		}
		if err != nil || math.Abs(back-123.4) > 1e-12*123.4 {
			t.Errorf("%s is %v %s, %v", w, back, u.name, err)
		}
	}
	if v, err := GaugePressure(1e6).InUnit("F"); err == nil {
		t.Errorf("a pressure in F is %v", v)
	}
}

// A value that nobody typed still prints as itself and gives an error or a finite number.
func TestMadeUpExponents(t *testing.T) {
	for _, e := range []int{math.MinInt, -1 << 40, -400, -19, 19, 400, math.MaxInt} {
		w := Written{7, e, "psi"}
		if len(w.String()) > 40 {
			t.Errorf("exponent %d is written with %d characters", e, len(w.String()))
		}
		if g, err := w.Gauge(); math.IsNaN(float64(g)) || math.IsInf(float64(g), 0) {
			t.Errorf("%s = %v, %v", w, g, err)
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

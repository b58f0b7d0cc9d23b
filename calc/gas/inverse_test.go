package gas

import (
	"errors"
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.org/chargehand/calc/quantity"
)

func TestInverse(t *testing.T) {
	for _, g := range []*Model{Nitrogen(), DryAir(), Ideal()} {
		rapid.Check(t, func(t *rapid.T) {
			T := quantity.Temperature(rapid.Float64Range(200.1, 419.9).Draw(t, "T"))
			near := quantity.Temperature(rapid.Float64Range(200, 420).Draw(t, "near"))
			p := quantity.Pressure(math.Exp(rapid.Float64Range(math.Log(0.051e6), math.Log(69e6)).Draw(t, "ln p")))
			rho, err := g.Density(T, p)
			if err != nil {
				t.Fatal(err)
			}
			s, err := g.State(T, rho)
			if err != nil {
				t.Fatal(err)
			}
			byU, err := g.StateAtEnergy(rho, s.U, near)
			if err != nil || math.Abs(float64(byU.T/T)-1) > 1e-11 {
				t.Fatalf("%s: energy of %v K gives %v K, %v", g.Name(), T, byU.T, err)
			}
			byS, err := g.StateAtEntropy(rho, s.S, near)
			if err != nil || math.Abs(float64(byS.T/T)-1) > 1e-11 {
				t.Fatalf("%s: entropy of %v K gives %v K, %v", g.Name(), T, byS.T, err)
			}
		})
	}
}

func TestInverseOutside(t *testing.T) {
	g := Nitrogen()
	s := g.state(430, 100)
	_, err := g.StateAtEnergy(100, s.U, 300)
	var outside *quantity.RangeError
	if !errors.As(err, &outside) || math.Abs(outside.Value-430) > 1e-6 {
		t.Errorf("energy of 430 K: %v", err)
	}
	for _, rho := range []Density{0, -1, Density(math.NaN()), 1e6} {
		if _, err := g.StateAtEnergy(rho, 2e5, 300); !errors.Is(err, quantity.ErrOutOfRange) {
			t.Errorf("density %v: %v", rho, err)
		}
	}
	if _, err := g.StateAtEnergy(100, math.Inf(1), 300); err == nil {
		t.Error("infinite energy passes")
	}
	if _, err := g.StateAtEnergy(100, math.NaN(), 300); err == nil {
		t.Error("energy that is no number passes")
	}
}

// Source: textbook result for an evacuated, insulated vessel filled from a line at Ts: the energy of what is inside is the
// enthalpy of the line, so T2 = cp/cv Ts, and 290 K gives 406 K for 1.4.
func TestEvacuatedVessel(t *testing.T) {
	for g, tolerance := range map[*Model]float64{Ideal(): 1e-9, Nitrogen(): 1.0} { // the real gas at 1 atm is within 1 K of it
		rho, err := g.Density(290, quantity.StandardAtmosphere)
		if err != nil {
			t.Fatal(err)
		}
		line, err := g.State(290, rho)
		if err != nil {
			t.Fatal(err)
		}
		inside, err := g.StateAtEnergy(rho, line.H, 290)
		if err != nil || math.Abs(float64(inside.T)-406) > tolerance {
			t.Errorf("%s: %v K, %v", g.Name(), inside.T, err)
		}
	}
}

// The quick temperature is that of the full inversion, from near and from far.
func TestTemperatureAtEnergy(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		g := rapid.SampledFrom([]*Model{Nitrogen(), DryAir()}).Draw(t, "gas")
		at := quantity.Temperature(rapid.Float64Range(201, 419).Draw(t, "K"))
		p := quantity.Pressure(rapid.Float64Range(0.1e6, 60e6).Draw(t, "Pa"))
		rho, err := g.Density(at, p)
		if err != nil {
			t.Skip(err)
		}
		s, err := g.State(at, rho)
		if err != nil {
			t.Skip(err)
		}
		near := quantity.Temperature(rapid.Float64Range(150, 500).Draw(t, "near"))
		if got, err := g.TemperatureAtEnergy(rho, s.U, near); err != nil || math.Abs(float64(got/at)-1) > 1e-10 {
			t.Fatalf("%v K, %v; want %v K", got, err, at)
		}
	})
}

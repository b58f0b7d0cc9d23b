package gas

import (
	"errors"
	"math"
	"testing"

	"pgregory.net/rapid"

	"example.org/chargehand/calc/quantity"
)

// Source: the definition of an isentropic change, for any state that the gas may have.
func TestIsentropeKeepsEntropy(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		g := rapid.SampledFrom([]*Model{Nitrogen(), DryAir()}).Draw(t, "gas")
		T := quantity.Temperature(rapid.Float64Range(200, 420).Draw(t, "T"))
		p := quantity.Pressure(rapid.Float64Range(0.1e6, 69e6).Draw(t, "p"))
		rho, err := g.Density(T, p)
		if err != nil {
			t.Fatal(err)
		}
		from, err := g.State(T, rho)
		if err != nil {
			t.Fatal(err)
		}
		to := quantity.Pressure(rapid.Float64Range(0.051e6, 69e6).Draw(t, "to"))
		end, err := g.Isentrope(from, to)
		if errors.Is(err, quantity.ErrOutOfRange) {
			return
		}
		if err != nil {
			t.Fatal(err)
		}
		if d := math.Abs(end.S/from.S - 1); d > 1e-9 {
			t.Errorf("%s from %v K, %v Pa to %v Pa: entropy differs by %.1e", g.Name(), T, p, to, d)
		}
		if d := math.Abs(float64(end.P/to) - 1); d > 1e-9 {
			t.Errorf("%s from %v K, %v Pa to %v Pa: pressure differs by %.1e", g.Name(), T, p, to, d)
		}
		back, err := g.AtEntropy(from.S, end.Rho, T)
		if err != nil || math.Abs(float64(back.T/end.T)-1) > 1e-9 {
			t.Errorf("the same entropy and density give %v K, not %v K: %v", back.T, end.T, err)
		}
	})
}

// Source: T p^(-(k-1)/k) is constant along an isentrope of an ideal gas, and nitrogen at 0.1 MPa to 0.05 MPa is within some tenths
// of a percent of one, with k = cp/cv = 1.400.
func TestIsentropeOfThinGasIsIdeal(t *testing.T) {
	rho, err := Nitrogen().Density(300, 0.1e6)
	if err != nil {
		t.Fatal(err)
	}
	from, err := Nitrogen().State(300, rho)
	if err != nil {
		t.Fatal(err)
	}
	end, err := Nitrogen().Isentrope(from, 0.05e6)
	if want := 300 * math.Pow(0.5, 0.4/1.4); err != nil || math.Abs(float64(end.T)/want-1) > 1e-3 {
		t.Errorf("%v K, want about %.2f K: %v", end.T, want, err)
	}
}

// The limit is named, and it lies above saturation: pressure rises with density at all that ColdState accepts.
func TestColdLimitIsNamed(t *testing.T) {
	for _, g := range []*Model{Nitrogen(), DryAir()} {
		rho, err := g.Density(220, 20e6)
		if err != nil {
			t.Fatal(err)
		}
		from, err := g.State(220, rho)
		if err != nil {
			t.Fatal(err)
		}
		_, err = g.Isentrope(from, 0.1e6)
		var span *quantity.RangeError
		if !errors.As(err, &span) || span.Low != float64(g.Coldest()) {
			t.Errorf("%s: %v, want the limit of %v K", g.Name(), err, g.Coldest())
		}
		for d := 0.01; d < 2.7; d += 0.01 {
			if x := g.state(float64(g.Coldest()), d*g.m*g.rhoRed); !(x.DpDRho > 0) || !(x.Cv > 0) {
				t.Errorf("%s at %v K and %.2f of the reducing density: dp/drho %v, cv %v", g.Name(), g.Coldest(), d, x.DpDRho, x.Cv)
			}
		}
	}
}

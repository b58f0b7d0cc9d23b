package gas

import (
	"math"

	"example.org/chargehand/calc/quantity"
)

// Coldest returns the lowest temperature of ColdState and Isentrope: 130 K for nitrogen, 140 K for dry air. Both lie above all
// saturation, which for nitrogen ends at the critical point, 126.192 K, and for air at the maxcondentherm, 132.6312 K: the gas
// cannot condense, and pressure rises with density throughout. The equations themselves hold down to 63.2 K and 59.8 K.
//
// Source: those of the equations. The uncertainty that RelativeUncertainty returns is not stated for the critical region.
func (g *Model) Coldest() quantity.Temperature { return g.coldest }

// ColdState is State for a gas that its own expansion cooled: valid from Coldest to 420 K and 0.05 MPa to 70 MPa; outside, a
// *quantity.RangeError.
func (g *Model) ColdState(t quantity.Temperature, rho Density) (State, error) {
	if err := g.checkCold(t); err != nil {
		return State{}, err
	}
	s := g.state(float64(t), float64(rho))
	if err := checkPressure(s.P); err != nil {
		return State{}, err
	}
	return s, nil
}

func (g *Model) checkCold(t quantity.Temperature) error {
	if !(t >= g.coldest && t <= MaxTemperature) {
		return &quantity.RangeError{Quantity: "temperature of the expanding gas", Value: float64(t), Low: float64(g.coldest), High: float64(MaxTemperature), Unit: "K"}
	}
	return nil
}

// AtEntropy returns the state at a density where the entropy is s, J/(kg K), to the last digits of s: the end of a change that
// exchanges no heat and loses nothing to friction. It starts looking near a temperature, which leaves no trace in the result.
// Valid as ColdState.
func (g *Model) AtEntropy(s float64, rho Density, near quantity.Temperature) (State, error) {
	x, err := g.atEntropy(s, float64(rho), float64(near))
	if err == nil {
		err = checkPressure(x.P)
	}
	if err != nil {
		return State{}, err
	}
	return x, nil
}

// atEntropy solves S(T, rho) = s by Newton's method in ln T, where the slope is cv: it hardly changes, so few steps do.
func (g *Model) atEntropy(s, rho, t float64) (State, error) {
	for range 50 {
		x := g.state(t, rho)
		step := (s - x.S) / x.Cv
		if math.Abs(step) < 1e-12 {
			return x, g.checkCold(x.T)
		}
		// Far below Coldest nothing needs the root, and the equation may have loops there.
		if t *= math.Exp(step); !(t > float64(g.coldest)/2 && t < 4*float64(MaxTemperature)) {
			return State{}, g.checkCold(quantity.Temperature(t))
		}
	}
	return State{}, ErrNoConvergence
}

// Isentrope returns the state at a lower or higher absolute pressure with the entropy of a state: the end of a change so fast
// that no heat is exchanged. Valid as ColdState, for the state it starts from too.
func (g *Model) Isentrope(from State, p quantity.Pressure) (State, error) {
	if err := checkPressure(p); err != nil {
		return State{}, err
	}
	x, err := g.ColdState(from.T, from.Rho)
	if err != nil {
		return State{}, err
	}
	s := x.S
	// Newton in ln rho against ln p, where the slope is the isentropic exponent; a step spans at most a factor of two in
	// pressure, so that no iterate runs far beyond the end.
	for range 100 {
		gap := math.Log(float64(p / x.P))
		if math.Abs(gap) < 1e-13 {
			return x, nil
		}
		step := math.Max(-0.7, math.Min(0.7, gap)) / x.Isentropic
		last := math.Abs(gap) < 1e-7
		grow := math.Exp(x.DpDT / (float64(x.Rho) * x.Cv) * step) // dT/T = (dp/dT) / (rho cv) drho/rho
		if x, err = g.atEntropy(s, float64(x.Rho)*math.Exp(step), float64(x.T)*grow); err != nil || last {
			return x, err
		}
	}
	return State{}, ErrNoConvergence
}

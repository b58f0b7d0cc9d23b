package gas

import (
	"math"

	"example.org/chargehand/calc/quantity"
)

// StateAtEnergy returns the state of a density and specific internal energy in J/kg (counted as State.U). near starts the
// iteration; a temperature within some tens of kelvins saves steps and leaves no trace in the result. Valid where temperature
// and pressure of the result are, as State; outside, a *quantity.RangeError that quotes the value found.
func (g *Model) StateAtEnergy(rho Density, u float64, near quantity.Temperature) (State, error) {
	return g.invert(rho, near, func(s *State) float64 { return (u - s.U) / s.Cv })
}

// TemperatureAtEnergy is the temperature of StateAtEnergy, in fewer steps: within 1e-10 of it, relative. The last step is taken
// without being looked at again, since Newton's error goes with the square of the step. Errors as StateAtEnergy.
func (g *Model) TemperatureAtEnergy(rho Density, u float64, near quantity.Temperature) (quantity.Temperature, error) {
	const small = 1e-5
	if t := float64(near); rho > 0 && float64(rho) <= 3*g.rhoRed*g.m && t >= float64(MinTemperature) && t <= float64(MaxTemperature) {
		for range 4 {
			s := g.state(t, float64(rho))
			d := (u - s.U) / s.Cv
			if !(math.Abs(d) <= small*t) {
				t += d
				if !(t >= float64(MinTemperature) && t <= float64(MaxTemperature)) {
					break
				}
				continue
			}
			if err := checkTemperature(s.T + quantity.Temperature(d)); err != nil {
				return 0, err
			}
			return s.T + quantity.Temperature(d), checkPressure(s.P + quantity.Pressure(s.DpDT*d))
		}
	}
	s, err := g.StateAtEnergy(rho, u, near)
	return s.T, err
}

// StateAtEntropy is StateAtEnergy for a specific entropy in J/(kg K), counted as State.S: the state that gas left behind in a
// vessel reaches when it expands without heat.
func (g *Model) StateAtEntropy(rho Density, s float64, near quantity.Temperature) (State, error) {
	return g.invert(rho, near, func(at *State) float64 { return float64(at.T) * (s - at.S) / at.Cv })
}

// invert steps the temperature at one density by Newton's method. Energy and entropy rise with temperature throughout, and
// the heat capacity varies slowly, so the step needs a safeguard only far outside the tool's limits.
func (g *Model) invert(rho Density, near quantity.Temperature, step func(*State) float64) (State, error) {
	const lowest, highest = 130, 2000 // K: above the critical point, and far enough to say how far outside a result is
	if !(rho > 0 && float64(rho) <= 3*g.rhoRed*g.m) {
		return State{}, &quantity.RangeError{Quantity: "gas density", Value: float64(rho), Low: 0, High: 3 * g.rhoRed * g.m, Unit: "kg/m3"}
	}
	t := min(max(float64(near), lowest), highest)
	for range 60 {
		s := g.state(t, float64(rho))
		d := step(&s)
		edge := t == lowest && d < 0 || t == highest && d > 0
		if edge || math.Abs(d) <= 1e-11*t {
			if err := checkTemperature(s.T); err != nil {
				return State{}, err
			}
			return s, checkPressure(s.P)
		}
		t = min(max(t+d, lowest), highest)
	}
	return State{}, ErrNoConvergence
}

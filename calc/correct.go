// Package calc brings a reading of the gas charge to reference conditions and says whether it is in limits, with its
// uncertainty budget: the one core that every laptop shares. It is pure: no clock, no files, no state.
package calc

import (
	"math"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// CoreVersion names the rules of this package. It changes when any verdict could.
const CoreVersion = "1"

// Correct returns the absolute pressure that a charge seen as p at gas temperature at would show at temperature to. The gas
// volume is taken as fixed (a steel shell's expansion is 0.07 % per 20 K and is left out), so the density is equal in both
// states.
//
// Valid for 200 K to 420 K and 0.05 MPa to 70 MPa; outside, the error is a *quantity.RangeError that names the limit.
//
// Source: the equation of state of the gas; for nitrogen Span et al., J. Phys. Chem. Ref. Data 29(6), 1361 (2000).
func Correct(m *gas.Model, p quantity.Pressure, at, to quantity.Temperature) (quantity.Pressure, error) {
	rho, err := m.Density(at, p)
	if err != nil {
		return 0, err
	}
	return m.Pressure(to, rho)
}

// IdealCorrect is Correct by Charles's law, p to/at: shown beside the real gas, never used for a verdict.
func IdealCorrect(p quantity.Pressure, at, to quantity.Temperature) quantity.Pressure {
	return p * quantity.Pressure(to/at)
}

// grid is finer than anything that decides and coarser than what processors round differently.
const grid = 1024

// step rounds a pressure that decides to whole pascals, so that laptops whose processors round differently agree. Round inputs
// give halves of a pascal, which one processor finds a last digit above and another below the half; so they are put back on the
// half first.
func step(g quantity.GaugePressure) quantity.GaugePressure {
	return quantity.GaugePressure(math.Round(math.Round(float64(g)*grid) / grid))
}

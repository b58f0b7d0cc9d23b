package trend

import (
	"fmt"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Free gas is measured at 101.325 kPa and 20 C: these reproduce the 0.42 % a day that the domain's notes derive for 5 mL/h from
// a unit of 25 in3 at 1,000 psig (MIL-DTL-5498G states the mL/h, and not the temperature); 15 C would give 0.43 %.
const (
	FreePressure                         = quantity.StandardAtmosphere
	FreeTemperature quantity.Temperature = 293.15
)

// FreeGas is a flow of free gas, millilitres per hour; a loss is positive.
type FreeGas float64

// StandardCCPerMinute returns the flow in free cubic centimetres a minute.
func (q FreeGas) StandardCCPerMinute() float64 { return float64(q) / 60 }

// Charge is what turns free gas into pressure: a gas in a fixed volume.
type Charge struct {
	Gas         *gas.Model
	Volume      quantity.Volume      // of the gas, fluid relieved
	Temperature quantity.Temperature // the sheet's reference
	Pressure    quantity.Pressure    // absolute, there
}

// perPascal returns the free gas in millilitres that one pascal of the charge holds: V (drho/dp) / rho of free gas.
func (c Charge) perPascal() (float64, error) {
	if c.Gas == nil {
		return 0, fmt.Errorf("the charge names no gas; name the sheet's")
	}
	if !(c.Volume > 0 && c.Volume < 10) {
		return 0, fmt.Errorf("a gas volume of %v m3 is none of a hydraulic unit; give the sheet's", float64(c.Volume))
	}
	free, err := c.Gas.Density(FreeTemperature, FreePressure)
	if err != nil {
		return 0, err
	}
	rho, err := c.Gas.Density(c.Temperature, c.Pressure)
	if err != nil {
		return 0, err
	}
	s, err := c.Gas.State(c.Temperature, rho)
	if err != nil {
		return 0, err
	}
	return float64(c.Volume) * 1e6 / s.DpDRho / float64(free), nil
}

// FreeGas returns the flow that lowers the charge at a rate; falling pressure gives a positive flow. Gas density at reference is
// by the equation of state, so the same flow costs more pressure at a high charge, by 8 % at 2,000 psig.
func (c Charge) FreeGas(r Rate) (FreeGas, error) {
	k, err := c.perPascal()
	return FreeGas(-float64(r) * k * 3600), err
}

// Rate returns the change of pressure that a flow causes; a positive flow gives a negative rate.
func (c Charge) Rate(q FreeGas) (Rate, error) {
	k, err := c.perPascal()
	if err != nil {
		return 0, err
	}
	return Rate(-float64(q) / k / 3600), nil
}

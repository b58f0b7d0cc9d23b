// Package capacity says how much fluid a charged unit can still deliver: pumped up to system pressure slowly, then drawn down to
// the least useful pressure slowly, fast, or at a stated flow or in a stated time. It is pure: real gas, no records, no clock.
//
// The charge is a density, for the gas fills all of its volume V while the fluid side is empty. It is set once and follows its
// isochore with temperature. With rho0 that density, the gas at density rho takes V rho0/rho, and the rest of V is fluid. So
//
//	delivered = V rho0 (1/rho2 - 1/rho1)
//
// where rho1 is the gas at system pressure and its own temperature, and rho2 the gas at the end. The gas cannot take more than
// V: where it is denser than rho2 at rest, the piston or bladder bottoms first and delivery stops at rho2 = rho0.
//
// Left out: friction of the piston, fluid that cannot be used or that leaks inside, gas that the fluid dissolves, the spring of a
// bladder, and the expansion of the shell, 0.07 % in 20 K (common practice, no source).
package capacity

import (
	"fmt"
	"math"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Unit is what a type's sheet says of it.
type Unit struct {
	Gas         *gas.Model
	Volume      quantity.Volume        // of the gas, fluid side empty
	Tolerance   quantity.Volume        // plus or minus of Volume; 0 where none is stated
	System      quantity.GaugePressure // to which the fluid is pumped up
	LeastUseful quantity.GaugePressure // of the fluid
	Ambient     quantity.Pressure      // of the air where it serves
}

// Charge is a gas charge as a gauge showed it with the fluid side empty.
type Charge struct {
	Pressure quantity.GaugePressure
	At       quantity.Temperature
	Ambient  quantity.Pressure // of the air then
}

// Density returns the charge as a density. Valid as gas.Model.Density.
func (c Charge) Density(m *gas.Model) (gas.Density, error) {
	return m.Density(c.At, c.Pressure.Abs(c.Ambient))
}

// Delivery is what a unit delivers at one temperature.
type Delivery struct {
	Temperature quantity.Temperature // of the gas when it is pumped up, and of its walls throughout
	Volume      quantity.Volume      // of fluid
	Low, High   quantity.Volume      // Volume with the gas volume at the ends of its tolerance
	Stored      quantity.Volume      // fluid in the unit at system pressure; 0: the charge is at or above it
	End         quantity.Temperature // of the gas when delivery ends
	EndPressure quantity.GaugePressure
	Stopped     bool // the gas filled its volume before the least useful pressure was reached
}

// Applications returns how many of a volume each are in a delivery, with the fraction, and how many are whole even with the
// smallest gas volume. Zero for a volume that is not above zero.
func (d Delivery) Applications(each quantity.Volume) (n float64, whole int) {
	if !(each > 0) {
		return 0, 0
	}
	return float64(d.Volume / each), int(math.Floor(float64(d.Low/each) + 1e-9)) // 6 of a sixth are 6
}

func (u Unit) check() error {
	switch {
	case u.Gas == nil:
		return fmt.Errorf("the unit names no gas; name the sheet's")
	case !(u.Volume > 0 && u.Volume < 10):
		return fmt.Errorf("a gas volume of %v m3 is none of a hydraulic unit; give the sheet's", float64(u.Volume))
	case !(u.Tolerance >= 0 && u.Tolerance < u.Volume):
		return fmt.Errorf("a tolerance of %v m3 on a gas volume of %v m3 leaves nothing; give the sheet's", float64(u.Tolerance), float64(u.Volume))
	case !(u.LeastUseful >= 0 && u.LeastUseful < u.System):
		return fmt.Errorf("a least useful pressure of %v Pa is not below the system pressure of %v Pa; give the sheet's", float64(u.LeastUseful), float64(u.System))
	}
	return nil
}

// path is the change of the gas at one temperature, whatever the charge: full at system pressure.
type path struct {
	u     Unit
	t     quantity.Temperature
	full  gas.State
	least quantity.Pressure // absolute
}

func (u Unit) path(t quantity.Temperature) (p path, err error) {
	if err := u.check(); err != nil {
		return p, err
	}
	rho, err := u.Gas.Density(t, u.System.Abs(u.Ambient))
	if err != nil {
		return p, err
	}
	p = path{u: u, t: t, least: u.LeastUseful.Abs(u.Ambient)}
	p.full, err = u.Gas.ColdState(t, rho)
	return p, err
}

// Deliver returns what a unit delivers with a charge at a temperature and pace. A charge at or above system pressure stores
// nothing and delivers nothing.
//
// Valid for gas from 200 K to 420 K when pumped up, from gas.Model.Coldest while it expands, and for 0.05 MPa to 70 MPa; outside, a
// *quantity.RangeError that names the limit.
//
// Source: the equation of state of the gas; for a pace in time Otis and Pourmovahed, J. Dyn. Sys. Meas. Control (1985), see Pace.
func (u Unit) Deliver(c Charge, t quantity.Temperature, at Pace) (Delivery, error) {
	p, err := u.path(t)
	if err != nil {
		return Delivery{}, err
	}
	rho, err := c.Density(u.Gas)
	if err != nil {
		return Delivery{}, err
	}
	return p.deliver(rho, at)
}

func (p path) deliver(charge gas.Density, at Pace) (Delivery, error) {
	d := Delivery{Temperature: p.t, End: p.t, EndPressure: p.u.System}
	if charge >= p.full.Rho {
		return d, nil
	}
	d.Stored = p.fluid(p.u.Volume, charge, p.full.Rho)
	end, err := at.end(p, p.u.Volume, charge)
	if err != nil {
		return Delivery{}, err
	}
	d.End, d.EndPressure, d.Stopped = end.T, end.P.Gauge(p.u.Ambient), end.Rho <= charge
	d.Volume = d.Stored - p.fluid(p.u.Volume, charge, end.Rho)
	if d.Low, err = p.volume(p.u.Volume-p.u.Tolerance, charge, at); err != nil {
		return Delivery{}, err
	}
	d.High, err = p.volume(p.u.Volume+p.u.Tolerance, charge, at)
	return d, err
}

// volume is what a gas volume delivers.
func (p path) volume(v quantity.Volume, charge gas.Density, at Pace) (quantity.Volume, error) {
	if charge >= p.full.Rho {
		return 0, nil
	}
	end, err := at.end(p, v, charge)
	if err != nil {
		return 0, err
	}
	return p.fluid(v, charge, p.full.Rho) - p.fluid(v, charge, end.Rho), nil
}

// fluid is the part of a gas volume that the gas leaves.
func (p path) fluid(v quantity.Volume, charge, rho gas.Density) quantity.Volume {
	return v * quantity.Volume(1-charge/rho)
}

// slow and fast return the gas at the least useful pressure, or, with stop, where it has filled its volume before.
func (p path) slow(stop gas.Density) (gas.State, error) {
	rho, err := p.u.Gas.Density(p.t, p.least)
	if err != nil {
		return gas.State{}, err
	}
	return p.u.Gas.ColdState(p.t, max(rho, stop))
}

func (p path) fast(stop gas.Density) (gas.State, error) {
	end, err := p.u.Gas.Isentrope(p.full, p.least)
	if stop == 0 || err == nil && end.Rho >= stop {
		return end, err
	}
	// The least useful pressure may be too cold for the equation and never be reached.
	bottom, errBottom := p.u.Gas.AtEntropy(p.full.S, stop, p.full.T)
	if err != nil && (errBottom != nil || bottom.P < p.least) {
		return gas.State{}, err
	}
	return bottom, errBottom
}

// Package plan looks ahead: where to stop a charge while the gas is still hot, how long it settles and what it takes from the
// bottle (Charge), and in which order a cart of bottles serves a list of units (Night).
//
// Everything is computed with the real gas, from explicit inputs, in SI. Approved limits, rates and steps are those of the
// aircraft's maintenance manual; what is here informs the person who follows it.
package plan

import (
	"errors"
	"fmt"
	"math"
	"time"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Rate is how fast the dial rises, in pascals a second.
type Rate float64

// PerMinute is the rate of so much a minute.
func PerMinute(g quantity.GaugePressure) Rate { return Rate(g / 60) }

// Target is the charge the sheet asks for, at a gas temperature and an ambient pressure. A charge from a manual's chart is the
// chart's value at ambient temperature, with the ambient pressure of the field.
type Target struct {
	Pressure quantity.GaugePressure
	At       quantity.Temperature
	Ambient  quantity.Pressure
}

// Bottle is a source of the unit's gas.
type Bottle struct {
	Name        string
	Volume      quantity.Volume // water capacity
	Pressure    quantity.GaugePressure
	Temperature quantity.Temperature
}

// Thermal says how fast a unit gives off heat. Gas is the time constant of stage one, gas to shell, at the target charge; Shell
// that of stage two, shell and gas to ambient; ShellHeat the heat capacity of the shell in J/K. A unit's own constants, from
// timed readings while it settled, are better than any assumed ones.
type Thermal struct {
	Gas, Shell time.Duration
	ShellHeat  float64
}

// SteelHeat is the specific heat capacity of steel in J/(kg K), from memory: 3 kg of shell hold 1.4 kJ/K.
const SteelHeat = 460

// AssumedThermal is what to take for a steel shell of a mass in kg when nothing was measured: 30 s and 20 min. Common practice,
// no source; 10 s to 60 s and 10 min to 60 min are met.
func AssumedThermal(shell float64) Thermal {
	return Thermal{Gas: 30 * time.Second, Shell: 20 * time.Minute, ShellHeat: shell * SteelHeat}
}

// ChargeInput is what a charge is planned from. Limits are in brackets; outside, a *quantity.RangeError.
type ChargeInput struct {
	Gas             *gas.Model
	Volume          quantity.Volume // of the gas side with no fluid in it [10 cm3 to 1 m3]
	VolumeTolerance quantity.Volume // either way, at most half the volume
	Found           quantity.GaugePressure
	FoundAt         quantity.Temperature // of gas and shell, as found
	Temperature     quantity.Temperature // of the surroundings, where the unit settles
	Ambient         quantity.Pressure
	Target          Target
	Bottle          Bottle        // [volume 0.1 L to 10 m3]
	Duration        time.Duration // of the fill [1 s to 4 h], or zero and
	Rate            Rate          // the mean rise of the dial during the fill
	Thermal         Thermal       // [gas 5 s to 10 min, shell 1 min to 6 h, 10 J/K to 1 MJ/K]
	Within          quantity.GaugePressure
	Rated           Ratings
}

// ChargePlan is the plan of one charge.
type ChargePlan struct {
	SettledNow    quantity.GaugePressure // where the unit as found settles with nothing added
	SettledTarget quantity.GaugePressure // what the dial reads at ambient temperature when the charge is on target
	Mass          float64                // to add, kg
	MassTolerance float64                // kg either way, from the tolerance of the volume
	Bottle        BottleUse
	Fill          *Fill // nil when the bottle falls short
	Ratings       []Rating
}

// Supply says what a bottle can do for a charge.
type Supply int

const (
	Short      Supply = iota // settles below the target however long one waits
	WithPauses               // stalls below the hot stop: wait until unit and bottle have settled, and top up
	InOneGo                  // still above the hot stop at the end, even if its own gas has cooled as far as it can
)

func (s Supply) String() string {
	if s < Short || s > InOneGo {
		return fmt.Sprintf("supply %d", int(s))
	}
	return [...]string{"falls short", "suffices with pauses", "suffices"}[s]
}

// BottleUse is what the charge does to the bottle.
type BottleUse struct {
	Supply        Supply
	Before        quantity.GaugePressure
	After         quantity.GaugePressure  // back at its own temperature; when it falls short, after equalisation
	AfterLargest  quantity.GaugePressure  // the same for the largest volume of the unit within the tolerance
	StraightAfter *quantity.GaugePressure // at once, had the gas left in it taken up no heat; nil when that is below 200 K
	Reaches       quantity.GaugePressure  // highest settled dial of the unit with this bottle alone
	Needs         *quantity.GaugePressure // least pressure of a bottle of this size and temperature; nil when above 70 MPa
}

// Fill is the charge while it is warm, as if the bottle stayed above the unit; when it suffices only with pauses, the dial stalls at its
// pressure before the hot stop.
type Fill struct {
	Duration          time.Duration
	Rate              Rate                   // mean rise of the dial
	OverPrecedent     bool                   // faster than OxygenServicingRate, by more than a thousandth
	HotStop           quantity.GaugePressure // stop here, so that it settles on SettledTarget
	HotAt             quantity.Temperature   // of the gas at the stop
	HotLow, HotHigh   quantity.GaugePressure // the hot stop with half and twice the time constant of the gas, the less first
	AfterStageOne     quantity.GaugePressure // when gas and shell have come together, before ambient has taken heat: not yet settled
	StageOne, Settled time.Duration          // after the stop: within ChargeInput.Within of the shell's temperature; of the target
	Isothermal        Bound                  // an endlessly slow fill
	Adiabatic         *Bound                 // a fill without heat to the shell; nil when it leaves the limits of the gas
	Energy            Energy
	Trace             []Moment // from as found to settled
}

// Bound is the end of a limiting fill.
type Bound struct {
	Stop quantity.GaugePressure
	At   quantity.Temperature
}

// Energy is what went where during the fill, J. The gas of the unit gains In less Shell and Lost.
type Energy struct{ In, Shell, Lost float64 }

// Moment is a state on the way.
type Moment struct {
	Time       time.Duration // from the opening of the valve
	Dial       quantity.GaugePressure
	Gas, Shell quantity.Temperature
	Mass       float64 // in the unit, kg
}

// OverTarget is the error of a charge that needs no gas: the unit settles at or above its target. Bleed, or leave it.
type OverTarget struct{ Settles, Target quantity.GaugePressure }

func (e *OverTarget) Error() string {
	psi := func(g quantity.GaugePressure) float64 { v, _ := g.InUnit("psi"); return v }
	return fmt.Sprintf("the unit settles at %.1f psi, not below its target of %.1f psi: there is nothing to add",
		psi(e.Settles), psi(e.Target))
}

// longest is the longest fill that is followed.
const longest = 4 * time.Hour

func within(name string, v, low, high float64, unit string) error {
	if !(v >= low && v <= high) {
		return &quantity.RangeError{Quantity: name, Value: v, Low: low, High: high, Unit: unit}
	}
	return nil
}

func (in *ChargeInput) check() error {
	if in.Gas == nil {
		return errors.New("the charge names no gas")
	}
	if in.Duration != 0 && in.Rate != 0 {
		return errors.New("the charge has a duration and a rate: give one of them")
	}
	err := errors.Join(
		within("gas volume", float64(in.Volume)*1e6, 10, 1e6, "cm3"),
		within("volume tolerance", float64(in.VolumeTolerance)*1e6, 0, float64(in.Volume)*0.5e6, "cm3"),
		within("ambient pressure", float64(in.Ambient)/1e3, 20, 120, "kPa"),
		within("ambient pressure of the target", float64(in.Target.Ambient)/1e3, 20, 120, "kPa"),
		within("bottle volume", float64(in.Bottle.Volume)*1e3, 0.1, 1e4, "L"),
		within("time constant of the gas", in.Thermal.Gas.Seconds(), 5, 600, "s"),
		within("time constant of the shell", in.Thermal.Shell.Minutes(), 1, 360, "min"),
		within("heat capacity of the shell", in.Thermal.ShellHeat, 10, 1e6, "J/K"),
		within("settling band", float64(in.Within)/1e3, 0.1, 1e4, "kPa"),
	)
	if err != nil {
		return err
	}
	if in.Rate != 0 {
		return within("rise of the dial", float64(in.Rate)/1e3*60, 1, 1e6, "kPa/min")
	}
	return within("duration of the fill", in.Duration.Seconds(), 1, longest.Seconds(), "s")
}

// Settled returns what the dial reads at a temperature and ambient pressure when the charge is on target: the isochore through
// the target. Valid as gas.Model.Density and Pressure.
func Settled(g *gas.Model, target Target, at quantity.Temperature, ambient quantity.Pressure) (quantity.GaugePressure, error) {
	rho, err := g.Density(target.At, target.Pressure.Abs(target.Ambient))
	if err != nil {
		return 0, err
	}
	p, err := g.Pressure(at, rho)
	return p.Gauge(ambient), err
}

// Charge plans a charge from the as-found state to the sheet's target at present temperature.
//
// The mass to add follows from the densities alone; the fill ends when it is in, and the dial then reads the hot stop. On the
// way the gas obeys the open-system energy balance dU/dt = h dm/dt - k1 (T - Ts) and the shell C dTs/dt = k1 (T - Ts) - k2 (Ts - Ta),
// with constant k1 = m cv/tau1 and k2 = (C + m cv)/tau2 at the target charge, a constant mass flow, and one temperature in the gas. The
// inflow carries the enthalpy that the gas has in the bottle (throttling), the bottle being held at its own temperature (isothermal):
// its cooling, the heat of hose and lines, the fluid side and the shell's expansion are left out. After the stop the same equations
// run without flow.
//
// Valid for gas between 200 K and 420 K and 0.05 MPa and 70 MPa all along, and for the limits of ChargeInput; outside, a
// *quantity.RangeError. An empty unit filled at once in great heat can pass 420 K: fill slower. A unit that needs no gas is an *OverTarget.
//
// Masses and settled pressures are as good as the equation of state and the volume; the hot stop is as good as the time constants,
// which HotLow, HotHigh and the two bounds show.
//
// Source: energy balance of an open system (any textbook of thermodynamics); the form with one time constant after Otis and
// Pourmovahed (1985), whose correlation for it was not found, so that it is an input; Span et al. (2000) for nitrogen.
func Charge(in ChargeInput) (ChargePlan, error) {
	if err := in.check(); err != nil {
		return ChargePlan{}, err
	}
	g := in.Gas
	var errs [4]error
	var rho0, rho1, rhoB gas.Density
	rho0, errs[0] = g.Density(in.FoundAt, in.Found.Abs(in.Ambient))
	rho1, errs[1] = g.Density(in.Target.At, in.Target.Pressure.Abs(in.Target.Ambient))
	rhoB, errs[2] = g.Density(in.Bottle.Temperature, in.Bottle.Pressure.Abs(in.Ambient))
	if err := errors.Join(errs[:]...); err != nil {
		return ChargePlan{}, err
	}
	now, err0 := g.Pressure(in.Temperature, rho0)
	target, err1 := g.Pressure(in.Temperature, rho1)
	if err := errors.Join(err0, err1); err != nil {
		return ChargePlan{}, err
	}
	p := ChargePlan{SettledNow: now.Gauge(in.Ambient), SettledTarget: target.Gauge(in.Ambient)}
	if !(rho1 > rho0) {
		return ChargePlan{}, &OverTarget{p.SettledNow, p.SettledTarget}
	}
	p.Mass = float64(rho1-rho0) * float64(in.Volume)
	p.MassTolerance = float64(rho1-rho0) * float64(in.VolumeTolerance)
	if err := p.draw(&in, float64(rho0), float64(rhoB), now, target); err != nil {
		return ChargePlan{}, err
	}
	highest := p.SettledTarget
	if p.Bottle.Supply != Short {
		fill, err := in.fill(float64(rho0), float64(rho1), float64(rhoB), target)
		if err != nil {
			return ChargePlan{}, err
		}
		p.Fill = fill
		highest = max(highest, fill.HotStop)
		if straight := p.Bottle.StraightAfter; straight != nil && *straight >= fill.HotStop {
			p.Bottle.Supply = InOneGo
		}
	}
	p.Ratings = in.Rated.against(highest, in.Bottle.Pressure)
	return p, nil
}

// draw fills in the bottle's part, with nothing warm in it. now and target are the unit's settled pressures.
func (p *ChargePlan) draw(in *ChargeInput, rho0, rhoB float64, now, target quantity.Pressure) error {
	g, tb := in.Gas, in.Bottle.Temperature
	volume, unit := float64(in.Bottle.Volume), float64(in.Volume)
	b := &p.Bottle
	b.Before = in.Bottle.Pressure
	floor, err := g.Density(tb, target)
	if err != nil {
		return err
	}
	if need, err := g.Pressure(tb, floor+gas.Density(p.Mass/volume)); err == nil {
		dial := need.Gauge(in.Ambient)
		b.Needs = &dial
	}
	equal, err := equalise(g, rho0*unit, unit, in.Temperature, rhoB*volume, volume, tb, now, in.Bottle.Pressure.Abs(in.Ambient))
	if err != nil {
		return err
	}
	b.Reaches = equal.Gauge(in.Ambient)
	after := func(mass float64) (quantity.GaugePressure, error) {
		rho := gas.Density(rhoB - mass/volume)
		if rho < floor { // then it stalls where the two are equal
			return equal.Gauge(in.Ambient), nil
		}
		p, err := g.Pressure(tb, rho)
		return p.Gauge(in.Ambient), err
	}
	if in.Bottle.Pressure.Abs(in.Ambient) <= now {
		b.After, b.AfterLargest = b.Before, b.Before
		return nil
	}
	if b.After, err = after(p.Mass); err != nil {
		return err
	}
	if b.AfterLargest, err = after(p.Mass + p.MassTolerance); err != nil {
		return err
	}
	left := gas.Density(rhoB - p.Mass/volume)
	if left < floor {
		return nil
	}
	b.Supply = WithPauses
	full, err := g.State(tb, gas.Density(rhoB))
	if err != nil {
		return err
	}
	if cooled, err := g.StateAtEntropy(left, full.S, tb); err == nil {
		dial := cooled.P.Gauge(in.Ambient)
		b.StraightAfter = &dial
	}
	return nil
}

// equalise returns the pressure at which a unit and a bottle, each at its own temperature, hold the given masses together; the unit's
// own where the bottle is not above it.
func equalise(g *gas.Model, unitMass, unit float64, tu quantity.Temperature, bottleMass, bottle float64, tb quantity.Temperature,
	low, high quantity.Pressure) (quantity.Pressure, error) {
	if high <= low {
		return low, nil
	}
	for range 100 {
		mid := low + (high-low)/2
		if mid == low || mid == high {
			break
		}
		u, err0 := g.Density(tu, mid)
		b, err1 := g.Density(tb, mid)
		if err := errors.Join(err0, err1); err != nil {
			return 0, err
		}
		if float64(u)*unit+float64(b)*bottle > unitMass+bottleMass {
			high = mid
		} else {
			low = mid
		}
	}
	return low, nil
}

func seconds(s float64) time.Duration {
	return time.Duration(math.Round(s * float64(time.Second)))
}

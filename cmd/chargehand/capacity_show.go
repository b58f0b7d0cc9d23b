package main

import (
	"fmt"
	"math"

	"example.org/chargehand/calc/capacity"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/cmd/chargehand/plot"
)

// capacityJSON is what a unit delivers, at the worst temperature of each pace and along its curves.
type capacityJSON struct {
	Unit           string      `json:"unit"`
	ChargePsi      float64     `json:"charge_psi"`
	ChargeAtF      float64     `json:"charge_at_f"`
	ChargeOf       string      `json:"charge_of"`
	Sheet          string      `json:"sheet"`
	ApplicationIn3 float64     `json:"application_in3,omitempty"`
	Slow           paceJSON    `json:"slow"`
	Fast           paceJSON    `json:"fast"`
	Timed          *paceJSON   `json:"timed,omitempty"`
	TimedPace      string      `json:"timed_pace,omitempty"`
	TimeConstantS  float64     `json:"time_constant_s,omitempty"`
	DemandIn3      float64     `json:"demand_in3,omitempty"`
	DecidedBy      string      `json:"decided_by,omitempty"`
	Met            *bool       `json:"met,omitempty"`
	Lowest         *lowestJSON `json:"lowest_charge,omitempty"`
	NoLowest       string      `json:"no_lowest_charge,omitempty"`
}

type paceJSON struct {
	Worst deliveryJSON   `json:"worst"`
	Curve []deliveryJSON `json:"curve"`
}

type deliveryJSON struct {
	TemperatureF float64 `json:"temperature_f"`
	FluidIn3     float64 `json:"fluid_in3"`
	LowIn3       float64 `json:"low_in3"` // with the gas volume at the ends of its tolerance
	HighIn3      float64 `json:"high_in3"`
	Applications float64 `json:"applications,omitempty"`
	Whole        int     `json:"whole_applications,omitempty"`
	StoredIn3    float64 `json:"stored_in3"`
	EndF         float64 `json:"gas_end_f"`
	EndPsi       float64 `json:"gas_end_psi"`
	Stopped      bool    `json:"stopped"` // the gas filled its volume before the least useful pressure
}

type lowestJSON struct {
	Met       bool    `json:"meets_demand"` // else it is the charge that delivers most
	ChargePsi float64 `json:"charge_psi"`
	AtF       float64 `json:"at_f"`
	FluidIn3  float64 `json:"fluid_in3"` // with the smallest gas volume, at the worst temperature
	TooHigh   bool    `json:"above_sheet,omitempty"`
}

func inIn3(v quantity.Volume) float64 { return math.Round(show(v.InUnit("in3"))*1000) / 1000 }

func (c *capacityAnswer) facts(unit string) capacityJSON {
	pace := func(curve []capacity.Delivery) paceJSON {
		one := func(d capacity.Delivery) deliveryJSON {
			n, whole := d.Applications(c.application)
			return deliveryJSON{inF(d.Temperature), inIn3(d.Volume), inIn3(d.Low), inIn3(d.High), round2(n), whole, inIn3(d.Stored), inF(d.End), inPsi(d.EndPressure), d.Stopped}
		}
		p := paceJSON{Worst: one(capacity.Worst(curve))}
		for _, d := range curve {
			p.Curve = append(p.Curve, one(d))
		}
		return p
	}
	j := capacityJSON{Unit: unit, ChargePsi: inPsi(c.charge.Pressure), ChargeAtF: inF(c.charge.At), ChargeOf: c.of, Sheet: c.sheet.Document + " rev " + c.sheet.Revision,
		ApplicationIn3: inIn3(c.application), Slow: pace(c.slow), Fast: pace(c.fast), NoLowest: c.noLowest}
	if c.timed != nil {
		j.Timed, j.TimedPace, j.TimeConstantS = ptr(pace(c.timed)), c.timedName, c.tau.Seconds()
	}
	if c.demand > 0 {
		j.DemandIn3, j.Met = inIn3(c.demand), ptr(c.met())
		j.DecidedBy, _ = c.deciding()
	}
	if l := c.lowest; l != nil {
		j.Lowest = &lowestJSON{l.Met, inPsi(l.Charge), inF(c.reference), inIn3(l.Worst.Low), l.Met && c.highest > 0 && l.Charge > c.highest}
	}
	return j
}

// picture draws the curves in the book's own units.
func (c *capacityAnswer) picture(unit string) plot.Capacity {
	volume := func(v quantity.Volume) float64 { return show(v.InUnit(c.volumeUnit())) }
	degrees := c.in.T
	if _, err := quantity.Temperature(300).InUnit(degrees); err != nil {
		degrees = "F"
	}
	temperature := func(t quantity.Temperature) float64 { return show(t.InUnit(degrees)) }
	name, curve := c.deciding()
	w := capacity.Worst(curve)
	p := plot.Capacity{TemperatureUnit: degrees, VolumeUnit: c.volumeUnit(), Demand: volume(c.demand), DemandWords: c.demandWords(), Timed: c.timedName,
		Worst: &plot.Worst{Temperature: temperature(w.Temperature), Volume: volume(w.Volume)}}
	for i := range c.slow {
		p.Points = append(p.Points, plot.CapacityPoint{Temperature: temperature(c.slow[i].Temperature), Slow: volume(c.slow[i].Volume), Fast: volume(c.fast[i].Volume)})
		if c.timed != nil {
			p.Points[i].Timed = volume(c.timed[i].Volume)
		}
	}
	p.Title = fmt.Sprintf("%s: at least %s %s", unit, c.fluid(w.Volume), name)
	switch {
	case c.demand > 0 && c.met():
		p.Title = fmt.Sprintf("%s: the demand is met %s", unit, name)
	case c.demand > 0 && w.Volume >= c.demand:
		p.Title = fmt.Sprintf("%s: the demand is not met %s by the smallest gas volume", unit, name)
	case c.demand > 0:
		p.Title = fmt.Sprintf("%s: the demand is not met %s at %s", unit, name, c.in.Temperature(w.Temperature))
	}
	return p
}

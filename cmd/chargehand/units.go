package main

import (
	"fmt"
	"math"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// units are the book's own, in which all that people read is written.
type units struct{ p, t string }

// unitsOf falls back on psi and F where a founding entry names units that this version does not know.
func unitsOf(m *ledger.Meaning) units {
	u := units{m.Founding.PressureUnit, m.Founding.TemperatureUnit}
	if _, err := quantity.GaugePressure(0).InUnit(u.p); err != nil {
		u.p = "psi"
	}
	if _, err := quantity.Temperature(0).InUnit(u.t); err != nil {
		u.t = "F"
	}
	return u
}

// dialDecimals that a dial of that unit can show.
var dialDecimals = map[string]int{"bar": 1, "MPa": 2, "kgf/cm2": 1}

func (u units) pressure(g quantity.GaugePressure) string {
	return fmt.Sprintf("%.*f %s", dialDecimals[u.p], show(g.InUnit(u.p)), u.p)
}

func (u units) temperature(t quantity.Temperature) string {
	return fmt.Sprintf("%.0f %s", show(t.InUnit(u.t))+0, u.t)
}

// between writes a span of two pressures.
func (u units) between(low, high quantity.GaugePressure) string {
	return fmt.Sprintf("%.*f to %s", dialDecimals[u.p], show(low.InUnit(u.p)), u.pressure(high))
}

// show drops the error of a conversion whose unit is a constant of this program or was accepted when the book was started.
func show(v float64, _ error) float64 { return v }

// inPsi is rounded as JSON shows it: to 0.01 psi.
func inPsi(g quantity.GaugePressure) float64 { return math.Round(show(g.InUnit("psi"))*100) / 100 }

func inF(t quantity.Temperature) float64 { return math.Round(show(t.InUnit("F"))*100) / 100 }

// amountPsi is for amounts of entries that were accepted as pressures.
func amountPsi(a record.Amount) float64 {
	g, err := written(a).Gauge()
	if err != nil {
		return 0
	}
	return inPsi(g)
}

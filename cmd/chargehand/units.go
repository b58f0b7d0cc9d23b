package main

import (
	"math"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger/record"
)

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

package calc

import (
	"cmp"
	"math"
	"strconv"
	"strings"

	"example.org/chargehand/calc/quantity"
)

// Units are the names of the units in which words state figures, such as "bar" and "C"; empty ones stand for psi and F. They
// decide nothing but wording.
type Units struct{ P, T string }

// Pressure writes a gauge pressure: whole psi and kPa, tenths of a bar, hundredths of a MPa. Below 20 of a unit that is
// written whole a figure that is not whole keeps a tenth.
func (u Units) Pressure(g quantity.GaugePressure) string {
	name := cmp.Or(u.P, "psi")
	v, err := g.InUnit(name)
	if err != nil {
		name = "psi"
		v, err = g.InUnit(name)
	}
	places := 0
	switch {
	case err != nil || math.IsNaN(v) || math.IsInf(v, 0):
		return "no pressure"
	case name == "MPa":
		places = 2
	case name == "bar" || name == "kgf/cm2":
		places = 1
	case math.Abs(v) < 20 && math.Abs(v-math.Round(v)) > 0.05:
		places = 1
	}
	return written(v, places) + " " + name
}

// Between writes a span of two pressures, with the unit once.
func (u Units) Between(low, high quantity.GaugePressure) string {
	number, _, _ := strings.Cut(u.Pressure(low), " ")
	return number + " to " + u.Pressure(high)
}

// PerDay writes a change of pressure in a day, with two figures.
func (u Units) PerDay(g quantity.GaugePressure) string {
	name := cmp.Or(u.P, "psi")
	v, err := g.InUnit(name)
	if err != nil {
		name = "psi"
		v, err = g.InUnit(name)
	}
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return "no rate"
	}
	places := 4
	if v != 0 {
		places = min(max(0, 1-int(math.Floor(math.Log10(math.Abs(v))))), 4)
	}
	return written(v, places) + " " + name + "/day"
}

// Temperature writes a temperature in whole degrees.
func (u Units) Temperature(t quantity.Temperature) string {
	name := cmp.Or(u.T, "F")
	v, err := t.InUnit(name)
	if err != nil {
		name = "F"
		v, err = t.InUnit(name)
	}
	if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
		return "no temperature"
	}
	return written(v, 0) + " " + name
}

// written rounds, and writes what rounds to zero without a sign.
func written(v float64, places int) string {
	step := math.Pow10(places)
	return strconv.FormatFloat(math.Round(v*step)/step+0, 'f', places, 64)
}

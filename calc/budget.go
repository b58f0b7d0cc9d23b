package calc

import (
	"fmt"
	"math"
	"time"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Term is one line of an uncertainty budget (JCGM 100).
type Term struct {
	Name   string
	Stated string                 // the figure it comes from
	U      quantity.GaugePressure // standard uncertainty of the corrected pressure, pascals
}

// gaugeReference is the temperature at which a gauge meets its class: 20 degC (EN 837-1).
const gaugeReference quantity.Temperature = 293.15

// Half-widths of the gas temperature, kelvins, by where it was taken (common practice, no source): a contact probe on the
// shell; the air around a unit that has soaked. A short soak adds the temperature still to go, see soakLeft.
const (
	probeHalfWidth   = 1.0
	ambientHalfWidth = 2.0
)

// Soak of a unit that came from another temperature. The shell nears its surroundings with a time constant of tens of
// minutes; 20 minutes, and 15 K to go at the start, stand for a steel shell in still air (common practice, no source).
const (
	soakConstant = 20 * time.Minute
	soakStart    = 15.0
	MinimumSoak  = 15 * time.Minute // below it an air temperature says nothing of the gas
)

func soakLeft(soak time.Duration) float64 {
	return soakStart * math.Exp(-float64(soak)/float64(soakConstant))
}

// budget returns the terms for a charge of density rho read as reading, brought to the reference temperature: each input's
// standard uncertainty times the derivative of the corrected pressure by that input.
func budget(l Limits, g Gauge, r Reading, reading quantity.GaugePressure, rho gas.Density) ([]Term, error) {
	at, err := l.Gas.State(r.Temperature, rho)
	if err != nil {
		return nil, err
	}
	ref := at
	if l.Chart == nil {
		if ref, err = l.Gas.State(l.Reference, rho); err != nil {
			return nil, err
		}
	}
	// p_ref = p(T_ref, rho(T, p)): by p (dp/drho)_ref/(dp/drho), by T -(dp/drho)_ref (dp/dT)/(dp/drho).
	byP := ref.DpDRho / at.DpDRho
	byT := byP * at.DpDT
	rect := func(half float64) quantity.GaugePressure { return quantity.GaugePressure(half / math.Sqrt(3)) }

	var ts []Term
	if len(g.Correction) > 0 {
		ts = append(ts, Term{"gauge, by its certificate", "U = " + psi(g.CorrectionUncertainty) + " (k = 2)", g.CorrectionUncertainty / 2 * quantity.GaugePressure(byP)})
	} else {
		half := g.Accuracy.Limit(reading, g.Span)
		ts = append(ts, Term{"gauge, by its class", fmt.Sprintf("%s of %s: +/-%s", g.Accuracy, psi(g.Span), psi(half)), rect(float64(half) * byP)})
	}
	ts = append(ts, Term{"reading the dial", "half of a division of " + psi(g.Graduation), rect(float64(g.Graduation) / 2 * byP)})

	k := g.TempCoefficient
	if k == 0 {
		k = 0.0004
	}
	away := math.Abs(float64(r.Temperature - gaugeReference))
	ts = append(ts, Term{"gauge away from 20 C", fmt.Sprintf("%.3g %% of span a kelvin, %.0f K", 100*k, away), rect(k * away * float64(g.Span) * byP)})

	half := probeHalfWidth
	stated := "shell probe, +/-1 K"
	if r.TemperatureFrom == AmbientAfterSoak {
		half = ambientHalfWidth + soakLeft(r.Soak)
		stated = fmt.Sprintf("air after %.0f min, +/-%.1f K", r.Soak.Minutes(), half)
	}
	if l.Chart != nil {
		// The chart's own limits move with temperature, about as the isochore does.
		byT = at.DpDT
	}
	ts = append(ts, Term{"gas temperature", stated, rect(half * byT)})

	ambient, stated := 100.0, "measured, +/-1 hPa"
	if !r.AmbientKnown {
		ambient, stated = 5000, "not entered: standard sea level, +/-50 hPa"
	}
	ts = append(ts, Term{"ambient pressure", stated, rect(ambient * math.Abs(byP))})

	if l.Chart == nil {
		rel := l.Gas.RelativeUncertainty(r.Temperature, at.P) / 2 // stated with k = 2
		// Only the change between the two temperatures rests on the equation; the density's error is common to both in part.
		ts = append(ts, Term{"equation of state", fmt.Sprintf("%.2g %% in density (k = 2), at both temperatures", 200*rel), quantity.GaugePressure(rel * math.Sqrt2 * float64(rho) * ref.DpDRho)})
	}
	return ts, nil
}

// combined returns the root of the sum of squares.
func combined(ts []Term) quantity.GaugePressure {
	s := 0.0
	for _, t := range ts {
		s += float64(t.U) * float64(t.U)
	}
	return quantity.GaugePressure(math.Sqrt(s))
}

// phi is the standard normal distribution function.
func phi(z float64) float64 { return 0.5 * math.Erfc(-z/math.Sqrt2) }

// conformance is the probability that the true value lies in [low, high] when y was found with standard uncertainty u.
//
// Source: JCGM 106:2012, section 7 (formula re-derived).
func conformance(y, low, high, u float64) float64 { return phi((high-y)/u) - phi((low-y)/u) }

func psi(g quantity.GaugePressure) string {
	v, _ := g.InUnit("psi")
	if math.Abs(v) < 20 && v != math.Trunc(v) {
		return fmt.Sprintf("%.1f psi", v)
	}
	return fmt.Sprintf("%.0f psi", v)
}

func kelvin(t quantity.Temperature) string {
	f, _ := t.InUnit("F")
	return fmt.Sprintf("%.0f F", f)
}

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

const gasTemperature = "gas temperature"

const gaugeTerms = 3 // of a budget are the gauge's, its first; the last of them is the gauge's own temperature

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

// budget returns the terms for a charge read as reading, at the state at, brought to the state ref (the same state with a
// chart, which holds at any temperature): each input's standard uncertainty times the derivative of the corrected pressure
// by that input. The gauge is taken to be as warm as the gas.
func budget(l Limits, g Gauge, r Reading, reading quantity.GaugePressure, at, ref gas.State) []Term {
	// p_ref = p(T_ref, rho(T, p)): by p (dp/drho)_ref/(dp/drho), by T -(dp/drho)_ref (dp/dT)/(dp/drho).
	byP := quantity.GaugePressure(ref.DpDRho / at.DpDRho)
	// With a chart the limits move with temperature instead, about as the isochore does: byP is 1 and the slope remains.
	byT := byP * quantity.GaugePressure(at.DpDT)

	u := g.uncertainty(reading, r.Temperature)
	class := Term{"gauge, by its class", fmt.Sprintf("%s of %s: +/-%s", g.Accuracy, l.In.Pressure(g.Span-g.SpanLow), l.In.Pressure(g.Accuracy.Limit(reading-g.SpanLow, g.Span-g.SpanLow))), u[0] * byP}
	if g.certified() {
		class = Term{"gauge, by its certificate", "U = " + l.In.Pressure(g.CorrectionUncertainty) + " (k = 2)", u[0] * byP}
	}
	ts := append(make([]Term, 0, 6), class,
		Term{"reading the dial", "half of a division of " + l.In.Pressure(g.Graduation), u[1] * byP},
		Term{"gauge away from 20 C", fmt.Sprintf("%.3g %% of span a kelvin, %.0f K", 100*g.warmth(), math.Abs(float64(r.Temperature-gaugeReference))), u[2] * byP})

	half, stated := probeHalfWidth, "shell probe, +/-1 K"
	if r.TemperatureFrom == AmbientAfterSoak {
		half = ambientHalfWidth + soakLeft(r.Soak)
		stated = fmt.Sprintf("air after %.0f min, +/-%.1f K", r.Soak.Minutes(), half)
	}
	ts = append(ts, Term{gasTemperature, stated, rectangular(quantity.GaugePressure(half) * byT)})

	ambient, stated := quantity.GaugePressure(100), "measured, +/-1 hPa"
	if !r.AmbientKnown {
		ambient, stated = 5000, "not measured, +/-50 hPa"
	}
	ts = append(ts, Term{"ambient pressure", stated, rectangular(ambient * byP)})

	if l.Chart == nil {
		rel := l.Gas.RelativeUncertainty(r.Temperature, at.P) / 2 // stated with k = 2
		// The density is found at one temperature and used at the other; the two errors are taken as independent.
		ts = append(ts, Term{"equation of state", fmt.Sprintf("%.2g %% in density (k = 2), at both temperatures", 200*rel), quantity.GaugePressure(rel * math.Sqrt2 * float64(at.Rho) * ref.DpDRho)})
	}
	return ts
}

// rectangular is the standard uncertainty of an error equally likely anywhere up to half either way (JCGM 100, 4.3.7).
func rectangular(half quantity.GaugePressure) quantity.GaugePressure {
	return half / quantity.GaugePressure(math.Sqrt(3))
}

// root returns the root of the sum of squares.
func root(us ...quantity.GaugePressure) quantity.GaugePressure {
	s := 0.0
	for _, u := range us {
		s += float64(u) * float64(u)
	}
	return quantity.GaugePressure(math.Sqrt(s))
}

// combined returns the combined standard uncertainty of independent terms.
func combined(ts []Term) quantity.GaugePressure {
	s := quantity.GaugePressure(0)
	for _, t := range ts {
		s = root(s, t.U)
	}
	return s
}

// phi is the standard normal distribution function.
func phi(z float64) float64 { return 0.5 * math.Erfc(-z/math.Sqrt2) }

// conformance is the probability that the true value lies in [low, high] when y was found with standard uncertainty u.
//
// Source: JCGM 106:2012, section 7 (formula re-derived).
func conformance(y, low, high, u float64) float64 { return phi((high-y)/u) - phi((low-y)/u) }

// onePsi and oneBar keep the factors in the one table of units.
var (
	onePsi, _ = quantity.Written{Mantissa: 1, Unit: "psi"}.Gauge()
	oneBar, _ = quantity.Written{Mantissa: 1, Unit: "bar"}.Gauge()
)

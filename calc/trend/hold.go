package trend

import (
	"errors"
	"fmt"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
)

// gaugeReference is the temperature at which a gauge meets its class: 20 degC (EN 837-1).
const gaugeReference quantity.Temperature = 293.15

// HoldLimit is the loss of corrected pressure that a hold test allows, over the time for which it is stated.
type HoldLimit struct {
	Drop quantity.GaugePressure
	Over time.Duration
}

// Rate returns the limit as a positive rate.
func (h HoldLimit) Rate() Rate { return Rate(float64(h.Drop) / h.Over.Seconds()) }

// Hold is the outcome of a pressure-hold test: two readings of one gauge with no valve touched in between.
type Hold struct {
	Class       calc.Class             // pass, conditional pass, conditional fail or fail
	First, Last quantity.GaugePressure // corrected to reference
	Drop        quantity.GaugePressure // First - Last; negative when it rose
	U           quantity.GaugePressure // expanded uncertainty of Drop, k = 2
	Allowed     quantity.GaugePressure // in the time that it took
	Guard       quantity.GaugePressure // the guard band of the rule
	Took        time.Duration
	Rate, RateU Rate    // of the corrected pressure, a loss negative; its standard uncertainty
	Exceeds     float64 // probability that the loss is above the limit
	Budget      []calc.Term
}

// ErrOtherGauge is returned for a hold test read with two gauges: their biases do not cancel.
var ErrOtherGauge = errors.New("both readings of a hold test must be taken with one gauge")

// TooShortError says that a hold test could not see its limit.
type TooShortError struct {
	Took, Needed time.Duration
	Drop, U      quantity.GaugePressure
}

func (e *TooShortError) Error() string {
	return fmt.Sprintf("%s is too short to see the limit: it allows a loss of %.0f Pa by then and the difference is known to +/-%.0f Pa; "+
		"wait until %s after the first reading",
		e.Took, float64(e.Drop), float64(e.U), e.Needed)
}

// RoseError says that the pressure rose by more than its uncertainty, which no gas-tight unit does.
type RoseError struct{ By, U quantity.GaugePressure }

func (e *RoseError) Error() string {
	return fmt.Sprintf("the corrected pressure rose by %.0f Pa, more than the uncertainty of %.0f Pa: a temperature is wrong or fluid has "+
		"come in; relieve the fluid side and start again",
		float64(e.By), float64(e.U))
}

// NewHold judges a hold test by the rule's guard band, as calc judges a charge. Readings may be given in any order.
//
// What remains of the gauge in a difference (JCGM 100, 5.2: correlated inputs): its bias is common to both readings and
// cancels; its repeatability, a fifth of its class, does not; and an error that grows along the scale leaves the class times
// the difference of the readings over a quarter of the span (common practice, no source; a hold test moves by little). The
// error by the gauge's own temperature is one unknown coefficient, so it goes with the difference of the temperatures. Reading
// the dial, gas temperature and ambient pressure are new each time. The equation of state is taken as new too.
//
// The limit is seen when it exceeds the uncertainty of the difference, and the guard band. Charge.FreeGas gives the rate in mL/h.
//
// Errors: a *NotAssessableError for each reading that is none, ErrOtherGauge; and with the figures filled in for showing, a
// *TooShortError unless the test has failed already, or a *RoseError.
func NewHold(l calc.Limits, first, last Reading, limit HoldLimit, rule calc.Rule) (Hold, error) {
	if last.At.Before(first.At) {
		first, last = last, first
	}
	took := last.At.Sub(first.At)
	switch {
	case !(limit.Drop > 0 && limit.Drop <= mostPressure && limit.Over > 0):
		return Hold{}, fmt.Errorf("a limit of %v Pa in %s is none; write the loss allowed and the time for it", float64(limit.Drop), limit.Over)
	case took <= 0 || took > mostSpan:
		return Hold{}, fmt.Errorf("%s between the readings is no hold test; correct their times", took)
	case first.Gauge.Name != last.Gauge.Name:
		return Hold{}, fmt.Errorf("%w: these are of %q and %q", ErrOtherGauge, first.Gauge.Name, last.Gauge.Name)
	}
	a, ta, errA := first.judge(l)
	b, tb, errB := last.judge(l)
	if err := errors.Join(errA, errB); err != nil {
		return Hold{}, err
	}
	h := Hold{First: a, Last: b, Drop: a - b, Took: took, Rate: Rate(float64(b-a) / took.Seconds())}
	h.Allowed = quantity.GaugePressure(float64(limit.Rate()) * took.Seconds())
	h.Budget = difference(first, last, ta, tb)
	var us []quantity.GaugePressure
	for _, t := range h.Budget {
		us = append(us, t.U)
	}
	u := root(us...)
	h.U, h.RateU = 2*u, Rate(float64(u)/took.Seconds())
	h.Class, h.Guard = rule.Decide(h.Allowed-h.Drop, u)
	h.Exceeds = normal(float64(h.Drop-h.Allowed) / float64(u))
	switch {
	case h.Drop < -h.U:
		return h, &RoseError{-h.Drop, h.U}
	case h.Allowed < max(h.Guard, h.U) && h.Class != calc.Fail:
		needed := min(float64(max(h.Guard, h.U))/float64(limit.Rate()), mostSpan.Seconds())
		return h, &TooShortError{took, time.Duration(needed*1e9).Round(time.Minute) + time.Minute, h.Allowed, h.U}
	}
	return h, nil
}

// difference returns the budget of a difference of two corrected readings of one gauge from their own budgets, both in calc's
// order: class, dial, gauge temperature, then what is new each time.
func difference(first, last Reading, a, b []calc.Term) []calc.Term {
	both := func(i int) quantity.GaugePressure { return root(a[i].U, b[i].U) }
	moved := max(first.Reading.Gauge-last.Reading.Gauge, last.Reading.Gauge-first.Reading.Gauge)
	along := min(1, moved/((first.Gauge.Span-first.Gauge.SpanLow)/4))
	class, warm := max(a[0].U, b[0].U), quantity.GaugePressure(0)
	away := func(r Reading) float64 { return float64(r.Reading.Temperature - gaugeReference) }
	// The term of a reading is the coefficient times its distance from 20 degC: with sign, the two take away from each other.
	if away(first) < 0 == (away(last) < 0) {
		warm = max(a[2].U-b[2].U, b[2].U-a[2].U)
	} else {
		warm = a[2].U + b[2].U
	}
	ts := []calc.Term{
		{Name: "gauge, repeatability", Stated: "a fifth of its class or certificate, each time", U: repeatable * root(a[0].U, b[0].U)},
		{Name: "gauge, along its scale", Stated: "its class over a quarter of the span", U: along * class},
		{Name: a[1].Name, Stated: a[1].Stated, U: both(1)},
		{Name: a[2].Name, Stated: "one coefficient, at two temperatures", U: warm},
	}
	for i := 3; i < min(len(a), len(b)); i++ {
		stated := a[i].Stated
		if b[i].Stated != stated {
			stated += "; " + b[i].Stated
		}
		ts = append(ts, calc.Term{Name: a[i].Name, Stated: stated, U: both(i)})
	}
	return ts
}

// Package trend finds how fast a unit loses its charge from readings taken between charges: a leak rate with its interval, the
// day the charge leaves its limits, readings that do not fit, and the pressure-hold test. It is pure: no clock, no files.
//
// Every reading of a gauge shares that gauge's unknown bias. So a steady bias is no leak, and a change of gauge is a step of
// about the size that the gauges' classes allow, and no leak either.
package trend

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"example.org/chargehand/calc/quantity"
)

// Point is one reading, brought to the sheet's reference temperature and ambient pressure.
type Point struct {
	At       time.Time
	Pressure quantity.GaugePressure // corrected, pascals
	U        quantity.GaugePressure // standard uncertainty of what is new in each reading: dial, temperature, ambient
	Gauge    string                 // readings of one gauge share its bias
	Bias     quantity.GaugePressure // standard uncertainty of that bias: the gauge's class, or its certificate
	// Warm is the standard uncertainty of the error by the gauge's own temperature, with the sign of its distance from 20 degC: one
	// unknown coefficient for all readings of the gauge, so that a season is no leak either.
	Warm    quantity.GaugePressure
	Segment string // a charge, or a bleed, begins a new one
}

// Rate is a change of corrected pressure, pascals per second; a loss is negative.
type Rate float64

const day = 86400

// PerDay returns the change in a day.
func (r Rate) PerDay() quantity.GaugePressure { return quantity.GaugePressure(r * day) }

// PsiPerDay returns the change in a day in psi.
func (r Rate) PsiPerDay() float64 {
	v, err := r.PerDay().InUnit("psi")
	if err != nil {
		panic("trend: psi is not in the table of units") // a defect of our own table
	}
	return v
}

// PerDay makes a rate of a change in a day.
func PerDay(g quantity.GaugePressure) Rate { return Rate(g / day) }

// Standing is how much a history can carry. The floors are common practice, no source, but for two readings, where an error
// of the rate exists only by the budget.
type Standing int

// Standings, by the readings that bear on the rate: in each segment with two or more, all but one, and one for the unit.
const (
	BudgetOnly Standing = iota // 2 or 3: the interval is by the stated uncertainties alone, and nothing is claimed
	Shown                      // 4 or 5: the interval is shown
	Warning                    // 6 or 7: a leak may be claimed
	Dated                      // 8 and more: a date may be forecast
)

func standing(bearing int) Standing {
	switch {
	case bearing >= 8:
		return Dated
	case bearing >= 6:
		return Warning
	case bearing >= 4:
		return Shown
	}
	return BudgetOnly
}

// Options of a fit. The zero value is one rate for the unit.
type Options struct {
	// PerSegment gives each segment its own rate; the fit's Rate is then that of the last segment, and only its readings bear on it.
	// Else all share one.
	PerSegment bool
}

// Level is a segment's line.
type Level struct {
	Segment string
	Start   time.Time              // of its first reading
	At      quantity.GaugePressure // the line there
	U       quantity.GaugePressure // standard uncertainty, gauge bias and all
	Rate    Rate                   // the unit's, or with PerSegment its own, where it has readings at two times
	RateU   Rate
}

// Fit is what a history says.
type Fit struct {
	Rate      Rate // of the corrected pressure; with PerSegment of the last segment
	U         Rate // its standard uncertainty
	Low, High Rate // 95 % interval
	Standing  Standing
	Levels    []Level // in order of time
	// Scatter is how many times their stated uncertainty the readings scatter, within one gauge or altogether, whichever is more; at
	// least 1. The interval is widened by it.
	Scatter float64
	// GaugesDisagree is true when gauges differ by more than their classes make likely (1 %).
	GaugesDisagree bool
	Odd            []Odd // readings that do not fit, in order of time; they are in the fit
	// Without is the fit without the odd readings; nil when there is none, or what is left is too little.
	Without *Fit
	Robust  *TheilSen // nil when no segment has two readings of one gauge at different times
	// RobustDisagrees is true from six readings on when the robust slope lies outside the interval as it would be without Scatter:
	// a few readings then pull the line.
	RobustDisagrees bool

	doubted     Rate // High with doubt
	first, last time.Time
	solved      *solution
	model       *model
}

// ErrTooFew is returned when no segment has two readings at different times.
var ErrTooFew = errors.New("no two readings lie between the same two charges at different times, so there is no rate")

// New fits points given in any order.
//
// Model: pressure = level of its segment + rate x time + bias of its gauge + its gauge's error by temperature + error; the error
// has standard deviation U, the bias Bias, the error by temperature Warm. Generalised least squares, done as ordinary least squares
// with one more row for each gauge that holds its bias to 0 +/- Bias, and one for its coefficient: the two are the same (Henderson's
// mixed-model equations; from memory), and this one needs no matrix of n x n.
//
// Interval: normal with the stated uncertainties; when the readings scatter more than chance explains, those are
// widened to the scatter seen and Student's t is taken (see widening). So 95 % intervals cover the truth in 95 % of
// histories also when some readings are odd: the statement is for this fit of all readings, not for Without.
//
// Errors quote the value that cannot be used. Valid for pressures below 1 GPa and times within 200 years of one another.
func New(points []Point, o Options) (*Fit, error) {
	if err := check(points); err != nil {
		return nil, err
	}
	ps := slices.Clone(points)
	slices.SortStableFunc(ps, compare)
	f, err := fit(ps, o)
	if err != nil {
		return nil, err
	}
	f.Robust = theilSen(ps)
	if f.Robust != nil && f.Standing >= Warning {
		// The scatter that pulls a line also widens its interval, so the stated uncertainty is what counts here.
		f.RobustDisagrees = math.Abs(float64(f.Robust.Slope-f.Rate)) > quantile(math.Inf(1), 0.975)*float64(f.U)/f.Scatter
	}
	var rest []Point
	if f.Odd, rest = odd(f, o); len(f.Odd) > 0 {
		if g, err := fit(rest, o); err == nil { // what is left may have no rate
			g.Robust = theilSen(rest)
			f.Without = g
		}
	}
	return f, nil
}

// compare orders points so that the result does not depend on the order given.
func compare(a, b Point) int {
	if c := a.At.Compare(b.At); c != 0 {
		return c
	}
	for _, d := range []float64{float64(a.Pressure - b.Pressure), float64(a.U - b.U), float64(a.Bias - b.Bias), float64(a.Warm - b.Warm)} {
		if d != 0 {
			return int(math.Copysign(1, d))
		}
	}
	return slices.Compare([]string{a.Gauge, a.Segment}, []string{b.Gauge, b.Segment})
}

const (
	mostPressure = 1e9 // Pa
	mostSpan     = 200 * 365 * 24 * time.Hour
)

func check(points []Point) error {
	if len(points) == 0 {
		return errors.New("no readings; take two or more between charges")
	}
	lo, hi := points[0].At, points[0].At
	for i, p := range points {
		switch {
		case !(math.Abs(float64(p.Pressure)) <= mostPressure):
			return fmt.Errorf("reading %d of %s has the pressure %v Pa, which is none; correct it", i+1, p.At.Format(time.RFC3339), float64(p.Pressure))
		case !(p.U > 0 && p.U <= mostPressure && p.U >= leastU):
			return fmt.Errorf("reading %d of %s has the standard uncertainty %v Pa; it must be at least %v", i+1, p.At.Format(time.RFC3339), float64(p.U), float64(leastU))
		case !(p.Bias >= 0 && p.Bias <= mostPressure):
			return fmt.Errorf("reading %d of %s has the gauge bias %v Pa; it must be 0 or more", i+1, p.At.Format(time.RFC3339), float64(p.Bias))
		case !(math.Abs(float64(p.Warm)) <= mostPressure):
			return fmt.Errorf("reading %d of %s has the gauge temperature error %v Pa, which is none",
				i+1, p.At.Format(time.RFC3339), float64(p.Warm))
		}
		if p.At.Before(lo) {
			lo = p.At
		}
		if p.At.After(hi) {
			hi = p.At
		}
	}
	if lo.Add(mostSpan).Before(hi) {
		return fmt.Errorf("the readings run from %s to %s, more than 200 years; correct the dates", lo.Format(time.RFC3339), hi.Format(time.RFC3339))
	}
	return nil
}

// leastU keeps the weights of one history within what the arithmetic carries.
const leastU quantity.GaugePressure = 1e-3

// LossBelow is what may be said when no leak is seen: "no leak seen above this". It is the largest loss that the interval
// holds, and not less than DetectionLimit.
func (f *Fit) LossBelow() Rate { return max(-f.Low, f.DetectionLimit()) }

// DetectionLimit is the least loss that this history would show as a leak, half the width of the interval.
func (f *Fit) DetectionLimit() Rate { return (f.High - f.Low) / 2 }

// LeakSeen says whether a loss may be claimed: the history is long enough, and the interval lies below zero, also when gauges may
// be wrong by doubt times their class and nothing is learnt of their coefficients of temperature. So neither a change to a gauge at
// the other end of its class nor a season is a leak. With no leak it is true for about 2.5 % of histories at most.
func (f *Fit) LeakSeen() bool { return f.Standing >= Warning && f.High < 0 && f.doubted < 0 }

// doubt is what a claim must bear in the bias of gauges: a class is a limit, and a worn gauge can lie beyond it.
const doubt = 2

// Exceeds is the probability that the loss exceeds allowable, a positive rate such as the sheet's; Exceeds(0) that there is
// one at all. ok is false, and nothing may be claimed of it, with fewer than four readings.
func (f *Fit) Exceeds(allowable Rate) (p float64, ok bool) {
	if !(math.Abs(float64(allowable)) <= mostPressure) {
		return 0, false
	}
	return f.solved.cdf(float64(-allowable-f.Rate) / float64(f.U)), f.Standing >= Shown
}

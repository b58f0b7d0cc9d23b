package trend

import (
	"errors"
	"fmt"
	"math"
	"time"

	"example.org/chargehand/calc/quantity"
)

// Forecast is when the corrected pressure leaves its limits: between two days, never on one.
type Forecast struct {
	// NotBefore is the earliest day at 95 %. It is the time of the last reading when the charge may be out of limits already.
	NotBefore time.Time
	// By is the latest day at 95 %; the zero time when the history does not show that it ever leaves.
	By time.Time
	// Likely is where the line itself leaves; zero when it does not. It is to be shown only with the other two.
	Likely time.Time
	Limit  quantity.GaugePressure // the high one when the pressure is seen to rise, else the low one
	Out    bool                   // the line lies outside at the last reading
	// Beyond is how many times the observed span lies between the last reading and NotBefore: a line says little far beyond.
	Beyond float64
}

// ErrNoForecast is returned when a history is too short for a date.
var ErrNoForecast = errors.New("a date needs 8 readings between charges")

// horizon is how far a forecast looks; what comes later is as good as never.
const horizon = 20 * 365 * day

// Forecast returns when the last segment's true pressure leaves low to high, gauge pascals at reference. The day is the set of
// times at which the line's 95 % interval holds the limit, gauge bias included; at By the charge is out
// of limits at that level of confidence, and before NotBefore it is in them.
//
// Source: E.C. Fieller, J. R. Stat. Soc. B 16, 175 (1954): the interval of a ratio, which may have no upper end (from memory).
func (f *Fit) Forecast(low, high quantity.GaugePressure) (Forecast, error) {
	if !(low < high && low >= -mostPressure && high <= mostPressure) {
		return Forecast{}, fmt.Errorf("limits of %v Pa to %v Pa are none; give the sheet's", float64(low), float64(high))
	}
	if f.Standing < Dated {
		return Forecast{}, fmt.Errorf("%w; this unit has %d that bear on the rate", ErrNoForecast, f.model.bearing)
	}
	limit, side := low, 1.0
	if f.Low > 0 {
		limit, side = high, -1
	}
	segment := f.model.segments[len(f.model.segments)-1]
	// room is the way to the limit, and how it can be at the worst and at the best.
	room := func(seconds, q float64) float64 {
		p, u := f.line(segment, f.last.Add(time.Duration(seconds*1e9)))
		return side*float64(p-limit) - q*float64(u)
	}
	q := f.solved.quantile(0.975)
	out := Forecast{Limit: limit, Out: room(0, 0) < 0}
	day := func(q float64) time.Time {
		s, found := firstBelow(func(s float64) float64 { return room(s, q) })
		if !found {
			return time.Time{}
		}
		return f.last.Add(time.Duration(s * 1e9))
	}
	out.NotBefore, out.Likely, out.By = day(q), day(0), day(-q)
	if out.NotBefore.IsZero() { // a line this well known and this flat
		out.NotBefore = f.last.Add(horizon * time.Second)
	}
	if span := f.last.Sub(f.first).Seconds(); span > 0 {
		out.Beyond = out.NotBefore.Sub(f.last).Seconds() / span
	}
	return out, nil
}

// Line returns the fitted line at a time, of the segment that was current then, with its 95 % interval, gauge bias and all.
func (f *Fit) Line(at time.Time) (p, low, high quantity.GaugePressure) {
	segment := f.Levels[0].Segment
	for _, l := range f.Levels {
		if !l.Start.After(at) {
			segment = l.Segment
		}
	}
	p, u := f.line(segment, at)
	q := quantity.GaugePressure(f.solved.quantile(0.975))
	return p, p - q*u, p + q*u
}

// firstBelow returns the first time up to the horizon, seconds, at which a line or the branch of a hyperbola is below zero. Either
// bends one way only: it crosses once for good, or dips and comes back; a dip of less than a tenth of the way is not found, and
// the forecast then has no end.
func firstBelow(room func(float64) float64) (seconds float64, found bool) {
	if room(0) < 0 {
		return 0, true
	}
	lo, hi := 0.0, 3600.0
	for ; room(hi) >= 0; lo, hi = hi, 1.1*hi {
		if hi > horizon {
			return 0, false
		}
	}
	for hi-lo > 1 && !math.IsNaN(hi) {
		if mid := (lo + hi) / 2; room(mid) < 0 {
			hi = mid
		} else {
			lo = mid
		}
	}
	return hi, true
}

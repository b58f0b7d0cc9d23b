package fault

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
)

// fact looks for one thing in a history and, when it is there, says it in a sentence with its numbers.
type fact func(*evidence) (sentence string, holds bool)

func (e *evidence) p(pascals float64) string { return e.in.Pressure(quantity.GaugePressure(pascals)) }

func (e *evidence) t(t quantity.Temperature) string { return e.in.Temperature(t) }

// dt writes a difference of temperature.
func (e *evidence) dt(kelvins float64) string {
	if e.in.T == "C" || e.in.T == "K" {
		return fmt.Sprintf("%.0f %s", math.Abs(kelvins), e.in.T)
	}
	return fmt.Sprintf("%.0f F", math.Abs(kelvins)*9/5)
}

func on(s seen) string { return s.When.Format("2006-01-02 15:04") }

func over(a, b seen) string {
	if d := b.When.Sub(a.When); d < 48*time.Hour {
		return fmt.Sprintf("%.0f hours", d.Hours())
	}
	return fmt.Sprintf("%.0f days", b.When.Sub(a.When).Hours()/24)
}

func first(ss []seen) seen { return ss[0] }
func last(ss []seen) seen  { return ss[len(ss)-1] }

// said holds when a remark was ticked since the last charge or, unless the charge cures it, at that charge; the latest time counts.
func said(r Remark) fact {
	return func(e *evidence) (string, bool) {
		if slices.Contains(e.h.Noticed, r) {
			return fmt.Sprintf("%s, noticed now", r), true
		}
		for _, s := range slices.Backward(e.all) {
			atCharge := s.Kind == ChargeFound && s.stretch == e.last.stretch-1 && !r.cured()
			if s.stretch < e.last.stretch && s.stretch < e.q.stretch && !atCharge {
				break
			}
			if slices.Contains(s.Remarks, r) {
				return fmt.Sprintf("%s, noted %s", r, on(s)), true
			}
		}
		return "", false
	}
}

func chargeGone(e *evidence) (string, bool) {
	for _, r := range []Remark{PumpCyclesFast, Hammering, ZeroWhenPumpStops} {
		if s, ok := said(r)(e); ok {
			return s + ": little or no charge left", true
		}
	}
	return "", false
}

// How the corrected pressure moves between charges.

func falls(e *evidence) (string, bool) {
	if !e.trend || e.change > -e.limit || restStoodStill(e) {
		return "", false
	}
	return fmt.Sprintf("corrected pressure fell by %s in %s since %s, more than the %s that readings alone may differ by",
		e.p(-e.change), over(first(e.checks), last(e.checks)), on(first(e.checks)), e.p(e.limit)), true
}

func rises(e *evidence) (string, bool) {
	if !e.trend || e.change < e.limit || restStoodStill(e) {
		return "", false
	}
	return fmt.Sprintf("corrected pressure rose by %s in %s with no gas added, more than the %s that readings alone may differ by",
		e.p(e.change), over(first(e.checks), last(e.checks)), e.p(e.limit)), true
}

// restStoodStill holds when the others of the stretch, three or more, show no change without the odd reading.
func restStoodStill(e *evidence) bool {
	rest := e.rest()
	by, limit, ok := change(rest)
	return isOdd(e) && len(rest) > 2 && ok && math.Abs(by) < limit
}

func flat(e *evidence) (string, bool) {
	if !e.trend || math.Abs(e.change) >= e.limit/2 || isOdd(e) {
		return "", false
	}
	return fmt.Sprintf("corrected pressure stood still within %s over %s", e.p(math.Max(math.Abs(e.change), spread(e.checks))), over(first(e.checks), last(e.checks))), true
}

func spread(ss []seen) float64 {
	low, high := math.Inf(1), math.Inf(-1)
	for _, s := range ss {
		low, high = min(low, s.c), max(high, s.c)
	}
	return high - low
}

func withinAllowed(e *evidence) (string, bool) {
	a := float64(e.h.Allowed)
	if !(a > 0) || !e.trend {
		return "", false
	}
	days := seconds(first(e.checks), last(e.checks)) / 86400
	m, _ := slope(e.checks)
	if rate := -m * 86400; days >= 1 && rate > 0 && rate <= a && e.change < -e.limit {
		return fmt.Sprintf("it loses %s in %.0f days, within the %s that the sheet allows for that time", e.p(rate*days), days, e.p(a*days)), true
	}
	return "", false
}

// How the dial follows temperature.

// spanOfTemperature returns the coldest and the warmest observation.
func spanOfTemperature(ss []seen) (cold, warm seen) {
	cold, warm = ss[0], ss[0]
	for _, s := range ss {
		if s.Reading.Temperature < cold.Reading.Temperature {
			cold = s
		}
		if s.Reading.Temperature > warm.Reading.Temperature {
			warm = s
		}
	}
	return cold, warm
}

func dialFollowsTemperature(e *evidence) (string, bool) {
	if len(e.checks) < 2 || isOdd(e) {
		return "", false
	}
	cold, warm := spanOfTemperature(e.checks)
	moved := float64(warm.Reading.Gauge - cold.Reading.Gauge)
	differ := math.Abs(warm.c - cold.c)
	if limit := max(warm.u, cold.u); moved < limit || differ > limit || differ > moved/2 || math.Abs(e.change) >= e.limit {
		return "", false
	}
	return fmt.Sprintf("the dial showed %s at %s and %s at %s, and both are the same corrected, within %s",
		e.p(float64(cold.Reading.Gauge)), e.t(cold.Reading.Temperature), e.p(float64(warm.Reading.Gauge)), e.t(warm.Reading.Temperature), e.p(differ)), true
}

// dialStands holds when one gauge showed the same figure three times or more running while temperature should have moved it.
func dialStands(e *evidence) (string, bool) {
	run := []seen{}
	for _, s := range slices.Backward(e.now) {
		if len(run) > 0 && (s.Gauge != e.last.Gauge || s.Reading.Gauge != run[0].Reading.Gauge) {
			break
		}
		if s.Gauge == e.last.Gauge {
			run = append(run, s)
		}
	}
	if len(run) < 3 {
		return "", false
	}
	cold, warm := spanOfTemperature(run)
	should := math.Abs(cold.c - warm.c)
	if should < max(cold.u, warm.u) {
		return "", false
	}
	return fmt.Sprintf("gauge %s showed %s %d times running while the gas went from %s to %s, which should have moved it by about %s",
		e.last.Gauge, e.p(float64(e.last.Reading.Gauge)), len(run), e.t(cold.Reading.Temperature), e.t(warm.Reading.Temperature), e.p(should)), true
}

// After a charge.

// charged returns the observation as left that starts the present stretch, and the checks after it.
func charged(e *evidence) (left seen, after []seen, ok bool) {
	if len(e.now) < 2 || e.now[0].Kind != ChargeLeft {
		return seen{}, nil, false
	}
	return e.now[0], e.now[1:], true
}

func fellAtOnce(e *evidence) (string, bool) {
	left, after, ok := charged(e)
	if !ok || left.c-after[0].c < steadyPart*left.u || len(after) > 1 && e.trend && e.change <= -e.limit {
		return "", false
	}
	s := fmt.Sprintf("%s as left on %s, %s at the first check %s later (corrected)", e.p(left.c), on(left), e.p(after[0].c), over(left, after[0]))
	if len(after) > 1 {
		s += ", and no fall since"
	}
	return s, true
}

func fallsSinceFirstCheck(e *evidence) (string, bool) {
	if _, after, ok := charged(e); !ok || len(after) < 2 {
		return "", false
	}
	return falls(e)
}

const settled = time.Hour // after which shell and gas are taken as cooled (common practice, no source)

// leftWarm is nothing to go by unless the pressure was lower after: most charges are read soon, and stay. A soak of zero was not noted.
func leftWarm(e *evidence) (string, bool) {
	left, _, ok := charged(e)
	if _, fell := fellAtOnce(e); !ok || !fell || left.Reading.Soak <= 0 || left.Reading.Soak >= settled/2 {
		return "", false
	}
	return fmt.Sprintf("the charge was read %.0f min after it stopped, with gas or shell still warm", left.Reading.Soak.Minutes()), true
}

func leftSettled(e *evidence) (string, bool) {
	left, _, ok := charged(e)
	if !ok || left.Reading.Soak < settled {
		return "", false
	}
	return fmt.Sprintf("the charge was read %.0f min after it stopped, when it had settled", left.Reading.Soak.Minutes()), true
}

// warmthExplains asks how much warmer than noted the gas must have been for the charge as left to be what was found later.
func warmthExplains(e *evidence) (string, bool) {
	left, after, ok := charged(e)
	if _, fell := fellAtOnce(e); !ok || !fell {
		return "", false
	}
	low, high := 0.0, 80.0 // kelvins; a fill heats the gas by more only with no wall at all
	at := func(dT float64) float64 {
		c, fine := left.as(e.h.Limits, func(r *calc.Reading) { r.Temperature += quantity.Temperature(dT) })
		if !fine {
			return math.NaN()
		}
		return c
	}
	if !(at(high) <= after[0].c && at(low) >= after[0].c) {
		return "", false
	}
	for range 40 {
		if mid := (low + high) / 2; at(mid) > after[0].c {
			low = mid
		} else {
			high = mid
		}
	}
	return fmt.Sprintf("gas %s warmer than the %s noted would explain the whole difference", e.dt(high), e.t(left.Reading.Temperature)), true
}

// limitsAt returns the sheet's limits at the reference.
func (e *evidence) limitsAt() (low, high float64, ok bool) {
	l := e.h.Limits
	if l.Chart != nil {
		lo, _, hi, err := l.Chart.At(reference(l))
		return float64(lo), float64(hi), err == nil
	}
	return float64(l.Charge - l.Minus), float64(l.Charge + l.Plus), l.Charge > 0
}

func leftAbove(e *evidence) (string, bool) {
	left, _, ok := charged(e)
	if !ok && e.last.Kind == ChargeLeft && e.last.ok {
		left, ok = e.last, true
	}
	_, high, known := e.limitsAt()
	if !ok || !known || left.c <= high {
		return "", false
	}
	return fmt.Sprintf("left at %s corrected on %s, %s above the limit of %s", e.p(left.c), on(left), e.p(left.c-high), e.p(high)), true
}

func foundAbove(e *evidence) (string, bool) {
	_, high, known := e.limitsAt()
	if !known || !e.last.ok || e.last.Kind == ChargeLeft || e.last.c <= high {
		return "", false
	}
	return fmt.Sprintf("found at %s corrected on %s, %s above the limit of %s", e.p(e.last.c), on(e.last), e.p(e.last.c-high), e.p(high)), true
}

func inLimits(e *evidence) (string, bool) {
	low, high, known := e.limitsAt()
	if !known || !e.last.ok || e.last.c > high || e.last.c < low {
		return "", false
	}
	return fmt.Sprintf("found at %s corrected on %s, within %s", e.p(e.last.c), on(e.last), e.in.Between(quantity.GaugePressure(low), quantity.GaugePressure(high))), true
}

// The fluid side.

const shownFluid = 345_000 // pascals (50 psi), up to which a dial counts as showing none (common practice, no source)

func fluidSeen(e *evidence) (string, bool) {
	f := float64(e.last.Reading.Relieved.FluidPressure)
	if len(e.all) == 0 || !e.last.Reading.Relieved.Seen || !(f > shownFluid) {
		return "", false
	}
	return fmt.Sprintf("%s stood on the fluid side when the gas was read on %s", e.p(f), on(e.last)), true
}

func reliefNotSaid(e *evidence) (string, bool) {
	r := e.last.Reading.Relieved
	if len(e.all) == 0 || r.Seen && strings.TrimSpace(r.How) != "" {
		return "", false
	}
	return fmt.Sprintf("it is not said how the fluid side was relieved on %s and what was seen there", on(e.last)), true
}

func reliefSeen(e *evidence) (string, bool) {
	r := e.last.Reading.Relieved
	if len(e.all) == 0 || !r.Seen || strings.TrimSpace(r.How) == "" || !(math.Abs(float64(r.FluidPressure)) <= shownFluid) {
		return "", false
	}
	return fmt.Sprintf("relieved on %s (%s), %s seen on the fluid side", on(e.last), strings.TrimSpace(r.How), e.p(float64(r.FluidPressure))), true
}

func atSystem(e *evidence) (string, bool) {
	system := float64(e.h.Limits.SystemPressure)
	_, high, _ := e.limitsAt()
	if len(e.all) == 0 || !(system > 0) || high > 0.9*system || math.Abs(float64(e.last.Reading.Gauge)-system) > 0.03*system {
		return "", false
	}
	return fmt.Sprintf("the gas gauge showed %s on %s, which is system pressure (%s)", e.p(float64(e.last.Reading.Gauge)), on(e.last), e.p(system)), true
}

func reliefSeenAtSystem(e *evidence) (string, bool) {
	if _, ok := atSystem(e); !ok {
		return "", false
	}
	s, ok := reliefSeen(e)
	return s + ", and yet the gas gauge shows system pressure", ok
}

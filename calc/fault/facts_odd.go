package fault

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
)

// One reading against the rest.

func isOdd(e *evidence) bool {
	return e.fits && math.Abs(e.q.c-e.want) > apart(e.q, e.rest())
}

func odd(e *evidence) (string, bool) {
	if !isOdd(e) || !e.q.ok {
		return "", false
	}
	side := "above"
	if e.q.c < e.want {
		side = "below"
	}
	return fmt.Sprintf("the reading of %s is %s %s what the others of that stretch make one expect, more than the %s it is known to",
		on(e.q), e.p(math.Abs(e.q.c-e.want)), side, e.p(apart(e.q, e.rest()))), true
}

func inLine(e *evidence) (string, bool) {
	if !e.fits || isOdd(e) {
		return "", false
	}
	return fmt.Sprintf("the reading of %s is within %s of what the others make one expect", on(e.q), e.p(math.Abs(e.q.c-e.want))), true
}

// laterBack holds when readings after the one in question are back in line: a slip, not a change of the unit.
func laterBack(e *evidence) (string, bool) {
	if !isOdd(e) {
		return "", false
	}
	var before, after []seen
	for _, s := range e.rest() {
		if s.When.After(e.q.When) {
			after = append(after, s)
		} else {
			before = append(before, s)
		}
	}
	if len(before) == 0 || len(after) == 0 {
		return "", false
	}
	want, _ := expect(before, after[0])
	if math.Abs(after[0].c-want) > apart(after[0], before) {
		return "", false
	}
	return fmt.Sprintf("the next reading, %s, is back in line", on(after[0])), true
}

// temperatureSlips tries what could have been meant by the temperature entered: the other unit, or the other sign.
func temperatureSlips(e *evidence) (string, bool) {
	if !isOdd(e) || !e.q.ok {
		return "", false
	}
	entered := e.q.TemperatureIn
	if entered == "" {
		entered = e.in.T
	}
	if entered == "" {
		entered = "F"
	}
	t := float64(e.q.Reading.Temperature)
	f, c := func(v float64) float64 { return (v + 459.67) * 5 / 9 }, func(v float64) float64 { return v + 273.15 }
	n, same, other, name := t*9/5-459.67, f, c, "C"
	if entered != "F" {
		n, same, other, name, entered = t-273.15, c, f, "F", "C"
	}
	best, sentence := apart(e.q, e.rest())*0.7, ""
	for _, try := range []struct {
		meant float64
		words string
	}{
		{other(n), fmt.Sprintf("%.0f %s", n, name)}, {same(-n), fmt.Sprintf("%.0f %s", -n, entered)},
	} {
		if try.meant < 213 || try.meant > 353 { // no field and no shell
			continue
		}
		got, fine := e.q.as(e.h.Limits, func(r *calc.Reading) { r.Temperature = quantity.Temperature(try.meant) })
		if miss := math.Abs(got - e.want); fine && miss < best {
			best = miss
			sentence = fmt.Sprintf("entered %.0f %s on %s, which is %s off the others; with %s it is %s corrected, within %s of them",
				n, entered, on(e.q), e.p(math.Abs(e.q.c-e.want)), try.words, e.p(got), e.p(miss))
		}
	}
	return sentence, sentence != ""
}

// pressureUnitSlips tries every other unit of the dial for the number entered.
func pressureUnitSlips(e *evidence) (string, bool) {
	if !isOdd(e) {
		return "", false
	}
	entered := e.q.PressureIn
	if entered == "" {
		entered = e.in.P
	}
	n, err := e.q.Reading.Gauge.InUnit(entered)
	if err != nil {
		entered = "psi"
		n, _ = e.q.Reading.Gauge.InUnit(entered)
	}
	for _, unit := range []string{"psi", "bar", "kPa", "MPa", "kgf/cm2"} {
		one, err := quantity.Written{Mantissa: 1, Unit: unit}.Gauge()
		meant := n * float64(one)
		if err != nil || math.Abs(meant/float64(e.q.Reading.Gauge)-1) < 0.1 { // bar and kgf/cm2 are too alike to tell
			continue
		}
		got, fine := e.q.as(e.h.Limits, func(r *calc.Reading) { r.Gauge = quantity.GaugePressure(meant) })
		if tolerance := max(e.q.u, guessedU*math.Abs(e.want)); e.q.hasTemperature() && fine && math.Abs(got-e.want) < tolerance {
			return fmt.Sprintf("entered %.4g %s on %s; %.4g %s would be %s corrected, where the others make one expect %s",
				n, entered, on(e.q), n, unit, e.p(got), e.p(e.want)), true
		}
	}
	return "", false
}

// ambientExplains asks whether the step is the change of ambient pressure that went unsaid: a sealed gas moves on a gauge by it.
func ambientExplains(e *evidence) (string, bool) {
	if !isOdd(e) || !e.q.ok {
		return "", false
	}
	for _, s := range e.rest() {
		d := float64(s.Reading.Ambient - e.q.Reading.Ambient)
		if s.Reading.AmbientKnown == e.q.Reading.AmbientKnown || math.Abs(d) < 500 {
			continue
		}
		got, fine := e.q.as(e.h.Limits, func(r *calc.Reading) { r.Ambient = s.Reading.Ambient })
		if fine && math.Abs(got-e.want) < math.Abs(e.q.c-e.want)/2 {
			return fmt.Sprintf("ambient pressure was not measured for one of the readings (%.0f and %.0f hPa); with the same one the step of %s shrinks to %s",
				s.Reading.Ambient/100, e.q.Reading.Ambient/100, e.p(math.Abs(e.q.c-e.want)), e.p(math.Abs(got-e.want))), true
		}
	}
	return "", false
}

// ambientNotMeasured holds when the step is one that another field's height would make, and nobody measured the ambient pressure.
func ambientNotMeasured(e *evidence) (string, bool) {
	if !isOdd(e) || !e.q.ok || e.q.Reading.AmbientKnown || math.Abs(e.q.c-e.want) >= mostAmbient {
		return "", false
	}
	return fmt.Sprintf("ambient pressure was not measured on %s, and a step of %s is one that a field some %.0f m %s makes",
		on(e.q), e.p(math.Abs(e.q.c-e.want)), math.Round(math.Abs(e.q.c-e.want)/1100)*100, map[bool]string{true: "higher", false: "lower"}[e.q.c > e.want]), true
}

const mostAmbient = 45_000 // pascals: sea level to above 15,000 ft

func tooMuchForAmbient(e *evidence) (string, bool) {
	step := math.Abs(e.q.c - e.want)
	if !e.fits || step < mostAmbient {
		return "", false
	}
	return fmt.Sprintf("a step of %s is more than any field and weather make (%s)", e.p(step), e.p(mostAmbient)), true
}

// The gauge, and the other units read with it.

// gaugeStep compares the readings with the present gauge with those before it in the same stretch. A gauge that read other units
// in line at that time made no step.
func gaugeStep(e *evidence) (string, bool) {
	if _, sound := sameGaugeInLine(e); sound || len(e.now) == 0 {
		return "", false
	}
	g := last(e.now).Gauge
	i := slices.IndexFunc(e.now, func(s seen) bool { return s.Gauge == g })
	before, with := e.now[:i], e.now[i:]
	if len(before) == 0 || slices.ContainsFunc(with, func(s seen) bool { return s.Gauge != g }) {
		return "", false
	}
	var steps []float64
	for _, s := range with {
		want, _ := expect(before, s)
		steps = append(steps, s.c-want)
	}
	step := median(steps)
	if math.Abs(step) < steadyPart*with[0].u || len(with) > 1 && spread(with) > math.Abs(step) {
		return "", false
	}
	way := "up"
	if step < 0 {
		way = "down"
	}
	return fmt.Sprintf("a step of %s %s comes with the change from gauge %s to gauge %s on %s",
		e.p(math.Abs(step)), way, last(before).Gauge, g, on(with[0])), true
}

// readWith returns the other units that were read with the gauge of q, and those read with another.
func (e *evidence) readWith() (same, another []compare) {
	for _, o := range e.others {
		switch {
		case !o.read():
		case o.near.Gauge == e.q.Gauge:
			same = append(same, o)
		default:
			another = append(another, o)
		}
	}
	return same, another
}

func (e *evidence) list(cs []compare) string {
	var out []string
	for _, c := range cs {
		out = append(out, fmt.Sprintf("%s by %s", c.unit, e.p(c.off())))
	}
	return strings.Join(out, ", ")
}

// shifted returns those that are off by about as much as this unit, the same way.
func (e *evidence) shifted(cs []compare) []compare {
	step := e.q.c - e.want
	var out []compare
	for _, c := range cs {
		if r := c.off() / step; math.Abs(c.off()) > steadyPart*c.near.u && r > 0.4 && r < 2.5 {
			out = append(out, c)
		}
	}
	return out
}

func sameGaugeOff(e *evidence) (string, bool) {
	same, _ := e.readWith()
	off := e.shifted(same)
	if !isOdd(e) || len(off) == 0 || 2*len(off) < len(same) {
		return "", false
	}
	return fmt.Sprintf("gauge %s is off on other units too: %s, here by %s", e.q.Gauge, e.list(off), e.p(e.q.c-e.want)), true
}

func sameGaugeInLine(e *evidence) (string, bool) {
	same, _ := e.readWith()
	var units []string
	for _, c := range same {
		if !c.inLine() {
			return "", false
		}
		units = append(units, c.unit)
	}
	if len(units) == 0 {
		return "", false
	}
	return fmt.Sprintf("gauge %s read %s in line with its own history near that time", e.q.Gauge, strings.Join(units, " and ")), true
}

// lowReading holds when it is one reading that is low and not the trend.
func lowReading(e *evidence) (string, bool) {
	s, ok := odd(e)
	return s, ok && e.q.c < e.want && restStoodStill(e)
}

// lowWithSoundGauge holds when the reading is low and its gauge is in line on other units.
func lowWithSoundGauge(e *evidence) (string, bool) {
	s, ok := sameGaugeInLine(e)
	if !ok || !isOdd(e) || e.q.c > e.want {
		return "", false
	}
	return fmt.Sprintf("the reading of %s is %s low, and %s", on(e.q), e.p(e.want-e.q.c), s), true
}

func allShift(e *evidence) (string, bool) {
	same, another := e.readWith()
	if !isOdd(e) || len(another) == 0 || len(e.shifted(another)) != len(another) || len(e.shifted(same)) != len(same) {
		return "", false
	}
	return fmt.Sprintf("units read with other gauges moved together with it: %s, here by %s", e.list(another), e.p(e.q.c-e.want)), true
}

func othersDriftToo(e *evidence) (string, bool) {
	var out []string
	for _, c := range e.others {
		if e.trend && c.trend && math.Abs(e.change) >= e.limit && math.Abs(c.change) >= c.limit && c.change*e.change > 0 {
			out = append(out, fmt.Sprintf("%s by %s", c.unit, e.p(c.change)))
		}
	}
	if len(out) == 0 {
		return "", false
	}
	return fmt.Sprintf("read with gauge %s, other units creep the same way: %s, here by %s", e.q.Gauge, strings.Join(out, ", "), e.p(e.change)), true
}

func sameGaugeSteady(e *evidence) (string, bool) {
	var out []string
	for _, c := range e.others {
		if c.trend && math.Abs(c.change) < c.limit {
			out = append(out, c.unit)
		}
	}
	if len(out) == 0 {
		return "", false
	}
	return fmt.Sprintf("read with the same gauge %s, %s stood still", e.q.Gauge, strings.Join(out, " and ")), true
}

// asOf returns what the reading of s would be corrected to on another unit's sheet; only the reference may differ.
func asOf(l calc.Limits, s seen) (float64, bool) { return corrected(l, s.Reading) }

// fitsAnother holds when the reading lies on another unit's history and not on this one's.
func fitsAnother(e *evidence) (string, bool) {
	o, got, ok := e.fitting()
	if !ok {
		return "", false
	}
	return fmt.Sprintf("the reading of %s is %s off this unit's history and within %s of that of %s", on(e.q), e.p(math.Abs(e.q.c-e.want)), e.p(math.Abs(got-o.want)), o.unit), true
}

// fitting finds the other unit on whose history q lies best.
func (e *evidence) fitting() (best compare, got float64, ok bool) {
	if !isOdd(e) || !e.q.ok {
		return best, 0, false
	}
	miss := math.Inf(1)
	for _, o := range e.others {
		c, fine := asOf(o.limits, e.q)
		if m := math.Abs(c - o.want); fine && m < 0.7*e.q.u && m < miss && math.Abs(o.want-e.want) > e.q.u {
			best, got, ok, miss = o, c, true, m
		}
	}
	return best, got, ok
}

// swapped holds when that other unit's own reading lies on this one's history in turn.
func swapped(e *evidence) (string, bool) {
	for _, o := range e.others {
		mine, ok := asOf(o.limits, e.q)
		theirs, fine := asOf(e.h.Limits, o.near)
		if !isOdd(e) || !o.read() || o.inLine() || !ok || !fine || !e.q.ok {
			continue
		}
		if math.Abs(mine-o.want) < e.q.u && math.Abs(theirs-e.want) < o.near.u {
			return fmt.Sprintf("exchanged with %s both fit: its reading of %s would be %s off this unit's history instead of %s, this one %s off its own instead of %s",
				o.unit, on(o.near), e.p(math.Abs(theirs-e.want)), e.p(math.Abs(e.q.c-e.want)), e.p(math.Abs(mine-o.want)), e.p(math.Abs(o.off()))), true
		}
	}
	return "", false
}

package fault

import (
	"cmp"
	"math"
	"slices"
	"strings"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
)

// seen is an observation with its pressures as numbers, pascals, and the stretch between charges to which it belongs.
type seen struct {
	Observation
	c, u    float64 // corrected, and its expanded uncertainty
	ok      bool    // c comes from the equation of state, at a known temperature
	stretch int
}

func (s seen) hasTemperature() bool { return s.Reading.TemperatureFrom != calc.TemperatureUnknown }

// track is one unit's usable observations by time.
type track struct {
	unit   string
	limits calc.Limits
	all    []seen
}

// evidence is a history made ready for the facts.
type evidence struct {
	h      History
	in     calc.Units
	all    []seen    // of the unit, by time
	now    []seen    // since the last charge, as left included; corrected ones only
	checks []seen    // of now, without the charge as left when two or more are there without it
	q      seen      // the reading in question: the one farthest from the rest of its stretch, else the last
	want   float64   // what the rest of its stretch makes one expect of it, corrected
	fits   bool      // want is known
	last   seen      // the last of all, with or without a temperature
	change float64   // of the corrected pressure over checks, pascals; see falls
	limit  float64   // what change must pass to mean anything
	trend  bool      // change is known
	others []compare // other units read near the time of q
}

// compare is another unit's reading near the time of the one in question.
type compare struct {
	track
	near   seen
	others []seen  // the rest of its stretch
	want   float64 // expected of it from the rest
	change float64 // over its stretch, with the gauge of q only
	limit  float64
	trend  bool
}

const (
	nearby     = 48 * time.Hour // readings of other units count as of the same occasion
	mostSeen   = 120            // the latest observations of a unit; more tell nothing of today's fault
	guessedU   = 0.02           // of the pressure, where no uncertainty is given (common practice, no source)
	steadyPart = 0.7            // of U between two readings with one gauge, whose bias is in both: sqrt 2 of half of U
	otherPart  = 1.4            // of U between two gauges: sqrt 2 of it
)

func gather(h History) *evidence {
	e := &evidence{h: h, in: h.Limits.In}
	t := follow(h.Unit, h.Limits, h.Seen)
	e.all = t.all
	if len(e.all) == 0 {
		return e
	}
	e.last = e.all[len(e.all)-1]
	e.now = stretch(e.all, e.last.stretch)
	if len(e.now) == 1 && e.now[0].Kind == ChargeLeft && e.last.Kind == ChargeLeft { // nothing read since: look at the stretch before
		if before := stretch(e.all, e.last.stretch-1); len(before) > 1 {
			e.now = before
		}
	}
	e.checks = e.now
	if len(e.now) > 2 && e.now[0].Kind == ChargeLeft {
		e.checks = e.now[1:]
	}
	e.change, e.limit, e.trend = change(e.checks)
	e.inQuestion()
	others := slices.Clone(h.Others)
	slices.SortStableFunc(others, func(a, b Other) int { return strings.Compare(a.Unit, b.Unit) })
	for _, o := range others {
		if c, ok := near(o, e.q); ok {
			e.others = append(e.others, c)
		}
	}
	return e
}

// follow makes a unit's usable observations ready, by time.
func follow(unit string, l calc.Limits, obs []Observation) track {
	t := track{unit: unit, limits: l}
	for _, o := range obs {
		p := float64(o.Reading.Gauge)
		if o.When.IsZero() || math.IsNaN(p) || p < 0 || p > 1e9 {
			continue
		}
		s := seen{Observation: o}
		if s.Reading.Ambient < 20_000 || !(s.Reading.Ambient <= 115_000) {
			s.Reading.Ambient, s.Reading.AmbientKnown = quantity.StandardAtmosphere, false
		}
		if !(math.Abs(float64(s.Reading.Relieved.FluidPressure)) <= 1e9) {
			s.Reading.Relieved.FluidPressure, s.Reading.Relieved.Seen = 0, false
		}
		if t := float64(s.Reading.Temperature); !(t > 150 && t < 500) { // no gas and no shell
			s.Reading.Temperature, s.Reading.TemperatureFrom = 0, calc.TemperatureUnknown
		}
		s.c, s.ok = corrected(l, s.Reading)
		if c := float64(o.Corrected); c != 0 && math.Abs(c) < 1e9 && s.hasTemperature() {
			s.c, s.ok = c, true
		}
		if s.u = float64(o.U); !(s.u > 0 && s.u < 1e9) {
			s.u = max(guessedU*math.Abs(s.c), 1000)
		}
		t.all = append(t.all, s)
	}
	slices.SortStableFunc(t.all, func(a, b seen) int {
		return cmp.Or(a.When.Compare(b.When), cmp.Compare(a.Kind, b.Kind), strings.Compare(a.Gauge, b.Gauge), cmp.Compare(a.Reading.Gauge, b.Reading.Gauge))
	})
	t.all = t.all[max(0, len(t.all)-mostSeen):]
	n := 0
	for i := range t.all {
		if t.all[i].Kind == ChargeLeft {
			n++
		}
		t.all[i].stretch = n
	}
	return t
}

// reference is the temperature to which readings are brought: the sheet's, or 20 degC for a chart without one.
func reference(l calc.Limits) quantity.Temperature {
	if l.Reference > 0 {
		return l.Reference
	}
	return 293.15
}

func sheetAmbient(l calc.Limits) quantity.Pressure {
	if l.Ambient > 0 {
		return l.Ambient
	}
	return quantity.StandardAtmosphere
}

// corrected brings a reading to the reference, gauge pascals. Outside the equation's range it is false, with the pressure as
// read: enough to see that a reading is far off, never shown.
func corrected(l calc.Limits, r calc.Reading) (float64, bool) {
	if l.Gas == nil || r.TemperatureFrom == calc.TemperatureUnknown {
		return float64(r.Gauge), false
	}
	p, err := calc.Correct(l.Gas, r.Gauge.Abs(r.Ambient), r.Temperature, reference(l))
	if err != nil {
		return float64(r.Gauge), false
	}
	return float64(p.Gauge(sheetAmbient(l))), true
}

// as returns what s would have been corrected to, had change been entered. A certificate's share of Corrected is kept.
func (s seen) as(l calc.Limits, change func(*calc.Reading)) (float64, bool) {
	before, ok := corrected(l, s.Reading)
	r := s.Reading
	change(&r)
	after, fine := corrected(l, r)
	if ok && s.ok {
		after += s.c - before
	}
	return after, fine
}

// stretch returns the corrected observations between two charges.
func stretch(all []seen, n int) []seen {
	var out []seen
	for _, s := range all {
		if s.stretch == n && s.ok {
			out = append(out, s)
		}
	}
	return out
}

func without(ss []seen, i int) []seen { return slices.Delete(slices.Clone(ss), i, i+1) }

func seconds(a, b seen) float64 { return b.When.Sub(a.When).Seconds() }

func median(v []float64) float64 {
	slices.Sort(v)
	return v[(len(v)-1)/2]/2 + v[len(v)/2]/2
}

// slope is the median of the slopes between pairs (Theil and Sen), Pa/s: one wrong reading among four does not move it. Pairs
// with one gauge are taken where there are any, so that a change of gauge is not a slope.
func slope(ss []seen) (float64, bool) {
	var same, all []float64
	for i, a := range ss {
		for _, b := range ss[i+1:] {
			dt := seconds(a, b)
			if dt < 60 {
				continue
			}
			all = append(all, (b.c-a.c)/dt)
			if a.Gauge == b.Gauge {
				same = append(same, (b.c-a.c)/dt)
			}
		}
	}
	if len(same) > 0 {
		all = same
	}
	if len(all) == 0 {
		return 0, false
	}
	return median(all), true
}

// change returns by how much the corrected pressure moved over the observations, and what it must pass to mean anything.
func change(ss []seen) (by, limit float64, ok bool) {
	m, ok := slope(ss)
	if !ok {
		return 0, 0, false
	}
	first, last, part := ss[0], ss[len(ss)-1], otherPart
	for i, a := range ss { // the longest time with one gauge is what the slope was found over
		for _, b := range ss[i+1:] {
			if a.Gauge == b.Gauge && (part == otherPart || seconds(a, b) > seconds(first, last)) {
				first, last, part = a, b, steadyPart
			}
		}
	}
	return m * seconds(first, last), part * max(first.u, last.u), true
}

// expect returns what the others of a stretch make one expect at a time: on their line when they are three or more, else their
// mean.
func expect(others []seen, at seen) (float64, bool) {
	if len(others) == 0 {
		return 0, false
	}
	m := 0.0
	if len(others) > 2 {
		m, _ = slope(others)
	}
	var at0 []float64
	for _, o := range others {
		at0 = append(at0, o.c+m*seconds(o, at))
	}
	return median(at0), true
}

// apart is how far a reading may lie from what is expected before it means anything.
func apart(s seen, others []seen) float64 {
	if slices.ContainsFunc(others, func(o seen) bool { return o.Gauge == s.Gauge }) {
		return s.u
	}
	return otherPart * s.u
}

// inQuestion finds the reading that lies farthest from the rest of its stretch, the last one when none does.
func (e *evidence) inQuestion() {
	e.q = e.last
	candidates := stretch(e.all, e.last.stretch)
	if !e.last.ok { // far outside the equation's range: it is itself the question
		e.want, e.fits = expect(candidates, e.last)
		return
	}
	if len(candidates) < 2 {
		candidates = e.now
	}
	worst := -1.0
	for i, s := range candidates {
		others := without(candidates, i)
		want, ok := expect(others, s)
		if !ok {
			continue
		}
		far := math.Abs(s.c-want) / apart(s, others)
		if far < 1 { // those in line do not compete; the last of them stands
			far = 0
		}
		if far >= worst*1.02 || worst <= 0 && far >= worst {
			worst, e.q, e.want, e.fits = far, s, want, true
		}
	}
}

// rest returns the observations of q's stretch without q.
func (e *evidence) rest() []seen {
	return slices.DeleteFunc(stretch(e.all, e.q.stretch), func(s seen) bool { return s.When.Equal(e.q.When) && s.Kind == e.q.Kind })
}

// near finds another unit's reading closest in time to q, and what its stretch makes one expect of it.
func near(o Other, q seen) (compare, bool) {
	c := compare{track: follow(o.Unit, o.Limits, o.Seen)}
	best := -1
	for i, s := range c.all {
		if d := s.When.Sub(q.When).Abs(); s.ok && s.Kind != ChargeLeft && d <= nearby && (best < 0 || d < c.all[best].When.Sub(q.When).Abs()) {
			best = i
		}
	}
	var mine []seen
	if best >= 0 {
		c.near = c.all[best]
		mine = stretch(c.all, c.near.stretch)
		c.others = slices.DeleteFunc(slices.Clone(mine), func(s seen) bool { return s.When.Equal(c.near.When) && s.Kind == c.near.Kind })
	} else { // not read then; its history may still fit q
		before := slices.DeleteFunc(slices.Clone(c.all), func(s seen) bool { return s.When.After(q.When) })
		if len(before) == 0 {
			return c, false
		}
		c.others = stretch(before, before[len(before)-1].stretch)
	}
	want, ok := expect(c.others, q)
	c.want = want
	with := slices.DeleteFunc(mine, func(s seen) bool { return s.Gauge != q.Gauge || s.Kind == ChargeLeft })
	c.change, c.limit, c.trend = change(with)
	return c, ok
}

func (c compare) read() bool { return !c.near.When.IsZero() }

// off is by how much the other unit's own reading lies off what was expected of it.
func (c compare) off() float64 { return c.near.c - c.want }

func (c compare) inLine() bool { return math.Abs(c.off()) <= apart(c.near, c.others) }

package plot

import (
	"fmt"
	"slices"
	"time"

	"gonum.org/v1/plot/vg"
)

// Dashes by meaning.
var (
	solid  []vg.Length
	dashed = []vg.Length{9, 5}
	dotted = []vg.Length{2, 4}
	chain  = []vg.Length{14, 4, 2, 4}
)

// Trend is corrected pressure against time.
type Trend struct {
	Title    string // the conclusion
	Quantity string // of the y axis, such as "charge corrected to 70 F"
	Unit     string
	Zone     *time.Location // of the dates; nil for UTC
	Readings []Reading
	Charges  []Charge
	Limits   *Limits
	Fit      []FitPoint // of the trend, by time; past the last reading it is a forecast
	Allowed  []Point    // the allowed loss, two points or more
	Leaves   *Leaves
}

// Reading is a point of a trend.
type Reading struct {
	When time.Time
	P, U float64 // value and its expanded uncertainty, 0 for none
	Odd  string  // why it does not fit; "" when it does
}

// Charge is a servicing: the corrected pressure as found and as left.
type Charge struct {
	When      time.Time
	From, To  float64
	FromKnown bool
}

// Limits are those of the sheet, in the unit of the y axis.
type Limits struct{ Low, Target, High float64 }

// FitPoint is the trend at a time, with its 95 % interval.
type FitPoint struct {
	When         time.Time
	P, Low, High float64
}

// Point is a value at a time.
type Point struct {
	When time.Time
	P    float64
}

// Leaves says when the forecast leaves the limits: Last zero when the interval has no end.
type Leaves struct{ First, Last time.Time }

const mostNotes = 4 // of charges that are labelled; of more only the last is

func at(t time.Time, v float64) pt { return pt{float64(t.Unix()), v} }

func (t Trend) figure() (figure, error) {
	if len(t.Readings) == 0 && len(t.Charges) == 0 {
		return figure{}, ErrNothing
	}
	place := t.Zone
	if place == nil {
		place = time.UTC
	}
	var p panel
	p.weight = 1
	p.y.title = fmt.Sprintf("%s, %s", t.Quantity, t.Unit)

	r := newRange()
	for _, x := range t.Readings {
		r.add(float64(x.When.Unix()))
	}
	for _, x := range t.Charges {
		r.add(float64(x.When.Unix()))
	}
	seen := r // readings and charges only
	for _, x := range t.Fit {
		r.add(float64(x.When.Unix()))
	}
	for _, x := range t.Allowed {
		r.add(float64(x.When.Unix()))
	}
	if t.Leaves != nil && !t.Leaves.Last.IsZero() {
		r.add(float64(t.Leaves.Last.Unix()))
	}
	if r.high-r.low < 3600 {
		r.low, r.high = r.low-1800, r.high+1800
	}
	low, high := r.low-0.03*(r.high-r.low), r.high
	if seen.high == r.high {
		high += 0.03 * (r.high - r.low)
	}

	if l := t.Limits; l != nil {
		across := func(v float64) []pt { return []pt{{low, v}, {high, v}} }
		p.spans = append(p.spans, span{across(l.Low), across(l.High), zone})
		p.strokes = append(p.strokes,
			stroke{pts: across(l.High), role: warn, width: 1.6, dash: solid, label: "upper limit " + number(l.High, figures(l.High))},
			stroke{pts: across(l.Target), role: quiet, width: 1.4, dash: chain, label: "target " + number(l.Target, figures(l.Target))},
			stroke{pts: across(l.Low), role: warn, width: 1.6, dash: solid, label: "lower limit " + number(l.Low, figures(l.Low))})
	}
	if len(t.Allowed) > 1 {
		s := stroke{role: quiet, width: 2, dash: dotted, label: "allowed loss"}
		for _, x := range t.Allowed {
			s.pts = append(s.pts, at(x.When, x.P))
		}
		p.strokes = append(p.strokes, s)
	}
	p.fan(t.Fit, seen.high)

	charges := slices.Clone(t.Charges)
	slices.SortStableFunc(charges, func(a, b Charge) int { return a.When.Compare(b.When) })
	for i, c := range charges {
		note := fmt.Sprintf("charged to %s", number(c.To, figures(c.To)))
		if c.FromKnown {
			note = fmt.Sprintf("charged %s to %s", number(c.From, figures(c.From)), number(c.To, figures(c.To)))
			if c.To < c.From {
				note = fmt.Sprintf("bled %s to %s", number(c.From, figures(c.From)), number(c.To, figures(c.To)))
			}
			p.strokes = append(p.strokes, stroke{pts: []pt{at(c.When, c.From), at(c.When, c.To)}, role: ink, width: 2.4, dash: solid})
		}
		if len(charges) > mostNotes && i < len(charges)-1 {
			note = "" // a crowd of notes hides the readings
		}
		p.spots = append(p.spots, spot{pt: at(c.When, c.To), shape: wedge, role: ink, note: note})
	}
	whiskers, odd := false, false
	for _, x := range t.Readings {
		s := spot{pt: at(x.When, x.P), u: x.U, shape: dot, role: mark, note: x.Odd}
		if x.Odd != "" {
			s.shape, s.role, odd = diamond, warn, true
		}
		whiskers = whiskers || x.U > 0
		p.spots = append(p.spots, s)
	}
	f := figure{title: t.Title}
	if l := t.Leaves; l != nil && t.Limits != nil {
		p.leaves(*l, t.Limits.Low, low, high)
	}
	for _, part := range []struct {
		holds bool
		words string
	}{
		{whiskers, "Dots: readings, with their uncertainty U (k = 2)."}, {odd, "Hollow: a reading that does not fit."},
		{len(charges) > 0, "Triangles: as left after a charge."}, {len(t.Fit) > 1, "Shaded along the line: 95 %."},
	} {
		if part.holds {
			f.foot += part.words + " "
		}
	}
	f.panels = []panel{p}
	f.x.min, f.x.max = low, high
	f.x.ticks, f.x.title = timeTicks(low, high, 8, place)
	f.fit()
	return f, nil
}

// fan adds the trend with its interval: solid and shaded over the readings, dashed beyond.
func (p *panel) fan(fit []FitPoint, until float64) {
	if len(fit) < 2 {
		return
	}
	var s span
	var past, ahead []pt
	var upper, lower []pt
	for _, x := range fit {
		q := at(x.When, x.P)
		s.low, s.high = append(s.low, at(x.When, x.Low)), append(s.high, at(x.When, x.High))
		if q.x <= until {
			past = append(past, q)
			ahead, upper, lower = []pt{q}, []pt{at(x.When, x.High)}, []pt{at(x.When, x.Low)}
		} else {
			ahead, upper, lower = append(ahead, q), append(upper, at(x.When, x.High)), append(lower, at(x.When, x.Low))
		}
	}
	s.role = spread
	p.spans = append(p.spans, s)
	p.strokes = append(p.strokes, stroke{pts: past, role: mark, width: 2.2, dash: solid})
	if len(ahead) > 1 {
		p.strokes = append(p.strokes,
			stroke{pts: ahead, role: mark, width: 2.2, dash: dashed, label: "forecast"},
			stroke{pts: upper, role: mark, width: 1, dash: dotted}, stroke{pts: lower, role: mark, width: 1, dash: dotted})
	}
}

// leaves marks on the lower limit when the forecast passes it, as far as the figure shows that time.
func (p *panel) leaves(l Leaves, limit, start, edge float64) {
	from := max(float64(l.First.Unix()), start)
	to, words, open := edge, "leaves the limits from "+l.First.Format("2006-01-02")+" on, if at all", true
	if !l.Last.IsZero() {
		to, open = float64(l.Last.Unix()), false
		words = "leaves the limits " + l.First.Format("2006-01-02") + " to " + l.Last.Format("2006-01-02")
	}
	if from >= edge || to <= from {
		return
	}
	p.strokes = append(p.strokes, stroke{pts: []pt{{from, limit}, {to, limit}}, role: warn, width: 6, dash: solid, arrow: open})
	p.spots = append(p.spots, spot{pt: pt{from/2 + to/2, limit}, shape: none, note: words})
}

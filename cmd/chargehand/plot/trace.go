package plot

import "fmt"

// Trace is pressure against strokes or time while fluid is bled, with the fitted break at which the charge is read.
type Trace struct {
	Title    string // the conclusion
	Unit     string // of pressure
	X        string // title of the x axis, such as "strokes" or "time, s"
	Points   []XY
	Slope    []XY // the fitted fall of the gas, up to the break
	Collapse []XY // the fitted fall after it
	Break    *Break
}

// XY is a pressure Y at X.
type XY struct{ X, Y float64 }

// Break is where the fall breaks, what the gauge showed there, and the charge that this points to with its 95 % interval, which
// need not be even about it; Low and High alike for none.
type Break struct{ X, Shown, Charge, Low, High float64 }

func (t Trace) figure() (figure, error) {
	if len(t.Points) == 0 {
		return figure{}, ErrNothing
	}
	p := panel{weight: 1}
	p.y.title = "pressure, " + t.Unit
	curve := func(xy []XY, s stroke) {
		for _, q := range xy {
			s.pts = append(s.pts, pt{q.X, q.Y})
		}
		if len(s.pts) > 1 {
			p.strokes = append(p.strokes, s)
		}
	}
	x := newRange()
	for _, q := range t.Points {
		x.add(q.X)
		p.spots = append(p.spots, spot{pt: pt{q.X, q.Y}, shape: dot, role: mark})
	}
	if t.Break != nil {
		x.add(t.Break.X)
	}
	low, high := x.padded(0.03)
	f := figure{title: t.Title, foot: "Dots: pressures read."}
	curve(t.Slope, stroke{role: mark, width: 2, dash: solid})
	curve(t.Collapse, stroke{role: mark, width: 2, dash: dashed})
	if len(t.Slope) > 1 {
		f.foot += " Solid: fitted fall of the gas."
	}
	if len(t.Collapse) > 1 {
		f.foot += " Dashed: fitted collapse."
	}
	if b := t.Break; b != nil {
		level := func(v float64) []pt { return []pt{{low, v}, {high, v}} }
		words := fmt.Sprintf("charge %s %s", number(b.Charge, figures(b.Charge)), t.Unit)
		if b.High > b.Low {
			p.spans = append(p.spans, span{level(b.Low), level(b.High), spread})
			f.foot += " Shaded: where the charge lies, 95 %."
			words += fmt.Sprintf(" (%s to %s)", number(b.Low, figures(b.Charge)), number(b.High, figures(b.Charge)))
		}
		p.strokes = append(p.strokes, stroke{pts: level(b.Charge), role: warn, width: 1.6, dash: chain, label: words})
		p.spots = append(p.spots, spot{pt: pt{b.X, b.Shown}, shape: square, role: warn, note: "the fall breaks here"})
	}
	f.panels = []panel{p}
	f.x = axis{title: t.X, min: low, max: high, ticks: roundTicks(low, high, 8)}
	f.fit()
	return f, nil
}

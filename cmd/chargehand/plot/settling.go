package plot

import "fmt"

// Settling is pressure against time after a charge, and where it comes to rest.
type Settling struct {
	Title              string // the conclusion
	Unit               string // of pressure
	Points             []XY   // minutes since the valve was closed, pressure
	Approach           []XY   // the fitted approach
	Settled, Low, High float64
	Retest             float64 // minutes: from then on a retest means something; 0 for none
}

func (s Settling) figure() (figure, error) {
	if len(s.Points) == 0 {
		return figure{}, ErrNothing
	}
	p := panel{weight: 1}
	p.y.title = "pressure, " + s.Unit
	x := newRange()
	for _, q := range s.Points {
		x.add(q.X)
		p.spots = append(p.spots, spot{pt: pt{q.X, q.Y}, shape: dot, role: mark})
	}
	line := stroke{role: mark, width: 2, dash: solid}
	for _, q := range s.Approach {
		x.add(q.X)
		line.pts = append(line.pts, pt{q.X, q.Y})
	}
	if s.Retest > 0 {
		x.add(s.Retest)
	}
	low, high := x.padded(0.03)
	if len(line.pts) > 1 {
		p.strokes = append(p.strokes, line)
	}
	level := func(v float64) []pt { return []pt{{low, v}, {high, v}} }
	p.spans = append(p.spans, span{level(s.Low), level(s.High), spread})
	places := figures(s.Settled)
	p.strokes = append(p.strokes, stroke{pts: level(s.Settled), role: ink, width: 1.6, dash: chain, label: fmt.Sprintf("settles at %s %s", number(s.Settled, places), s.Unit)})
	foot := "Dots: pressures read. Line: fitted approach. Shaded: where it settles, 95 %."
	if s.Retest > 0 {
		p.spots = append(p.spots, spot{pt: pt{s.Retest, s.Settled}, shape: square, role: warn, note: "retest from here on"})
	}
	f := figure{title: s.Title, foot: foot, panels: []panel{p}}
	f.x = axis{title: "minutes after the valve was closed", min: low, max: high, ticks: roundTicks(low, high, 8)}
	f.fit()
	return f, nil
}

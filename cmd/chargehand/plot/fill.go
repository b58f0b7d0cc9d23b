package plot

import (
	"fmt"

	"gonum.org/v1/plot/vg"
)

// Fill is pressure and temperature while a unit is charged and settles, in two panels over one time.
type Fill struct {
	Title            string // the conclusion
	PressureUnit     string
	TemperatureUnit  string
	Samples          []Sample // by time
	Bounds           []Bound  // of the pressure: without loss of heat, and without heating
	Stop             float64  // time at which the filling stops, minutes
	HotStop, Settled float64  // pressure at which to stop, and the target once settled
	Shell            bool     // samples hold the shell's temperature
}

// Sample is a state of the fill; time in minutes.
type Sample struct{ Minutes, Pressure, Gas, Shell float64 }

// Bound is a curve that the pressure lies within, named.
type Bound struct {
	Name   string
	Points []Sample // Minutes and Pressure
}

func (x Fill) figure() (figure, error) {
	if len(x.Samples) == 0 {
		return figure{}, ErrNothing
	}
	up := panel{weight: 1.7}
	up.y.title = "gas pressure, " + x.PressureUnit
	down := panel{weight: 1}
	down.y.title = "temperature, " + x.TemperatureUnit
	p := stroke{role: mark, width: 2.6, dash: solid, label: "gas pressure"}
	gas := stroke{role: mark, width: 2.6, dash: solid, label: "gas"}
	shell := stroke{role: ink, width: 2, dash: dashed, label: "shell"}
	for _, s := range x.Samples {
		p.pts = append(p.pts, pt{s.Minutes, s.Pressure})
		gas.pts = append(gas.pts, pt{s.Minutes, s.Gas})
		shell.pts = append(shell.pts, pt{s.Minutes, s.Shell})
	}
	first, last := p.pts[0].x, p.pts[len(p.pts)-1].x
	for i, b := range x.Bounds {
		s := stroke{role: quiet, width: 1.4, dash: [][]vg.Length{dotted, dashed, chain}[i%3], label: b.Name}
		for _, q := range b.Points {
			s.pts = append(s.pts, pt{q.Minutes, q.Pressure})
		}
		if len(s.pts) > 1 {
			up.strokes = append(up.strokes, s)
		}
	}
	if x.Settled > 0 {
		up.strokes = append(up.strokes, stroke{pts: []pt{{first, x.Settled}, {last, x.Settled}}, role: warn, width: 1.6, dash: chain,
			label: fmt.Sprintf("target once settled, %s %s", number(x.Settled, figures(x.Settled)), x.PressureUnit)})
	}
	up.strokes = append(up.strokes, p)
	down.strokes = append(down.strokes, gas)
	if x.Shell {
		down.strokes = append(down.strokes, shell)
	}
	f := figure{title: x.Title}
	if x.HotStop > 0 {
		up.spots = append(up.spots, spot{pt: pt{x.Stop, x.HotStop}, shape: square, role: warn,
			note: fmt.Sprintf("stop here: %s\u00a0%s", number(x.HotStop, figures(x.HotStop)), x.PressureUnit)})
	}
	f.panels = []panel{up, down}
	f.x.title = "time from opening the valve, minutes"
	f.fit()
	f.x.ticks = roundTicks(f.x.min, f.x.max, 8)
	return f, nil
}

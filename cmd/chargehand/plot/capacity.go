package plot

import "fmt"

// Capacity is the fluid that a unit delivers against temperature.
type Capacity struct {
	Title           string // the conclusion
	TemperatureUnit string
	VolumeUnit      string
	Points          []CapacityPoint // by temperature
	Demand          float64         // fluid needed; 0 for none
	DemandWords     string          // such as "5 brake applications"; "" for "demand"
	Timed           string          // names the pace in time, such as "in 20s"; "" for none
	Worst           *Worst
}

// CapacityPoint is the fluid delivered at a temperature: slowly (isothermal), fast (isentropic), and at a pace in time.
type CapacityPoint struct{ Temperature, Slow, Fast, Timed float64 }

// Worst is the point that decides.
type Worst struct{ Temperature, Volume float64 }

func (c Capacity) figure() (figure, error) {
	if len(c.Points) == 0 {
		return figure{}, ErrNothing
	}
	p := panel{weight: 1}
	p.y.title = "fluid delivered, " + c.VolumeUnit
	slow := stroke{role: mark, width: 2.6, dash: solid, label: "slow (isothermal)"}
	fast := stroke{role: mark, width: 2.6, dash: dashed, label: "fast (isentropic)"}
	timed := stroke{role: mark, width: 1.6, dash: solid, label: c.Timed}
	for _, x := range c.Points {
		timed.pts = append(timed.pts, pt{x.Temperature, x.Timed})
		slow.pts = append(slow.pts, pt{x.Temperature, x.Slow})
		fast.pts = append(fast.pts, pt{x.Temperature, x.Fast})
	}
	if first, last := slow.pts[0].x, slow.pts[len(slow.pts)-1].x; c.Demand > 0 {
		words := c.DemandWords
		if words == "" {
			words = "demand"
		}
		p.strokes = append(p.strokes, stroke{pts: []pt{{first, c.Demand}, {last, c.Demand}}, role: warn, width: 2, dash: chain,
			label: fmt.Sprintf("%s: %s %s", words, number(c.Demand, figures(c.Demand)), c.VolumeUnit)})
	}
	p.strokes = append(p.strokes, slow, fast)
	if c.Timed != "" {
		p.strokes = append(p.strokes, timed)
	}
	f := figure{title: c.Title}
	if w := c.Worst; w != nil {
		p.spots = append(p.spots, spot{pt: pt{w.Temperature, w.Volume}, shape: square, role: warn,
			note: fmt.Sprintf("worst: %s\u00a0%s at %s\u00a0%s", number(w.Volume, figures(w.Volume)), c.VolumeUnit, number(w.Temperature, 0), c.TemperatureUnit)})
		f.foot = "Square: the point that decides."
	}
	f.panels = []panel{p}
	f.x.title = "temperature of gas and fluid, " + c.TemperatureUnit
	f.fit()
	f.x.min -= 0.03 * (f.x.max - f.x.min) // room for a mark at the first point; the lines run to the right edge, to their labels
	f.x.ticks = roundTicks(f.x.min, f.x.max, 8)
	return f, nil
}

package calc

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// ChartRow is one row of a manual's chart: at a gas temperature, the charge and its limits, gauge.
type ChartRow struct {
	Temperature       quantity.Temperature
	Low, Charge, High quantity.GaugePressure
}

// Chart is the manual's own table. Between rows it is interpolated in straight lines, which never leave the range of their
// two rows; beyond the first and last row it says nothing.
type Chart struct {
	in   Units // of its errors
	rows []ChartRow
}

// NewChart takes rows in any order. It needs two or more, of different temperatures, each with low <= charge <= high and all
// three not falling with temperature.
func NewChart(in Units, rows []ChartRow) (*Chart, error) {
	if len(rows) < 2 {
		return nil, errors.New("a chart needs two rows or more")
	}
	rs := slices.Clone(rows)
	slices.SortFunc(rs, func(a, b ChartRow) int {
		if a.Temperature < b.Temperature {
			return -1
		}
		return 1
	})
	for i, r := range rs {
		if !(r.Low > 0 && r.Low <= r.Charge && r.Charge <= r.High && !math.IsInf(float64(r.High), 0)) {
			return nil, fmt.Errorf("the chart row at %s has low %s, charge %s, high %s: they must rise", in.Temperature(r.Temperature), in.Pressure(r.Low), in.Pressure(r.Charge), in.Pressure(r.High))
		}
		if i > 0 && !(r.Temperature > rs[i-1].Temperature) {
			return nil, fmt.Errorf("the chart has two rows at %s", in.Temperature(r.Temperature))
		}
		if i > 0 && (r.Low < rs[i-1].Low || r.Charge < rs[i-1].Charge || r.High < rs[i-1].High) {
			return nil, fmt.Errorf("the chart falls from %s to %s; pressure rises with temperature", in.Temperature(rs[i-1].Temperature), in.Temperature(r.Temperature))
		}
	}
	return &Chart{in, rs}, nil
}

// At returns the limits at a gas temperature, or a *quantity.RangeError outside the chart.
func (c *Chart) At(t quantity.Temperature) (low, charge, high quantity.GaugePressure, err error) {
	if len(c.rows) == 0 {
		return 0, 0, 0, errors.New("the chart has no rows")
	}
	first, last := c.rows[0], c.rows[len(c.rows)-1]
	if !(t >= first.Temperature && t <= last.Temperature) {
		name := cmp.Or(c.in.T, "F")
		if _, err := t.InUnit(name); err != nil {
			name = "F"
		}
		in := func(t quantity.Temperature) float64 { v, _ := t.InUnit(name); return v }
		return 0, 0, 0, &quantity.RangeError{Quantity: "gas temperature for the chart", Value: in(t), Low: in(first.Temperature), High: in(last.Temperature), Unit: name}
	}
	i := 1
	for t > c.rows[i].Temperature {
		i++
	}
	a, b := c.rows[i-1], c.rows[i]
	x := quantity.GaugePressure((t - a.Temperature) / (b.Temperature - a.Temperature))
	mix := func(p, q quantity.GaugePressure) quantity.GaugePressure { return p + (q-p)*x }
	return mix(a.Low, b.Low), mix(a.Charge, b.Charge), mix(a.High, b.High), nil
}

// Rows returns the rows, from the coldest.
func (c *Chart) Rows() []ChartRow { return slices.Clone(c.rows) }

// Misfit is a chart row that does not lie on the isochore through the chart as a whole: the usual typing error.
type Misfit struct {
	Row      ChartRow
	Expected quantity.GaugePressure // on the isochore of the median density
}

// Misfits compares each row's charge with the isochore of the median density over all rows, at a reference ambient
// pressure, and points at rows that are off by more than 1 % of the pressure (common practice, no source). Rows outside the
// equation's range are an error.
func (c *Chart) Misfits(m *gas.Model, ambient quantity.Pressure) ([]Misfit, error) {
	var rhos []gas.Density
	for _, r := range c.rows {
		rho, err := m.Density(r.Temperature, r.Charge.Abs(ambient))
		if err != nil {
			return nil, err
		}
		rhos = append(rhos, rho)
	}
	slices.Sort(rhos)
	median := (rhos[(len(rhos)-1)/2] + rhos[len(rhos)/2]) / 2
	var out []Misfit
	for _, r := range c.rows {
		p, err := m.Pressure(r.Temperature, median)
		if err != nil {
			return nil, err
		}
		if want := p.Gauge(ambient); math.Abs(float64(r.Charge-want)) > 0.01*float64(p) {
			out = append(out, Misfit{r, want})
		}
	}
	return out, nil
}

package trace

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/interp"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// path is pressure against specific volume while the gas expands, as cubics in the logarithms, both ways.
type path struct {
	cooled          float64
	p, v            interp.FritschButland // ln p by ln v, ln v by ln p
	lnV, lnP, drift []float64             // nodes; drift is dlnp by the ln of the volume before the bleed, at one volume
	vLow, vHigh     float64               // ln m3/kg
	lowest, highest float64               // Pa, absolute
}

const pathNodes = 110

// leastPressure ends a path: just above an ambient pressure at sea level, below which no fluid side reads.
const leastPressure = 0.11e6 // Pa, absolute

// expansion is the gas from its state before the bleed, over a row of volumes.
type expansion struct {
	gas       *gas.Model
	t         float64
	start     float64   // ln m3/kg, before the bleed
	lnV       []float64 // the row
	hot, cold []float64 // v/cv (dp/dT)_v on the isotherm, and on the isentrope
	coldT     []float64 // of the isentrope
}

// coldest is where the isentrope stops: the gas model ends at 200 K, and gas in a shell hardly gets there.
const coldest = 200.5 // K

func newExpansion(g *gas.Model, t quantity.Temperature, p quantity.Pressure) (*expansion, error) {
	var ends [3]float64
	for i, q := range []quantity.Pressure{min(p*1.25, gas.MaxPressure), leastPressure, p} { // the gauge may read low
		rho, err := g.Density(t, q)
		if err != nil {
			return nil, err
		}
		ends[i] = -math.Log(float64(rho))
	}
	e := &expansion{gas: g, t: float64(t), start: ends[2], lnV: floats.Span(make([]float64, pathNodes), ends[0], ends[1])}
	cooling := func(t, lnV float64) float64 {
		s, err := g.State(quantity.Temperature(t), gas.Density(math.Exp(-lnV)))
		if err != nil { // thinner than the model's pressures reach: nearly an ideal gas of two atoms
			return 0.4
		}
		return math.Exp(lnV) / s.Cv * s.DpDT
	}
	at := e.t
	for i, x := range e.lnV {
		if i > 0 && x > e.start {
			at = max(coldest, at*math.Exp(-e.cold[i-1]*min(x-e.lnV[i-1], x-e.start)))
		}
		e.hot, e.cold, e.coldT = append(e.hot, cooling(e.t, x)), append(e.cold, cooling(at, x)), append(e.coldT, at)
	}
	return e, nil
}

// path returns the way of the gas at a bleed of steady speed: dT/dlnv = -T v/cv (dp/dT)_v + (Tw - T) v/c, with c the volume in
// which the shell's heat follows, cooled/(1 - cooled) of the volume before the bleed. So cooled 0 is the isotherm and 1 the
// isentrope.
//
// Source: the thermal time constant of Otis and Pourmovahed (1985, from memory), written in volume in place of time.
func (e *expansion) path(cooled float64) (*path, error) {
	var vs, ps, drift []float64
	at := e.t
	for i, x := range e.lnV {
		moves := 0.
		if i > 0 && x > e.start && cooled > 0 {
			h := min(x-e.lnV[i-1], x-e.start)
			warming := math.Exp(x-h/2-e.start) * (1 - cooled) / cooled
			part := (at - e.coldT[i-1]) / max(e.t-e.coldT[i-1], 1e-9) // between isentrope and isotherm
			rate := e.cold[i-1] + part*(e.hot[i-1]-e.cold[i-1])
			end := warming * e.t / (warming + rate)
			was := at
			at = max(coldest, end+(at-end)*math.Exp(-(warming+rate)*h))
			if at > coldest { // p goes about as T; the path moves along with its start
				moves = math.Log(was/at) / h
			}
		}
		p, err := e.gas.Pressure(quantity.Temperature(at), gas.Density(math.Exp(-x)))
		if err != nil { // below what the model reaches
			break
		}
		vs, ps, drift = append(vs, x), append(ps, math.Log(float64(p))), append(drift, moves)
	}
	return newPath(cooled, vs, ps, drift)
}

// newPath takes nodes of ln v and ln p.
func newPath(cooled float64, vs, ps, drift []float64) (*path, error) {
	c := &path{cooled: cooled, lnV: vs, lnP: ps, drift: drift}
	n := len(vs)
	back, front := slices.Clone(ps), slices.Clone(vs)
	slices.Reverse(back)
	slices.Reverse(front)
	if err := errors.Join(c.p.Fit(vs, ps), c.v.Fit(back, front)); err != nil {
		return nil, fmt.Errorf("the gas's fall: %w", err)
	}
	c.vLow, c.vHigh, c.lowest, c.highest = vs[0], vs[n-1], math.Exp(ps[n-1]), math.Exp(ps[0])
	return c, nil
}

// from returns the path of a gas that started at another volume, larger by the factor exp(later): the gauge misreads the start.
func (c *path) from(later float64) (*path, error) {
	if c.cooled == 0 || later == 0 {
		return c, nil
	}
	ps := slices.Clone(c.lnP)
	floats.AddScaled(ps, later, c.drift)
	for i := 1; i < len(ps); i++ { // a bend at the start must not turn the fall round
		ps[i] = min(ps[i], ps[i-1]-1e-9)
	}
	return newPath(c.cooled, c.lnV, ps, c.drift)
}

// volume returns the specific volume at an absolute pressure and -dp/dv there; ok is false beyond the path.
func (c *path) volume(p float64) (v, slope float64, ok bool) {
	if !(p >= c.lowest && p <= c.highest) {
		return 0, 0, false
	}
	x := c.v.Predict(math.Log(p))
	v = math.Exp(x)
	return v, -c.p.PredictDerivative(x) * p / v, true
}

// pressure returns the absolute pressure at a specific volume and -dp/dv; beyond the path it follows the ideal gas.
func (c *path) pressure(v float64) (p, slope float64) {
	x := math.Log(v)
	in := min(max(x, c.vLow), c.vHigh)
	p = math.Exp(c.p.Predict(in) + in - x)
	if in != x {
		return p, p / v
	}
	return p, -c.p.PredictDerivative(x) * p / v
}

// line is the specific volume a + b x of the readings before a break, by weighted least squares.
type line struct{ a, b, aa, ab, bb, logDet float64 }

// sums are the weighted sums of readings.
type sums struct{ n, x, xx, y, xy float64 }

func (s *sums) add(x, y, w float64) {
	s.n += w
	s.x += w * x
	s.xx += w * x * x
	s.y += w * y
	s.xy += w * x * y
}

func (s *sums) line() (line, bool) {
	det := s.n*s.xx - s.x*s.x
	if !(det > 1e-12*s.n*s.xx) {
		return line{}, false
	}
	l := line{aa: s.xx / det, ab: -s.x / det, bb: s.n / det, logDet: math.Log(det)}
	l.a, l.b = (s.xx*s.y-s.x*s.xy)/det, (s.n*s.xy-s.x*s.y)/det
	return l, l.b > 0 && l.a > 0
}

// at returns the specific volume at x and its variance.
func (l *line) at(x float64) (v, variance float64) { return l.a + l.b*x, l.aa + 2*l.ab*x + l.bb*x*x }

// node is one choice of the unknowns that the line does not hold, with the line that goes with it.
type node struct {
	above  int     // readings before the break
	cooled float64 // the path
	offset float64 // Pa: what the gauge shows above the gas
	line   line
	path   *path
	chi2   float64 // of the readings before the break
	cost   float64 // -2 ln of the likelihood, without a constant
	volume float64 // ln of the grid's cell and of what the line leaves, for the weight
}

// model is a trace with x from 0 to 1.
type model struct {
	ps      []Pair
	o       Options
	x       []float64
	scale   float64 // of x, in the unit of Drawn
	sigma   float64 // Pa, of one reading
	chance  float64 // root mean square of the residuals by the stated sigma
	expand  *expansion
	still   *path   // the isotherm
	ks      []int   // places of the break worth a look
	gain    float64 // of likelihood when the fall may be bent
	fast    bool
	rubbing bool
}

func newModel(ps []Pair, o Options) (*model, error) {
	m := &model{ps: ps, o: o, sigma: float64(o.U), scale: ps[len(ps)-1].Drawn - ps[0].Drawn}
	for _, p := range ps {
		m.x = append(m.x, (p.Drawn-ps[0].Drawn)/m.scale)
	}
	var err error
	if m.expand, err = newExpansion(o.Gas, o.Temperature, ps[0].Pressure.Abs(o.Ambient)); err != nil {
		return nil, err
	}
	m.still, err = m.expand.path(0)
	return m, err
}

// nodes returns the likelihood of every place of the break for a path and an offset.
func (m *model) nodes(c *path, offset float64, ks []int) []node {
	var out []node
	var s sums
	amb := float64(m.o.Ambient)
	next := 0
	for i, p := range m.ps {
		v, slope, ok := c.volume(float64(p.Pressure) - offset + amb)
		if !ok {
			break
		}
		w := slope / m.sigma
		s.add(m.x[i], v, w*w)
		for next < len(ks) && ks[next] < i+1 {
			next++
		}
		if next == len(ks) || ks[next] != i+1 {
			continue
		}
		l, ok := s.line()
		if !ok {
			continue
		}
		n := node{above: i + 1, cooled: c.cooled, offset: offset, line: l, path: c, volume: -l.logDet / 2}
		for j, q := range m.ps {
			gas, _ := c.pressure(l.a + l.b*m.x[j])
			would := max(gas-amb+offset, m.sigma)
			z := (float64(q.Pressure) - would) / m.sigma
			if j <= i { // of pressures, not of volumes, which say little near zero
				n.chi2 += z * z
				continue
			}
			n.cost += 2*math.Log(would) + max(0, z)*max(0, z)
		}
		n.cost += n.chi2 + float64(i+1)*math.Log(2*math.Pi*m.sigma*m.sigma)
		out = append(out, n)
	}
	return out
}

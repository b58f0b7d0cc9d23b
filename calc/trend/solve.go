package trend

import (
	"errors"
	"math"
	"slices"
	"time"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"example.org/chargehand/calc/quantity"
)

// model is the linear model of a history: columns for the levels, for the rates, and for the gauges in units of their bias and
// of their coefficient of temperature. Time counts from the middle and in halves of the span, which keeps the columns alike in
// size whatever the dates.
type model struct {
	ps       []Point
	segments []string // in order of time
	gauges   []string // those with a bias
	warm     []string // those with a coefficient
	rate     []int    // of each segment, its rate's column
	rates    int
	mid      time.Time
	half     float64 // s
	base     float64 // Pa, taken from all pressures
	unit     float64 // Pa, of all pressures: the mean uncertainty, so that columns are alike in size whatever the unit
	bearing  int
}

func newModel(ps []Point, o Options) (*model, error) {
	m := &model{ps: ps, mid: ps[0].At, rates: 1}
	type seen struct {
		n     int
		first time.Time
		more  bool
	}
	segments := map[string]*seen{}
	for _, p := range ps {
		if p.Bias > 0 && !slices.Contains(m.gauges, p.Gauge) {
			m.gauges = append(m.gauges, p.Gauge)
		}
		if p.Warm != 0 && !slices.Contains(m.warm, p.Gauge) {
			m.warm = append(m.warm, p.Gauge)
		}
		s := segments[p.Segment]
		if s == nil {
			s = &seen{first: p.At}
			segments[p.Segment] = s
			m.segments = append(m.segments, p.Segment)
		}
		s.n++
		s.more = s.more || p.At.After(s.first)
		m.base += float64(p.Pressure) / float64(len(ps))
		m.unit += float64(p.U) / float64(len(ps))
	}
	last := m.segments[len(m.segments)-1]
	for _, s := range segments {
		if s.more && (!o.PerSegment || s == segments[last]) {
			m.bearing += s.n - 1
		}
	}
	if m.bearing == 0 {
		return nil, ErrTooFew
	}
	m.bearing++
	// A segment at one time only has no rate of its own: its level takes up whatever rate it is given.
	m.rate = make([]int, len(m.segments))
	for i, name := range m.segments {
		m.rate[i] = len(m.segments) + m.rates - 1
		if o.PerSegment && segments[name].more && name != last {
			m.rates++
		}
	}
	m.half = ps[len(ps)-1].At.Sub(ps[0].At).Seconds() / 2
	m.mid = ps[0].At.Add(ps[len(ps)-1].At.Sub(ps[0].At) / 2)
	return m, nil
}

func (m *model) x(at time.Time) float64 { return at.Sub(m.mid).Seconds() / m.half }

// fixed is the number of columns that are no gauge's.
func (m *model) fixed() int { return len(m.segments) + m.rates }

// warmest is where the columns of coefficients begin.
func (m *model) warmest() int { return m.fixed() + len(m.gauges) }

func (m *model) columns() int { return m.warmest() + len(m.warm) }

// row writes the row of a point: all columns, not yet weighted.
func (m *model) row(dst []float64, p Point) {
	clear(dst)
	s := slices.Index(m.segments, p.Segment)
	dst[s] = 1
	dst[m.rate[s]] = m.x(p.At)
	if p.Bias > 0 {
		dst[m.fixed()+slices.Index(m.gauges, p.Gauge)] = float64(p.Bias) / m.unit
	}
	if p.Warm != 0 {
		dst[m.warmest()+slices.Index(m.warm, p.Gauge)] = float64(p.Warm) / m.unit
	}
}

// weighted returns rows and pressures over scale times U, and below them a row for each column from held on that holds its
// coefficient to 0 +/- 1.
func (m *model) weighted(scale float64, held int) (*mat.Dense, []float64) {
	n := len(m.ps) + m.columns() - held
	a, y := mat.NewDense(n, m.columns(), nil), make([]float64, n)
	for j := held; j < m.columns(); j++ {
		a.Set(len(m.ps)+j-held, j, 1)
	}
	for i, p := range m.ps {
		w := m.unit / (scale * float64(p.U))
		row := a.RawRowView(i)
		m.row(row, p)
		for j := range row {
			row[j] *= w
		}
		y[i] = (float64(p.Pressure) - m.base) / m.unit * w
	}
	return a, y
}

// scatter returns the chi-squared and its degrees of freedom of the readings about lines of free level for each gauge: it
// depends on no bias, however large.
func (m *model) scatter() (chi2 float64, freedom int) {
	a, y := m.weighted(1, m.warmest())
	for j := range m.columns() { // the size of a column must not decide the rank
		scaleColumn(a, j)
	}
	var svd mat.SVD
	if !svd.Factorize(a, mat.SVDThin) {
		return 0, 0
	}
	var u mat.Dense
	svd.UTo(&u)
	rank := svd.Rank(1e-10)
	v := mat.NewVecDense(len(y), slices.Clone(y))
	for j := range rank {
		col := u.ColView(j)
		v.AddScaledVec(v, -mat.Dot(col, v), col)
	}
	return mat.Dot(v, v), len(y) - rank
}

func scaleColumn(a *mat.Dense, j int) {
	most := 0.0
	rows, _ := a.Dims()
	for i := range rows {
		most = max(most, math.Abs(a.At(i, j)))
	}
	if most == 0 {
		return
	}
	for i := range rows {
		a.Set(i, j, a.At(i, j)/most)
	}
}

// solution of a model: coefficients and covariance in the model's own units, and what each reading says against the rest.
type solution struct {
	b       []float64
	cov     *mat.Dense
	chi2    float64
	left    []float64 // by reading: what is left, in standard deviations of a reading left out (see odd)
	freedom float64   // of Student's t; infinite for the normal distribution
}

var errSingular = errors.New("the readings do not determine a rate; take more, at different times")

// solve finds the coefficients with the readings' own uncertainties times scale.
func (m *model) solve(scale float64) (*solution, error) {
	s, err := leastSquares(m.weighted(scale, m.fixed()))
	if err != nil {
		return nil, err
	}
	s.left = s.left[:len(m.ps)]
	return s, nil
}

// leastSquares solves a b = y, whose rows have unit variance, by QR.
func leastSquares(a *mat.Dense, y []float64) (*solution, error) {
	n, p := a.Dims()
	if n < p {
		return nil, errSingular
	}
	var qr mat.QR
	qr.Factorize(a)
	if !(qr.Cond() < 1e12) {
		return nil, errSingular
	}
	var b mat.VecDense
	if err := qr.SolveVecTo(&b, false, mat.NewVecDense(n, y)); err != nil {
		return nil, errSingular
	}
	var r, inv mat.Dense
	qr.RTo(&r)
	tri := mat.NewTriDense(p, mat.Upper, nil)
	for i := range p {
		for j := i; j < p; j++ {
			tri.SetTri(i, j, r.At(i, j))
		}
	}
	var rinv mat.TriDense
	if err := rinv.InverseTri(tri); err != nil {
		return nil, errSingular
	}
	inv.Mul(&rinv, rinv.T())
	var thin mat.Dense // a R^-1: its rows' squares are the leverages
	thin.Mul(a, &rinv)
	var hat mat.VecDense
	hat.MulVec(a, &b)
	s := &solution{b: b.RawVector().Data, cov: &inv, left: make([]float64, n), freedom: math.Inf(1)}
	for i := range n {
		e := y[i] - hat.AtVec(i)
		s.chi2 += e * e
		leverage := 0.0
		for _, x := range thin.RawRowView(i) {
			leverage += x * x
		}
		if free := 1 - leverage; free > 1e-9 {
			s.left[i] = e / math.Sqrt(free)
		}
	}
	return s, nil
}

func (s *solution) quantile(p float64) float64 { return quantile(s.freedom, p) }

// quantile returns that of Student's t, which with infinite degrees of freedom is the normal distribution.
func quantile(freedom, p float64) float64 {
	if math.IsInf(freedom, 1) {
		return distuv.UnitNormal.Quantile(p)
	}
	return distuv.StudentsT{Sigma: 1, Nu: freedom}.Quantile(p)
}

func (s *solution) cdf(z float64) float64 {
	if math.IsInf(s.freedom, 1) {
		return normal(z)
	}
	return distuv.StudentsT{Sigma: 1, Nu: s.freedom}.CDF(z)
}

// variance of a linear combination c of the coefficients.
func (s *solution) variance(c []float64) float64 {
	v := mat.NewVecDense(len(c), c)
	return max(0, mat.Inner(v, s.cov, v))
}

// chanceScatter is the chance of taking a scatter for more than stated when it is not. At 1 in 5 the intervals of short and of
// long histories cover as they say, with and without odd readings; see the simulation in the tests.
const chanceScatter = 0.2

// widening returns by how much to widen stated uncertainties for a chi-squared, and the degrees of freedom of the result: 1, and
// infinitely many, unless the readings scatter more than is likely; then by the Birge ratio. It never makes them smaller.
//
// Source: R.T. Birge, Phys. Rev. 40, 207 (1932), for the ratio (from memory).
func widening(chi2 float64, freedom int) (scale, student float64) {
	if freedom < 1 || chi2 <= (distuv.ChiSquared{K: float64(freedom)}).Quantile(1-chanceScatter) {
		return 1, math.Inf(1)
	}
	return math.Sqrt(chi2 / float64(freedom)), float64(freedom)
}

// fit does all but the search for odd readings. Points are in order.
func fit(ps []Point, o Options) (*Fit, error) {
	m, err := newModel(ps, o)
	if err != nil {
		return nil, err
	}
	f := &Fit{Standing: standing(m.bearing), Scatter: 1, first: ps[0].At, last: ps[len(ps)-1].At, model: m}
	if f.solved, err = m.solve(1); err != nil {
		return nil, err
	}
	if f.Standing > BudgetOnly {
		if err := f.widen(); err != nil {
			return nil, err
		}
	}
	c := make([]float64, m.columns())
	c[m.fixed()-1] = 1
	perSecond := m.unit / m.half
	f.Rate = Rate(f.solved.b[m.fixed()-1] * perSecond)
	f.U = Rate(math.Sqrt(f.solved.variance(c)) * perSecond)
	q := Rate(f.solved.quantile(0.975))
	f.Low, f.High = f.Rate-q*f.U, f.Rate+q*f.U
	if f.doubted, err = m.doubted(f.Scatter, q); err != nil {
		return nil, err
	}
	for k, name := range m.segments {
		i := slices.IndexFunc(ps, func(p Point) bool { return p.Segment == name })
		level, u := f.line(name, ps[i].At)
		clear(c)
		c[m.rate[k]] = 1
		f.Levels = append(f.Levels, Level{
			Segment: name, Start: ps[i].At, At: level, U: u,
			Rate: Rate(f.solved.b[m.rate[k]] * perSecond), RateU: Rate(math.Sqrt(f.solved.variance(c)) * perSecond),
		})
	}
	return f, nil
}

// widen takes the scatter of the readings into account, that within each gauge or that of all about the line, whichever is more:
// of a history with several gauges and few readings the one sees what the other does not.
func (f *Fit) widen() error {
	m, all := f.model, f.solved.chi2
	within, freedom := m.scatter()
	scale, student := widening(within, freedom)
	// The chi-squared of all less that within gauges is that of the gauges' biases.
	if between := len(m.ps) - m.fixed() - freedom; between > 0 {
		f.GaugesDisagree = (all-within)/(scale*scale) > distuv.ChiSquared{K: float64(between)}.Quantile(0.99)
	}
	if s, t := widening(all, len(m.ps)-m.fixed()); s > scale {
		scale, student = s, t
	}
	var err error
	if scale > 1 {
		f.Scatter = scale
		f.solved, err = m.solve(scale)
	}
	if err == nil {
		f.solved.freedom = student
	}
	return err
}

// doubted returns the upper end of the rate's interval when every bias is doubt times as large, and the gauges' coefficients of
// temperature are only allowed for and not found from the readings: an error of the gas temperature shifts the pressure and the
// gauge's term alike, and when the temperature follows the calendar that is taken for a coefficient, and so for a leak.
func (m *model) doubted(scale float64, q Rate) (Rate, error) {
	d := *m
	d.warm, d.ps = nil, slices.Clone(m.ps)
	for i := range d.ps {
		d.ps[i].Bias *= doubt
		d.ps[i].Warm = 0
	}
	s, err := d.solve(scale)
	if err != nil {
		return 0, err
	}
	k := m.fixed() - 1
	variance := max(0, s.cov.At(k, k))
	for _, g := range m.warm { // the rate that a coefficient of one standard deviation would make
		for i, p := range m.ps {
			d.ps[i].Pressure = 0
			if p.Gauge == g {
				d.ps[i].Pressure = p.Warm
			}
		}
		d.base = 0
		w, err := d.solve(scale)
		if err != nil {
			return 0, err
		}
		variance += w.b[k] * w.b[k]
	}
	return Rate((s.b[k] + float64(q)*math.Sqrt(variance)) * m.unit / m.half), nil
}

// line returns a segment's true corrected pressure at a time, with its standard uncertainty.
func (f *Fit) line(segment string, at time.Time) (p, u quantity.GaugePressure) {
	c := make([]float64, f.model.columns())
	f.model.row(c, Point{At: at, Segment: segment})
	y := 0.0
	for i, b := range f.solved.b {
		y += c[i] * b
	}
	return quantity.GaugePressure(f.model.base + y*f.model.unit), quantity.GaugePressure(math.Sqrt(f.solved.variance(c)) * f.model.unit)
}

// root returns the root of the sum of squares.
func root(us ...quantity.GaugePressure) quantity.GaugePressure {
	s := 0.0
	for _, u := range us {
		s += float64(u) * float64(u)
	}
	return quantity.GaugePressure(math.Sqrt(s))
}

func normal(z float64) float64 { return distuv.UnitNormal.CDF(z) }

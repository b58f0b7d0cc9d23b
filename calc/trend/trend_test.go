package trend

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"gonum.org/v1/gonum/mat"
	"pgregory.net/rapid"

	"example.org/chargehand/calc/quantity"
)

// line returns n points, one a week, of one gauge, falling by so many psi a day.
func line(n int, loss float64) []Point {
	var ps []Point
	for i := range n {
		d := float64(7 * i)
		ps = append(ps, Point{At: after(d * day), Pressure: quantity.GaugePressure((1500 - loss*d) * psi), U: 10 * psi, Gauge: "G-7", Bias: 17 * psi, Segment: "S"})
	}
	return ps
}

func mustFit(t testing.TB, ps []Point, o Options) *Fit {
	t.Helper()
	f, err := New(ps, o)
	if err != nil {
		t.Fatal(err)
	}
	return f
}

// Source: by arithmetic: six weekly readings of 10 psi have Sxx = 857.5 day2, so the rate is known to 10/sqrt(857.5) = 0.3415
// psi a day; stated uncertainties give the normal factor 1.96.
func TestWeeklyReadings(t *testing.T) {
	f := mustFit(t, line(6, 1.5), Options{})
	if got := f.U.PsiPerDay(); math.Abs(got-0.34149) > 1e-5 {
		t.Errorf("standard uncertainty %v psi/day", got)
	}
	if got := f.DetectionLimit().PsiPerDay(); math.Abs(got-1.96*0.34149) > 1e-4 {
		t.Errorf("detection limit %v psi/day", got)
	}
	if got := f.Rate.PsiPerDay(); math.Abs(got+1.5) > 1e-9 || !f.LeakSeen() {
		t.Errorf("rate %v psi/day, seen %v", got, f.LeakSeen())
	}
	if p, ok := f.Exceeds(PerDay(1.5 * psi)); math.Abs(p-0.5) > 1e-9 || !ok {
		t.Errorf("a loss at the allowable exceeds it with %v, %v", p, ok)
	}
	if p, _ := f.Exceeds(0); math.Abs(p-normal(1.5/0.34149)) > 1e-5 {
		t.Errorf("a loss at all: %v", p)
	}
}

// The generalised least squares written with the full covariance matrix, done apart from the code under test.
func TestSameAsFullCovariance(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	ps := invent(t, r, kind{0, 3, 3, 2, 20, false, "drawn"}).points
	m, err := newModel(ps, Options{})
	if err != nil {
		t.Fatal(err)
	}
	s, err := m.solve(1)
	if err != nil {
		t.Fatal(err)
	}
	n, k := len(ps), m.fixed()
	x, v, y := mat.NewDense(n, k, nil), mat.NewSymDense(n, nil), mat.NewVecDense(n, nil)
	row := make([]float64, m.columns())
	for i, p := range ps {
		m.row(row, p)
		x.SetRow(i, row[:k])
		y.SetVec(i, (float64(p.Pressure)-m.base)/m.unit)
		for j := range i + 1 {
			q := ps[j]
			c := 0.0
			if i == j {
				c = float64(p.U * p.U)
			}
			if p.Gauge == q.Gauge {
				c += float64(p.Bias*q.Bias) + float64(p.Warm*q.Warm)
			}
			v.SetSym(i, j, c/m.unit/m.unit)
		}
	}
	var vi, xv, info, cov, b, e, xb mat.Dense
	if err := vi.Inverse(v); err != nil {
		t.Fatal(err)
	}
	xv.Mul(x.T(), &vi)
	info.Mul(&xv, x)
	if err := cov.Inverse(&info); err != nil {
		t.Fatal(err)
	}
	e.Mul(&xv, y)
	b.Mul(&cov, &e)
	for j := range k {
		if math.Abs(b.At(j, 0)-s.b[j]) > 1e-6*math.Sqrt(cov.At(j, j)) || math.Abs(s.cov.At(j, j)/cov.At(j, j)-1) > 1e-8 {
			t.Errorf("coefficient %d: %v +/- %v, want %v +/- %v", j, s.b[j], math.Sqrt(s.cov.At(j, j)), b.At(j, 0), math.Sqrt(cov.At(j, j)))
		}
	}
	// Leaving one reading out, the rest foretells it: residual over its own and the line's uncertainty.
	xb.Mul(x, &b)
	var q, half, fitted mat.Dense
	half.Mul(&vi, x)
	fitted.Product(&half, &cov, half.T())
	q.Sub(&vi, &fitted)
	for i := range n {
		z := 0.0
		for j := range n {
			z += q.At(i, j) * y.AtVec(j)
		}
		if z /= math.Sqrt(q.At(i, i)); math.Abs(z-s.left[i]) > 1e-6 {
			t.Errorf("reading %d lies %v off, want %v", i, s.left[i], z)
		}
	}
}

func TestChangeOfGaugeIsNoLeak(t *testing.T) {
	ps := line(12, 0)
	for i := range ps[6:] {
		ps[6+i].Gauge = "G-8"
		ps[6+i].Pressure -= 50 * psi
	}
	if f := mustFit(t, ps, Options{}); f.LeakSeen() || !(f.High > 0) {
		t.Errorf("a step of 50 psi with the gauge reads as %v to %v psi/day", f.Low.PsiPerDay(), f.High.PsiPerDay())
	}
	for i := range ps {
		ps[i].Gauge = "G-7"
	}
	if f := mustFit(t, ps, Options{}); !f.LeakSeen() {
		t.Error("the same step on one gauge was not seen")
	}
	for i := range ps[6:] {
		ps[6+i].Gauge = "G-8"
		ps[6+i].Pressure -= 400 * psi
	}
	if f := mustFit(t, ps, Options{}); !f.GaugesDisagree {
		t.Error("gauges 450 psi apart agree")
	}
}

func TestJumpsAtCharges(t *testing.T) {
	ps := line(12, 2)
	for i := range ps[6:] {
		ps[6+i].Segment = "T"
		ps[6+i].Pressure += 84 * psi
	}
	f := mustFit(t, ps, Options{})
	if math.Abs(f.Rate.PsiPerDay()+2) > 1e-9 || len(f.Levels) != 2 || math.Abs(float64(f.Levels[1].At/psi)-1500) > 1e-6 || f.Levels[1].Start != ps[6].At {
		t.Errorf("rate %v, levels %+v", f.Rate.PsiPerDay(), f.Levels)
	}
	for i := range ps[6:] {
		ps[6+i].Pressure += quantity.GaugePressure(7*i) * psi
	}
	f = mustFit(t, ps, Options{PerSegment: true})
	if math.Abs(f.Levels[0].Rate.PsiPerDay()+2) > 1e-9 || math.Abs(f.Levels[1].Rate.PsiPerDay()+1) > 1e-9 || f.Rate != f.Levels[1].Rate {
		t.Errorf("levels %+v", f.Levels)
	}
	if f.Standing != Warning { // six readings of twelve
		t.Errorf("%v", f.Standing)
	}
	ps[3].Segment = "a reading between two charges" // it stands alone
	g := mustFit(t, ps, Options{PerSegment: true})
	if math.Abs(float64(g.Rate-f.Rate)) > 1e-9*math.Abs(float64(f.Rate)) || len(g.Levels) != 3 {
		t.Errorf("levels %+v", g.Levels)
	}
}

// Floors on readings: common practice, no source.
func TestStanding(t *testing.T) {
	for n, want := range map[int]Standing{2: BudgetOnly, 3: BudgetOnly, 4: Shown, 5: Shown, 6: Warning, 7: Warning, 8: Dated, 9: Dated} {
		f := mustFit(t, line(n, 20), Options{})
		_, ok := f.Exceeds(0)
		_, err := f.Forecast(1000*psi, 2000*psi)
		if f.Standing != want || f.LeakSeen() != (want >= Warning) || ok != (want >= Shown) || (err == nil) != (want >= Dated) {
			t.Errorf("%d readings: %v, leak %v, claim %v, forecast %v", n, f.Standing, f.LeakSeen(), ok, err)
		}
		if err != nil && !errors.Is(err, ErrNoForecast) {
			t.Error(err)
		}
	}
	// Two readings of one gauge: their own uncertainties over the time, the bias cancels; of two gauges it stays.
	ps := line(2, 5)
	if u := mustFit(t, ps, Options{}).U.PsiPerDay(); math.Abs(u-math.Sqrt(200)/7) > 1e-9 {
		t.Errorf("one gauge: %v psi/day", u)
	}
	ps[1].Gauge = "G-8"
	if u := mustFit(t, ps, Options{}).U.PsiPerDay(); math.Abs(u-math.Sqrt(2*(100+289))/7) > 1e-9 {
		t.Errorf("two gauges: %v psi/day", u)
	}
	// Eight readings in four segments bear like five.
	ps = line(8, 5)
	for i := range ps {
		ps[i].Segment = fmt.Sprint(i / 2)
	}
	if f := mustFit(t, ps, Options{}); f.Standing != Shown {
		t.Errorf("%v", f.Standing)
	}
}

func TestOddReadingsArePointedAtAndKept(t *testing.T) {
	ps := line(12, 1)
	r := rand.New(rand.NewPCG(1, 2))
	for i := range ps {
		ps[i].Pressure += quantity.GaugePressure(5 * psi * r.NormFloat64())
	}
	if f := mustFit(t, ps, Options{}); len(f.Odd) > 0 || f.Without != nil {
		t.Errorf("pointed at %+v", f.Odd)
	}
	ps[3].Pressure += 120 * psi
	ps[4].Pressure += 110 * psi // two that would hide each other
	f := mustFit(t, ps, Options{})
	if len(f.Odd) != 2 || f.Odd[0].Point != ps[3] || f.Odd[1].Point != ps[4] || f.Odd[0].By < 5 {
		t.Fatalf("pointed at %+v", f.Odd)
	}
	if !(f.Scatter > 2) || f.Without.Scatter != 1 || f.Without.U >= f.U || f.model.bearing != 12 {
		t.Errorf("scatter %v, without %v; %v and %v psi/day", f.Scatter, f.Without.Scatter, f.U.PsiPerDay(), f.Without.U.PsiPerDay())
	}
}

func TestRobustSlope(t *testing.T) {
	ps := line(12, 1)
	if f := mustFit(t, ps, Options{}); f.RobustDisagrees || math.Abs(f.Robust.Slope.PsiPerDay()+1) > 1e-9 || f.Robust.Pairs != 66 {
		t.Errorf("%+v", f.Robust)
	}
	ps[11].Pressure += 200 * psi
	f := mustFit(t, ps, Options{})
	if !f.RobustDisagrees || math.Abs(f.Robust.Slope.PsiPerDay()+1) > 0.01 || f.Rate.PsiPerDay() < -0.5 {
		t.Errorf("a hot last reading: %v psi/day, robust %+v", f.Rate.PsiPerDay(), f.Robust)
	}
	for i := range ps { // a gauge used once has no slope
		ps[i].Gauge = fmt.Sprint("G-", i)
	}
	if f := mustFit(t, ps, Options{}); f.Robust != nil || f.RobustDisagrees {
		t.Errorf("%+v", f.Robust)
	}
	// Source: Sen's interval from Kendall's variance, by arithmetic: 8 readings have N = 28 slopes and V = 8 x 7 x 21/18 = 65.33, so
	// z sqrt(V) = 15.84 and the interval runs from the 6th slope to the one after the 22nd.
	if got, all := theilSen(scattered()), slopes(scattered()); far(got.Low, all[5]) || far(got.High, all[22]) || far(got.Slope, (all[13]+all[14])/2) {
		t.Errorf("%+v of %v", got, all)
	}
}

func scattered() []Point {
	ps := line(8, 1)
	for i, e := range []quantity.GaugePressure{3, -8, 11, 2, -5, 7, -13, 4} {
		ps[i].Pressure += e * psi
	}
	return ps
}

func far(a, b Rate) bool { return math.Abs(float64(a-b)) > 1e-9*math.Abs(float64(b)) }

// slopes between all pairs, in order of size.
func slopes(ps []Point) []Rate {
	var all []Rate
	for i, p := range ps {
		for _, q := range ps[:i] {
			all = append(all, Rate(float64(p.Pressure-q.Pressure)/p.At.Sub(q.At).Seconds()))
		}
	}
	slices.Sort(all)
	return all
}

func TestForecastHasTwoEndsOrNone(t *testing.T) {
	f := mustFit(t, line(12, 3), Options{})
	d, err := f.Forecast(1100*psi, 1600*psi)
	if err != nil || !d.NotBefore.Before(d.Likely) || !d.Likely.Before(d.By) || d.Limit != 1100*psi || d.Out {
		t.Fatalf("%+v, %v", d, err)
	}
	if likely := d.Likely.Sub(start).Hours() / 24; math.Abs(likely-400./3) > 0.01 {
		t.Errorf("leaves after %v days, want %v", likely, 400./3)
	}
	f = mustFit(t, line(12, 0.05), Options{})
	if d, err = f.Forecast(1300*psi, 1600*psi); err != nil || !d.By.IsZero() || !d.NotBefore.After(f.last) {
		t.Errorf("a flat line: %+v, %v", d, err)
	}
	if d, err = f.Forecast(1510*psi, 1600*psi); err != nil || !d.Out || !d.NotBefore.Equal(f.last) {
		t.Errorf("out already: %+v, %v", d, err)
	}
	if d, err = mustFit(t, line(12, -3), Options{}).Forecast(1300*psi, 1900*psi); err != nil || d.Limit != 1900*psi || d.By.IsZero() {
		t.Errorf("rising: %+v, %v", d, err)
	}
	for _, bad := range [][2]quantity.GaugePressure{{1, 1}, {2, 1}, {quantity.GaugePressure(math.NaN()), 5}, {0, quantity.GaugePressure(math.Inf(1))}} {
		if d, err := f.Forecast(bad[0], bad[1]); err == nil {
			t.Errorf("limits %v gave %+v", bad, d)
		}
	}
}

func TestBadInputIsNamed(t *testing.T) {
	nan := quantity.GaugePressure(math.NaN())
	for name, c := range map[string]struct {
		spoil func([]Point) []Point
		want  string
	}{
		"none":          {func([]Point) []Point { return nil }, "no readings"},
		"one":           {func(ps []Point) []Point { return ps[:1] }, "no two readings"},
		"equal times":   {func(ps []Point) []Point { ps[1].At = ps[0].At; return ps[:2] }, "no two readings"},
		"own segments":  {func(ps []Point) []Point { ps[1].Segment = "T"; return ps[:2] }, "no two readings"},
		"no pressure":   {func(ps []Point) []Point { ps[2].Pressure = nan; return ps }, "NaN"},
		"no error":      {func(ps []Point) []Point { ps[2].U = 0; return ps }, "uncertainty 0 Pa"},
		"infinite":      {func(ps []Point) []Point { ps[2].U = quantity.GaugePressure(math.Inf(1)); return ps }, "+Inf"},
		"negative bias": {func(ps []Point) []Point { ps[2].Bias = -3; return ps }, "bias -3 Pa"},
		"warm":          {func(ps []Point) []Point { ps[2].Warm = nan; return ps }, "NaN"},
		"centuries":     {func(ps []Point) []Point { ps[2].At = time.Time{}; return ps }, "0001-01-01"},
	} {
		if f, err := New(c.spoil(line(5, 1)), Options{}); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %+v, %v; want %q", name, f, err, c.want)
		}
	}
	ps := line(5, 1)
	ps[4].Segment = "T"
	if _, err := New(ps, Options{PerSegment: true}); !errors.Is(err, ErrTooFew) {
		t.Errorf("a segment of one reading has a rate of its own: %v", err)
	}
}

// drawn is a history of any shape.
func drawn(rt *rapid.T) []Point {
	n := rapid.IntRange(2, 14).Draw(rt, "n")
	var ps []Point
	for range n {
		p := Point{
			At:       after(float64(rapid.IntRange(0, 200*day).Draw(rt, "at"))),
			Pressure: quantity.GaugePressure(rapid.Float64Range(1e6, 2e7).Draw(rt, "p")), U: quantity.GaugePressure(rapid.Float64Range(1e4, 2e5).Draw(rt, "u")),
			Gauge: rapid.SampledFrom([]string{"A", "B", "C"}).Draw(rt, "gauge"), Bias: quantity.GaugePressure(rapid.SampledFrom([]float64{0, 1e5, 2e5}).Draw(rt, "bias")),
			Warm: quantity.GaugePressure(rapid.SampledFrom([]float64{0, -5e4, 8e4}).Draw(rt, "warm")), Segment: "S",
		}
		if p.At.After(after(100 * day)) {
			p.Segment = rapid.SampledFrom([]string{"S", "T"}).Draw(rt, "segment")
		}
		ps = append(ps, p)
	}
	return ps
}

func finite(t interface{ Errorf(string, ...any) }, f *Fit) {
	for _, v := range []Rate{f.Rate, f.U, f.Low, f.High, Rate(f.Scatter), f.DetectionLimit(), f.LossBelow()} {
		if math.IsNaN(float64(v)) || math.IsInf(float64(v), 0) {
			t.Errorf("%+v", f)
		}
	}
	if !(f.Low < f.Rate && f.Rate < f.High && f.Scatter >= 1) {
		t.Errorf("rate %v in %v to %v", f.Rate, f.Low, f.High)
	}
}

// Later dates, a higher pressure and another unit of pressure change nothing but that; neither does the order of the readings.
func TestEquivariance(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		ps := drawn(rt)
		f, err := New(ps, Options{})
		if errors.Is(err, ErrTooFew) || errors.Is(err, errSingular) {
			return
		}
		if err != nil {
			rt.Fatal(err)
		}
		finite(rt, f)
		if g, err := New(rapid.Permutation(ps).Draw(rt, "order"), Options{}); err != nil || !reflect.DeepEqual(*g, *f) {
			rt.Errorf("in another order %+v, %v; was %+v", g, err, f)
		}
		k := quantity.GaugePressure(rapid.Float64Range(0.01, 10).Draw(rt, "scale"))
		moved := make([]Point, len(ps))
		for i, p := range ps {
			moved[i] = Point{p.At.Add(1000 * time.Hour), k*p.Pressure + 3e5, k * p.U, p.Gauge, k * p.Bias, k * p.Warm, p.Segment}
		}
		g, err := New(moved, Options{})
		if err != nil {
			rt.Fatal(err)
		}
		near := func(a, b Rate) bool { return math.Abs(float64(a-b)) <= 1e-6*float64(g.U) }
		if !near(g.Rate, f.Rate*Rate(k)) || !near(g.Low, f.Low*Rate(k)) || !near(g.High, f.High*Rate(k)) || len(g.Odd) != len(f.Odd) {
			rt.Errorf("scaled by %v: %v in %v to %v, was %v in %v to %v", k, g.Rate, g.Low, g.High, f.Rate, f.Low, f.High)
		}
	})
}

// Whatever is written, an answer is a number or an error says why not.
func TestNothingThatIsNoNumberComesOut(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		wild := func(name string, usual float64) quantity.GaugePressure {
			return quantity.GaugePressure(rapid.OneOf(rapid.Just(usual), rapid.Just(usual), rapid.Just(usual), rapid.Just(usual), rapid.Float64(),
				rapid.SampledFrom([]float64{0, math.NaN(), math.Inf(1), -1, 1e308, 1e9, 1e-3})).Draw(rt, name))
		}
		ps := drawn(rt)
		i := rapid.IntRange(0, len(ps)-1).Draw(rt, "which")
		ps[i].Pressure, ps[i].U, ps[i].Bias, ps[i].Warm = wild("pressure", 1e7), wild("u", 5e4), wild("b", 1e5), wild("w", 0)
		f, err := New(ps, Options{PerSegment: rapid.Bool().Draw(rt, "per segment")})
		if err != nil {
			return
		}
		finite(rt, f)
		if p, _ := f.Exceeds(Rate(wild("allowable", 0.1))); !(p >= 0 && p <= 1) {
			rt.Errorf("probability %v", p)
		}
		if d, err := f.Forecast(wild("low", 9e6), wild("high", 1.2e7)); err == nil && d.NotBefore.Before(f.last) {
			rt.Errorf("%+v", d)
		}
	})
}

func BenchmarkTrend(b *testing.B) {
	for _, n := range []int{10, 200, 500} {
		b.Run(fmt.Sprint(n), func(b *testing.B) { benchmarkTrend(b, n) })
	}
}

func benchmarkTrend(b *testing.B, n int) {
	var ps []Point
	for i := range n {
		d := float64(3 * i)
		ps = append(ps, Point{At: after(d * day), Pressure: quantity.GaugePressure((1500 - 0.5*d + 7*math.Sin(1e3*d)) * psi), U: 10 * psi,
			Gauge: fmt.Sprint("G", i/10%3), Bias: 17 * psi, Warm: quantity.GaugePressure(i%7-3) * psi, Segment: fmt.Sprint("S", i/100)})
	}
	for b.Loop() {
		if _, err := New(ps, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}

package trend

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Source: MIL-DTL-5498G, 4.6.6.1, allowable leaks of free gas by size of unit; what they mean in psi a day and percent of the gas
// a day at 1,000 psig and 20 degC was computed from them apart from this program, with the equation of Span et al. (2000).
func TestFreeGas(t *testing.T) {
	for _, c := range []struct{ in3, perHour, psiPerDay, percent float64 }{
		{25, 5, 4.3, 0.42}, {50, 5, 2.2, 0.21}, {50, 10, 4.3, 0.42}, {100, 10, 2.2, 0.21}, {200, 10, 1.1, 0.11}, {200, 20, 2.2, 0.21}, {400, 20, 1.1, 0.11},
	} {
		charge := Charge{gas.Nitrogen(), quantity.Volume(c.in3 * 16.387064e-6), 293.15, quantity.GaugePressure(1000 * psi).Abs(quantity.StandardAtmosphere)}
		r, err := charge.Rate(FreeGas(c.perHour))
		if err != nil || math.Abs(-r.PsiPerDay()-c.psiPerDay) > 0.05 {
			t.Errorf("%v mL/h from %v in3: %v psi/day, %v; want %v", c.perHour, c.in3, -r.PsiPerDay(), err, c.psiPerDay)
		}
		rho, _ := gas.Nitrogen().Density(charge.Temperature, charge.Pressure)
		free, _ := gas.Nitrogen().Density(FreeTemperature, FreePressure)
		if got := 100 * 24 * c.perHour * 1e-6 * float64(free) / (float64(charge.Volume) * float64(rho)); math.Abs(got-c.percent) > 0.005 {
			t.Errorf("%v mL/h from %v in3: %.4f %% of the gas a day, want %v", c.perHour, c.in3, got, c.percent)
		}
		if back, err := charge.FreeGas(r); err != nil || math.Abs(float64(back)/c.perHour-1) > 1e-12 {
			t.Errorf("back to %v mL/h, %v", back, err)
		}
		charge.Pressure = quantity.GaugePressure(2000 * psi).Abs(quantity.StandardAtmosphere)
		if high, err := charge.Rate(FreeGas(c.perHour)); err != nil || math.Abs(float64(high/r)-1.08) > 0.005 {
			t.Errorf("at 2,000 psig the same flow costs %v times as much, %v; want 1.08", high/r, err)
		}
	}
	good := Charge{gas.Nitrogen(), 1e-3, 293.15, 7e6}
	for _, spoil := range []func(*Charge){func(c *Charge) { c.Gas = nil }, func(c *Charge) { c.Volume = 0 }, func(c *Charge) { c.Volume = quantity.Volume(math.NaN()) }, func(c *Charge) { c.Temperature = 20 }, func(c *Charge) { c.Pressure = 1 }} {
		bad := good
		spoil(&bad)
		if r, err := bad.Rate(5); err == nil {
			t.Errorf("%+v: %v", bad, r)
		}
	}
}

// holdAt is a hold test on a grade 3A gauge, 5 psi a division, of so many hours, with the true loss in psi.
func holdAt(t *testing.T, hours, loss float64, from, to quantity.Temperature) (first, last Reading) {
	t.Helper()
	g := dial(t, "G-7", "ASME 3A", 5*psi)
	at := func(p float64, temperature quantity.Temperature) quantity.GaugePressure {
		q, err := calc.Correct(gas.Nitrogen(), quantity.Pressure(p*psi)+quantity.StandardAtmosphere, 293.15, temperature)
		if err != nil {
			t.Fatal(err)
		}
		return q.Gauge(quantity.StandardAtmosphere)
	}
	return reading(g, start, at(1500, from), from), reading(g, after(hours*3600), at(1500-loss, to), to)
}

func TestHold(t *testing.T) {
	limit := HoldLimit{60 * psi, 24 * time.Hour}
	for _, c := range []struct {
		loss float64
		want calc.Class
	}{{0, calc.Pass}, {25, calc.Pass}, {55, calc.ConditionalPass}, {65, calc.ConditionalFail}, {100, calc.Fail}} {
		first, last := holdAt(t, 24, c.loss, 303.15, 283.15)
		h, err := NewHold(sheet(), last, first, limit, calc.GuardBanded()) // in any order
		if err != nil || h.Class != c.want || math.Abs(float64(h.Drop/psi)-c.loss) > 0.01 || math.Abs(h.Rate.PsiPerDay()+c.loss) > 0.01 {
			t.Errorf("loss of %v psi: %v, drop %v +/- %v, %v; want %v", c.loss, h.Class, h.Drop/psi, h.U/psi, err, c.want)
		}
		if (h.Exceeds > 0.5) != (c.loss > 60) {
			t.Errorf("loss of %v psi exceeds the limit with %v", c.loss, h.Exceeds)
		}
	}
}

// The gauge's class cancels: at one temperature the dial, its repeatability and the gas temperature remain. Source: by arithmetic
// by JCGM 100: dial 2.5/sqrt(3), repeatability 7.5/5/sqrt(3), temperature 1 K x 6.415 psi/K /sqrt(3) (Span et al. 2000), ambient 1
// hPa/sqrt(3), and 0.01 % twice over of a density that the pressure follows to 1.03: 0.22 psi, each twice.
func TestHoldBudget(t *testing.T) {
	first, last := holdAt(t, 24, 0, 293.15, 293.15)
	h, err := NewHold(sheet(), first, last, HoldLimit{60 * psi, 24 * time.Hour}, calc.GuardBanded())
	if err != nil {
		t.Fatal(err)
	}
	want := 2 * math.Sqrt2 * math.Sqrt((2.5*2.5+1.5*1.5+6.415*6.415+0.0145*0.0145)/3+0.22*0.22)
	if got := float64(h.U / psi); math.Abs(got-want) > 0.03 {
		t.Errorf("U = %v psi, want %v; %+v", got, want, h.Budget)
	}
	// The whole class would be 2 x sqrt(2) x 7.5/sqrt(3), 12 psi, more.
	first, last = holdAt(t, 24, 0, 313.15, 273.15)
	far, err := NewHold(sheet(), first, last, HoldLimit{200 * psi, 24 * time.Hour}, calc.GuardBanded())
	if err != nil || far.U < h.U+20*psi {
		t.Errorf("40 K apart U = %v psi, %v: the gauge's own temperature does not cancel", far.U/psi, err)
	}
}

func TestHoldRefuses(t *testing.T) {
	limit := HoldLimit{60 * psi, 24 * time.Hour}
	first, last := holdAt(t, 24, 0, 293.15, 293.15)
	other := last
	other.Gauge.Name = "G-8"
	if h, err := NewHold(sheet(), first, other, limit, calc.GuardBanded()); !errors.Is(err, ErrOtherGauge) {
		t.Errorf("two gauges: %+v, %v", h, err)
	}
	other = last
	other.Reading.Relieved = calc.Relief{}
	var not *NotAssessableError
	if h, err := NewHold(sheet(), first, other, limit, calc.GuardBanded()); !errors.As(err, &not) || len(not.Why) == 0 {
		t.Errorf("not relieved: %+v, %v", h, err)
	}
	soon, late := holdAt(t, 2, 0, 293.15, 293.15)
	var short *TooShortError
	if h, err := NewHold(sheet(), soon, late, limit, calc.GuardBanded()); !errors.As(err, &short) {
		t.Fatalf("two hours: %+v, %v", h, err)
	}
	if h, err := NewHold(sheet(), soon, late, limit, calc.SimpleAcceptance()); !errors.As(err, &short) {
		t.Errorf("two hours without a guard band: %+v, %v", h, err)
	}
	soon, late = holdAt(t, short.Needed.Hours(), 0, 293.15, 293.15)
	if h, err := NewHold(sheet(), soon, late, limit, calc.GuardBanded()); err != nil || h.Class != calc.Pass {
		t.Errorf("after the %s it asked for: %v, %v", short.Needed, h.Class, err)
	}
	soon, late = holdAt(t, 2, 100, 293.15, 293.15)
	if h, err := NewHold(sheet(), soon, late, limit, calc.GuardBanded()); err != nil || h.Class != calc.Fail {
		t.Errorf("100 psi lost in two hours: %v, %v; a failure needs no more time", h.Class, err)
	}
	soon, late = holdAt(t, 24, -40, 293.15, 293.15)
	var rose *RoseError
	if h, err := NewHold(sheet(), soon, late, limit, calc.GuardBanded()); !errors.As(err, &rose) {
		t.Errorf("rose by 40 psi: %+v, %v", h, err)
	}
	for _, bad := range []HoldLimit{{}, {-psi, time.Hour}, {quantity.GaugePressure(math.NaN()), time.Hour}, {psi, 0}} {
		if h, err := NewHold(sheet(), first, last, bad, calc.GuardBanded()); err == nil {
			t.Errorf("limit %v: %+v", bad, h)
		}
	}
	if h, err := NewHold(sheet(), first, first, limit, calc.GuardBanded()); err == nil {
		t.Errorf("no time: %+v", h)
	}
}

// The truth is invented: gauges anywhere in their class, sticking by a fifth of it, temperatures up to 1 K wrong.
func TestHoldCoverage(t *testing.T) {
	const n = 500
	r := rand.New(rand.NewPCG(14, 500))
	held := 0
	for range n {
		sides := func() float64 { return 2*r.Float64() - 1 }
		loss := 60 * r.Float64()
		first, last := holdAt(t, 24, loss, 293.15+quantity.Temperature(15*sides()), 293.15+quantity.Temperature(15*sides()))
		bias, coefficient := 7.5*sides(), 0.0004*3000*sides()
		for _, x := range []*Reading{&first, &last} {
			x.Reading.Gauge += quantity.GaugePressure(bias+coefficient*float64(x.Reading.Temperature-293.15)+1.5*sides()) * psi
			x.Reading.Gauge = 5 * psi * quantity.GaugePressure(math.Round(float64(x.Reading.Gauge/(5*psi))))
			x.Reading.Temperature += quantity.Temperature(sides())
		}
		h, err := NewHold(sheet(), first, last, HoldLimit{500 * psi, 24 * time.Hour}, calc.GuardBanded())
		var rose *RoseError
		if err != nil && !errors.As(err, &rose) {
			t.Fatal(err)
		}
		if math.Abs(float64(h.Drop/psi)-loss) <= float64(h.U/psi) {
			held++
		}
	}
	t.Logf("%d of %d differences lie within U (k = 2, 95.4 %% when normal)", held, n)
	if held < n*93/100 || held > n*99/100 {
		t.Errorf("%d of %d", held, n)
	}
}

// With a chart, which holds at any temperature, readings are still brought to one.
func TestPointWithChart(t *testing.T) {
	l := sheet()
	chart, err := calc.NewChart(calc.Units{}, []calc.ChartRow{{Temperature: 253.15, Low: 1200 * psi, Charge: 1242 * psi, High: 1290 * psi}, {Temperature: 313.15, Low: 1580 * psi, Charge: 1628 * psi, High: 1680 * psi}})
	if err != nil {
		t.Fatal(err)
	}
	l.Chart, l.Charge, l.Reference = chart, 0, 0
	// Source: the isochore of nitrogen set to 1,500 psig at 20 degC: 1,242.3 psig at -20 degC (Span et al. 2000, evaluated apart).
	p, err := reading(dial(t, "G-7", "ASME A", 10*psi), start, 1242.3*psi, 253.15).Point(l, "S")
	if err != nil || math.Abs(float64(p.Pressure/psi)-1500) > 0.1 || !(p.Warm < 0) || !(p.Bias > 17*psi) {
		t.Errorf("%+v, %v", p, err)
	}
	p, err = reading(dial(t, "G-7", "ASME A", 10*psi), start, 1700*psi, 325).Point(l, "S") // outside the chart a rate still has a meaning
	if err != nil || p.Pressure > 1550*psi {
		t.Errorf("%+v, %v", p, err)
	}
}

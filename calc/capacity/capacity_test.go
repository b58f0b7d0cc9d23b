package capacity

import (
	"errors"
	"math"
	"testing"
	"time"

	"pgregory.net/rapid"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

const (
	psi   = quantity.GaugePressure(6894.757293168361)
	inch3 = quantity.Volume(16.387064e-6)
	atm   = quantity.StandardAtmosphere
)

func celsius(t float64) quantity.Temperature { return quantity.Temperature(t + 273.15) }

func brake() Unit {
	return Unit{Gas: gas.Nitrogen(), Volume: 50 * inch3, Tolerance: inch3, System: 3000 * psi, LeastUseful: 1500 * psi, Ambient: atm}
}

func deliver(t interface{ Fatal(...any) }, u Unit, c Charge, at quantity.Temperature, p Pace) Delivery {
	d, err := u.Deliver(c, at, p)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

func pace(p Pace, err error) Pace {
	if err != nil {
		panic(err)
	}
	return p
}

// Source: domain notes 5.4, evaluated from Span et al. (2000): at 20 C from 1,000 to 3,000 psig the gas shrinks to 0.3577 of its
// volume, so 0.6423 of it is fluid.
func TestStoredFluid(t *testing.T) {
	u := brake()
	u.LeastUseful = 500 * psi
	c := Charge{1000 * psi, celsius(20), atm}
	d := deliver(t, u, c, celsius(20), Slow())
	if got := float64(d.Stored / u.Volume); math.Abs(got-0.6423) > 0.00005 {
		t.Errorf("stored %.5f of the gas volume, want 0.6423", got)
	}
	// The charge is above the least useful pressure, so all that is stored comes out.
	if !d.Stopped || math.Abs(float64(d.Volume/d.Stored)-1) > 1e-12 || math.Abs(float64(d.EndPressure/psi)-1000) > 1e-6 {
		t.Errorf("delivered %v of %v, stopped %v at %v psi", d.Volume, d.Stored, d.Stopped, d.EndPressure/psi)
	}
}

// Source: definition. With p v constant, which nitrogen keeps within 1 % to 0.7 MPa at 20 C, V p0 (1/p2 - 1/p1) is delivered.
func TestThinGasIsBoylesLaw(t *testing.T) {
	u := Unit{Gas: gas.Nitrogen(), Volume: 1e-3, System: 6e5, LeastUseful: 3e5, Ambient: 1e5}
	d := deliver(t, u, Charge{2e5, celsius(20), 1e5}, celsius(20), Slow())
	if want := 1e-3 * 3e5 * (1/4e5 - 1/7e5); math.Abs(float64(d.Volume)/want-1) > 0.01 || d.Stopped {
		t.Errorf("delivered %v m3, want %v; stopped %v", d.Volume, want, d.Stopped)
	}
	// And fast, with the exponent 1.4: the gas at system pressure expands by (p1/p2)^(1/1.4).
	d = deliver(t, u, Charge{2e5, celsius(20), 1e5}, celsius(20), Fast())
	if want := 1e-3 * 3e5 / 7e5 * (math.Pow(7.0/4, 1/1.4) - 1); math.Abs(float64(d.Volume)/want-1) > 0.01 {
		t.Errorf("delivered %v m3 fast, want %v", d.Volume, want)
	}
}

// Source: domain notes 5.5: isentropic exponents d ln p / d ln rho, from a fast draw of a hundredth of the pressure.
func TestFastFollowsTheExponent(t *testing.T) {
	for _, x := range []struct{ psig, celsius, n float64 }{
		{1000, 20, 1.54}, {1500, 20, 1.63}, {3000, 20, 1.98}, {5000, 20, 2.52}, {3000, -20, 2.22}, {3000, 60, 1.86},
	} {
		p := quantity.GaugePressure(x.psig) * psi
		u := Unit{Gas: gas.Nitrogen(), Volume: 1e-3, System: p, LeastUseful: p - p/1000, Ambient: atm}
		path, err := u.path(celsius(x.celsius))
		if err != nil {
			t.Fatal(err)
		}
		end, err := path.fast(0)
		if err != nil {
			t.Fatal(err)
		}
		n := math.Log(float64(path.full.P/end.P)) / math.Log(float64(path.full.Rho/end.Rho))
		if math.Abs(n-x.n) > 0.0055 {
			t.Errorf("%v psig, %v C: %.4f, want %v", x.psig, x.celsius, n, x.n)
		}
	}
}

// Source: the limits of the equation of Pace: much slower than tau is isothermal, much faster isentropic.
func TestLimitsOfTheTimeConstant(t *testing.T) {
	u := brake()
	for _, c := range []Charge{{1000 * psi, celsius(20), atm}, {1800 * psi, celsius(20), atm}} {
		for _, T := range []float64{-40, 70} {
			slow, fast := deliver(t, u, c, celsius(T), Slow()), deliver(t, u, c, celsius(T), Fast())
			for name, x := range map[string]struct {
				pace Pace
				want Delivery
			}{
				"short tau":      {pace(AtFlow(2*quantity.VolumeRate(inch3), time.Millisecond)), slow},
				"long tau":       {pace(AtFlow(2*quantity.VolumeRate(inch3), 1000*time.Hour)), fast},
				"in a day":       {pace(Within(24*time.Hour, 10*time.Second)), slow},
				"in a month":     {pace(Within(1000*time.Hour, time.Nanosecond)), slow},
				"in a moment":    {pace(Within(time.Nanosecond, 1000*time.Hour)), fast},
				"in a hundredth": {pace(Within(10*time.Millisecond, 1000*time.Second)), fast},
			} {
				d := deliver(t, u, c, celsius(T), x.pace)
				if math.Abs(float64(d.Volume/x.want.Volume)-1) > 2e-4 || math.Abs(float64(d.End-x.want.End)) > 0.05 || d.Stopped != x.want.Stopped {
					t.Errorf("%s, %v C: %v m3 ending at %v K, want %v m3 and %v K", name, T, d.Volume, d.End, x.want.Volume, x.want.End)
				}
			}
		}
	}
}

// Source: the same equation, in its published form with temperature for the unknown, by Euler's method in a hundred thousand steps.
func TestDrawAgainstEuler(t *testing.T) {
	u, c, T := brake(), Charge{1000 * psi, celsius(20), atm}, celsius(-10)
	const flow, tau, steps = 20e-6, 15.0, 100_000
	d := deliver(t, u, c, T, pace(AtFlow(flow, 15*time.Second)))
	rho0, err := c.Density(u.Gas)
	if err != nil {
		t.Fatal(err)
	}
	rho1, err := u.Gas.Density(T, u.System.Abs(atm))
	if err != nil {
		t.Fatal(err)
	}
	mass := float64(u.Volume) * float64(rho0)
	start := mass / float64(rho1)
	temp, dt := float64(T), float64(d.Volume)/flow/steps
	var x gas.State
	for i := range steps {
		if x, err = u.Gas.ColdState(quantity.Temperature(temp), gas.Density(mass/(start+flow*dt*float64(i)))); err != nil {
			t.Fatal(err)
		}
		temp += dt * ((float64(T)-temp)/tau - temp/x.Cv*x.DpDT*flow/mass)
	}
	if math.Abs(temp-float64(d.End)) > 0.02 {
		t.Errorf("ends at %.5f K, Euler's method at %.5f K", d.End, temp)
	}
	x, err = u.Gas.ColdState(quantity.Temperature(temp), gas.Density(mass/(start+float64(d.Volume))))
	if want := u.LeastUseful.Abs(atm); err != nil || math.Abs(float64(x.P/want)-1) > 1e-4 {
		t.Errorf("Euler's method is at %v Pa where delivery ended at %v Pa: %v", x.P, want, err)
	}
}

// Source: the definition of a draw within a time.
func TestWithinTakesTheTime(t *testing.T) {
	u, c := brake(), Charge{1000 * psi, celsius(20), atm}
	d := deliver(t, u, c, celsius(0), pace(Within(20*time.Second, DefaultTimeConstant)))
	same := deliver(t, u, c, celsius(0), pace(AtFlow(quantity.VolumeRate(d.Volume/20), DefaultTimeConstant)))
	if math.Abs(float64(d.Volume/same.Volume)-1) > 1e-5 {
		t.Errorf("%v m3 in 20 s, but that flow delivers %v m3", d.Volume, same.Volume)
	}
}

func draw(t *rapid.T) (Unit, Charge, quantity.Temperature) {
	p := func(name string, lo, hi float64) quantity.GaugePressure {
		return quantity.GaugePressure(rapid.Float64Range(lo, hi).Draw(t, name)) * psi
	}
	u := brake()
	u.System = p("system", 1500, 5000)
	u.LeastUseful = u.System * quantity.GaugePressure(rapid.Float64Range(0.35, 0.95).Draw(t, "least"))
	c := Charge{p("charge", 200, 5000), celsius(rapid.Float64Range(-40, 60).Draw(t, "at")), atm}
	return u, c, celsius(rapid.Float64Range(-30, 70).Draw(t, "T"))
}

// Source: work takes energy from the gas, and heat gives it back: the faster, the colder and the less fluid. A lower least useful
// pressure can only give more, and no more than was stored. The volumes go with the gas volume.
func TestOrderOfDeliveries(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		u, c, T := draw(t)
		slow, fast := deliver(t, u, c, T, Slow()), deliver(t, u, c, T, Fast())
		timed := deliver(t, u, c, T, pace(Within(time.Duration(rapid.Float64Range(0.1, 1000).Draw(t, "s")*1e9), DefaultTimeConstant)))
		const a = 1e-5
		for _, d := range [][2]Delivery{{fast, timed}, {timed, slow}} {
			if d[0].Volume > d[1].Volume*(1+a) || d[0].End > d[1].End+0.02 {
				t.Errorf("the faster delivers %v m3 to %v K, the slower %v m3 to %v K", d[0].Volume, d[0].End, d[1].Volume, d[1].End)
			}
		}
		if slow.Volume > slow.Stored*(1+a) || fast.Volume < 0 {
			t.Errorf("delivers %v (fast %v) of %v stored", slow.Volume, fast.Volume, slow.Stored)
		}
		for _, d := range []Delivery{slow, timed, fast} {
			if d.Low > d.Volume*(1+a) || d.High < d.Volume*(1-a) {
				t.Errorf("%v m3 is not between %v and %v", d.Volume, d.Low, d.High)
			}
			if rel := float64(u.Tolerance / u.Volume); math.Abs(float64(d.High-d.Low)-2*rel*float64(d.Volume)) > 0.2*rel*float64(d.Volume) {
				t.Errorf("a tolerance of %v of the gas volume makes %v to %v of %v", rel, d.Low, d.High, d.Volume)
			}
		}
		more := u
		more.LeastUseful *= quantity.GaugePressure(rapid.Float64Range(0.9, 1).Draw(t, "lower"))
		for _, at := range []Pace{Slow(), Fast()} {
			if d, e := deliver(t, u, c, T, at), deliver(t, more, c, T, at); e.Volume < d.Volume*(1-a) {
				t.Errorf("%v m3 down to %v Pa, but %v m3 down to %v Pa", d.Volume, u.LeastUseful, e.Volume, more.LeastUseful)
			}
		}
	})
}

// Source: the definition of the lowest charge, tried by charges beside it; of the best, tried by all charges.
func TestLowestCharge(t *testing.T) {
	u := brake()
	worst := func(charge quantity.GaugePressure, at Pace) quantity.Volume {
		curve, err := u.Curve(Charge{charge, celsius(20), atm}, celsius(-40), celsius(70), 3, at)
		if err != nil {
			t.Fatal(err)
		}
		w := Worst(curve)
		for _, d := range curve {
			if d.Volume < w.Volume || d.Low < w.Low {
				t.Errorf("%v is not the worst: %v", w, d)
			}
		}
		return w.Low
	}
	for name, at := range map[string]Pace{"slow": Slow(), "fast": Fast(), "in 20 s": pace(Within(20*time.Second, DefaultTimeConstant))} {
		for _, demand := range []quantity.Volume{5 * inch3, 9 * inch3, 12 * inch3, 40 * inch3} {
			l, err := u.Lowest(celsius(20), celsius(-40), celsius(70), 3, demand, at)
			if err != nil {
				t.Fatal(err)
			}
			t.Logf("%s, %.3g in3: met %v with %.1f psi, worst %.3f in3 at %.0f K", name, demand/inch3, l.Met, l.Charge/psi, l.Worst.Volume/inch3, l.Worst.Temperature)
			if l.Met {
				if above, below := worst(l.Charge+psi/2, at), worst(l.Charge-psi/2, at); above < demand || below >= demand {
					t.Errorf("%s, %v in3: %v psi is not the lowest charge: half a psi less delivers %v in3, more %v", name, demand/inch3, l.Charge/psi, below/inch3, above/inch3)
				}
				continue
			}
			for p := 100 * psi; p < u.System; p += 200 * psi {
				if got := worst(p, at); got >= demand || got > l.Worst.Low*(1+1e-3) {
					t.Errorf("%s, %v in3: %v psi delivers %v in3, more than the best %v psi with %v", name, demand/inch3, p/psi, got/inch3, l.Charge/psi, l.Worst.Low/inch3)
				}
			}
		}
	}
}

func TestWhatCannotBe(t *testing.T) {
	u, c := brake(), Charge{3100 * psi, celsius(20), atm}
	if d := deliver(t, u, c, celsius(20), Fast()); d.Stored != 0 || d.Volume != 0 {
		t.Errorf("a charge above system pressure stores %v and delivers %v", d.Stored, d.Volume)
	}
	u.LeastUseful = 50 * psi
	_, err := u.Deliver(Charge{20 * psi, celsius(20), atm}, celsius(-40), Fast())
	var span *quantity.RangeError
	if !errors.As(err, &span) || span.Low != 130 {
		t.Errorf("an expansion below 130 K: %v", err)
	}
	if d := deliver(t, u, Charge{1800 * psi, celsius(20), atm}, celsius(-40), Fast()); !d.Stopped {
		t.Errorf("the stop comes before the cold, but: %v", d)
	}
	for _, spoil := range []func(*Unit){
		func(u *Unit) { u.Gas = nil }, func(u *Unit) { u.Volume = 0 }, func(u *Unit) { u.Tolerance = u.Volume }, func(u *Unit) { u.LeastUseful = u.System },
		func(u *Unit) { u.System = quantity.GaugePressure(math.NaN()) },
	} {
		u := brake()
		spoil(&u)
		if _, err := u.Deliver(c, celsius(20), Slow()); err == nil {
			t.Errorf("%v was accepted", u)
		}
	}
	for _, f := range []func() (Pace, error){
		func() (Pace, error) { return AtFlow(0, time.Second) }, func() (Pace, error) { return AtFlow(1, 0) }, func() (Pace, error) { return Within(0, time.Second) },
		func() (Pace, error) { return AtFlow(quantity.VolumeRate(math.NaN()), time.Second) }, func() (Pace, error) { return Within(time.Second, -1) },
	} {
		if p, err := f(); err == nil {
			t.Errorf("%v was accepted", p)
		}
	}
}

package verdict

import (
	"fmt"
	"math"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/trace"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// pistonFriction is the most that the seals of a piston hold back, with 95 % (common practice, no source).
const pistonFriction = quantity.GaugePressure(50 * 6894.757293168361)

// Traced is what a bleed-down says of a unit's charge, against the sheet in force then. It is never a verdict: an indication.
type Traced struct {
	Unit  record.UnitRef
	Done  time.Time
	Sheet *ledger.Sheet
	Pairs []trace.Pair // as the certificate corrects them
	Fit   *trace.Fit
	// Charge, Low and High are at the sheet's reference with Limits beside them; with a chart all are at the gas temperature.
	// The 95 % interval then also holds the error of that temperature.
	Charge, Low, High       quantity.GaugePressure
	LeastIn, Target, MostIn quantity.GaugePressure // the sheet's limits
	At                      quantity.Temperature   // to which they hold
	Compared                bool                   // false: see NotCompared
	NotCompared             string
	AllIn, MiddleIn, AllOut bool
}

// In tells whether the indication is in limits: the charge found is.
func (t *Traced) In() bool { return t.Compared && t.MiddleIn }

// Trace finds the charge from a bleed-down. The error is a *trace.RefusedError when the trace gives none, another when the
// gauge, the sheet or a value cannot be used.
func Trace(m *ledger.Meaning, b record.Trace) (*Traced, error) {
	if len(b.Drawn.Values) != len(b.Pressures.Values) {
		return nil, fmt.Errorf("%d amounts drawn beside %d pressures", len(b.Drawn.Values), len(b.Pressures.Values))
	}
	t := &Traced{Unit: b.Unit, Done: time.Unix(b.Done.Unix, 0).UTC()}
	amount := func(s record.Series, i int) record.Amount {
		return record.Amount{Mantissa: s.Values[i], Exponent: s.Exponent, Unit: s.Unit}
	}
	var x Observed // its reading carries what the trace shares with one; the fluid side is not relieved, and nothing here asks
	err := x.resolve(m, observation{unit: b.Unit, gauge: b.Gauge, pressure: amount(b.Pressures, 0), temperature: b.Temperature, from: b.From,
		fluid: record.Amount{Unit: "psi"}, done: b.Done})
	if err != nil {
		return nil, err
	}
	if !x.Gauge.InCalibration {
		return nil, fmt.Errorf("gauge %s is out of calibration (%s)", x.Gauge.Name, x.Gauge.CalibrationNote)
	}
	t.Sheet = x.Sheet
	o := trace.Options{Gas: x.Limits.Gas, Temperature: x.Reading.Temperature, Ambient: x.Reading.Ambient, In: UnitsOf(m)}
	if x.Sheet.Construction == "piston" {
		o.Friction = pistonFriction
	}
	var p parser
	recalled := x.Reading.Gauge - p.gauge("pressure", amount(b.Pressures, 0)) // what a recall adds to every reading
	for i, v := range b.Drawn.Values {
		corrected, each, bias := x.Gauge.Apart(p.gauge("pressure", amount(b.Pressures, i))+recalled, o.Temperature)
		t.Pairs = append(t.Pairs, trace.Pair{Drawn: float64(v) * math.Pow10(b.Drawn.Exponent), Pressure: max(corrected, 0)})
		o.U, o.Bias = max(o.U, each), max(o.Bias, bias)
	}
	if p.err != nil {
		return nil, p.err
	}
	if t.Fit, err = trace.New(t.Pairs, o); err != nil {
		return nil, err
	}
	t.compare(x)
	return t, nil
}

// compare brings the charge and its interval to the sheet's reference.
func (t *Traced) compare(x Observed) {
	l, r := x.Limits, x.Reading
	f := t.Fit
	t.Charge, t.Low, t.High, t.At = f.Charge, f.Low, f.High, r.Temperature
	if r.TemperatureFrom == calc.TemperatureUnknown {
		t.NotCompared = "the gas temperature is unknown"
		return
	}
	// Half-widths of the gas temperature: a probe on the shell, or the air around it (common practice, no source).
	half := quantity.Temperature(1)
	if r.TemperatureFrom == calc.AmbientAfterSoak {
		half = 3
	}
	to := l.Reference
	var err error
	if l.Chart != nil {
		to = r.Temperature
		t.LeastIn, t.Target, t.MostIn, err = l.Chart.At(to)
	} else {
		t.LeastIn, t.Target, t.MostIn = l.Charge-l.Minus, l.Charge, l.Charge+l.Plus
	}
	bring := func(g quantity.GaugePressure, at quantity.Temperature) quantity.GaugePressure {
		if err != nil {
			return 0
		}
		var p quantity.Pressure
		p, err = calc.Correct(l.Gas, g.Abs(r.Ambient), at, to)
		return p.Gauge(l.Ambient)
	}
	middle := bring(f.Charge, r.Temperature)
	// 1.96 standard uncertainties of a temperature that is anywhere in its half-width.
	warm := 1.96 / math.Sqrt(3) * float64(bring(f.Charge, r.Temperature-half)-middle)
	low, high := bring(f.Low, r.Temperature), bring(f.High, r.Temperature)
	if err != nil {
		t.NotCompared = err.Error()
		return
	}
	t.Charge, t.At, t.Compared = middle, to, true
	t.Low = middle - quantity.GaugePressure(math.Hypot(float64(middle-low), warm))
	t.High = middle + quantity.GaugePressure(math.Hypot(float64(high-middle), warm))
	t.MiddleIn = t.Charge >= t.LeastIn && t.Charge <= t.MostIn
	t.AllIn = t.Low >= t.LeastIn && t.High <= t.MostIn
	t.AllOut = t.High < t.LeastIn || t.Low > t.MostIn
}

package verdict

import (
	"errors"
	"fmt"
	"runtime"
	"sync"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/trend"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// Watched is what a unit's history says of its loss of gas, against the sheet in force at its last entry.
type Watched struct {
	Unit     record.UnitRef
	Seen     []Observed             // all that was seen on it
	Points   []trend.Point          // those that can be brought to the reference, in the order of Seen
	Of       []int                  // the place in Seen of each point
	Passed   []Passed               // what says nothing, and why
	Fit      *trend.Fit             // nil: see Why
	Why      string                 // why there is no fit
	Low      quantity.GaugePressure // limits at the reference; for a chart at 20 degC
	High     quantity.GaugePressure
	Target   quantity.GaugePressure
	Sheet    *ledger.Sheet
	Limits   calc.Limits
	Allowed  trend.Rate      // loss that the sheet allows, positive; 0: it states none, or one that cannot be turned into pressure
	NoAllow  string          // why the stated allowance cannot be used
	Charge   *trend.Charge   // turns a rate into free gas; nil without the sheet's gas volume
	Forecast *trend.Forecast // nil: see NoDate
	NoDate   string
}

// chartReference is where the trend of a unit with a chart is shown: 20 degC, as calc/trend has it.
const chartReference quantity.Temperature = 293.15

// Watch fits a unit's history. It never fails: what stands in the way is said in the result.
func Watch(m *ledger.Meaning, u *ledger.Unit) Watched {
	w := Watched{Unit: u.Ref}
	w.Seen, w.Passed = History(m, u)
	if len(w.Seen) == 0 {
		w.Why = "nothing was read on it that can be used"
		return w
	}
	last := w.Seen[len(w.Seen)-1]
	w.Sheet, w.Limits = last.Sheet, last.Limits
	if err := w.reference(); err != nil {
		w.Why = err.Error()
		return w
	}
	for i, s := range w.Seen {
		p, err := trend.Reading{At: s.At, Gauge: s.Gauge, Reading: s.Reading}.Point(w.Limits, s.Segment)
		if err != nil {
			w.Passed = append(w.Passed, Passed{s.Entry, err.Error()})
			continue
		}
		w.Points, w.Of = append(w.Points, p), append(w.Of, i)
	}
	w.allowance()
	fit, err := trend.New(w.Points, trend.Options{})
	if err != nil {
		w.Why = err.Error()
		return w
	}
	w.Fit = fit
	f, err := fit.Forecast(w.Low, w.High)
	switch {
	case errors.Is(err, trend.ErrNoForecast):
		w.NoDate = err.Error()
	case err != nil:
		w.NoDate = err.Error()
	default:
		w.Forecast = &f
	}
	return w
}

// reference finds the limits where the trend is shown.
func (w *Watched) reference() (err error) {
	l := w.Limits
	w.Low, w.Target, w.High = l.Charge-l.Minus, l.Charge, l.Charge+l.Plus
	if l.Chart != nil {
		if w.Low, w.Target, w.High, err = l.Chart.At(chartReference); err != nil {
			return fmt.Errorf("the chart of sheet %s rev %s does not reach 20 C, where a trend is shown: %w", w.Sheet.Document, w.Sheet.Revision, err)
		}
	}
	return nil
}

// allowance finds the loss that the sheet allows as a rate of pressure.
func (w *Watched) allowance() {
	at := w.Limits.Reference
	if w.Limits.Chart != nil {
		at = chartReference
	}
	if v := w.Sheet.GasVolume; v != nil {
		if volume, err := written(*v).Volume(); err == nil {
			w.Charge = &trend.Charge{Gas: w.Limits.Gas, Volume: volume, Temperature: at, Pressure: w.Target.Abs(w.Limits.Ambient)}
		}
	}
	if w.Sheet.Leak == nil {
		return
	}
	leak := written(*w.Sheet.Leak)
	if r, err := leak.PressureRate(); err == nil {
		w.Allowed = trend.Rate(r)
		return
	}
	flow, err := leak.VolumeRate()
	if err != nil {
		w.NoAllow = fmt.Sprintf("the sheet allows %q, which is no rate", leak)
		return
	}
	if w.Charge == nil {
		w.NoAllow = fmt.Sprintf("the sheet allows %s of free gas but gives no gas volume to turn it into pressure", leak)
		return
	}
	perHour, err := flow.InUnit("mL/h")
	if err == nil {
		var r trend.Rate
		if r, err = w.Charge.Rate(trend.FreeGas(perHour)); err == nil {
			w.Allowed = -r
			return
		}
	}
	w.NoAllow = err.Error()
}

// WatchAll fits all units, on all cores, in the order of the book.
func WatchAll(m *ledger.Meaning) []Watched {
	out := make([]Watched, len(m.Units))
	var wg sync.WaitGroup
	workers := runtime.GOMAXPROCS(0)
	for k := range workers {
		wg.Go(func() {
			for i := k; i < len(out); i += workers {
				out[i] = Watch(m, m.Units[i])
			}
		})
	}
	wg.Wait()
	return out
}

// OddEntries returns the entries of the readings that do not fit, with how far each is off.
func (w *Watched) OddEntries() map[record.ID]float64 {
	odd := map[record.ID]float64{}
	if w.Fit == nil {
		return odd
	}
	for _, o := range w.Fit.Odd {
		for i, p := range w.Points {
			if p == o.Point {
				odd[w.Seen[w.Of[i]].Entry] = o.By
			}
		}
	}
	return odd
}

// Last returns when the unit was last seen.
func (w *Watched) Last() time.Time {
	if len(w.Seen) == 0 {
		return time.Time{}
	}
	return w.Seen[len(w.Seen)-1].At
}

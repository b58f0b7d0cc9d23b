package main

import (
	"fmt"
	"math"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// The limits of what is taken without asking again are common practice, no source.
const (
	farFromHistory  = 0.2            // of the unit's last pressure against its target
	farFromField    = 25             // K from every temperature taken in this book
	sameWeather     = 6 * time.Hour  // for so long
	coldestOutdoors = 273.15 - 60    // K
	hottestOutdoors = 273.15 + 60    // K, a shell in the sun
	hottestShell    = 273.15 + 120.0 // K, straight after operation
)

// doubts says what in a reading or charge looks like a slip of the hand, "" when nothing does: the person is asked again.
func doubts(m *ledger.Meaning, u *ledger.Unit, on string, body any, j verdict.Judged) string {
	if on != "" && u.Aircraft != on {
		where := "not fitted to any aircraft"
		if u.Aircraft != "" {
			where = "fitted to " + u.Aircraft
		}
		return fmt.Sprintf("unit %s is %s in this book, and you stand at %q", unitName(u.Ref), where, on)
	}
	in := verdict.UnitsOf(m)
	done, _ := ledger.Done(body)
	for _, o := range observed(body) {
		t, err := written(o.Temperature).Temperature()
		if err != nil || o.TemperatureFrom == "unknown" {
			continue
		}
		hottest := hottestOutdoors
		if o.TemperatureFrom == "shell" {
			hottest = hottestShell
		}
		if t < coldestOutdoors || float64(t) > hottest {
			return fmt.Sprintf("a temperature of %s belongs to no field; perhaps another unit was meant", written(o.Temperature))
		}
		if near, at, ok := nearestTemperature(m, o.TemperatureFrom, t, done); ok && math.Abs(float64(t-near)) > farFromField {
			return fmt.Sprintf("a temperature of %s is far from the %s taken at this field at %s; perhaps another unit was meant", written(o.Temperature), in.Temperature(near), clock(at))
		}
	}
	if c, ok := body.(record.Charge); ok {
		found, ferr := written(c.AsFound.Pressure).Gauge()
		left, lerr := written(c.AsLeft.Pressure).Gauge()
		if ferr == nil && lerr == nil && left < found && c.Bottle != "none" {
			return fmt.Sprintf("left at %s, found at %s, and gas came from bottle %s: a charge does not lower the pressure", written(c.AsLeft.Pressure), written(c.AsFound.Pressure), c.Bottle)
		}
		return "" // a charge is there to move the pressure
	}
	if len(u.Work) == 0 || j.Class == calc.NotAssessable {
		return ""
	}
	id := u.Work[len(u.Work)-1]
	last, err := verdict.Judge(m, id, m.Item(id).Body)
	if err != nil || last.Class == calc.NotAssessable || last.Corrected <= 0 || last.Sheet.ID != j.Sheet.ID {
		return ""
	}
	// A chart's pressures hold at the reading's own temperature, so both are taken against their targets.
	if x := float64(j.Corrected / j.Target * last.Target / last.Corrected); math.Abs(x-1) > farFromHistory {
		return fmt.Sprintf("the corrected pressure of %s is far from the %s of this unit's last entry", in.Pressure(j.Corrected), in.Pressure(last.Corrected))
	}
	return ""
}

// observed returns the pressures with their temperatures that a body holds.
func observed(body any) []record.Observation {
	switch b := body.(type) {
	case record.Reading:
		return []record.Observation{{Pressure: b.Pressure, Temperature: b.Temperature, TemperatureFrom: b.TemperatureFrom, SoakMin: b.SoakMin}}
	case record.Charge:
		return []record.Observation{b.AsFound, b.AsLeft}
	}
	return nil
}

// nearestTemperature returns, of the temperatures of that source taken within the same weather before a time, the one nearest to t.
func nearestTemperature(m *ledger.Meaning, from string, t quantity.Temperature, at record.Time) (near quantity.Temperature, when record.Time, ok bool) {
	for i := range m.Entries {
		it := &m.Entries[i]
		done, work := ledger.Done(it.Body)
		if !work || !it.Counts() || done.Unix > at.Unix || at.Unix-done.Unix > int64(sameWeather/time.Second) {
			continue
		}
		for _, o := range observed(it.Body) {
			if o.TemperatureFrom != from {
				continue
			}
			if v, err := written(o.Temperature).Temperature(); err == nil && (!ok || math.Abs(float64(v-t)) < math.Abs(float64(near-t))) {
				near, when, ok = v, done, true
			}
		}
	}
	return near, when, ok
}

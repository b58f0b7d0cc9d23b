package verdict

import (
	"fmt"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// Observed is one pressure that was seen on a unit, as the calculation core takes it. A charge gives two: as found and as left.
type Observed struct {
	Entry   record.ID
	Kind    record.Kind
	Left    bool // as left by a charge
	At      time.Time
	Gauge   calc.Gauge
	Reading calc.Reading
	Sheet   *ledger.Sheet
	Limits  calc.Limits
	Segment string // changes with each charge
}

// Passed is an entry of a unit that says nothing of its charge, and why.
type Passed struct {
	Entry record.ID
	Why   string
}

// History returns what was seen on a unit by the time the work was done, and what of its entries cannot be used. It judges nothing:
// a reading that is not assessable is in it.
func History(m *ledger.Meaning, u *ledger.Unit) (seen []Observed, passed []Passed) {
	segment := 0
	for _, id := range u.Work {
		add := func(o observation, left bool) {
			x := Observed{Entry: id, Kind: m.Item(id).Entry().Kind, Left: left, At: time.Unix(o.done.Unix, 0).UTC(), Segment: fmt.Sprint(segment)}
			if err := x.resolve(m, o); err != nil {
				passed = append(passed, Passed{id, err.Error()})
				return
			}
			seen = append(seen, x)
		}
		switch b := m.Item(id).Body.(type) {
		case record.Reading:
			add(ofReading(b), false)
		case record.Charge:
			add(ofCharge(b, b.AsFound), false)
			segment++
			add(ofCharge(b, b.AsLeft), true)
		}
	}
	return seen, passed
}

// resolve finds the sheet and the gauge that bear on an observation.
func (x *Observed) resolve(m *ledger.Meaning, o observation) (err error) {
	if x.Sheet = m.SheetAt(o.unit.Part, o.done); x.Sheet == nil {
		return fmt.Errorf("no sheet for part %s was in force at the time of the work", o.unit.Part)
	}
	return x.under(m, o)
}

// under finds the rest for the sheet that x holds.
func (x *Observed) under(m *ledger.Meaning, o observation) (err error) {
	if r := m.SheetRecall(x.Sheet.ID, o.done); r != nil {
		return fmt.Errorf("sheet %s rev %s was recalled: %s", x.Sheet.Document, x.Sheet.Revision, r.Reason)
	}
	if x.Limits, err = Limits(x.Sheet.Sheet, UnitsOf(m)); err != nil {
		return fmt.Errorf("sheet %s rev %s cannot be used: %v", x.Sheet.Document, x.Sheet.Revision, err)
	}
	g := m.Gauge(o.gauge)
	if g == nil {
		return fmt.Errorf("gauge %s is not registered", o.gauge)
	}
	if x.Gauge, err = gaugeOf(g.Gauge, o.done); err != nil {
		return fmt.Errorf("gauge %s cannot be used: %v", o.gauge, err)
	}
	if x.Reading, err = o.reading(); err != nil {
		return err
	}
	if r := m.GaugeRecall(o.gauge, o.done); r != nil {
		if r.Correction == nil {
			return fmt.Errorf("gauge %s was recalled: %s", o.gauge, r.Reason)
		}
		var p parser
		x.Reading.Gauge += p.gauge("correction of the recall", *r.Correction)
		return p.err
	}
	return nil
}

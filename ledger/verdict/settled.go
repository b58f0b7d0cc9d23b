package verdict

import (
	"fmt"
	"math"
	"time"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/settle"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// repeatable is the part of a gauge's class that is new in each reading, as calc/trend takes it (common practice, no source).
const repeatable = 0.2

// Constants returns a unit's time constants as its settling readings in force have taught them, oldest first; settle.Usual for a
// unit never followed. Readings that cannot tell teach nothing.
func Constants(m *ledger.Meaning, u *ledger.Unit) (c settle.Constants, learnt bool) {
	return constantsBefore(m, u, record.ID{})
}

func constantsBefore(m *ledger.Meaning, u *ledger.Unit, entry record.ID) (c settle.Constants, learnt bool) {
	c = settle.Usual()
	for _, id := range u.Settled {
		if id == entry {
			break
		}
		if f, err := fitSettling(m, m.Item(id).Body.(record.Settling), c); err == nil {
			c, learnt = f.Constants, learnt || f.LearntFast || f.LearntSlow
		}
	}
	return c, learnt
}

// Settling fits timed readings after a charge, with what the unit's earlier ones have taught; entry is theirs, zero when they are
// not signed yet. The error is calc/settle's, or says which value cannot be used.
func Settling(m *ledger.Meaning, u *ledger.Unit, entry record.ID, b record.Settling) (*settle.Fit, error) {
	known, _ := constantsBefore(m, u, entry)
	return fitSettling(m, b, known)
}

func fitSettling(m *ledger.Meaning, b record.Settling, known settle.Constants) (*settle.Fit, error) {
	g := m.Gauge(b.Gauge)
	if g == nil {
		return nil, fmt.Errorf("gauge %s is not registered", b.Gauge)
	}
	gauge, err := gaugeOf(g.Gauge, b.Closed)
	if err != nil {
		return nil, err
	}
	shift := quantity.GaugePressure(0)
	if r := m.GaugeRecall(b.Gauge, b.Closed); r != nil {
		if r.Correction == nil {
			return nil, fmt.Errorf("gauge %s was recalled: %s", b.Gauge, r.Reason)
		}
		if shift, err = written(*r.Correction).Gauge(); err != nil {
			return nil, fmt.Errorf("correction of the recall: %w", err)
		}
	}
	if b.Seconds.Unit != "s" {
		return nil, fmt.Errorf("times in %q; they are in s", b.Seconds.Unit)
	}
	readings := make([]settle.Reading, 0, len(b.Seconds.Values))
	for i := range b.Seconds.Values {
		p, err := at(b.Pressures, i).Gauge()
		if err != nil {
			return nil, err
		}
		p += shift
		after := float64(b.Seconds.Values[i]) * math.Pow10(b.Seconds.Exponent)
		if !(after >= 0 && after < 1e7) {
			return nil, fmt.Errorf("%v s after the valve was closed is no time of a settling", after)
		}
		u := math.Hypot(float64(gauge.Graduation)/2, repeatable*float64(gauge.Accuracy.Limit(p-gauge.SpanLow, gauge.Span-gauge.SpanLow))) / math.Sqrt(3)
		readings = append(readings, settle.Reading{After: time.Duration(after * 1e9), Pressure: p, U: quantity.GaugePressure(u)})
	}
	return settle.New(readings, settle.Options{Known: known})
}

// at returns one value of a series.
func at(s record.Series, i int) quantity.Written {
	return quantity.Written{Mantissa: s.Values[i], Exponent: s.Exponent, Unit: s.Unit}
}

package trend

import (
	"fmt"
	"strings"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
)

// ChartReference is the temperature to which readings of a sheet with a chart are brought, since a chart holds at any: 20 degC.
const ChartReference quantity.Temperature = 293.15

// repeatable is the part of a gauge's class by which it errs anew at each reading: friction and hysteresis with the needle come
// to rest from one side. One fifth (common practice, no source). The rest of its error is the same each time.
const repeatable = 0.2

// Reading is one reading of a unit as it was taken.
type Reading struct {
	At      time.Time
	Gauge   calc.Gauge
	Reading calc.Reading
}

// NotAssessableError says why a reading tells nothing of the charge, all reasons at once.
type NotAssessableError struct {
	At   time.Time
	Why  []string
	Next string
}

func (e *NotAssessableError) Error() string {
	return fmt.Sprintf("the reading of %s is not assessable: %s; %s", e.At.Format(time.RFC3339), strings.Join(e.Why, "; "), e.Next)
}

// Point brings a reading to the sheet's reference (20 degC for a sheet with a chart) and parts its budget into what is new in each
// reading, and the gauge's bias and error by its own temperature. A reading that could not be judged gives a
// *NotAssessableError.
func (r Reading) Point(l calc.Limits, segment string) (Point, error) {
	corrected, budget, err := r.judge(l)
	if err != nil {
		return Point{}, err
	}
	class, warm := budget[0].U, budget[2].U
	us := []quantity.GaugePressure{repeatable * class, budget[1].U}
	for _, t := range budget[3:] {
		us = append(us, t.U)
	}
	if r.Reading.Temperature < gaugeReference {
		warm = -warm
	}
	return Point{At: r.At, Pressure: corrected, U: root(us...), Gauge: r.Gauge.Name, Bias: class, Warm: warm, Segment: segment}, nil
}

// judge returns the corrected pressure and calc's budget, which begins with the gauge's class or certificate, reading the
// dial, and the gauge's own temperature.
func (r Reading) judge(l calc.Limits) (quantity.GaugePressure, []calc.Term, error) {
	if l.Chart != nil { // the chart's limits say nothing of a rate: the isochore does
		if _, charge, _, err := l.Chart.At(r.Reading.Temperature); err == nil {
			l.Charge = charge
		} else {
			l.Charge = r.Reading.Gauge
		}
		l.Chart, l.Reference, l.Minus, l.Plus = nil, ChartReference, 0, 0
	}
	v := calc.Judge(l, r.Gauge, r.Reading, calc.GuardBanded())
	if v.Class == calc.NotAssessable {
		return 0, nil, &NotAssessableError{r.At, v.Reasons, v.Next}
	}
	return v.Corrected, v.Budget, nil
}

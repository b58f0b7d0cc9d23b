package calc

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"

	"example.org/chargehand/calc/quantity"
)

// Accuracy is what a gauge is allowed to be wrong by, in percent of span: in the lowest quarter, the middle half and the
// upper quarter of the span.
type Accuracy struct {
	name               string
	lower, mid, higher float64
}

// Grades of ASME B40.100. 4A, 3A, 2A and A are described by public summaries of the standard; the rest is from memory.
var asmeGrades = []Accuracy{
	{"ASME 4A", 0.1, 0.1, 0.1}, {"ASME 3A", 0.25, 0.25, 0.25}, {"ASME 2A", 0.5, 0.5, 0.5}, {"ASME 1A", 1, 1, 1},
	{"ASME A", 2, 1, 2}, {"ASME B", 3, 2, 3}, {"ASME C", 4, 3, 4}, {"ASME D", 5, 5, 5},
}

// Classes of EN 837-1:1996, table of accuracy classes.
var enClasses = []string{"0.1", "0.25", "0.6", "1", "1.6", "2.5", "4"}

// ParseAccuracy reads "ASME 2A", "EN 1.6" or a stated figure such as "0.5%" of span.
func ParseAccuracy(s string) (Accuracy, error) {
	t := strings.Join(strings.Fields(s), " ")
	for _, a := range asmeGrades {
		if strings.EqualFold(a.name, t) {
			return a, nil
		}
	}
	if class, ok := strings.CutPrefix(strings.ToUpper(t), "EN "); ok && slices.Contains(enClasses, class) {
		v, _ := strconv.ParseFloat(class, 64)
		return Accuracy{"EN " + class, v, v, v}, nil
	}
	if n, ok := strings.CutSuffix(t, "%"); ok {
		if v, err := strconv.ParseFloat(strings.TrimSpace(n), 64); err == nil && v > 0 && v <= 10 {
			return Accuracy{strings.TrimSpace(n) + "%", v, v, v}, nil
		}
	}
	return Accuracy{}, fmt.Errorf("accuracy %q is not known; write ASME 4A to D, EN %s, or a figure such as 0.5%% of span up to 10%%", s, strings.Join(enClasses, ", "))
}

func (a Accuracy) String() string { return a.name }

// Limit returns the largest error allowed at a reading, gauge pascals, either way.
func (a Accuracy) Limit(reading, span quantity.GaugePressure) quantity.GaugePressure {
	pct := a.mid
	switch {
	case reading < span/4:
		pct = a.lower
	case reading > span*3/4:
		pct = a.higher
	}
	return span * quantity.GaugePressure(pct/100)
}

// CorrectionPoint is a row of a calibration certificate: what to add to a reading.
type CorrectionPoint struct{ Reading, Correction quantity.GaugePressure }

// Gauge is a pressure gauge from zero to Span.
type Gauge struct {
	Name       string
	Span       quantity.GaugePressure
	Accuracy   Accuracy
	Graduation quantity.GaugePressure // one division of the dial
	// TempCoefficient is the fraction of span per kelvin away from 20 degC; zero stands for 0.0004, the limit of EN 837-1 for
	// Bourdon gauges as quoted by secondary sources.
	TempCoefficient       float64
	Correction            []CorrectionPoint
	CorrectionUncertainty quantity.GaugePressure // expanded, k = 2; used in place of the class when there is a table
	InCalibration         bool
	CalibrationNote       string // the dates, for the reason when it is not
}

// corrected applies the certificate's table, in straight lines between its rows and level beyond them.
func (g Gauge) corrected(reading quantity.GaugePressure) quantity.GaugePressure {
	if len(g.Correction) == 0 {
		return reading
	}
	rows := slices.Clone(g.Correction)
	slices.SortFunc(rows, func(a, b CorrectionPoint) int {
		return int(math.Copysign(1, float64(a.Reading-b.Reading)))
	})
	if reading <= rows[0].Reading {
		return reading + rows[0].Correction
	}
	for i := 1; i < len(rows); i++ {
		if a, b := rows[i-1], rows[i]; reading <= b.Reading {
			return reading + a.Correction + (b.Correction-a.Correction)*(reading-a.Reading)/(b.Reading-a.Reading)
		}
	}
	return reading + rows[len(rows)-1].Correction
}

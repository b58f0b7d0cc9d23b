package calc

import (
	"cmp"
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

// ASMEGrade returns a grade of ASME B40.100: 4A, 3A, 2A, 1A, A, B, C or D.
func ASMEGrade(grade string) (Accuracy, error) {
	for _, a := range asmeGrades {
		if strings.EqualFold(a.name, "ASME "+grade) {
			return a, nil
		}
	}
	return Accuracy{}, fmt.Errorf("grade %q is not in ASME B40.100; write one of 4A, 3A, 2A, 1A, A, B, C, D", grade)
}

// ENClass returns a class of EN 837-1: 0.1, 0.25, 0.6, 1, 1.6, 2.5 or 4.
func ENClass(class string) (Accuracy, error) {
	if !slices.Contains(enClasses, class) {
		return Accuracy{}, fmt.Errorf("class %q is not in EN 837-1; write one of %s", class, strings.Join(enClasses, ", "))
	}
	v, err := strconv.ParseFloat(class, 64)
	return Accuracy{"EN " + class, v, v, v}, err
}

// StatedPercent returns an accuracy stated in percent of span, above 0 and up to 10.
func StatedPercent(percent float64) (Accuracy, error) {
	if !(percent > 0 && percent <= 10) {
		return Accuracy{}, fmt.Errorf("an accuracy of %v%% of span is not between 0 and 10%%; write what the dial or certificate states", percent)
	}
	return Accuracy{strconv.FormatFloat(percent, 'g', -1, 64) + "%", percent, percent, percent}, nil
}

// ParseAccuracy reads "ASME 2A", "EN 1.6" or a stated figure such as "0.5%" of span.
func ParseAccuracy(s string) (Accuracy, error) {
	t := strings.ToUpper(strings.Join(strings.Fields(s), " "))
	if grade, ok := strings.CutPrefix(t, "ASME "); ok {
		return ASMEGrade(grade)
	}
	if class, ok := strings.CutPrefix(t, "EN "); ok {
		return ENClass(class)
	}
	if n, ok := strings.CutSuffix(t, "%"); ok {
		if v, err := strconv.ParseFloat(strings.TrimSpace(n), 64); err == nil {
			return StatedPercent(v)
		}
	}
	return Accuracy{}, fmt.Errorf("accuracy %q is not known; write ASME 4A to D, EN %s, or a figure such as 0.5%% of span up to 10%%", s, strings.Join(enClasses, ", "))
}

func (a Accuracy) String() string { return a.name }

// Limit returns the largest error allowed at a reading, gauge pascals, either way. Reading and span count from the lower end
// of the scale.
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

// Gauge is a pressure gauge that reads from SpanLow, normally zero, to Span.
type Gauge struct {
	Name       string
	SpanLow    quantity.GaugePressure
	Span       quantity.GaugePressure
	Accuracy   Accuracy
	Graduation quantity.GaugePressure // one division of the dial
	// TempCoefficient is the fraction of span per kelvin away from 20 degC; zero stands for 0.0004, the limit of EN 837-1 for
	// Bourdon gauges as quoted by secondary sources.
	TempCoefficient       float64
	Correction            []CorrectionPoint
	CorrectionUncertainty quantity.GaugePressure // expanded, k = 2; used in place of the class when it and the table are given
	InCalibration         bool
	CalibrationNote       string // the dates, for the reason when it is not
}

// corrected applies the certificate's table, in straight lines between its rows and level beyond them.
func (g Gauge) corrected(reading quantity.GaugePressure) quantity.GaugePressure {
	if len(g.Correction) == 0 {
		return reading
	}
	rows := slices.Clone(g.Correction)
	slices.SortFunc(rows, func(a, b CorrectionPoint) int { return cmp.Compare(a.Reading, b.Reading) })
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

// shows is what the dial shows at a true gauge pressure: corrected undone. Corrections change slowly along a dial, so the one
// at the pressure stands for the one at the reading.
func (g Gauge) shows(p quantity.GaugePressure) quantity.GaugePressure {
	return p - (g.corrected(p) - p)
}

// certified says whether a certificate replaces the gauge's class. A table without its uncertainty does not.
func (g Gauge) certified() bool { return len(g.Correction) > 0 && g.CorrectionUncertainty > 0 }

// warmth returns the temperature coefficient as a fraction of span per kelvin.
func (g Gauge) warmth() float64 {
	if g.TempCoefficient == 0 {
		return 0.0004
	}
	return g.TempCoefficient
}

// uncertainty returns the standard uncertainties of a reading of the dial: by class or certificate, of reading the dial, and
// of the gauge's own temperature.
func (g Gauge) uncertainty(reading quantity.GaugePressure, at quantity.Temperature) [3]quantity.GaugePressure {
	span := g.Span - g.SpanLow
	u := [3]quantity.GaugePressure{
		rectangular(g.Accuracy.Limit(reading-g.SpanLow, span)),
		rectangular(g.Graduation / 2),
		rectangular(span * quantity.GaugePressure(g.warmth()*math.Abs(float64(at-gaugeReference)))),
	}
	if g.certified() {
		u[0] = g.CorrectionUncertainty / 2
	}
	return u
}

// repeatable is the part of a gauge's class by which it errs anew at each reading (common practice, no source).
const repeatable = 0.2

// Apart returns a reading as the certificate corrects it, and two standard uncertainties: each is new at every reading; bias is the
// same for all that are taken one after the other. The gauge has its own temperature at. Pascals.
func (g Gauge) Apart(reading quantity.GaugePressure, at quantity.Temperature) (corrected, each, bias quantity.GaugePressure) {
	corrected = g.corrected(reading)
	u := g.uncertainty(corrected, at)
	return corrected, root(repeatable*u[0], u[1]), root(u[0], u[2])
}

// named describes a gauge of the choice below to somebody who looks for one.
func (g Gauge) named(in Units) string {
	return fmt.Sprintf("%s, 0 to %s, divisions of %s or finer", g.Accuracy, in.Pressure(g.Span), in.Pressure(g.Graduation))
}

// Gauges to choose from when the one at hand will not do, coarse to fine: class, and divisions in the span; by the unit of the
// ranges. (Common practice, no source.)
var choices = map[string]struct {
	classes   []string
	divisions []quantity.GaugePressure
	spans     []quantity.GaugePressure
}{
	"psi": {[]string{"ASME B", "ASME A", "ASME 2A", "ASME 3A", "ASME 4A"}, []quantity.GaugePressure{100, 100, 200, 400, 1000}, []quantity.GaugePressure{100, 200, 300, 600, 1000, 1500, 2000, 3000, 5000, 10000}},
	"bar": {[]string{"EN 2.5", "EN 1.6", "EN 1", "EN 0.6", "EN 0.25", "EN 0.1"}, []quantity.GaugePressure{50, 100, 100, 200, 400, 1000}, []quantity.GaugePressure{6, 10, 16, 25, 40, 60, 100, 160, 250, 400, 600}},
}

// betterGauge names the coarsest gauge with which a reading's dial adds so little that the standard uncertainty on the dial
// stays below most, given what the other inputs contribute; nil when no gauge would do. The span is the smallest that has
// the reading in its lower three quarters, where a dial is read (UFC 4-390-01).
func betterGauge(in Units, reading quantity.GaugePressure, at quantity.Temperature, others, most quantity.GaugePressure) *Gauge {
	unit, one := "psi", onePsi
	if in.P != "" && in.P != "psi" {
		unit, one = "bar", oneBar
	}
	offer := choices[unit]
	for _, span := range offer.spans {
		if span *= one; reading > span*3/4 {
			continue
		}
		for i, class := range offer.classes {
			accuracy, err := ParseAccuracy(class)
			if err != nil {
				continue
			}
			g := Gauge{Span: span, Accuracy: accuracy, Graduation: span / offer.divisions[i]}
			u := g.uncertainty(reading, at)
			if root(others, u[0], u[1], u[2]) <= most {
				return &g
			}
		}
		return nil
	}
	return nil
}

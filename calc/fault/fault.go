// Package fault says what a pattern of readings of one unit points to, with the evidence for and against each cause and the
// next test that would tell. It reasons as a technician does: facts are found in the history (facts.go), a table weighs them
// for each cause (rules.go), and the weights are added. Weights are natural log-odds by judgement (common practice, no
// source), so the result is an order and a word, never a probability.
//
// It is pure: no clock, no files, no state; the same history gives the same findings in whatever order it is handed in.
package fault

import (
	"cmp"
	"slices"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
)

// Kind says on which occasion an observation was made.
type Kind int

// Kinds of observation.
const (
	Check       Kind = iota // a reading as found
	ChargeFound             // before gas was added or bled
	ChargeLeft              // after it: a new stretch of the history starts here
)

// Observation is one reading of a unit's gas side with what was noted beside it.
type Observation struct {
	When    time.Time
	Kind    Kind
	Gauge   string       // asset number
	Reading calc.Reading // as entered; on a ChargeLeft, Soak is the time since the charging stopped, zero: not noted
	// Corrected is the gauge pressure at the sheet's reference temperature and ambient pressure, as calc.Judge gives it for a
	// sheet without a chart; zero: it is found here from the reading, without the gauge's certificate.
	Corrected                 quantity.GaugePressure
	U                         quantity.GaugePressure // expanded uncertainty of Corrected, k = 2; zero: 2 % of the pressure
	PressureIn, TemperatureIn string                 // units in which they were typed, such as "bar" and "F"; "" for the sheet's
	Remarks                   []Remark
}

// Other is another unit of the same field, of any part number.
type Other struct {
	Unit   string
	Limits calc.Limits
	Seen   []Observation
}

// History is what is known of one unit.
type History struct {
	Unit   string
	Limits calc.Limits
	// Allowed is the allowed loss of corrected pressure a day, pascals; 0: not known.
	Allowed quantity.GaugePressure
	Seen    []Observation
	Noticed []Remark // now, beside no reading
	Others  []Other
}

// Finding is one cause with its evidence. Sentences carry the numbers, in the units of the sheet.
type Finding struct {
	Cause        Cause
	Strength     Strength
	For, Against []string
	Next         string // the test that would tell this cause from the one ranked next
	weight       float64
}

// Strength is how strongly the evidence points to a cause, after what speaks against it is taken off.
type Strength int

// Strengths, rising.
const (
	Weak Strength = iota
	Possible
	Likely
	Strong
)

func (s Strength) String() string {
	return [...]string{"little speaks for it", "possible", "likely", "points strongly to it"}[min(max(s, Weak), Strong)]
}

// strengthOf puts a sum of weights into a word: odds of about 2, 7 and 30 to one.
func strengthOf(weight float64) Strength {
	switch {
	case weight >= 3.4:
		return Strong
	case weight >= 2:
		return Likely
	case weight >= 0.7:
		return Possible
	}
	return Weak
}

// Explain ranks the causes for which something speaks, the likeliest first. Observations with no usable pressure or time are
// left out; those with no temperature count only where the pressure alone tells something. No finding means that nothing in
// the history points to a fault. It never fails: what cannot be computed is no evidence.
func Explain(h History) []Finding {
	e := gather(h)
	var out []Finding
	for _, r := range rules {
		f := Finding{Cause: r.cause, weight: r.before}
		for _, c := range r.clues {
			sentence, holds := c.fact(e)
			switch {
			case !holds:
				continue
			case c.weight > 0:
				f.For = append(f.For, sentence)
			default:
				f.Against = append(f.Against, sentence)
			}
			f.weight += c.weight
		}
		f.Strength = strengthOf(f.weight)
		if len(f.For) > 0 {
			out = append(out, f)
		}
	}
	slices.SortStableFunc(out, func(a, b Finding) int {
		return cmp.Or(cmp.Compare(b.weight, a.weight), cmp.Compare(a.Cause, b.Cause))
	})
	for i := range out {
		out[i].Next = testOf(out[i].Cause)
		if i+1 < len(out) {
			out[i].Next = testBetween(out[i].Cause, out[i+1].Cause)
		}
	}
	return out
}

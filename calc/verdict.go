package calc

import (
	"fmt"
	"math"
	"strings"
	"time"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Class is the outcome of a check.
type Class int

// Classes: the four of ILAC-G8:09/2019, and two for when no comparison can be made.
const (
	NotAssessable Class = iota
	NotMeasurable
	Pass
	ConditionalPass
	ConditionalFail
	Fail
)

var classWords = [...]string{"not assessable", "not measurable with this gauge", "pass", "conditional pass", "conditional fail", "fail"}

func (c Class) String() string { return classWords[c] }

// ParseClass reads a class's words.
func ParseClass(s string) (Class, error) {
	for i, w := range classWords {
		if w == s {
			return Class(i), nil
		}
	}
	return NotAssessable, fmt.Errorf("%q is not a verdict", s)
}

// TemperatureSource says where the gas temperature comes from.
type TemperatureSource int

// Sources of a gas temperature.
const (
	TemperatureUnknown TemperatureSource = iota
	ShellProbe
	AmbientAfterSoak
)

// Relief is how the fluid side was relieved and the pressure seen there afterwards.
type Relief struct {
	How           string
	FluidPressure quantity.GaugePressure
	Seen          bool
}

// Reading is a pressure with what it takes to judge it.
type Reading struct {
	Gauge           quantity.GaugePressure
	Temperature     quantity.Temperature
	TemperatureFrom TemperatureSource
	Soak            time.Duration
	Ambient         quantity.Pressure
	AmbientKnown    bool
	Relieved        Relief
}

// Limits are the approved data of a sheet: a chart, or a reference charge with tolerances at a reference temperature.
type Limits struct {
	Gas                 *gas.Model
	Ambient             quantity.Pressure // at which the sheet's gauge pressures hold
	Reference           quantity.Temperature
	Charge, Minus, Plus quantity.GaugePressure
	Chart               *Chart
	Rated               quantity.GaugePressure // of the charging valve; 0 not known
	SystemPressure      quantity.GaugePressure // 0 not known
	TempLow, TempHigh   quantity.Temperature   // 0 none
}

// Rule is how a value near a limit is decided (ILAC-G8:09/2019, JCGM 106): by a guard band of so many standard
// uncertainties.
type Rule struct {
	name string
	z    float64
}

// GuardBanded takes a guard band of w = U, k = 2: at most 2.3 % of values accepted at the limit are outside it.
func GuardBanded() Rule { return Rule{"guard band w = U (k = 2)", 2} }

// SimpleAcceptance takes no guard band: up to 50 % of values accepted at the limit are outside it.
func SimpleAcceptance() Rule { return Rule{"simple acceptance", 0} }

// MaxFalseAccept takes the guard band that holds the risk at the limit to p, between 0 and 0.5.
func MaxFalseAccept(p float64) (Rule, error) {
	if !(p > 0 && p <= 0.5) {
		return Rule{}, fmt.Errorf("a false-accept risk of %v is not between 0 and 0.5", p)
	}
	return Rule{fmt.Sprintf("false-accept risk at most %.3g", p), math.Sqrt2 * math.Erfinv(1-2*p)}, nil
}

func (r Rule) String() string { return r.name }

// Verdict is what a reading says against the limits. Pressures are gauge pascals, at the sheet's reference temperature and
// ambient pressure; with a chart, at the reading's own temperature.
type Verdict struct {
	Class             Class
	Reasons           []string // why no comparison was made
	Corrected         quantity.GaugePressure
	Low, Target, High quantity.GaugePressure
	U                 quantity.GaugePressure // expanded uncertainty, k = 2
	Conformance       float64                // probability that the true value is in limits
	Budget            []Term
	Next              string // what to do, in the trade's words
	Sentence          string // for somebody who was not there
}

// relieved is the fluid pressure up to which a dial counts as showing none (common practice, no source).
const relievedBelow quantity.GaugePressure = 50 * 6894.757293168361

// Judge decides. It never fails: what stands in the way is a reason of a verdict of not assessable, all reasons at once.
//
// Source: uncertainty by JCGM 100, decision by ILAC-G8:09/2019 sections 4.2.1 and 4.2.2 and JCGM 106.
func Judge(l Limits, g Gauge, r Reading, rule Rule) Verdict {
	v := Verdict{Reasons: obstacles(l, g, r)}
	if len(v.Reasons) > 0 {
		return v.notAssessable()
	}
	reading := g.corrected(r.Gauge)
	rho, err := l.Gas.Density(r.Temperature, reading.Abs(r.Ambient))
	if err == nil {
		err = v.compare(l, r, reading)
	}
	if err == nil {
		v.Budget, err = budget(l, g, r, reading, rho)
	}
	if err != nil {
		v.Reasons = append(v.Reasons, err.Error())
		return v.notAssessable()
	}
	u := combined(v.Budget)
	v.U = step(2 * u)
	v.Conformance = conformance(float64(v.Corrected), float64(v.Low), float64(v.High), float64(u))
	v.decide(step(quantity.GaugePressure(rule.z) * u))
	v.advise(l, g)
	return v
}

// obstacles returns everything that forbids a comparison.
func obstacles(l Limits, g Gauge, r Reading) []string {
	var why []string
	add := func(format string, args ...any) { why = append(why, fmt.Sprintf(format, args...)) }
	switch {
	case strings.TrimSpace(r.Relieved.How) == "" || !r.Relieved.Seen:
		add("it is not said how the fluid side was relieved and what pressure was seen there")
	case r.Relieved.FluidPressure > relievedBelow:
		add("hydraulic pressure was not relieved: %s on the fluid side", psi(r.Relieved.FluidPressure))
	}
	if l.SystemPressure > 0 && l.Charge < l.SystemPressure*9/10 && math.Abs(float64(r.Gauge-l.SystemPressure)) < 0.03*float64(l.SystemPressure) {
		add("the reading of %s agrees with system pressure %s: the gauge is then reading the fluid", psi(r.Gauge), psi(l.SystemPressure))
	}
	switch {
	case !g.InCalibration:
		add("gauge %s is out of calibration (%s)", g.Name, g.CalibrationNote)
	case !(g.Span > 0 && g.Graduation > 0):
		add("gauge %s has no span or graduation", g.Name)
	}
	if !(r.Gauge > 0 && r.Gauge <= g.Span) {
		add("the reading of %s is outside the gauge's span of 0 to %s", psi(r.Gauge), psi(g.Span))
	}
	switch r.TemperatureFrom {
	case TemperatureUnknown:
		add("the gas temperature is not known")
	case AmbientAfterSoak:
		if r.Soak < MinimumSoak {
			add("the unit soaked %.0f min; below %.0f min the air says nothing of the gas", r.Soak.Minutes(), MinimumSoak.Minutes())
		}
	}
	if l.Rated > 0 && r.Gauge > l.Rated {
		add("the charging valve is rated %s, below the reading of %s", psi(l.Rated), psi(r.Gauge))
	}
	if l.TempLow > 0 && r.Temperature < l.TempLow || l.TempHigh > 0 && r.Temperature > l.TempHigh {
		add("the gas temperature of %s is outside the sheet's range of %s to %s", kelvin(r.Temperature), kelvin(l.TempLow), kelvin(l.TempHigh))
	}
	if l.Chart != nil {
		if _, _, _, err := l.Chart.At(r.Temperature); err != nil {
			add("the gas temperature of %s is outside the chart, which runs from %s to %s", kelvin(r.Temperature), kelvin(l.Chart.rows[0].Temperature), kelvin(l.Chart.rows[len(l.Chart.rows)-1].Temperature))
		}
	}
	return why
}

// compare sets the corrected pressure and the limits that it stands against.
func (v *Verdict) compare(l Limits, r Reading, reading quantity.GaugePressure) error {
	if l.Chart != nil {
		low, charge, high, err := l.Chart.At(r.Temperature)
		// The same gas under another ambient pressure: only the gauge's zero moves.
		v.Corrected = step(reading.Abs(r.Ambient).Gauge(l.Ambient))
		v.Low, v.Target, v.High = step(low), step(charge), step(high)
		return err
	}
	p, err := Correct(l.Gas, reading.Abs(r.Ambient), r.Temperature, l.Reference)
	v.Corrected = step(p.Gauge(l.Ambient))
	v.Low, v.Target, v.High = step(l.Charge-l.Minus), step(l.Charge), step(l.Charge+l.Plus)
	return err
}

// decide sets the class with a guard band w inside and outside of each limit.
func (v *Verdict) decide(w quantity.GaugePressure) {
	inside := min(v.Corrected-v.Low, v.High-v.Corrected) // negative outside
	switch {
	case inside < -w:
		v.Class = Fail // certain whatever the tolerance's width
	case v.High-v.Low < 2*w:
		v.Class = NotMeasurable
	case inside >= w:
		v.Class = Pass
	case inside >= 0:
		v.Class = ConditionalPass
	default:
		v.Class = ConditionalFail
	}
}

func (v *Verdict) notAssessable() Verdict {
	v.Class = NotAssessable
	v.Next = "put right what is named and read again; no conclusion may be drawn from this reading"
	v.Sentence = "Not assessable: " + strings.Join(v.Reasons, "; ") + "."
	return *v
}

func (v *Verdict) advise(l Limits, g Gauge) {
	short := v.Target - v.Corrected
	amount := fmt.Sprintf("charge by about %s", psi(short))
	if short < 0 {
		amount = fmt.Sprintf("bleed by about %s", psi(-short))
	}
	if l.Chart == nil {
		amount += fmt.Sprintf(" (at %s)", kelvin(l.Reference))
	}
	better := fmt.Sprintf("use a better gauge: one with U of at most %s at this reading", psi((v.High-v.Low)/2))
	switch v.Class {
	case Pass:
		v.Next = "nothing; the charge is in limits"
	case ConditionalPass:
		v.Next = "read again with a better gauge, or " + amount + " to bring it clear of the limit, as the manual allows"
	case ConditionalFail:
		v.Next = amount + ", or read again with a better gauge before deciding"
	case Fail:
		v.Next = amount + "; then look for the cause, and remove from service if the manual says so"
	case NotMeasurable:
		v.Next = better
	}
	where := fmt.Sprintf("corrected to %s the charge is %s", kelvin(l.Reference), psi(v.Corrected))
	if l.Chart != nil {
		where = fmt.Sprintf("the charge is %s", psi(v.Corrected))
	}
	v.Sentence = fmt.Sprintf("%s: %s against %s to %s, known to +/-%s with gauge %s; the chance that it is in limits is %s.",
		strings.ToUpper(v.Class.String()[:1])+v.Class.String()[1:], where, psi(v.Low), psi(v.High), psi(v.U), g.Name, percent(v.Conformance))
}

func percent(p float64) string {
	switch {
	case p > 0.9995:
		return "over 99.9 %"
	case p < 0.0005:
		return "under 0.1 %"
	}
	return fmt.Sprintf("%.1f %%", 100*p)
}

package calc

import (
	"cmp"
	"fmt"
	"math"
	"slices"
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

func (c Class) String() string {
	if c < 0 || int(c) >= len(classWords) {
		return fmt.Sprintf("Class(%d)", int(c))
	}
	return classWords[c]
}

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
	In                  Units                  // of the words
}

// Rule is how a value near a limit is decided (ILAC-G8:09/2019, JCGM 106): by a guard band of so many standard
// uncertainties. The zero Rule is GuardBanded.
type Rule struct {
	name string
	z    float64
}

// GuardBanded takes a guard band of w = U, k = 2: at most 2.3 % of values accepted at the limit are outside it.
func GuardBanded() Rule { return Rule{} }

// SimpleAcceptance takes no guard band: up to 50 % of values accepted at the limit are outside it.
func SimpleAcceptance() Rule { return Rule{"simple acceptance", 0} }

// MaxFalseAccept takes the guard band that holds the risk at the limit to p, between 0 and 0.5.
func MaxFalseAccept(p float64) (Rule, error) {
	if !(p > 0 && p <= 0.5) {
		return Rule{}, fmt.Errorf("a false-accept risk of %v is not between 0 and 0.5", p)
	}
	return Rule{fmt.Sprintf("false-accept risk at most %.3g", p), math.Sqrt2 * math.Erfinv(1-2*p)}, nil
}

func (r Rule) String() string {
	if r == (Rule{}) {
		return "guard band w = U (k = 2)"
	}
	return r.name
}

// guard returns the guard band in standard uncertainties.
func (r Rule) guard() quantity.GaugePressure {
	if r == (Rule{}) {
		return 2
	}
	return quantity.GaugePressure(r.z)
}

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

// Fluid pressure up to which a dial counts as showing none, and how near system pressure a reading is suspect, as a part of
// system pressure; a charge that is itself that high is not (all common practice, no source).
var relievedBelow = 50 * onePsi

const (
	nearSystem = 0.03
	highCharge = 0.9
)

// Judge decides. It never fails: what stands in the way is a reason of a verdict of not assessable, all reasons at once.
//
// Source: uncertainty by JCGM 100, decision by ILAC-G8:09/2019 sections 4.2.1 and 4.2.2 and JCGM 106.
func Judge(l Limits, g Gauge, r Reading, rule Rule) Verdict {
	reading := g.corrected(r.Gauge)
	v, why := compare(l, r, reading)
	why = append(obstacles(l, g, r, v.Target), why...)
	if len(why) > 0 {
		return notAssessable(why)
	}
	v.Budget = budget(l, g, r, reading, v.at, v.ref)
	u := combined(v.Budget)
	v.U = step(2 * u)
	v.Conformance = conformance(float64(v.Corrected), float64(v.Low), float64(v.High), float64(u))
	w := step(rule.guard() * u)
	v.Class = decide(v.inside(), v.High-v.Low, w)
	v.Next = v.next(l, g, r, rule, reading)
	v.Sentence = v.sentence(l, g, r, w)
	return v.Verdict
}

// comparison is a verdict in the making, with the state of the gas as read and as the limits take it.
type comparison struct {
	Verdict
	at, ref gas.State
}

// inside is how far the charge lies within the nearer limit; negative outside.
func (v *comparison) inside() quantity.GaugePressure {
	return min(v.Corrected-v.Low, v.High-v.Corrected)
}

// obstacle is why no comparison is possible, and what removes it.
type obstacle struct{ why, remedy string }

const putSheetRight = "have the sheet put right"

// compare finds the corrected pressure and the limits that it stands against.
func compare(l Limits, r Reading, reading quantity.GaugePressure) (comparison, []obstacle) {
	var v comparison
	var why []obstacle
	known := r.TemperatureFrom != TemperatureUnknown
	switch {
	case l.Chart == nil:
		v.Low, v.Target, v.High = step(l.Charge-l.Minus), step(l.Charge), step(l.Charge+l.Plus)
		if !(l.Minus >= 0 && l.Plus >= 0 && v.Low >= 0 && v.Target > 0 && plausible(v.High)) {
			why = append(why, obstacle{"the sheet has neither a chart nor a charge with its tolerance", putSheetRight})
		}
	case known:
		low, charge, high, err := l.Chart.At(r.Temperature)
		v.Low, v.Target, v.High = step(low), step(charge), step(high)
		if err != nil {
			why = append(why, obstacle{"outside the chart: " + err.Error(), "let the unit come to a temperature on the chart"})
		}
	}
	if l.Gas == nil {
		return v, append(why, obstacle{"the sheet names no gas", putSheetRight})
	}
	if !known || !(r.Gauge > 0) || !(l.Ambient > 0) {
		return v, why // obstacles says so
	}
	rho, err := l.Gas.Density(r.Temperature, reading.Abs(r.Ambient))
	if err == nil {
		v.at, err = l.Gas.State(r.Temperature, rho)
		v.ref = v.at
	}
	if err == nil && l.Chart == nil {
		v.ref, err = l.Gas.State(l.Reference, rho)
	}
	if err != nil {
		return v, append(why, obstacle{err.Error(), "see that pressure, temperature and units are what was meant"})
	}
	// With a chart only the gauge's zero moves, with ambient pressure.
	v.Corrected = step(v.ref.P.Gauge(l.Ambient))
	if l.Chart != nil {
		v.Corrected = step(reading.Abs(r.Ambient).Gauge(l.Ambient))
	}
	return v, why
}

// obstacles returns everything else that forbids a comparison, in the order in which a person would deal with it.
func obstacles(l Limits, g Gauge, r Reading, target quantity.GaugePressure) []obstacle {
	var why []obstacle
	add := func(remedy, format string, args ...any) {
		why = append(why, obstacle{fmt.Sprintf(format, args...), remedy})
	}
	const relieve = "relieve the fluid side, working every circuit of this unit"
	switch {
	case strings.TrimSpace(r.Relieved.How) == "" || !r.Relieved.Seen:
		add("relieve the fluid side and note how, and the pressure seen there", "it is not said how the fluid side was relieved and what pressure was seen there")
	case !(r.Relieved.FluidPressure <= relievedBelow):
		add(relieve, "hydraulic pressure was not relieved: %s on the fluid side", l.In.Pressure(r.Relieved.FluidPressure))
	}
	if l.looksLikeFluid(r.Gauge, target) {
		add(relieve, "the reading of %s agrees with system pressure %s: the gauge is then reading the fluid", l.In.Pressure(r.Gauge), l.In.Pressure(l.SystemPressure))
	}
	why = append(why, g.obstacles()...)
	if !(r.Gauge > 0 && r.Gauge >= g.SpanLow && r.Gauge <= g.Span) {
		add("use a gauge whose span holds the pressure", "the reading of %s is outside the gauge's span of %s to %s", l.In.Pressure(r.Gauge), l.In.Pressure(g.SpanLow), l.In.Pressure(g.Span))
	}
	why = append(why, l.ambientObstacles(r.Ambient)...)
	switch r.TemperatureFrom {
	case ShellProbe:
	case AmbientAfterSoak:
		if r.Soak < MinimumSoak {
			add(fmt.Sprintf("repeat after another %.0f min of soak, or use a shell probe", math.Ceil((MinimumSoak-max(r.Soak, 0)).Minutes())),
				"the unit soaked %.0f min; below %.0f min the air says nothing of the gas", r.Soak.Minutes(), MinimumSoak.Minutes())
		}
	default:
		add("take the gas temperature: a probe on the shell, or the air after a soak", "the gas temperature is not known")
	}
	if l.Rated > 0 && r.Gauge > l.Rated {
		add("bleed below the valve's rating and follow the manual on a valve that was over-pressed", "the charging valve is rated %s, below the reading of %s", l.In.Pressure(l.Rated), l.In.Pressure(r.Gauge))
	}
	return append(why, l.obstacles(r.Temperature)...)
}

// obstacles returns what forbids the use of the gauge, whatever it reads.
func (g Gauge) obstacles() []obstacle {
	var why []obstacle
	add := func(remedy, format string, args ...any) {
		why = append(why, obstacle{fmt.Sprintf(format, args...), remedy})
	}
	if !g.InCalibration {
		note := ""
		if g.CalibrationNote != "" {
			note = " (" + g.CalibrationNote + ")"
		}
		add("use a gauge that is in calibration", "gauge %s is out of calibration%s", g.Name, note)
	}
	if !(g.Span > g.SpanLow && plausible(g.Span-g.SpanLow) && g.Graduation > 0 && g.Graduation <= g.Span-g.SpanLow && g.warmth() > 0 && g.warmth() < 1) {
		add("register the gauge with its span and division", "gauge %s has no usable span, division or temperature coefficient", g.Name)
	}
	if g.Accuracy == (Accuracy{}) && !g.certified() {
		add("register the gauge with its accuracy", "gauge %s has neither an accuracy class nor a certificate with its uncertainty", g.Name)
	}
	if !plausible(g.CorrectionUncertainty) || slices.ContainsFunc(g.Correction, func(c CorrectionPoint) bool { return !plausible(c.Reading) || !plausible(c.Correction) }) {
		add("register the gauge's certificate again", "the certificate of gauge %s has a figure that is no number", g.Name)
	}
	return why
}

// obstacles returns what the sheet says against a gas temperature.
func (l Limits) obstacles(at quantity.Temperature) []obstacle {
	var why []obstacle
	add := func(remedy, format string, args ...any) {
		why = append(why, obstacle{fmt.Sprintf(format, args...), remedy})
	}
	if l.TempLow > 0 && at < l.TempLow {
		add("let the unit warm into the sheet's range", "the gas temperature of %s is below the sheet's least, %s", l.In.Temperature(at), l.In.Temperature(l.TempLow))
	}
	if l.TempHigh > 0 && at > l.TempHigh {
		add("let the unit cool into the sheet's range", "the gas temperature of %s is above the sheet's highest, %s", l.In.Temperature(at), l.In.Temperature(l.TempHigh))
	}
	return why
}

// looksLikeFluid says whether a dial that shows so much may be reading the fluid side.
func (l Limits) looksLikeFluid(dial, target quantity.GaugePressure) bool {
	s := l.SystemPressure
	return s > 0 && target < s*highCharge && math.Abs(float64(dial-s)) < nearSystem*float64(s)
}

func (l Limits) ambientObstacles(ambient quantity.Pressure) []obstacle {
	if ambient >= 20_000 && ambient <= 115_000 && l.Ambient >= 20_000 && l.Ambient <= 115_000 {
		return nil
	}
	return []obstacle{{fmt.Sprintf("the ambient pressure of %.0f hPa, or the sheet's of %.0f hPa, is none on Earth", ambient/100, l.Ambient/100), "enter the station pressure, not reduced to sea level"}}
}

// plausible says whether a figure can be a pressure on a gauge or sheet at all: up to 1 GPa, above any gas gauge. It keeps what
// is no number, and what would overflow, out of the arithmetic.
func plausible(g quantity.GaugePressure) bool { return math.Abs(float64(g)) <= 1e9 }

func notAssessable(why []obstacle) Verdict {
	v := Verdict{Class: NotAssessable}
	var remedies []string
	for _, o := range why {
		v.Reasons = append(v.Reasons, o.why)
		if !slices.Contains(remedies, o.remedy) {
			remedies = append(remedies, o.remedy)
		}
	}
	v.Next = strings.Join(remedies, "; ") + "; then read again: no conclusion may be drawn from this reading"
	v.Sentence = "Not assessable: " + strings.Join(v.Reasons, "; ") + "."
	return v
}

// decide returns the class of a charge that lies so far inside its nearer limit, with a guard band w either side of it. All
// three are whole pascals.
func decide(inside, width, w quantity.GaugePressure) Class {
	switch {
	case inside < -w:
		return Fail // certain whatever the tolerance's width
	case width < 2*w:
		return NotMeasurable
	case inside >= w:
		return Pass
	case inside >= 0:
		return ConditionalPass
	}
	return ConditionalFail
}

// next says what to do in the trade's words.
func (v *comparison) next(l Limits, g Gauge, r Reading, rule Rule, reading quantity.GaugePressure) string {
	switch v.Class {
	case Pass:
		return "nothing; the charge is in limits"
	case ConditionalPass:
		return v.trim(l, g, r) + ", to bring it clear of the limit, as the manual allows; " + v.better(l, r, rule, reading, v.inside())
	case ConditionalFail:
		return v.trim(l, g, r) + "; " + v.better(l, r, rule, reading, -v.inside())
	case NotMeasurable:
		return v.better(l, r, rule, reading, v.roomOnTarget())
	}
	return v.trim(l, g, r) + "; then look for the cause, and remove from service if the manual says so"
}

// trim says by how much to charge or bleed to the target, as this gauge would show it here and now, once settled.
func (v *comparison) trim(l Limits, g Gauge, r Reading) string {
	target, what := v.Target.Abs(l.Ambient), fmt.Sprintf("on gauge %s at %s", g.Name, l.In.Temperature(r.Temperature))
	var err error
	if l.Chart == nil {
		target, err = Correct(l.Gas, target, l.Reference, r.Temperature)
	}
	if err != nil {
		return "bring it to a temperature at which the target can be set: " + err.Error()
	}
	dial, shown := step(g.shows(target.Gauge(r.Ambient))), step(r.Gauge)
	switch {
	case l.Rated > 0 && dial > l.Rated:
		return fmt.Sprintf("do not charge: the valve is rated %s, below the %s needed at %s", l.In.Pressure(l.Rated), l.In.Pressure(dial), l.In.Temperature(r.Temperature))
	case dial > g.Span:
		return fmt.Sprintf("charge with another gauge: %s is needed at %s and gauge %s ends at %s", l.In.Pressure(dial), l.In.Temperature(r.Temperature), g.Name, l.In.Pressure(g.Span))
	case dial < shown:
		return fmt.Sprintf("bleed by about %s, to %s %s once settled", l.In.Pressure(shown-dial), l.In.Pressure(dial), what)
	}
	return fmt.Sprintf("charge by about %s, to %s %s once settled", l.In.Pressure(dial-shown), l.In.Pressure(dial), what)
}

// roomOnTarget is the widest guard band with which a charge on target passes; where the target is itself a limit, with which
// some charge does.
func (v *comparison) roomOnTarget() quantity.GaugePressure {
	if room := min(v.Target-v.Low, v.High-v.Target); room > 0 {
		return room
	}
	return (v.High - v.Low) / 2
}

// choose returns a gauge whose guard band would leave the room free, nil when none would.
func (v *comparison) choose(l Limits, r Reading, rule Rule, reading, room quantity.GaugePressure) *Gauge {
	byP := quantity.GaugePressure(v.ref.DpDRho / v.at.DpDRho)
	return betterGauge(l.In, reading, r.Temperature, combined(v.Budget[gaugeTerms:])/byP, room/rule.guard()/byP)
}

// better names that gauge, or says what stands in the way of any.
func (v *comparison) better(l Limits, r Reading, rule Rule, reading, room quantity.GaugePressure) string {
	if b := v.choose(l, r, rule, reading, room); b != nil {
		return "to decide, read again with a better gauge: " + b.named(l.In)
	}
	return v.noBetter(l, r, rule, room)
}

func (v *comparison) noBetter(l Limits, r Reading, rule Rule, room quantity.GaugePressure) string {
	others := v.Budget[gaugeTerms:]
	if warmth := v.Budget[gaugeTerms-1:]; rule.guard()*combined(others) <= room && rule.guard()*combined(warmth) > room {
		return fmt.Sprintf("no better gauge alone would decide: a gauge at %s is away from its 20 C by so much that +/-%s remain; bring gauge and unit nearer to it",
			l.In.Temperature(r.Temperature), l.In.Pressure(rule.guard()*warmth[0].U))
	}
	worst := slices.MaxFunc(others, func(a, b Term) int { return cmp.Compare(a.U, b.U) })
	soak := ""
	if worst.Name == gasTemperature && r.TemperatureFrom == AmbientAfterSoak {
		soak = "; repeat after a longer soak or with a shell probe"
	}
	return fmt.Sprintf("no better gauge alone would decide: %s leaves +/-%s%s", worst.Name, l.In.Pressure(rule.guard()*worst.U), soak)
}

var temperatureWords = map[TemperatureSource]string{ShellProbe: "by a probe on the shell", AmbientAfterSoak: "by the air after a soak"}

// sentence explains the verdict with its numbers to somebody who was not there.
func (v *comparison) sentence(l Limits, g Gauge, r Reading, w quantity.GaugePressure) string {
	inside, band, because := v.inside(), l.In.Pressure(w), ""
	switch v.Class {
	case Pass:
		because = l.In.Pressure(inside) + " inside, and the guard band is " + band
	case ConditionalPass:
		because = l.In.Pressure(inside) + " inside, less than the guard band of " + band
	case ConditionalFail:
		because = l.In.Pressure(-inside) + " outside, but less than the guard band of " + band
	case Fail:
		because = l.In.Pressure(-inside) + " outside, more than the guard band of " + band
	default:
		because = "narrower than twice the guard band of " + band + ", so no reading of this gauge could pass"
	}
	corrected := ", which is " + l.In.Pressure(v.Corrected) + " at " + l.In.Temperature(l.Reference)
	if l.Chart != nil {
		corrected = ", which is " + l.In.Pressure(v.Corrected) + " at the chart's ambient pressure"
	}
	class := v.Class.String()
	return strings.ToUpper(class[:1]) + class[1:] + ": gauge " + g.Name + " showed " + l.In.Pressure(r.Gauge) + " at " + l.In.Temperature(r.Temperature) + " " + temperatureWords[r.TemperatureFrom] +
		corrected + ", known to +/-" + l.In.Pressure(v.U) + " (k = 2); the limits are " + l.In.Pressure(v.Low) + " to " + l.In.Pressure(v.High) + ": " + because +
		"; the chance that it is in limits is " + percent(v.Conformance) + "."
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

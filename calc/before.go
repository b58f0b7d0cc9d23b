package calc

import (
	"fmt"
	"strings"

	"example.org/chargehand/calc/quantity"
)

// Outlook is what can be said before a reading is taken. Pressures of the dial are as the gauge would show them, its
// certificate's correction included, at the temperature and ambient pressure of the question; they are zero where the sheet or
// the gas says nothing there.
type Outlook struct {
	// Class is the verdict that a charge exactly on target would get: Pass when the gauge can decide, ConditionalPass when only
	// a charge away from the target could pass, NotMeasurable when none could, NotAssessable with Reasons.
	Class             Class
	Reasons           []string
	Low, Target, High quantity.GaugePressure // on the dial
	U                 quantity.GaugePressure // expanded uncertainty of a charge on target, k = 2, as in a Verdict
	Better            *Gauge                 // the coarsest that would do where this one does not; nil when none would
	Next              string                 // what to do, in the trade's words
	Sentence          string
}

// Before says what the dial should show at a gas temperature and ambient pressure, and whether the gauge can measure the sheet's
// tolerance there: by judging a charge that is exactly on target, with the gas temperature from a probe on the shell. It never
// fails; what will stand in the way of a verdict is a reason.
//
// Valid, and by the same sources, as Judge.
func Before(l Limits, g Gauge, at quantity.Temperature, ambient quantity.Pressure, rule Rule) Outlook {
	r := Reading{Temperature: at, TemperatureFrom: ShellProbe, Ambient: ambient, AmbientKnown: true}
	v, why := compare(l, r, 0) // without a reading: the limits, and what is wrong with the sheet
	why = append(append(why, l.ambientObstacles(ambient)...), l.obstacles(at)...)
	bad, dial := g.obstacles(), g
	if len(bad) > 0 {
		dial = Gauge{} // of a gauge that may not be used the certificate says nothing
	}
	var o Outlook
	if len(why) == 0 {
		var err error
		if o, err = dial.outlook(l, v.Verdict, at, ambient); err != nil {
			why = append(why, obstacle{err.Error(), "let the unit come to a temperature at which the target can be set"})
		}
	}
	if len(why) > 0 {
		return o.notAssessable(l.In, append(why, bad...))
	}

	r.Gauge = o.Target
	reading := dial.corrected(r.Gauge)
	if v, why = compare(l, r, reading); len(why) > 0 {
		return o.notAssessable(l.In, append(why, bad...))
	}
	v.Budget = budget(l, dial, r, reading, v.at, v.ref)
	better := func() *Gauge { return v.choose(l, r, rule, reading, v.roomOnTarget()) }
	where := "at " + l.In.Temperature(at)
	if l.Rated > 0 && o.Target > l.Rated {
		why = append(why, obstacle{fmt.Sprintf("the charging valve is rated %s, below the %s that the target shows %s", l.In.Pressure(l.Rated), l.In.Pressure(o.Target), where), "do not charge until the unit is cooler"})
	}
	if l.looksLikeFluid(o.Target, v.Target) {
		why = append(why, obstacle{fmt.Sprintf("the target shows %s %s, which agrees with system pressure %s: the dial could not tell gas from fluid", l.In.Pressure(o.Target), where, l.In.Pressure(l.SystemPressure)), "let the unit come to another temperature"})
	}
	if len(bad) == 0 && !(o.Target >= g.SpanLow && o.Target <= g.Span) {
		bad = []obstacle{{fmt.Sprintf("the target shows %s %s, outside the span of gauge %s of %s to %s", l.In.Pressure(o.Target), where, g.Name, l.In.Pressure(g.SpanLow), l.In.Pressure(g.Span)), "use a gauge whose span holds the pressure"}}
	}
	if why = append(why, bad...); len(why) > 0 {
		if len(bad) > 0 {
			o.Better = better()
		}
		return o.notAssessable(l.In, why)
	}

	u := combined(v.Budget)
	w := step(rule.guard() * u)
	o.U = step(2 * u)
	o.Class = decide(min(v.Target-v.Low, v.High-v.Target), v.High-v.Low, w)
	shows := fmt.Sprintf("gauge %s should show %s %s, %s to %s", g.Name, l.In.Pressure(o.Target), where, l.In.Pressure(o.Low), l.In.Pressure(o.High))
	known := "a charge on target would be known to +/-" + l.In.Pressure(o.U) + " (k = 2), and the guard band is " + l.In.Pressure(w)
	o.Next = "read: " + shows
	switch o.Class {
	case Pass:
		o.Sentence = "This gauge can decide: " + shows + "; " + known + "."
		return o
	case ConditionalPass:
		o.Sentence = "This gauge can decide only away from the target: " + shows + "; " + known + ", more than the target's distance from a limit."
	default:
		o.Sentence = "This gauge cannot decide: " + shows + "; " + known + ", so no reading could pass."
	}
	if o.Better = better(); o.Better == nil {
		o.Next = v.noBetter(l, r, rule, v.roomOnTarget())
		return o
	}
	o.Next = "take a better gauge: " + o.Better.named(l.In)
	return o
}

// outlook returns what the dial shows of the limits of v at a temperature and ambient pressure.
func (g Gauge) outlook(l Limits, v Verdict, at quantity.Temperature, ambient quantity.Pressure) (Outlook, error) {
	var o Outlook
	for _, x := range []struct {
		from quantity.GaugePressure
		to   *quantity.GaugePressure
	}{{v.Low, &o.Low}, {v.Target, &o.Target}, {v.High, &o.High}} {
		p := x.from.Abs(l.Ambient)
		if l.Chart == nil {
			var err error
			if p, err = Correct(l.Gas, p, l.Reference, at); err != nil {
				return Outlook{}, err
			}
		}
		*x.to = step(g.shows(p.Gauge(ambient)))
	}
	return o, nil
}

func (o Outlook) notAssessable(in Units, why []obstacle) Outlook {
	n := notAssessable(why)
	o.Class, o.Reasons = n.Class, n.Reasons
	o.Next, _, _ = strings.Cut(n.Next, "; then read again")
	o.Sentence = "No reading could be judged: " + strings.Join(o.Reasons, "; ") + "."
	if o.Better != nil {
		o.Next += "; " + o.Better.named(in) + " would do"
	}
	return o
}

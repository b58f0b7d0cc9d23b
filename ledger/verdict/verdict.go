// Package verdict joins the entries of a book with the calculation core. A verdict is a function of the set: of the reading,
// and of the sheet, gauge and corrections in force. It is never stored as truth; what a signer was shown stays in the entry
// as a fact, and Compare says where today's verdict differs.
package verdict

import (
	"fmt"
	"runtime"
	"slices"
	"strings"
	"sync"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// Judged is the verdict on one reading or charge (a charge is judged as left).
type Judged struct {
	Entry record.ID
	Unit  record.UnitRef
	calc.Verdict
	Sheet *ledger.Sheet // nil when none was in force at the time of the work
	// Contested are the sheets that claim the same time beside Sheet, which gives the worst verdict of them.
	Contested []*ledger.Sheet
}

// Judge returns the verdict on a reading or charge. What cannot be used is a reason of a verdict of not assessable. The
// error is for bodies that are neither.
func Judge(m *ledger.Meaning, id record.ID, body any) (Judged, error) {
	var o observation
	switch b := body.(type) {
	case record.Reading:
		o = ofReading(b)
	case record.Charge:
		o = ofCharge(b, b.AsLeft)
	default:
		return Judged{}, fmt.Errorf("a %T has no verdict", body)
	}
	var x Observed
	err := x.resolve(m, o)
	j := Judged{Entry: id, Unit: o.unit, Sheet: x.Sheet, Verdict: x.judge(err)}
	for _, s := range m.Contested(o.unit.Part, o.done) {
		y := Observed{Sheet: s}
		v := y.judge(y.under(m, o))
		j.Contested = append(j.Contested, s)
		if gravity(v.Class) > gravity(j.Class) {
			j.Verdict, j.Sheet, j.Contested[len(j.Contested)-1] = v, s, j.Sheet
		}
	}
	if len(j.Contested) > 0 {
		var others []string
		for _, s := range j.Contested {
			others = append(others, fmt.Sprintf("%s rev %s (entry %s)", s.Document, s.Revision, s.ID.Short()))
		}
		j.Sentence += fmt.Sprintf(" The sheet is contested: %s holds from the same day and says otherwise; the worst verdict counts until a lead settles it.", strings.Join(others, " and "))
		j.Next = "have a lead settle which sheet holds; until then " + j.Next
	}
	return j, nil
}

// judge is the verdict on what was resolved, or why there is none.
func (x *Observed) judge(unresolved error) calc.Verdict {
	if unresolved != nil {
		return notAssessable(unresolved.Error())
	}
	return calc.Judge(x.Limits, x.Gauge, x.Reading, calc.GuardBanded())
}

// gravity orders classes from the safest to assume to the worst.
func gravity(c calc.Class) int {
	return slices.Index([]calc.Class{calc.Pass, calc.ConditionalPass, calc.NotMeasurable, calc.NotAssessable, calc.ConditionalFail, calc.Fail}, c)
}

func ofReading(b record.Reading) observation {
	return observation{b.Unit, b.Gauge, b.Pressure, b.Temperature, b.TemperatureFrom, b.SoakMin, b.Ambient, b.Relieved, b.FluidPressure, b.Done}
}

func ofCharge(b record.Charge, o record.Observation) observation {
	return observation{b.Unit, b.Gauge, o.Pressure, o.Temperature, o.TemperatureFrom, o.SoakMin, b.Ambient, b.Relieved, b.FluidPressure, b.Done}
}

func notAssessable(reason string) calc.Verdict {
	return calc.Verdict{Class: calc.NotAssessable, Reasons: []string{reason}, Next: "put that right and read again", Sentence: "Not assessable: " + reason + "."}
}

type observation struct {
	unit                  record.UnitRef
	gauge                 string
	pressure, temperature record.Amount
	from                  string
	soakMin               *uint64
	ambient               *record.Amount
	relieved              string
	fluid                 record.Amount
	done                  record.Time
}

func (o observation) reading() (calc.Reading, error) {
	var r calc.Reading
	var p parser
	r.Gauge = p.gauge("gauge reading", o.pressure)
	r.Temperature = p.temperature("gas temperature", o.temperature)
	r.Ambient, r.AmbientKnown = quantity.StandardAtmosphere, o.ambient != nil
	if o.ambient != nil {
		r.Ambient = p.absolute("ambient pressure", *o.ambient)
	}
	r.Relieved = calc.Relief{How: o.relieved, FluidPressure: p.gauge("fluid pressure", o.fluid), Seen: true}
	switch o.from {
	case "shell":
		r.TemperatureFrom = calc.ShellProbe
	case "ambient":
		r.TemperatureFrom = calc.AmbientAfterSoak
	default:
		r.TemperatureFrom = calc.TemperatureUnknown
	}
	if o.soakMin != nil {
		r.Soak = time.Duration(min(*o.soakMin, 100_000)) * time.Minute
	}
	return r, p.err
}

// UnitsOf returns the book's own units, which the words of its verdicts use.
func UnitsOf(m *ledger.Meaning) calc.Units {
	return calc.Units{P: m.Founding.PressureUnit, T: m.Founding.TemperatureUnit}
}

// Limits returns the approved data of a sheet as the core takes them; in is for the words.
func Limits(s record.Sheet, in calc.Units) (calc.Limits, error) {
	var p parser
	model, err := gas.ByName(s.Gas)
	if err != nil {
		return calc.Limits{}, err
	}
	l := calc.Limits{In: in, Gas: model, Ambient: quantity.StandardAtmosphere, Reference: p.temperature("reference temperature", s.ReferenceTemperature)}
	if s.Ambient != nil {
		l.Ambient = p.absolute("reference ambient pressure", *s.Ambient)
	}
	opt := func(name string, a *record.Amount) quantity.GaugePressure {
		if a == nil {
			return 0
		}
		return p.gauge(name, *a)
	}
	l.Charge, l.Minus, l.Plus = opt("charge", s.Charge), opt("tolerance below", s.Minus), opt("tolerance above", s.Plus)
	l.Rated, l.SystemPressure = opt("valve rating", s.ValveRating), opt("system pressure", s.SystemPressure)
	if s.TempLow != nil {
		l.TempLow = p.temperature("lowest temperature", *s.TempLow)
	}
	if s.TempHigh != nil {
		l.TempHigh = p.temperature("highest temperature", *s.TempHigh)
	}
	if len(s.Chart) > 0 {
		rows := make([]calc.ChartRow, len(s.Chart))
		for i, r := range s.Chart {
			rows[i] = calc.ChartRow{
				Temperature: p.temperature("chart temperature", r.Temperature),
				Low:         p.gauge("chart low", r.Low), Charge: p.gauge("chart charge", r.Charge), High: p.gauge("chart high", r.High),
			}
		}
		if p.err != nil {
			return calc.Limits{}, p.err
		}
		if l.Chart, err = calc.NewChart(in, rows); err != nil {
			return calc.Limits{}, err
		}
	}
	return l, p.err
}

// gaugeOf returns a gauge of the book as the core takes it, with its calibration judged at a time.
func gaugeOf(g record.Gauge, at record.Time) (calc.Gauge, error) {
	var p parser
	acc, err := calc.ParseAccuracy(g.Accuracy)
	if err != nil {
		return calc.Gauge{}, err
	}
	c := calc.Gauge{Name: g.Asset, Span: p.gauge("span", g.Span), Accuracy: acc, Graduation: p.gauge("graduation", g.Graduation)}
	for _, k := range g.Corrections {
		c.Correction = append(c.Correction, calc.CorrectionPoint{Reading: p.gauge("calibration point", k.Reading), Correction: p.gauge("calibration correction", k.Correction)})
	}
	if g.CorrectionUncertainty != nil {
		c.CorrectionUncertainty = p.gauge("calibration uncertainty", *g.CorrectionUncertainty)
	}
	c.InCalibration = at.Unix >= g.Calibrated.Unix && at.Unix <= g.Due.Unix
	if !c.InCalibration {
		c.CalibrationNote = fmt.Sprintf("calibrated %s, due %s", day(g.Calibrated), day(g.Due))
	}
	return c, p.err
}

func day(t record.Time) string {
	return time.Unix(t.Unix, 0).In(time.FixedZone("", t.OffsetMin*60)).Format(time.DateOnly)
}

// All judges every reading and charge of the book, on all cores. The map is by entry.
func All(m *ledger.Meaning) map[record.ID]Judged {
	var ids []record.ID
	for _, u := range m.Units {
		ids = append(ids, u.Work...)
	}
	return judgeAll(m, ids)
}

func judgeAll(m *ledger.Meaning, ids []record.ID) map[record.ID]Judged {
	out := make([]Judged, len(ids))
	var wg sync.WaitGroup
	workers := runtime.GOMAXPROCS(0)
	for w := range workers {
		wg.Go(func() {
			for i := w; i < len(ids); i += workers {
				out[i], _ = Judge(m, ids[i], m.Item(ids[i]).Body) // a unit's work is readings and charges only
			}
		})
	}
	wg.Wait()
	all := make(map[record.ID]Judged, len(ids))
	for _, j := range out {
		all[j.Entry] = j
	}
	return all
}

// Moved is a verdict that differs from before.
type Moved struct {
	Entry    record.ID
	Unit     record.UnitRef
	Was, Now calc.Class
	Sentence string
	Cause    record.ID // the entry that moved it: a sheet, a gauge, a recall, or a correction or withdrawal; zero when it is none of these
}

// AgainstShown says which entries of the set show another verdict today than their signer was shown, and by which entry: the
// first one that bears on the verdict and that the signer had not seen.
func AgainstShown(m *ledger.Meaning, ids []record.ID) []Moved {
	var moved []Moved
	for _, id := range ids {
		it := m.Item(id)
		if it == nil || !it.Counts() || it.Entry().Shown == nil {
			continue
		}
		j, err := Judge(m, id, it.Body)
		if err != nil || j.Class.String() == it.Entry().Shown.Verdict {
			continue
		}
		was, _ := calc.ParseClass(it.Entry().Shown.Verdict)
		moved = append(moved, Moved{id, j.Unit, was, j.Class, j.Sentence, unseen(m, it, j)})
	}
	return moved
}

func unseen(m *ledger.Meaning, it *ledger.Item, j Judged) record.ID {
	for _, on := range bearing(m, it.ID(), j) {
		for _, id := range append([]record.ID{on}, m.Item(on).CorrectedBy...) {
			if !m.Saw(it.ID(), id) {
				return id
			}
		}
	}
	return record.ID{}
}

// bearing are the entries whose words make a verdict: the one judged, its sheet and its gauge, and what recalls those.
func bearing(m *ledger.Meaning, id record.ID, j Judged) []record.ID {
	on := []record.ID{id}
	_, gauge, done := ledger.Subject(m.Item(id).Body)
	if j.Sheet != nil {
		on = append(on, j.Sheet.ID)
		if r := m.SheetRecall(j.Sheet.ID, done); r != nil {
			on = append(on, r.ID)
		}
	}
	if g := m.Gauge(gauge); g != nil {
		on = append(on, g.ID)
		if r := m.GaugeRecall(gauge, done); r != nil {
			on = append(on, r.ID)
		}
	}
	return on
}

// parser keeps the first error of several conversions, so that a body can be converted field by field.
type parser struct{ err error }

func (p *parser) fail(name string, err error) {
	if p.err == nil && err != nil {
		p.err = fmt.Errorf("%s: %w", name, err)
	}
}

func written(a record.Amount) quantity.Written {
	return quantity.Written{Mantissa: a.Mantissa, Exponent: a.Exponent, Unit: a.Unit}
}

func (p *parser) gauge(name string, a record.Amount) quantity.GaugePressure {
	v, err := written(a).Gauge()
	p.fail(name, err)
	return v
}

func (p *parser) absolute(name string, a record.Amount) quantity.Pressure {
	v, err := written(a).Absolute()
	p.fail(name, err)
	return v
}

func (p *parser) temperature(name string, a record.Amount) quantity.Temperature {
	v, err := written(a).Temperature()
	p.fail(name, err)
	return v
}

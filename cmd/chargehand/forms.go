package main

import (
	"cmp"
	"fmt"
	"time"

	"github.com/spf13/pflag"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// A form is what a person fills in for one kind of entry: the command that signs the entry and the one that corrects it share
// it, so that both ask the same and refuse the same.
type form interface {
	flags(*pflag.FlagSet)
	wants(*ledger.Meaning) []want
	load(body any) error // takes the values of an entry
	body(*ledger.Meaning) (any, error)
}

// formFor returns an empty form for a kind that can be corrected, nil for the others.
func formFor(k record.Kind) form {
	switch k {
	case record.KindReading:
		return newReadingForm()
	case record.KindCharge:
		return newChargeForm()
	case record.KindSheet:
		return newSheetForm()
	case record.KindGauge:
		return newGaugeForm()
	case record.KindBottle:
		return newBottleForm()
	case record.KindUnitFitted:
		return &fittedForm{}
	case record.KindUnitRemoved:
		return &removedForm{}
	}
	return nil
}

// circumstances are what a reading and a charge have in common.
type circumstances struct {
	unit, gauge, relieved, note, override string
	fluid                                 *typed[quantity.GaugePressure]
	ambient                               *typed[quantity.Pressure]
	field                                 *typed[quantity.Elevation]
	done                                  stamp
	sheet                                 record.ID
	seen                                  remarks
}

func newCircumstances() circumstances {
	return circumstances{fluid: bookPressure(), ambient: absolutePressure(), field: elevation()}
}

func (c *circumstances) flags(f *pflag.FlagSet) {
	f.StringVar(&c.gauge, "gauge", "", "asset number of the gauge")
	f.StringVar(&c.relieved, "relieved", "", "how the fluid side was relieved")
	f.Var(c.fluid, "fluid", "pressure seen on the fluid side then")
	f.Var(c.ambient, "ambient", "station pressure, absolute")
	f.Var(c.field, "elevation", "elevation of the field, for its standard pressure")
	f.Var(&c.done, "done", "when it was done (else now)")
	f.Var(&c.seen, "seen", "what you noticed, such as \"oil at the gas valve\"; once for each (see 'faults --help' for the list)")
	f.StringVar(&c.note, "note", "", "anything worth keeping")
	f.StringVar(&c.override, "unlikely-because", "", "why a value that looks wrong is right")
}

// usual returns the gauge last used on the unit, or on any.
func usual(m *ledger.Meaning, unit string) string {
	if u, err := findUnit(m, unit); err == nil && len(u.Work) > 0 {
		return ledger.GaugeOf(m.Item(u.Work[len(u.Work)-1]).Body)
	}
	if len(m.Gauges) == 1 {
		return m.Gauges[0].Asset
	}
	return ""
}

func (c *circumstances) load(unit record.UnitRef, gauge, relieved string, fluid record.Amount, ambient *record.Amount, done record.Time, note, override string, sheet record.ID) error {
	c.unit, c.gauge, c.relieved, c.note, c.override, c.sheet = unitName(unit), gauge, relieved, note, override, sheet
	c.done.at = wall(done)
	if err := c.ambient.load(ambient); err != nil {
		return err
	}
	return c.fluid.load(&fluid)
}

// settle looks up the unit and the gauge, and settles the ambient pressure.
func (c *circumstances) settle(m *ledger.Meaning) (*ledger.Unit, *record.Amount, error) {
	u, err := findUnit(m, c.unit)
	if err != nil {
		return nil, nil, err
	}
	if m.Gauge(c.gauge) == nil {
		return nil, nil, usageError(fmt.Sprintf("no gauge %q in this book", c.gauge), "See 'chargehand gauge list', or register it with 'chargehand gauge add'")
	}
	ambient := c.ambient.amount()
	if c.field.written.Unit != "" {
		if ambient != nil {
			return nil, nil, usageError(fmt.Sprintf("--ambient %q and --elevation %q both say what the air is", c.ambient, c.field), "Give the one that was measured")
		}
		p, err := quantity.StandardAtmosphereAt(c.field.value)
		if err != nil {
			return nil, nil, err
		}
		ambient = &record.Amount{Mantissa: int64(p + 0.5), Exponent: -2, Unit: "hPa"}
	}
	return u, ambient, nil
}

// where the temperature was taken; the words that an entry keeps.
var temperatureSources = []string{"shell", "ambient", "unknown"}

type readingForm struct {
	circumstances
	pressure    *typed[quantity.GaugePressure]
	temperature *typed[quantity.Temperature]
	from        choice
	soak        minutes
}

func newReadingForm() *readingForm {
	return &readingForm{circumstances: newCircumstances(), pressure: bookPressure(), temperature: bookTemperature(), from: choice{of: temperatureSources}}
}

func (r *readingForm) flags(f *pflag.FlagSet) {
	f.Var(r.pressure, "pressure", "what it shows")
	f.Var(r.temperature, "temperature", "gas temperature")
	f.Var(&r.from, "from", "where the temperature was taken: shell, ambient or unknown")
	f.Var(&r.soak, "soak", "how long the unit stood at that temperature, such as 45m")
	r.circumstances.flags(f)
}

func (r *readingForm) wants(m *ledger.Meaning) []want {
	return []want{{"gauge", usual(m, r.unit)}, {"pressure", ""}, {"temperature", ""}, {"from", "shell"}, {"relieved", ""}, {"fluid", "0psi"}}
}

func (r *readingForm) load(body any) error {
	b := body.(record.Reading)
	r.soak.n = b.SoakMin
	r.seen.load(b.Seen)
	for _, err := range []error{r.pressure.load(&b.Pressure), r.temperature.load(&b.Temperature), r.from.Set(b.TemperatureFrom)} {
		if err != nil {
			return err
		}
	}
	return r.circumstances.load(b.Unit, b.Gauge, b.Relieved, b.FluidPressure, b.Ambient, b.Done, b.Note, b.Override, b.Sheet)
}

func (r *readingForm) body(m *ledger.Meaning) (any, error) {
	u, ambient, err := r.settle(m)
	if err == nil {
		err = refusePressure("pressure", r.pressure, m.Gauge(r.gauge))
	}
	if err != nil {
		return nil, err
	}
	return record.Reading{Unit: u.Ref, Gauge: r.gauge, Pressure: *r.pressure.amount(), Temperature: *r.temperature.amount(), TemperatureFrom: r.from.is,
		SoakMin: r.soak.n, Ambient: ambient, Relieved: r.relieved, FluidPressure: *r.fluid.amount(), Done: r.done.record(), Note: r.note, Override: r.override, Sheet: r.sheet, Seen: r.seen.is}, nil
}

type chargeForm struct {
	circumstances
	bottle, gas string
	found, left observation
}

// observation is one pressure with its temperature, as found or as left.
type observation struct {
	name        string
	pressure    *typed[quantity.GaugePressure]
	temperature *typed[quantity.Temperature]
	from        choice
	soak        minutes
}

func newObservation(name string) observation {
	return observation{name, bookPressure(), bookTemperature(), choice{of: temperatureSources}, minutes{}}
}

func (o *observation) flags(f *pflag.FlagSet, when string) {
	f.Var(o.pressure, o.name, "what the gauge showed "+when)
	f.Var(o.temperature, o.name+"-temperature", "gas temperature then")
	f.Var(&o.from, o.name+"-from", "where it was taken: shell, ambient or unknown")
	f.Var(&o.soak, o.name+"-soak", "how long the unit had stood at it, such as 45m")
}

func (o *observation) load(b record.Observation) error {
	o.soak.n = b.SoakMin
	for _, err := range []error{o.pressure.load(&b.Pressure), o.temperature.load(&b.Temperature), o.from.Set(b.TemperatureFrom)} {
		if err != nil {
			return err
		}
	}
	return nil
}

func (o *observation) record() record.Observation {
	return record.Observation{Pressure: *o.pressure.amount(), Temperature: *o.temperature.amount(), TemperatureFrom: o.from.is, SoakMin: o.soak.n}
}

func newChargeForm() *chargeForm {
	return &chargeForm{circumstances: newCircumstances(), found: newObservation("found"), left: newObservation("left")}
}

func (c *chargeForm) flags(f *pflag.FlagSet) {
	c.found.flags(f, "as found, before charging")
	c.left.flags(f, "as left, after settling")
	f.StringVar(&c.bottle, "bottle", "", "the nitrogen bottle it came from, or none where gas was only bled off")
	f.StringVar(&c.gas, "gas", "", "gas that was put in (else the sheet's)")
	c.circumstances.flags(f)
}

func (c *chargeForm) wants(m *ledger.Meaning) []want {
	return []want{{"gauge", usual(m, c.unit)}, {"found", ""}, {"found-temperature", ""}, {"found-from", "shell"}, {"left", ""}, {"left-temperature", ""}, {"left-from", "shell"},
		{"bottle", ""}, {"relieved", ""}, {"fluid", "0psi"}}
}

func (c *chargeForm) load(body any) error {
	b := body.(record.Charge)
	c.bottle, c.gas = b.Bottle, b.Gas
	c.seen.load(b.Seen)
	for _, err := range []error{c.found.load(b.AsFound), c.left.load(b.AsLeft)} {
		if err != nil {
			return err
		}
	}
	return c.circumstances.load(b.Unit, b.Gauge, b.Relieved, b.FluidPressure, b.Ambient, b.Done, b.Note, b.Override, b.Sheet)
}

func (c *chargeForm) body(m *ledger.Meaning) (any, error) {
	u, ambient, err := c.settle(m)
	for _, o := range []observation{c.found, c.left} {
		if err == nil {
			err = refusePressure(o.name, o.pressure, m.Gauge(c.gauge))
		}
	}
	if err != nil {
		return nil, err
	}
	done := c.done.record()
	s := m.SheetAt(u.Ref.Part, done)
	if c.gas == "" && s != nil {
		c.gas = s.Gas
	}
	switch {
	case c.gas == "":
		return nil, usageError(fmt.Sprintf("no sheet for part %s says which gas belongs in it", u.Ref.Part), "Give it with --gas, as the unit's plate or manual says")
	case s != nil && c.gas != s.Gas:
		return nil, usageError(fmt.Sprintf("--gas %q is not the gas of sheet %s rev %s, which is %s", c.gas, s.Document, s.Revision, s.Gas),
			"Do not mix gases: if another gas went in, follow the manual and raise it with your lead; if it is a slip, give the right one")
	}
	return record.Charge{Unit: u.Ref, Gauge: c.gauge, AsFound: c.found.record(), AsLeft: c.left.record(), Ambient: ambient, Relieved: c.relieved, FluidPressure: *c.fluid.amount(),
		Bottle: c.bottle, Gas: c.gas, Done: done, Note: c.note, Override: c.override, Sheet: c.sheet, Seen: c.seen.is}, nil
}

type sheetForm struct {
	s                                           record.Sheet
	chart                                       string
	effective                                   stamp
	charge, minus, plus, system, rating, useful *typed[quantity.GaugePressure]
	at, low, high                               *typed[quantity.Temperature]
	ambient                                     *typed[quantity.Pressure]
	volume, volumeTolerance, application        *typed[quantity.Volume]
	leak                                        *typed[float64]
	misfits                                     []calc.Misfit
}

func newSheetForm() *sheetForm {
	return &sheetForm{charge: bookPressure(), minus: bookPressure(), plus: bookPressure(), system: bookPressure(), rating: bookPressure(), useful: bookPressure(),
		at: bookTemperature(), low: bookTemperature(), high: bookTemperature(), ambient: absolutePressure(), volume: volume(), volumeTolerance: volume(), application: volume(), leak: leakRate()}
}

func (s *sheetForm) flags(f *pflag.FlagSet) {
	f.StringVar(&s.s.Part, "part", "", "part number of the type")
	f.StringVar(&s.s.Gas, "gas", "nitrogen", "gas of the charge: nitrogen or air")
	f.StringVar(&s.s.Construction, "construction", "", "spherical diaphragm, spherical bladder, bladder or piston")
	f.Var(s.charge, "charge", "reference charge")
	f.Var(s.minus, "minus", "tolerance below it")
	f.Var(s.plus, "plus", "tolerance above it")
	f.Var(s.at, "at", "temperature that the reference charge holds at")
	f.StringVar(&s.chart, "chart", "", "CSV file of the manual's chart: temperature,low,charge,high with units, one row a line, after a heading")
	f.Var(s.ambient, "ambient", "ambient pressure that the sheet's gauge pressures hold at (else the standard atmosphere at sea level)")
	f.Var(s.system, "system-pressure", "hydraulic system pressure")
	f.Var(s.useful, "least-useful", "fluid pressure below which the unit no longer serves")
	f.Var(s.volume, "gas-volume", "gas volume with the fluid side empty")
	f.Var(s.volumeTolerance, "gas-volume-tolerance", "tolerance of the gas volume")
	f.Var(s.application, "application", "fluid that one application takes")
	f.Var(s.leak, "leak", "loss of gas that the manual allows, as free gas or as pressure")
	f.StringVar(&s.s.Valve, "valve", "", "charging valve, such as MS28889-2")
	f.Var(s.rating, "valve-rating", "pressure class of the charging valve")
	f.StringVar(&s.s.Torque, "torque", "", "torques as the manual gives them")
	f.BoolVar(&s.s.InstalledGauge, "installed-gauge", false, "the unit has a gas gauge of its own")
	f.Var(s.low, "least-temperature", "lowest gas temperature that the sheet holds for")
	f.Var(s.high, "highest-temperature", "highest gas temperature that the sheet holds for")
	f.StringVar(&s.s.Document, "document", "", "the manual's number")
	f.StringVar(&s.s.Revision, "revision", "", "its revision")
	f.Var(&s.effective, "effective", "in force from (else now)")
}

func (s *sheetForm) wants(*ledger.Meaning) []want {
	w := []want{{"part", ""}, {"document", ""}, {"revision", ""}, {"at", "70F"}}
	if s.chart == "" && len(s.s.Chart) == 0 {
		w = append(w, needs("charge", "minus", "plus")...)
	}
	return w
}

func (s *sheetForm) load(body any) error {
	s.s = body.(record.Sheet)
	s.effective.at = wall(s.s.Effective)
	for _, err := range []error{
		s.charge.load(s.s.Charge), s.minus.load(s.s.Minus), s.plus.load(s.s.Plus), s.system.load(s.s.SystemPressure), s.rating.load(s.s.ValveRating), s.useful.load(s.s.LeastUseful),
		s.at.load(&s.s.ReferenceTemperature), s.low.load(s.s.TempLow), s.high.load(s.s.TempHigh), s.ambient.load(s.s.Ambient),
		s.volume.load(s.s.GasVolume), s.volumeTolerance.load(s.s.GasVolumeTolerance), s.application.load(s.s.Application), s.leak.load(s.s.Leak),
	} {
		if err != nil {
			return err
		}
	}
	return nil
}

func (s *sheetForm) body(m *ledger.Meaning) (any, error) {
	b := s.s
	b.ReferenceTemperature, b.Effective = *s.at.amount(), s.effective.record()
	b.Charge, b.Minus, b.Plus = s.charge.amount(), s.minus.amount(), s.plus.amount()
	b.SystemPressure, b.ValveRating, b.LeastUseful = s.system.amount(), s.rating.amount(), s.useful.amount()
	b.TempLow, b.TempHigh, b.Ambient = s.low.amount(), s.high.amount(), s.ambient.amount()
	b.GasVolume, b.GasVolumeTolerance, b.Application = s.volume.amount(), s.volumeTolerance.amount(), s.application.amount()
	b.Leak = s.leak.amount()
	if s.chart != "" {
		rows, err := readChart(s.chart)
		if err != nil {
			return nil, err
		}
		b.Chart = rows
	}
	if err := cmp.Or(refuseTolerance("minus", s.minus), refuseTolerance("plus", s.plus)); err != nil {
		return nil, err
	}
	if len(b.Chart) > 0 && b.Charge != nil {
		return nil, usageError("a sheet has a chart or a reference charge, not both", "Give --chart, or --charge with --minus and --plus, as the manual does")
	}
	l, err := verdict.Limits(b, verdict.UnitsOf(m))
	if err != nil {
		return nil, usageError("the sheet cannot be used: "+err.Error(), "Compare it with the manual and enter it again")
	}
	if l.Chart != nil {
		if s.misfits, err = l.Chart.Misfits(l.Gas, l.Ambient); err != nil {
			return nil, usageError("the chart cannot be compared with the gas: "+err.Error(), "Check the temperatures and pressures of its rows")
		}
	}
	return b, nil
}

type gaugeForm struct {
	b               record.Gauge
	calibrated, due stamp
	span, division  *typed[quantity.GaugePressure]
}

func newGaugeForm() *gaugeForm { return &gaugeForm{span: bookPressure(), division: bookPressure()} }

func (g *gaugeForm) flags(f *pflag.FlagSet) {
	f.StringVar(&g.b.Asset, "asset", "", "asset number")
	f.Var(g.span, "span", "full scale")
	f.StringVar(&g.b.Accuracy, "accuracy", "", "ASME grade, EN class, or a figure such as 0.5% of span")
	f.Var(g.division, "division", "one division of the dial")
	f.Var(&g.calibrated, "calibrated", "day of calibration")
	f.Var(&g.due, "due", "day it is due again")
	f.StringVar(&g.b.Certificate, "certificate", "", "number of the calibration certificate")
}

func (g *gaugeForm) wants(*ledger.Meaning) []want {
	return needs("asset", "span", "accuracy", "division", "calibrated", "due")
}

func (g *gaugeForm) load(body any) error {
	g.b = body.(record.Gauge)
	g.calibrated.at, g.due.at = wall(g.b.Calibrated), wall(g.b.Due)
	if err := g.span.load(&g.b.Span); err != nil {
		return err
	}
	return g.division.load(&g.b.Graduation)
}

func (g *gaugeForm) body(*ledger.Meaning) (any, error) {
	if _, err := calc.ParseAccuracy(g.b.Accuracy); err != nil {
		what, todo, _ := cutHint(err.Error())
		return nil, usageError("--accuracy: "+what, todo)
	}
	if g.span.value <= 0 || g.division.value <= 0 || g.division.value > g.span.value/4 {
		return nil, usageError(fmt.Sprintf("a span of %s with divisions of %s cannot be", g.span, g.division), "Read both off the dial")
	}
	b := g.b
	b.Span, b.Graduation, b.Calibrated, b.Due = *g.span.amount(), *g.division.amount(), g.calibrated.record(), endOfDay(g.due)
	if b.Due.Unix <= b.Calibrated.Unix {
		return nil, usageError(fmt.Sprintf("--due: %q is before --calibrated %q", day(b.Due), day(b.Calibrated)), "Read both dates off the gauge's label or certificate")
	}
	return b, nil
}

// endOfDay is the last second of a stamp's day: what is due on a day is good until that day is over.
func endOfDay(s stamp) record.Time {
	t := s.at
	s.at = time.Date(t.Year(), t.Month(), t.Day(), 23, 59, 59, 0, t.Location())
	return s.record()
}

type bottleForm struct {
	b                record.Bottle
	read             stamp
	volume           *typed[quantity.Volume]
	pressure, rating *typed[quantity.GaugePressure]
	temperature      *typed[quantity.Temperature]
}

func newBottleForm() *bottleForm {
	return &bottleForm{volume: volume(), pressure: bookPressure(), rating: bookPressure(), temperature: bookTemperature()}
}

func (b *bottleForm) flags(f *pflag.FlagSet) {
	f.StringVar(&b.b.Name, "name", "", "what the bottle is called")
	f.Var(b.volume, "volume", "its water volume, as stamped")
	f.StringVar(&b.b.Gas, "gas", "nitrogen", "what the label says is in it")
	f.Var(b.pressure, "pressure", "what its gauge shows")
	f.Var(b.temperature, "temperature", "its temperature then")
	f.Var(&b.read, "read", "when it was read (else now)")
	f.Var(b.rating, "rating", "its working pressure, as stamped")
	f.StringVar(&b.b.Label, "label", "", "the words of the label; a colour says nothing")
	f.StringVar(&b.b.Note, "note", "", "anything worth keeping")
}

func (b *bottleForm) wants(*ledger.Meaning) []want {
	return needs("name", "volume", "pressure", "temperature")
}

func (b *bottleForm) load(body any) error {
	b.b = body.(record.Bottle)
	b.read.at = wall(b.b.Read)
	for _, err := range []error{b.volume.load(&b.b.Volume), b.pressure.load(&b.b.Pressure), b.rating.load(b.b.Rating), b.temperature.load(&b.b.Temperature)} {
		if err != nil {
			return err
		}
	}
	return nil
}

func (b *bottleForm) body(m *ledger.Meaning) (any, error) {
	in := verdict.UnitsOf(m)
	switch {
	case b.pressure.value <= 0:
		return nil, usageError(fmt.Sprintf("--pressure %q: an empty bottle serves nothing", b.pressure), "Give what its gauge shows")
	case b.rating.written.Unit != "" && b.pressure.value > b.rating.value:
		return nil, usageError(fmt.Sprintf("--pressure %q is above the bottle's working pressure of %s", b.pressure, in.Pressure(b.rating.value)), "Read both again; do not use a bottle that is over-pressed")
	}
	x := b.b
	x.Volume, x.Pressure, x.Temperature, x.Rating, x.Read = *b.volume.amount(), *b.pressure.amount(), *b.temperature.amount(), b.rating.amount(), b.read.record()
	return x, nil
}

type fittedForm struct {
	unit, aircraft, position string
	when                     stamp
}

func (u *fittedForm) flags(f *pflag.FlagSet) {
	f.StringVar(&u.aircraft, "aircraft", "", "which aircraft")
	f.StringVar(&u.position, "position", "", "where on it")
	f.Var(&u.when, "when", "when it was fitted (else now)")
}

func (u *fittedForm) wants(*ledger.Meaning) []want { return needs("aircraft", "position") }

func (u *fittedForm) load(body any) error {
	b := body.(record.UnitFitted)
	*u = fittedForm{unitName(b.Unit), b.Aircraft, b.Position, stamp{wall(b.When)}}
	return nil
}

func (u *fittedForm) body(m *ledger.Meaning) (any, error) {
	which, err := findUnit(m, u.unit)
	if err != nil {
		return nil, err
	}
	return record.UnitFitted{Unit: which.Ref, Aircraft: u.aircraft, Position: u.position, When: u.when.record()}, nil
}

type removedForm struct {
	unit, reason string
	when         stamp
}

func (u *removedForm) flags(f *pflag.FlagSet) {
	f.StringVar(&u.reason, "reason", "", "why it was taken off")
	f.Var(&u.when, "when", "when it was taken off (else now)")
}

func (u *removedForm) wants(*ledger.Meaning) []want { return needs("reason") }

func (u *removedForm) load(body any) error {
	b := body.(record.UnitRemoved)
	*u = removedForm{unitName(b.Unit), b.Reason, stamp{wall(b.When)}}
	return nil
}

func (u *removedForm) body(m *ledger.Meaning) (any, error) {
	which, err := findUnit(m, u.unit)
	if err != nil {
		return nil, err
	}
	return record.UnitRemoved{Unit: which.Ref, Reason: u.reason, When: u.when.record()}, nil
}

package main

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/plan"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/settle"
	"example.org/chargehand/cmd/chargehand/plot"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// What is taken where nothing is given (common practice, no source): how fast the dial rises, and how much shell there is to a litre of
// gas.
const (
	usualFill  = 100 // psi/min
	shellPerLK = 4.0 // kg of steel a litre

	perConnection = 0.02 // kg of gas that moving the hose once more must save
)

type planJSON struct {
	Unit            string       `json:"unit"`
	FoundPsi        float64      `json:"found_psi"`
	FoundF          float64      `json:"found_f"`
	AroundF         float64      `json:"around_f"`
	TargetPsi       float64      `json:"target_psi"` // on the dial, once settled
	HotStopPsi      *float64     `json:"hot_stop_psi,omitempty"`
	HotStopLowPsi   *float64     `json:"hot_stop_low_psi,omitempty"` // with half and twice the gas's time constant
	HotStopHighPsi  *float64     `json:"hot_stop_high_psi,omitempty"`
	IsothermalPsi   *float64     `json:"isothermal_psi,omitempty"`
	AdiabaticPsi    *float64     `json:"adiabatic_psi,omitempty"`
	FillSeconds     *float64     `json:"fill_seconds,omitempty"`
	SettledMinutes  *float64     `json:"settled_minutes,omitempty"`
	MassG           float64      `json:"mass_g"`
	MassToleranceG  float64      `json:"mass_tolerance_g"`
	Bottle          string       `json:"bottle"`
	BottleBeforePsi float64      `json:"bottle_before_psi"`
	BottleAfterPsi  float64      `json:"bottle_after_psi"`
	Supply          string       `json:"supply"`
	BottleNeedsPsi  *float64     `json:"bottle_needs_psi,omitempty"`
	ReachesPsi      float64      `json:"reaches_psi"`
	Ratings         []ratingJSON `json:"ratings"`
	ConstantsLearnt bool         `json:"constants_learnt"`
	GasSeconds      float64      `json:"gas_seconds"`
	ShellMinutes    float64      `json:"shell_minutes"`
	Cautions        []string     `json:"cautions"`
	Sheet           string       `json:"sheet"`
	warnings        []string
	unit            *ledger.Unit
	in              plan.ChargeInput
	result          plan.ChargePlan
	fast            settle.Constant
	slow            settle.Constant
	sourceOfFound   string
	sourceOfBottle  string
	chart           bool
	target          plan.Target
	reference       quantity.Temperature
}

type ratingJSON struct {
	Part     string  `json:"part"`
	RatedPsi float64 `json:"rated_psi,omitempty"`
	SeesPsi  float64 `json:"sees_psi"`
	State    string  `json:"state"`
}

// planning are the flags of plan.
type planning struct {
	gauge, bottle                                   string
	pressure, bottlePressure, hose, regulator, near *typed[quantity.GaugePressure]
	temperature, around, bottleTemperature          *typed[quantity.Temperature]
	bottleVolume                                    *typed[quantity.Volume]
	ambient                                         *typed[quantity.Pressure]
	field                                           *typed[quantity.Elevation]
	rate                                            *typed[quantity.PressureRate]
	duration                                        time.Duration
	shell                                           float64
}

func newPlan() *cobra.Command {
	var h home
	var asJSON bool
	var picture string
	p := planning{pressure: bookPressure(), bottlePressure: bookPressure(), hose: bookPressure(), regulator: bookPressure(), near: bookPressure(), temperature: bookTemperature(), around: bookTemperature(),
		bottleTemperature: bookTemperature(), bottleVolume: volume(), ambient: absolutePressure(), field: elevation(), rate: fillRate()}
	cmd := &cobra.Command{Use: "plan UNIT", Short: "Plan a charge: target now, where to stop while the gas is hot, settling, nitrogen, bottle", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand plan HA-40/104 --gauge G-7 --pressure 930psi --temperature 18F --bottle N2-3\n  chargehand plan HA-40/104 --bottle N2-3 --rate 60psi/min --plot plan.svg",
		Long: "Plan a charge from the as-found state to the sheet's target at the temperature around the unit. Filling heats the gas, so the\n" +
			"dial must stand higher at the stop than where it settles: the hot stop says by how much. It is as good as the time constants;\n" +
			"those learnt with 'chargehand settle' are taken where there are any. What is not given is taken from the book.\n\n" + beforeCharging + "\n\nExit status 1: the bottle falls short, or a part is rated too low.",
	}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	addPlot(cmd, &picture)
	f := cmd.Flags()
	f.StringVar(&p.gauge, "gauge", "", "asset number of the gauge, for its span (else the one last used)")
	f.Var(p.pressure, "pressure", "as found (else as the unit was last seen)")
	f.Var(p.temperature, "temperature", "gas temperature as found")
	f.Var(p.around, "around", "temperature around the unit, where it settles (else that of the gas as found)")
	f.Var(p.ambient, "ambient", "station pressure, absolute")
	f.Var(p.field, "elevation", "elevation of the field, for its standard pressure")
	f.StringVar(&p.bottle, "bottle", "", "a bottle of the book; its pressure as last read")
	f.Var(p.bottlePressure, "bottle-pressure", "what the bottle's gauge shows now")
	f.Var(p.bottleTemperature, "bottle-temperature", "the bottle's temperature (else that around the unit)")
	f.Var(p.bottleVolume, "bottle-volume", "its water volume, for a bottle that the book does not know")
	f.Var(p.rate, "rate", "how fast the dial is to rise (else 100 psi/min)")
	f.DurationVar(&p.duration, "in", 0, "how long the filling is to take, such as 4m, in place of --rate")
	f.Float64Var(&p.shell, "shell-kg", 0, "mass of the unit's shell in kg, steel (else 4 kg a litre of gas)")
	f.Var(p.hose, "hose-rating", "rating of the hose")
	f.Var(p.regulator, "regulator-rating", "rating of the regulator's inlet")
	f.Var(p.near, "within", "settled means this near to the target (else 10 psi)")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			in := verdict.UnitsOf(m)
			u, err := pickUnit(cmd, m, args)
			if err != nil {
				return err
			}
			j, err := p.plan(m, u)
			var over *plan.OverTarget
			switch {
			case errors.As(err, &over):
				return couldNot(fmt.Errorf("the unit settles at %s, not below its target of %s: there is nothing to add", in.Pressure(over.Settles), in.Pressure(over.Target)), "Leave it, or bleed it as the manual allows")
			case err != nil:
				return planRefused(err, in)
			}
			if picture != "" && j.result.Fill != nil {
				if err := writePlot(picture, fillPicture(j, in)); err != nil {
					return err
				}
			}
			if asJSON {
				err = writeJSON(cmd.OutOrStdout(), j)
			} else {
				j.print(cmd.OutOrStdout(), in)
			}
			if err == nil && len(j.warnings) > 0 {
				return errNo
			}
			return err
		})
	}
	return cmd
}

func planRefused(err error, in calc.Units) error {
	var p *problem
	if errors.As(err, &p) {
		return err
	}
	var out *quantity.RangeError
	if errors.As(err, &out) {
		return couldNot(fmt.Errorf("no plan: %w", out), "Outside that range there is no number; follow the manual, fill slower, or give another value")
	}
	return couldNot(inBookUnits(err, in), "Put right what is named there")
}

// plan gathers what is known of the unit, the bottle and the field, and plans.
func (p *planning) plan(m *ledger.Meaning, u *ledger.Unit) (*planJSON, error) {
	j := &planJSON{Unit: unitName(u.Ref), unit: u}
	s := m.SheetAt(u.Ref.Part, (&stamp{}).record())
	if s == nil {
		return nil, usageError(fmt.Sprintf("no sheet for part %s is in force", u.Ref.Part), "Enter it with 'chargehand sheet add'")
	}
	l, err := verdict.Limits(s.Sheet, verdict.UnitsOf(m))
	if err != nil {
		return nil, couldNot(err, "Have the sheet put right")
	}
	j.Sheet = s.Document + " rev " + s.Revision
	if s.GasVolume == nil {
		return nil, usageError(fmt.Sprintf("sheet %s gives no gas volume", j.Sheet), "Enter it from the manual: 'chargehand sheet add' or 'chargehand correct' with gas-volume")
	}
	c := plan.ChargeInput{Gas: l.Gas, Volume: must(written(*s.GasVolume).Volume())}
	if s.GasVolumeTolerance != nil {
		c.VolumeTolerance = must(written(*s.GasVolumeTolerance).Volume())
	}
	if err := p.found(m, u, j, &c); err != nil {
		return nil, err
	}
	if err := p.surroundings(j, &c); err != nil {
		return nil, err
	}
	c.Target = plan.Target{Pressure: l.Charge, At: l.Reference, Ambient: l.Ambient}
	j.reference = l.Reference
	if j.chart = l.Chart != nil; j.chart {
		_, charge, _, err := l.Chart.At(c.Temperature)
		if err != nil {
			return nil, couldNot(err, "The chart says nothing there: let the unit come to a temperature on it")
		}
		c.Target = plan.Target{Pressure: charge, At: c.Temperature, Ambient: l.Ambient}
	}
	j.target = c.Target
	if err := p.bottleOf(m, j, &c); err != nil {
		return nil, err
	}
	c.Rated = plan.Ratings{Valve: l.Rated, Hose: p.hose.value, Regulator: p.regulator.value}
	if p.gauge == "" {
		p.gauge = usual(m, unitName(u.Ref))
	}
	if g := m.Gauge(p.gauge); g != nil {
		c.Rated.Gauge = must(written(g.Span).Gauge())
	} else if p.gauge != "" {
		return nil, usageError(fmt.Sprintf("no gauge %q in this book", p.gauge), "See 'chargehand gauge list'")
	}
	if p.duration != 0 && p.rate.written.Unit != "" {
		return nil, usageError(fmt.Sprintf("--rate %q and --in %s both say how fast", p.rate, p.duration), "Give one of them")
	}
	c.Duration, c.Rate = p.duration, plan.Rate(p.rate.value)
	if c.Duration == 0 && c.Rate == 0 {
		c.Rate = plan.PerMinute(must(quantity.Written{Mantissa: usualFill, Unit: "psi"}.Gauge()))
	}
	var learnt settle.Constants
	learnt, j.ConstantsLearnt = verdict.Constants(m, u)
	j.fast, j.slow = learnt.Fast, learnt.Slow
	if p.shell == 0 {
		p.shell = shellPerLK * float64(c.Volume) * 1e3
	}
	c.Thermal = plan.AssumedThermal(p.shell)
	c.Thermal.Gas, c.Thermal.Shell = learnt.Fast.Median, learnt.Slow.Median
	if c.Within = p.near.value; c.Within <= 0 {
		c.Within = must(quantity.Written{Mantissa: enough, Unit: "psi"}.Gauge())
	}
	j.in = c
	if j.result, err = plan.Charge(c); err != nil {
		return nil, err
	}
	j.facts()
	return j, nil
}

// found takes the as-found state from the flags, or as the unit was last seen.
func (p *planning) found(m *ledger.Meaning, u *ledger.Unit, j *planJSON, c *plan.ChargeInput) error {
	if (p.pressure.written.Unit == "") != (p.temperature.written.Unit == "") {
		return usageError("only one of --pressure and --temperature is given", "Give both as found, or neither to take the unit's last reading")
	}
	if p.pressure.written.Unit != "" {
		c.Found, c.FoundAt = p.pressure.value, p.temperature.value
		j.sourceOfFound = "as given"
		return nil
	}
	seen, _ := verdict.History(m, u)
	if len(seen) == 0 {
		return usageError(fmt.Sprintf("unit %s was never read in this book", unitName(u.Ref)), "Give its state with --pressure and --temperature")
	}
	last := seen[len(seen)-1]
	c.Found, c.FoundAt = last.Reading.Gauge, last.Reading.Temperature
	j.sourceOfFound = fmt.Sprintf("entry %s of %s", last.Entry.Short(), clock(record.Time{Unix: last.At.Unix()}))
	return nil
}

// surroundings settles the surroundings.
func (p *planning) surroundings(j *planJSON, c *plan.ChargeInput) error {
	c.Temperature, c.Ambient = p.around.value, quantity.StandardAtmosphere
	if p.around.written.Unit == "" {
		c.Temperature = c.FoundAt
	}
	if p.ambient.written.Unit != "" && p.field.written.Unit != "" {
		return usageError(fmt.Sprintf("--ambient %q and --elevation %q both say what the air is", p.ambient, p.field), "Give the one that was measured")
	}
	if p.ambient.written.Unit != "" {
		c.Ambient = p.ambient.value
	} else if p.field.written.Unit != "" {
		a, err := quantity.StandardAtmosphereAt(p.field.value)
		if err != nil {
			return err
		}
		c.Ambient = a
	}
	return nil
}

// bottleOf takes the bottle from the book, or from the flags.
func (p *planning) bottleOf(m *ledger.Meaning, j *planJSON, c *plan.ChargeInput) error {
	c.Bottle = plan.Bottle{Name: p.bottle, Temperature: c.Temperature}
	if p.bottle == "" && len(m.Bottles) == 1 && p.bottleVolume.written.Unit == "" {
		p.bottle = m.Bottles[0].Name
	}
	var known *ledger.Bottle
	for _, b := range m.Bottles {
		if b.Name == p.bottle {
			known = b
		}
	}
	switch {
	case known != nil && known.Gas != c.Gas.Name():
		return usageError(fmt.Sprintf("bottle %s holds %s, and the unit takes %s", known.Name, known.Gas, c.Gas.Name()), "Do not mix gases; take another bottle")
	case known != nil:
		c.Bottle = bottleAs(known)
		j.sourceOfBottle = "as read " + clock(known.Read)
	case p.bottleVolume.written.Unit == "" || p.bottlePressure.written.Unit == "":
		if p.bottle != "" {
			return usageError(fmt.Sprintf("no bottle %q in this book", p.bottle), "Enter it with 'chargehand bottle add', or give --bottle-volume and --bottle-pressure")
		}
		return usageError("no bottle is named", "Name one with --bottle, or give --bottle-volume and --bottle-pressure")
	default:
		c.Bottle.Volume = p.bottleVolume.value
		if c.Bottle.Name == "" {
			c.Bottle.Name = "bottle"
		}
	}
	if p.bottlePressure.written.Unit != "" {
		c.Bottle.Pressure, j.sourceOfBottle = p.bottlePressure.value, "as given"
		c.Bottle.Temperature = c.Temperature
	}
	if p.bottleTemperature.written.Unit != "" {
		c.Bottle.Temperature = p.bottleTemperature.value
	}
	return nil
}

func bottleAs(b *ledger.Bottle) plan.Bottle {
	return plan.Bottle{Name: b.Name, Volume: must(written(b.Volume).Volume()), Pressure: must(written(b.Pressure).Gauge()), Temperature: must(written(b.Temperature).Temperature())}
}

// facts fills in what is shown.
func (j *planJSON) facts() {
	r, c := j.result, j.in
	j.FoundPsi, j.FoundF, j.AroundF, j.TargetPsi = inPsi(c.Found), inF(c.FoundAt), inF(c.Temperature), inPsi(r.SettledTarget)
	j.MassG, j.MassToleranceG = round2(r.Mass*1e3), round2(r.MassTolerance*1e3)
	j.Bottle, j.BottleBeforePsi, j.BottleAfterPsi, j.Supply, j.ReachesPsi = c.Bottle.Name, inPsi(r.Bottle.Before), inPsi(r.Bottle.After), r.Bottle.Supply.String(), inPsi(r.Bottle.Reaches)
	if r.Bottle.Needs != nil {
		j.BottleNeedsPsi = ptr(inPsi(*r.Bottle.Needs))
	}
	j.GasSeconds, j.ShellMinutes = c.Thermal.Gas.Seconds(), c.Thermal.Shell.Minutes()
	if f := r.Fill; f != nil {
		j.HotStopPsi, j.HotStopLowPsi, j.HotStopHighPsi, j.IsothermalPsi = ptr(inPsi(f.HotStop)), ptr(inPsi(f.HotLow)), ptr(inPsi(f.HotHigh)), ptr(inPsi(f.Isothermal.Stop))
		j.FillSeconds, j.SettledMinutes = ptr(round2(f.Duration.Seconds())), ptr(round2(f.Settled.Minutes()))
		if f.Adiabatic != nil {
			j.AdiabaticPsi = ptr(inPsi(f.Adiabatic.Stop))
		}
	} else {
		j.warnings = append(j.warnings, "the bottle falls short")
	}
	for _, x := range r.Ratings {
		j.Ratings = append(j.Ratings, ratingJSON{x.Part, inPsi(x.Rated), inPsi(x.Sees), x.State.String()})
		if x.State == plan.TooLow {
			j.warnings = append(j.warnings, x.Part+" rated too low")
		}
	}
	for _, c := range plan.Cautions() {
		j.Cautions = append(j.Cautions, c.Text)
	}
}

func (j *planJSON) print(w io.Writer, in calc.Units) {
	r, c := j.result, j.in
	fmt.Fprintf(w, "unit        %s%s\n", j.Unit, fitted(j.unit))
	fmt.Fprintf(w, "found       %s at %s, %s; with nothing added it settles at %s\n", in.Pressure(c.Found), in.Temperature(c.FoundAt), j.sourceOfFound, in.Pressure(r.SettledNow))
	by := fmt.Sprintf("%s at %s", in.Pressure(j.target.Pressure), in.Temperature(j.target.At))
	if j.chart {
		by = "the chart at " + in.Temperature(j.target.At)
	}
	fmt.Fprintf(w, "target      %s on the dial once settled at %s: %s by %s\n", in.Pressure(r.SettledTarget), in.Temperature(c.Temperature), by, j.Sheet)
	if f := r.Fill; f != nil {
		rise := quantity.GaugePressure(float64(f.Rate) * 60)
		fmt.Fprintf(w, "HOT STOP    %s: close there, after about %s at %s/min; the gas is then at %s\n", in.Pressure(f.HotStop), lasting(f.Duration), in.Pressure(rise), in.Temperature(f.HotAt))
		fmt.Fprintf(w, "            %s with half and twice the gas's time constant\n", in.Between(f.HotLow, f.HotHigh))
		bound := "no heat lost: outside the gas's range"
		if f.Adiabatic != nil {
			bound = fmt.Sprintf("%s with no heat lost (gas at %s)", in.Pressure(f.Adiabatic.Stop), in.Temperature(f.Adiabatic.At))
		}
		fmt.Fprintf(w, "bounds      %s filled endlessly slowly; %s\n", in.Pressure(f.Isothermal.Stop), bound)
		fmt.Fprintf(w, "settles     to %s with the shell after %s; to within %s of the target after %s\n", in.Pressure(f.AfterStageOne), lasting(f.StageOne), in.Pressure(c.Within), lasting(f.Settled))
	}
	tolerance := fmt.Sprintf("+/-%.2g g by the tolerance of the volume", r.MassTolerance*1e3)
	if c.VolumeTolerance == 0 {
		tolerance = "as good as the gas volume, of which the sheet states no tolerance"
	}
	fmt.Fprintf(w, "%-11s %.3g g, %s\n", c.Gas.Name(), r.Mass*1e3, tolerance)
	b := r.Bottle
	fmt.Fprintf(w, "bottle      %s, %s: %s before, %s after once settled; it %s\n", c.Bottle.Name, j.sourceOfBottle, in.Pressure(b.Before), in.Pressure(b.After), b.Supply)
	if b.Supply == plan.Short {
		fmt.Fprintf(w, "            the unit reaches %s with it", in.Pressure(b.Reaches))
		if b.Needs != nil {
			fmt.Fprintf(w, "; a bottle of this size needs %s", in.Pressure(*b.Needs))
		}
		fmt.Fprintln(w)
	}
	for _, x := range r.Ratings {
		rated := "rating not stated"
		if x.Rated > 0 {
			rated = "rated " + in.Pressure(x.Rated)
		}
		loud := ""
		if x.State == plan.TooLow {
			loud = ": TOO LOW, do not charge"
		}
		fmt.Fprintf(w, "%-11s %s, sees up to %s%s\n", x.Part, rated, in.Pressure(x.Sees), loud)
	}
	from := "usual ones (common practice, no source); 'chargehand settle' learns the unit's own"
	if j.ConstantsLearnt {
		from = "learnt from this unit"
	}
	fmt.Fprintf(w, "constants   gas to shell %s, shell to air %s: %s\n", constantWords(j.fast), constantWords(j.slow), from)
	fmt.Fprintln(w, "cautions")
	for _, c := range plan.Cautions() {
		fmt.Fprintf(w, "  - %s\n", c.Text)
	}
	fmt.Fprintln(w, "The maintenance manual decides; this plan only informs.")
}

// fillPicture shows the filling and the settling, over the first minutes where it happens and on to rest.
func fillPicture(j *planJSON, in calc.Units) plot.Fill {
	unit, degree := in.P, in.T
	if _, err := quantity.GaugePressure(0).InUnit(unit); err != nil {
		unit = "psi"
	}
	if _, err := quantity.Temperature(300).InUnit(degree); err != nil {
		degree = "F"
	}
	f := j.result.Fill
	v := func(g quantity.GaugePressure) float64 { return show(g.InUnit(unit)) }
	x := plot.Fill{Title: fmt.Sprintf("%s: stop at %s, settles on %s", j.Unit, in.Pressure(f.HotStop), in.Pressure(j.result.SettledTarget)), PressureUnit: unit, TemperatureUnit: degree,
		Stop: f.Duration.Minutes(), HotStop: v(f.HotStop), Settled: v(j.result.SettledTarget), Shell: true}
	end := 0.0
	for _, t := range f.Trace {
		end = t.Time.Minutes()
		x.Samples = append(x.Samples, plot.Sample{Minutes: end, Pressure: v(t.Dial), Gas: show(t.Gas.InUnit(degree)), Shell: show(t.Shell.InUnit(degree))})
	}
	level := func(name string, g quantity.GaugePressure) {
		x.Bounds = append(x.Bounds, plot.Bound{Name: name, Points: []plot.Sample{{Minutes: 0, Pressure: v(g)}, {Minutes: end, Pressure: v(g)}}})
	}
	if f.Adiabatic != nil {
		level("stop with no heat lost", f.Adiabatic.Stop)
	}
	return x
}

type nightJSON struct {
	TemperatureF    float64       `json:"temperature_f"`
	Steps           []nightStep   `json:"steps"`
	Undone          []nightUndone `json:"undone"`
	Bottles         []nightBottle `json:"bottles"`
	Completed       int           `json:"completed"`
	CompletedAtMost int           `json:"completed_at_most"` // no order completes more
	Best            bool          `json:"best"`              // all orders were tried
	LeftG           float64       `json:"left_g"`
	UsableG         float64       `json:"usable_g"` // above the highest target of the list
}

type nightStep struct {
	Unit      string      `json:"unit"`
	FoundPsi  float64     `json:"found_psi"` // at the night's temperature
	TargetPsi float64     `json:"target_psi"`
	Draws     []nightDraw `json:"draws"`
}

type nightDraw struct {
	Bottle    string  `json:"bottle"`
	UnitPsi   float64 `json:"unit_psi"` // after it, settled
	BottlePsi float64 `json:"bottle_psi"`
	MassG     float64 `json:"mass_g"`
}

type nightUndone struct {
	Unit       string   `json:"unit"`
	ReachesPsi float64  `json:"reaches_psi"`
	LacksG     float64  `json:"lacks_g"`
	NeedsPsi   *float64 `json:"needs_psi,omitempty"` // of one more of the largest bottles
}

type nightBottle struct {
	Bottle    string  `json:"bottle"`
	BeforePsi float64 `json:"before_psi"` // at the night's temperature
	AfterPsi  float64 `json:"after_psi"`
}

func newNight() *cobra.Command {
	var h home
	var asJSON bool
	var bottles, found []string
	temperature, ambient, field := bookTemperature(), absolutePressure(), elevation()
	cmd := &cobra.Command{Use: "night [UNIT...]", Short: "Order a night's charging over the bottles on the cart", Args: usageArgs(cobra.ArbitraryArgs),
		Example: "  chargehand night --temperature 20F\n  chargehand night HA-40/104 HA-40/106 --bottle N2-1 --bottle N2-3 --temperature 20F --found HA-40/104=930psi@18F",
		Long: "Order a night's charging: which unit from which bottle, poorest bottle that still serves first, so that the most units are\n" +
			"completed and the most gas is left; what each bottle ends at, and the first unit that cannot be done. Without units, those whose\n" +
			"last verdict is out of limits or near one; each as it was last seen, unless --found says otherwise. Bottles as last read.\n\nExit status 1: a unit cannot be done.",
	}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	f := cmd.Flags()
	f.StringArrayVar(&bottles, "bottle", nil, "a bottle of the book on the cart; once for each (else all of them)")
	f.StringArrayVar(&found, "found", nil, "UNIT=PRESSURE@TEMPERATURE, as found now; once for each unit")
	f.Var(temperature, "temperature", "of cart and units during the night")
	f.Var(ambient, "ambient", "station pressure, absolute")
	f.Var(field, "elevation", "elevation of the field, for its standard pressure")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			if err := fill(cmd, m, needs("temperature")...); err != nil {
				return err
			}
			p := planning{around: temperature, ambient: ambient, field: field}
			var air plan.ChargeInput
			if err := p.surroundings(nil, &air); err != nil {
				return err
			}
			n, units, err := nightInput(m, args, found, bottles, temperature.value, air.Ambient)
			if err != nil {
				return err
			}
			in := verdict.UnitsOf(m)
			r, err := plan.Night(n)
			if err != nil {
				return planRefused(err, in)
			}
			j := nightFacts(n, r)
			if asJSON {
				err = writeJSON(cmd.OutOrStdout(), j)
			} else {
				printNight(cmd.OutOrStdout(), n, r, units, in)
			}
			if err == nil && len(r.Undone) > 0 {
				return errNo
			}
			return err
		})
	}
	return cmd
}

// nightInput gathers units and bottles. One gas only: a cart carries one.
func nightInput(m *ledger.Meaning, args, found, bottles []string, at quantity.Temperature, ambient quantity.Pressure) (plan.NightInput, []*ledger.Unit, error) {
	n := plan.NightInput{Temperature: at, Ambient: ambient, Connection: perConnection}
	states := map[record.UnitRef][2]string{}
	for _, f := range found {
		name, state, ok := strings.Cut(f, "=")
		p, t, also := strings.Cut(state, "@")
		if !ok || !also {
			return n, nil, usageError(fmt.Sprintf("--found %q is no unit with its state", f), "Write it as HA-40/104=930psi@18F")
		}
		u, err := findUnit(m, name)
		if err != nil {
			return n, nil, err
		}
		states[u.Ref] = [2]string{p, t}
	}
	var units []*ledger.Unit
	for _, a := range args {
		u, err := findUnit(m, a)
		if err != nil {
			return n, nil, err
		}
		units = append(units, u)
	}
	if len(args) == 0 {
		for _, r := range board(m) {
			if r.Verdict != calc.Pass.String() && r.Entry != "" && r.judged.Class != calc.NotAssessable && r.judged.Corrected < r.judged.Target {
				u, err := findUnit(m, r.Unit)
				if err != nil {
					return n, nil, err
				}
				units = append(units, u)
			}
		}
		if len(units) == 0 {
			return n, nil, usageError("no unit of the book needs gas by its last verdict", "Name the units to serve")
		}
	}
	var kept []*ledger.Unit
	for _, u := range units {
		job, model, err := nightJob(m, u, states[u.Ref], at, ambient)
		if err != nil {
			return n, nil, err
		}
		if n.Gas != nil && n.Gas != model {
			return n, nil, usageError(fmt.Sprintf("unit %s takes %s, and others of the list %s", job.Name, model.Name(), n.Gas.Name()), "Plan each gas by itself")
		}
		n.Gas = model
		n.Jobs = append(n.Jobs, job)
		kept = append(kept, u)
	}
	for _, b := range m.Bottles {
		if len(bottles) > 0 && !slices.Contains(bottles, b.Name) || b.Gas != n.Gas.Name() {
			continue
		}
		n.Bottles = append(n.Bottles, bottleAs(b))
	}
	for _, name := range bottles {
		if !slices.ContainsFunc(n.Bottles, func(b plan.Bottle) bool { return b.Name == name }) {
			return n, nil, usageError(fmt.Sprintf("no bottle %q of %s in this book", name, n.Gas.Name()), "See 'chargehand bottle list'")
		}
	}
	if len(n.Bottles) == 0 {
		return n, nil, usageError(fmt.Sprintf("no bottle of %s in this book", n.Gas.Name()), "Enter those on the cart with 'chargehand bottle add'")
	}
	return n, kept, nil
}

// nightJob brings a unit's last state and its target to the night's temperature.
func nightJob(m *ledger.Meaning, u *ledger.Unit, state [2]string, at quantity.Temperature, ambient quantity.Pressure) (plan.NightJob, *gas.Model, error) {
	p := planning{pressure: bookPressure(), temperature: bookTemperature()}
	if state[0] != "" {
		for name, x := range map[string]interface {
			Set(string) error
			withUnit(record.Founding) string
		}{state[0]: p.pressure, state[1]: p.temperature} {
			err := x.Set(name)
			if err == nil && x.withUnit(m.Founding) != "" {
				err = x.Set(x.withUnit(m.Founding))
			}
			var v *valueError
			if errors.As(err, &v) {
				return plan.NightJob{}, nil, usageError(fmt.Sprintf("--found of %s: %s", unitName(u.Ref), v.what), v.todo)
			}
		}
	}
	var c plan.ChargeInput
	if err := p.found(m, u, &planJSON{}, &c); err != nil {
		return plan.NightJob{}, nil, err
	}
	s := m.SheetAt(u.Ref.Part, (&stamp{}).record())
	if s == nil {
		return plan.NightJob{}, nil, usageError(fmt.Sprintf("no sheet for part %s is in force", u.Ref.Part), "Enter it with 'chargehand sheet add'")
	}
	l, err := verdict.Limits(s.Sheet, verdict.UnitsOf(m))
	if err != nil {
		return plan.NightJob{}, nil, couldNot(err, "Have the sheet put right")
	}
	if s.GasVolume == nil {
		return plan.NightJob{}, nil, usageError(fmt.Sprintf("sheet %s rev %s gives no gas volume", s.Document, s.Revision), "Enter it from the manual: 'chargehand sheet add' or 'chargehand correct' with gas-volume")
	}
	target := plan.Target{Pressure: l.Charge, At: l.Reference, Ambient: l.Ambient}
	if l.Chart != nil {
		_, charge, _, err := l.Chart.At(at)
		if err != nil {
			return plan.NightJob{}, nil, couldNot(err, "The chart says nothing there; plan for a temperature on it")
		}
		target = plan.Target{Pressure: charge, At: at, Ambient: l.Ambient}
	}
	settled, err := plan.Settled(l.Gas, target, at, ambient)
	if err != nil {
		return plan.NightJob{}, nil, planRefused(err, verdict.UnitsOf(m))
	}
	now, err := plan.Settled(l.Gas, plan.Target{Pressure: c.Found, At: c.FoundAt, Ambient: ambient}, at, ambient)
	if err != nil {
		return plan.NightJob{}, nil, planRefused(err, verdict.UnitsOf(m))
	}
	return plan.NightJob{Name: unitName(u.Ref), Volume: must(written(*s.GasVolume).Volume()), Found: now, Target: settled}, l.Gas, nil
}

func nightFacts(n plan.NightInput, r plan.NightPlan) nightJSON {
	j := nightJSON{TemperatureF: inF(n.Temperature), Steps: []nightStep{}, Undone: []nightUndone{}, Completed: len(r.Steps), CompletedAtMost: r.CompletedAtMost, Best: r.Best, LeftG: round2(r.Left * 1e3), UsableG: round2(r.Usable * 1e3)}
	for _, s := range r.Steps {
		x := nightStep{Unit: n.Jobs[s.Job].Name, FoundPsi: inPsi(n.Jobs[s.Job].Found), TargetPsi: inPsi(n.Jobs[s.Job].Target), Draws: []nightDraw{}}
		for _, d := range s.Draws {
			x.Draws = append(x.Draws, nightDraw{n.Bottles[d.Bottle].Name, inPsi(d.Unit), inPsi(d.Left), round2(d.Mass * 1e3)})
		}
		j.Steps = append(j.Steps, x)
	}
	for _, u := range r.Undone {
		x := nightUndone{Unit: n.Jobs[u.Job].Name, ReachesPsi: inPsi(u.Reaches), LacksG: round2(u.Lacks * 1e3)}
		if u.Needs != nil {
			x.NeedsPsi = ptr(inPsi(*u.Needs))
		}
		j.Undone = append(j.Undone, x)
	}
	for i, b := range n.Bottles {
		j.Bottles = append(j.Bottles, nightBottle{b.Name, inPsi(atCart(n, b)), inPsi(r.Bottles[i].Pressure)})
	}
	return j
}

// atCart is a bottle's pressure at the night's temperature.
func atCart(n plan.NightInput, b plan.Bottle) quantity.GaugePressure {
	p, err := plan.Settled(n.Gas, plan.Target{Pressure: b.Pressure, At: b.Temperature, Ambient: n.Ambient}, n.Temperature, n.Ambient)
	if err != nil {
		return b.Pressure
	}
	return p
}

func printNight(w io.Writer, n plan.NightInput, r plan.NightPlan, units []*ledger.Unit, in calc.Units) {
	fmt.Fprintf(w, "night       %s and %s at %s; all pressures are settled ones there\n", plural(len(n.Jobs), "unit"), plural(len(n.Bottles), "bottle"), in.Temperature(n.Temperature))
	for i, s := range r.Steps {
		job := n.Jobs[s.Job]
		fmt.Fprintf(w, "\n%2d. %s%s: %s to %s\n", i+1, job.Name, fitted(units[s.Job]), in.Pressure(job.Found), in.Pressure(job.Target))
		if len(s.Draws) == 0 {
			fmt.Fprintln(w, "    on target already")
		}
		for _, d := range s.Draws {
			fmt.Fprintf(w, "    from %s until %s; the bottle is then at %s (%.3g g)\n", n.Bottles[d.Bottle].Name, in.Pressure(d.Unit), in.Pressure(d.Left), d.Mass*1e3)
		}
	}
	for _, u := range r.Undone {
		job := n.Jobs[u.Job]
		fmt.Fprintf(w, "\nCANNOT BE DONE  %s%s: reaches %s of %s with what is left, lacks %.3g g", job.Name, fitted(units[u.Job]), in.Pressure(u.Reaches), in.Pressure(job.Target), u.Lacks*1e3)
		if u.Needs != nil {
			fmt.Fprintf(w, "; one more bottle of %.3g L needs %s", float64(u.Size)*1e3, in.Pressure(*u.Needs))
		}
		fmt.Fprintln(w)
	}
	fmt.Fprintln(w)
	for i, b := range n.Bottles {
		fmt.Fprintf(w, "bottle      %s: %s before, %s after\n", b.Name, in.Pressure(atCart(n, b)), in.Pressure(r.Bottles[i].Pressure))
	}
	how := "no order is better: all were tried"
	if !r.Best {
		how = fmt.Sprintf("no order completes more than %d; %.3g g left usable, and no order leaves more than %.3g g", r.CompletedAtMost, r.Usable*1e3, r.UsableAtMost*1e3)
	}
	fmt.Fprintf(w, "order       %s; %s completed\n", how, plural(len(r.Steps), "unit"))
	fmt.Fprintln(w, "Always through a regulator that is rated for the bottle. Each charge's hot stop is in 'chargehand plan'; the manual decides.")
}

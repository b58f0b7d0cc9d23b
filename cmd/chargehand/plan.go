package main

import (
	"errors"
	"fmt"
	"io"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
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

package main

import (
	"cmp"
	"errors"
	"fmt"
	"io"
	"math"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/capacity"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/trend"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// capacitySteps is how many temperatures a range is looked at.
const capacitySteps = 13

// demand is a flag for fluid: so many applications, or a volume.
type demand struct {
	written quantity.Written
	volume  quantity.Volume
	times   float64 // applications; 0: a volume was given
}

func (d *demand) String() string {
	if d == nil || d.written == (quantity.Written{}) {
		return ""
	}
	return d.written.String()
}

func (d *demand) Type() string { return "applications or volume" }

func (d *demand) Set(s string) error {
	w, err := quantity.Parse(s)
	if err == nil && w.Unit != "" {
		v := volume()
		if err := v.Set(s); err != nil {
			return err
		}
		*d = demand{written: w, volume: v.value}
		return nil
	}
	if err != nil || w.Mantissa <= 0 {
		return &valueError{fmt.Sprintf("%q is neither a number of applications nor a volume above zero", s), "Write 6 for six applications, or a volume such as 120in3", err}
	}
	*d = demand{written: w, times: float64(w.Mantissa) * math.Pow10(w.Exponent)}
	return nil
}

// capacityForm is what a person asks of a unit's capacity.
type capacityForm struct {
	charge      *typed[quantity.GaugePressure]
	at          *typed[quantity.Temperature]
	temperature *typed[quantity.Temperature]
	flow        *typed[quantity.VolumeRate]
	demand      demand
	within, tau time.Duration
}

// capacityAnswer is what a unit delivers, all that the words, the picture and the JSON need.
type capacityAnswer struct {
	unit              capacity.Unit
	sheet             *ledger.Sheet
	in                calc.Units
	charge            capacity.Charge
	of                string // where the charge comes from
	reference         quantity.Temperature
	least, highest    quantity.GaugePressure // that the sheet allows at the reference; 0 not known
	low, high         quantity.Temperature
	application       quantity.Volume // 0: not stated
	slow, fast, timed []capacity.Delivery
	timedName         string
	tau               time.Duration
	demand            quantity.Volume // 0: none
	times             float64
	lowest            *capacity.Lowest
	noLowest          string
}

func newCapacity() *cobra.Command {
	var h home
	var asJSON bool
	var picture string
	a := capacityForm{charge: bookPressure(), at: bookTemperature(), temperature: bookTemperature(), flow: flow()}
	cmd := &cobra.Command{Use: "capacity UNIT", Short: "How much fluid a unit's charge can still deliver", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand capacity HA-40/104 --demand 6\n  chargehand capacity HA-40/104 --charge 1180psi --at 41F --within 20s --plot left.svg",
		Long: "The fluid that a unit delivers from system pressure down to the least useful pressure: slowly, fast, and at a flow or in a time.\n" +
			"The charge is the last one seen on it, or the one that you ask about; the rest stands on the type's sheet. With a demand, the\n" +
			"exit status is 1 when it is not met at every temperature, by the pace asked for or else fast, with the smallest gas volume.\n" +
			"It is an estimate for planning: the manual decides what the charge must be.",
	}
	addHome(cmd, &h, false)
	f := cmd.Flags()
	f.Var(a.charge, "charge", "ask what if the charge were this, fluid side empty (else the last one seen)")
	f.Var(a.at, "at", "gas temperature of that charge")
	f.Var(a.temperature, "temperature", "gas temperature in service (else over the sheet's range)")
	f.Var(&a.demand, "demand", "fluid needed: a number of applications, or a volume")
	f.DurationVar(&a.within, "within", 0, "time in which all is drawn, such as 20s")
	f.Var(a.flow, "flow", "steady flow at which it is drawn")
	f.DurationVar(&a.tau, "time-constant", capacity.DefaultTimeConstant, "how fast the gas takes up heat, with --within or --flow (common practice, no source)")
	addJSON(cmd, &asJSON)
	addPlot(cmd, &picture)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			u, err := pickUnit(cmd, m, args)
			if err == nil {
				err = giveUnits(cmd, m.Founding)
			}
			if err != nil {
				return err
			}
			for _, name := range []string{"within", "time-constant"} {
				if d, err := f.GetDuration(name); err == nil && f.Changed(name) && d <= 0 {
					return usageError(fmt.Sprintf("--%s %v is no time", name, d), "Give one above zero, such as 20s")
				}
			}
			c, err := a.answer(m, u, time.Now())
			var span *quantity.RangeError
			if errors.As(err, &span) {
				return couldNot(fmt.Errorf("the fluid of %s cannot be told: %w", unitName(u.Ref), err), "Ask for a charge and temperatures in service inside that range, with --charge, --at and --temperature")
			} else if err != nil {
				return err
			}
			if picture != "" {
				if len(c.slow) == 1 {
					return usageError(fmt.Sprintf("--plot %q shows the fluid against temperature, and there is one temperature", picture), "Leave out --temperature, so that it is drawn over the sheet's range")
				}
				if err := writePlot(picture, c.picture(unitName(u.Ref))); err != nil {
					return err
				}
			}
			if asJSON {
				err = writeJSON(cmd.OutOrStdout(), c.facts(unitName(u.Ref)))
			} else {
				c.print(cmd.OutOrStdout(), unitName(u.Ref))
			}
			if err == nil && c.demand > 0 && !c.met() {
				return errNo
			}
			return err
		})
	}
	return cmd
}

// answer works it all out, for the sheet that is in force now.
func (a *capacityForm) answer(m *ledger.Meaning, u *ledger.Unit, now time.Time) (*capacityAnswer, error) {
	c := &capacityAnswer{in: verdict.UnitsOf(m), tau: a.tau}
	today := record.Time{Unix: now.Unix()}
	if c.sheet = m.SheetAt(u.Ref.Part, today); c.sheet == nil {
		return nil, usageError(fmt.Sprintf("no sheet for part %s is in force", u.Ref.Part), "Enter it from the manual with 'chargehand sheet add'")
	}
	s := c.sheet
	if r := m.SheetRecall(s.ID, today); r != nil {
		return nil, couldNot(fmt.Errorf("sheet %s rev %s was recalled: %s", s.Document, s.Revision, r.Reason), "Enter the right one with 'chargehand sheet add'")
	}
	l, err := verdict.Limits(s.Sheet, c.in)
	if err != nil {
		return nil, couldNot(fmt.Errorf("sheet %s rev %s cannot be used: %w", s.Document, s.Revision, err), "Compare it with the manual and correct it")
	}
	if err := c.takeSheet(s, l, a); err != nil {
		return nil, err
	}
	if err := c.takeCharge(m, u, l, a); err != nil {
		return nil, err
	}
	return c, a.work(c)
}

// takeSheet reads what the sheet says of the unit; what it does not say is named at once.
func (c *capacityAnswer) takeSheet(s *ledger.Sheet, l calc.Limits, a *capacityForm) error {
	f := newSheetForm()
	if err := f.load(s.Sheet); err != nil {
		return couldNot(fmt.Errorf("sheet %s rev %s cannot be used: %w", s.Document, s.Revision, err), "Compare it with the manual and correct it")
	}
	var gone, set []string
	lacks := func(is bool, name, example string) {
		if is {
			gone, set = append(gone, strings.ReplaceAll(name, "-", " ")), append(set, "--set "+name+"="+example)
		}
	}
	ranged := a.temperature.written.Unit == ""
	lacks(s.GasVolume == nil, "gas-volume", "50in3")
	lacks(s.SystemPressure == nil, "system-pressure", "3000psi")
	lacks(s.LeastUseful == nil, "least-useful", "1500psi")
	lacks(s.Application == nil && a.demand.times > 0, "application", "2.5in3")
	lacks(s.TempLow == nil && ranged, "least-temperature", "-40F")
	lacks(s.TempHigh == nil && ranged, "highest-temperature", "160F")
	if len(gone) > 0 {
		return usageError(fmt.Sprintf("sheet %s rev %s of %s does not state: %s", s.Document, s.Revision, s.Part, strings.Join(gone, ", ")),
			fmt.Sprintf("Enter it as the manual has it, in this manner: chargehand correct %s %s --reason \"left out\"", s.ID.Short(), strings.Join(set, " ")))
	}
	c.unit = capacity.Unit{Gas: l.Gas, Volume: f.volume.value, Tolerance: f.volumeTolerance.value, System: f.system.value, LeastUseful: f.useful.value, Ambient: l.Ambient}
	c.reference, c.application, c.low, c.high = l.Reference, f.application.value, f.low.value, f.high.value
	if !ranged {
		c.low, c.high = a.temperature.value, a.temperature.value
	}
	if c.unit.LeastUseful >= c.unit.System || c.unit.Tolerance >= c.unit.Volume || c.low > c.high {
		return couldNot(fmt.Errorf("sheet %s rev %s contradicts itself: system %s, least useful %s, gas volume %s with tolerance %s, %s to %s", s.Document, s.Revision,
			f.system, f.useful, f.volume, cmp.Or(f.volumeTolerance.String(), "none"), c.in.Temperature(c.low), c.in.Temperature(c.high)), "Compare it with the manual and correct it")
	}
	c.least, c.highest = l.Charge-l.Minus, l.Charge+l.Plus
	if l.Chart != nil {
		if low, _, high, err := l.Chart.At(l.Reference); err == nil {
			c.least, c.highest = low, high
		}
	}
	c.demand, c.times = a.demand.volume, a.demand.times
	if c.times > 0 {
		c.demand = c.application * quantity.Volume(c.times)
	}
	return nil
}

// takeCharge takes the charge asked about, or the last one seen that can be judged, brought to the reference.
func (c *capacityAnswer) takeCharge(m *ledger.Meaning, u *ledger.Unit, l calc.Limits, a *capacityForm) error {
	switch given, at := a.charge.written.Unit != "", a.at.written.Unit != ""; {
	case given && at:
		c.charge, c.of = capacity.Charge{Pressure: a.charge.value, At: a.at.value, Ambient: l.Ambient}, "as asked"
		return nil
	case given:
		return usageError(fmt.Sprintf("--charge %q holds at a temperature", a.charge), "Give it with --at, such as --at 41F")
	case at:
		return usageError(fmt.Sprintf("--at %q says the temperature of a charge that is not given", a.at), "Give --charge too; for the temperature in service give --temperature")
	}
	seen, passed := verdict.History(m, u)
	why := "nothing was read on it"
	if len(passed) > 0 {
		why = passed[len(passed)-1].Why
	}
	for i := len(seen) - 1; i >= 0; i-- {
		s := seen[i]
		p, err := trend.Reading{At: s.At, Gauge: s.Gauge, Reading: s.Reading}.Point(s.Limits, s.Segment)
		if err != nil {
			why = err.Error()
			continue
		}
		at := s.Limits.Reference
		if s.Limits.Chart != nil {
			at = trend.ChartReference
		}
		c.charge = capacity.Charge{Pressure: p.Pressure, At: at, Ambient: s.Limits.Ambient}
		c.of = fmt.Sprintf("entry %s of %s", s.Entry.Short(), s.At.Format(time.DateOnly))
		return nil
	}
	return couldNot(fmt.Errorf("the charge of %s is not known: %s", unitName(u.Ref), why), "Check it with 'chargehand check', or ask with --charge and --at")
}

// work computes the curves and the lowest charge.
func (a *capacityForm) work(c *capacityAnswer) (err error) {
	if a.within > 0 && a.flow.written.Unit != "" {
		return usageError(fmt.Sprintf("--within %v and --flow %q both say how fast it is drawn", a.within, a.flow), "Give one of them")
	}
	pace := capacity.Fast()
	switch {
	case a.within > 0:
		c.timedName = "in " + a.within.String()
		pace, err = capacity.Within(a.within, a.tau)
	case a.flow.written.Unit != "":
		c.timedName = "at " + a.flow.String()
		pace, err = capacity.AtFlow(a.flow.value, a.tau)
	}
	curve := func(p capacity.Pace) (d []capacity.Delivery) {
		if err == nil {
			d, err = c.unit.Curve(c.charge, c.low, c.high, capacitySteps, p)
		}
		return d
	}
	c.slow, c.fast = curve(capacity.Slow()), curve(capacity.Fast())
	if c.timedName != "" {
		c.timed = curve(pace)
	}
	if err != nil || c.demand == 0 {
		return err
	}
	lowest, err := c.unit.Lowest(c.reference, c.low, c.high, capacitySteps, c.demand, pace)
	if errors.Is(err, quantity.ErrOutOfRange) {
		c.noLowest = err.Error()
		return nil
	}
	c.lowest = &lowest
	return err
}

// deciding is the curve that a demand is held against.
func (c *capacityAnswer) deciding() (name string, curve []capacity.Delivery) {
	if c.timed != nil {
		return c.timedName, c.timed
	}
	return "fast", c.fast
}

// met tells whether the demand is met at every temperature, with the smallest gas volume. The lowest charge that just meets it
// does, whatever the last digit.
func (c *capacityAnswer) met() bool {
	_, curve := c.deciding()
	return capacity.Worst(curve).Low >= c.demand*(1-1e-9)
}

// fluid writes a volume in the book's own unit.
func (c *capacityAnswer) fluid(v quantity.Volume) string {
	f := show(v.InUnit(c.volumeUnit()))
	return fmt.Sprintf("%.*f %s", places(f), f+0, c.volumeUnit())
}

func places(v float64) int {
	if math.Abs(v) < 99.95 {
		return 1
	}
	return 0
}

func (c *capacityAnswer) volumeUnit() string {
	if cmp.Or(c.in.P, "psi") == "psi" {
		return "in3"
	}
	return "cm3"
}

func (c *capacityAnswer) uses(d capacity.Delivery) string {
	if c.application == 0 {
		return ""
	}
	n, whole := d.Applications(c.application)
	return fmt.Sprintf(", %s (%d whole for sure)", applications(n, "%.1f"), whole)
}

func applications(n float64, format string) string {
	if n == 1 {
		return "1 application"
	}
	return fmt.Sprintf(format+" applications", n)
}

func (c *capacityAnswer) line(out io.Writer, name string, curve []capacity.Delivery) {
	w := capacity.Worst(curve)
	fmt.Fprintf(out, "%-11s %s%s", name, c.fluid(w.Volume), c.uses(w))
	if w.Low < w.High {
		fmt.Fprintf(out, "; %s to %s by the tolerance of the gas volume", strings.Fields(c.fluid(w.Low))[0], c.fluid(w.High))
	}
	fmt.Fprintf(out, "; %s %s, gas ends at %s", map[bool]string{true: "worst at", false: "at"}[len(curve) > 1], c.in.Temperature(w.Temperature), c.in.Temperature(w.End))
	if w.Stopped {
		fmt.Fprintf(out, " and %s: it has filled its volume, and delivery stops there", c.in.Pressure(w.EndPressure))
	}
	fmt.Fprintln(out)
}

func (c *capacityAnswer) print(out io.Writer, unit string) {
	fmt.Fprintf(out, "unit        %s\n", unit)
	fmt.Fprintf(out, "charge      %s at %s, %s\n", c.in.Pressure(c.charge.Pressure), c.in.Temperature(c.charge.At), c.of)
	fmt.Fprintf(out, "sheet       %s rev %s: %s down to %s, gas volume %s", c.sheet.Document, c.sheet.Revision, c.in.Pressure(c.unit.System), c.in.Pressure(c.unit.LeastUseful), c.fluid(c.unit.Volume))
	if c.unit.Tolerance > 0 {
		fmt.Fprintf(out, " +/- %s\n", c.fluid(c.unit.Tolerance))
	} else {
		fmt.Fprint(out, ", its tolerance not stated\n")
	}
	if w := capacity.Worst(c.slow); w.Stored == 0 {
		fmt.Fprintf(out, "nothing     at %s the charge is not below system pressure, so the unit takes no fluid\n", c.in.Temperature(w.Temperature))
	}
	c.line(out, "slow", c.slow)
	c.line(out, "fast", c.fast)
	if c.timed != nil {
		c.line(out, c.timedName, c.timed)
		fmt.Fprintf(out, "heat        taken up with a time constant of %v (common practice, no source); bare gas in small units has 10 s to 60 s\n", c.tau)
	}
	if c.demand > 0 {
		c.printDemand(out)
	}
	fmt.Fprintln(out, "caution     an estimate for planning: the manual decides what the charge must be")
}

func (c *capacityAnswer) demandWords() string {
	if c.times > 0 {
		return applications(c.times, "%g")
	}
	return ""
}

func (c *capacityAnswer) printDemand(out io.Writer) {
	name, curve := c.deciding()
	w := capacity.Worst(curve)
	what := c.fluid(c.demand)
	if c.times > 0 {
		what = c.demandWords() + ", " + what
	}
	switch {
	case c.met():
		fmt.Fprintf(out, "demand      %s: met %s\n", what, name)
	case w.Volume >= c.demand:
		fmt.Fprintf(out, "demand      %s: NOT MET %s by the smallest gas volume at %s\n", what, name, c.in.Temperature(w.Temperature))
	default:
		fmt.Fprintf(out, "demand      %s: NOT MET %s, %s short at %s\n", what, name, c.fluid(c.demand-w.Low), c.in.Temperature(w.Temperature))
	}
	l := c.lowest
	at := c.in.Temperature(c.reference)
	switch {
	case l == nil:
		fmt.Fprintf(out, "lowest      not known: %s\n", c.noLowest)
	case !l.Met:
		fmt.Fprintf(out, "lowest      no charge meets it %s: the most is %s, with %s at %s; more charge leaves less room for fluid\n", name, c.fluid(l.Worst.Low), c.in.Pressure(l.Charge), at)
	default:
		up := roundUp(l.Charge, c.in)
		fmt.Fprintf(out, "lowest      %s at %s meets it %s", c.in.Pressure(up), at, name)
		switch {
		case c.highest > 0 && up > c.highest:
			fmt.Fprintf(out, ", but the sheet allows no more than %s: do not charge to it", c.in.Pressure(c.highest))
		case up < c.least:
			fmt.Fprintf(out, ", but the sheet asks for at least %s", c.in.Pressure(c.least))
		}
		fmt.Fprintln(out)
	}
}

// roundUp goes to the next step that pressures are written in, so that the figure read still meets the demand.
func roundUp(g quantity.GaugePressure, in calc.Units) quantity.GaugePressure {
	step := map[string]string{"bar": "0.1bar", "MPa": "0.01MPa", "kPa": "1kPa", "kgf/cm2": "0.1kgf/cm2"}[in.P]
	s, err := quantity.ParseGauge(cmp.Or(step, "1psi"))
	if err != nil {
		return g
	}
	return quantity.GaugePressure(math.Ceil(float64(g/s)-1e-6)) * s
}

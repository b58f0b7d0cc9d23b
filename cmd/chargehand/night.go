package main

import (
	"errors"
	"fmt"
	"io"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/plan"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// perConnection is what moving the hose once more must save, kg of gas (common practice, no source).
const perConnection = 0.02

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

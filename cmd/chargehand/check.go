package main

import (
	"fmt"
	"io"
	"math"
	"strings"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

const beforeReading = `Before you read: pumps off and locked out, hydraulic pressure relieved by working every unit that the accumulator feeds; eyes
protected; stand clear of the valve's axis. The maintenance manual decides.`

const beforeCharging = `Before you charge: pumps off and locked out, hydraulic pressure relieved by working every unit that the accumulator feeds; eyes
protected; stand clear of the valve's axis. Dry nitrogen only, never oxygen or shop air; regulator, hose and gauge rated for the
bottle; bottle secured; charge slowly, let it settle, never loosen a valve body or a fitting under charge; ventilate closed bays.
The maintenance manual decides.`

// judging is what check and charge share: the form, the verdict shown before the signature, the questions about what looks wrong.
type judging struct {
	home           home
	on             string
	asJSON, budget bool
	unsigned       bool
}

func (o *judging) flags(cmd *cobra.Command) {
	addHome(cmd, &o.home, true)
	addJSON(cmd, &o.asJSON)
	f := cmd.Flags()
	f.StringVar(&o.on, "on", "", "the aircraft you stand at: asks when the unit is fitted elsewhere")
	f.BoolVar(&o.budget, "budget", false, "show the uncertainty line by line")
	f.BoolVar(&o.unsigned, "unsigned", false, "show the verdict and sign nothing")
}

func newCheck() *cobra.Command {
	var o judging
	f := newReadingForm()
	cmd := &cobra.Command{Use: "check UNIT", Short: "Record an as-found reading, with its verdict", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand check HA-40/104 --gauge G-7 --pressure 1180psi --temperature 41F --from shell --relieved \"brake pedal, 12 strokes\" --fluid 0psi",
		Long:    "Record an as-found reading. What you do not give is asked for; the verdict is shown before you sign.\n\n" + beforeReading + "\n\nExit status 1: the verdict is not a pass or conditional pass."}
	f.flags(cmd.Flags())
	o.flags(cmd)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return o.run(cmd, args, record.KindReading, f, &f.circumstances, beforeReading)
	}
	return cmd
}

func newCharge() *cobra.Command {
	var o judging
	f := newChargeForm()
	cmd := &cobra.Command{Use: "charge UNIT", Short: "Record servicing with gas, as found and as left, with the verdict as left", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand charge HA-40/104 --gauge G-7 --found 1010psi --found-temperature 41F --found-from shell \\\n    --left 1180psi --left-temperature 43F --left-from shell --bottle N2-3 --relieved \"brake pedal, 12 strokes\" --fluid 0psi",
		Long:    "Record servicing with gas. What you do not give is asked for; the verdict is shown before you sign.\n\n" + beforeCharging + "\n\nExit status 1: the verdict as left is not a pass or conditional pass."}
	f.flags(cmd.Flags())
	o.flags(cmd)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return o.run(cmd, args, record.KindCharge, f, &f.circumstances, beforeCharging)
	}
	return cmd
}

// run shows the verdict on what the form holds, asks about what looks wrong, and signs.
func (o *judging) run(cmd *cobra.Command, args []string, kind record.Kind, f form, c *circumstances, caution string) error {
	return o.home.with(cmd, func(b *ledger.Book, dir string) error {
		m := b.Meaning()
		u, err := pickUnit(cmd, m, args)
		if err != nil {
			return err
		}
		c.unit = unitName(u.Ref)
		if terminal(cmd) != nil && missing(cmd, f.wants(m)) {
			fmt.Fprintln(cmd.ErrOrStderr(), caution)
		}
		if err := fill(cmd, m, f.wants(m)...); err != nil {
			return err
		}
		body, err := f.body(m)
		if err != nil {
			return err
		}
		j, err := verdict.Judge(m, record.ID{}, body)
		if err != nil {
			return err
		}
		if why := doubts(m, u, o.on, body, j); why != "" && c.override == "" {
			if terminal(cmd) == nil {
				return usageError(why, "Look again; if it is right, say why with --unlikely-because")
			}
			fmt.Fprintln(cmd.ErrOrStderr(), "look again  "+why)
			if c.override, err = askLine(cmd, "If it is right, say why; else press Enter and nothing is signed: "); err != nil {
				return err
			}
			if c.override == "" {
				return errLeft
			}
		}
		if j.Sheet != nil {
			c.sheet = j.Sheet.ID
		}
		if body, err = f.body(m); err != nil { // with the reason and the sheet
			return err
		}
		w := quietWith(cmd, o.asJSON)
		if ch, ok := body.(record.Charge); ok {
			printFound(w, m, ch)
		}
		facts := verdictFacts(u, j)
		facts.print(w, verdict.UnitsOf(m), o.budget)
		if !o.unsigned {
			v, err := o.home.sign(cmd, w, b, dir, ledger.Draft{Kind: kind, Body: body, Shown: shown(j)})
			if err != nil {
				return err
			}
			facts.Entry = v.ID().String()
		}
		if o.asJSON {
			if err := writeJSON(cmd.OutOrStdout(), facts); err != nil {
				return err
			}
		}
		if j.Class != calc.Pass && j.Class != calc.ConditionalPass {
			return errNo
		}
		return nil
	})
}

// printFound tells the verdict on a charge as it was found.
func printFound(w io.Writer, m *ledger.Meaning, c record.Charge) {
	f := c.AsFound
	j, err := verdict.Judge(m, record.ID{}, record.Reading{Unit: c.Unit, Gauge: c.Gauge, Pressure: f.Pressure, Temperature: f.Temperature, TemperatureFrom: f.TemperatureFrom, SoakMin: f.SoakMin,
		Ambient: c.Ambient, Relieved: c.Relieved, FluidPressure: c.FluidPressure, Done: c.Done})
	if err == nil {
		fmt.Fprintf(w, "as found    %s\n", verdictFacts(&ledger.Unit{Ref: c.Unit}, j).line(verdict.UnitsOf(m)))
	}
	fmt.Fprintln(w, "as left:")
}

func shown(j verdict.Judged) *record.Shown {
	s := &record.Shown{Verdict: j.Class.String(), Core: calc.CoreVersion}
	if j.Class != calc.NotAssessable {
		s.Corrected = &record.Amount{Mantissa: int64(j.Corrected), Exponent: -3, Unit: "kPa"}
	}
	return s
}

// verdictJSON is a verdict as people and programs read it.
type verdictJSON struct {
	Unit           string     `json:"unit"`
	Verdict        string     `json:"verdict"`
	CorrectedPsi   float64    `json:"corrected_psi,omitempty"`
	LowPsi         float64    `json:"low_psi,omitempty"`
	TargetPsi      float64    `json:"target_psi,omitempty"`
	HighPsi        float64    `json:"high_psi,omitempty"`
	UncertaintyPsi float64    `json:"uncertainty_psi,omitempty"` // k = 2
	Conformance    float64    `json:"conformance,omitempty"`     // probability of being in limits
	Reasons        []string   `json:"reasons,omitempty"`         // why not assessable
	Budget         []termJSON `json:"budget,omitempty"`
	Next           string     `json:"next"`
	Sentence       string     `json:"sentence"`
	Sheet          string     `json:"sheet,omitempty"`
	Core           string     `json:"core"`
	Entry          string     `json:"entry,omitempty"` // signed
	fitted         string
	judged         verdict.Judged
}

type termJSON struct {
	Name   string  `json:"name"`
	Stated string  `json:"stated"`
	Psi    float64 `json:"psi"` // standard uncertainty of the corrected pressure
}

func verdictFacts(u *ledger.Unit, j verdict.Judged) verdictJSON {
	v := verdictJSON{Unit: unitName(u.Ref), Verdict: j.Class.String(), Reasons: j.Reasons, Next: j.Next, Sentence: j.Sentence, Core: calc.CoreVersion, fitted: fitted(u), judged: j}
	if j.Sheet != nil {
		v.Sheet = j.Sheet.Document + " rev " + j.Sheet.Revision
	}
	if j.Class != calc.NotAssessable {
		v.CorrectedPsi, v.LowPsi, v.TargetPsi, v.HighPsi = inPsi(j.Corrected), inPsi(j.Low), inPsi(j.Target), inPsi(j.High)
		v.UncertaintyPsi, v.Conformance = inPsi(j.U), math.Round(j.Conformance*1e6)/1e6
	}
	for _, t := range j.Budget {
		v.Budget = append(v.Budget, termJSON{t.Name, t.Stated, inPsi(t.U)})
	}
	return v
}

func (v verdictJSON) print(w io.Writer, in calc.Units, budget bool) {
	j := v.judged
	fmt.Fprintf(w, "unit        %s%s\nverdict     %s\n", v.Unit, v.fitted, strings.ToUpper(v.Verdict))
	if j.Class != calc.NotAssessable {
		fmt.Fprintf(w, "corrected   %s, limits %s, known to +/-%s (k = 2)\n", in.Pressure(j.Corrected), in.Between(j.Low, j.High), in.Pressure(j.U))
		fmt.Fprintf(w, "in words    %s\n", v.Sentence)
	}
	for _, r := range v.Reasons {
		fmt.Fprintf(w, "because     %s\n", r)
	}
	fmt.Fprintf(w, "next        %s\n", v.Next)
	if v.Sheet != "" {
		fmt.Fprintf(w, "by          %s\n", v.Sheet)
	}
	if budget {
		for _, t := range j.Budget {
			fmt.Fprintf(w, "budget      %-8s %s: %s\n", in.Pressure(t.U), t.Name, t.Stated)
		}
	}
}

// line is the verdict in one line.
func (v verdictJSON) line(in calc.Units) string {
	j := v.judged
	if j.Class == calc.NotAssessable {
		return "not assessable: " + strings.Join(v.Reasons, "; ")
	}
	return fmt.Sprintf("%s: %s, limits %s, +/-%s", v.Verdict, in.Pressure(j.Corrected), in.Between(j.Low, j.High), in.Pressure(j.U))
}

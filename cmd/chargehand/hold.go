package main

import (
	"errors"
	"fmt"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/trend"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

type holdJSON struct {
	Unit           string     `json:"unit"`
	Start          string     `json:"start"`
	End            string     `json:"end"`
	Hours          float64    `json:"hours"`
	Verdict        string     `json:"verdict"`
	DropPsi        float64    `json:"drop_psi"` // corrected; negative: it rose
	AllowedPsi     float64    `json:"allowed_psi"`
	UncertaintyPsi float64    `json:"uncertainty_psi"` // of the drop, k = 2
	PsiPerDay      float64    `json:"psi_per_day"`
	Exceeds        float64    `json:"exceeds"` // probability that the loss is above the limit
	Budget         []termJSON `json:"budget"`
	Entry          string     `json:"entry,omitempty"`
}

func newHold() *cobra.Command {
	var h home
	var start, end, document, note string
	var asJSON, budget, unsigned bool
	limit := bookPressure()
	cmd := &cobra.Command{Use: "hold UNIT", Short: "Judge a pressure-hold test: two signed readings by one gauge, and the fall allowed", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand hold HA-40/104 --start 3f2a91c0 --end 77b01d2e --limit 20psi --document CM-29",
		Long: "Judge a pressure-hold test: two readings of one unit, by one gauge, with no valve touched in between. Both are corrected to one\n" +
			"temperature, so that cooling is no leak; the gauge's own error cancels in the difference. The limit is the fall that the manual\n" +
			"allows over the whole test. Without entries the unit's last two readings are taken.\n\nExit status 1: the verdict is not a pass or conditional pass.",
	}
	addHome(cmd, &h, true)
	addJSON(cmd, &asJSON)
	f := cmd.Flags()
	f.StringVar(&start, "start", "", "the reading at the start: the first digits of its entry")
	f.StringVar(&end, "end", "", "the reading at the end")
	f.Var(limit, "limit", "fall of the corrected pressure that is allowed over the whole test")
	f.StringVar(&document, "document", "", "the manual that gives the limit")
	f.StringVar(&note, "note", "", "anything worth keeping")
	f.BoolVar(&budget, "budget", false, "show the uncertainty line by line")
	f.BoolVar(&unsigned, "unsigned", false, "show the verdict and sign nothing")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			m := b.Meaning()
			in := verdict.UnitsOf(m)
			u, err := pickUnit(cmd, m, args)
			if err != nil {
				return err
			}
			first, last, err := testReadings(m, u, start, end)
			if err != nil {
				return err
			}
			if err := fill(cmd, m, needs("limit", "document")...); err != nil {
				return err
			}
			took := last.At.Sub(first.At)
			r, err := trend.NewHold(last.Limits, trend.Reading{At: first.At, Gauge: first.Gauge, Reading: first.Reading}, trend.Reading{At: last.At, Gauge: last.Gauge, Reading: last.Reading},
				trend.HoldLimit{Drop: limit.value, Over: took}, calc.GuardBanded())
			if err != nil {
				return holdRefused(err, in)
			}
			w := quietWith(cmd, asJSON)
			j := holdJSON{Unit: unitName(u.Ref), Start: first.Entry.String(), End: last.Entry.String(), Hours: round2(took.Hours()), Verdict: r.Class.String(), DropPsi: inPsi(r.Drop), AllowedPsi: inPsi(r.Allowed),
				UncertaintyPsi: inPsi(r.U), PsiPerDay: round2(r.Rate.PsiPerDay()), Exceeds: round2(r.Exceeds)}
			for _, t := range r.Budget {
				j.Budget = append(j.Budget, termJSON{t.Name, t.Stated, inPsi(t.U)})
			}
			fmt.Fprintf(w, "unit        %s%s\n", unitName(u.Ref), fitted(u))
			for _, x := range []struct {
				name string
				s    verdict.Observed
			}{{"start", first}, {"end", last}} {
				fmt.Fprintf(w, "%-11s entry %s, %s: %s at %s, gauge %s\n", x.name, x.s.Entry.Short(), x.s.At.Format(time.RFC3339), in.Pressure(x.s.Reading.Gauge), in.Temperature(x.s.Reading.Temperature), x.s.Gauge.Name)
			}
			fmt.Fprintf(w, "corrected   %s, then %s: a fall of %s in %s, known to +/-%s (k = 2)\n", in.Pressure(r.First), in.Pressure(r.Last), in.Pressure(r.Drop), lasting(took), in.Pressure(r.U))
			fmt.Fprintf(w, "allowed     %s by %s; the chance that the loss is above it is %s\n", in.Pressure(r.Allowed), document, chance(r.Exceeds))
			fmt.Fprintf(w, "rate        %s\n", in.PerDay(r.Rate.PerDay()))
			fmt.Fprintf(w, "verdict     %s\n", r.Class)
			if budget {
				for _, t := range r.Budget {
					fmt.Fprintf(w, "budget      %-8s %s: %s\n", in.Pressure(t.U), t.Name, t.Stated)
				}
			}
			if !unsigned {
				v, err := h.sign(cmd, w, b, dir, ledger.Draft{Kind: record.KindHold, Body: record.Hold{Start: first.Entry, End: last.Entry, Limit: *limit.amount(), Document: document, Note: note}})
				if err != nil {
					return err
				}
				j.Entry = v.ID().String()
			}
			if asJSON {
				if err := writeJSON(cmd.OutOrStdout(), j); err != nil {
					return err
				}
			}
			if r.Class != calc.Pass && r.Class != calc.ConditionalPass {
				return errNo
			}
			return nil
		})
	}
	return cmd
}

// testReadings finds the two readings by their entries, or takes the unit's last two.
func testReadings(m *ledger.Meaning, u *ledger.Unit, start, end string) (first, last verdict.Observed, err error) {
	seen, _ := verdict.History(m, u)
	var readings []verdict.Observed
	for _, s := range seen {
		if s.Kind == record.KindReading {
			readings = append(readings, s)
		}
	}
	if (start == "") != (end == "") {
		return first, last, usageError("only one of --start and --end is given", "Give both, or neither for the last two readings")
	}
	if start == "" {
		if len(readings) < 2 {
			return first, last, usageError(fmt.Sprintf("unit %s has %s that can be used, and a hold test needs two", unitName(u.Ref), plural(len(readings), "reading")), "Record both with 'chargehand check'")
		}
		return readings[len(readings)-2], readings[len(readings)-1], nil
	}
	find := func(flag, name string) (verdict.Observed, error) {
		id, err := findEntry(m, name)
		if err != nil {
			return verdict.Observed{}, err
		}
		for _, s := range readings {
			if s.Entry == id {
				return s, nil
			}
		}
		return verdict.Observed{}, usageError(fmt.Sprintf("--%s %q is no reading of %s in force", flag, name, unitName(u.Ref)), "See 'chargehand unit show "+unitName(u.Ref)+"' for its readings")
	}
	if first, err = find("start", start); err != nil {
		return first, last, err
	}
	last, err = find("end", end)
	if err == nil && first.Segment != last.Segment {
		err = usageError("the unit was charged between the two readings", "A hold test is of one charge; take two readings after it")
	}
	return first, last, err
}

// holdRefused words why two readings are no hold test.
func holdRefused(err error, in calc.Units) error {
	var short *trend.TooShortError
	var rose *trend.RoseError
	switch {
	case errors.As(err, &short):
		return couldNot(fmt.Errorf("%s is too short to see the limit: the fall allowed is %s and the difference is known to +/-%s", lasting(short.Took), in.Pressure(short.Drop), in.Pressure(short.U)),
			fmt.Sprintf("With the limit spread over the test, wait until %s after the first reading, or use a better gauge; nothing was signed", lasting(short.Needed)))
	case errors.As(err, &rose):
		return couldNot(fmt.Errorf("the corrected pressure rose by %s, more than its uncertainty of %s", in.Pressure(rose.By), in.Pressure(rose.U)), "A temperature is wrong, or fluid has come in: relieve the fluid side and start again; nothing was signed")
	case errors.Is(err, trend.ErrOtherGauge):
		return usageError(err.Error(), "Start again with one gauge; nothing was signed")
	}
	return couldNot(inBookUnits(err, in), "Put right what is named there; nothing was signed")
}

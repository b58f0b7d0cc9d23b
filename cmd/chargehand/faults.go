package main

import (
	"fmt"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/fault"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

type faultsJSON struct {
	Unit     string      `json:"unit"`
	Readings int         `json:"readings"`
	Causes   []faultJSON `json:"causes"` // the likeliest first; none: nothing points to a fault
}

type faultJSON struct {
	Cause    string   `json:"cause"`
	Fault    bool     `json:"fault"`    // false: it explains what was seen, and nothing is wrong
	Strength string   `json:"strength"` // in words; the weights are judgement, so there is no probability
	For      []string `json:"for"`
	Against  []string `json:"against"`
	Next     string   `json:"next"` // the test that would tell it from the next
}

func newFaults() *cobra.Command {
	var h home
	var asJSON, all bool
	var now remarks
	var list []string
	for _, r := range fault.Remarks() {
		list = append(list, "  "+r.String())
	}
	cmd := &cobra.Command{Use: "faults UNIT", Short: "What the pattern of a unit's readings points to, with the evidence", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand faults HA-40/104\n  chargehand faults HA-40/104 --seen \"bubbles at the valve\"",
		Long: "Reason about a unit from its readings and from those of the other units with the same gauges: what they point to, what speaks\n" +
			"for it and against, and the test that would tell. It ranks, it does not decide: the manual's fault finding does.\n\n" +
			"What can be noted with --seen, here or with 'check' and 'charge':\n" + strings.Join(list, "\n"),
	}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.Flags().Var(&now, "seen", "what you notice now; once for each")
	cmd.Flags().BoolVar(&all, "all", false, "also those for which little speaks")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			u, err := pickUnit(cmd, m, args)
			if err != nil {
				return err
			}
			history, passed := faultHistory(m, u, now.is)
			found := fault.Explain(history)
			j := faultsJSON{Unit: unitName(u.Ref), Readings: len(history.Seen), Causes: []faultJSON{}}
			for _, f := range found {
				if f.Strength > fault.Weak || all {
					j.Causes = append(j.Causes, faultJSON{f.Cause.String(), f.Cause.Fault(), f.Strength.String(), f.For, f.Against, f.Next})
				}
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), j)
			}
			w := cmd.OutOrStdout()
			fmt.Fprintf(w, "unit        %s%s\nreadings    %d\n", j.Unit, fitted(u), j.Readings)
			for _, p := range passed {
				fmt.Fprintf(w, "passed over entry %s: %s\n", p.Entry.Short(), p.Why)
			}
			if !slices.ContainsFunc(j.Causes, func(c faultJSON) bool { return c.Fault }) {
				fmt.Fprintln(w, "found       nothing in these readings points to a fault")
			}
			for i, c := range j.Causes {
				note := ""
				if !c.Fault {
					note = "; no fault"
				}
				fmt.Fprintf(w, "\n%d. %s: %s%s\n", i+1, c.Cause, c.Strength, note)
				for _, s := range c.For {
					fmt.Fprintf(w, "   for      %s\n", s)
				}
				for _, s := range c.Against {
					fmt.Fprintf(w, "   against  %s\n", s)
				}
				fmt.Fprintf(w, "   test     %s\n", c.Next)
			}
			fmt.Fprintln(w, "\nThe manual's fault finding decides; this only ranks what the readings say.")
			return nil
		})
	}
	return cmd
}

// faultHistory gathers what is known of a unit, with the others beside it.
func faultHistory(m *ledger.Meaning, u *ledger.Unit, now []string) (fault.History, []verdict.Passed) {
	w := verdict.Watch(m, u)
	h := fault.History{Unit: unitName(u.Ref), Limits: w.Limits, Allowed: quantity.GaugePressure(w.Allowed.PerDay())}
	if len(w.Seen) == 0 {
		if s := m.SheetAt(u.Ref.Part, (&stamp{}).record()); s != nil {
			h.Limits, _ = verdict.Limits(s.Sheet, verdict.UnitsOf(m))
		}
	}
	h.Seen = faultObservations(m, w.Seen)
	if n := len(h.Seen); n > 0 {
		h.Seen[n-1].Remarks = append(h.Seen[n-1].Remarks, parsedRemarks(now)...)
	}
	for _, o := range m.Units {
		if o.Ref == u.Ref {
			continue
		}
		if seen, _ := verdict.History(m, o); len(seen) > 0 {
			h.Others = append(h.Others, fault.Other{Unit: unitName(o.Ref), Limits: seen[len(seen)-1].Limits, Seen: faultObservations(m, seen)})
		}
	}
	return h, w.Passed
}

// parsedRemarks leaves out words that this version does not know.
func parsedRemarks(seen []string) (out []fault.Remark) {
	for _, s := range seen {
		if r, err := fault.ParseRemark(s); err == nil {
			out = append(out, r)
		}
	}
	return out
}

// faultObservations gives the readings as they were typed; a chart's are corrected by the reasoning itself.
func faultObservations(m *ledger.Meaning, seen []verdict.Observed) []fault.Observation {
	out := make([]fault.Observation, 0, len(seen))
	for _, s := range seen {
		o := fault.Observation{When: s.At, Gauge: s.Gauge.Name, Reading: s.Reading}
		body := m.Item(s.Entry).Body
		obs := observed(body)
		typed := obs[0]
		switch b := body.(type) {
		case record.Reading:
			o.Remarks = parsedRemarks(b.Seen)
		case record.Charge:
			o.Kind = fault.ChargeFound
			if s.Left {
				o.Kind, typed = fault.ChargeLeft, obs[1]
			} else {
				o.Remarks = parsedRemarks(b.Seen)
			}
		}
		o.PressureIn, o.TemperatureIn = typed.Pressure.Unit, typed.Temperature.Unit
		if v := calc.Judge(s.Limits, s.Gauge, s.Reading, calc.GuardBanded()); v.Class != calc.NotAssessable && s.Limits.Chart == nil {
			o.Corrected, o.U = v.Corrected, v.U
		}
		out = append(out, o)
	}
	return out
}

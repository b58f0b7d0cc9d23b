package main

import (
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/fault"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

type faultsJSON struct {
	Unit     string       `json:"unit"`
	Readings int          `json:"readings"`        // that could be used; a charge counts as two
	First    string       `json:"first,omitempty"` // when the first of them was made
	Last     string       `json:"last,omitempty"`
	Gauges   []string     `json:"gauges"`
	Allowed  string       `json:"allowed"` // loss that the sheet allows a day, or why that is not known
	Noticed  []string     `json:"noticed"` // now, with --seen
	Passed   []unusedJSON `json:"passed_over"`
	Causes   []faultJSON  `json:"causes"` // the likeliest first; none: nothing points to a fault
}

// unusedJSON is an entry that says nothing of the charge, and why.
type unusedJSON struct {
	Entry string `json:"entry"`
	Why   string `json:"why"`
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
			j := faultFacts(m, u, now.is, all)
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), j)
			}
			w := cmd.OutOrStdout()
			fmt.Fprintf(w, "unit        %s%s\n", j.Unit, fitted(u))
			if j.Readings > 0 {
				fmt.Fprintf(w, "readings    %d, %s to %s, with %s\n", j.Readings, j.First, j.Last, strings.Join(j.Gauges, ", "))
			} else {
				fmt.Fprintln(w, "readings    none that can be used")
			}
			fmt.Fprintf(w, "allowed     %s\n", j.Allowed)
			for _, p := range j.Passed {
				fmt.Fprintf(w, "passed over entry %.8s: %s\n", p.Entry, p.Why)
			}
			if !slices.ContainsFunc(j.Causes, func(c faultJSON) bool { return c.Fault }) {
				found := "nothing in these readings points to a fault"
				if j.Readings == 0 {
					found = "nothing to reason from; check it, or say with --seen what you notice"
				}
				fmt.Fprintf(w, "found       %s\n", found)
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

// faultFacts reasons about a unit; all: also those for which little speaks.
func faultFacts(m *ledger.Meaning, u *ledger.Unit, noticed []string, all bool) faultsJSON {
	watched := verdict.Watch(m, u)
	h := faultHistory(m, u, &watched)
	h.Noticed = parsedRemarks(noticed)
	j := faultsJSON{Unit: unitName(u.Ref), Readings: len(h.Seen), Gauges: []string{}, Noticed: append([]string{}, noticed...), Passed: []unusedJSON{}, Causes: []faultJSON{}}
	if n := len(h.Seen); n > 0 {
		j.First, j.Last = h.Seen[0].When.Format(time.DateOnly), h.Seen[n-1].When.Format(time.DateOnly)
	}
	for _, s := range h.Seen {
		if !slices.Contains(j.Gauges, s.Gauge) {
			j.Gauges = append(j.Gauges, s.Gauge)
		}
	}
	switch {
	case watched.NoAllow != "":
		j.Allowed = "loss not known: " + watched.NoAllow
	case h.Allowed > 0:
		j.Allowed = fmt.Sprintf("a loss of %s a day, by sheet %s rev %s", h.Limits.In.Pressure(h.Allowed), watched.Sheet.Document, watched.Sheet.Revision)
	case watched.Sheet == nil || watched.Sheet.Leak != nil: // the trend stopped before it
		j.Allowed = "loss not known: " + watched.Why
	default:
		j.Allowed = fmt.Sprintf("loss not known: sheet %s rev %s states none", watched.Sheet.Document, watched.Sheet.Revision)
	}
	for _, p := range watched.Passed {
		j.Passed = append(j.Passed, unusedJSON{p.Entry.String(), p.Why})
	}
	for _, f := range fault.Explain(h) {
		if f.Strength > fault.Weak || all {
			j.Causes = append(j.Causes, faultJSON{f.Cause.String(), f.Cause.Fault(), f.Strength.String(), f.For, append([]string{}, f.Against...), f.Next})
		}
	}
	return j
}

// faultHistory gathers what is known of a unit, with the others beside it.
func faultHistory(m *ledger.Meaning, u *ledger.Unit, w *verdict.Watched) fault.History {
	h := fault.History{Unit: unitName(u.Ref), Limits: w.Limits, Allowed: quantity.GaugePressure(w.Allowed.PerDay())}
	if len(w.Seen) == 0 {
		if s := m.SheetAt(u.Ref.Part, (&stamp{}).record()); s != nil {
			h.Limits, _ = verdict.Limits(s.Sheet, verdict.UnitsOf(m))
		}
	}
	h.Seen = faultObservations(m, w.Seen)
	for _, o := range m.Units {
		if o.Ref == u.Ref {
			continue
		}
		if seen, _ := verdict.History(m, o); len(seen) > 0 {
			h.Others = append(h.Others, fault.Other{Unit: unitName(o.Ref), Limits: seen[len(seen)-1].Limits, Seen: faultObservations(m, seen)})
		}
	}
	return h
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

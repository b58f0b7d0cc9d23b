package main

import (
	"cmp"
	"errors"
	"fmt"
	"slices"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/verdict"
)

// urgency orders verdicts on the board, the worst first; a unit never read stands before those in limits.
func urgency(j *verdict.Judged) int {
	if j == nil {
		return 4
	}
	order := []calc.Class{calc.Fail, calc.ConditionalFail, calc.NotAssessable, calc.NotMeasurable}
	if i := slices.Index(order, j.Class); i >= 0 {
		return i
	}
	return 5 + slices.Index([]calc.Class{calc.ConditionalPass, calc.Pass}, j.Class)
}

type boardRow struct {
	Unit         string  `json:"unit"`
	Aircraft     string  `json:"aircraft,omitempty"`
	Position     string  `json:"position,omitempty"`
	Verdict      string  `json:"verdict"`
	CorrectedPsi float64 `json:"corrected_psi,omitempty"`
	LowPsi       float64 `json:"low_psi,omitempty"`
	HighPsi      float64 `json:"high_psi,omitempty"`
	Read         string  `json:"read,omitempty"`
	Entry        string  `json:"entry,omitempty"`
	Next         string  `json:"next"`
	// What its history says of its loss of gas; absent where nothing may be claimed.
	LossPsiPerDay *float64      `json:"loss_psi_per_day,omitempty"`
	Loss          string        `json:"loss,omitempty"` // in words, with its interval
	Forecast      *forecastJSON `json:"forecast,omitempty"`
	Snags         []string      `json:"snags,omitempty"` // open ones
	judged        verdict.Judged
	watched       verdict.Watched
	urgency       int
}

func newBoard() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "board", Short: "All units by urgency", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, _ []string) (err error) {
		b, _, err := h.open()
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, b.Close()) }()
		rows, in := board(b.Meaning()), verdict.UnitsOf(b.Meaning())
		if asJSON {
			return writeJSON(cmd.OutOrStdout(), rows)
		}
		w := tabwriter.NewWriter(cmd.OutOrStdout(), 0, 0, 2, ' ', 0)
		fmt.Fprintln(w, "VERDICT\tUNIT\tWHERE\tCORRECTED\tLIMITS\tREAD")
		for _, r := range rows {
			where, corrected, limits := "not fitted", "", ""
			if r.Aircraft != "" {
				where = r.Aircraft + ", " + r.Position
			}
			if r.CorrectedPsi != 0 {
				corrected, limits = in.Pressure(r.judged.Corrected), in.Between(r.judged.Low, r.judged.High)
			}
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\n", r.Verdict, r.Unit, where, corrected, limits, r.Read)
		}
		if err := w.Flush(); err != nil {
			return err
		}
		for _, r := range rows {
			if r.urgency < urgency(nil) {
				fmt.Fprintf(cmd.OutOrStdout(), "\n%s, entry %.8s: %s\n", r.Unit, r.Entry, r.Next)
			}
			for _, s := range r.Snags {
				fmt.Fprintf(cmd.OutOrStdout(), "\n%s: snag: %s\n", r.Unit, s)
			}
			if r.Loss != "" {
				fmt.Fprintf(cmd.OutOrStdout(), "\n%s: %s", r.Unit, r.Loss)
				if c := r.watched.Forecast; c != nil {
					fmt.Fprintf(cmd.OutOrStdout(), "; %s", forecastWords(c, in))
				}
				fmt.Fprintln(cmd.OutOrStdout())
			}
		}
		return nil
	}
	return cmd
}

func board(m *ledger.Meaning) []boardRow {
	rows := []boardRow{}
	watched, in := verdict.WatchAll(m), verdict.UnitsOf(m)
	for i, u := range m.Units {
		r := boardRow{Unit: unitName(u.Ref), Aircraft: u.Aircraft, Position: u.Position, Verdict: "not read yet", Next: "check it", urgency: urgency(nil)}
		if n := len(u.Work); n > 0 {
			id := u.Work[n-1]
			body := m.Item(id).Body
			if j, err := verdict.Judge(m, id, body); err == nil { // a unit's work always has a verdict
				at, _ := ledger.Done(body)
				r.Verdict, r.Next, r.Read, r.Entry, r.judged, r.urgency = j.Class.String(), j.Next, clock(at), id.String(), j, urgency(&j)
				if j.Class != calc.NotAssessable {
					r.CorrectedPsi, r.LowPsi, r.HighPsi = inPsi(j.Corrected), inPsi(j.Low), inPsi(j.High)
				}
			}
		}
		for _, s := range m.Snags {
			if s.Unit == u.Ref && s.Open() {
				r.Snags = append(r.Snags, fmt.Sprintf("%s (entry %s)", s.What, s.ID.Short()))
			}
		}
		r.watched = watched[i]
		if f := r.watched.Fit; f != nil && f.LeakSeen() {
			facts := trendFacts(&r.watched, in)
			r.LossPsiPerDay, r.Loss, r.Forecast = ptr(-*facts.PsiPerDay), facts.Leak, facts.Forecast
		}
		rows = append(rows, r)
	}
	// Of equal verdicts the one that is seen to lose gas goes first.
	slices.SortStableFunc(rows, func(a, b boardRow) int {
		return cmp.Or(a.urgency-b.urgency, cmp.Compare(min(1, len(b.Loss)), min(1, len(a.Loss))))
	})
	return rows
}

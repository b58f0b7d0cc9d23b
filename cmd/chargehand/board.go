package main

import (
	"errors"
	"fmt"
	"path/filepath"
	"slices"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/audit"
	"example.org/chargehand/ledger/record"
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
	judged       verdict.Judged
	urgency      int
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
		fmt.Fprintln(w, "VERDICT\tUNIT\tWHERE\tCORRECTED\tLIMITS\tREAD\tENTRY\tNEXT")
		for _, r := range rows {
			where, corrected, limits := "not fitted", "", ""
			if r.Aircraft != "" {
				where = r.Aircraft + ", " + r.Position
			}
			if r.CorrectedPsi != 0 {
				corrected, limits = in.Pressure(r.judged.Corrected), in.Between(r.judged.Low, r.judged.High)
			}
			fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\t%.8s\t%s\n", r.Verdict, r.Unit, where, corrected, limits, r.Read, r.Entry, r.Next)
		}
		return w.Flush()
	}
	return cmd
}

func board(m *ledger.Meaning) []boardRow {
	rows := []boardRow{}
	for _, u := range m.Units {
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
		rows = append(rows, r)
	}
	slices.SortStableFunc(rows, func(a, b boardRow) int { return a.urgency - b.urgency })
	return rows
}

func newAudit() *cobra.Command {
	var h home
	var founding string
	var asJSON bool
	cmd := &cobra.Command{Use: "audit", Short: "Verify every signature, line, authority and verdict of the book", Args: usageArgs(cobra.NoArgs),
		Long: "Verify the book. Needs no key. Exit status 0: nothing found; 1: findings; 3: could not audit."}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.Flags().StringVar(&founding, "founding", "", "the founding fingerprint as given to you from outside, 64 digits")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		id, dir, err := h.id()
		if err != nil {
			return err
		}
		var want *record.BookID
		if founding != "" {
			w, err := record.ParseBookID(founding)
			if err != nil {
				return usageError("--founding: "+err.Error(), "Copy all 64 digits")
			}
			want = &w
		}
		var bad []audit.Unreadable
		m, err := ledger.Inspect(filepath.Join(dir, "store"), id, func(where string, err error) {
			bad = append(bad, audit.Unreadable{Where: where, Err: err})
		})
		if m == nil {
			return explain(err, dir)
		}
		if err != nil {
			bad = append(bad, audit.Unreadable{Where: "the store", Err: err})
		}
		r := audit.Run(m, bad, want)
		if asJSON {
			if err := writeJSON(cmd.OutOrStdout(), auditJSON(r)); err != nil {
				return err
			}
		} else {
			w := cmd.OutOrStdout()
			fmt.Fprintf(w, "founding    %s\nfingerprint %s\nchecked     %d entries of %d lines, %d verdicts recomputed\n", r.Book, grouped(r.Fingerprint[:8]), r.Entries, r.Lines, r.Verdicts)
			for _, f := range r.Findings {
				name := "book"
				if f.Entry != (record.ID{}) {
					name = f.Entry.Short()
				}
				fmt.Fprintf(w, "%-11s %-8s %s\n", f.Severity, name, f.Sentence)
			}
			fmt.Fprintf(w, "found       %d\n", len(r.Findings))
		}
		if len(r.Findings) > 0 {
			return errNo
		}
		return nil
	}
	return cmd
}

func auditJSON(r audit.Report) any {
	type finding struct {
		Severity string `json:"severity"`
		Entry    string `json:"entry,omitempty"`
		Sentence string `json:"sentence"`
	}
	out := struct {
		Founding    string    `json:"founding"`
		Fingerprint string    `json:"fingerprint"`
		Entries     int       `json:"entries"`
		Lines       int       `json:"lines"`
		Verdicts    int       `json:"verdicts"`
		Findings    []finding `json:"findings"`
	}{r.Book.String(), fmt.Sprintf("%x", r.Fingerprint), r.Entries, r.Lines, r.Verdicts, []finding{}}
	for _, f := range r.Findings {
		x := finding{f.Severity.String(), f.Entry.String(), f.Sentence}
		if f.Entry == (record.ID{}) {
			x.Entry = ""
		}
		out.Findings = append(out.Findings, x)
	}
	return out
}

package main

import (
	"fmt"
	"path/filepath"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/audit"
	"example.org/chargehand/ledger/record"
)

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

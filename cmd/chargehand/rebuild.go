package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

type movedJSON struct {
	Entry string `json:"entry"`
	Unit  string `json:"unit"`
	Was   string `json:"was"`
	Now   string `json:"now"`
	Cause string `json:"cause,omitempty"`
}

type rebuiltJSON struct {
	Verdicts int         `json:"verdicts"`
	Core     string      `json:"core"`
	Moved    []movedJSON `json:"moved"`
}

func newBookRebuild() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "rebuild", Short: "Compute every kept verdict anew from the entries", Args: usageArgs(cobra.NoArgs),
		Long: "Compute every kept verdict anew from the entries, and tell which differ from what was kept. Entries are not touched; nothing is lost."}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			r, err := verdict.Rebuild(b)
			if err != nil {
				return explain(err, dir)
			}
			if asJSON {
				j := rebuiltJSON{r.Kept, calc.CoreVersion, []movedJSON{}}
				for _, m := range r.Moved {
					x := movedJSON{Entry: m.Entry.String(), Unit: unitName(m.Unit), Was: m.Was.String(), Now: m.Now.String()}
					if m.Cause != (record.ID{}) {
						x.Cause = m.Cause.String()
					}
					j.Moved = append(j.Moved, x)
				}
				return writeJSON(cmd.OutOrStdout(), j)
			}
			fmt.Fprintf(cmd.OutOrStdout(), "rebuilt     %s with calculation core %s, %d moved\n", plural(r.Kept, "verdict"), calc.CoreVersion, len(r.Moved))
			tellMoved(cmd.OutOrStdout(), b.Meaning(), r.Moved)
			return nil
		})
	}
	return cmd
}

package main

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// notARelease stands below every wording: the tool gives none.
const notARelease = "This is wording for the official maintenance record. It is no approval for return to service and no inspection statement: who may give them signs there, by the operator's procedures."

type officialJSON struct {
	Description string   `json:"description"` // 14 CFR 43.9(a)(1)
	Data        string   `json:"data"`        // the acceptable data that it refers to
	Completed   string   `json:"completed"`   // (a)(2)
	Performed   string   `json:"performed_by"`
	Certificate string   `json:"certificate,omitempty"`
	Second      []string `json:"second_signatures"`
	Remarks     []string `json:"remarks,omitempty"`
	Entry       string   `json:"entry"`
	Book        string   `json:"book"`
	Notice      string   `json:"notice"`
}

func newRecord() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "record ENTRY", Short: "Write the wording for the official maintenance record from a reading or charge", Args: usageArgs(cobra.ExactArgs(1)),
		Example: "  chargehand record 3f2a91c0",
		Long:    "Write the wording for the official maintenance record from a reading or charge: what was done and by which data, when it was\ncompleted, by whom, and who put a second signature to it (the elements of 14 CFR 43.9(a)). It is never a release by itself."}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			id, err := findEntry(m, args[0])
			if err != nil {
				return err
			}
			j, err := official(m, m.Item(id))
			if err != nil {
				return err
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), j)
			}
			w := cmd.OutOrStdout()
			fmt.Fprintf(w, "%s\n\nData:         %s\nCompleted:    %s\nPerformed by: %s%s\n", j.Description, j.Data, j.Completed, j.Performed, certified(j.Certificate))
			for _, s := range j.Second {
				fmt.Fprintf(w, "Second:       %s\n", s)
			}
			if len(j.Second) == 0 {
				fmt.Fprintln(w, "Second:       no second signature")
			}
			for _, r := range j.Remarks {
				fmt.Fprintf(w, "Remark:       %s\n", r)
			}
			fmt.Fprintf(w, "Entry:        %s\nBook:         %s\n\n%s\n", j.Entry, j.Book, j.Notice)
			return nil
		})
	}
	return cmd
}

func certified(c string) string {
	if c == "" {
		return ", no certificate number in the book"
	}
	return ", certificate " + c
}

// official words an entry that stands; a withdrawn one, or one that is set aside, is no work to record.
func official(m *ledger.Meaning, it *ledger.Item) (officialJSON, error) {
	if !it.Counts() {
		why := "withdrawn"
		if it.SetAside != "" {
			why = "set aside: " + it.SetAside
		}
		return officialJSON{}, couldNot(fmt.Errorf("entry %s is %s", it.ID().Short(), why), "Record the entry that stands in its place; see 'chargehand unit show'")
	}
	judged, err := verdict.Judge(m, it.ID(), it.Body)
	if err != nil {
		return officialJSON{}, usageError(fmt.Sprintf("entry %s is a %s, and only readings and charges are recorded so", it.ID().Short(), it.Entry().Kind), "Give the entry of a reading or charge")
	}
	in := verdict.UnitsOf(m)
	ref, gauge, done := ledger.Subject(it.Body)
	u := m.Unit(ref)
	what := "gas charge checked"
	if _, ok := it.Body.(record.Charge); ok {
		what = "gas charge serviced"
	}
	j := officialJSON{
		Description: fmt.Sprintf("Hydraulic accumulator part %s, serial %s%s: %s. %s. Result: %s.", ref.Part, ref.Serial, fitted(u), what, capital(inWords(it.Body)), verdictFacts(u, judged).line(in)),
		Completed:   clock(done), Entry: it.ID().String(), Book: m.Book.String(), Notice: notARelease, Second: []string{},
	}
	j.Data = "none in force"
	if judged.Sheet != nil {
		j.Data = fmt.Sprintf("%s rev %s", judged.Sheet.Document, judged.Sheet.Revision)
	}
	if g := m.Gauge(gauge); g != nil {
		j.Data += fmt.Sprintf("; gauge %s, %s, calibrated %s, due %s", g.Asset, g.Accuracy, day(g.Calibrated), day(g.Due))
		if g.Certificate != "" {
			j.Data += ", certificate " + g.Certificate
		}
	}
	if hand := m.Hand(it.Key()); hand != nil {
		j.Performed, j.Certificate = hand.Name, hand.Certificate
	}
	for _, id := range it.Countersigned {
		c := m.Item(id)
		name, certificate := "key "+c.Key().Short(), ""
		if hand := m.Hand(c.Key()); hand != nil {
			name, certificate = hand.Name, hand.Certificate
		}
		j.Second = append(j.Second, fmt.Sprintf("%s by %s%s, %s, entry %s", c.Entry().Body.(record.Countersign).Meaning, name, certified(certificate), clock(c.Entry().Signed), id.Short()))
	}
	if known := m.Item(workedBy(it.Body)); known != nil && judged.Sheet != nil && known.ID() != judged.Sheet.ID {
		if s, ok := known.Body.(record.Sheet); ok {
			j.Remarks = append(j.Remarks, fmt.Sprintf("its signer worked by %s rev %s; the sheet named above was in force by what the book holds now", s.Document, s.Revision))
		}
	}
	for _, id := range it.CorrectedBy {
		j.Remarks = append(j.Remarks, amendment(m, "corrected since it was signed", id))
	}
	j.Remarks = append(j.Remarks, it.Flags...)
	return j, nil
}

// workedBy returns the sheet that was in force as far as the signer knew.
func workedBy(body any) record.ID {
	switch b := body.(type) {
	case record.Reading:
		return b.Sheet
	case record.Charge:
		return b.Sheet
	}
	return record.ID{}
}

func capital(s string) string {
	if s == "" {
		return s
	}
	return strings.ToUpper(s[:1]) + s[1:]
}

// exportRow is one entry as a row of a table and as a line of JSON.
type exportRow struct {
	Entry         string `json:"entry"`
	Line          string `json:"line"` // the key that signed it
	Number        uint64 `json:"number"`
	Kind          string `json:"kind"`
	Signed        string `json:"signed"`
	Done          string `json:"done,omitempty"`
	By            string `json:"by"`
	Unit          string `json:"unit,omitempty"`
	Gauge         string `json:"gauge,omitempty"`
	What          string `json:"what"` // as it was entered
	Shown         string `json:"shown,omitempty"`
	Verdict       string `json:"verdict,omitempty"` // today
	CorrectedPsi  string `json:"corrected_psi,omitempty"`
	LowPsi        string `json:"low_psi,omitempty"`
	HighPsi       string `json:"high_psi,omitempty"`
	Sheet         string `json:"sheet,omitempty"`
	Standing      string `json:"standing"` // "counts", or why it does not
	CorrectedBy   string `json:"corrected_by,omitempty"`
	Countersigned string `json:"countersigned_by,omitempty"`
	Flags         string `json:"flags,omitempty"`
}

var exportHead = []string{"entry", "line", "number", "kind", "signed", "done", "by", "unit", "gauge", "what", "shown", "verdict", "corrected_psi", "low_psi", "high_psi", "sheet", "standing", "corrected_by", "countersigned_by", "flags"}

func (r exportRow) cells() []string {
	return []string{r.Entry, r.Line, fmt.Sprint(r.Number), r.Kind, r.Signed, r.Done, r.By, r.Unit, r.Gauge, r.What, r.Shown, r.Verdict, r.CorrectedPsi, r.LowPsi, r.HighPsi, r.Sheet, r.Standing, r.CorrectedBy, r.Countersigned, r.Flags}
}

func newExport() *cobra.Command {
	var h home
	var out, unit string
	as := choice{"csv", []string{"csv", "jsonl"}}
	cmd := &cobra.Command{Use: "export", Short: "Write every entry as a table (CSV) or as lines of JSON", Args: usageArgs(cobra.NoArgs),
		Example: "  chargehand export --to dry-creek.csv\n  chargehand export --as jsonl --unit HA-40/104",
		Long:    "Write every entry with its standing and today's verdict, in the book's order: CSV by RFC 4180, with cells that a spreadsheet would\ntake for a formula marked by an apostrophe, or one JSON object a line. It is a copy to read; what proves is the book."}
	addHome(cmd, &h, false)
	cmd.Flags().Var(&as, "as", "csv or jsonl")
	cmd.Flags().StringVar(&out, "to", "", "file to write (else standard output)")
	cmd.Flags().StringVar(&unit, "unit", "", "only the entries about this unit")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			var only *ledger.Unit
			if unit != "" {
				var err error
				if only, err = findUnit(m, unit); err != nil {
					return err
				}
			}
			rows := exportRows(m, only)
			if out == "" {
				return writeExport(cmd.OutOrStdout(), rows, as.is)
			}
			f, err := os.CreateTemp(filepath.Dir(out), ".chargehand-*")
			if err != nil {
				return couldNot(fmt.Errorf("--to: %w", plainly(err)), "Name a file in a folder that can be written")
			}
			defer os.Remove(f.Name())
			err = writeExport(f, rows, as.is)
			if err == nil {
				err = f.Sync()
			}
			if cerr := f.Close(); err == nil {
				err = cerr
			}
			if err == nil {
				err = os.Rename(f.Name(), out)
			}
			if err != nil {
				return couldNot(fmt.Errorf("--to: %w", plainly(err)), "Make room, or name another file; no half file is left")
			}
			fmt.Fprintf(cmd.OutOrStdout(), "exported    %d entries to %s\n", len(rows), out)
			return nil
		})
	}
	return cmd
}

func exportRows(m *ledger.Meaning, only *ledger.Unit) []exportRow {
	var rows []exportRow
	for i := range m.Entries {
		it := &m.Entries[i]
		ref, about := unitOf(it.Body)
		if !about {
			ref, _, _ = ledger.Subject(it.Body)
			about = ref != record.UnitRef{}
		}
		if only != nil && ref != only.Ref {
			continue
		}
		e := it.Entry()
		r := exportRow{Entry: it.ID().String(), Line: it.Key().String(), Number: e.Seq, Kind: string(e.Kind), Signed: clock(e.Signed), By: handName(m, it.Key()), What: inWords(e.Body), Standing: "counts", Flags: strings.Join(it.Flags, "; ")}
		if about {
			r.Unit = unitName(ref)
		}
		if _, gauge, done := ledger.Subject(it.Body); gauge != "" {
			r.Gauge, r.Done = gauge, clock(done)
		}
		if e.Shown != nil {
			r.Shown = e.Shown.Verdict
		}
		var by []string
		for _, id := range it.CorrectedBy {
			by = append(by, id.String())
		}
		r.CorrectedBy, by = strings.Join(by, " "), nil
		for _, id := range it.Countersigned {
			by = append(by, id.String())
		}
		r.Countersigned = strings.Join(by, " ")
		switch {
		case it.SetAside != "":
			r.Standing = "set aside: " + it.SetAside
		case it.WithdrawnBy != record.ID{}:
			r.Standing = "withdrawn by " + it.WithdrawnBy.String()
		default:
			if j, err := verdict.Judge(m, it.ID(), it.Body); err == nil {
				v := verdictFacts(&ledger.Unit{Ref: j.Unit}, j)
				r.Verdict, r.Sheet = v.Verdict, v.Sheet
				if v.CorrectedPsi != 0 {
					r.CorrectedPsi, r.LowPsi, r.HighPsi = fmt.Sprintf("%.2f", v.CorrectedPsi), fmt.Sprintf("%.2f", v.LowPsi), fmt.Sprintf("%.2f", v.HighPsi)
				}
			}
		}
		rows = append(rows, r)
	}
	return rows
}

func writeExport(w io.Writer, rows []exportRow, as string) error {
	if as == "jsonl" {
		e := json.NewEncoder(w)
		for _, r := range rows {
			if err := e.Encode(r); err != nil {
				return err
			}
		}
		return nil
	}
	c := csv.NewWriter(w)
	c.UseCRLF = true
	if err := c.Write(exportHead); err != nil {
		return err
	}
	for _, r := range rows {
		cells := r.cells()
		for i := range cells {
			cells[i] = harmless(cells[i])
		}
		if err := c.Write(cells); err != nil {
			return err
		}
	}
	c.Flush()
	return c.Error()
}

// harmless marks text that a spreadsheet would take for a formula.
func harmless(s string) string {
	if s != "" && strings.ContainsRune("=+-@\t\r", rune(s[0])) {
		return "'" + s
	}
	return s
}

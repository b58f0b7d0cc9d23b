package main

import (
	"fmt"
	"io"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

type recallJSON struct {
	What       string        `json:"what"` // "gauge G-7" or "sheet CM-29 rev B"
	Since      string        `json:"since"`
	Correction string        `json:"correction,omitempty"`
	Reason     string        `json:"reason"`
	Touched    []touchedJSON `json:"touched"`
	Entry      string        `json:"entry,omitempty"` // of the recall; none with --look
	Until      string        `json:"until,omitempty"` // when the gauge was calibrated again
}

// touchedJSON is one entry that rests on what is recalled.
type touchedJSON struct {
	Entry    string `json:"entry"`
	Unit     string `json:"unit"`
	At       string `json:"at"`
	By       string `json:"by"`
	Was      string `json:"was"`
	Becomes  string `json:"becomes"`
	Sentence string `json:"sentence"`
}

func newRecall() *cobra.Command {
	return group("recall", "Take trust from a gauge or a sheet that was found wrong", newRecallGauge(), newRecallSheet(), newRecallList())
}

const recallLong = "First lists every reading and charge that it touches, with the verdict each has now and the one it becomes; then asks to sign. Every\nlaptop that has heard of a recall refuses the thing for new work until it is entered again."

func newRecallGauge() *cobra.Command {
	var since stamp
	var reason string
	correction := bookPressure()
	cmd := &cobra.Command{Use: "gauge ASSET", Short: "Recall a gauge: what it showed since a time no longer counts, or counts corrected", Args: usageArgs(cobra.ExactArgs(1)),
		Example: "  chargehand recall gauge G-7 --since 2031-01-10 --reason \"15 psi high at calibration\" --correction=-15psi",
		Long:    "Recall a gauge that was found wrong. " + recallLong + "\nWith --correction its readings since then count with that added; without, they are not assessable."}
	f := cmd.Flags()
	f.Var(&since, "since", "from when it cannot be trusted: as a rule its last good calibration")
	f.Var(correction, "correction", "what to add to its readings since then, as the calibration found")
	f.StringVar(&reason, "reason", "", "what was found")
	return recalling(cmd, func(m *ledger.Meaning, arg string) (record.Recall, error) {
		if m.Gauge(arg) == nil {
			return record.Recall{}, usageError(fmt.Sprintf("no gauge %q in this book", arg), "See 'chargehand gauge list'")
		}
		return record.Recall{Gauge: arg, Since: since.record(), Correction: correction.amount(), Reason: reason}, nil
	})
}

func newRecallSheet() *cobra.Command {
	var since stamp
	var reason string
	cmd := &cobra.Command{Use: "sheet ENTRY|PART", Short: "Recall a sheet that was entered wrongly or belongs to another type", Args: usageArgs(cobra.ExactArgs(1)),
		Example: "  chargehand recall sheet HA-40 --since 2031-01-10 --reason \"a page of another type\"\n  chargehand recall sheet 3f2a91c0 --since 2031-01-10 --reason \"a slip in the chart\"",
		Long:    "Recall a sheet: by its entry, or by its part when the part has only one that is not recalled. " + recallLong + "\nWhat it decided is not assessable until the right sheet is entered."}
	cmd.Flags().Var(&since, "since", "from when it does not hold")
	cmd.Flags().StringVar(&reason, "reason", "", "what was found")
	return recalling(cmd, func(m *ledger.Meaning, arg string) (record.Recall, error) {
		id, err := findSheet(m, arg)
		return record.Recall{Sheet: id, Since: since.record(), Reason: reason}, err
	})
}

// findSheet takes the entry of a sheet, or a part with one sheet that is not recalled.
func findSheet(m *ledger.Meaning, arg string) (record.ID, error) {
	var stand []*ledger.Sheet
	known := false
	for _, s := range m.Sheets {
		if s.Part != arg {
			continue
		}
		known = true
		if !slices.ContainsFunc(m.Recalls, func(r *ledger.Recall) bool { return r.Sheet == s.ID }) {
			stand = append(stand, s)
		}
	}
	if known {
		if len(stand) == 1 {
			return stand[0].ID, nil
		}
		var all []string
		for _, s := range stand {
			all = append(all, fmt.Sprintf("%s (%s rev %s)", s.ID.Short(), s.Document, s.Revision))
		}
		if len(all) == 0 {
			return record.ID{}, usageError(fmt.Sprintf("every sheet of part %q is recalled already", arg), "See 'chargehand recall list'")
		}
		return record.ID{}, usageError(fmt.Sprintf("part %q has %d sheets", arg, len(all)), "Name the entry of one: "+strings.Join(all, ", "))
	}
	id, err := findEntry(m, arg)
	if err == nil && m.Item(id).Entry().Kind != record.KindSheet {
		err = usageError(fmt.Sprintf("entry %s is a %s and no sheet", id.Short(), m.Item(id).Entry().Kind), "See 'chargehand sheet show' for the entries of sheets")
	}
	return id, err
}

// recalling shows what a recall touches before it asks to sign.
func recalling(cmd *cobra.Command, body func(*ledger.Meaning, string) (record.Recall, error)) *cobra.Command {
	var h home
	var asJSON, look bool
	addHome(cmd, &h, true)
	addJSON(cmd, &asJSON)
	cmd.Flags().BoolVar(&look, "look", false, "list what it touches and sign nothing")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			m := b.Meaning()
			if err := fill(cmd, m, needs("since", "reason")...); err != nil {
				return err
			}
			r, err := body(m, args[0])
			if err != nil {
				return err
			}
			w := quietWith(cmd, asJSON)
			j := recallFacts(m, m.WithRecall(r), &ledger.Recall{Recall: r})
			j.print(w)
			if !look {
				v, err := h.sign(cmd, w, b, dir, ledger.Draft{Kind: record.KindRecall, Body: r})
				if err != nil {
					return err
				}
				j.Entry = v.ID().String()
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), j)
			}
			return nil
		})
	}
	return cmd
}

// recallFacts lists what rests on the recalled thing, judged without the recall and with it.
func recallFacts(without, with *ledger.Meaning, r *ledger.Recall) recallJSON {
	j := recallJSON{Since: clock(r.Since), Reason: r.Reason, Touched: []touchedJSON{}}
	if r.Correction != nil {
		j.Correction = written(*r.Correction).String()
	}
	if r.Until != 0 {
		j.Until = clock(record.Time{Unix: r.Until})
	}
	j.What = "gauge " + r.Gauge
	if r.Gauge == "" {
		if s, ok := without.Item(r.Sheet).Body.(record.Sheet); ok {
			j.What = fmt.Sprintf("sheet %s rev %s of %s", s.Document, s.Revision, s.Part)
		}
	}
	for _, u := range without.Units {
		for _, id := range u.Work {
			it := without.Item(id)
			_, gauge, done := ledger.Subject(it.Body)
			if !r.Covers(done) || r.Gauge != "" && gauge != r.Gauge {
				continue
			}
			was, err := verdict.Judge(without, id, it.Body)
			if err != nil {
				continue
			}
			if r.Gauge == "" && (was.Sheet == nil || was.Sheet.ID != r.Sheet) && !slices.ContainsFunc(was.Contested, func(s *ledger.Sheet) bool { return s.ID == r.Sheet }) {
				continue
			}
			now, err := verdict.Judge(with, id, it.Body)
			if err != nil {
				continue
			}
			j.Touched = append(j.Touched, touchedJSON{id.String(), unitName(u.Ref), clock(done), handName(without, it.Key()), was.Class.String(), now.Class.String(), now.Sentence})
		}
	}
	return j
}

func (j recallJSON) print(w io.Writer) {
	fmt.Fprintf(w, "recall      %s since %s: %s\n", j.What, j.Since, j.Reason)
	if j.Until != "" {
		fmt.Fprintf(w, "until       %s, when it was calibrated again\n", j.Until)
	}
	if j.Correction != "" {
		fmt.Fprintf(w, "correction  %s is added to what it showed\n", j.Correction)
	}
	moved := 0
	for _, t := range j.Touched {
		change := "stays " + t.Was
		if t.Was != t.Becomes {
			change = t.Was + " becomes " + t.Becomes
			moved++
		}
		fmt.Fprintf(w, "touches     %s, entry %.8s of %s by %s: %s\n", t.Unit, t.Entry, t.At, t.By, change)
	}
	fmt.Fprintf(w, "touched     %d, of which %d change their verdict\n", len(j.Touched), moved)
}

func newRecallList() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "list", Short: "List the recalls in force and what they touch", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			list := []recallJSON{}
			for _, r := range m.Recalls {
				j := recallFacts(m.WithoutRecall(r.ID), m, r)
				j.Entry = r.ID.String()
				list = append(list, j)
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), list)
			}
			if len(list) == 0 {
				fmt.Fprintln(cmd.OutOrStdout(), "no recall is in force")
			}
			for _, j := range list {
				j.print(cmd.OutOrStdout())
			}
			return nil
		})
	}
	return cmd
}

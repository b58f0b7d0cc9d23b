package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

type snagJSON struct {
	Entry   string `json:"entry"`
	Unit    string `json:"unit"`
	What    string `json:"what"`
	Found   string `json:"found"`
	By      string `json:"by"`
	Cleared string `json:"cleared,omitempty"` // how, when and by whom
}

func newSnag() *cobra.Command {
	return group("snag", "Defects raised on units, until they are cleared", newSnagRaise(), newSnagClear(), newSnagList())
}

func newSnagRaise() *cobra.Command {
	var h home
	var b record.Snag
	var found stamp
	cmd := &cobra.Command{Use: "raise UNIT", Short: "Raise a defect on a unit", Args: usageArgs(cobra.MaximumNArgs(1)), Example: "  chargehand snag raise HA-40/104 --what \"bubbles at the charging valve\""}
	cmd.Flags().StringVar(&b.What, "what", "", "what is wrong")
	cmd.Flags().Var(&found, "found", "when it was found (else now)")
	return signing(cmd, &h, record.KindSnag, func(m *ledger.Meaning, args []string) (any, error) {
		u, err := pickUnit(cmd, m, args)
		if err != nil {
			return nil, err
		}
		if err := fill(cmd, m, needs("what")...); err != nil {
			return nil, err
		}
		b.Unit, b.Found = u.Ref, found.record()
		return b, nil
	})
}

func newSnagClear() *cobra.Command {
	var h home
	var b record.SnagCleared
	var done stamp
	cmd := &cobra.Command{Use: "clear ENTRY", Short: "Clear a snag: say how it was put right", Args: usageArgs(cobra.ExactArgs(1)), Example: "  chargehand snag clear 3f2a91c0 --how \"valve core replaced, soap test without bubbles\""}
	cmd.Flags().StringVar(&b.How, "how", "", "how it was put right")
	cmd.Flags().Var(&done, "done", "when (else now)")
	return signing(cmd, &h, record.KindSnagCleared, func(m *ledger.Meaning, args []string) (any, error) {
		if err := fill(cmd, m, needs("how")...); err != nil {
			return nil, err
		}
		id, err := findEntry(m, args[0])
		if err != nil {
			return nil, err
		}
		for _, s := range m.Snags {
			if s.ID == id && !s.Open() {
				return nil, usageError(fmt.Sprintf("snag %s is cleared already, by entry %s", id.Short(), s.ClearedBy.Short()), "See 'chargehand snag list --all'")
			}
		}
		b.Of, b.Done = id, done.record()
		return b, nil
	})
}

func newSnagList() *cobra.Command {
	var h home
	var asJSON, all bool
	cmd := &cobra.Command{Use: "list", Short: "List the open snags", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.Flags().BoolVar(&all, "all", false, "also the cleared ones")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			snags := []snagJSON{}
			for _, s := range m.Snags {
				if s.Open() || all {
					snags = append(snags, snagFacts(m, s))
				}
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), snags)
			}
			w := cmd.OutOrStdout()
			if len(snags) == 0 {
				fmt.Fprintln(w, "no open snag")
			}
			for _, s := range snags {
				fmt.Fprintf(w, "snag        %s, entry %.8s of %s by %s: %s\n", s.Unit, s.Entry, s.Found, s.By, s.What)
				if s.Cleared != "" {
					fmt.Fprintf(w, "            cleared: %s\n", s.Cleared)
				}
			}
			return nil
		})
	}
	return cmd
}

func snagFacts(m *ledger.Meaning, s *ledger.Snag) snagJSON {
	j := snagJSON{Entry: s.ID.String(), Unit: unitName(s.Unit), What: s.What, Found: clock(s.Found), By: handName(m, m.Item(s.ID).Key())}
	if !s.Open() {
		c := m.Item(s.ClearedBy)
		b := c.Body.(record.SnagCleared)
		j.Cleared = fmt.Sprintf("%s, %s, by %s, entry %s", b.How, clock(b.Done), handName(m, c.Key()), s.ClearedBy.Short())
	}
	return j
}

type handoverJSON struct {
	Fingerprint string   `json:"fingerprint"` // of the book before this entry
	Open        []string `json:"open"`
	New         []string `json:"new,omitempty"` // since the taker last signed
	Given       string   `json:"given,omitempty"`
	Entry       string   `json:"entry,omitempty"`
}

func newHandover() *cobra.Command {
	return group("handover", "Pass the work on between shifts", newHandoverGive(), newHandoverTake())
}

// openMatters is what the next shift must know: units out of limits or never read, open snags, contested sheets, recalls.
func openMatters(m *ledger.Meaning) []string {
	var open []string
	for _, r := range board(m) {
		if r.Verdict != calc.Pass.String() {
			open = append(open, fmt.Sprintf("%s: %s", r.Unit, r.Verdict))
		}
	}
	for _, s := range m.Snags {
		if s.Open() {
			open = append(open, fmt.Sprintf("%s: snag %s, %s", unitName(s.Unit), s.ID.Short(), s.What))
		}
	}
	now := (&stamp{}).record()
	parts := map[string]bool{}
	for _, u := range m.Units {
		if !parts[u.Ref.Part] && len(m.Contested(u.Ref.Part, now)) > 0 {
			open = append(open, fmt.Sprintf("sheets of %s are contested", u.Ref.Part))
		}
		parts[u.Ref.Part] = true
	}
	for _, g := range m.Gauges {
		if m.Recalled(g.Asset) {
			open = append(open, fmt.Sprintf("gauge %s is recalled", g.Asset))
		}
	}
	return open
}

func newHandoverGive() *cobra.Command {
	var h home
	var asJSON bool
	var note string
	cmd := &cobra.Command{Use: "give", Short: "Sign what you hand over: the book's fingerprint and what is open", Args: usageArgs(cobra.NoArgs), Example: "  chargehand handover give --note \"cart is at KITE 5\""}
	addHome(cmd, &h, true)
	addJSON(cmd, &asJSON)
	cmd.Flags().StringVar(&note, "note", "", "anything worth telling")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			m := b.Meaning()
			fp := m.Fingerprint()
			open := openMatters(m)
			w := quietWith(cmd, asJSON)
			fmt.Fprintf(w, "fingerprint %s\n", grouped(fp[:8]))
			for _, o := range open {
				fmt.Fprintf(w, "open        %s\n", o)
			}
			if len(open) == 0 {
				fmt.Fprintln(w, "open        nothing")
			}
			signed := open[:min(len(open), 100)]
			v, err := h.sign(cmd, w, b, dir, ledger.Draft{Kind: record.KindHandover, Body: record.Handover{Fingerprint: fp, Open: signed, Note: note}})
			if err != nil {
				return err
			}
			fmt.Fprintf(w, "next        meet the taker's laptop; they run: chargehand handover take %s\n", v.ID().Short())
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), handoverJSON{Fingerprint: fmt.Sprintf("%x", fp), Open: append([]string{}, open...), Entry: v.ID().String()})
			}
			return nil
		})
	}
	return cmd
}

func newHandoverTake() *cobra.Command {
	var h home
	var asJSON bool
	var note string
	cmd := &cobra.Command{Use: "take ENTRY", Short: "Sign that you take the work over, and see what is new to you", Args: usageArgs(cobra.ExactArgs(1)), Example: "  chargehand handover take 3f2a91c0",
		Long: "Sign that you take over what another hand gave. Shows what was open then and is open now, and what is new since you last signed."}
	addHome(cmd, &h, true)
	addJSON(cmd, &asJSON)
	cmd.Flags().StringVar(&note, "note", "", "anything worth telling")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			m := b.Meaning()
			id, err := findEntry(m, args[0])
			if err != nil {
				return err
			}
			given, ok := m.Item(id).Entry().Body.(record.Handover)
			if !ok || given.Takes != (record.ID{}) {
				return usageError(fmt.Sprintf("entry %s hands nothing over", id.Short()), "Give the entry that 'chargehand handover give' signed")
			}
			w := quietWith(cmd, asJSON)
			j := handoverJSON{Fingerprint: fmt.Sprintf("%x", m.Fingerprint()), Open: append([]string{}, openMatters(m)...), Given: id.String()}
			fmt.Fprintf(w, "given       by %s, %s; fingerprint then %s\n", handName(m, m.Item(id).Key()), clock(m.Item(id).Entry().Signed), grouped(given.Fingerprint[:8]))
			for _, o := range given.Open {
				fmt.Fprintf(w, "was open    %s\n", o)
			}
			for _, o := range j.Open {
				fmt.Fprintf(w, "open now    %s\n", o)
			}
			key, err := h.unlock(cmd, dir)
			if err != nil {
				return err
			}
			j.New = newTo(m, publicOf(key))
			for _, n := range j.New {
				fmt.Fprintf(w, "new to you  %s\n", n)
			}
			v, err := h.signWith(cmd, w, b, dir, key, ledger.Draft{Kind: record.KindHandover, Body: record.Handover{Fingerprint: m.Fingerprint(), Open: j.Open[:min(len(j.Open), 100)], Takes: id, Note: note}})
			if err != nil {
				return err
			}
			j.Entry = v.ID().String()
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), j)
			}
			return nil
		})
	}
	return cmd
}

// newTo lists what others signed about units that the key's newest entry had not seen.
func newTo(m *ledger.Meaning, key record.KeyID) []string {
	var last record.ID
	for _, head := range m.Frontier() {
		if head.Key == key {
			last = head.ID
		}
	}
	var fresh []string
	for i := range m.Entries {
		it := &m.Entries[i]
		if it.Key() == key || last != (record.ID{}) && m.Saw(last, it.ID()) || !it.Counts() {
			continue
		}
		line := fmt.Sprintf("%s by %s, entry %s: %s", it.Entry().Kind, handName(m, it.Key()), it.ID().Short(), inWords(it.Body))
		if ref, ok := unitOf(it.Body); ok {
			line = unitName(ref) + ", " + line
		}
		if j, err := verdict.Judge(m, it.ID(), it.Body); err == nil {
			line += ": " + j.Class.String()
		}
		fresh = append(fresh, line)
	}
	return fresh
}

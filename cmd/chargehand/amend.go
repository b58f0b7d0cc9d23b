package main

import (
	"errors"
	"fmt"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// findEntry takes an id or its first digits.
func findEntry(m *ledger.Meaning, name string) (record.ID, error) {
	var found []record.ID
	for i := range m.Entries {
		if id := m.Entries[i].ID(); len(name) >= 4 && strings.HasPrefix(id.String(), strings.ToLower(name)) {
			found = append(found, id)
		}
	}
	if len(found) != 1 {
		return record.ID{}, usageError(fmt.Sprintf("%q names %d entries", name, len(found)), "Give 4 or more of the first digits of one entry's id")
	}
	return found[0], nil
}

func newCorrect() *cobra.Command {
	var h home
	var reason string
	var sets []string
	cmd := &cobra.Command{Use: "correct ENTRY", Short: "Put an entry right; what was signed stays visible", Args: usageArgs(cobra.ExactArgs(1)),
		Example: "  chargehand correct 3f2a91c0 --set pressure=1120psi --reason \"misread the dial\"",
		Long:    "Put right an entry of yours, or as lead anybody's: a reading, a charge, a sheet, a gauge, a fitting or a removal. --set names\nwhat changes as the flag of the command that signed the entry; the rest stays. What was signed first stays in the book and visible."}
	cmd.Flags().StringArrayVar(&sets, "set", nil, "NAME=VALUE, once for each value that changes; NAME as the flag of the command that signed it, or unit")
	cmd.Flags().StringVar(&reason, "reason", "", "why")
	addHome(cmd, &h, true)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			m := b.Meaning()
			id, err := findEntry(m, args[0])
			if err != nil {
				return err
			}
			if err := fill(cmd, m, needs("set", "reason")...); err != nil {
				return err
			}
			it := m.Item(id)
			kind := it.Entry().Kind
			body, err := corrected(m, it, sets)
			if err != nil {
				return err
			}
			enc, err := record.EncodeBody(kind, body)
			if err != nil {
				return explain(err, dir)
			}
			w := cmd.OutOrStdout()
			fmt.Fprintf(w, "was         %s\nbecomes     %s\n", inWords(it.Body), inWords(body))
			if j, err := verdict.Judge(m, id, body); err == nil {
				fmt.Fprintf(w, "verdict     %s\n", verdictFacts(&ledger.Unit{Ref: j.Unit}, j).line(verdict.UnitsOf(m)))
			}
			for _, c := range it.Countersigned {
				fmt.Fprintf(w, "note        the countersign by %s was for what it said before, and falls\n", handName(m, m.Item(c).Key()))
			}
			_, err = h.sign(cmd, w, b, dir, ledger.Draft{Kind: record.KindCorrection, Body: record.Correction{Of: id, Kind: kind, Body: enc, Reason: reason}})
			return err
		})
	}
	return cmd
}

// corrected returns an entry's body as it stands with some values set anew.
func corrected(m *ledger.Meaning, it *ledger.Item, sets []string) (any, error) {
	kind := it.Entry().Kind
	f := formFor(kind)
	if f == nil {
		return nil, usageError(fmt.Sprintf("entry %s is a %s, which cannot be corrected", it.ID().Short(), kind), "Withdraw it, or sign a new one that says what is right")
	}
	flags := pflag.NewFlagSet(string(kind), pflag.ContinueOnError)
	f.flags(flags)
	switch f := f.(type) {
	case *readingForm:
		flags.StringVar(&f.unit, "unit", "", "the unit it is about")
	case *chargeForm:
		flags.StringVar(&f.unit, "unit", "", "the unit it is about")
	}
	if err := f.load(it.Body); err != nil {
		return nil, couldNot(fmt.Errorf("entry %s holds a value that cannot be read: %w", it.ID().Short(), err), "Withdraw it and sign a new one")
	}
	for _, s := range sets {
		name, value, ok := strings.Cut(s, "=")
		flag := flags.Lookup(name)
		if !ok || flag == nil {
			var names []string
			flags.VisitAll(func(f *pflag.Flag) { names = append(names, f.Name) })
			return nil, usageError(fmt.Sprintf("--set %q does not name a value of a %s", s, kind), "Write NAME=VALUE, with one of: "+strings.Join(names, ", "))
		}
		if v, ok := flag.Value.(bareValue); ok {
			if err := flags.Set(name, value); err == nil && v.withUnit(m.Founding) != "" {
				value = v.withUnit(m.Founding)
			}
		}
		if err := flags.Set(name, value); err != nil {
			var v *valueError
			if errors.As(err, &v) {
				return nil, usageError(fmt.Sprintf("--set %s: %s", name, v.what), v.todo)
			}
			return nil, usageError(fmt.Sprintf("--set %q: %v", s, err), "Give a value as the command that signed it takes")
		}
	}
	return f.body(m)
}

func newCountersign() *cobra.Command {
	var h home
	var b record.Countersign
	cmd := &cobra.Command{Use: "countersign ENTRY...", Short: "Put your signature to another hand's entries", Args: usageArgs(cobra.MinimumNArgs(1)), Example: "  chargehand countersign 3f2a91c0 --meaning inspected"}
	cmd.Flags().StringVar(&b.Meaning, "meaning", "inspected", "what your signature means")
	cmd.Flags().StringVar(&b.Note, "note", "", "anything worth keeping")
	return signing(cmd, &h, record.KindCountersign, func(m *ledger.Meaning, args []string) (any, error) {
		for _, a := range args {
			id, err := findEntry(m, a)
			if err != nil {
				return nil, err
			}
			b.Of = append(b.Of, id)
		}
		return b, nil
	})
}

func newWithdraw() *cobra.Command {
	var h home
	var b record.Withdrawal
	cmd := &cobra.Command{Use: "withdraw ENTRY", Short: "Take an entry out of force; it stays in the book", Args: usageArgs(cobra.ExactArgs(1)), Example: "  chargehand withdraw 3f2a91c0 --reason \"wrong unit\""}
	cmd.Flags().StringVar(&b.Reason, "reason", "", "why")
	return signing(cmd, &h, record.KindWithdrawal, func(m *ledger.Meaning, args []string) (any, error) {
		if err := fill(cmd, m, needs("reason")...); err != nil {
			return nil, err
		}
		id, err := findEntry(m, args[0])
		b.Of = id
		return b, err
	})
}

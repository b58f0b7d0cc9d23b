package main

import (
	"crypto/rand"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/keys"
	"example.org/chargehand/ledger/record"
)

func newBook() *cobra.Command {
	return group("book", "Start a book, or show this one", newBookStart(), newBookShow())
}

func newBookStart() *cobra.Command {
	var h home
	f := record.Founding{Roles: []record.Role{record.RoleLead, record.RoleTechnician, record.RoleInspector}, Format: 1}
	cmd := &cobra.Command{Use: "start", Short: "Start a book on this laptop, with you as its founder and lead", Args: usageArgs(cobra.NoArgs),
		Example: `  chargehand book start --title "Dry Creek" --name "Asha Brandt"`}
	addHome(cmd, &h, true)
	cmd.Flags().StringVar(&f.Title, "title", "", "what the book is of, such as the field or team")
	cmd.Flags().StringVar(&f.Name, "name", "", "your name")
	cmd.Flags().StringVar(&f.Certificate, "certificate", "", "your certificate or employee number")
	cmd.Flags().StringVar(&f.PressureUnit, "pressure-unit", "psi", "the book's own unit of pressure")
	cmd.Flags().StringVar(&f.TemperatureUnit, "temperature-unit", "F", "the book's own unit of temperature")
	cmd.RunE = func(cmd *cobra.Command, _ []string) (err error) {
		if err := requireFlags(cmd, "title", "name"); err != nil {
			return err
		}
		dir, err := h.folder()
		if err != nil {
			return err
		}
		if _, err := os.Stat(filepath.Join(dir, "book")); err == nil {
			return couldNot(fmt.Errorf("there is a book in %q already", dir), "Name another folder with --book")
		}
		p, err := h.passphrase(cmd, "Choose a passphrase, to sign with: ")
		if err != nil {
			return err
		}
		if len(p) < 8 {
			return usageError(fmt.Sprintf("a passphrase of %d characters is too short", len(p)), "Choose 8 or more; several words are easier to type with gloves")
		}
		if err := os.MkdirAll(dir, 0o700); err != nil {
			return err
		}
		if _, err := rand.Read(f.Nonce[:]); err != nil {
			return err
		}
		key, err := keys.Create(filepath.Join(dir, "key"), p, keys.WorkFactor, rand.Reader)
		if err != nil {
			return err
		}
		b, err := ledger.Found(filepath.Join(dir, "store"), key, f, time.Now)
		if err != nil {
			return explain(err, dir)
		}
		defer func() { err = errors.Join(err, b.Close()) }()
		if err := os.WriteFile(filepath.Join(dir, "book"), []byte(b.ID().String()+"\n"), 0o600); err != nil {
			return err
		}
		showBook(cmd, b.Meaning(), dir)
		return nil
	}
	return cmd
}

func newBookShow() *cobra.Command {
	var h home
	cmd := &cobra.Command{Use: "show", Short: "Show what this book is and how much it holds", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	cmd.RunE = func(cmd *cobra.Command, _ []string) (err error) {
		b, dir, err := h.open()
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, b.Close()) }()
		showBook(cmd, b.Meaning(), dir)
		return nil
	}
	return cmd
}

func showBook(cmd *cobra.Command, m *ledger.Meaning, dir string) {
	fp := m.Fingerprint()
	w := cmd.OutOrStdout()
	fmt.Fprintf(w, "book        %s\n", m.Founding.Title)
	fmt.Fprintf(w, "founded by  %s\n", m.Founding.Name)
	fmt.Fprintf(w, "founding    %s\n", m.Book)
	fmt.Fprintf(w, "holds       %d entries, %d lines, %d units, %d gauges, %d sheets\n", len(m.Entries), len(m.Frontier()), len(m.Units), len(m.Gauges), len(m.Sheets))
	fmt.Fprintf(w, "fingerprint %s\n", grouped(fp[:8]))
	fmt.Fprintf(w, "folder      %s\n", dir)
}

// grouped writes bytes so that two people can compare them aloud.
func grouped(b []byte) string {
	var parts []string
	for i := 0; i < len(b); i += 2 {
		parts = append(parts, fmt.Sprintf("%x", b[i:i+2]))
	}
	return strings.Join(parts, " ")
}

func newHand() *cobra.Command {
	return group("hand", "Who may sign, and as what", newHandList(), newHandAdmit(), newHandRetire())
}

func newHandList() *cobra.Command {
	var h home
	cmd := &cobra.Command{Use: "list", Short: "List the hands, their roles and keys", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	cmd.RunE = func(cmd *cobra.Command, _ []string) (err error) {
		b, _, err := h.open()
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, b.Close()) }()
		m := b.Meaning()
		for _, hand := range m.Hands {
			var roles []string
			for _, r := range hand.Roles {
				roles = append(roles, string(r))
			}
			fmt.Fprintf(cmd.OutOrStdout(), "%s: %s\n", hand.Name, strings.Join(roles, ", "))
			for _, k := range hand.Keys {
				state := "may sign"
				if !m.InGoodStanding(k) {
					state = "retired"
				}
				fmt.Fprintf(cmd.OutOrStdout(), "  key %s  %s\n", k, state)
			}
		}
		return nil
	}
	return cmd
}

func newHandAdmit() *cobra.Command {
	var h home
	var name, certificate, key string
	var roles []string
	cmd := &cobra.Command{Use: "admit", Short: "Admit a hand by the public key of their laptop", Args: usageArgs(cobra.NoArgs)}
	cmd.Flags().StringVar(&name, "name", "", "the person's name")
	cmd.Flags().StringVar(&certificate, "certificate", "", "their certificate or employee number")
	cmd.Flags().StringVar(&key, "key", "", "public key, 64 digits, as their laptop shows it")
	cmd.Flags().StringSliceVar(&roles, "role", nil, "lead, technician, inspector or auditor; several with commas")
	return signing(cmd, &h, record.KindHandAdmitted, func(*ledger.Meaning, []string) (any, error) {
		if err := requireFlags(cmd, "name", "key", "role"); err != nil {
			return nil, err
		}
		k, err := record.ParseKeyID(key)
		if err != nil {
			return nil, usageError("--key: "+err.Error(), "Copy it from the first line of their key file")
		}
		b := record.HandAdmitted{Name: name, Certificate: certificate, Key: k}
		for _, r := range roles {
			b.Roles = append(b.Roles, record.Role(r))
		}
		return b, nil
	})
}

func newHandRetire() *cobra.Command {
	var h home
	var key, reason string
	cmd := &cobra.Command{Use: "retire", Short: "Retire a key: what it signs after what you hold now is set aside", Args: usageArgs(cobra.NoArgs)}
	cmd.Flags().StringVar(&key, "key", "", "public key, 64 digits, from 'hand list'")
	cmd.Flags().StringVar(&reason, "reason", "", "why")
	return signing(cmd, &h, record.KindKeyRetired, func(m *ledger.Meaning, _ []string) (any, error) {
		if err := requireFlags(cmd, "key", "reason"); err != nil {
			return nil, err
		}
		k, err := record.ParseKeyID(key)
		if err != nil {
			return nil, usageError("--key: "+err.Error(), "Copy it from 'chargehand hand list'")
		}
		b := record.KeyRetired{Key: k, Reason: reason}
		for _, head := range m.Frontier() {
			if head.Key == k {
				if b.LastSeq > 0 {
					return nil, couldNot(fmt.Errorf("the line of key %s is forked at its end", k.Short()), "Ask the founder; choosing a branch is not offered here yet")
				}
				b.LastSeq, b.LastID = head.Seq, head.ID
			}
		}
		return b, nil
	})
}

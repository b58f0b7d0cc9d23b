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
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

func newBook() *cobra.Command {
	return group("book", "Start a book, join one, show or copy this one", newBookStart(), newBookJoin(), newBookShow(), newBookCopy())
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
	pressure, temperature := choice{"psi", []string{"psi", "bar", "kPa", "MPa", "kgf/cm2"}}, choice{"F", []string{"F", "C"}}
	cmd.Flags().Var(&pressure, "pressure-unit", "the book's own unit of pressure: what a bare number means, and what is shown")
	cmd.Flags().Var(&temperature, "temperature-unit", "the book's own unit of temperature")
	cmd.RunE = func(cmd *cobra.Command, _ []string) (err error) {
		if err := fill(cmd, nil, needs("title", "name")...); err != nil {
			return err
		}
		f.PressureUnit, f.TemperatureUnit = pressure.is, temperature.is
		dir, err := h.folder()
		if err != nil {
			return err
		}
		p, err := h.passphrase(cmd, "Choose a passphrase, to sign with: ")
		if err != nil {
			return err
		}
		key, undo, err := newFolder(cmd.Context(), dir, p)
		if err != nil {
			return err
		}
		started := false
		defer func() {
			if !started {
				undo()
			}
		}()
		if _, err := rand.Read(f.Nonce[:]); err != nil {
			return err
		}
		secret, err := newSecret()
		if err != nil {
			return err
		}
		if err := sealSecret(cmd.Context(), dir, secret, p); err != nil {
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
		started = true
		showBook(cmd, b.Meaning(), dir)
		return nil
	}
	return cmd
}

type bookJSON struct {
	Title           string `json:"title"`
	Founder         string `json:"founder"`
	Founding        string `json:"founding"` // fingerprint of the founding entry, the book's id
	Entries         int    `json:"entries"`
	SetAside        int    `json:"set_aside"`
	Lines           int    `json:"lines"`
	Units           int    `json:"units"`
	Gauges          int    `json:"gauges"`
	Sheets          int    `json:"sheets"`
	Hands           int    `json:"hands"`
	PressureUnit    string `json:"pressure_unit"`
	TemperatureUnit string `json:"temperature_unit"`
	Fingerprint     string `json:"fingerprint"`
	Folder          string `json:"folder"`
}

func newBookShow() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "show", Short: "Show what this book is and how much it holds", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			m := b.Meaning()
			if !asJSON {
				showBook(cmd, m, dir)
				return nil
			}
			aside := 0
			for i := range m.Entries {
				if m.Entries[i].SetAside != "" {
					aside++
				}
			}
			in := verdict.UnitsOf(m)
			return writeJSON(cmd.OutOrStdout(), bookJSON{m.Founding.Title, m.Founding.Name, m.Book.String(), len(m.Entries), aside, len(m.Frontier()), len(m.Units), len(m.Gauges), len(m.Sheets), len(m.Hands),
				in.P, in.T, fmt.Sprintf("%x", m.Fingerprint()), dir})
		})
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

type handJSON struct {
	Name        string        `json:"name"`
	Certificate string        `json:"certificate,omitempty"`
	Roles       []record.Role `json:"roles"`
	Keys        []keyJSON     `json:"keys"`
}

type keyJSON struct {
	Key   string `json:"key"`
	State string `json:"state"` // "may sign" or "retired"
}

func newHandList() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "list", Short: "List the hands, their roles and keys", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			hands := []handJSON{}
			for _, hand := range m.Hands {
				j := handJSON{Name: hand.Name, Certificate: hand.Certificate, Roles: hand.Roles}
				for _, k := range hand.Keys {
					state := "may sign"
					if !m.InGoodStanding(k) {
						state = "retired"
					}
					j.Keys = append(j.Keys, keyJSON{k.String(), state})
				}
				hands = append(hands, j)
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), hands)
			}
			for _, j := range hands {
				fmt.Fprintf(cmd.OutOrStdout(), "%s: %s\n", j.Name, roleList(j.Roles))
				for _, k := range j.Keys {
					fmt.Fprintf(cmd.OutOrStdout(), "  key %s  %s\n", k.Key, k.State)
				}
			}
			return nil
		})
	}
	return cmd
}

func newHandAdmit() *cobra.Command {
	var h home
	var name, certificate, key, listen string
	var roles []string
	var byCode, yes bool
	var lifetime time.Duration
	cmd := &cobra.Command{Use: "admit", Short: "Admit a hand: by a one-time code read out, or by the public key of their laptop", Args: usageArgs(cobra.NoArgs),
		Example: "  chargehand hand admit --by-code --role technician"}
	f := cmd.Flags()
	f.BoolVar(&byCode, "by-code", false, "show a one-time code and wait for the newcomer's laptop")
	f.StringSliceVar(&roles, "role", nil, "lead, technician, inspector or auditor; several with commas")
	f.StringVar(&listen, "listen", "0.0.0.0:0", "with --by-code: where to be reached, host:port")
	f.DurationVar(&lifetime, "for", 5*time.Minute, "with --by-code: how long the code is good")
	f.BoolVar(&yes, "yes", false, "with --by-code: say yes to whoever knows the code, without asking; for scripts")
	f.StringVar(&name, "name", "", "without --by-code: the person's name")
	f.StringVar(&certificate, "certificate", "", "without --by-code: their certificate or employee number")
	f.StringVar(&key, "key", "", "without --by-code: public key, 64 digits, from the first line of their key file")
	given := func() ([]record.Role, error) {
		if err := fill(cmd, nil, needs("role")...); err != nil {
			return nil, err
		}
		var rs []record.Role
		for _, r := range roles {
			role := record.Role(strings.TrimSpace(r))
			if !role.Known() {
				return nil, usageError(fmt.Sprintf("--role: %q is not a role", r), "Write lead, technician, inspector or auditor")
			}
			rs = append(rs, role)
		}
		return rs, nil
	}
	signing(cmd, &h, record.KindHandAdmitted, func(m *ledger.Meaning, _ []string) (any, error) {
		if err := fill(cmd, m, needs("name", "key")...); err != nil {
			return nil, err
		}
		rs, err := given()
		if err != nil {
			return nil, err
		}
		k, err := record.ParseKeyID(key)
		if err != nil {
			return nil, usageError("--key: "+err.Error(), "Copy it from the first line of their key file")
		}
		return record.HandAdmitted{Name: name, Certificate: certificate, Key: k, Roles: rs}, nil
	})
	byKey := cmd.RunE
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		if !byCode {
			return byKey(cmd, args)
		}
		rs, err := given()
		if err != nil {
			return err
		}
		return invite(cmd, &h, rs, listen, lifetime, yes)
	}
	return cmd
}

func newHandRetire() *cobra.Command {
	var h home
	var key, reason string
	cmd := &cobra.Command{Use: "retire", Short: "Retire a key: what it signs after what you hold now is set aside", Args: usageArgs(cobra.NoArgs)}
	cmd.Flags().StringVar(&key, "key", "", "public key, 64 digits, from 'hand list'")
	cmd.Flags().StringVar(&reason, "reason", "", "why")
	return signing(cmd, &h, record.KindKeyRetired, func(m *ledger.Meaning, _ []string) (any, error) {
		if err := fill(cmd, m, needs("key", "reason")...); err != nil {
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

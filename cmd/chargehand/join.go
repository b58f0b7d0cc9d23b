package main

import (
	"bufio"
	"bytes"
	"context"
	"crypto/ed25519"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/keys"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/sync/join"
	"example.org/chargehand/sync/lan"
)

// binding names the channel between a lead's and a newcomer's laptop, the same on both.
func binding(lead, newcomer record.KeyID) []byte { return append(lead[:], newcomer[:]...) }

// welcome is what a newcomer is given: the book's id and its secret.
func packWelcome(id record.BookID, secret [32]byte) []byte { return append(id[:], secret[:]...) }

func unpackWelcome(p []byte) (id record.BookID, secret [32]byte, err error) {
	if len(p) != 64 {
		return id, secret, fmt.Errorf("the lead's laptop gave %d bytes where the book's id and secret take 64", len(p))
	}
	return record.BookID(p[:32]), [32]byte(p[32:]), nil
}

func publicOf(key ed25519.PrivateKey) record.KeyID {
	return record.KeyID(key.Public().(ed25519.PublicKey))
}

// invite serves one newcomer by a one-time code on the lead's laptop, and meets them at once.
func invite(cmd *cobra.Command, h *home, roles []record.Role, listen string, lifetime time.Duration, yes bool) (err error) {
	b, dir, err := h.open()
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, b.Close()) }()
	key, secret, err := h.secret(cmd, dir)
	if err != nil {
		return err
	}
	if me := b.Meaning().Hand(publicOf(key)); me == nil || !me.Has(record.RoleLead) {
		return couldNot(errors.New("only a lead may admit a hand"), "Ask a lead to do it on their laptop; see 'chargehand hand list'")
	}
	code, err := join.NewCode(rand.Reader)
	if err != nil {
		return err
	}
	offer, err := join.NewOffer(code, key, lifetime, time.Now)
	if err != nil {
		return err
	}
	network, err := lan.JoinNetwork(code.Tag())
	if err != nil {
		return err
	}
	out := cmd.OutOrStdout()
	done := make(chan error, 1)
	host, err := lan.Open(lan.Options{Network: network, Key: key, Listen: []string{listen}, Discover: true,
		Handle: func(ctx context.Context, who record.KeyID, rw io.ReadWriteCloser) {
			defer rw.Close()
			_, err := offer.Serve(ctx, rw, binding(publicOf(key), who), func(_ context.Context, r join.Request) ([]byte, error) {
				if r.Key != who {
					return nil, fmt.Errorf("key %s asks on the channel of key %s", r.Key.Short(), who.Short())
				}
				if !agree(cmd, r, roles, yes) {
					return nil, join.ErrRefused
				}
				v, err := b.Author(key, ledger.Draft{Kind: record.KindHandAdmitted, Body: record.HandAdmitted{Name: r.Name, Certificate: r.Certificate, Roles: roles, Key: r.Key}})
				if err != nil {
					return nil, explain(err, dir)
				}
				fmt.Fprintf(out, "signed      entry %s, number %d of your line\n", v.ID().Short(), v.Entry().Seq)
				return packWelcome(b.ID(), secret), nil
			})
			switch {
			case err == nil:
				err = converse(ctx, out, b, who, rw)
			case offer.Err() == nil:
				fmt.Fprintf(cmd.ErrOrStderr(), "chargehand: a laptop tried to join: %v\n", err)
				return // the code is good still
			case errors.Is(err, join.ErrRefused):
				err = errNo
			}
			select {
			case done <- err:
			default:
			}
		}})
	if err != nil {
		return couldNot(err, "See that the address is free, or name another with --listen")
	}
	defer func() { err = errors.Join(err, host.Close()) }()
	fmt.Fprintf(out, "code        %s\n", code)
	fmt.Fprintf(out, "read it out to the newcomer, who runs: chargehand book join --code %s\n", code)
	for _, a := range host.Addrs() {
		fmt.Fprintf(out, "in reach    at %s\n", a)
	}
	fmt.Fprintf(out, "good until  %s, for one laptop\n", offer.Expires().Format("15:04:05"))
	select {
	case err := <-done:
		return err
	case <-time.After(time.Until(offer.Expires())):
		return couldNot(errors.New("nobody joined before the code's time was over"), "Ask for a new code when the newcomer is ready")
	case <-cmd.Context().Done():
		return couldNot(cmd.Context().Err(), "The code is no longer good")
	}
}

// agree asks the lead whether the newcomer is who they say.
func agree(cmd *cobra.Command, r join.Request, roles []record.Role, yes bool) bool {
	out := cmd.OutOrStdout()
	fmt.Fprintf(out, "asks        %s", r.Name)
	if r.Certificate != "" {
		fmt.Fprintf(out, ", %s", r.Certificate)
	}
	fmt.Fprintf(out, ", to sign as %s\nkey words   %s\n", roleList(roles), keys.Words(r.Key))
	if yes {
		return true
	}
	fmt.Fprint(cmd.ErrOrStderr(), "Are these the words on the newcomer's laptop, and may they sign? Type yes: ")
	line, err := bufio.NewReader(cmd.InOrStdin()).ReadString('\n')
	return err == nil && strings.EqualFold(strings.TrimSpace(line), "yes")
}

func roleList(roles []record.Role) string {
	var s []string
	for _, r := range roles {
		s = append(s, string(r))
	}
	return strings.Join(s, ", ")
}

func newBookJoin() *cobra.Command {
	var h home
	var code, name, certificate, to string
	var wait time.Duration
	cmd := &cobra.Command{Use: "join", Short: "Join a book by the one-time code that its lead reads out", Args: usageArgs(cobra.NoArgs),
		Long:    "Join a book. The lead runs 'chargehand hand admit --by-code --role technician' and reads the code out. Both compare the\nkey words before the lead says yes.",
		Example: "  chargehand book join --code XXXX-XXXX-XXXX-XXXX-XXXX --name \"Ben Osei\""}
	addHome(cmd, &h, true)
	cmd.Flags().StringVar(&code, "code", "", "the code, as read out")
	cmd.Flags().StringVar(&name, "name", "", "your name")
	cmd.Flags().StringVar(&certificate, "certificate", "", "your certificate or employee number")
	cmd.Flags().StringVar(&to, "to", "", "address that the lead's laptop shows, host:port (else it is looked for)")
	cmd.Flags().DurationVar(&wait, "for", 5*time.Minute, "how long to try")
	cmd.RunE = func(cmd *cobra.Command, _ []string) (err error) {
		if err := fill(cmd, nil, needs("code", "name")...); err != nil {
			return err
		}
		c, err := join.Parse(code)
		if err != nil {
			return usageError(fmt.Sprintf("--code %q: %v", code, err), "Ask the lead to read it out again")
		}
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
		joined := false
		defer func() {
			if !joined {
				undo()
			}
		}()
		ctx, cancel := context.WithTimeout(cmd.Context(), wait)
		defer cancel()
		out := cmd.OutOrStdout()
		fmt.Fprintf(out, "key words   %s\n", keys.Words(publicOf(key)))
		who, rw, closeHost, err := reachLead(ctx, c, key, to)
		if err != nil {
			return couldNot(err, "See that the code is on the lead's screen now, and that both laptops are on one network; or give the address that the lead's laptop shows with --to")
		}
		defer func() { err = errors.Join(err, closeHost()) }()
		n := join.Newcomer{Code: c, Key: key, Name: name, Certificate: certificate, Waiting: func(record.KeyID) {
			fmt.Fprintln(out, "waiting     for the lead to say yes")
		}}
		w, err := n.Join(ctx, rw, binding(who, publicOf(key)))
		if err != nil {
			return couldNot(fmt.Errorf("not joined: %w", err), "Ask the lead for a new code; nothing is left on this laptop")
		}
		id, secret, err := unpackWelcome(w.Payload)
		if err != nil {
			return couldNot(err, "Both laptops need the same chargehand")
		}
		if err := sealSecret(cmd.Context(), dir, secret, p); err != nil {
			return err
		}
		if err := os.WriteFile(filepath.Join(dir, "book"), []byte(id.String()+"\n"), 0o600); err != nil {
			return err
		}
		joined = true
		b, err := ledger.Open(filepath.Join(dir, "store"), id, time.Now)
		if err != nil {
			return explain(err, dir)
		}
		defer func() { err = errors.Join(err, b.Close()) }()
		if err := converse(ctx, out, b, who, rw); err != nil {
			return err
		}
		showBook(cmd, b.Meaning(), dir)
		return nil
	}
	return cmd
}

// reachLead opens a stream to the laptop that offers the code.
func reachLead(ctx context.Context, code join.Code, key ed25519.PrivateKey, to string) (record.KeyID, io.ReadWriteCloser, func() error, error) {
	network, err := lan.JoinNetwork(code.Tag())
	if err != nil {
		return record.KeyID{}, nil, nil, err
	}
	found := make(chan record.KeyID, 1)
	o := lan.Options{Network: network, Key: key, Discover: to == "",
		Handle: func(_ context.Context, _ record.KeyID, rw io.ReadWriteCloser) { rw.Close() },
		Found: func(_ context.Context, who record.KeyID) {
			select {
			case found <- who:
			default:
			}
		}}
	if to == "" {
		o.Listen = []string{"0.0.0.0:0"} // discovery speaks from an address
	}
	host, err := lan.Open(o)
	if err != nil {
		return record.KeyID{}, nil, nil, err
	}
	var who record.KeyID
	var rw io.ReadWriteCloser
	if to != "" {
		who, rw, err = host.Dial(ctx, to)
	} else {
		select {
		case who = <-found:
			rw, err = host.Stream(ctx, who)
		case <-ctx.Done():
			err = errors.New("no laptop that offers this code was found")
		}
	}
	if err != nil {
		return record.KeyID{}, nil, nil, errors.Join(err, host.Close())
	}
	if me := publicOf(key); bytes.Equal(me[:], who[:]) {
		return record.KeyID{}, nil, nil, errors.Join(errors.New("this laptop found itself"), rw.Close(), host.Close())
	}
	return who, rw, host.Close, nil
}

package main

import (
	"bufio"
	"bytes"
	"crypto/ed25519"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// home is where this laptop keeps a book: the book's id, this laptop's key, and the store.
type home struct {
	dir            string
	passphraseFile string
}

// addHome gives a command the flags that say which book; with signs also where the passphrase comes from.
func addHome(cmd *cobra.Command, h *home, signs bool) {
	cmd.Flags().StringVar(&h.dir, "book", "", "folder of the book (else $CHARGEHAND_BOOK, else chargehand in your data folder)")
	if signs {
		cmd.Flags().StringVar(&h.passphraseFile, "passphrase-file", "", "file whose first line is the passphrase; /dev/fd/3 reads descriptor 3 (else asked for on the terminal)")
	}
}

func (h *home) folder() (string, error) {
	for _, d := range []string{h.dir, os.Getenv("CHARGEHAND_BOOK")} {
		if d != "" {
			return d, nil
		}
	}
	if d := os.Getenv("XDG_DATA_HOME"); filepath.IsAbs(d) {
		return filepath.Join(d, "chargehand"), nil
	}
	d, err := os.UserHomeDir()
	if err != nil {
		return "", usageError("no folder for the book: "+err.Error(), "Name one with --book DIR")
	}
	return filepath.Join(d, ".local", "share", "chargehand"), nil
}

func (h *home) id() (record.BookID, string, error) {
	dir, err := h.folder()
	if err != nil {
		return record.BookID{}, "", err
	}
	data, err := os.ReadFile(filepath.Join(dir, "book"))
	if errors.Is(err, os.ErrNotExist) {
		return record.BookID{}, "", couldNot(fmt.Errorf("there is no book in %q", dir), "Start one with 'chargehand book start', or name another folder with --book")
	} else if err != nil {
		return record.BookID{}, "", couldNot(fmt.Errorf("the file %q, which names the book, cannot be read: %w", filepath.Join(dir, "book"), plainly(err)), "Restore it from a backup, or see that you may read it")
	}
	id, err := record.ParseBookID(strings.TrimSpace(string(data)))
	if err != nil {
		return record.BookID{}, "", couldNot(fmt.Errorf("the file %q does not name a book: %w", filepath.Join(dir, "book"), err), "Restore it from a backup; it holds the 64 digits that 'book show' prints")
	}
	return id, dir, nil
}

// open opens the book; the caller closes it.
func (h *home) open() (*ledger.Book, string, error) {
	id, dir, err := h.id()
	if err != nil {
		return nil, "", err
	}
	if _, err := os.Stat(filepath.Join(dir, "store")); err != nil { // Open would begin an empty one
		return nil, "", couldNot(fmt.Errorf("the folder %q names a book and has no store: %w", dir, plainly(err)), "Restore the folder store from a backup, or join again in a new folder")
	}
	b, err := ledger.Open(filepath.Join(dir, "store"), id, time.Now)
	return b, dir, explain(err, dir)
}

// explain says what to do about the ledger's errors.
func explain(err error, dir string) error {
	var refused *ledger.RefusedError
	switch {
	case err == nil:
		return nil
	case errors.Is(err, ledger.ErrBusy):
		return couldNot(fmt.Errorf("another chargehand holds the book in %q", dir), "Wait until it has finished, or end it; nothing was changed")
	case errors.Is(err, ledger.ErrDamaged):
		return couldNot(err, "Run 'chargehand audit' to see what is damaged; do not sign on this copy")
	case errors.Is(err, ledger.ErrFull):
		return couldNot(err, "Make room on the disk and try again; nothing was signed")
	case errors.As(err, &refused):
		return couldNot(fmt.Errorf("not signed: %w", err), "Nothing was written; see 'chargehand hand list' for who may sign what")
	case errors.Is(err, record.ErrMalformed):
		return usageError("not signed: "+err.Error(), "Give what is missing there; nothing was written")
	}
	return err
}

// passphrase reads it from the file, or from the terminal without echo.
func (h *home) passphrase(cmd *cobra.Command, prompt string) ([]byte, error) {
	if h.passphraseFile != "" {
		f, err := os.Open(h.passphraseFile)
		if err != nil {
			return nil, usageError("--passphrase-file: "+plainly(err).Error(), "Name a file whose first line is the passphrase")
		}
		defer f.Close()
		line, err := bufio.NewReader(io.LimitReader(f, 4096)).ReadBytes('\n')
		if err != nil && !errors.Is(err, io.EOF) {
			return nil, usageError("--passphrase-file: "+plainly(err).Error(), "Name a file whose first line is the passphrase")
		}
		return bytes.TrimRight(line, "\r\n"), nil
	}
	in := terminal(cmd)
	if in == nil {
		return nil, usageError("no terminal to ask for the passphrase on", "Name a file that holds it with --passphrase-file")
	}
	before, err := term.GetState(int(in.Fd()))
	if err != nil {
		return nil, err
	}
	fmt.Fprint(cmd.ErrOrStderr(), prompt)
	p, err := interruptible(cmd.Context(), func() ([]byte, error) { return term.ReadPassword(int(in.Fd())) })
	fmt.Fprintln(cmd.ErrOrStderr())
	if err != nil {
		return nil, errors.Join(errLeft, term.Restore(int(in.Fd()), before)) // the echo comes back
	}
	return p, nil
}

func (h *home) unlock(cmd *cobra.Command, dir string) (ed25519.PrivateKey, error) {
	p, err := h.passphrase(cmd, "Passphrase, to sign: ")
	if err != nil {
		return nil, err
	}
	return openKey(cmd, dir, p)
}

// sign unlocks the key and signs a draft, and says so on w.
func (h *home) sign(cmd *cobra.Command, w io.Writer, b *ledger.Book, dir string, d ledger.Draft) (record.Verified, error) {
	key, err := h.unlock(cmd, dir)
	if err != nil {
		return record.Verified{}, err
	}
	return h.signWith(cmd, w, b, dir, key, d)
}

// signWith signs a draft with a key that is unlocked already.
func (h *home) signWith(cmd *cobra.Command, w io.Writer, b *ledger.Book, dir string, key ed25519.PrivateKey, d ledger.Draft) (record.Verified, error) {
	if err := tellRefreshed(w, b, dir); err != nil { // what moved before this entry is not this entry's doing
		return record.Verified{}, err
	}
	v, err := b.Author(key, d)
	if err != nil {
		return record.Verified{}, explain(err, dir)
	}
	fmt.Fprintf(w, "signed      entry %s, number %d of your line\n", v.ID().Short(), v.Entry().Seq)
	return v, tellRefreshed(w, b, dir)
}

// tellRefreshed brings the kept verdicts up to date and tells which moved since this laptop last computed them.
func tellRefreshed(w io.Writer, b *ledger.Book, dir string) error {
	r, err := verdict.Refresh(b)
	if err != nil {
		return explain(err, dir)
	}
	tellMoved(w, b.Meaning(), r.Moved)
	return nil
}

// quietWith is where a command tells what it does: nowhere when it prints JSON.
func quietWith(cmd *cobra.Command, asJSON bool) io.Writer {
	if asJSON {
		return io.Discard
	}
	return cmd.OutOrStdout()
}

// with opens the book, gives bare numbers its units, and closes it after f.
func (h *home) with(cmd *cobra.Command, f func(b *ledger.Book, dir string) error) (err error) {
	b, dir, err := h.open()
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, b.Close()) }()
	if err := giveUnits(cmd, b.Meaning().Founding); err != nil {
		return err
	}
	return f(b, dir)
}

// signing makes a command that signs one entry: body makes it from the flags.
func signing(cmd *cobra.Command, h *home, kind record.Kind, body func(*ledger.Meaning, []string) (any, error)) *cobra.Command {
	addHome(cmd, h, true)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			x, err := body(b.Meaning(), args)
			if err != nil {
				return err
			}
			_, err = h.sign(cmd, cmd.OutOrStdout(), b, dir, ledger.Draft{Kind: kind, Body: x})
			return err
		})
	}
	return cmd
}

func group(use, short string, subs ...*cobra.Command) *cobra.Command {
	g := &cobra.Command{Use: use, Short: short,
		Args: usageArgs(func(_ *cobra.Command, args []string) error {
			if len(args) > 0 {
				return fmt.Errorf("%q is not a command of %s", args[0], use)
			}
			return nil
		}),
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() }}
	g.AddCommand(subs...)
	return g
}

// stamp is a flag for a point in time, RFC 3339 with offset, or a date.
type stamp struct{ at time.Time }

func (s *stamp) String() string {
	if s == nil || s.at.IsZero() {
		return ""
	}
	return s.at.Format(time.RFC3339)
}

func (s *stamp) Type() string { return "time" }

func (s *stamp) Set(v string) error {
	for _, layout := range []string{time.RFC3339, "2006-01-02T15:04Z07:00", time.DateOnly} {
		if t, err := time.Parse(layout, v); err == nil && t.Unix() < 0 {
			return &valueError{fmt.Sprintf("%q is before 1970", v), "Write the year as it was, such as 2031-03-04", nil}
		} else if err == nil {
			s.at = t
			return nil
		}
	}
	return &valueError{fmt.Sprintf("%q is not a time", v), "Write it as 2031-03-04T21:15+02:00, or a day as 2031-03-04", nil}
}

func (s *stamp) record() record.Time {
	t := s.at
	if t.IsZero() {
		t = time.Now()
	}
	_, off := t.Zone()
	return record.Time{Unix: t.Unix(), OffsetMin: off / 60}
}

// wall is the hour on the wall of whoever wrote it down.
func wall(t record.Time) time.Time {
	return time.Unix(t.Unix, 0).In(time.FixedZone("", t.OffsetMin*60))
}

func clock(t record.Time) string { return wall(t).Format("2006-01-02T15:04Z07:00") }

func day(t record.Time) string { return wall(t).Format(time.DateOnly) }

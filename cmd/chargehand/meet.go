package main

import (
	"bytes"
	"context"
	"crypto/ed25519"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"slices"
	stdsync "sync"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/keys"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
	peersync "example.org/chargehand/sync"
	"example.org/chargehand/sync/lan"
)

// secret unlocks what the book's laptops find each other by.
func (h *home) secret(cmd *cobra.Command, dir string) (ed25519.PrivateKey, [32]byte, error) {
	p, err := h.passphrase(cmd, "Passphrase: ")
	if err != nil {
		return nil, [32]byte{}, err
	}
	key, err := openKey(cmd, dir, p)
	if err != nil {
		return nil, [32]byte{}, err
	}
	s, err := keys.Unseal(filepath.Join(dir, "secret"), p)
	if errors.Is(err, keys.ErrMalformed) {
		err = fmt.Errorf("its file %q is damaged", filepath.Join(dir, "secret"))
	}
	if err != nil {
		return nil, [32]byte{}, couldNot(fmt.Errorf("the book's secret: %w", plainly(err)), "Restore the file secret from a backup of this folder, or join again in a new folder")
	}
	if len(s) != 32 {
		return nil, [32]byte{}, couldNot(fmt.Errorf("the book's secret has %d bytes, not 32", len(s)), "Restore the file secret from a backup of this folder")
	}
	return key, [32]byte(s), nil
}

func newMeet() *cobra.Command {
	var h home
	var to, listen string
	var once bool
	var wait time.Duration
	cmd := &cobra.Command{Use: "meet", Short: "Find the other laptops of the book and merge with them", Args: usageArgs(cobra.NoArgs),
		Long:    "Merge with the laptops of the book that are in reach: those on the same network by themselves, or one by its address.\nBoth people compare the fingerprint at the end: equal fingerprints are equal books.",
		Example: "  chargehand meet\n  chargehand meet --to 10.0.0.7:7404"}
	addHome(cmd, &h, true)
	cmd.Flags().StringVar(&to, "to", "", "meet the laptop at this host:port, and end")
	cmd.Flags().StringVar(&listen, "listen", "0.0.0.0:0", "where to be reached, host:port")
	cmd.Flags().BoolVar(&once, "once", false, "end after the first meeting")
	cmd.Flags().DurationVar(&wait, "for", 10*time.Minute, "how long to stay in reach")
	cmd.RunE = func(cmd *cobra.Command, _ []string) (err error) {
		b, dir, err := h.open()
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, b.Close()) }()
		key, secret, err := h.secret(cmd, dir)
		if err != nil {
			return err
		}
		ctx, cancel := context.WithTimeout(cmd.Context(), wait)
		defer cancel()
		network, err := lan.BookNetwork(secret)
		if err != nil {
			return err
		}
		t := &table{book: b, out: cmd.OutOrStdout(), met: make(chan error, 1)}
		o := lan.Options{Network: network, Key: key, Allow: b.MayMeet, Handle: t.talk}
		if to == "" {
			o.Listen, o.Discover = []string{listen}, true
		}
		var host *lan.Host
		if to == "" {
			// Both laptops may see each other at once: the one with the smaller key speaks.
			me := record.KeyID(key.Public().(ed25519.PublicKey))
			ready := make(chan struct{})
			o.Found = func(ctx context.Context, who record.KeyID) {
				<-ready
				if bytes.Compare(me[:], who[:]) > 0 {
					return
				}
				if rw, err := host.Stream(ctx, who); err == nil {
					t.talk(ctx, who, rw)
				}
			}
			if host, err = lan.Open(o); err == nil {
				close(ready)
			}
		} else {
			host, err = lan.Open(o)
		}
		if err != nil {
			return couldNot(err, "See that the address is free, or name another with --listen")
		}
		defer func() { err = errors.Join(err, host.Close()) }()
		if to != "" {
			who, rw, err := host.Dial(ctx, to)
			if err != nil {
				return couldNot(unmet(to, err), "See that 'chargehand meet' runs on the other laptop, that it is a laptop of this book whose key is not retired and who knows of yours, and that the address is the one it shows")
			}
			t.talk(ctx, who, rw)
			return <-t.met
		}
		for _, a := range host.Addrs() {
			fmt.Fprintf(cmd.OutOrStdout(), "in reach    at %s\n", a)
		}
		for {
			select {
			case err := <-t.met:
				if once {
					return err
				}
			case <-ctx.Done():
				if cmd.Context().Err() != nil {
					return nil // the person ended it
				}
				if t.count() == 0 {
					return couldNot(fmt.Errorf("nobody came in reach in %s", wait), "Run 'chargehand meet' on the other laptop too, or give its address with --to")
				}
				return nil
			}
		}
	}
	return cmd
}

// unmet says why nobody was met at an address, without the words of the network's library.
func unmet(to string, err error) error {
	for _, known := range []error{lan.ErrNotAllowed, lan.ErrNoAnswer} {
		if errors.Is(err, known) {
			return &problemCause{fmt.Sprintf("--to %q: %v", to, known), err}
		}
	}
	return fmt.Errorf("--to %q: %w", to, err)
}

// problemCause tells a cause in other words.
type problemCause struct {
	words string
	cause error
}

func (p *problemCause) Error() string { return p.words }
func (p *problemCause) Unwrap() error { return p.cause }

// table is where laptops meet: one conversation at a time, so that what moved is told for each.
type table struct {
	book *ledger.Book
	out  io.Writer
	met  chan error // the outcome of a meeting; one that nobody waits for is dropped

	mu stdsync.Mutex // guards what follows, and out
	n  int
}

func (t *table) count() int {
	t.mu.Lock()
	defer t.mu.Unlock()
	return t.n
}

func (t *table) talk(ctx context.Context, who record.KeyID, rw io.ReadWriteCloser) {
	t.mu.Lock()
	defer t.mu.Unlock()
	err := converse(ctx, t.out, t.book, who, rw)
	if err == nil {
		t.n++
	}
	select {
	case t.met <- err:
	default:
	}
}

// converse merges with one peer and tells what that did: the one path of every meeting.
func converse(ctx context.Context, out io.Writer, b *ledger.Book, who record.KeyID, rw io.ReadWriteCloser) error {
	if err := tellRefreshed(out, b, ""); err != nil {
		return err
	}
	before := b.Meaning()
	r, err := (&peersync.Session{Book: b}).Run(ctx, rw)
	fmt.Fprintf(out, "met         %s\n", handName(b.Meaning(), who))
	err = errors.Join(err, tellMerge(out, before, b, r))
	if err != nil {
		return couldNot(fmt.Errorf("the meeting was cut short: %w", err), "Meet again; what had arrived is kept and the rest follows")
	}
	if !r.Equal {
		return couldNot(errors.New("the two books are still not equal"), "Meet again")
	}
	return nil
}

func handName(m *ledger.Meaning, key record.KeyID) string {
	if h := m.Hand(key); h != nil {
		return fmt.Sprintf("%s, key %s", h.Name, key.Short())
	}
	return "key " + key.Short()
}

func tellMerge(out io.Writer, before *ledger.Meaning, b *ledger.Book, r peersync.Report) error {
	after := b.Meaning()
	count := func(word string, by map[record.KeyID]int) {
		if len(by) == 0 {
			fmt.Fprintf(out, "%-11s nothing\n", word)
		}
		for _, k := range slices.SortedFunc(maps.Keys(by), func(a, b record.KeyID) int { return bytes.Compare(a[:], b[:]) }) {
			fmt.Fprintf(out, "%-11s %d of %s\n", word, by[k], handName(after, k))
		}
	}
	count("received", r.Received)
	count("sent", r.Sent)
	if r.Refused > 0 {
		fmt.Fprintf(out, "refused     %d that do not verify\n", r.Refused)
	}
	for i := range after.Entries {
		it := &after.Entries[i]
		was := before.Item(it.ID())
		if it.SetAside != "" && (was == nil || was.SetAside == "") {
			fmt.Fprintf(out, "set aside   %s %s: %s\n", it.Entry().Kind, it.ID().Short(), it.SetAside)
		}
	}
	now, err := verdict.Refresh(b)
	if err != nil {
		return explain(err, "")
	}
	moved := now.Moved
	told := map[record.ID]bool{}
	for _, m := range moved {
		told[m.Entry] = true
	}
	for _, m := range verdict.AgainstShown(after, r.Changes.Added) {
		if !told[m.Entry] {
			moved = append(moved, m)
		}
	}
	tellMoved(out, after, moved)
	fp := after.Fingerprint()
	same := "the other laptop's is the same"
	if !r.Equal {
		same = "the other laptop's differs: " + grouped(r.PeerFingerprint[:8])
	}
	fmt.Fprintf(out, "fingerprint %s (%s)\n", grouped(fp[:8]), same)
	return nil
}

// tellMoved says of each verdict that moved what it was, what it is, and which entry moved it.
func tellMoved(out io.Writer, m *ledger.Meaning, moved []verdict.Moved) {
	for _, v := range moved {
		change := fmt.Sprintf("%s, now %s", v.Was, v.Now)
		if v.Was == v.Now {
			change = fmt.Sprintf("still %s, by other figures", v.Now)
		}
		fmt.Fprintf(out, "moved       %s, entry %s: %s%s\n            %s\n", unitName(v.Unit), v.Entry.Short(), change, because(m, v.Cause), v.Sentence)
	}
}

// because names the entry that moved a verdict.
func because(m *ledger.Meaning, cause record.ID) string {
	it := m.Item(cause)
	if it == nil {
		return ""
	}
	what := string(it.Entry().Kind)
	if s, ok := it.Body.(record.Sheet); ok {
		what = fmt.Sprintf("%s rev %s", s.Document, s.Revision)
	}
	return fmt.Sprintf(", because of %s (entry %s by %s)", what, cause.Short(), handName(m, it.Key()))
}

// workFactorKey is for a rehearsal, whose keys guard nothing: it lets them cost less than keys.WorkFactor.
type workFactorKey struct{}

func workFactor(ctx context.Context) int {
	if n, ok := ctx.Value(workFactorKey{}).(int); ok {
		return n
	}
	return keys.WorkFactor
}

// sealSecret keeps the book's secret in its folder, under the key's passphrase.
func sealSecret(ctx context.Context, dir string, secret [32]byte, passphrase []byte) error {
	return keys.Seal(filepath.Join(dir, "secret"), secret[:], passphrase, workFactor(ctx))
}

func newSecret() (s [32]byte, err error) {
	_, err = rand.Read(s[:])
	return s, err
}

// newFolder makes the book's folder with a new key in it; undo takes away what it made.
func newFolder(ctx context.Context, dir string, passphrase []byte) (key ed25519.PrivateKey, undo func(), err error) {
	if len(passphrase) < 8 {
		return nil, nil, usageError(fmt.Sprintf("a passphrase of %d characters is too short", len(passphrase)), "Choose 8 or more; several words are easier to type with gloves")
	}
	for _, name := range []string{"book", "key", "secret", "store"} {
		if _, err := os.Lstat(filepath.Join(dir, name)); err == nil {
			return nil, nil, couldNot(fmt.Errorf("there is a book in %q already", dir), "Name another folder with --book")
		}
	}
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return nil, nil, err
	}
	key, err = keys.Create(filepath.Join(dir, "key"), passphrase, workFactor(ctx), rand.Reader)
	return key, func() {
		for _, name := range []string{"book", "key", "secret", "store"} {
			os.RemoveAll(filepath.Join(dir, name))
		}
	}, err
}

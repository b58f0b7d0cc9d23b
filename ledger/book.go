// Package ledger is the book: a grow-only set of signed entries and what the set means. It knows no network and no physics.
//
// Fold is a pure function from a set of entries to its Meaning: lines and forks, who had which authority when, what is set
// aside and why, which corrections and countersigns are in force. Book keeps such a set on disk, adds what this laptop signs
// (Author) and what others signed (Merge), and holds the meaning ready.
package ledger

import (
	"context"
	"crypto/ed25519"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"iter"
	"os"
	"slices"
	"sync"
	"time"

	"example.org/chargehand/ledger/internal/store"
	"example.org/chargehand/ledger/record"
)

// Errors a caller decides on. Those of the store are the same values: see package ledger/internal/store.
var (
	ErrBusy    = store.ErrBusy
	ErrDamaged = store.ErrDamaged
	ErrFull    = store.ErrFull
	ErrNoBook  = errors.New("no book here")
)

// RefusedError says why an entry may not be signed now. Nothing was written.
type RefusedError struct{ Reason string }

func (e *RefusedError) Error() string { return e.Reason }

// Book is an open book. Its methods may be called from several goroutines.
type Book struct {
	id    record.BookID
	now   func() time.Time
	store *store.Store

	mu      sync.Mutex // guards what follows, and the order of writes
	entries []record.Verified
	held    map[record.ID]bool
	meaning *Meaning // nil when entries came since it was taken: a meeting brings many batches, and nobody asks in between
}

// Found starts a book in dir: the key signs the founding entry, whose id is the book's.
func Found(dir string, key ed25519.PrivateKey, f record.Founding, now func() time.Time) (*Book, error) {
	at := now()
	v, err := record.Sign(key, record.BookID{}, record.Entry{Seq: 1, Signed: recordTime(at), Clock: record.HLC{Wall: at.UnixMilli()}, Kind: record.KindFounding, Body: f})
	if err != nil {
		return nil, fmt.Errorf("found a book: %w", err)
	}
	b, err := open(dir, record.BookID(v.ID()), now)
	if err != nil {
		return nil, err
	}
	if len(b.entries) > 0 {
		return nil, errors.Join(fmt.Errorf("there is a book in %s already", dir), b.Close())
	}
	if err := b.add([]record.Verified{v}, true); err != nil {
		return nil, errors.Join(err, b.Close())
	}
	return b, nil
}

// Open opens the book of that id in dir. A dir without entries is an empty copy, ready to merge. Signatures were verified when
// the entries came in and are not verified again; bytes that have changed since are ErrDamaged.
func Open(dir string, id record.BookID, now func() time.Time) (*Book, error) {
	return open(dir, id, now)
}

func open(dir string, id record.BookID, now func() time.Time) (*Book, error) {
	st, err := store.Open(dir)
	if err != nil {
		return nil, err
	}
	b := &Book{id: id, now: now, store: st}
	if b.entries, err = st.Load(id); err != nil {
		return nil, errors.Join(err, st.Close())
	}
	b.held = make(map[record.ID]bool, len(b.entries))
	for _, v := range b.entries {
		b.held[v.ID()] = true
	}
	return b, nil
}

// Close syncs and closes the store.
func (b *Book) Close() error { return b.store.Close() }

// ID returns the book's id, the id of its founding entry.
func (b *Book) ID() record.BookID { return b.id }

// Meaning returns what the entries held now say. It does not change; a later call returns a newer one.
func (b *Book) Meaning() *Meaning {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.fold()
}

// fold brings the meaning up to the entries held. The caller holds mu.
func (b *Book) fold() *Meaning {
	if b.meaning == nil {
		b.meaning = Fold(b.id, b.entries)
	}
	return b.meaning
}

// Frontier returns the newest entry of each line, sorted by key; several for a forked line.
func (b *Book) Frontier() []LineHead { return b.Meaning().Frontier() }

// Frontier returns the newest entry of each line, sorted by key; several for a forked line.
func (m *Meaning) Frontier() []LineHead { return slices.Clone(m.set.heads) }

// Fingerprint is a hash of the book's id and the frontier. Each head's id covers its whole line, so equal fingerprints mean
// equal sets.
func (b *Book) Fingerprint() [32]byte { return b.Meaning().Fingerprint() }

// Fingerprint is Book.Fingerprint of the set that m is the meaning of.
func (m *Meaning) Fingerprint() [32]byte {
	h := sha256.New()
	h.Write(m.Book[:])
	for _, l := range m.set.heads {
		h.Write(l.Key[:])
		h.Write(binary.BigEndian.AppendUint64(nil, l.Seq))
		h.Write(l.ID[:])
	}
	return [32]byte(h.Sum(nil))
}

// MayMeet tells whether the holder of a key may be met: admitted and not retired.
func (b *Book) MayMeet(key record.KeyID) bool { return b.Meaning().InGoodStanding(key) }

// Missing yields in causal order the entries that a peer with that frontier lacks. On a line where the heads show different
// entries it yields the line from its start, since only the peer knows where the two part.
func (b *Book) Missing(ctx context.Context, have []LineHead) iter.Seq2[record.Verified, error] {
	m := b.Meaning()
	upTo := map[record.KeyID]uint64{}
	newest := make(map[record.KeyID]uint64, len(m.set.heads))
	for _, h := range m.set.heads {
		newest[h.Key] = max(newest[h.Key], h.Seq)
	}
	for _, h := range have {
		if n := m.set.byID[h.ID]; n == nil && newest[h.Key] >= h.Seq {
			upTo[h.Key] = 0 // a fork: the peer holds another entry of a number that we hold
		} else if _, twice := upTo[h.Key]; twice {
			upTo[h.Key] = 0
		} else {
			upTo[h.Key] = h.Seq
		}
	}
	return func(yield func(record.Verified, error) bool) {
		for _, n := range m.set.order {
			if n.seq <= upTo[n.key] && m.set.forks[n.line] == 0 {
				continue
			}
			if err := ctx.Err(); err != nil {
				yield(record.Verified{}, context.Cause(ctx))
				return
			}
			if !yield(n.Verified, nil) {
				return
			}
		}
	}
}

// Merge takes entries of others into the set. An entry that names one which is neither held nor in the batch is left out and
// comes again with a later meeting, so the set never has gaps.
func (b *Book) Merge(_ context.Context, entries []record.Verified) (Changes, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	var c Changes
	fresh := make([]record.Verified, 0, len(entries))
	taken := make(map[record.ID]bool, len(entries))
	has := func(id record.ID) bool { return taken[id] || b.held[id] }
	for _, v := range entries {
		e := v.Entry()
		switch {
		case has(v.ID()):
			c.Held++
			continue
		case e.Seq > 1 && !has(e.Prev), slices.ContainsFunc(e.Seen, func(id record.ID) bool { return !has(id) }):
			c.Waiting++
			continue
		}
		taken[v.ID()] = true
		fresh = append(fresh, v)
		c.Added = append(c.Added, v.ID())
	}
	if len(fresh) == 0 {
		return c, nil
	}
	return c, b.add(fresh, true)
}

// add stores entries and takes them into the set. The caller holds mu, or is the only one to know b.
func (b *Book) add(vs []record.Verified, sync bool) error {
	if err := b.store.Append(vs, sync); err != nil {
		return fmt.Errorf("store %d entries: %w", len(vs), err)
	}
	b.take(vs...)
	b.meaning = nil
	return nil
}

func (b *Book) take(vs ...record.Verified) {
	b.entries = append(b.entries, vs...)
	for _, v := range vs {
		b.held[v.ID()] = true
	}
}

// Draft is an entry before it is signed.
type Draft struct {
	Kind  record.Kind
	Body  any
	Shown *record.Shown // what the signer was shown, for readings and charges
	At    time.Time     // signing time; zero for now
}

// Author signs a draft with the key, and returns when it is on the disk. A draft that would be set aside is refused with a
// *RefusedError and leaves no trace.
func (b *Book) Author(key ed25519.PrivateKey, d Draft) (record.Verified, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	at := d.At
	if at.IsZero() {
		at = b.now()
	}
	me := record.KeyID(key.Public().(ed25519.PublicKey))
	e := record.Entry{Seq: 1, Signed: recordTime(at), Clock: record.HLC{Wall: at.UnixMilli()}, Kind: d.Kind, Body: d.Body, Shown: d.Shown}
	own, s := -1, b.fold().set
	for _, h := range s.heads {
		n := s.byID[h.ID]
		if c := n.e.Clock; c.Wall > e.Clock.Wall || c.Wall == e.Clock.Wall && c.Count >= e.Clock.Count {
			e.Clock = record.HLC{Wall: c.Wall, Count: c.Count + 1}
		}
		if h.Key != me {
			continue
		}
		if own >= 0 {
			return record.Verified{}, &RefusedError{"this key's line is forked: a lead must retire it before anything else is signed"}
		}
		own, e.Seq, e.Prev = n.line, h.Seq+1, h.ID
	}
	for _, h := range s.heads {
		n := s.byID[h.ID]
		if n.line != own && (own < 0 || !s.byID[e.Prev].hasSeen(n)) {
			e.Seen = append(e.Seen, h.ID)
		}
	}
	slices.SortFunc(e.Seen, func(x, y record.ID) int { return slices.Compare(x[:], y[:]) })
	v, err := record.Sign(key, b.id, e)
	if err != nil {
		return record.Verified{}, err
	}
	next := Fold(b.id, append(slices.Clone(b.entries), v))
	if why := next.Item(v.ID()).SetAside; why != "" {
		return record.Verified{}, &RefusedError{why}
	}
	if err := b.store.Append([]record.Verified{v}, true); err != nil {
		return record.Verified{}, fmt.Errorf("store the entry: %w", err)
	}
	b.take(v)
	b.meaning = next
	return v, nil
}

// Views returns the derived views whose names begin with prefix. They are what some package computed from the entries and kept;
// they may be missing, of another version, or of other entries, and are never trusted without a look at that.
func (b *Book) Views(prefix string) (map[string][]byte, error) {
	views := map[string][]byte{}
	err := b.store.Views(prefix, func(name string, data []byte) error {
		views[name] = slices.Clone(data)
		return nil
	})
	return views, err
}

// SetViews replaces derived views, a view of no bytes by none; not all at once.
func (b *Book) SetViews(views map[string][]byte) error { return b.store.SetViews(views) }

// DropViews throws all derived views away; entries are not touched.
func (b *Book) DropViews() error { return b.store.DropViews() }

// recordTime keeps the offset, so that a reader sees the hour on the signer's wall.
func recordTime(t time.Time) record.Time {
	_, off := t.Zone()
	return record.Time{Unix: t.Unix(), OffsetMin: off / 60}
}

// Inspect reads a book's entries without changing them, for an audit: what does not verify is handed to bad with its place
// in the log, and the walk goes on. The error is ErrBusy, ErrDamaged when the store itself cannot be read to its end (with
// what could be read), or ErrNoBook.
func Inspect(dir string, id record.BookID, bad func(where string, err error)) (*Meaning, error) {
	if _, err := os.Stat(dir); err != nil {
		return nil, fmt.Errorf("%w: %w", ErrNoBook, err)
	}
	st, changed, err := store.Inspect(dir)
	if err != nil {
		return nil, err
	}
	var entries []record.Verified
	at := 0
	err = st.Each(func(raw []byte) error {
		at++
		v, err := record.Verify(slices.Clone(raw), id)
		if err != nil {
			bad(fmt.Sprintf("entry %d of the log", at), err)
			return nil
		}
		entries = append(entries, v)
		return nil
	})
	return Fold(id, entries), errors.Join(changed, err, st.Close())
}

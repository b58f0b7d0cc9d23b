// Package store keeps verified entries and derived views of one book in Badger. It is the only importer of Badger, and
// takes nothing but record.Verified, which only record.Verify and record.Sign can make and record.Restore makes again.
//
// # Keys
//
//	e <key:32> <seq:8> <sum:32>  one entry's bytes as received, in line order (two at one seq are a fork); sum is their SHA-256
//	v <name>                     a derived view; may be thrown away and rebuilt from the entries alone
//
// The sum says what was verified before it was stored, so that Load need not verify a signature again and still notices any
// change. A row that an older version wrote has the first 8 bytes of the id instead: Load verifies it in full.
//
// Badger itself holds a number for this layout, see magic. An entry is reported as signed only after Append returned with sync
// true: its bytes have then been synced to the disk. Merged batches are written without a sync each and synced once at the end of
// the batch. After a kill or a power cut Badger replays its own log at the next open; nothing that was synced is lost.
package store

import (
	"bytes"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"os"
	"runtime"
	"strings"
	"syscall"

	"github.com/dgraph-io/badger/v4"
	"github.com/dgraph-io/badger/v4/options"
	"golang.org/x/sync/errgroup"

	"example.org/chargehand/ledger/record"
)

// Errors a caller decides on.
var (
	ErrBusy    = errors.New("another process holds this book")
	ErrDamaged = errors.New("the store is damaged")
	ErrFull    = errors.New("no space is left on the disk")
)

// magic is refused by Badger at open when it differs: the layout of the keys above.
const magic = 1

// Store is an open store. Its methods may be called from several goroutines.
type Store struct {
	db  *badger.DB
	dir string
}

// Open opens the store in dir, and makes it when it is not there. Errors: ErrBusy, ErrDamaged, ErrFull.
func Open(dir string) (*Store, error) {
	s, changed, err := open(dir, false)
	return s, errors.Join(err, changed)
}

// Inspect opens a store to read it although its tables were changed since they were written, and says so in changed. What
// Open cannot open at all Inspect cannot either.
func Inspect(dir string) (s *Store, changed, err error) { return open(dir, true) }

func open(dir string, inspect bool) (s *Store, changed, err error) {
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return nil, nil, translate(err)
	}
	o := badger.DefaultOptions(dir).
		WithLogger(nil).
		WithMetricsEnabled(false).
		WithDetectConflicts(false).
		WithExternalMagic(magic).
		// Badger's defaults reserve 2.3 GB of sparse files. These suit a laptop: see DEVELOPERS.md for the figures.
		WithMemTableSize(8 << 20).
		WithNumMemtables(2).
		WithValueLogFileSize(16 << 20).
		WithValueThreshold(1 << 18). // an entry is at most 16 KiB: all values stay in the tables
		WithBlockCacheSize(4 << 20).
		WithIndexCacheSize(0).
		WithNumCompactors(2).
		WithNumLevelZeroTables(2).
		WithNumLevelZeroTablesStall(4).
		WithCompression(options.Snappy)
	if err := room(dir, 0); err != nil {
		return nil, nil, err
	}
	if inspect {
		o = o.WithNumCompactors(0) // which would write what was changed as if it had always been so
	}
	changed, err = sound(dir, o)
	if err != nil || changed != nil { // or another process that holds the store changed its files between two reads
		changed, err = sound(dir, o)
	}
	if err != nil || changed != nil && !inspect {
		return nil, changed, translate(err)
	}
	db, err := badger.Open(o)
	if err != nil {
		return nil, changed, whole(dir, translate(err))
	}
	return &Store{db, dir}, changed, nil
}

// Close syncs and closes the store, and gives back the space that Badger reserved ahead for its logs.
func (s *Store) Close() error { return translate(s.db.Close()) }

// translate is the one place that knows Badger's errors.
func translate(err error) error {
	switch {
	case err == nil || errors.Is(err, ErrDamaged) || errors.Is(err, ErrFull): // said by sound or room
		return err
	case errors.Is(err, syscall.ENOSPC), strings.Contains(err.Error(), "no space left"):
		return ErrFull
	case strings.Contains(err.Error(), "acquire directory lock"): // Badger exports no value for this
		return ErrBusy
	case errors.Is(err, badger.ErrTruncateNeeded), errors.Is(err, badger.ErrEncryptionKeyMismatch),
		strings.Contains(err.Error(), "checksum"), strings.Contains(err.Error(), "magic"),
		strings.Contains(err.Error(), "MANIFEST"), strings.Contains(err.Error(), "manifest"):
		return damage(err)
	}
	return err
}

func entryKey(v record.Verified) []byte {
	k, sum := v.Key(), sha256.Sum256(v.Raw())
	b := make([]byte, 0, entryKeySize)
	b = append(b, 'e')
	b = append(b, k[:]...)
	b = binary.BigEndian.AppendUint64(b, v.Entry().Seq)
	return append(b, sum[:]...)
}

const entryKeySize = 1 + 32 + 8 + sha256.Size

// A transaction of Badger takes up to 15 % of the memtable; these stay well inside it.
const (
	txnEntries = 1000
	txnBytes   = 512 << 10
)

// Append writes the entries. With sync it returns only when they are on the disk. Entries held already are written over
// with the same bytes.
func (s *Store) Append(entries []record.Verified, sync bool) error {
	for len(entries) > 0 {
		if err := room(s.dir, txnBytes); err != nil {
			return err
		}
		n, size := 0, 0
		t := s.db.NewTransaction(true)
		for ; n < len(entries) && n < txnEntries && size < txnBytes; n++ {
			v := entries[n]
			k := entryKey(v)
			raw := v.Raw()
			size += len(raw)
			if err := t.Set(k, raw); err != nil {
				t.Discard()
				return translate(err)
			}
		}
		if err := t.Commit(); err != nil {
			return translate(err)
		}
		entries = entries[n:]
	}
	if sync {
		return translate(s.db.Sync())
	}
	return nil
}

// Load returns every entry, line by line and each line by its sequence. The error is ErrDamaged when the bytes of one are not
// those that were verified.
func (s *Store) Load(book record.BookID) ([]record.Verified, error) {
	type row struct {
		raw []byte
		sum []byte // nil in a row of an older version
	}
	var rows []row
	err := s.scan("e", func(key, raw []byte) error {
		r := row{raw: bytes.Clone(raw)}
		if len(key) == entryKeySize {
			r.sum = bytes.Clone(key[entryKeySize-sha256.Size:])
		}
		rows = append(rows, r)
		return nil
	})
	if err != nil {
		return nil, err
	}
	out := make([]record.Verified, len(rows))
	var g errgroup.Group
	workers := runtime.GOMAXPROCS(0)
	for w := range workers {
		g.Go(func() (err error) {
			for i := w; i < len(rows); i += workers {
				if rows[i].sum == nil {
					out[i], err = record.Verify(rows[i].raw, book)
				} else {
					out[i], err = record.Restore(rows[i].raw, [sha256.Size]byte(rows[i].sum), book)
				}
				if err != nil {
					return fmt.Errorf("%w: entry %d of the log does not verify: %w", ErrDamaged, i+1, err)
				}
			}
			return nil
		})
	}
	return out, g.Wait()
}

// Each calls f with the bytes of every entry, line by line and each line by its sequence. The slice is f's only during the
// call. An error of f ends the walk and is returned.
func (s *Store) Each(f func(raw []byte) error) error {
	return s.scan("e", func(_, raw []byte) error { return f(raw) })
}

func (s *Store) scan(prefix string, f func(key, value []byte) error) error {
	return translate(s.db.View(func(t *badger.Txn) error {
		it := t.NewIterator(badger.IteratorOptions{Prefix: []byte(prefix), PrefetchValues: true, PrefetchSize: 100})
		defer it.Close()
		for it.Rewind(); it.Valid(); it.Next() {
			if err := it.Item().Value(func(value []byte) error { return f(it.Item().Key(), value) }); err != nil {
				return err
			}
		}
		return nil
	}))
}

// Views calls f with each derived view whose name begins with prefix. The slice is f's only during the call.
func (s *Store) Views(prefix string, f func(name string, data []byte) error) error {
	return s.scan("v"+prefix, func(key, data []byte) error { return f(string(key[1:]), data) })
}

// SetViews replaces derived views, a view of no bytes by none. Not all at once: whoever needs to know that all are there writes a
// last one that says so.
func (s *Store) SetViews(views map[string][]byte) error {
	w := s.db.NewWriteBatch()
	defer w.Cancel()
	for name, data := range views {
		var err error
		if len(data) == 0 {
			err = w.Delete([]byte("v" + name))
		} else {
			err = w.Set([]byte("v"+name), data)
		}
		if err != nil {
			return translate(err)
		}
	}
	return translate(w.Flush())
}

// DropViews throws all derived views away. Entries are not touched.
func (s *Store) DropViews() error { return translate(s.db.DropPrefix([]byte("v"))) }

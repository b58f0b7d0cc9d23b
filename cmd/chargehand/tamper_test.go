package main

import (
	"bytes"
	"context"
	"encoding/binary"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/dgraph-io/badger/v4"
	"github.com/rogpeppe/go-internal/testscript"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/audit"
	"example.org/chargehand/ledger/keys"
	"example.org/chargehand/ledger/record"
)

// What somebody could do to a book who has the files and their own tools, as commands of the scripts. None is in the product.
var tampering = map[string]func(*testscript.TestScript, bool, []string){
	"flip":       flip,
	"cut":        cut,
	"forge":      forge,
	"redate":     redate,
	"takeout":    takeOut,
	"flipstored": flipStored,
}

func oneFile(ts *testscript.TestScript, pattern string) string {
	names, err := filepath.Glob(ts.MkAbs(pattern))
	ts.Check(err)
	if len(names) == 0 {
		ts.Fatalf("no file %s", pattern)
	}
	return names[len(names)-1]
}

func change(ts *testscript.TestScript, name string, how func([]byte) []byte) {
	data, err := os.ReadFile(name)
	ts.Check(err)
	ts.Check(os.WriteFile(name, how(data), 0o600))
}

// flip PATTERN AT flips one bit of the last file that matches, at that byte, or from the end when AT is below zero.
func flip(ts *testscript.TestScript, _ bool, args []string) {
	at, err := strconv.Atoi(args[1])
	ts.Check(err)
	change(ts, oneFile(ts, args[0]), func(data []byte) []byte {
		if at < 0 {
			at += len(data)
		}
		data[at] ^= 4
		return data
	})
}

// cut PATTERN N keeps the first N bytes of the last file that matches.
func cut(ts *testscript.TestScript, _ bool, args []string) {
	n, err := strconv.Atoi(args[1])
	ts.Check(err)
	change(ts, oneFile(ts, args[0]), func(data []byte) []byte { return data[:n] })
}

// forge HOW KEYBOOK COPY TO signs a reading with the key of KEYBOOK, the newest reading of COPY again, and puts it into TO, a
// book or a copy of one. HOW: next adds it to the key's line, with a right clock; backdated the same a day before its past;
// again takes the number and place of the line's newest entry, a day before.
func forge(ts *testscript.TestScript, _ bool, args []string) {
	if len(args) != 4 {
		ts.Fatalf("usage: forge how keybook copy to")
	}
	m, _, err := audit.ReadFolder(os.DirFS(ts.MkAbs(args[2])))
	ts.Check(err)
	key, err := keys.Open(ts.MkAbs(filepath.Join(args[1], "key")), []byte("cold nitrogen night"))
	ts.Check(err)
	var like record.Entry
	for _, it := range m.Entries {
		if it.Entry().Kind == record.KindReading {
			like = it.Entry()
		}
	}
	newest := m.Entries[len(m.Entries)-1].Entry()
	e := record.Entry{Seq: 1, Kind: like.Kind, Body: like.Body, Shown: like.Shown, Signed: newest.Signed, Clock: newest.Clock}
	e.Clock.Count++
	for _, h := range m.Frontier() {
		switch {
		case h.Key != publicOf(key):
			e.Seen = append(e.Seen, h.ID)
		case args[0] == "again":
			own := m.Item(h.ID).Entry()
			e.Seq, e.Prev = own.Seq, own.Prev
		default:
			e.Seq, e.Prev = h.Seq+1, h.ID
		}
	}
	if args[0] != "next" {
		e.Signed.Unix -= 24 * 60 * 60
	}
	slices.SortFunc(e.Seen, func(a, b record.ID) int { return bytes.Compare(a[:], b[:]) })
	v, err := record.Sign(key, m.Book, e)
	ts.Check(err)
	to := ts.MkAbs(args[3])
	if _, err := os.Stat(filepath.Join(to, "store")); err != nil {
		ts.Check(os.WriteFile(filepath.Join(to, entryFile(v)), v.Raw(), 0o600))
		return
	}
	b, err := ledger.Open(filepath.Join(to, "store"), m.Book, time.Now)
	ts.Check(err)
	c, err := b.Merge(context.Background(), []record.Verified{v})
	ts.Check(err)
	ts.Check(b.Close())
	if len(c.Added) != 1 {
		ts.Fatalf("the forged entry was not taken in: %+v", c)
	}
}

// newestIn returns the entry of the greatest clock in a copy.
func newestIn(ts *testscript.TestScript, copied string) record.Verified {
	m, _, err := audit.ReadFolder(os.DirFS(ts.MkAbs(copied)))
	ts.Check(err)
	return m.Entries[len(m.Entries)-1].Verified
}

// redated returns an entry's bytes with a date of a day before, and the signature as it was.
func redated(ts *testscript.TestScript, v record.Verified) []byte {
	at := func(unix int64) []byte { return binary.BigEndian.AppendUint32([]byte{0x1a}, uint32(unix)) } // CBOR: an integer of 4 bytes
	signed := v.Entry().Signed.Unix
	if bytes.Count(v.Raw(), at(signed)) == 0 {
		ts.Fatalf("the date is not found")
	}
	return bytes.Replace(v.Raw(), at(signed), at(signed-24*60*60), 1)
}

// redate COPY TO changes the date of the newest entry of COPY: in TO's file, or in TO's store.
func redate(ts *testscript.TestScript, _ bool, args []string) {
	v := newestIn(ts, args[0])
	to := ts.MkAbs(args[1])
	if _, err := os.Stat(filepath.Join(to, "store")); err != nil {
		ts.Check(os.WriteFile(filepath.Join(to, entryFile(v)), redated(ts, v), 0o600))
		return
	}
	inStore(ts, to, v, func(t *badger.Txn, key []byte) error { return t.Set(key, redated(ts, v)) })
}

// takeout COPY N TO takes the Nth entry of COPY in display order out of TO, a book, and leaves no trace in its store.
func takeOut(ts *testscript.TestScript, _ bool, args []string) {
	m, _, err := audit.ReadFolder(os.DirFS(ts.MkAbs(args[0])))
	ts.Check(err)
	n, err := strconv.Atoi(args[1])
	ts.Check(err)
	inStore(ts, ts.MkAbs(args[2]), m.Entries[n-1].Verified, func(t *badger.Txn, key []byte) error { return t.Delete(key) })
}

// inStore changes one entry with Badger itself, behind the back of our store.
func inStore(ts *testscript.TestScript, book string, v record.Verified, how func(t *badger.Txn, key []byte) error) {
	db, err := badger.Open(badger.DefaultOptions(filepath.Join(book, "store")).WithLogger(nil).WithExternalMagic(1).WithMemTableSize(8 << 20).WithValueLogFileSize(16 << 20).WithValueThreshold(1 << 18))
	ts.Check(err)
	found := false
	ts.Check(db.Update(func(t *badger.Txn) error {
		it := t.NewIterator(badger.IteratorOptions{Prefix: []byte("e")})
		defer it.Close()
		for it.Rewind(); it.Valid() && !found; it.Next() {
			raw, err := it.Item().ValueCopy(nil)
			if err != nil {
				return err
			}
			if bytes.Equal(raw, v.Raw()) {
				found = true
				return how(t, it.Item().KeyCopy(nil))
			}
		}
		return nil
	}))
	ts.Check(db.Close())
	if !found {
		ts.Fatalf("entry %s is not in the store", v.ID().Short())
	}
}

// flipstored COPY BOOK flips one bit in the signature of the newest entry of COPY where BOOK's store holds it.
func flipStored(ts *testscript.TestScript, _ bool, args []string) {
	raw := newestIn(ts, args[0]).Raw()
	tables, err := filepath.Glob(ts.MkAbs(filepath.Join(args[1], "store", "*.sst")))
	ts.Check(err)
	var names []string
	for _, name := range tables {
		data, err := os.ReadFile(name)
		ts.Check(err)
		if at := bytes.Index(data, raw[len(raw)-40:]); at >= 0 { // a signature does not compress, so it stands there as it is
			data[at] ^= 4
			ts.Check(os.WriteFile(name, data, 0o600))
			return
		}
		names = append(names, filepath.Base(name))
	}
	ts.Fatalf("the entry's signature is in none of %s", strings.Join(names, ", "))
}

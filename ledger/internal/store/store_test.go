package store

import (
	"bytes"
	"crypto/ed25519"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"github.com/dgraph-io/badger/v4"
	"github.com/google/go-cmp/cmp"

	"example.org/chargehand/ledger/record"
)

// line is a founding entry and n that follow it.
func line(t *testing.T, n int) (record.BookID, []record.Verified) {
	t.Helper()
	key := ed25519.NewKeyFromSeed(make([]byte, 32))
	e := record.Entry{Seq: 1, Signed: record.Time{Unix: 1930000000}, Kind: record.KindFounding,
		Body: record.Founding{Title: "Dry Creek", Name: "Lead", Roles: []record.Role{record.RoleLead}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}}
	var book record.BookID
	var all []record.Verified
	for {
		v, err := record.Sign(key, book, e)
		if err != nil {
			t.Fatal(err)
		}
		if all = append(all, v); len(all) > n {
			return book, all
		}
		book = record.BookID(all[0].ID())
		e = record.Entry{Seq: e.Seq + 1, Prev: v.ID(), Signed: e.Signed, Kind: record.KindUnitRegistered, Body: record.UnitRegistered{Part: "HA-40", Serial: fmt.Sprint(len(all))}}
	}
}

func opened(t *testing.T, dir string) *Store {
	t.Helper()
	s, err := Open(dir)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.Close() })
	return s
}

func raws(vs []record.Verified) (out [][]byte) {
	for _, v := range vs {
		out = append(out, v.Raw())
	}
	return out
}

// holds checks that a store gives exactly these entries, in the order of their line, verified before or not.
func holds(t *testing.T, s *Store, book record.BookID, want []record.Verified) {
	t.Helper()
	got, err := s.Load(book)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(raws(got), raws(want)); diff != "" {
		t.Fatalf("loaded (-got +want):\n%s", diff)
	}
	var each [][]byte
	if err := s.Each(func(raw []byte) error { each = append(each, bytes.Clone(raw)); return nil }); err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(each, raws(want)); diff != "" {
		t.Fatalf("each (-got +want):\n%s", diff)
	}
}

// More entries than one transaction takes, in pieces, out of order and twice: each is there once, now and after a reopening.
func TestAppendAndReopen(t *testing.T) {
	dir := t.TempDir()
	book, all := line(t, txnEntries+200)
	s := opened(t, dir)
	holds(t, s, book, nil)
	for i, part := range [][]record.Verified{all[700:], all[:10], all[5:700], all, all[3:4]} {
		if err := s.Append(part, i%2 == 0); err != nil {
			t.Fatal(err)
		}
	}
	holds(t, s, book, all)
	for range 2 {
		if err := s.Close(); err != nil {
			t.Fatal(err)
		}
		s = opened(t, dir)
		holds(t, s, book, all)
	}
}

func TestEachEndsWithTheFirstError(t *testing.T) {
	s := opened(t, t.TempDir())
	_, all := line(t, 3)
	if err := s.Append(all, true); err != nil {
		t.Fatal(err)
	}
	enough, n := errors.New("enough"), 0
	if err := s.Each(func([]byte) error { n++; return enough }); !errors.Is(err, enough) || n != 1 {
		t.Errorf("%v after %d entries, want the caller's error after 1", err, n)
	}
}

func TestOneAtATime(t *testing.T) {
	dir := t.TempDir()
	book, all := line(t, 2)
	s := opened(t, dir)
	if err := s.Append(all, true); err != nil {
		t.Fatal(err)
	}
	if _, err := Open(dir); !errors.Is(err, ErrBusy) {
		t.Fatalf("second opener: %v, want ErrBusy", err)
	}
	holds(t, s, book, all) // the first is not disturbed
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	holds(t, opened(t, dir), book, all)
}

func viewsOf(t *testing.T, s *Store, prefix string) map[string]string {
	t.Helper()
	got := map[string]string{}
	if err := s.Views(prefix, func(name string, data []byte) error { got[name] = string(data); return nil }); err != nil {
		t.Fatal(err)
	}
	return got
}

func TestViewsAreApartFromEntries(t *testing.T) {
	dir := t.TempDir()
	book, all := line(t, 5)
	s := opened(t, dir)
	err := errors.Join(s.Append(all, true),
		s.SetViews(map[string][]byte{"a/1": []byte("one"), "a/2": []byte("two"), "b": []byte("three")}),
		s.SetViews(map[string][]byte{"a/1": nil, "a/2": []byte("2"), "none": {}}), s.Close())
	if err != nil {
		t.Fatal(err)
	}
	s = opened(t, dir)
	if diff := cmp.Diff(viewsOf(t, s, ""), map[string]string{"a/2": "2", "b": "three"}); diff != "" {
		t.Errorf("all views (-got +want):\n%s", diff)
	}
	if diff := cmp.Diff(viewsOf(t, s, "a/"), map[string]string{"a/2": "2"}); diff != "" {
		t.Errorf("views a/ (-got +want):\n%s", diff)
	}
	holds(t, s, book, all)
	if err := errors.Join(s.DropViews(), s.Close()); err != nil {
		t.Fatal(err)
	}
	s = opened(t, dir)
	if got := viewsOf(t, s, ""); len(got) > 0 {
		t.Errorf("dropped, and still there: %v", got)
	}
	holds(t, s, book, all)
}

// change rewrites rows with Badger itself, which makes checksums that fit.
func change(t *testing.T, s *Store, v record.Verified, how func(txn *badger.Txn, key []byte) error) {
	t.Helper()
	if err := s.db.Update(func(txn *badger.Txn) error { return how(txn, entryKey(v)) }); err != nil {
		t.Fatal(err)
	}
}

// Each bit of a row counts, of the entry, its signature and its sum, also where Badger's own checksums fit.
func TestChangedRowsAreNoticed(t *testing.T) {
	s := opened(t, t.TempDir())
	book, all := line(t, 2)
	if err := s.Append(all, true); err != nil {
		t.Fatal(err)
	}
	damaged := func(how string) {
		t.Helper()
		if _, err := s.Load(book); !errors.Is(err, ErrDamaged) {
			t.Errorf("%s: %v, want ErrDamaged", how, err)
		}
	}
	v := all[1]
	for at := range v.Raw() {
		flipped := bytes.Clone(v.Raw())
		flipped[at] ^= 1 << (at % 8)
		change(t, s, v, func(txn *badger.Txn, key []byte) error { return txn.Set(key, flipped) })
		damaged(fmt.Sprintf("bit flipped in byte %d of the entry", at))
	}
	change(t, s, v, func(txn *badger.Txn, key []byte) error { return txn.Set(key, v.Raw()) })
	holds(t, s, book, all)
	for at := entryKeySize - 32; at < entryKeySize; at++ {
		var other []byte
		change(t, s, v, func(txn *badger.Txn, key []byte) error {
			other = bytes.Clone(key)
			other[at] ^= 1
			return errors.Join(txn.Delete(key), txn.Set(other, v.Raw()))
		})
		damaged(fmt.Sprintf("bit flipped in byte %d of the key", at))
		change(t, s, v, func(txn *badger.Txn, key []byte) error {
			return errors.Join(txn.Delete(other), txn.Set(key, v.Raw()))
		})
	}
	holds(t, s, book, all)
}

// Rows of an older version have no sum: their signatures are verified.
func TestRowsWithoutASum(t *testing.T) {
	s := opened(t, t.TempDir())
	book, all := line(t, 4)
	if err := s.Append(all, true); err != nil {
		t.Fatal(err)
	}
	old := func(v record.Verified, raw []byte) {
		change(t, s, v, func(txn *badger.Txn, key []byte) error {
			id := v.ID()
			return errors.Join(txn.Delete(key), txn.Set(append(key[:entryKeySize-32:entryKeySize-32], id[:8]...), raw))
		})
	}
	for _, v := range all[:3] {
		old(v, v.Raw())
	}
	holds(t, s, book, all)
	forged := bytes.Clone(all[1].Raw())
	forged[len(forged)-1] ^= 1
	old(all[1], forged)
	if _, err := s.Load(book); !errors.Is(err, ErrDamaged) || !errors.Is(err, record.ErrSignature) {
		t.Errorf("another signature: %v, want ErrDamaged and ErrSignature", err)
	}
}

// The files that hold no entries after a close: with a bit flipped the store opens with all entries, or says that it is damaged.
func TestDamagedSideFiles(t *testing.T) {
	whole := t.TempDir()
	book, all := line(t, 3)
	s := opened(t, whole)
	if err := errors.Join(s.Append(all, true), s.Close()); err != nil {
		t.Fatal(err)
	}
	files, err := os.ReadDir(whole)
	if err != nil {
		t.Fatal(err)
	}
	tried := 0
	for _, f := range files {
		if !slices.Contains([]string{".vlog", ""}, filepath.Ext(f.Name())) || f.Name() == "MANIFEST" || f.Name() == "KEYREGISTRY" {
			continue // TestDamagedFiles has them
		}
		data, err := os.ReadFile(filepath.Join(whole, f.Name()))
		if err != nil {
			t.Fatal(err)
		}
		for at := 0; at < min(len(data), 48); at++ { // DISCARD is a megabyte of zeros after its first slots of 16 bytes
			dir := t.TempDir()
			if err := os.CopyFS(dir, os.DirFS(whole)); err != nil {
				t.Fatal(err)
			}
			flipped := bytes.Clone(data)
			flipped[at] ^= 1 << (at % 8)
			if err := os.WriteFile(filepath.Join(dir, f.Name()), flipped, 0o600); err != nil {
				t.Fatal(err)
			}
			tried++
			s, err := Open(dir)
			if errors.Is(err, ErrDamaged) {
				continue
			} else if err != nil {
				t.Errorf("%s, bit flipped in byte %d: %v, want ErrDamaged", f.Name(), at, err)
				continue
			}
			holds(t, s, book, all)
			if err := s.Close(); err != nil {
				t.Errorf("%s, bit flipped in byte %d, at close: %v", f.Name(), at, err)
			}
		}
	}
	if tried < 48 {
		t.Errorf("only %d bytes tried", tried)
	}
}

// 5 MB is this project's bar for an empty book's folder. The disk's blocks count as well as the sizes: a sparse file has few of
// the first, and a copy may fill it.
func TestEmptyStoreIsSmall(t *testing.T) {
	dir := t.TempDir()
	s := opened(t, dir)
	_, all := line(t, 0)
	if err := errors.Join(s.Append(all, true), s.Close()); err != nil {
		t.Fatal(err)
	}
	var size, onDisk int64
	err := filepath.WalkDir(dir, func(_ string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		info, err := d.Info()
		if err != nil {
			return err
		}
		size += info.Size()
		onDisk += blocks(info)
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%d bytes, %d on the disk", size, onDisk)
	if size == 0 || size > 5<<20 || onDisk > 5<<20 {
		t.Errorf("an empty store has %d bytes, %d on the disk; want under 5 MB", size, onDisk)
	}
}

package store

import (
	"crypto/ed25519"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"testing"

	"example.org/chargehand/ledger/record"
)

// closedStore makes a store of two tables and closes it.
func closedStore(t *testing.T, dir string) (book record.BookID, entries int) {
	t.Helper()
	key := ed25519.NewKeyFromSeed(make([]byte, 32))
	e := record.Entry{Seq: 1, Signed: record.Time{Unix: 1930000000}, Kind: record.KindFounding,
		Body: record.Founding{Title: "Dry Creek", Name: "Lead", Roles: []record.Role{record.RoleLead}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}}
	v, err := record.Sign(key, book, e)
	if err != nil {
		t.Fatal(err)
	}
	book = record.BookID(v.ID())
	for i := range 2 {
		s, err := Open(dir)
		if err != nil {
			t.Fatal(err)
		}
		if err := errors.Join(s.Append([]record.Verified{v}, true), s.Close()); err != nil {
			t.Fatal(err)
		}
		e = record.Entry{Seq: uint64(i + 2), Prev: v.ID(), Signed: e.Signed, Kind: record.KindUnitRegistered, Body: record.UnitRegistered{Part: "HA-40", Serial: fmt.Sprint(i)}}
		if v, err = record.Sign(key, book, e); err != nil {
			t.Fatal(err)
		}
	}
	return book, 2
}

// readAll opens the store and returns how many entries it gave that verify.
func readAll(dir string, book record.BookID) (n int, err error) {
	s, err := Open(dir)
	if err != nil {
		return 0, err
	}
	err = s.Each(func(raw []byte) error {
		if _, err := record.Verify(append([]byte(nil), raw...), book); err == nil {
			n++
		}
		return nil
	})
	return n, errors.Join(err, s.Close())
}

// One flipped bit, or an end cut off, anywhere in the files that hold entries or name them: an error that says so, or
// all entries; never a panic, and never a table less.
func TestDamagedFiles(t *testing.T) {
	whole := t.TempDir()
	book, entries := closedStore(t, whole)
	files, err := os.ReadDir(whole)
	if err != nil {
		t.Fatal(err)
	}
	for _, f := range files {
		if ext := filepath.Ext(f.Name()); ext != ".sst" && f.Name() != "MANIFEST" && f.Name() != "KEYREGISTRY" {
			continue
		}
		data, err := os.ReadFile(filepath.Join(whole, f.Name()))
		if err != nil {
			t.Fatal(err)
		}
		damage := map[string][]byte{"missing": nil, "empty": {}}
		for at := 0; at < len(data); at++ {
			flipped := append([]byte(nil), data...)
			flipped[at] ^= 1 << (at % 8)
			damage[fmt.Sprintf("bit flipped in byte %d", at)] = flipped
			damage[fmt.Sprintf("cut after byte %d", at)] = data[:at]
		}
		for how, bytes := range damage {
			dir := t.TempDir()
			if err := os.CopyFS(dir, os.DirFS(whole)); err != nil {
				t.Fatal(err)
			}
			path := filepath.Join(dir, f.Name())
			if bytes == nil {
				err = os.Remove(path)
			} else {
				err = os.WriteFile(path, bytes, 0o600)
			}
			if err != nil {
				t.Fatal(err)
			}
			n, err := readAll(dir, book)
			if err == nil && n < entries {
				t.Errorf("%s %s: %d entries of %d and no error", f.Name(), how, n, entries)
			}
			if err != nil && !errors.Is(err, ErrDamaged) {
				t.Errorf("%s %s: %v, want ErrDamaged", f.Name(), how, err)
			}
			if left, _ := filepath.Glob(filepath.Join(dir, "*.sst")); err != nil && bytes != nil && len(left) != entries {
				t.Errorf("%s %s: %d tables are left", f.Name(), how, len(left))
			}
		}
		t.Logf("%s: %d kinds of damage", f.Name(), len(damage))
	}
}

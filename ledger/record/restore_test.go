package record_test

import (
	"bytes"
	"crypto/ed25519"
	"crypto/sha256"
	"errors"
	"testing"

	"github.com/google/go-cmp/cmp"

	"example.org/chargehand/ledger/record"
)

// What was verified comes back as it was; with one bit of it changed, signature included, or under another hash or book, it does not.
func TestRestore(t *testing.T) {
	key := ed25519.NewKeyFromSeed(make([]byte, 32))
	sign := func(book record.BookID, e record.Entry) record.Verified {
		t.Helper()
		v, err := record.Sign(key, book, e)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	founding := sign(record.BookID{}, record.Entry{Seq: 1, Signed: record.Time{Unix: 1930000000}, Kind: record.KindFounding,
		Body: record.Founding{Title: "Dry Creek", Name: "Lead", Roles: []record.Role{record.RoleLead}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}})
	book := record.BookID(founding.ID())
	unit := sign(book, record.Entry{Seq: 2, Prev: founding.ID(), Signed: record.Time{Unix: 1930000060}, Kind: record.KindUnitRegistered, Body: record.UnitRegistered{Part: "HA-40", Serial: "104"}})
	for _, v := range []record.Verified{founding, unit, sign(book, record.Entry{Seq: 3, Prev: unit.ID(), Signed: record.Time{Unix: 1930000120}, Kind: "later kind", Body: record.Unknown{Raw: []byte{0xa1, 1, 2}}})} {
		sum := sha256.Sum256(v.Raw())
		got, err := record.Restore(v.Raw(), sum, book)
		if err != nil {
			t.Fatalf("%s: %v", v.Entry().Kind, err)
		}
		if got.ID() != v.ID() || got.Key() != v.Key() || !bytes.Equal(got.Raw(), v.Raw()) {
			t.Errorf("%s: restored as entry %s of key %s, want %s of %s", v.Entry().Kind, got.ID(), got.Key(), v.ID(), v.Key())
		}
		if diff := cmp.Diff(got.Entry(), v.Entry()); diff != "" {
			t.Errorf("%s (-got +want):\n%s", v.Entry().Kind, diff)
		}
		for at := range v.Raw() {
			flipped := bytes.Clone(v.Raw())
			flipped[at] ^= 1 << (at % 8)
			if _, err := record.Restore(flipped, sum, book); !errors.Is(err, record.ErrChanged) {
				t.Fatalf("%s, byte %d flipped: %v, want ErrChanged", v.Entry().Kind, at, err)
			}
		}
		sum[7] ^= 1
		if _, err := record.Restore(v.Raw(), sum, book); !errors.Is(err, record.ErrChanged) {
			t.Errorf("%s under another hash: %v, want ErrChanged", v.Entry().Kind, err)
		}
	}
	if _, err := record.Restore(founding.Raw(), sha256.Sum256(founding.Raw()), record.BookID{1}); !errors.Is(err, record.ErrWrongBook) {
		t.Errorf("in another book: %v, want ErrWrongBook", err)
	}
	if _, err := record.Restore([]byte{0xd2, 0x84}, sha256.Sum256([]byte{0xd2, 0x84}), book); !errors.Is(err, record.ErrMalformed) {
		t.Errorf("half an entry: %v, want ErrMalformed", err)
	}
}

package record

import (
	"bytes"
	"encoding/hex"
	"fmt"
)

// ID names an entry: SHA-256 of what its signature covers, so that a re-encoded signature is no second entry.
type ID [32]byte

// BookID names a book: the ID of its founding entry, which commits to the founder's key and all that was founded.
type BookID [32]byte

// KeyID is an Ed25519 public key itself, so that checking a signature needs nothing but the entry and the book's id.
type KeyID [32]byte

func (i ID) String() string     { return hex.EncodeToString(i[:]) }
func (i BookID) String() string { return hex.EncodeToString(i[:]) }
func (i KeyID) String() string  { return hex.EncodeToString(i[:]) }

// Short returns the first 8 hexadecimal digits, for people.
func (i ID) Short() string { return hex.EncodeToString(i[:4]) }

// Short returns the first 8 hexadecimal digits, for people.
func (i BookID) Short() string { return hex.EncodeToString(i[:4]) }

// Short returns the first 8 hexadecimal digits, for people.
func (i KeyID) Short() string { return hex.EncodeToString(i[:4]) }

func parse32(s string) (out [32]byte, err error) {
	b, err := hex.DecodeString(s)
	if err != nil || len(b) != 32 {
		return out, fmt.Errorf("%q is not 64 hexadecimal digits", s)
	}
	return [32]byte(b), nil
}

// ParseID reads 64 hexadecimal digits.
func ParseID(s string) (ID, error) { b, err := parse32(s); return ID(b), err }

// ParseBookID reads 64 hexadecimal digits.
func ParseBookID(s string) (BookID, error) { b, err := parse32(s); return BookID(b), err }

// ParseKeyID reads 64 hexadecimal digits.
func ParseKeyID(s string) (KeyID, error) { b, err := parse32(s); return KeyID(b), err }

func compareID(a, b ID) int { return bytes.Compare(a[:], b[:]) }

package lan

import (
	"crypto/hkdf"
	"crypto/sha256"
	"encoding/base32"
	"fmt"
)

// Network is what the laptops of one book share: a key without which a connection yields only noise, and the name under which
// they find each other. Both come from one secret and tell nothing of it or of the book.
type Network struct {
	key     []byte
	service string
}

// BookNetwork is the network of a book, from the book's secret.
func BookNetwork(secret [32]byte) (Network, error) { return derive(secret, "book") }

// JoinNetwork is the network of one joining, from the tag of its one-time code. The tag must be stretched or long: whoever
// guesses it can connect, and then meets only the proof of the code.
func JoinNetwork(tag [32]byte) (Network, error) { return derive(tag, "join") }

// derive uses HKDF (RFC 5869) with SHA-256. The service name has 15 characters, the most that RFC 6763 section 7.2 allows.
func derive(secret [32]byte, purpose string) (Network, error) {
	key, err := hkdf.Key(sha256.New, secret[:], nil, "chargehand lan 1 key "+purpose, 32)
	if err != nil {
		return Network{}, fmt.Errorf("derive the network key: %w", err)
	}
	name, err := hkdf.Key(sha256.New, secret[:], nil, "chargehand lan 1 name "+purpose, 9)
	if err != nil {
		return Network{}, fmt.Errorf("derive the network name: %w", err)
	}
	// A letter first: some resolvers refuse names that begin with a digit.
	label := "c" + base32.NewEncoding("abcdefghijklmnopqrstuvwxyz234567").WithPadding(base32.NoPadding).EncodeToString(name)[:14]
	return Network{key, "_" + label + "._udp"}, nil
}

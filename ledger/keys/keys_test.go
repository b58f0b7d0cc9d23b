package keys

import (
	"bytes"
	"crypto/ed25519"
	"crypto/rand"
	"errors"
	"os"
	"path/filepath"
	"testing"

	"example.org/chargehand/ledger/record"
)

const quick = 4 // work factor

func TestKeyAtRest(t *testing.T) {
	path := filepath.Join(t.TempDir(), "key")
	key, err := Create(path, []byte("cold nitrogen"), quick, rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	if info, err := os.Stat(path); err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("mode %v, %v", info.Mode(), err)
	}
	data, err := os.ReadFile(path)
	if err != nil || bytes.Contains(data, key.Seed()) {
		t.Errorf("the seed stands in the file in clear, or %v", err)
	}
	if id, err := Peek(path); err != nil || id != record.KeyID(key.Public().(ed25519.PublicKey)) {
		t.Errorf("public key %v, %v", id, err)
	}
	if again, err := Open(path, []byte("cold nitrogen")); err != nil || !again.Equal(key) {
		t.Errorf("opened %v, %v", again, err)
	}
	for _, p := range []string{"", "cold Nitrogen", "cold nitrogen "} {
		if _, err := Open(path, []byte(p)); !errors.Is(err, ErrPassphrase) {
			t.Errorf("passphrase %q: %v", p, err)
		}
	}
	if _, err := Create(path, []byte("other"), quick, rand.Reader); !errors.Is(err, ErrExists) {
		t.Errorf("over a key: %v", err)
	}
	if left, _ := filepath.Glob(filepath.Join(filepath.Dir(path), ".new-*")); len(left) != 0 {
		t.Errorf("left behind: %v", left)
	}
	for i := range data {
		bad := bytes.Clone(data)
		bad[i] ^= 1
		other := filepath.Join(t.TempDir(), "key")
		if err := os.WriteFile(other, bad, 0o600); err != nil {
			t.Fatal(err)
		}
		if k, err := Open(other, []byte("cold nitrogen")); err == nil && !k.Equal(key) {
			t.Fatalf("byte %d altered: another key came out", i)
		}
	}
}

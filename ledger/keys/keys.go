// Package keys keeps a hand's Ed25519 key on one laptop: at rest under an age passphrase, in a file of mode 0600 whose first
// line shows the public key. The key never leaves the laptop.
package keys

import (
	"bufio"
	"bytes"
	"crypto/ed25519"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"filippo.io/age"

	"example.org/chargehand/ledger/record"
)

// Errors a caller decides on.
var (
	ErrPassphrase = errors.New("the passphrase is not the one of this key")
	ErrExists     = errors.New("there is a key already")
	ErrMalformed  = errors.New("the key file is damaged")
)

// WorkFactor is the base-2 logarithm of the rounds that a passphrase costs: about a second on a laptop.
const WorkFactor = 18

const head = "chargehand key 1 "

// Create makes a key under a passphrase and writes it to path, which must not exist. logN is the work factor, WorkFactor
// but for tests. The file is complete or absent.
func Create(path string, passphrase []byte, logN int, random io.Reader) (ed25519.PrivateKey, error) {
	if len(passphrase) == 0 {
		return nil, errors.New("the passphrase is empty")
	}
	if _, err := os.Lstat(path); err == nil {
		return nil, fmt.Errorf("%w in %s", ErrExists, path)
	}
	_, key, err := ed25519.GenerateKey(random)
	if err != nil {
		return nil, err
	}
	to, err := age.NewScryptRecipient(string(passphrase))
	if err != nil {
		return nil, err
	}
	to.SetWorkFactor(logN)
	var b bytes.Buffer
	fmt.Fprintf(&b, "%s%s\n", head, record.KeyID(key.Public().(ed25519.PublicKey)))
	w, err := age.Encrypt(&b, to)
	if err != nil {
		return nil, err
	}
	if _, err := w.Write(key.Seed()); err != nil {
		return nil, err
	}
	if err := w.Close(); err != nil {
		return nil, err
	}
	return key, writeNew(path, b.Bytes())
}

// writeNew writes a file under a temporary name, syncs it, and gives it its name only if nothing has that name.
func writeNew(path string, data []byte) (err error) {
	f, err := os.CreateTemp(filepath.Dir(path), ".new-*") // mode 0600
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, os.Remove(f.Name())) }()
	_, err = f.Write(data)
	if err = errors.Join(err, f.Sync(), f.Close()); err != nil {
		return err
	}
	if err := os.Link(f.Name(), path); err != nil {
		if errors.Is(err, os.ErrExist) {
			return fmt.Errorf("%w in %s", ErrExists, path)
		}
		return err
	}
	return nil
}

// Peek returns the public key without a passphrase.
func Peek(path string) (record.KeyID, error) {
	id, _, err := split(path)
	return id, err
}

func split(path string) (record.KeyID, *bufio.Reader, error) {
	data, err := os.ReadFile(path)
	if err != nil {
		return record.KeyID{}, nil, err
	}
	r := bufio.NewReader(bytes.NewReader(data))
	line, err := r.ReadString('\n')
	text, ok := strings.CutPrefix(strings.TrimSuffix(line, "\n"), head)
	if err != nil || !ok {
		return record.KeyID{}, nil, fmt.Errorf("%w: %s", ErrMalformed, path)
	}
	id, err := record.ParseKeyID(text)
	if err != nil {
		return record.KeyID{}, nil, fmt.Errorf("%w: %s: %w", ErrMalformed, path, err)
	}
	return id, r, nil
}

// Open unlocks the key. Errors: ErrPassphrase, ErrMalformed, or the file system's.
func Open(path string, passphrase []byte) (ed25519.PrivateKey, error) {
	id, r, err := split(path)
	if err != nil {
		return nil, err
	}
	if len(passphrase) == 0 {
		return nil, ErrPassphrase
	}
	with, err := age.NewScryptIdentity(string(passphrase))
	if err != nil {
		return nil, err
	}
	plain, err := age.Decrypt(r, with)
	if wrong := (*age.NoIdentityMatchError)(nil); errors.As(err, &wrong) {
		return nil, ErrPassphrase
	} else if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrMalformed, err)
	}
	seed, err := io.ReadAll(io.LimitReader(plain, ed25519.SeedSize+1))
	if err != nil || len(seed) != ed25519.SeedSize {
		return nil, fmt.Errorf("%w: %d bytes of key: %w", ErrMalformed, len(seed), err)
	}
	key := ed25519.NewKeyFromSeed(seed)
	if record.KeyID(key.Public().(ed25519.PublicKey)) != id {
		return nil, fmt.Errorf("%w: its first line names another key", ErrMalformed)
	}
	return key, nil
}

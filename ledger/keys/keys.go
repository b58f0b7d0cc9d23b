// Package keys keeps a hand's Ed25519 key, and other small secrets of the book, on one laptop: at rest under an age passphrase, in files
// of mode 0600. The key never leaves the laptop.
//
// A file is one line in clear and the secret behind it:
//
//	chargehand key 1 <the public key, 64 hexadecimal digits>
//	chargehand secret 1
//
// What follows is an age file (age-encryption.org/v1, scrypt recipient) that holds the key's seed or the secret, or, where no passphrase
// was wanted, the line "unprotected" and the same in hexadecimal digits. A file of another number is refused.
package keys

import (
	"bytes"
	"crypto/ed25519"
	"encoding/hex"
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

// MaxSecret is the most that Seal takes, in bytes.
const MaxSecret = 16 << 10

const (
	keyHead       = "chargehand key 1 "
	secretHead    = "chargehand secret 1"
	unprotected   = "unprotected\n"
	maxWorkFactor = 22 // what age opens by default
	maxFile       = 64 << 10
)

// Create makes a key under a passphrase and writes it to path, which must not exist. logN is the work factor, WorkFactor
// but for tests. The file is complete or absent. Errors: ErrExists, or the file system's.
func Create(path string, passphrase []byte, logN int, random io.Reader) (ed25519.PrivateKey, error) {
	return create(path, random, func(seed []byte) ([]byte, error) { return lock(seed, passphrase, logN) })
}

// CreateUnprotected is Create without a passphrase: whoever reads the file can sign as this hand. For a laptop whose disk is
// encrypted and whose user asked for it.
func CreateUnprotected(path string, random io.Reader) (ed25519.PrivateKey, error) {
	return create(path, random, lockOpenly)
}

func create(path string, random io.Reader, lock func([]byte) ([]byte, error)) (ed25519.PrivateKey, error) {
	if err := absent(path); err != nil {
		return nil, err
	}
	_, key, err := ed25519.GenerateKey(random)
	if err != nil {
		return nil, err
	}
	locked, err := lock(key.Seed())
	if err != nil {
		return nil, err
	}
	if err := writeNew(path, keyHead+record.KeyID(key.Public().(ed25519.PublicKey)).String(), locked); err != nil {
		return nil, err
	}
	return key, nil
}

// Peek returns the public key, and whether a passphrase protects the private one, without that passphrase. It takes the file's word:
// Open finds out whether the key is really there.
func Peek(path string) (id record.KeyID, protected bool, err error) {
	id, locked, err := readKey(path)
	return id, !isOpen(locked), err
}

// Open unlocks the key; the passphrase of an unprotected one is not looked at. Errors: ErrPassphrase (also where damage hit just what
// the passphrase opens), ErrMalformed, or the file system's.
func Open(path string, passphrase []byte) (ed25519.PrivateKey, error) {
	id, locked, err := readKey(path)
	if err != nil {
		return nil, err
	}
	seed, err := unlock(locked, passphrase)
	if err != nil {
		return nil, err
	}
	if len(seed) != ed25519.SeedSize {
		return nil, fmt.Errorf("%w: it holds %d bytes, a key has %d", ErrMalformed, len(seed), ed25519.SeedSize)
	}
	key := ed25519.NewKeyFromSeed(seed)
	if record.KeyID(key.Public().(ed25519.PublicKey)) != id {
		return nil, fmt.Errorf("%w: its first line names another key", ErrMalformed)
	}
	return key, nil
}

// Seal writes another secret, at most MaxSecret bytes, under a passphrase to path, which must not exist: as Create does.
func Seal(path string, secret, passphrase []byte, logN int) error {
	return seal(path, secret, func(secret []byte) ([]byte, error) { return lock(secret, passphrase, logN) })
}

// SealUnprotected is Seal without a passphrase, for the laptop with an unprotected key.
func SealUnprotected(path string, secret []byte) error { return seal(path, secret, lockOpenly) }

func seal(path string, secret []byte, lock func([]byte) ([]byte, error)) error {
	if len(secret) > MaxSecret {
		return fmt.Errorf("a secret of %d bytes, %d is the most", len(secret), MaxSecret)
	}
	if err := absent(path); err != nil {
		return err
	}
	locked, err := lock(secret)
	if err != nil {
		return err
	}
	return writeNew(path, secretHead, locked)
}

// Unseal returns what Seal wrote. Errors are those of Open.
func Unseal(path string, passphrase []byte) ([]byte, error) {
	head, locked, err := read(path)
	if err != nil {
		return nil, err
	}
	if head != secretHead {
		return nil, fmt.Errorf("%w: %s holds no secret of this kind", ErrMalformed, path)
	}
	return unlock(locked, passphrase)
}

func lock(plain, passphrase []byte, logN int) ([]byte, error) {
	if len(passphrase) == 0 {
		return nil, errors.New("the passphrase is empty")
	}
	if logN < 1 || logN > maxWorkFactor {
		return nil, fmt.Errorf("a work factor of %d is outside 1 to %d", logN, maxWorkFactor)
	}
	to, err := age.NewScryptRecipient(string(passphrase))
	if err != nil {
		return nil, err
	}
	to.SetWorkFactor(logN)
	var b bytes.Buffer
	w, err := age.Encrypt(&b, to)
	if err != nil {
		return nil, err
	}
	if _, err := w.Write(plain); err != nil {
		return nil, err
	}
	if err := w.Close(); err != nil { // writes the last part
		return nil, err
	}
	return b.Bytes(), nil
}

func lockOpenly(plain []byte) ([]byte, error) {
	return fmt.Appendf(nil, "%s%x\n", unprotected, plain), nil
}

func isOpen(locked []byte) bool { return bytes.HasPrefix(locked, []byte(unprotected)) }

func unlock(locked, passphrase []byte) ([]byte, error) {
	if isOpen(locked) {
		plain, err := hex.DecodeString(strings.TrimSuffix(string(locked[len(unprotected):]), "\n"))
		if err != nil {
			return nil, fmt.Errorf("%w: %w", ErrMalformed, err)
		}
		return plain, nil
	}
	if len(passphrase) == 0 {
		return nil, ErrPassphrase
	}
	with, err := age.NewScryptIdentity(string(passphrase))
	if err != nil {
		return nil, err
	}
	with.SetMaxWorkFactor(maxWorkFactor)
	r, err := age.Decrypt(bytes.NewReader(locked), with)
	if wrong := (*age.NoIdentityMatchError)(nil); errors.As(err, &wrong) {
		return nil, ErrPassphrase
	} else if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrMalformed, err)
	}
	plain, err := io.ReadAll(r)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrMalformed, err)
	}
	return plain, nil
}

func readKey(path string) (record.KeyID, []byte, error) {
	head, locked, err := read(path)
	if err != nil {
		return record.KeyID{}, nil, err
	}
	text, ok := strings.CutPrefix(head, keyHead)
	if !ok {
		return record.KeyID{}, nil, fmt.Errorf("%w: %s holds no key of this kind", ErrMalformed, path)
	}
	id, err := record.ParseKeyID(text)
	if err != nil {
		return record.KeyID{}, nil, fmt.Errorf("%w: %s: %w", ErrMalformed, path, err)
	}
	return id, locked, nil
}

// read splits a file into its first line and the rest.
func read(path string) (head string, locked []byte, err error) {
	f, err := os.Open(path)
	if err != nil {
		return "", nil, err
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, maxFile+1))
	if err != nil {
		return "", nil, err
	}
	line, rest, found := bytes.Cut(data, []byte("\n"))
	if !found || len(data) > maxFile {
		return "", nil, fmt.Errorf("%w: %s", ErrMalformed, path)
	}
	return string(line), rest, nil
}

// absent spares the work for a file that writeNew would refuse.
func absent(path string) error {
	if _, err := os.Lstat(path); err == nil {
		return fmt.Errorf("%w in %s", ErrExists, path)
	}
	return nil
}

// writeNew writes a file under a temporary name, syncs it, and gives it its name only if nothing has that name.
func writeNew(path, head string, locked []byte) (err error) {
	folder := filepath.Dir(path)
	f, err := os.CreateTemp(folder, ".new-*") // mode 0600
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, os.Remove(f.Name())) }()
	_, err = fmt.Fprintf(f, "%s\n%s", head, locked)
	if err = errors.Join(err, f.Sync(), f.Close()); err != nil {
		return err
	}
	if err := os.Link(f.Name(), path); errors.Is(err, os.ErrExist) { // a rename would replace
		return fmt.Errorf("%w in %s", ErrExists, path)
	} else if err != nil {
		return err
	}
	d, err := os.Open(folder)
	if err != nil {
		return err
	}
	return errors.Join(d.Sync(), d.Close()) // the name too survives a power cut
}

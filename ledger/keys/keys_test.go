package keys

import (
	"bytes"
	"crypto/ed25519"
	"crypto/rand"
	"errors"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"sync"
	"testing"

	"filippo.io/age"

	"example.org/chargehand/ledger/record"
)

const quick = 4 // work factor

func leftovers(t *testing.T, path string) {
	t.Helper()
	if left, _ := filepath.Glob(filepath.Join(filepath.Dir(path), ".new-*")); len(left) != 0 {
		t.Errorf("left behind: %v", left)
	}
}

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
	if id, protected, err := Peek(path); err != nil || !protected || id != record.KeyID(key.Public().(ed25519.PublicKey)) {
		t.Errorf("public key %v, protected %v, %v", id, protected, err)
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
	if now, _ := os.ReadFile(path); !bytes.Equal(now, data) {
		t.Error("the refused second key changed the first")
	}
	leftovers(t, path)
}

// No damage may bring out another key, and a file cut short brings out none.
func TestDamagedKey(t *testing.T) {
	dir := t.TempDir()
	path, other := filepath.Join(dir, "key"), filepath.Join(dir, "other")
	key, err := Create(path, []byte("cold nitrogen"), quick, rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	try := func(bad []byte) (ed25519.PrivateKey, error) {
		if err := os.WriteFile(other, bad, 0o600); err != nil {
			t.Fatal(err)
		}
		return Open(other, []byte("cold nitrogen"))
	}
	for i := range data {
		bad := bytes.Clone(data)
		bad[i] ^= 1
		if k, err := try(bad); err == nil && !k.Equal(key) {
			t.Fatalf("byte %d altered: another key came out", i)
		} else if err != nil && !errors.Is(err, ErrMalformed) && !errors.Is(err, ErrPassphrase) {
			t.Errorf("byte %d altered: %v", i, err)
		}
		if _, err := try(data[:i]); !errors.Is(err, ErrMalformed) && !errors.Is(err, ErrPassphrase) {
			t.Errorf("cut after %d bytes: %v", i, err)
		}
	}
}

// What follows the first line is a plain age file: age itself opens it.
func TestAgeOpensTheFile(t *testing.T) {
	path := filepath.Join(t.TempDir(), "secret")
	if err := Seal(path, []byte("of the book"), []byte("cold nitrogen"), quick); err != nil {
		t.Fatal(err)
	}
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	_, rest, _ := bytes.Cut(data, []byte("\n"))
	with, err := age.NewScryptIdentity("cold nitrogen")
	if err != nil {
		t.Fatal(err)
	}
	r, err := age.Decrypt(bytes.NewReader(rest), with)
	if err != nil {
		t.Fatal(err)
	}
	var got bytes.Buffer
	if _, err := got.ReadFrom(r); err != nil || got.String() != "of the book" {
		t.Errorf("%q, %v", got.String(), err)
	}
}

func TestUnprotected(t *testing.T) {
	dir := t.TempDir()
	path, secret := filepath.Join(dir, "key"), filepath.Join(dir, "secret")
	if _, err := Create(path, nil, quick, rand.Reader); err == nil {
		t.Error("an empty passphrase made a key")
	}
	if err := Seal(secret, []byte("x"), nil, quick); err == nil {
		t.Error("an empty passphrase sealed a secret")
	}
	key, err := CreateUnprotected(path, rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	if info, err := os.Stat(path); err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("mode %v, %v", info.Mode(), err)
	}
	if _, protected, err := Peek(path); protected || err != nil {
		t.Errorf("protected %v, %v", protected, err)
	}
	if again, err := Open(path, nil); err != nil || !again.Equal(key) {
		t.Errorf("opened %v, %v", again, err)
	}
	if _, err := CreateUnprotected(path, rand.Reader); !errors.Is(err, ErrExists) {
		t.Errorf("over a key: %v", err)
	}
	if err := SealUnprotected(secret, []byte("of the book")); err != nil {
		t.Fatal(err)
	}
	if got, err := Unseal(secret, nil); err != nil || string(got) != "of the book" {
		t.Errorf("%q, %v", got, err)
	}
}

func TestSealedSecret(t *testing.T) {
	path := filepath.Join(t.TempDir(), "secret")
	want := bytes.Repeat([]byte{7}, MaxSecret)
	if err := Seal(path, append(want, 7), []byte("cold nitrogen"), quick); err == nil {
		t.Error("sealed more than MaxSecret")
	}
	if err := Seal(path, want, []byte("cold nitrogen"), quick); err != nil {
		t.Fatal(err)
	}
	if info, err := os.Stat(path); err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("mode %v, %v", info.Mode(), err)
	}
	if got, err := Unseal(path, []byte("cold nitrogen")); err != nil || !bytes.Equal(got, want) {
		t.Errorf("%d bytes, %v", len(got), err)
	}
	if _, err := Unseal(path, []byte("warm nitrogen")); !errors.Is(err, ErrPassphrase) {
		t.Errorf("wrong passphrase: %v", err)
	}
	if err := Seal(path, nil, []byte("cold nitrogen"), quick); !errors.Is(err, ErrExists) {
		t.Errorf("over a secret: %v", err)
	}
	if _, err := Open(path, []byte("cold nitrogen")); !errors.Is(err, ErrMalformed) {
		t.Errorf("a secret opened as a key: %v", err)
	}
	if _, err := Unseal(filepath.Join(t.TempDir(), "none"), nil); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("no file: %v", err)
	}
	leftovers(t, path)
}

func TestWorkFactorIsChecked(t *testing.T) {
	for _, n := range []int{-1, 0, maxWorkFactor + 1} {
		if _, err := Create(filepath.Join(t.TempDir(), "key"), []byte("p"), n, rand.Reader); err == nil {
			t.Errorf("work factor %d was taken", n)
		}
	}
}

// Of many that create one file at once exactly one succeeds, and the file is its key.
func TestCreatedOnce(t *testing.T) {
	path := filepath.Join(t.TempDir(), "key")
	var made [8]ed25519.PrivateKey
	var wg sync.WaitGroup
	for i := range made {
		wg.Go(func() {
			key, err := Create(path, []byte("p"), quick, rand.Reader)
			if err != nil && !errors.Is(err, ErrExists) {
				t.Error(err)
			}
			made[i] = key
		})
	}
	wg.Wait()
	onDisk, err := Open(path, []byte("p"))
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	for _, key := range made {
		if key != nil {
			n++
			if !key.Equal(onDisk) {
				t.Error("the file holds another key than the one returned")
			}
		}
	}
	if n != 1 {
		t.Errorf("%d succeeded", n)
	}
	leftovers(t, path)
}

func TestWords(t *testing.T) {
	// Computed apart from this code, with Python's hashlib: the bits of SHA-256("chargehand key words 1\n" + 32 zero bytes) five at a time.
	const zero = "bukaba jiboki tukuta jomomu tijiro"
	if got := Words(record.KeyID{}); got != zero {
		t.Errorf("words of the zero key: %q, want %q", got, zero)
	}
	form := regexp.MustCompile(`^([bjklmrst][aiou]){3}( ([bjklmrst][aiou]){3}){4}$`)
	seen := map[string]bool{}
	for bit := range 256 {
		var k record.KeyID
		k[bit/8] = 1 << (bit % 8)
		w := Words(k)
		if !form.MatchString(w) || seen[w] {
			t.Errorf("words %q, seen before: %v", w, seen[w])
		}
		seen[w] = true
	}
	if n := len(strings.ReplaceAll(zero, " ", "")) / 2 * 5; n < 64 {
		t.Errorf("%d bits", n)
	}
}

package join

import (
	"bytes"
	"context"
	"crypto/ecdh"
	"crypto/ed25519"
	"crypto/hkdf"
	"crypto/hmac"
	"crypto/rand"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"

	"github.com/fxamacker/cbor/v2"
	"golang.org/x/crypto/chacha20poly1305"

	"example.org/chargehand/ledger/record"
)

const version = 1

// The messages. Rules for change: a hello keeps its layout for ever and its version says how to read the rest.
type (
	hello struct {
		_       struct{} `cbor:",toarray"`
		Version uint64
		Key     record.KeyID
		Fresh   [32]byte // X25519 public key of this conversation only
	}
	claim struct {
		_      struct{} `cbor:",toarray"`
		Proof  [32]byte
		Sealed []byte // request
	}
	reply struct {
		_      struct{} `cbor:",toarray"`
		No     no       // if not zero the rest is empty
		Proof  [32]byte
		Sealed []byte // the lead's signature
	}
	sealed struct {
		_      struct{} `cbor:",toarray"`
		Sealed []byte   // answer, or nothing at all in the newcomer's receipt
	}
	request struct {
		_                 struct{} `cbor:",toarray"`
		Name, Certificate string
		Signature         [ed25519.SignatureSize]byte
	}
	answer struct {
		_       struct{} `cbor:",toarray"`
		Outcome outcome
		Payload []byte
	}
)

type no uint8

const (
	noProof no = iota + 1
	noDead
	noTaken
)

type outcome uint8

const (
	welcome outcome = iota
	refused
	failed
)

// Bounds in bytes.
const (
	maxText    = 200
	maxMessage = 1 << 10
	maxAnswer  = MaxPayload + maxMessage
)

var (
	encoding = must(cbor.CoreDetEncOptions().EncMode())
	decoding = must(cbor.DecOptions{
		DupMapKey: cbor.DupMapKeyEnforcedAPF, IndefLength: cbor.IndefLengthForbidden, TagsMd: cbor.TagsForbidden, UTF8: cbor.UTF8RejectInvalid,
		MaxNestedLevels: 4, MaxArrayElements: 16, MaxMapPairs: 16,
	}.DecMode())
)

func must[T any](v T, err error) T {
	if err != nil {
		panic(err) // only for options that contradict each other
	}
	return v
}

// marshal encodes our own structs, which always can be.
func marshal(v any) []byte { return must(encoding.Marshal(v)) }

// unmarshal takes the one deterministic encoding only.
func unmarshal[T any](data []byte) (v T, err error) {
	if err := decoding.Unmarshal(data, &v); err != nil {
		return v, fmt.Errorf("%w: %w", ErrGarbage, err)
	}
	if !bytes.Equal(marshal(v), data) {
		return v, fmt.Errorf("%w: not in its one encoding", ErrGarbage)
	}
	return v, nil
}

// send writes a message behind its length in four bytes, big-endian.
func send(w io.Writer, v any) error {
	data := marshal(v)
	if _, err := w.Write(append(binary.BigEndian.AppendUint32(nil, uint32(len(data))), data...)); err != nil {
		return fmt.Errorf("%w: %w", ErrCut, err)
	}
	return nil
}

// receive checks the length before it allocates, and reads not a byte beyond the message.
func receive[T any](r io.Reader, limit int) (v T, err error) {
	var head [4]byte
	if _, err := io.ReadFull(r, head[:]); err != nil {
		return v, fmt.Errorf("%w: %w", ErrCut, err)
	}
	n := binary.BigEndian.Uint32(head[:])
	if int64(n) > int64(limit) {
		return v, fmt.Errorf("%w: a message of %d bytes, %d is the most", ErrGarbage, n, limit)
	}
	data := make([]byte, n)
	if _, err := io.ReadFull(r, data); err != nil {
		return v, fmt.Errorf("%w: %w", ErrCut, err)
	}
	return unmarshal[T](data)
}

// within runs a stretch of the conversation and frees it when the context ends.
func within(ctx context.Context, rw io.ReadWriter, f func() error) error {
	stop := context.AfterFunc(ctx, func() {
		if d, ok := rw.(interface{ SetDeadline(time.Time) error }); ok && d.SetDeadline(time.Unix(1, 0)) == nil {
			return
		}
		if c, ok := rw.(io.Closer); ok {
			_ = c.Close() // the blocked read or write reports it
		}
	})
	defer stop()
	err := f()
	if errors.Is(err, ErrCut) && ctx.Err() != nil { // else the caller reads "i/o timeout" where the truth is what ended the context
		return fmt.Errorf("%w: %w", ErrCut, context.Cause(ctx))
	}
	return err
}

// promptly is within, for a stretch in which no person has to act.
func promptly(ctx context.Context, rw io.ReadWriter, f func() error) error {
	ctx, cancel := context.WithTimeoutCause(ctx, patience, ErrSilent)
	defer cancel()
	return within(ctx, rw, f)
}

type role string

const (
	lead     role = "lead"
	newcomer role = "newcomer"
)

// channel is one conversation after both hellos: what both sides must have seen alike, and the keys that follow from it and the code.
type channel struct {
	opening        [32]byte
	proofKey, seal []byte
}

// newChannel binds the code's secret to both laptops' keys, both fresh keys and the bytes of the caller's own channel. The fresh keys also
// agree on a secret of their own, so that who records the conversation and finds the slip of paper with the code later reads nothing.
func newChannel(secret [32]byte, fresh *ecdh.PrivateKey, theirs [32]byte, binding []byte, newcomer, lead hello) (*channel, error) {
	public, err := ecdh.X25519().NewPublicKey(theirs[:])
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrGarbage, err)
	}
	shared, err := fresh.ECDH(public)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrGarbage, err)
	}
	bound := append([]byte{}, binding...) // nil would be encoded unlike empty
	c := &channel{opening: sha256.Sum256(marshal([]any{"chargehand join 1", bound, newcomer, lead}))}
	root, err := hkdf.Extract(sha256.New, append(secret[:], shared...), c.opening[:])
	if err != nil {
		return nil, err
	}
	if c.proofKey, err = hkdf.Expand(sha256.New, root, "proof", 32); err != nil {
		return nil, err
	}
	c.seal, err = hkdf.Expand(sha256.New, root, "seal", chacha20poly1305.KeySize)
	return c, err
}

// proof is HMAC over the role and, by the opening, over both keys, both fresh keys and the binding.
func (c *channel) proof(of role) [32]byte {
	mac := hmac.New(sha256.New, c.proofKey)
	mac.Write(marshal([]any{of, c.opening}))
	return [32]byte(mac.Sum(nil))
}

func (c *channel) proves(of role, proof [32]byte) bool {
	want := c.proof(of)
	return hmac.Equal(want[:], proof[:])
}

// The sealed messages, each of which occurs once in a conversation: so the number can be the nonce.
const (
	sealedRequest byte = iota
	sealedSignature
	sealedAnswer
	sealedReceipt
)

func (c *channel) close(message byte, plain []byte) []byte {
	return must(chacha20poly1305.New(c.seal)).Seal(nil, nonce(message), plain, c.opening[:])
}

func (c *channel) open(message byte, data []byte) ([]byte, error) {
	plain, err := must(chacha20poly1305.New(c.seal)).Open(nil, nonce(message), data, c.opening[:])
	if err != nil {
		return nil, fmt.Errorf("%w: a sealed message was altered", ErrGarbage)
	}
	return plain, nil
}

func nonce(message byte) []byte {
	n := make([]byte, chacha20poly1305.NonceSize)
	n[0] = message
	return n
}

// possession is what a laptop signs to show that it holds its key. No entry can look like it: an entry's signed bytes are an array that
// begins with "Signature1" (RFC 9052 section 4.4).
func (c *channel) possession(of role, name, certificate string) []byte {
	return marshal([]any{"chargehand join 1 possession", of, c.opening, name, certificate})
}

// greet makes this side's hello and the private part of its fresh key.
func greet(key ed25519.PrivateKey) (hello, *ecdh.PrivateKey, error) {
	fresh, err := ecdh.X25519().GenerateKey(rand.Reader)
	if err != nil {
		return hello{}, nil, err
	}
	return hello{Version: version, Key: idOf(key), Fresh: [32]byte(fresh.PublicKey().Bytes())}, fresh, nil
}

// check refuses a hello that no honest peer sends, also the echo of one's own.
func (h hello) check(mine hello) error {
	if h.Version != version {
		return fmt.Errorf("%w: the peer speaks version %d, this laptop %d", ErrVersion, h.Version, version)
	}
	if err := record.CheckKey(h.Key); err != nil {
		return fmt.Errorf("%w: %w", ErrGarbage, err)
	}
	if h.Key == mine.Key || h.Fresh == mine.Fresh {
		return fmt.Errorf("%w: the peer says it is this laptop", ErrGarbage)
	}
	return nil
}

func idOf(key ed25519.PrivateKey) record.KeyID {
	return record.KeyID(key.Public().(ed25519.PublicKey))
}

// checkText keeps out of the lead's terminal what would move its cursor or turn its text around.
func checkText(what, s string, needed bool) error {
	switch {
	case needed && strings.TrimSpace(s) == "":
		return fmt.Errorf("the %s is empty", what)
	case len(s) > maxText:
		return fmt.Errorf("the %s has %d bytes, %d is the most", what, len(s), maxText)
	case !utf8.ValidString(s) || strings.ContainsFunc(s, func(r rune) bool { return !unicode.IsPrint(r) }):
		return fmt.Errorf("the %s %q has characters that cannot be shown", what, s)
	}
	return nil
}

// Package record is the bytes of one entry: a COSE_Sign1 message (RFC 9052) over deterministic CBOR (RFC 8949, section
// 4.2.1), signed with Ed25519 (RFC 8032). Anybody's COSE library can verify one; entry.cddl describes it.
//
//	18([ << {1: -8, 3: "application/chargehand+cbor", 4: h'<public key>'} >>,   protected header
//	     {},                                                                    unprotected header, always empty
//	     << payload >>,
//	     h'<64 bytes>' ])                                                       signature
//
// What is signed is the Sig_structure ["Signature1", protected, external_aad, payload], where external_aad is the book's
// id: an entry of one book cannot pass in another. The founding entry is signed with an empty external_aad, and its id is
// the book's id. An entry's id is SHA-256 of the Sig_structure. The payload is a map:
//
//	1  sequence number in the line of this key, from 1
//	2  id of the line's entry before it; absent for the first
//	3  ids of the heads of other lines that were seen and not known to this line before, sorted
//	4  [seconds since 1970, zone offset in minutes] of the signature
//	5  [milliseconds, count] of the hybrid logical clock
//	6  kind
//	7  body, a map with small integer keys
//	8  what the signer was shown: [verdict, corrected pressure, core version]; absent where there was none
//
// There are no floats: an amount is [mantissa, exponent, unit] as the person typed it. Bytes are kept as they came and must
// be what this package would have written: shortest integers, sorted keys, no key twice, definite lengths, no tag but the
// first, no key that its kind does not have. The body of a kind that is not known here is held to the same rules and kept as
// Unknown. Texts are UTF-8 of 1 to 2,000 bytes without control characters; a text that says nothing takes no key.
//
// One entry, a withdrawal, written out (ExampleVerify checks these bytes):
//
//	d2 84                                            # COSE_Sign1: tag 18, an array of 4
//	   58 44 a3                                      # protected header, 68 bytes, a map of 3
//	      01 27                                      # 1 algorithm: -8, EdDSA
//	      03 78 1b 6170706c69636174696f6e2f...       # 3 content type: "application/chargehand+cbor"
//	      04 58 20 d75a980182b10ab7d54bfed3...       # 4 key id: the public key
//	   a0                                            # unprotected header, empty
//	   58 be a7                                      # payload, 190 bytes, a map of 7
//	      01 02                                      # 1 number 2 of its line
//	      02 58 20 01000000...                       # 2 the line's entry before
//	      03 82 58 20 02000000... 58 20 03000000...  # 3 heads of two other lines, seen since
//	      04 82 1a 73097680 18 78                    # 4 signed at 1930000000 s, 120 min east
//	      05 82 1b 000001c15cf6e47b 04               # 5 clock 1930000000123 ms, count 4
//	      06 6a 7769746864726177616c                 # 6 kind: "withdrawal"
//	      07 a2                                      # 7 body, a map of 2
//	         01 58 20 07000000...                    #   1 the entry withdrawn
//	         02 6a 77726f6e6720756e6974              #   2 the reason: "wrong unit"
//	   58 40 fdcc18ec...                             # signature, 64 bytes
package record

import (
	"bytes"
	"crypto/ed25519"
	"crypto/sha256"
	"errors"
	"fmt"
	"slices"

	"filippo.io/edwards25519"
	"github.com/fxamacker/cbor/v2"
)

// MaxSize is the largest entry in bytes, on write and on receipt.
const MaxSize = 16 << 10

// Reasons to refuse bytes.
var (
	ErrTooLarge     = errors.New("the entry is larger than 16 KiB")
	ErrMalformed    = errors.New("the entry is malformed")
	ErrNotCanonical = errors.New("the entry is not in its one deterministic encoding") // a key is missing, too long, out of order
	ErrSignature    = errors.New("the signature does not fit the entry and this book")
	ErrWrongBook    = errors.New("the entry founds another book")
	ErrChanged      = errors.New("the entry is not as it was stored")
	ErrWeakKey      = errors.New("the key is not a full-strength Ed25519 public key")
)

// Entry is one signed statement. Body is one of the body structs, by value.
type Entry struct {
	Seq    uint64
	Prev   ID // zero at Seq 1
	Seen   []ID
	Signed Time
	Clock  HLC
	Kind   Kind
	Body   any
	Shown  *Shown
}

// Shown is what the signer was shown before signing.
type Shown struct {
	_         struct{} `cbor:",toarray"`
	Verdict   string
	Corrected *Amount // nil where none could be computed
	Core      string
}

// Verified is an entry whose bytes and signature were found right. Verify, VerifyFounding and Sign make one, and Restore makes it
// again.
type Verified struct {
	raw   []byte
	id    ID
	key   KeyID
	entry Entry
}

// ID returns the entry's id.
func (v Verified) ID() ID { return v.id }

// Raw returns the entry's bytes, which must not be changed.
func (v Verified) Raw() []byte { return v.raw }

// Entry returns what the entry states; its slices must not be changed.
func (v Verified) Entry() Entry { return v.entry }

// Key returns the key that signed.
func (v Verified) Key() KeyID { return v.key }

const (
	algEdDSA    = -8
	contentType = "application/chargehand+cbor"
)

type header struct {
	Alg  int64  `cbor:"1,keyasint"`
	Type string `cbor:"3,keyasint"`
	Kid  KeyID  `cbor:"4,keyasint"`
}

type message struct {
	_           struct{} `cbor:",toarray"`
	Protected   []byte
	Unprotected struct{}
	Payload     []byte
	Signature   [ed25519.SignatureSize]byte
}

type sigStructure struct {
	_         struct{} `cbor:",toarray"`
	Context   string
	Protected []byte
	External  []byte
	Payload   []byte
}

type payload struct {
	Seq    uint64          `cbor:"1,keyasint"`
	Prev   ID              `cbor:"2,keyasint,omitzero"`
	Seen   []ID            `cbor:"3,keyasint"`
	Signed Time            `cbor:"4,keyasint"`
	Clock  HLC             `cbor:"5,keyasint"`
	Kind   Kind            `cbor:"6,keyasint"`
	Body   cbor.RawMessage `cbor:"7,keyasint"`
	Shown  *Shown          `cbor:"8,keyasint,omitempty"`
}

var (
	encoding = must(cbor.EncOptions{Sort: cbor.SortCoreDeterministic, ShortestFloat: cbor.ShortestFloat16, IndefLength: cbor.IndefLengthForbidden, NilContainers: cbor.NilContainerAsEmpty}.EncMode())
	decoding = must(cbor.DecOptions{DupMapKey: cbor.DupMapKeyEnforcedAPF, IndefLength: cbor.IndefLengthForbidden, ExtraReturnErrors: cbor.ExtraDecErrorUnknownField, MaxNestedLevels: 8, MaxArrayElements: 1024, MaxMapPairs: 64, TagsMd: cbor.TagsForbidden, UTF8: cbor.UTF8RejectInvalid}.DecMode())
)

const coseSign1 = 0xd2 // tag 18

func must[T any](v T, err error) T {
	if err != nil {
		panic(err) // a fault in the constant options above
	}
	return v
}

func decode(data []byte, into any) error {
	if err := decoding.Unmarshal(data, into); err != nil {
		return fmt.Errorf("%w: %w", ErrMalformed, err)
	}
	return nil
}

// strict decodes and requires that encoding the result gives the same bytes: options alone let long integers and unsorted
// keys through.
func strict(data []byte, into any) error {
	if err := decode(data, into); err != nil {
		return err
	}
	again, err := encoding.Marshal(into)
	if err != nil {
		return fmt.Errorf("%w: %w", ErrMalformed, err)
	}
	if !bytes.Equal(again, data) {
		return ErrNotCanonical
	}
	return nil
}

func toBeSigned(protected, external, body []byte) ([]byte, error) {
	return encoding.Marshal(sigStructure{Context: "Signature1", Protected: protected, External: external, Payload: body})
}

func external(book BookID, kind Kind) []byte {
	if kind == KindFounding {
		return nil
	}
	return book[:]
}

// join makes an entry's bytes from its signed parts.
func join(protected, data, signature []byte) ([]byte, error) {
	raw, err := encoding.Marshal(message{Protected: protected, Payload: data, Signature: [ed25519.SignatureSize]byte(signature)})
	return append([]byte{coseSign1}, raw...), err
}

// encode returns an entry's payload after checking it.
func encode(e Entry) ([]byte, error) {
	if err := e.check(); err != nil {
		return nil, err
	}
	body, err := EncodeBody(e.Kind, e.Body)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", e.Kind, err)
	}
	return encoding.Marshal(payload{e.Seq, e.Prev, e.Seen, e.Signed, e.Clock, e.Kind, body, e.Shown})
}

// Sign makes an entry. For a founding entry the book's id is not used. The error is ErrMalformed with what is wrong in the
// entry, ErrTooLarge, or ErrWeakKey for what is no Ed25519 private key.
func Sign(key ed25519.PrivateKey, book BookID, e Entry) (Verified, error) {
	if len(key) != ed25519.PrivateKeySize {
		return Verified{}, ErrWeakKey
	}
	data, err := encode(e)
	if err != nil {
		return Verified{}, err
	}
	kid := KeyID(key.Public().(ed25519.PublicKey))
	protected, err := encoding.Marshal(header{algEdDSA, contentType, kid})
	if err != nil {
		return Verified{}, err
	}
	tbs, err := toBeSigned(protected, external(book, e.Kind), data)
	if err != nil {
		return Verified{}, err
	}
	raw, err := join(protected, data, ed25519.Sign(key, tbs))
	if err != nil {
		return Verified{}, err
	}
	if e.Kind == KindFounding {
		return VerifyFounding(raw)
	}
	return Verify(raw, book)
}

// Verify checks an entry's bytes, form and signature for a book: a pure function of the two. Whether the signer had any
// authority is not its question. Verify keeps raw, which must not be changed afterwards.
func Verify(raw []byte, book BookID) (Verified, error) {
	v, err := verify(raw, book)
	if err == nil && v.entry.Kind == KindFounding && BookID(v.id) != book {
		return Verified{}, ErrWrongBook
	}
	return v, err
}

// VerifyFounding checks the founding entry of a book that is not known yet; its ID is the book's.
func VerifyFounding(raw []byte) (Verified, error) {
	v, err := verify(raw, BookID{})
	if err == nil && v.entry.Kind != KindFounding {
		return Verified{}, fmt.Errorf("%w: a %s founds no book", ErrMalformed, v.entry.Kind)
	}
	return v, err
}

func verify(raw []byte, book BookID) (Verified, error) {
	v, m, tbs, err := parse(raw, book, strict)
	if err != nil {
		return Verified{}, err
	}
	if err := CheckKey(v.key); err != nil {
		return Verified{}, err
	}
	if !ed25519.Verify(v.key[:], tbs, m.Signature[:]) {
		return Verified{}, ErrSignature
	}
	return v, nil
}

// Restore returns an entry that was Verified before it was stored, without verifying its signature again. It is for the
// store only, which keeps the SHA-256 of an entry's bytes apart from them: sum is that hash, and the same bytes need no second
// proof. Bytes that differ from those are ErrChanged. Restore keeps raw, which must not be changed afterwards.
func Restore(raw []byte, sum [sha256.Size]byte, book BookID) (Verified, error) {
	if sha256.Sum256(raw) != sum {
		return Verified{}, ErrChanged
	}
	v, _, _, err := parse(raw, book, decode)
	if err == nil && v.entry.Kind == KindFounding && BookID(v.id) != book {
		return Verified{}, ErrWrongBook
	}
	return v, err
}

// parse reads an entry's bytes with read, strict or decode, and returns also its message and what is signed.
func parse(raw []byte, book BookID, read func([]byte, any) error) (Verified, message, []byte, error) {
	fail := func(err error) (Verified, message, []byte, error) { return Verified{}, message{}, nil, err }
	if len(raw) > MaxSize {
		return fail(ErrTooLarge)
	}
	if len(raw) == 0 || raw[0] != coseSign1 {
		return fail(fmt.Errorf("%w: it is not a COSE_Sign1 message", ErrMalformed))
	}
	var m message
	if err := read(raw[1:], &m); err != nil {
		return fail(err)
	}
	var h header
	if err := read(m.Protected, &h); err != nil {
		return fail(fmt.Errorf("protected header: %w", err))
	}
	if h.Alg != algEdDSA || h.Type != contentType {
		return fail(fmt.Errorf("%w: algorithm %d and type %q; only EdDSA (-8) and %q are taken", ErrMalformed, h.Alg, h.Type, contentType))
	}
	var p payload
	if err := read(m.Payload, &p); err != nil {
		return fail(fmt.Errorf("payload: %w", err))
	}
	e := Entry{Seq: p.Seq, Prev: p.Prev, Seen: p.Seen, Signed: p.Signed, Clock: p.Clock, Kind: p.Kind, Shown: p.Shown}
	if err := e.check(); err != nil {
		return fail(err)
	}
	var err error
	if e.Body, err = decodeBody(p.Kind, p.Body, read); err != nil {
		return fail(fmt.Errorf("%s: %w", p.Kind, err))
	}
	tbs, err := toBeSigned(m.Protected, external(book, p.Kind), m.Payload)
	if err != nil {
		return fail(err)
	}
	return Verified{raw: raw, id: sha256.Sum256(tbs), key: h.Kid, entry: e}, m, tbs, nil
}

// CheckKey refuses what is not the canonical encoding of a point outside the small subgroup: with such a key one signature
// can fit many entries, or one entry pass on one laptop and fail on another.
func CheckKey(k KeyID) error {
	p, err := new(edwards25519.Point).SetBytes(k[:])
	if err != nil || !bytes.Equal(p.Bytes(), k[:]) || new(edwards25519.Point).MultByCofactor(p).Equal(edwards25519.NewIdentityPoint()) == 1 {
		return ErrWeakKey
	}
	return nil
}

const (
	maxText   = 2000
	maxSeen   = 1000
	maxOffset = 14 * 60
	maxUnix   = 1 << 38 // seconds, in the year 10680: far from where arithmetic on times would overflow
	maxWall   = maxUnix * 1000
)

func (e *Entry) check() error {
	bad := func(format string, args ...any) error {
		return fmt.Errorf("%w: "+format, append([]any{ErrMalformed}, args...)...)
	}
	switch {
	case e.Seq == 0 || (e.Seq == 1) != (e.Prev == ID{}):
		return bad("number %d of a line with %s before it", e.Seq, e.Prev.Short())
	case (e.Kind == KindFounding) && (e.Seq != 1 || len(e.Seen) > 0):
		return bad("a founding entry that has something before it")
	case len(e.Seen) > maxSeen:
		return bad("it names %d heads", len(e.Seen))
	case e.Clock.Wall < 0 || e.Clock.Wall > maxWall:
		return bad("its clock shows %d", e.Clock.Wall)
	}
	if err := e.Signed.check(); err != nil {
		return err
	}
	for i := 1; i < len(e.Seen); i++ {
		if compareID(e.Seen[i-1], e.Seen[i]) >= 0 {
			return bad("the heads that it has seen are not sorted")
		}
	}
	if e.Seq > 1 && slices.Contains(e.Seen, e.Prev) {
		return bad("it names the entry before it twice")
	}
	if e.Shown != nil {
		if err := errors.Join(checkText("verdict shown", e.Shown.Verdict, true), checkText("core version", e.Shown.Core, true)); err != nil {
			return err
		}
		if e.Shown.Corrected != nil {
			return e.Shown.Corrected.check("corrected pressure shown")
		}
	}
	return checkText("kind", string(e.Kind), true)
}

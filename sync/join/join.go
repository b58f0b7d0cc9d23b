// Package join lets a newcomer's laptop in by a one-time code that the lead reads out: a conversation over any stream of bytes. It knows
// no network and no book; what the newcomer is given is the caller's.
//
//	newcomer -> lead   hello   version, key, fresh key
//	lead -> newcomer   hello   the same of the lead's laptop
//	newcomer -> lead   claim   proof of the code; sealed: name, certificate number, signature
//	lead -> newcomer   reply   proof of the code; sealed: signature. Or a bare no
//	                           ... the lead decides ...
//	lead -> newcomer   answer  sealed: yes and the payload, or no
//	newcomer -> lead   receipt sealed: nothing
//
// Each message is an array in deterministic CBOR (RFC 8949 section 4.2.1) behind its length. A proof is an HMAC, under a key that follows
// from the stretched code and from an X25519 agreement of the fresh keys, over the sender's role, both laptops' keys, both fresh keys and
// bytes that name the caller's channel. So who sits between two laptops cannot pass a proof on, a recording is of no use a second
// time, and the code found later opens no recording. The newcomer proves first: a stranger learns the lead's public key and no more.
// Sealed is ChaCha20-Poly1305 (RFC 8439) under a key of the same origin.
//
// The code dies when the lead has decided, either way, when it expires, and after three wrong proofs. What is no proof at all (a
// connection cut, garbage) is no try, because it tells nothing about the code.
package join

import (
	"context"
	"crypto/ed25519"
	"errors"
	"fmt"
	"io"
	stdsync "sync"
	"time"

	"example.org/chargehand/ledger/record"
)

// Errors a caller decides on. Those of a code that is no longer good are all ErrDead too.
var (
	ErrWrongCode   = errors.New("the two laptops do not hold the same code")
	ErrDead        = errors.New("the code is no longer good")
	ErrExpired     = fmt.Errorf("%w: its time is over", ErrDead)
	ErrUsed        = fmt.Errorf("%w: the lead has decided on a newcomer by it", ErrDead)
	ErrTries       = fmt.Errorf("%w: it was tried wrongly too often", ErrDead)
	ErrWithdrawn   = fmt.Errorf("%w: it was withdrawn", ErrDead)
	ErrTaken       = errors.New("another laptop is joining by this code")
	ErrRefused     = errors.New("the lead said no")
	ErrFailed      = errors.New("the lead's laptop could not let the newcomer in")
	ErrUnconfirmed = errors.New("the newcomer was let in but did not confirm")
	ErrVersion     = errors.New("another protocol version")
	ErrGarbage     = errors.New("the peer sent what is no part of joining")
	ErrCut         = errors.New("joining was cut off")
	ErrSilent      = errors.New("the peer fell silent")
)

// MaxPayload is the most that a newcomer can be given, in bytes.
const MaxPayload = 16 << 10

const (
	maxTries = 3
	patience = 30 * time.Second // for all that needs no person
)

// Request is a newcomer who knows the code and holds Key. Name and Certificate are as the newcomer typed them, printable, at most 200
// bytes; who that is only the lead can tell, by asking for the key's words.
type Request struct {
	Key               record.KeyID
	Name, Certificate string
}

// Offer is a code at the lead's laptop. It can serve any number of connections at once; one of them gets in.
type Offer struct {
	key     ed25519.PrivateKey
	code    Code
	secret  [32]byte
	expires time.Time
	now     func() time.Time

	mu    stdsync.Mutex // guards what follows
	dead  error
	taken bool
	tries int
}

// NewOffer makes a code good for a while at this laptop, whose key it is. It stretches the code, about a tenth of a second.
func NewOffer(code Code, key ed25519.PrivateKey, lifetime time.Duration, now func() time.Time) (*Offer, error) {
	if code == (Code{}) {
		return nil, errNoCode
	}
	return &Offer{key: key, code: code, secret: code.secret(), expires: now().Add(lifetime), now: now}, nil
}

// Code returns the code, to be shown.
func (o *Offer) Code() Code { return o.code }

// Expires says until when the code is good. A newcomer who has proved the code by then may be decided on later.
func (o *Offer) Expires() time.Time { return o.expires }

// Err returns nil while the code is good, and then why it is not: ErrExpired, ErrUsed, ErrTries or ErrWithdrawn.
func (o *Offer) Err() error {
	o.mu.Lock()
	defer o.mu.Unlock()
	return o.state()
}

func (o *Offer) state() error {
	if o.dead == nil && !o.taken && !o.now().Before(o.expires) {
		o.dead = ErrExpired
	}
	return o.dead
}

// Withdraw makes the code no longer good. A decision under way goes on.
func (o *Offer) Withdraw() {
	o.mu.Lock()
	defer o.mu.Unlock()
	if o.state() == nil {
		o.dead = ErrWithdrawn
	}
}

// take reserves the code for a newcomer whose claim holds. A dead or taken code is not compared with anything.
func (o *Offer) take(holds func() error) error {
	o.mu.Lock()
	defer o.mu.Unlock()
	if err := o.state(); err != nil {
		return err
	}
	if o.taken {
		return ErrTaken
	}
	if err := holds(); err != nil {
		if o.tries++; o.tries == maxTries {
			o.dead = ErrTries
		}
		return err
	}
	o.taken = true
	return nil
}

// release ends the code, or gives it back where nobody has decided.
func (o *Offer) release(decided bool) {
	o.mu.Lock()
	defer o.mu.Unlock()
	o.taken = false
	if decided {
		o.dead = ErrUsed
	}
}

// Serve talks with one newcomer at the other end of rw. The binding is the same on both sides and differs from any other channel's (both
// keys that the network has authenticated, say); it may be empty on a stream without such.
//
// approve is called at most once over all Serves of an offer: with a newcomer who proved the code, once the newcomer has the lead's
// proof. It asks the lead and returns what to give the newcomer, at most MaxPayload bytes, or ErrRefused for a no, or what went wrong. Its
// return ends the code.
//
// Serve returns the request and nil once the newcomer has confirmed. Errors: the offer's (see Err), ErrTaken, ErrWrongCode, ErrRefused,
// ErrVersion, ErrGarbage; ErrCut with the context's cause or ErrSilent; approve's own; ErrUnconfirmed if the connection broke after
// a yes, when the newcomer may or may not have got the payload. A peer that is silent for 30 s where no person has to act is
// cut off. rw stays open, at the end of a message, except that the end of the context sets its deadline or, where it has none,
// closes it.
func (o *Offer) Serve(ctx context.Context, rw io.ReadWriter, binding []byte, approve func(context.Context, Request) ([]byte, error)) (Request, error) {
	var c *channel
	var who Request
	err := promptly(ctx, rw, func() (err error) {
		c, who, err = o.meet(rw, binding)
		return err
	})
	if err != nil {
		return Request{}, err
	}
	decided := true // also if approve panics: a newcomer may be in by then
	defer func() { o.release(decided) }()
	err = promptly(ctx, rw, func() error {
		signature := ed25519.Sign(o.key, c.possession(lead, "", ""))
		return send(rw, reply{Proof: c.proof(lead), Sealed: c.close(sealedSignature, signature)})
	})
	if err != nil {
		decided = false
		return Request{}, err
	}
	payload, err := approve(ctx, who)
	if err == nil && len(payload) > MaxPayload {
		err = fmt.Errorf("a payload of %d bytes, %d is the most", len(payload), MaxPayload)
	}
	a := answer{Outcome: welcome, Payload: payload}
	if errors.Is(err, ErrRefused) {
		a = answer{Outcome: refused}
	} else if err != nil {
		a = answer{Outcome: failed}
	}
	told := promptly(ctx, rw, func() error {
		if err := send(rw, sealed{Sealed: c.close(sealedAnswer, marshal(a))}); err != nil || a.Outcome != welcome {
			return err
		}
		receipt, err := receive[sealed](rw, maxMessage)
		if err != nil {
			return err
		}
		_, err = c.open(sealedReceipt, receipt.Sealed)
		return err
	})
	if err != nil {
		return who, err // that the newcomer was not told changes nothing
	}
	if told != nil {
		return who, fmt.Errorf("%w: %w", ErrUnconfirmed, told)
	}
	return who, nil
}

// meet goes as far as the newcomer's claim, and takes the code if it holds.
func (o *Offer) meet(rw io.ReadWriter, binding []byte) (*channel, Request, error) {
	theirs, err := receive[hello](rw, maxMessage)
	if err != nil {
		return nil, Request{}, err
	}
	mine, fresh, err := greet(o.key)
	if err != nil {
		return nil, Request{}, err
	}
	if err := send(rw, mine); err != nil {
		return nil, Request{}, err
	}
	if err := theirs.check(mine); err != nil {
		return nil, Request{}, err
	}
	c, err := newChannel(o.secret, fresh, theirs.Fresh, binding, theirs, mine)
	if err != nil {
		return nil, Request{}, err
	}
	claim, err := receive[claim](rw, maxMessage)
	if err != nil {
		return nil, Request{}, err
	}
	var r request
	err = o.take(func() error {
		if !c.proves(newcomer, claim.Proof) {
			return ErrWrongCode
		}
		r, err = c.request(claim.Sealed, theirs.Key)
		return err
	})
	if err != nil {
		n := noProof
		switch {
		case errors.Is(err, ErrDead):
			n = noDead
		case errors.Is(err, ErrTaken):
			n = noTaken
		}
		_ = send(rw, reply{No: n}) // a courtesy; the reason is what counts
		return nil, Request{}, err
	}
	return c, Request{theirs.Key, r.Name, r.Certificate}, nil
}

// request opens and checks what the newcomer asks.
func (c *channel) request(data []byte, key record.KeyID) (request, error) {
	plain, err := c.open(sealedRequest, data)
	if err != nil {
		return request{}, err
	}
	r, err := unmarshal[request](plain)
	if err != nil {
		return request{}, err
	}
	if err := errors.Join(checkText("name", r.Name, true), checkText("certificate number", r.Certificate, false)); err != nil {
		return request{}, fmt.Errorf("%w: %w", ErrGarbage, err)
	}
	if !ed25519.Verify(key[:], c.possession(newcomer, r.Name, r.Certificate), r.Signature[:]) {
		return request{}, fmt.Errorf("%w: the newcomer does not hold the key %s", ErrGarbage, key.Short())
	}
	return r, nil
}

// Newcomer asks to be let in. Name is needed, Certificate may be empty; both printable and at most 200 bytes.
type Newcomer struct {
	Code              Code
	Key               ed25519.PrivateKey
	Name, Certificate string
	Waiting           func(lead record.KeyID) // called, if set, when the lead's laptop has proved the code and the lead is asked
}

// Welcome is what a newcomer was given, and by which laptop.
type Welcome struct {
	Lead    record.KeyID
	Payload []byte
}

// Join talks with the lead's laptop at the other end of rw; see Serve for binding, silence and rw. It stretches the code, about a
// tenth of a second. It waits for the lead's decision as long as the context lasts.
//
// Errors: ErrCode for a Code that nobody drew, ErrWrongCode (also for a lead who cannot prove the code: an impostor), ErrDead, ErrTaken,
// ErrRefused, ErrFailed, ErrVersion, ErrGarbage; ErrCut with the context's cause or ErrSilent.
func (n Newcomer) Join(ctx context.Context, rw io.ReadWriter, binding []byte) (Welcome, error) {
	if n.Code == (Code{}) {
		return Welcome{}, errNoCode
	}
	if err := errors.Join(checkText("name", n.Name, true), checkText("certificate number", n.Certificate, false)); err != nil {
		return Welcome{}, err
	}
	return n.join(ctx, rw, binding, n.Code.secret())
}

func (n Newcomer) join(ctx context.Context, rw io.ReadWriter, binding []byte, secret [32]byte) (Welcome, error) {
	var c *channel
	var from record.KeyID
	err := promptly(ctx, rw, func() (err error) {
		c, from, err = n.meet(rw, binding, secret)
		return err
	})
	if err != nil {
		return Welcome{}, err
	}
	if n.Waiting != nil {
		n.Waiting(from)
	}
	var a answer
	err = within(ctx, rw, func() error {
		m, err := receive[sealed](rw, maxAnswer)
		if err != nil {
			return err
		}
		plain, err := c.open(sealedAnswer, m.Sealed)
		if err != nil {
			return err
		}
		a, err = unmarshal[answer](plain)
		return err
	})
	if err != nil {
		return Welcome{}, err
	}
	switch a.Outcome {
	case welcome:
	case refused:
		return Welcome{}, ErrRefused
	default:
		return Welcome{}, ErrFailed
	}
	// What was given is held already: a receipt that does not arrive is the lead's to worry about.
	_ = promptly(ctx, rw, func() error { return send(rw, sealed{Sealed: c.close(sealedReceipt, nil)}) })
	return Welcome{from, a.Payload}, nil
}

// meet goes as far as the lead's proof.
func (n Newcomer) meet(rw io.ReadWriter, binding []byte, secret [32]byte) (*channel, record.KeyID, error) {
	mine, fresh, err := greet(n.Key)
	if err != nil {
		return nil, record.KeyID{}, err
	}
	if err := send(rw, mine); err != nil {
		return nil, record.KeyID{}, err
	}
	theirs, err := receive[hello](rw, maxMessage)
	if err != nil {
		return nil, record.KeyID{}, err
	}
	if err := theirs.check(mine); err != nil {
		return nil, record.KeyID{}, err
	}
	c, err := newChannel(secret, fresh, theirs.Fresh, binding, mine, theirs)
	if err != nil {
		return nil, record.KeyID{}, err
	}
	r := request{Name: n.Name, Certificate: n.Certificate}
	r.Signature = [ed25519.SignatureSize]byte(ed25519.Sign(n.Key, c.possession(newcomer, r.Name, r.Certificate)))
	if err := send(rw, claim{Proof: c.proof(newcomer), Sealed: c.close(sealedRequest, marshal(r))}); err != nil {
		return nil, record.KeyID{}, err
	}
	reply, err := receive[reply](rw, maxMessage)
	if err != nil {
		return nil, record.KeyID{}, err
	}
	switch reply.No {
	case 0:
	case noDead:
		return nil, record.KeyID{}, ErrDead
	case noTaken:
		return nil, record.KeyID{}, ErrTaken
	default:
		return nil, record.KeyID{}, ErrWrongCode
	}
	if !c.proves(lead, reply.Proof) {
		return nil, record.KeyID{}, ErrWrongCode
	}
	signature, err := c.open(sealedSignature, reply.Sealed)
	if err != nil {
		return nil, record.KeyID{}, err
	}
	if !ed25519.Verify(theirs.Key[:], c.possession(lead, "", ""), signature) {
		return nil, record.KeyID{}, fmt.Errorf("%w: the lead's laptop does not hold the key %s", ErrGarbage, theirs.Key.Short())
	}
	return c, theirs.Key, nil
}

package join

import (
	"bytes"
	"context"
	"crypto/ed25519"
	"crypto/sha256"
	"errors"
	"io"
	"net"
	"strings"
	"sync"
	"testing"
	"testing/synctest"
	"time"

	"example.org/chargehand/ledger/record"
)

var (
	binding = []byte("channel 1")
	given   = []byte("the book's secret and id")
	right   = [32]byte{1} // stands for a stretched code, so that only one test pays for stretching
	wrong   = [32]byte{2}
)

func key(name string) ed25519.PrivateKey {
	seed := sha256.Sum256([]byte(name))
	return ed25519.NewKeyFromSeed(seed[:])
}

// forged shows the public key of one name and signs as another.
func forged(shown, signs string) ed25519.PrivateKey {
	return append(key(signs).Seed(), key(shown).Public().(ed25519.PublicKey)...)
}

type clock struct {
	mu sync.Mutex
	t  time.Time
}

func (c *clock) now() time.Time {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.t
}

func (c *clock) pass(d time.Duration) {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.t = c.t.Add(d)
}

func offer() (*Offer, *clock) {
	c := &clock{t: time.Date(2031, 3, 1, 4, 0, 0, 0, time.UTC)}
	return &Offer{key: key("lead"), secret: right, expires: c.t.Add(5 * time.Minute), now: c.now}, c
}

func asks(name string) Newcomer { return Newcomer{Key: key(name), Name: name, Certificate: "A-1"} }

func yes(context.Context, Request) ([]byte, error) { return given, nil }

func never(t *testing.T) func(context.Context, Request) ([]byte, error) {
	return func(_ context.Context, r Request) ([]byte, error) {
		t.Errorf("the lead was asked about %+v", r)
		return nil, ErrRefused
	}
}

type result struct {
	who          Request
	lead         error
	welcome      Welcome
	joined       error
	byLead, byNo []byte // what each side wrote
}

// tap records what is written and may alter one byte of what passes.
type tap struct {
	net.Conn
	wrote           bytes.Buffer
	in, out         int
	alterIn, alterO int
}

func (c *tap) Read(p []byte) (int, error) {
	n, err := c.Conn.Read(p)
	if at := c.alterIn - c.in; at >= 0 && at < n {
		p[at] ^= 1
	}
	c.in += n
	return n, err
}

func (c *tap) Write(p []byte) (int, error) {
	p = bytes.Clone(p)
	c.wrote.Write(p)
	if at := c.alterO - c.out; at >= 0 && at < len(p) {
		p[at] ^= 1
	}
	c.out += len(p)
	return c.Conn.Write(p)
}

// converse runs both sides over a pipe; alterIn and alterO say which byte to and from the newcomer is altered, -1 none.
func converse(ctx context.Context, o *Offer, approve func(context.Context, Request) ([]byte, error), n Newcomer, secret [32]byte, alterIn, alterO int) (r result) {
	a, b := net.Pipe()
	at := &tap{Conn: a, alterIn: -1, alterO: -1}
	bt := &tap{Conn: b, alterIn: alterIn, alterO: alterO}
	var wg sync.WaitGroup
	wg.Go(func() {
		defer a.Close()
		r.who, r.lead = o.Serve(ctx, at, binding, approve)
	})
	wg.Go(func() {
		defer b.Close()
		r.welcome, r.joined = n.join(ctx, bt, binding, secret)
	})
	wg.Wait()
	r.byLead, r.byNo = at.wrote.Bytes(), bt.wrote.Bytes()
	return r
}

func meet(t *testing.T, o *Offer, approve func(context.Context, Request) ([]byte, error), n Newcomer, secret [32]byte) result {
	t.Helper()
	return converse(t.Context(), o, approve, n, secret, -1, -1)
}

func (r result) want(t *testing.T, lead, joined error) {
	t.Helper()
	if !errors.Is(r.lead, lead) || !errors.Is(r.joined, joined) {
		t.Errorf("lead: %v, want %v; newcomer: %v, want %v", r.lead, lead, r.joined, joined)
	}
	if joined != nil && r.welcome.Payload != nil {
		t.Error("the newcomer was given something all the same")
	}
}

func TestJoin(t *testing.T) {
	code := one()
	o, err := NewOffer(code, key("lead"), time.Minute, time.Now)
	if err != nil {
		t.Fatal(err)
	}
	typed, err := Parse(strings.ToLower(o.Code().String()))
	if err != nil {
		t.Fatal(err)
	}
	a, b := net.Pipe()
	var wg sync.WaitGroup
	wg.Go(func() {
		who, err := o.Serve(t.Context(), a, binding, func(_ context.Context, r Request) ([]byte, error) { return given, nil })
		if err != nil || who != (Request{idOf(key("tech")), "R. Mistry", "A-1"}) {
			t.Errorf("lead: %+v, %v", who, err)
		}
		if _, err := a.Write([]byte("book")); err != nil { // the merge follows on the same stream
			t.Error(err)
		}
	})
	var waitingFor record.KeyID
	n := Newcomer{Code: typed, Key: key("tech"), Name: "R. Mistry", Certificate: "A-1", Waiting: func(k record.KeyID) { waitingFor = k }}
	w, err := n.Join(t.Context(), b, binding)
	if err != nil || !bytes.Equal(w.Payload, given) || w.Lead != idOf(key("lead")) || waitingFor != w.Lead {
		t.Errorf("newcomer: %+v, %v, waited for %v", w, err, waitingFor)
	}
	next := make([]byte, 4)
	if _, err := io.ReadFull(b, next); err != nil || string(next) != "book" {
		t.Errorf("after joining: %q, %v", next, err)
	}
	wg.Wait()
	if !errors.Is(o.Err(), ErrUsed) {
		t.Errorf("the code after use: %v", o.Err())
	}
}

func TestWireShowsNothing(t *testing.T) {
	o, _ := offer()
	r := meet(t, o, yes, asks("R. Mistry"), right)
	r.want(t, nil, nil)
	for _, secret := range [][]byte{given, []byte("Mistry"), right[:]} {
		if bytes.Contains(r.byLead, secret) || bytes.Contains(r.byNo, secret) {
			t.Errorf("%q passes in clear", secret)
		}
	}
}

func TestWrongCodeThreeTimes(t *testing.T) {
	o, _ := offer()
	for range maxTries {
		meet(t, o, never(t), asks("tech"), wrong).want(t, ErrWrongCode, ErrWrongCode)
	}
	meet(t, o, never(t), asks("tech"), right).want(t, ErrTries, ErrDead)
	if !errors.Is(o.Err(), ErrTries) || !errors.Is(o.Err(), ErrDead) {
		t.Error(o.Err())
	}
}

func TestTwoWrongTriesThenRight(t *testing.T) {
	o, _ := offer()
	for range maxTries - 1 {
		meet(t, o, never(t), asks("tech"), wrong).want(t, ErrWrongCode, ErrWrongCode)
	}
	meet(t, o, yes, asks("tech"), right).want(t, nil, nil)
}

// Many guesses at once are still three guesses.
func TestParallelGuesses(t *testing.T) {
	o, _ := offer()
	var wg sync.WaitGroup
	results := make([]result, 20)
	for i := range results {
		wg.Go(func() { results[i] = meet(t, o, never(t), asks("tech"), wrong) })
	}
	wg.Wait()
	judged := 0
	for _, r := range results {
		if errors.Is(r.lead, ErrWrongCode) {
			judged++
		} else if !errors.Is(r.lead, ErrTries) {
			t.Error(r.lead)
		}
	}
	if judged != maxTries {
		t.Errorf("%d guesses were judged", judged)
	}
}

func TestReuse(t *testing.T) {
	o, _ := offer()
	meet(t, o, yes, asks("tech"), right).want(t, nil, nil)
	meet(t, o, never(t), asks("other"), right).want(t, ErrUsed, ErrDead)
	meet(t, o, never(t), asks("other"), wrong).want(t, ErrUsed, ErrDead) // a dead code answers no guess
}

func TestRefusal(t *testing.T) {
	o, _ := offer()
	no := func(_ context.Context, r Request) ([]byte, error) { return given, ErrRefused }
	meet(t, o, no, asks("tech"), right).want(t, ErrRefused, ErrRefused)
	meet(t, o, never(t), asks("tech"), right).want(t, ErrUsed, ErrDead)
}

func TestLeadFails(t *testing.T) {
	full := errors.New("disk full")
	o, _ := offer()
	meet(t, o, func(context.Context, Request) ([]byte, error) { return given, full }, asks("tech"), right).want(t, full, ErrFailed)
	o, _ = offer()
	r := meet(t, o, func(context.Context, Request) ([]byte, error) { return make([]byte, MaxPayload+1), nil }, asks("tech"), right)
	if r.lead == nil || !errors.Is(r.joined, ErrFailed) {
		t.Errorf("too large a payload: lead %v, newcomer %v", r.lead, r.joined)
	}
	for _, size := range []int{0, MaxPayload} {
		o, _ = offer()
		r = meet(t, o, func(context.Context, Request) ([]byte, error) { return make([]byte, size), nil }, asks("tech"), right)
		if r.lead != nil || r.joined != nil || len(r.welcome.Payload) != size {
			t.Errorf("payload of %d: lead %v, newcomer %v", size, r.lead, r.joined)
		}
	}
}

func TestExpiry(t *testing.T) {
	o, c := offer()
	c.pass(5*time.Minute - 1)
	if err := o.Err(); err != nil {
		t.Error(err)
	}
	c.pass(1)
	meet(t, o, never(t), asks("tech"), right).want(t, ErrExpired, ErrDead)
	c.pass(-time.Hour) // a clock set back does not bring it to life
	meet(t, o, never(t), asks("tech"), right).want(t, ErrExpired, ErrDead)

	o, c = offer()
	slow := func(context.Context, Request) ([]byte, error) {
		c.pass(time.Hour) // proved in time, decided later
		return given, nil
	}
	meet(t, o, slow, asks("tech"), right).want(t, nil, nil)
}

func TestWithdrawn(t *testing.T) {
	o, _ := offer()
	o.Withdraw()
	meet(t, o, never(t), asks("tech"), right).want(t, ErrWithdrawn, ErrDead)
}

func TestTwoAtOnce(t *testing.T) {
	o, _ := offer()
	asked, decide := make(chan struct{}), make(chan struct{})
	var first result
	var wg sync.WaitGroup
	wg.Go(func() {
		first = meet(t, o, func(context.Context, Request) ([]byte, error) {
			close(asked)
			<-decide
			return given, nil
		}, asks("first"), right)
	})
	<-asked
	meet(t, o, never(t), asks("second"), right).want(t, ErrTaken, ErrTaken)
	meet(t, o, never(t), asks("second"), wrong).want(t, ErrTaken, ErrTaken)
	close(decide)
	wg.Wait()
	first.want(t, nil, nil)
	if first.who.Name != "first" {
		t.Errorf("let in: %+v", first.who)
	}
}

func TestManyAtOnce(t *testing.T) {
	o, _ := offer()
	var wg sync.WaitGroup
	results := make([]result, 20)
	for i := range results {
		wg.Go(func() { results[i] = meet(t, o, yes, asks("tech"), right) })
	}
	wg.Wait()
	in := 0
	for _, r := range results {
		if r.lead == nil && r.joined == nil {
			in++
		} else if !errors.Is(r.lead, ErrTaken) && !errors.Is(r.lead, ErrUsed) {
			t.Error(r.lead)
		}
	}
	if in != 1 {
		t.Errorf("%d got in", in)
	}
}

// One byte altered anywhere: the newcomer is given what the lead gave or nothing, the lead is asked about what the newcomer asked or not at
// all, and somebody notices.
func TestEveryAlteredByteIsNoticed(t *testing.T) {
	o, _ := offer()
	clean := meet(t, o, yes, asks("tech"), right)
	clean.want(t, nil, nil)
	alter := func(in, out int) {
		synctest.Test(t, func(t *testing.T) { // an altered length makes one side wait until it loses patience
			o, _ := offer()
			ctx, cancel := context.WithTimeout(t.Context(), time.Hour) // the newcomer waits for a decision as long as this
			defer cancel()
			r := converse(ctx, o, func(_ context.Context, r Request) ([]byte, error) {
				if r != (Request{idOf(key("tech")), "tech", "A-1"}) {
					t.Errorf("byte %d in, %d out: the lead was asked about %+v", in, out, r)
				}
				return given, nil
			}, asks("tech"), right, in, out)
			if r.lead == nil && r.joined == nil {
				t.Errorf("byte %d in, %d out: nobody noticed", in, out)
			}
			if r.joined == nil && !bytes.Equal(r.welcome.Payload, given) {
				t.Errorf("byte %d in, %d out: the newcomer was given %q", in, out, r.welcome.Payload)
			}
		})
	}
	for i := range clean.byLead {
		alter(i, -1)
	}
	for i := range clean.byNo {
		alter(-1, i)
	}
}

// Someone between two channels who passes every byte on: each laptop knows that its channel ends elsewhere.
func TestRelayBetweenTwoChannels(t *testing.T) {
	o, _ := offer()
	a, b := net.Pipe()
	var wg sync.WaitGroup
	wg.Go(func() {
		defer a.Close()
		if _, err := o.Serve(t.Context(), a, []byte("lead and relay"), never(t)); !errors.Is(err, ErrWrongCode) {
			t.Errorf("lead: %v", err)
		}
	})
	if _, err := asks("tech").join(t.Context(), b, []byte("relay and newcomer"), right); !errors.Is(err, ErrWrongCode) {
		t.Errorf("newcomer: %v", err)
	}
	b.Close()
	wg.Wait()
}

// Someone in the middle who puts his own key into one hello or both, and passes the proofs on.
func TestManInTheMiddle(t *testing.T) {
	for _, c := range []struct{ toLead, toNewcomer bool }{{true, false}, {false, true}, {true, true}} {
		o, _ := offer()
		lead, leadEnd := net.Pipe()
		newEnd, new := net.Pipe()
		var wg sync.WaitGroup
		wg.Go(func() {
			defer lead.Close()
			if _, err := o.Serve(t.Context(), lead, binding, never(t)); !errors.Is(err, ErrWrongCode) {
				t.Errorf("%+v: lead: %v", c, err)
			}
		})
		wg.Go(func() {
			defer new.Close()
			if _, err := asks("tech").join(t.Context(), new, binding, right); !errors.Is(err, ErrWrongCode) {
				t.Errorf("%+v: newcomer: %v", c, err)
			}
		})
		pass := func(from io.Reader, to io.Writer, swap bool) {
			h, err := receive[hello](from, maxMessage)
			if err != nil {
				t.Fatal(err)
			}
			if swap {
				if h, _, err = greet(key("middle")); err != nil {
					t.Fatal(err)
				}
			}
			if err := send(to, h); err != nil {
				t.Fatal(err)
			}
		}
		pass(newEnd, leadEnd, c.toLead)
		pass(leadEnd, newEnd, c.toNewcomer)
		p, err := receive[claim](newEnd, maxMessage)
		if err != nil {
			t.Fatal(err)
		}
		if err := send(leadEnd, p); err != nil {
			t.Fatal(err)
		}
		r, err := receive[reply](leadEnd, maxMessage)
		if err != nil || r.No != noProof {
			t.Errorf("%+v: the lead replied %+v, %v", c, r, err)
		}
		// The best he has is the newcomer's own proof, sent back.
		if err := send(newEnd, reply{Proof: p.Proof, Sealed: p.Sealed}); err != nil {
			t.Fatal(err)
		}
		wg.Wait()
	}
}

// recorded plays one side of an earlier conversation.
type recorded struct{ io.Reader }

func (recorded) Write(p []byte) (int, error) { return len(p), nil }

func TestReplay(t *testing.T) {
	o, _ := offer()
	r := meet(t, o, yes, asks("tech"), right)
	r.want(t, nil, nil)
	if _, err := o.Serve(t.Context(), recorded{bytes.NewReader(r.byNo)}, binding, never(t)); !errors.Is(err, ErrUsed) {
		t.Errorf("the same offer: %v", err)
	}
	again, _ := offer() // with the same code, which no caller does
	if _, err := again.Serve(t.Context(), recorded{bytes.NewReader(r.byNo)}, binding, never(t)); !errors.Is(err, ErrWrongCode) {
		t.Errorf("a new offer: %v", err)
	}
	if w, err := asks("tech").join(t.Context(), recorded{bytes.NewReader(r.byLead)}, binding, right); !errors.Is(err, ErrWrongCode) {
		t.Errorf("a newcomer was given %q, %v", w.Payload, err)
	}
}

// mirror sends each message back to where it came from.
type mirror struct{ bytes.Buffer }

func TestReflection(t *testing.T) {
	if _, err := asks("tech").join(t.Context(), &mirror{}, binding, right); !errors.Is(err, ErrGarbage) {
		t.Errorf("newcomer: %v", err)
	}
	o, _ := offer()
	meet(t, o, never(t), asks("lead"), right).want(t, ErrGarbage, ErrGarbage)
}

func TestKeyMustBeHeld(t *testing.T) {
	o, _ := offer()
	n := asks("tech")
	n.Key = forged("inspector", "tech")
	for range maxTries {
		if r := meet(t, o, never(t), n, right); !errors.Is(r.lead, ErrGarbage) || r.joined == nil {
			t.Errorf("lead: %v, newcomer: %v", r.lead, r.joined)
		}
	}
	meet(t, o, never(t), asks("tech"), right).want(t, ErrTries, ErrDead)

	o, _ = offer()
	o.key = forged("inspector", "lead")
	if r := meet(t, o, yes, asks("tech"), right); !errors.Is(r.joined, ErrGarbage) || r.welcome.Payload != nil {
		t.Errorf("newcomer: %v", r.joined)
	}
}

func TestWeakKey(t *testing.T) {
	o, _ := offer()
	var b bytes.Buffer
	if err := send(&b, hello{Version: version, Key: record.KeyID{1}, Fresh: [32]byte{9}}); err != nil { // the neutral point
		t.Fatal(err)
	}
	if _, err := o.Serve(t.Context(), recorded{&b}, binding, never(t)); !errors.Is(err, ErrGarbage) {
		t.Error(err)
	}
	if err := send(&b, hello{Version: version, Key: idOf(key("tech"))}); err != nil { // an X25519 agreement that is always zero
		t.Fatal(err)
	}
	if _, err := o.Serve(t.Context(), recorded{&b}, binding, never(t)); !errors.Is(err, ErrGarbage) {
		t.Error(err)
	}
}

func TestOtherVersion(t *testing.T) {
	o, _ := offer()
	var b bytes.Buffer
	if err := send(&b, hello{Version: 2, Key: idOf(key("tech")), Fresh: [32]byte{9}}); err != nil {
		t.Fatal(err)
	}
	for _, err := range []error{
		func() error {
			_, err := o.Serve(t.Context(), recorded{bytes.NewReader(b.Bytes())}, binding, never(t))
			return err
		}(),
		func() error {
			_, err := asks("x").join(t.Context(), recorded{bytes.NewReader(b.Bytes())}, binding, right)
			return err
		}(),
	} {
		if !errors.Is(err, ErrVersion) {
			t.Error(err)
		}
	}
}

func TestTextIsForATerminal(t *testing.T) {
	for _, bad := range []string{"", "  ", "a\x1b[2Jb", "a\nb", "a\u202eb", "\xff", strings.Repeat("a", maxText+1)} {
		o, _ := offer()
		n := asks("tech")
		n.Name = bad
		if r := meet(t, o, never(t), n, right); !errors.Is(r.lead, ErrGarbage) {
			t.Errorf("name %q: lead: %v", bad, r.lead)
		}
		n.Code = one()
		if _, err := n.Join(t.Context(), recorded{strings.NewReader("")}, nil); err == nil || errors.Is(err, ErrCut) {
			t.Errorf("name %q: newcomer: %v", bad, err)
		}
	}
}

func TestNoCode(t *testing.T) {
	if _, err := NewOffer(Code{}, key("lead"), time.Minute, time.Now); !errors.Is(err, ErrCode) {
		t.Error(err)
	}
	if _, err := asks("tech").Join(t.Context(), recorded{strings.NewReader("")}, nil); !errors.Is(err, ErrCode) {
		t.Error(err)
	}
}

// A connection that breaks or brings garbage tells nothing about the code and does not use it up.
func TestCutIsNoTry(t *testing.T) {
	o, _ := offer()
	r := meet(t, o, yes, asks("tech"), right)
	r.want(t, nil, nil)
	o, _ = offer()
	claimed := len(r.byNo) - 4 - len(marshal(sealed{Sealed: make([]byte, 16)})) // all but the receipt
	for i := range claimed {
		if _, err := o.Serve(t.Context(), recorded{bytes.NewReader(r.byNo[:i])}, binding, never(t)); !errors.Is(err, ErrCut) {
			t.Fatalf("cut after %d bytes: %v", i, err)
		}
	}
	if _, err := o.Serve(t.Context(), recorded{strings.NewReader("\xff\xff\xff\xffGET /")}, binding, never(t)); !errors.Is(err, ErrGarbage) {
		t.Error(err)
	}
	if err := o.Err(); err != nil {
		t.Error(err)
	}
	meet(t, o, yes, asks("tech"), right).want(t, nil, nil)
}

// closing ends the connection in the middle of a write, number by number.
type closing struct {
	net.Conn
	after int
}

func (c *closing) Write(p []byte) (int, error) {
	if c.after--; c.after < 0 {
		c.Conn.Close()
		return 0, net.ErrClosed
	}
	return c.Conn.Write(p)
}

func TestNewcomerVanishes(t *testing.T) {
	o, _ := offer()
	a, b := net.Pipe()
	n := asks("tech")
	n.Waiting = func(record.KeyID) { b.Close() }
	var wg sync.WaitGroup
	wg.Go(func() {
		if who, err := o.Serve(t.Context(), a, binding, yes); !errors.Is(err, ErrUnconfirmed) || !errors.Is(err, ErrCut) || who.Name != "tech" {
			t.Errorf("lead: %+v, %v", who, err)
		}
	})
	if _, err := n.join(t.Context(), b, binding, right); !errors.Is(err, ErrCut) {
		t.Errorf("newcomer: %v", err)
	}
	wg.Wait()
	if !errors.Is(o.Err(), ErrUsed) {
		t.Error(o.Err())
	}
}

// The lead's reply does not get through: nobody has decided, so the code lives on.
func TestReplyIsLost(t *testing.T) {
	o, _ := offer()
	a, b := net.Pipe()
	var wg sync.WaitGroup
	wg.Go(func() {
		if _, err := o.Serve(t.Context(), &closing{a, 1}, binding, never(t)); !errors.Is(err, ErrCut) {
			t.Errorf("lead: %v", err)
		}
	})
	if _, err := asks("tech").join(t.Context(), b, binding, right); !errors.Is(err, ErrCut) {
		t.Errorf("newcomer: %v", err)
	}
	wg.Wait()
	meet(t, o, yes, asks("tech"), right).want(t, nil, nil)
}

func TestSilence(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		o, _ := offer()
		for _, serve := range []func(net.Conn) error{
			func(c net.Conn) error { _, err := o.Serve(t.Context(), c, binding, never(t)); return err },
			func(c net.Conn) error { _, err := asks("tech").join(t.Context(), c, binding, right); return err },
		} {
			a, b := net.Pipe()
			begun := time.Now()
			if err := serve(a); !errors.Is(err, ErrSilent) || !errors.Is(err, ErrCut) || time.Since(begun) != patience {
				t.Errorf("%v after %v", err, time.Since(begun))
			}
			a.Close()
			b.Close()
		}
		if o.Err() != nil {
			t.Error(o.Err())
		}
	})
}

func TestLeadTakesTime(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		o, _ := offer()
		thinks := func(ctx context.Context, _ Request) ([]byte, error) {
			ctx, cancel := context.WithTimeout(ctx, 10*time.Minute)
			defer cancel()
			<-ctx.Done()
			return given, nil
		}
		meet(t, o, thinks, asks("tech"), right).want(t, nil, nil)
	})
}

func TestContextEnds(t *testing.T) {
	gaveUp := errors.New("gave up")
	o, _ := offer()
	ctx, cancel := context.WithCancelCause(t.Context())
	n := asks("tech")
	n.Waiting = func(record.KeyID) { cancel(gaveUp) }
	r := converse(ctx, o, func(ctx context.Context, _ Request) ([]byte, error) {
		<-ctx.Done()
		return nil, context.Cause(ctx)
	}, n, right, -1, -1)
	// Both ends give up at once; the newcomer may hear of the lead's end before it sees its own.
	if !errors.Is(r.lead, gaveUp) || !errors.Is(r.joined, ErrFailed) && !(errors.Is(r.joined, gaveUp) && errors.Is(r.joined, ErrCut)) {
		t.Errorf("lead: %v; newcomer: %v", r.lead, r.joined)
	}

	// A stream without deadlines is closed.
	o, _ = offer()
	p, q := io.Pipe()
	defer q.Close()
	done, stop := context.WithCancelCause(t.Context())
	stop(gaveUp)
	_, err := o.Serve(done, struct {
		io.ReadCloser
		io.Writer
	}{p, io.Discard}, binding, never(t))
	if !errors.Is(err, gaveUp) {
		t.Error(err)
	}
}

func FuzzServe(f *testing.F) {
	o, _ := offer()
	r := converse(context.Background(), o, yes, asks("tech"), right, -1, -1)
	f.Add(r.byNo)
	f.Add(r.byLead)
	f.Add([]byte{})
	f.Add([]byte{0, 0, 0, 1, 0x80})
	f.Fuzz(func(t *testing.T, data []byte) {
		o, _ := offer()
		if _, err := o.Serve(t.Context(), recorded{bytes.NewReader(data)}, binding, never(t)); err == nil {
			t.Error("let in")
		}
	})
}

func FuzzJoin(f *testing.F) {
	o, _ := offer()
	r := converse(context.Background(), o, yes, asks("tech"), right, -1, -1)
	f.Add(r.byLead)
	f.Add(r.byNo)
	f.Add([]byte{})
	f.Fuzz(func(t *testing.T, data []byte) {
		if w, err := asks("tech").join(t.Context(), recorded{bytes.NewReader(data)}, binding, right); err == nil {
			t.Errorf("was given %q", w.Payload)
		}
	})
}

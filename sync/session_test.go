package sync_test

import (
	"bytes"
	"context"
	"crypto/ed25519"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"iter"
	"net"
	"slices"
	"strings"
	stdsync "sync"
	"testing"
	"testing/synctest"
	"time"

	"github.com/klauspost/compress/zstd"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/sync"
)

// shelf is a book in memory: a set of entries in the order they came, which is causal.
type shelf struct {
	id record.BookID

	mu  stdsync.Mutex
	all []record.Verified
	ids map[record.ID]bool
}

func newShelf(id record.BookID, vs ...record.Verified) *shelf {
	s := &shelf{id: id, ids: map[record.ID]bool{}}
	if _, err := s.Merge(context.Background(), vs); err != nil {
		panic(err)
	}
	return s
}

func (s *shelf) ID() record.BookID { return s.id }

func (s *shelf) Frontier() []ledger.LineHead {
	s.mu.Lock()
	defer s.mu.Unlock()
	followed := map[record.ID]bool{}
	for _, v := range s.all {
		followed[v.Entry().Prev] = true
	}
	var heads []ledger.LineHead
	for _, v := range s.all {
		if !followed[v.ID()] {
			heads = append(heads, ledger.LineHead{Key: v.Key(), Seq: v.Entry().Seq, ID: v.ID()})
		}
	}
	slices.SortFunc(heads, func(a, b ledger.LineHead) int {
		if c := bytes.Compare(a.Key[:], b.Key[:]); c != 0 {
			return c
		}
		return bytes.Compare(a.ID[:], b.ID[:])
	})
	return heads
}

func (s *shelf) Fingerprint() [32]byte {
	h := sha256.New()
	h.Write(s.id[:])
	for _, l := range s.Frontier() {
		h.Write(l.Key[:])
		h.Write(binary.BigEndian.AppendUint64(nil, l.Seq))
		h.Write(l.ID[:])
	}
	return [32]byte(h.Sum(nil))
}

func (s *shelf) Missing(_ context.Context, have []ledger.LineHead) iter.Seq2[record.Verified, error] {
	s.mu.Lock()
	all := slices.Clone(s.all)
	top := map[record.KeyID]uint64{}
	for _, v := range all {
		top[v.Key()] = max(top[v.Key()], v.Entry().Seq)
	}
	forked := map[record.KeyID]bool{}
	numbers := map[record.KeyID]map[uint64]bool{}
	for _, v := range all {
		k, seq := v.Key(), v.Entry().Seq
		if numbers[k] == nil {
			numbers[k] = map[uint64]bool{}
		}
		forked[k] = forked[k] || numbers[k][seq]
		numbers[k][seq] = true
	}
	upTo := map[record.KeyID]uint64{}
	for _, h := range have {
		if _, twice := upTo[h.Key]; twice || !s.ids[h.ID] && h.Seq <= top[h.Key] {
			upTo[h.Key] = 0 // forked: the whole line
		} else {
			upTo[h.Key] = h.Seq
		}
	}
	s.mu.Unlock()
	return func(yield func(record.Verified, error) bool) {
		for _, v := range all {
			if (forked[v.Key()] || v.Entry().Seq > upTo[v.Key()]) && !yield(v, nil) {
				return
			}
		}
	}
}

func (s *shelf) Merge(_ context.Context, vs []record.Verified) (ledger.Changes, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	var c ledger.Changes
	for _, v := range vs {
		switch {
		case s.ids[v.ID()]:
			c.Held++
		case v.Entry().Seq > 1 && !s.ids[v.Entry().Prev]:
			c.Waiting++
		default:
			s.ids[v.ID()] = true
			s.all = append(s.all, v)
			c.Added = append(c.Added, v.ID())
		}
	}
	return c, nil
}

func (s *shelf) len() int {
	s.mu.Lock()
	defer s.mu.Unlock()
	return len(s.all)
}

func key(name string) ed25519.PrivateKey {
	seed := sha256.Sum256([]byte(name))
	return ed25519.NewKeyFromSeed(seed[:])
}

func sign(t testing.TB, k ed25519.PrivateKey, book record.BookID, seq uint64, prev record.ID, serial string) record.Verified {
	t.Helper()
	v, err := record.Sign(k, book, record.Entry{
		Seq: seq, Prev: prev, Signed: record.Time{Unix: 1_700_000_000 + int64(seq)}, Clock: record.HLC{Wall: 1_700_000_000_000 + int64(seq)},
		Kind: "unit-registered", Body: record.UnitRegistered{Part: "ACC-1", Serial: serial},
	})
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func founding(t testing.TB) record.Verified {
	t.Helper()
	v, err := record.Sign(key("founder"), record.BookID{}, record.Entry{
		Seq: 1, Signed: record.Time{Unix: 1_700_000_000}, Clock: record.HLC{Wall: 1_700_000_000_000}, Kind: record.KindFounding,
		Body: record.Founding{Title: "Hangar 2", Name: "Founder", Roles: []record.Role{"lead"}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1},
	})
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// line signs n entries of one key, after prev of that seq.
func line(t testing.TB, name string, book record.BookID, n int, seq uint64, prev record.ID, salt string) []record.Verified {
	t.Helper()
	var vs []record.Verified
	for i := range n {
		v := sign(t, key(name), book, seq+1, prev, fmt.Sprintf("%s-%s-%d", name, salt, i))
		seq, prev = seq+1, v.ID()
		vs = append(vs, v)
	}
	return vs
}

type end struct {
	report sync.Report
	err    error
}

// meet runs a session between two books over a pipe; wrap may put something around a's end.
func meet(t testing.TB, a, b sync.Book, wrap func(io.ReadWriteCloser) io.ReadWriteCloser) (end, end) {
	t.Helper()
	pa, pb := net.Pipe()
	var left io.ReadWriteCloser = pa
	if wrap != nil {
		left = wrap(pa)
	}
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	other := make(chan end, 1)
	go func() {
		r, err := (&sync.Session{Book: b}).Run(ctx, pb)
		other <- end{r, err}
	}()
	r, err := (&sync.Session{Book: a}).Run(ctx, left)
	return end{r, err}, <-other
}

func mustMeet(t *testing.T, a, b sync.Book) (sync.Report, sync.Report) {
	t.Helper()
	x, y := meet(t, a, b, nil)
	if x.err != nil || y.err != nil {
		t.Fatalf("meeting failed: %v, %v", x.err, y.err)
	}
	if a.Fingerprint() != b.Fingerprint() || !x.report.Equal || !y.report.Equal {
		t.Fatalf("books differ after the meeting: %+v, %+v", x.report, y.report)
	}
	return x.report, y.report
}

func TestConvergesBothWays(t *testing.T) {
	f := founding(t)
	id := record.BookID(f.ID())
	ann, ben := line(t, "ann", id, 700, 0, record.ID{}, ""), line(t, "ben", id, 40, 0, record.ID{}, "")
	a, b := newShelf(id, append([]record.Verified{f}, ann...)...), newShelf(id, append([]record.Verified{f}, ben...)...)
	ra, rb := mustMeet(t, a, b)
	if a.len() != 741 || b.len() != 741 {
		t.Errorf("entries held: %d and %d, want 741", a.len(), b.len())
	}
	if len(ra.Changes.Added) != 40 || len(rb.Changes.Added) != 700 || ra.PeerTook != 700 || rb.PeerTook != 40 {
		t.Errorf("reports: %d new here and %d there; %d and %d the other side says", len(ra.Changes.Added), len(rb.Changes.Added), rb.PeerTook, ra.PeerTook)
	}
	if k := ann[0].Key(); ra.Sent[k] != 700 || rb.Received[k] != 700 || ra.Refused+rb.Refused != 0 {
		t.Errorf("ann's line: %d sent, %d received", ra.Sent[k], rb.Received[k])
	}
}

func TestEmptyCopyGetsAll(t *testing.T) {
	f := founding(t)
	id := record.BookID(f.ID())
	a, b := newShelf(id, append([]record.Verified{f}, line(t, "ann", id, 5, 0, record.ID{}, "")...)...), newShelf(id)
	mustMeet(t, b, a)
}

type counter struct {
	io.ReadWriteCloser
	n *int
}

func (c counter) Write(p []byte) (int, error) {
	n, err := c.ReadWriteCloser.Write(p)
	*c.n += n
	return n, err
}

func TestEqualBooksSayLittle(t *testing.T) {
	f := founding(t)
	id := record.BookID(f.ID())
	vs := append([]record.Verified{f}, line(t, "ann", id, 300, 0, record.ID{}, "")...)
	var sent int
	x, y := meet(t, newShelf(id, vs...), newShelf(id, vs...), func(rw io.ReadWriteCloser) io.ReadWriteCloser { return counter{rw, &sent} })
	if x.err != nil || y.err != nil || !x.report.Equal || !y.report.Equal {
		t.Fatalf("%+v %+v", x, y)
	}
	if sent >= 512 { // one direction of the 1 KiB meant for both
		t.Errorf("equal books: %d bytes one way", sent)
	}
}

func TestForkReachesBothSides(t *testing.T) {
	f := founding(t)
	id := record.BookID(f.ID())
	stem := append([]record.Verified{f}, line(t, "ann", id, 3, 0, record.ID{}, "")...)
	tip := stem[3].ID()
	for _, n := range [][2]int{{1, 1}, {1, 4}, {4, 1}} {
		a := newShelf(id, append(slices.Clone(stem), line(t, "ann", id, n[0], 3, tip, "left")...)...)
		b := newShelf(id, append(slices.Clone(stem), line(t, "ann", id, n[1], 3, tip, "right")...)...)
		mustMeet(t, a, b)
		if want := 4 + n[0] + n[1]; a.len() != want || b.len() != want {
			t.Errorf("branches of %v: %d and %d entries, want %d", n, a.len(), b.len(), want)
		}
	}
}

func TestThreeInAChain(t *testing.T) {
	f := founding(t)
	id := record.BookID(f.ID())
	a := newShelf(id, append([]record.Verified{f}, line(t, "ann", id, 9, 0, record.ID{}, "")...)...)
	b := newShelf(id, f)
	c := newShelf(id, append([]record.Verified{f}, line(t, "cy", id, 7, 0, record.ID{}, "")...)...)
	mustMeet(t, a, b)
	mustMeet(t, b, c)
	mustMeet(t, b, a)
	if a.len() != 17 || a.Fingerprint() != c.Fingerprint() {
		t.Errorf("a holds %d of 17, c %d", a.len(), c.len())
	}
}

func TestOtherBook(t *testing.T) {
	f := founding(t)
	a, b := newShelf(record.BookID(f.ID()), f), newShelf(record.BookID{1})
	x, y := meet(t, a, b, nil)
	for _, e := range []end{x, y} {
		if !errors.Is(e.err, sync.ErrOtherBook) && !errors.Is(e.err, sync.ErrCut) || len(e.report.Sent) > 0 {
			t.Errorf("%v, sent %v", e.err, e.report.Sent)
		}
	}
	if !errors.Is(x.err, sync.ErrOtherBook) && !errors.Is(y.err, sync.ErrOtherBook) {
		t.Error("neither side says why")
	}
}

// cutter breaks the stream after so many written bytes.
type cutter struct {
	io.ReadWriteCloser
	left int
	cut  bool
}

func (c *cutter) Write(p []byte) (int, error) {
	if len(p) <= c.left {
		c.left -= len(p)
		return c.ReadWriteCloser.Write(p)
	}
	n, err := c.ReadWriteCloser.Write(p[:c.left])
	c.left, c.cut = 0, true
	return n, errors.Join(err, c.Close(), io.ErrClosedPipe)
}

func TestCutAtEveryByteThenResume(t *testing.T) {
	f := founding(t)
	id := record.BookID(f.ID())
	left := append([]record.Verified{f}, line(t, "ann", id, 3, 0, record.ID{}, "")...)
	right := append([]record.Verified{f}, line(t, "ben", id, 2, 0, record.ID{}, "")...)
	var whole int
	if x, y := meet(t, newShelf(id, left...), newShelf(id, right...), func(rw io.ReadWriteCloser) io.ReadWriteCloser { return counter{rw, &whole} }); x.err != nil || y.err != nil {
		t.Fatal(x.err, y.err)
	}
	stride := 1
	if testing.Short() {
		stride = 7
	}
	for at := 0; at < whole; at += stride {
		a, b := newShelf(id, left...), newShelf(id, right...)
		c := &cutter{left: at}
		x, y := meet(t, a, b, func(rw io.ReadWriteCloser) io.ReadWriteCloser { c.ReadWriteCloser = rw; return c })
		if !c.cut { // receipts run together now and then, and the whole is a little shorter
			continue
		}
		if x.err == nil && !x.report.Equal { // in the farewell a cut costs nothing
			t.Fatalf("cut at %d of %d: no error here", at, whole)
		}
		if y.err != nil && !errors.Is(y.err, sync.ErrCut) {
			t.Fatalf("cut at %d: %v", at, y.err)
		}
		if a.len() != 4+len(x.report.Changes.Added) || b.len() != 3+len(y.report.Changes.Added) {
			t.Fatalf("cut at %d: reports and books differ", at)
		}
		had := b.len()
		_, rb := mustMeet(t, a, b)
		if a.len() != 6 || len(rb.Changes.Added) != 6-had {
			t.Fatalf("cut at %d: resumed with %d new, %d were held", at, len(rb.Changes.Added), had)
		}
	}
}

// hostile speaks the greeting of book, then sends what say writes, then reads until the other side ends.
func hostile(t *testing.T, b *shelf, say func(w io.Writer)) (sync.Report, error) {
	t.Helper()
	pa, pb := net.Pipe()
	done := make(chan struct{})
	go func() {
		defer close(done)
		go io.Copy(io.Discard, pa)
		enc, err := zstd.NewWriter(pa, zstd.WithWindowSize(1<<18))
		if err != nil {
			panic(err)
		}
		hash := sha256.Sum256(append([]byte("chargehand meeting 1 "), b.id[:]...))
		enc.Write(frame(1, append(append([]byte{1}, hash[:]...), make([]byte, 32)...)))
		enc.Write(frame(2, nil))
		say(enc)
		enc.Flush()
	}()
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	r, err := (&sync.Session{Book: b}).Run(ctx, pb)
	<-done
	pa.Close()
	return r, err
}

func frame(kind byte, p []byte) []byte {
	return append(binary.BigEndian.AppendUint32([]byte{kind}, uint32(len(p))), p...)
}

func entries(raws ...[]byte) []byte {
	var p []byte
	for _, r := range raws {
		p = append(binary.BigEndian.AppendUint16(p, uint16(len(r))), r...)
	}
	return p
}

func TestGarbageIsRefusedAndWhatVerifiesKept(t *testing.T) {
	f := founding(t)
	id := record.BookID(f.ID())
	vs := line(t, "ann", id, 3, 0, record.ID{}, "")
	foreign := sign(t, key("ann"), record.BookID{9}, 1, record.ID{}, "x")
	forged := bytes.Clone(vs[2].Raw())
	forged[len(forged)-1] ^= 1

	t.Run("bad signature", func(t *testing.T) {
		b := newShelf(id, f)
		r, err := hostile(t, b, func(w io.Writer) { w.Write(frame(3, entries(vs[0].Raw(), forged, vs[1].Raw()))) })
		if !errors.Is(err, sync.ErrGarbage) || r.Refused != 1 || b.len() != 3 {
			t.Errorf("%v; refused %d, held %d", err, r.Refused, b.len())
		}
	})
	t.Run("entry of another book", func(t *testing.T) {
		b := newShelf(id, f)
		if _, err := hostile(t, b, func(w io.Writer) { w.Write(frame(3, entries(foreign.Raw()))) }); !errors.Is(err, sync.ErrGarbage) || b.len() != 1 {
			t.Errorf("%v, held %d", err, b.len())
		}
	})
	for name, bad := range map[string][]byte{
		"unknown kind":               frame(77, nil),
		"frontier of odd size":       frame(3, []byte{0}),
		"entry longer than batch":    frame(3, []byte{1, 0, 1}),
		"greeting again":             frame(1, make([]byte, 65)),
		"batch announces 4 GiB":      {3, 0xff, 0xff, 0xff, 0xff},
		"batch one byte too long":    {3, 0, 0x10, 0, 1},
		"receipt too short":          frame(5, []byte{1}),
		"batch after the end":        append(frame(4, nil), frame(3, entries(vs[0].Raw()))...),
		"end with payload announced": {4, 0, 0, 0, 1},
	} {
		t.Run(name, func(t *testing.T) {
			b := newShelf(id, f)
			_, err := hostile(t, b, func(w io.Writer) { w.Write(frame(3, entries(vs[0].Raw()))); w.Write(bad) })
			if !errors.Is(err, sync.ErrGarbage) || b.len() != 2 {
				t.Errorf("%v; held %d, want 2", err, b.len())
			}
		})
	}
	t.Run("not even compressed", func(t *testing.T) {
		pa, pb := net.Pipe()
		go io.Copy(io.Discard, pa)
		go pa.Write([]byte(strings.Repeat("GET / HTTP/1.1\r\n", 20)))
		if _, err := (&sync.Session{Book: newShelf(id, f)}).Run(t.Context(), pb); !errors.Is(err, sync.ErrGarbage) {
			t.Error(err)
		}
	})
}

func TestEntryWithoutItsCauseWaits(t *testing.T) {
	f := founding(t)
	id := record.BookID(f.ID())
	vs := line(t, "ann", id, 2, 0, record.ID{}, "")
	b := newShelf(id, f)
	r, _ := hostile(t, b, func(w io.Writer) { w.Write(frame(3, entries(vs[1].Raw()))); w.Write(frame(77, nil)) })
	if r.Changes.Waiting != 1 || b.len() != 1 {
		t.Errorf("%+v", r.Changes)
	}
}

func TestSilentPeer(t *testing.T) {
	f := founding(t)
	synctest.Test(t, func(t *testing.T) {
		pa, pb := net.Pipe()
		defer pa.Close()
		began := time.Now()
		_, err := (&sync.Session{Book: newShelf(record.BookID(f.ID()), f), Idle: 20 * time.Second}).Run(t.Context(), pb)
		if !errors.Is(err, sync.ErrIdle) || time.Since(began) != 20*time.Second {
			t.Errorf("%v after %v", err, time.Since(began))
		}
	})
}

func TestCallerGivesUp(t *testing.T) {
	f := founding(t)
	why := errors.New("the lid was closed")
	ctx, cancel := context.WithCancelCause(t.Context())
	pa, pb := net.Pipe()
	defer pa.Close()
	go func() {
		io.ReadFull(pa, make([]byte, 10))
		cancel(why)
	}()
	if _, err := (&sync.Session{Book: newShelf(record.BookID(f.ID()), f)}).Run(ctx, pb); !errors.Is(err, why) {
		t.Error(err)
	}
}

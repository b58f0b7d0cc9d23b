// Package sync brings two copies of a book together: a conversation over any stream of bytes. It knows no network (package
// sync/lan brings one) and no meaning of entries; it asks the book what the peer lacks and hands it what verifies.
//
// The conversation goes in rounds, both ways at once, in frames (see frame.go) inside one zstd stream a direction:
//
//	hello  protocol version, SHA-256 of the book's id, fingerprint. Equal fingerprints: the meeting is over.
//	heads  the frontier: key, sequence and id of the newest entry of each line
//	batch  the entries that the other side lacks, causes before effects, in bounded batches; then end
//	took   the receiver's running receipt: new, held already, waiting for an entry that they name
//	bye    the sender has read the peer's last word; whoever has read this may hang up
//
// Nobody hangs up before the other's bye: a connection closed with bytes on their way would take the peer's last frame with it.
//
// A round that moved anything is followed by another, which as a rule finds equal books. Where a line is forked the first
// round may carry one branch only: the second, in which both know of both, carries the other.
//
// A batch is merged before the next is read, so a cut loses at most the batch under way, and the next meeting goes on from there. The
// stream must be private already: the frames are not encrypted here.
//
// Rules for change: kinds of frames and their layouts do not change within a version; a laptop refuses another version.
package sync

import (
	"bufio"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io"
	"iter"
	"runtime"
	"time"

	"github.com/klauspost/compress/zstd"
	"golang.org/x/sync/errgroup"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// Errors a caller decides on.
var (
	ErrVersion   = errors.New("another protocol version")
	ErrOtherBook = errors.New("the peer holds another book")
	ErrGarbage   = errors.New("the peer sent what is no part of a meeting")
	ErrCut       = errors.New("the meeting was cut off")
	ErrIdle      = errors.New("the peer fell silent")
)

// Book is what a meeting needs of a book. *ledger.Book is one.
type Book interface {
	ID() record.BookID
	// Fingerprint is equal in two copies only when they hold the same entries.
	Fingerprint() [32]byte
	// Frontier returns the newest entry of each line; of a forked line, each branch's.
	Frontier() []ledger.LineHead
	// Missing yields, causes before effects, what a copy with that frontier lacks. What it cannot know (where a line parts from
	// the peer's) it yields too: entries that are held already do no harm.
	Missing(ctx context.Context, have []ledger.LineHead) iter.Seq2[record.Verified, error]
	// Merge takes entries in and returns when they are safe. It gets verified entries only, of which the causes may be missing.
	Merge(ctx context.Context, entries []record.Verified) (ledger.Changes, error)
}

// Session says how to meet.
type Session struct {
	Book Book
	Idle time.Duration // without a byte either way for so long the meeting ends with ErrIdle; 0 means 30 s
}

// Report says what a meeting did. After an error it says what was done until then.
type Report struct {
	Sent, Received  map[record.KeyID]int // entries per line, as written to and as verified from the peer
	PeerTook        int                  // entries that the peer says were new to it
	Refused         int                  // entries received that did not verify
	Changes         ledger.Changes       // what was new here
	Fingerprint     [32]byte             // of this copy, when last compared
	PeerFingerprint [32]byte             // as the peer last stated it
	Equal           bool                 // both hold the same entries
}

// Run meets the peer at the other end of rw, and closes rw. It returns when both hold the same, when another round would move
// nothing, or with the reason why it stopped: one of the errors above, the context's cause, or the book's own error. What was
// merged stays merged.
func (s *Session) Run(ctx context.Context, rw io.ReadWriteCloser) (Report, error) {
	idle := s.Idle
	if idle == 0 {
		idle = 30 * time.Second
	}
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	closed := make(chan struct{})
	context.AfterFunc(ctx, func() { rw.Close(); close(closed) }) // frees a blocked half when the other or the caller gives up
	watchdog := time.AfterFunc(idle, func() { cancel(ErrIdle) })
	defer watchdog.Stop()
	alive := &stream{rw, func() { watchdog.Reset(idle) }}

	c := &conversation{book: s.Book, cancel: cancel, report: Report{Sent: map[record.KeyID]int{}, Received: map[record.KeyID]int{}}}
	err := c.open(alive)
	if err == nil {
		if err = c.run(ctx); err == nil {
			c.farewell()
		}
		c.dec.Close()
	}
	if cause := context.Cause(ctx); cause != nil && err != nil {
		err = cause // else the caller reads "closed pipe" where the truth is "deadline"
	}
	cancel(nil)
	<-closed
	if errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) || errors.Is(err, io.ErrClosedPipe) {
		err = fmt.Errorf("%w: %w", ErrCut, err)
	}
	if err != nil {
		return c.report, fmt.Errorf("merge: %w", err)
	}
	return c.report, nil
}

// stream tells of every byte that passes.
type stream struct {
	rw    io.ReadWriter
	alive func()
}

func (s *stream) Read(p []byte) (int, error) {
	n, err := s.rw.Read(p)
	if n > 0 {
		s.alive()
	}
	return n, err
}

func (s *stream) Write(p []byte) (int, error) {
	n, err := s.rw.Write(p)
	if n > 0 {
		s.alive()
	}
	return n, err
}

type conversation struct {
	book     Book
	cancel   context.CancelCauseFunc // closes the stream
	enc      *zstd.Encoder
	dec      *zstd.Decoder
	in       *bufio.Reader
	report   Report // Sent belongs to the sending half while a round runs, the rest to the receiving half
	received int
}

func (c *conversation) open(rw io.ReadWriter) (err error) {
	c.enc, err = zstd.NewWriter(rw, zstd.WithEncoderConcurrency(1), zstd.WithWindowSize(window), zstd.WithLowerEncoderMem(true))
	if err != nil {
		return err
	}
	c.dec, err = zstd.NewReader(bufio.NewReaderSize(rw, 64<<10), zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true),
		zstd.WithDecoderMaxWindow(window))
	if err != nil {
		return err
	}
	c.in = bufio.NewReader(c.dec)
	return nil
}

func (c *conversation) run(ctx context.Context) error {
	for range maxRounds {
		var theirs hello
		mine := hello{sha256.Sum256(append([]byte("chargehand meeting 1 "), idOf(c.book)...)), c.book.Fingerprint()}
		err := c.both(
			func() error { return c.write(frameHello, mine.encode()) },
			func() (err error) {
				p, err := c.expect(frameHello)
				if err == nil {
					theirs, err = parseHello(p)
				}
				return err
			})
		if err != nil {
			return err
		}
		if theirs.book != mine.book {
			return ErrOtherBook
		}
		c.report.Fingerprint, c.report.PeerFingerprint = mine.fingerprint, theirs.fingerprint
		if mine.fingerprint == theirs.fingerprint {
			c.report.Equal = true
			return nil
		}
		moved, err := c.round(ctx)
		if err != nil {
			return err
		}
		if !moved { // they differ, and neither has anything for the other: one holds back, or waits for a third
			return nil
		}
	}
	return nil
}

// farewell waits until the peer has read all. The outcome stands by now: an error here changes nothing.
func (c *conversation) farewell() {
	_ = c.both(
		func() error { return c.write(frameBye, nil) },
		func() error { _, err := c.expect(frameBye); return err })
}

func idOf(b Book) []byte { id := b.ID(); return id[:] }

// round exchanges frontiers and what follows from them, and tells whether anything was new on either side.
func (c *conversation) round(ctx context.Context) (moved bool, err error) {
	var theirs []ledger.LineHead
	err = c.both(
		func() error {
			mine := c.book.Frontier()
			if len(mine) > maxLines {
				return fmt.Errorf("the book has %d lines, a meeting carries %d", len(mine), maxLines)
			}
			return c.write(frameHeads, encodeHeads(mine))
		},
		func() error {
			p, err := c.expect(frameHeads)
			if err == nil {
				theirs, err = parseHeads(p)
			}
			return err
		})
	if err != nil {
		return false, err
	}
	var mine, peer took
	// One receipt waits at most, and a newer one replaces it: the receiving half never waits for the sending half, else two
	// laptops that both have much to send would stand still.
	receipts := make(chan took, 1)
	err = c.both(
		func() error { return c.send(ctx, theirs, receipts) },
		func() (err error) { mine, peer, err = c.receive(ctx, receipts); return err })
	return mine.added > 0 || peer.added > 0, err
}

// both runs the two halves side by side, or two polite peers wait for each other. The first error closes the stream, which
// frees the other half.
func (c *conversation) both(halves ...func() error) error {
	var g errgroup.Group
	for _, half := range halves {
		g.Go(func() error {
			err := half()
			if err != nil {
				c.cancel(err)
			}
			return err
		})
	}
	return g.Wait()
}

func (c *conversation) write(kind byte, payload []byte) error {
	if err := writeFrame(c.enc, kind, payload); err != nil {
		return err
	}
	return c.enc.Flush()
}

func (c *conversation) read() (byte, []byte, error) {
	kind, p, err := readFrame(c.in)
	if errors.Is(err, zstd.ErrMagicMismatch) || errors.Is(err, zstd.ErrReservedBlockType) || errors.Is(err, zstd.ErrWindowSizeExceeded) ||
		errors.Is(err, zstd.ErrDecoderSizeExceeded) || errors.Is(err, zstd.ErrCompressedSizeTooBig) || errors.Is(err, zstd.ErrBlockTooSmall) {
		err = fmt.Errorf("%w: %w", ErrGarbage, err)
	}
	return kind, p, err
}

func (c *conversation) expect(kind byte) ([]byte, error) {
	got, p, err := c.read()
	if err == nil && got != kind {
		err = fmt.Errorf("%w: frame of kind %d where %d is due", ErrGarbage, got, kind)
	}
	return p, err
}

func (c *conversation) send(ctx context.Context, have []ledger.LineHead, receipts <-chan took) error {
	var batch []byte
	n, limit := 0, firstBatch
	last := false // the last receipt may be due before the last batch
	receipt := func(t took) error {
		last = t.last
		return c.write(frameTook, t.encode())
	}
	flush := func() error {
		if n == 0 {
			return nil
		}
		if err := c.write(frameBatch, batch); err != nil {
			return err
		}
		batch, n, limit = batch[:0], 0, min(2*limit, maxPerBatch) // small ones first: a slow link keeps something early
		select {
		case t := <-receipts:
			return receipt(t)
		default:
			return nil
		}
	}
	for v, err := range c.book.Missing(ctx, have) {
		if err != nil {
			return err
		}
		raw := v.Raw()
		if n == limit || len(batch)+2+len(raw) > maxBatch {
			if err := flush(); err != nil {
				return err
			}
		}
		batch = appendEntry(batch, raw)
		n++
		c.report.Sent[v.Key()]++
	}
	if err := flush(); err != nil {
		return err
	}
	if err := c.write(frameEnd, nil); err != nil {
		return err
	}
	for !last {
		select {
		case t := <-receipts:
			if err := receipt(t); err != nil {
				return err
			}
		case <-ctx.Done():
			return context.Cause(ctx)
		}
	}
	return nil
}

// receive takes the peer's entries and receipts until both sides are through with the round.
func (c *conversation) receive(ctx context.Context, receipts chan took) (mine, peer took, err error) {
	post := func() {
		select {
		case <-receipts:
		default:
		}
		receipts <- mine
	}
	for !mine.last || !peer.last {
		kind, p, err := c.read()
		if err != nil {
			return mine, peer, err
		}
		switch {
		case kind == frameBatch && !mine.last:
			if err := c.take(ctx, p, &mine); err != nil {
				return mine, peer, err
			}
			post()
		case kind == frameEnd && !mine.last:
			mine.last = true
			post()
		case kind == frameTook && !peer.last:
			now, err := parseTook(p)
			if err != nil {
				return mine, peer, err
			}
			if now.added < peer.added {
				return mine, peer, fmt.Errorf("%w: receipt for %d entries after one for %d", ErrGarbage, now.added, peer.added)
			}
			c.report.PeerTook += int(now.added - peer.added)
			peer = now
		default:
			return mine, peer, fmt.Errorf("%w: frame of kind %d out of turn", ErrGarbage, kind)
		}
	}
	return mine, peer, nil
}

// take merges what verifies of a batch, also when the rest does not; then the error says what the first bad entry was.
func (c *conversation) take(ctx context.Context, p []byte, t *took) error {
	raws, bad := parseBatch(p)
	if c.received += len(raws); c.received > maxPerSession {
		return fmt.Errorf("%w: more than %d entries; meet again for the rest", ErrCut, maxPerSession)
	}
	good, refused, err := verify(raws, c.book.ID())
	c.report.Refused += refused
	if err != nil {
		bad = fmt.Errorf("%w: %w", ErrGarbage, err)
	}
	changes, err := c.book.Merge(ctx, good)
	if err != nil {
		return err
	}
	for _, v := range good {
		c.report.Received[v.Key()]++
	}
	c.report.Changes.Added = append(c.report.Changes.Added, changes.Added...)
	c.report.Changes.Held += changes.Held
	c.report.Changes.Waiting += changes.Waiting
	t.added += uint32(len(changes.Added))
	t.held += uint32(changes.Held)
	t.waiting += uint32(changes.Waiting)
	return bad
}

// verify checks entries on all cores and returns the good ones in order, how many are bad, and the first bad one's error.
func verify(raws [][]byte, book record.BookID) (good []record.Verified, refused int, first error) {
	type result struct {
		v   record.Verified
		err error
	}
	results := make([]result, len(raws))
	workers := runtime.GOMAXPROCS(0)
	var g errgroup.Group
	for w := range workers {
		g.Go(func() error {
			for i := w; i < len(raws); i += workers {
				results[i].v, results[i].err = record.Verify(raws[i], book)
			}
			return nil
		})
	}
	g.Wait()
	good = make([]record.Verified, 0, len(raws))
	for i, r := range results {
		if r.err == nil {
			good = append(good, r.v)
			continue
		}
		if refused++; first == nil {
			first = fmt.Errorf("entry %d of the batch: %w", i+1, r.err)
		}
	}
	return good, refused, first
}

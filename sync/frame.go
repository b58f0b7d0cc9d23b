package sync

import (
	"bufio"
	"encoding/binary"
	"fmt"
	"io"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// Frame kinds. A frame is one byte of kind, four bytes of length (big-endian) and the payload.
const (
	frameHello = 1 // version, hash of the book's id, fingerprint
	frameHeads = 2 // the frontier: 72 bytes a line
	frameBatch = 3 // entries, each behind its length in two bytes
	frameEnd   = 4 // the sender has no more in this round
	frameTook  = 5 // what the receiver took so far in this round
	frameBye   = 6 // the sender has read all and will say no more
)

// Bounds on what a peer can make this laptop hold. A batch at its largest takes about three times maxBatch while it is verified.
const (
	version       = 1
	helloSize     = 1 + 32 + 32
	headSize      = 32 + 8 + 32
	tookSize      = 3*4 + 1
	maxLines      = 8192
	maxBatch      = 1 << 20
	maxPerBatch   = 4096
	firstBatch    = 256
	maxPerSession = 1 << 20
	maxRounds     = 8
	window        = 1 << 18
)

func maxPayload(kind byte) (int, bool) {
	switch kind {
	case frameHello:
		return helloSize, true
	case frameHeads:
		return maxLines * headSize, true
	case frameBatch:
		return maxBatch, true
	case frameEnd, frameBye:
		return 0, true
	case frameTook:
		return tookSize, true
	}
	return 0, false
}

func writeFrame(w io.Writer, kind byte, payload []byte) error {
	head := binary.BigEndian.AppendUint32([]byte{kind}, uint32(len(payload)))
	if _, err := w.Write(head); err != nil {
		return err
	}
	_, err := w.Write(payload)
	return err
}

// readFrame checks the length against the kind's bound before it allocates.
func readFrame(r *bufio.Reader) (kind byte, payload []byte, err error) {
	var head [5]byte
	if _, err := io.ReadFull(r, head[:]); err != nil {
		return 0, nil, err
	}
	kind, n := head[0], binary.BigEndian.Uint32(head[1:])
	limit, known := maxPayload(kind)
	if !known {
		return 0, nil, fmt.Errorf("%w: frame of unknown kind %d", ErrGarbage, kind)
	}
	if int64(n) > int64(limit) {
		return 0, nil, fmt.Errorf("%w: frame of kind %d announces %d bytes, %d is the most", ErrGarbage, kind, n, limit)
	}
	payload = make([]byte, n)
	if _, err := io.ReadFull(r, payload); err != nil {
		return 0, nil, err
	}
	return kind, payload, nil
}

type hello struct {
	book, fingerprint [32]byte
}

func (h hello) encode() []byte {
	return append(append([]byte{version}, h.book[:]...), h.fingerprint[:]...)
}

func parseHello(p []byte) (hello, error) {
	if len(p) > 0 && p[0] != version {
		return hello{}, fmt.Errorf("%w: the peer speaks version %d, this laptop %d", ErrVersion, p[0], version)
	}
	if len(p) != helloSize {
		return hello{}, fmt.Errorf("%w: greeting of %d bytes", ErrGarbage, len(p))
	}
	return hello{[32]byte(p[1:33]), [32]byte(p[33:])}, nil
}

func encodeHeads(heads []ledger.LineHead) []byte {
	p := make([]byte, 0, len(heads)*headSize)
	for _, h := range heads {
		p = append(p, h.Key[:]...)
		p = binary.BigEndian.AppendUint64(p, h.Seq)
		p = append(p, h.ID[:]...)
	}
	return p
}

func parseHeads(p []byte) ([]ledger.LineHead, error) {
	if len(p)%headSize != 0 {
		return nil, fmt.Errorf("%w: frontier of %d bytes", ErrGarbage, len(p))
	}
	heads := make([]ledger.LineHead, 0, len(p)/headSize)
	for ; len(p) > 0; p = p[headSize:] {
		heads = append(heads, ledger.LineHead{
			Key: record.KeyID(p[:32]),
			Seq: binary.BigEndian.Uint64(p[32:40]),
			ID:  record.ID(p[40:headSize]),
		})
	}
	return heads, nil
}

func appendEntry(batch, raw []byte) []byte {
	return append(binary.BigEndian.AppendUint16(batch, uint16(len(raw))), raw...)
}

// parseBatch returns slices of p.
func parseBatch(p []byte) ([][]byte, error) {
	var raws [][]byte
	for len(p) > 0 {
		if len(raws) == maxPerBatch {
			return raws, fmt.Errorf("%w: batch of more than %d entries", ErrGarbage, maxPerBatch)
		}
		if len(p) < 2 {
			return raws, fmt.Errorf("%w: batch ends within a length", ErrGarbage)
		}
		n := int(binary.BigEndian.Uint16(p))
		if n == 0 || n > record.MaxSize || n > len(p)-2 {
			return raws, fmt.Errorf("%w: entry of %d bytes in a batch with %d left", ErrGarbage, n, len(p)-2)
		}
		raws, p = append(raws, p[2:2+n:2+n]), p[2+n:]
	}
	return raws, nil
}

// took is what a receiver did with the entries of a round so far. last: the round is over for it.
type took struct {
	added, held, waiting uint32
	last                 bool
}

func (t took) encode() []byte {
	p := binary.BigEndian.AppendUint32(nil, t.added)
	p = binary.BigEndian.AppendUint32(p, t.held)
	p = binary.BigEndian.AppendUint32(p, t.waiting)
	if t.last {
		return append(p, 1)
	}
	return append(p, 0)
}

func parseTook(p []byte) (took, error) {
	if len(p) != tookSize || p[tookSize-1] > 1 {
		return took{}, fmt.Errorf("%w: receipt %x", ErrGarbage, p)
	}
	return took{
		added:   binary.BigEndian.Uint32(p),
		held:    binary.BigEndian.Uint32(p[4:]),
		waiting: binary.BigEndian.Uint32(p[8:]),
		last:    p[tookSize-1] == 1,
	}, nil
}

package sync

import (
	"bufio"
	"bytes"
	"testing"
)

// What the decoder accepts, the encoder would have written; what it refuses does no harm.
func FuzzFrame(f *testing.F) {
	f.Add([]byte{frameEnd, 0, 0, 0, 0})
	f.Add([]byte{frameBatch, 0, 0, 0, 3, 0, 1, 7})
	f.Add([]byte{frameBatch, 0xff, 0xff, 0xff, 0xff})
	f.Add(append([]byte{frameHeads, 0, 0, 0, headSize}, make([]byte, headSize)...))
	f.Add(append([]byte{frameHello, 0, 0, 0, helloSize, version}, make([]byte, helloSize-1)...))
	f.Add(append([]byte{frameTook, 0, 0, 0, tookSize}, make([]byte, tookSize)...))
	f.Fuzz(func(t *testing.T, data []byte) {
		kind, p, err := readFrame(bufio.NewReader(bytes.NewReader(data)))
		if err != nil {
			return
		}
		var again []byte
		switch kind {
		case frameHello:
			var h hello
			if h, err = parseHello(p); err == nil {
				again = h.encode()
			}
		case frameHeads:
			heads, e := parseHeads(p)
			if err = e; err == nil {
				again = encodeHeads(heads)
			}
		case frameBatch:
			raws, e := parseBatch(p)
			err = e
			for _, r := range raws {
				again = appendEntry(again, r)
			}
		case frameTook:
			var tk took
			if tk, err = parseTook(p); err == nil {
				again = tk.encode()
			}
		}
		if err != nil {
			return
		}
		if !bytes.Equal(again, p) {
			t.Fatalf("kind %d: %x written again as %x", kind, p, again)
		}
		var w bytes.Buffer
		if err := writeFrame(&w, kind, again); err != nil || !bytes.HasPrefix(data, w.Bytes()) {
			t.Fatalf("frame %x written again as %x", data, w.Bytes())
		}
	})
}

package keys

import (
	"crypto/sha256"
	"strings"

	"example.org/chargehand/ledger/record"
)

// Eight consonants that are hard to mistake for each other across a ramp (one of each pair such as b and p, m and n, s and f), and four
// vowels: five bits a syllable.
const (
	onsets = "bjklmrst"
	vowels = "aiou"
)

const (
	checkWords       = 5
	syllablesPerWord = 3
)

// Words returns the check words of a key, to be read aloud or compared by eye: five words of three syllables, 75 bits of the SHA-256 of the
// key. They never change for a key; to find another key with the same words takes about 2^75 tries.
func Words(k record.KeyID) string {
	sum := sha256.Sum256(append([]byte("chargehand key words 1\n"), k[:]...))
	bit := 0
	next := func(n int) (v int) {
		for range n {
			v = v<<1 | int(sum[bit/8]>>(7-bit%8)&1)
			bit++
		}
		return v
	}
	var b strings.Builder
	for i := range checkWords * syllablesPerWord {
		if i > 0 && i%syllablesPerWord == 0 {
			b.WriteByte(' ')
		}
		b.WriteByte(onsets[next(3)])
		b.WriteByte(vowels[next(2)])
	}
	return b.String()
}

package join

import (
	"errors"
	"fmt"
	"io"
	"strings"
	"unicode"

	"golang.org/x/crypto/scrypt"
)

// ErrCode means that a text is not a code: mistyped, most likely.
var ErrCode = errors.New("this is not a code")

// alphabet leaves out what is mistaken for something else on a screen, on paper or by ear: 0 O Q, 1 I L, Z for 2, S for 5, G for 6, B
// for 8, N for M, U and V for Y. That leaves 23 characters, a prime number, so that check characters are arithmetic in a field.
const (
	alphabet = "23456789ACDEFHJKMPRTWXY"
	base     = len(alphabet)
)

const (
	symbols  = 18 // at random: 23^18 is more than 2^81
	checks   = 2
	codeSize = symbols + checks
	group    = 4
)

// Code is a one-time code. Who knows it can ask to be let in, so it is shown to one person only; the lead still decides.
type Code struct{ s [symbols]byte } // each 0 to base-1

// NewCode draws a code, evenly from all there are.
func NewCode(random io.Reader) (Code, error) {
	const even = 256 / base * base // above it the low symbols would come up more often
	var c Code
	for i := range c.s {
		var b [1]byte
		for b[0] = 255; int(b[0]) >= even; {
			if _, err := io.ReadFull(random, b[:]); err != nil {
				return Code{}, fmt.Errorf("draw a code: %w", err)
			}
		}
		c.s[i] = b[0] % byte(base)
	}
	return c, nil
}

// String writes the code in five groups of four, the last two characters being checks.
func (c Code) String() string {
	a, b := c.check()
	var out strings.Builder
	for i, v := range append(c.s[:], a, b) {
		if i > 0 && i%group == 0 {
			out.WriteByte('-')
		}
		out.WriteByte(alphabet[v])
	}
	return out.String()
}

// check solves for the last two characters: modulo 23, the sum of all twenty is zero, and so is their sum weighted by place, 1 to 20. A
// code with one or two characters wrong, or two swapped, breaks at least one of the two.
func (c Code) check() (a, b byte) {
	sum, weighted := 0, 0
	for i, v := range c.s {
		sum += int(v)
		weighted += (i + 1) * int(v)
	}
	// a + b = -sum and 19a + 20b = -weighted, hence b = 19 sum - weighted.
	y := ((symbols+1)*sum - weighted) % base
	x := (-sum - y) % base
	return byte((x + base) % base), byte((y + base) % base)
}

// Parse reads a code as people type it: in either case, with spaces, dashes or dots anywhere. Every error is ErrCode and says what is wrong
// without repeating the code.
func Parse(text string) (Code, error) {
	var got []byte
	for _, r := range text {
		if unicode.IsSpace(r) || unicode.Is(unicode.Pd, r) || r == '.' || r == '_' {
			continue
		}
		v := strings.IndexRune(alphabet, unicode.ToUpper(r))
		if v < 0 {
			return Code{}, fmt.Errorf("%w: %q is never in one, only %s are", ErrCode, r, alphabet)
		}
		if got = append(got, byte(v)); len(got) > codeSize {
			return Code{}, fmt.Errorf("%w: it has more than %d characters", ErrCode, codeSize)
		}
	}
	if len(got) < codeSize {
		return Code{}, fmt.Errorf("%w: it has %d of %d characters", ErrCode, len(got), codeSize)
	}
	c := Code{[symbols]byte(got)}
	if a, b := c.check(); a != got[symbols] || b != got[symbols+1] {
		return Code{}, fmt.Errorf("%w: a character is wrong or two are swapped", ErrCode)
	}
	if c == (Code{}) {
		return Code{}, errNoCode
	}
	return c, nil
}

// errNoCode guards against a Code that nobody drew: everybody knows the zero one.
var errNoCode = fmt.Errorf("%w: it is empty", ErrCode)

// Tag is what both laptops find each other by, for lan.JoinNetwork. It is stretched apart from the key of the proof, so that who sees
// names derived from it on the wire learns nothing of the code, and who guesses pays 32 MiB and about a tenth of a second a guess.
func (c Code) Tag() [32]byte { return c.stretch("chargehand join 1 tag") }

// secret is what both sides prove knowledge of.
func (c Code) secret() [32]byte { return c.stretch("chargehand join 1 proof") }

// stretch is scrypt (RFC 7914) with N = 2^15, r = 8, p = 1. The purpose stands for the salt: a code has more than 81 bits and lives for
// minutes, so there is nothing to compute in advance.
func (c Code) stretch(purpose string) [32]byte {
	k, err := scrypt.Key(c.s[:], []byte(purpose), 1<<15, 8, 1, 32)
	if err != nil {
		panic(err) // only for other parameters than these
	}
	return [32]byte(k)
}

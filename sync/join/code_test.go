package join

import (
	"bytes"
	"crypto/rand"
	"encoding/hex"
	"errors"
	"math"
	"regexp"
	"strings"
	"testing"
)

// one is the code whose symbols are 0, 1, 2 and so on to 17.
func one() (c Code) {
	for i := range c.s {
		c.s[i] = byte(i)
	}
	return c
}

func TestCodeIsLongAndEven(t *testing.T) {
	if bits := symbols * math.Log2(float64(base)); bits < 80 {
		t.Errorf("%.1f bits at random, 80 are due", bits)
	}
	// Bytes from 253 = 11 x 23 up are drawn again: with them the symbols 0 to 2 would come up more often.
	c, err := NewCode(bytes.NewReader(append([]byte{255, 253, 252}, bytes.Repeat([]byte{23}, symbols)...)))
	if err != nil || c.s[0] != 22 || c.s[1] != 0 {
		t.Errorf("%v, %v", c.s, err)
	}
	if _, err := NewCode(bytes.NewReader(make([]byte, symbols-1))); err == nil {
		t.Error("a code from too little randomness")
	}
	var count [base]int
	for range 1000 {
		c, err := NewCode(rand.Reader)
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range c.s {
			count[v]++
		}
	}
	for v, n := range count { // 18000/23 = 783 expected, standard deviation 27
		if n < 783-8*27 || n > 783+8*27 {
			t.Errorf("symbol %d came up %d times", v, n)
		}
	}
}

func TestCodeAsTyped(t *testing.T) {
	c, err := NewCode(rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	s := c.String()
	if !regexp.MustCompile(`^[` + alphabet + `]{4}(-[` + alphabet + `]{4}){4}$`).MatchString(s) {
		t.Errorf("a code of another form: %s", s)
	}
	for _, typed := range []string{
		s, strings.ToLower(s), strings.ReplaceAll(s, "-", ""), strings.ReplaceAll(s, "-", " "), strings.ReplaceAll(s, "-", "\u2013"),
		" " + strings.ReplaceAll(s, "-", " - ") + "\r\n", strings.Join(strings.Split(s, ""), "."),
	} {
		if got, err := Parse(typed); err != nil || got != c {
			t.Errorf("%q: %v, %v", typed, got, err)
		}
	}
	for _, bad := range []string{"", "-", s[:len(s)-1], s + "2", s[1:], strings.Replace(s, s[:1], "O", 1), s + "\x00", "é" + s, Code{}.String()} {
		if got, err := Parse(bad); !errors.Is(err, ErrCode) || got != (Code{}) {
			t.Errorf("%q: %v, %v", bad, got, err)
		}
		if _, err := Parse(bad); err != nil && len(bad) > 8 && strings.Contains(err.Error(), bad[2:8]) {
			t.Errorf("the error repeats the code: %v", err)
		}
	}
}

// Checks by trying them all: every one or two characters wrong, and every two swapped.
func TestCheckCharacters(t *testing.T) {
	right := []byte(strings.ReplaceAll(one().String(), "-", ""))
	wrong := func(text []byte) {
		if _, err := Parse(string(text)); err == nil {
			t.Errorf("%s passes beside %s", text, right)
		}
	}
	for i := range right {
		for j := range i {
			if right[i] != right[j] {
				swapped := bytes.Clone(right)
				swapped[i], swapped[j] = swapped[j], swapped[i]
				wrong(swapped)
			}
			for x := range base {
				for y := range base {
					text := bytes.Clone(right)
					text[i], text[j] = alphabet[x], alphabet[y]
					if !bytes.Equal(text, right) {
						wrong(text)
					}
				}
			}
		}
	}
}

func TestStretchedKeys(t *testing.T) {
	// Computed apart from this code, with Python's hashlib.scrypt (OpenSSL): password the bytes 0 to 17, n=32768, r=8, p=1.
	for _, c := range []struct {
		name string
		got  [32]byte
		want string
	}{
		{"tag", one().Tag(), "92d62dff6356914bea114f06c424a2696e8c43687eb0a13a16ed5d155c6eebd1"},
		{"proof", one().secret(), "cd1e1566183235695b6da3461f9dea9ae17987c0c4fa97938679a8c8a571e850"},
	} {
		if hex.EncodeToString(c.got[:]) != c.want {
			t.Errorf("%s: %x, want %s", c.name, c.got, c.want)
		}
	}
}

func FuzzParse(f *testing.F) {
	for _, s := range []string{one().String(), strings.ToLower(one().String()), "", "2222-2222", "0O1IL"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		c, err := Parse(s)
		if err != nil {
			if !errors.Is(err, ErrCode) {
				t.Errorf("%q: %v", s, err)
			}
			return
		}
		if again, err := Parse(c.String()); err != nil || again != c {
			t.Errorf("%q: %s, then %v", s, c, err)
		}
	})
}

package lan_test

import (
	"bytes"
	"context"
	"crypto/rand"
	"crypto/sha256"
	"encoding/base32"
	"encoding/base64"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"math/big"
	"net"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/sync/lan"
)

// exposed is a listening laptop with a real book, and everything that a stranger must not learn of it.
type exposed struct {
	*lan.Host
	secrets map[string][]byte
}

// expose opens a laptop whose book has a title, a founder's name and some units, and whose handler would say it all.
func expose(t *testing.T, title, name string, units int, o lan.Options) exposed {
	t.Helper()
	b, err := ledger.Found(t.TempDir(), key(title), record.Founding{Title: title, Name: name, Roles: []record.Role{record.RoleLead}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}, time.Now)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { b.Close() })
	for i := range units {
		if _, err := b.Author(key(title), ledger.Draft{Kind: record.KindUnitRegistered, Body: record.UnitRegistered{Part: "HA-40", Serial: fmt.Sprint(i)}}); err != nil {
			t.Fatal(err)
		}
	}
	book, print, secret, public := b.ID(), b.Fingerprint(), sha256.Sum256([]byte(title)), id(title)
	o.Network, err = lan.BookNetwork(secret)
	if err != nil {
		t.Fatal(err)
	}
	o.Key, o.Listen = key(title), []string{"127.0.0.1:0"}
	return exposed{open(t, o), map[string][]byte{
		"book": book[:], "fingerprint": print[:], "network secret": secret[:], "public key": public[:], "private key": key(title).Seed(),
		"title": []byte(title), "name": []byte(name), "service name": []byte(lan.ServiceName(o.Network)), "program": []byte("chargehand"),
		"multistream": []byte("multistream"), "noise": []byte("noise"), "yamux": []byte("yamux"),
	}}
}

// shows says in which form some bytes hold a secret, "" in none. A part of 8 bytes counts.
func shows(wire, secret []byte) string {
	part := secret
	if len(part) > 8 {
		part = part[:8]
	}
	for form, s := range map[string][]byte{
		"raw": part, "hex": []byte(hex.EncodeToString(part)), "HEX": []byte(strings.ToUpper(hex.EncodeToString(part))),
		"base58": []byte(base58(secret)), "base64": []byte(base64.RawStdEncoding.EncodeToString(secret))[:max(8*len(part)/6, 1)],
		"base64url": []byte(base64.RawURLEncoding.EncodeToString(secret))[:max(8*len(part)/6, 1)],
		"base32":    []byte(base32.StdEncoding.WithPadding(base32.NoPadding).EncodeToString(secret))[:max(8*len(part)/5, 1)],
	} {
		if bytes.Contains(wire, s) {
			return form
		}
	}
	return ""
}

// base58 is the usual writing of peers' ids.
func base58(b []byte) string {
	const digits = "123456789ABCDEFGHJKLMNPQRSTUVWXYZabcdefghijkmnopqrstuvwxyz"
	var s []byte
	for n, r := new(big.Int).SetBytes(b), new(big.Int); n.Sign() > 0; {
		n.DivMod(n, big.NewInt(58), r)
		s = append(s, digits[r.Int64()])
	}
	slices.Reverse(s)
	return string(s)
}

func TestShowsFindsASecretInAnyForm(t *testing.T) {
	secret := sha256.Sum256([]byte("x"))
	for _, s := range []string{string(secret[:]), hex.EncodeToString(secret[:]), base58(secret[:]), base64.StdEncoding.EncodeToString(secret[:]), base32.StdEncoding.EncodeToString(secret[:])} {
		if shows([]byte("before"+s+"after"), secret[:]) == "" {
			t.Errorf("%q was not found", s)
		}
	}
	// Source: the base58 writing of "Hello World!", from memory.
	if got := base58([]byte("Hello World!")); got != "2NEpo7TZRRrLZSi2U" {
		t.Errorf("base58: %s", got)
	}
}

// hostGreeting is what a host says by itself: the nonce of the network's cipher, 24 bytes, and the 20 of a greeting under it.
const hostGreeting = 24 + 20

// stranger connects by plain TCP, waits for what the host says by itself, then says its own and reads until the host hangs up. The
// error tells when it did not within 20 s.
func stranger(t *testing.T, at string, say []byte) []byte {
	t.Helper()
	c, err := net.Dial("tcp", at)
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	c.SetDeadline(time.Now().Add(20 * time.Second))
	got := make([]byte, hostGreeting)
	if _, err := io.ReadFull(c, got); err != nil {
		t.Fatalf("the host says less than %d bytes by itself: %v", len(got), err)
	}
	if _, err := c.Write(say); err != nil {
		t.Fatal(err)
	}
	rest, err := io.ReadAll(c)
	if n := net.Error(nil); errors.As(err, &n) && n.Timeout() {
		t.Errorf("the host did not hang up on a stranger who said %d bytes", len(say))
	}
	return append(got, rest...)
}

// A stranger on the same network, with a cable and no key: what it sees of two books is equally much, and is of neither. The
// host hangs up by its own patience.
func TestStrangerLearnsNothingFromTheWire(t *testing.T) {
	random := make([]byte, 512)
	rand.Read(random)
	handled := func(_ context.Context, who record.KeyID, rw io.ReadWriteCloser) {
		t.Errorf("a stranger reached the handler as %s", who)
		rw.Close()
	}
	hosts := []exposed{
		expose(t, "Dry Creek", "Lead One", 0, lan.Options{Handle: handled, Patience: 300 * time.Millisecond}),
		expose(t, "Hangar Two of the Northern Field", "Another Lead With A Longer Name", 40, lan.Options{Handle: handled, Patience: 300 * time.Millisecond}),
	}
	for _, x := range []struct {
		name string
		say  []byte
	}{
		{"says nothing", nil},
		{"says too little for a nonce", random[:5]},
		{"random bytes", random},
		{"a plain multistream greeting", bytes.Repeat([]byte("\x13/multistream/1.0.0\n"), 8)},
		{"a plain Noise request", append([]byte("\x13/multistream/1.0.0\n\x07/noise\n"), random[:34]...)},
		{"a web request", []byte("GET / HTTP/1.1\r\nHost: chargehand\r\n\r\n")},
	} {
		t.Run(x.name, func(t *testing.T) {
			var sizes []int
			for _, h := range hosts {
				got := stranger(t, h.Addrs()[0], x.say)
				sizes = append(sizes, len(got))
				h.assertHidden(t, got)
			}
			if sizes[0] != sizes[1] || sizes[0] > 64 {
				t.Errorf("%d bytes of one book, %d of another", sizes[0], sizes[1])
			}
			t.Logf("%d bytes", sizes[0])
		})
	}
	t.Run("two calls differ", func(t *testing.T) { // nothing by which to know the host again
		at := hosts[0].Addrs()[0]
		a, b := stranger(t, at, nil), stranger(t, at, nil)
		same := 0
		for i := range min(len(a), len(b)) {
			if a[i] == b[i] {
				same++
			}
		}
		if same > 8 { // of 44 random bytes 0.2 are equal on average
			t.Errorf("%d of %d bytes are the same at the second call", same, len(a))
		}
	})
	t.Run("the whole protocol with another network's key", func(t *testing.T) {
		var sizes []int
		for _, h := range hosts {
			at, sent := tap(t, h.Addrs()[0])
			other := open(t, lan.Options{Network: book(t, "another network"), Key: key("stranger")})
			if _, _, err := other.Dial(ctx(t), at); !errors.Is(err, lan.ErrNoAnswer) {
				t.Errorf("%v", err)
			}
			got := sent()
			sizes = append(sizes, len(got))
			h.assertHidden(t, got)
		}
		if sizes[0] != sizes[1] || sizes[0] > 64 {
			t.Errorf("%d bytes of one book, %d of another", sizes[0], sizes[1])
		}
		t.Logf("%d bytes", sizes[0])
	})
}

func (h exposed) assertHidden(t *testing.T, got []byte) {
	t.Helper()
	for what, secret := range h.secrets {
		if form := shows(got, secret); form != "" {
			t.Errorf("a stranger sees the %s, %s, in %x", what, form, got)
		}
	}
}

// tap passes one connection on to a host, the caller's bytes only after the host has begun; sent waits for its end and returns
// what the host sent.
func tap(t *testing.T, to string) (at string, sent func() []byte) {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { l.Close() })
	var got bytes.Buffer
	var all sync.WaitGroup
	all.Go(func() {
		caller, err := l.Accept()
		l.Close() // one connection only: a second try is refused
		if err != nil {
			return
		}
		defer caller.Close()
		host, err := net.Dial("tcp", to)
		if err != nil {
			return
		}
		defer host.Close()
		first := make([]byte, hostGreeting)
		if _, err := io.ReadFull(host, first); err != nil {
			return
		}
		got.Write(first)
		caller.Write(first)
		all.Go(func() {
			io.Copy(host, caller)
			host.(*net.TCPConn).CloseWrite()
		})
		io.Copy(io.MultiWriter(&got, caller), host)
	})
	return l.Addr().String(), func() []byte { all.Wait(); return got.Bytes() }
}

// A laptop that has the book's secret, but whose key was retired: it proves its key, is cut off before any stream, and gets not
// one byte of application data. What it got before is the handshake, in which the host proves its own key: that much the
// secret buys, until the book's secret is changed.
func TestRetiredKeyGetsNoStream(t *testing.T) {
	var sizes []int
	for title, units := range map[string]int{"Dry Creek": 0, "Hangar Two of the Northern Field": 40} {
		cut := make(chan string, 8)
		lead := expose(t, title, "Lead", units, lan.Options{
			Allow: only("tech"),
			Handle: func(_ context.Context, who record.KeyID, rw io.ReadWriteCloser) {
				t.Errorf("a stream from %s", who)
				rw.Close()
			},
			Log: slog.New(slog.NewTextHandler(writerFunc(func(p []byte) (int, error) { cut <- string(p); return len(p), nil }), nil)),
		})
		retired := open(t, lan.Options{Network: book(t, title), Key: key("retired")})
		// By the id, so that one connection is made: the tap takes one.
		at, sent := tap(t, lead.Addrs()[0])
		host, port, _ := net.SplitHostPort(at)
		var app []byte
		_, rw, err := retired.Dial(ctx(t), "/ip4/"+host+"/tcp/"+port+"/p2p/"+lan.PeerID(id(title)))
		if err == nil { // the dialler may believe in the stream until it reads
			io.WriteString(rw, "hello")
			app, err = io.ReadAll(rw)
		}
		if err == nil || len(app) > 0 {
			t.Errorf("a retired laptop got %d bytes of application data, %v", len(app), err)
		}
		if line := <-cut; !strings.Contains(line, "may not be met") || !strings.Contains(line, lan.PeerID(id("retired"))) {
			t.Errorf("the host does not say whose key was proved: %s", line)
		}
		if c := lead.Connected(); len(c) > 0 {
			t.Errorf("still connected: %v", c)
		}
		got := sent()
		lead.assertHidden(t, got)
		sizes = append(sizes, len(got))
	}
	t.Logf("%d bytes of handshake, none of the book", sizes[0])
	if sizes[0] != sizes[1] {
		t.Errorf("%d bytes from one book's host, %d from another's", sizes[0], sizes[1])
	}
}

// The name under which a book's laptops find each other is derived from the book's secret by HKDF, of which it shows nothing; the
// book's id goes into it nowhere. What an announcement does show to everybody on the network: that a laptop runs a service of
// that name, its addresses and port, and the hand's public key as the peer's id. So a listener can tell that a laptop is there
// and know its key again, and which laptops share a book, but not which book.
func TestServiceNameTellsNoBook(t *testing.T) {
	one := expose(t, "Dry Creek", "Lead", 0, lan.Options{})
	secret := sha256.Sum256([]byte("Dry Creek"))
	near := secret
	near[31] ^= 1
	joining, err := lan.JoinNetwork(secret)
	if err != nil {
		t.Fatal(err)
	}
	fromID, err := lan.BookNetwork([32]byte(one.secrets["book"]))
	if err != nil {
		t.Fatal(err)
	}
	nearby, err := lan.BookNetwork(near)
	if err != nil {
		t.Fatal(err)
	}
	name := lan.ServiceName(book(t, "Dry Creek"))
	if name != string(one.secrets["service name"]) {
		t.Errorf("two laptops of one book call it %s and %s", name, one.secrets["service name"])
	}
	for what, other := range map[string]lan.Network{"another book": book(t, "Hangar Two"), "a secret one bit away": nearby, "a joining": joining, "the book's id in place of the secret": fromID} {
		if lan.ServiceName(other) == name {
			t.Errorf("%s has the same name %s", what, name)
		}
	}
	label, _, _ := strings.Cut(strings.TrimPrefix(name, "_"), ".")
	if len(label) != 15 || strings.Trim(label, "abcdefghijklmnopqrstuvwxyz234567") != "" { // RFC 6763, 7.2
		t.Errorf("the label %q", label)
	}
	for what, s := range one.secrets {
		if form := shows([]byte(strings.ToUpper(name)+name), s); form != "" && what != "service name" {
			t.Errorf("the name %s shows the %s, %s", name, what, form)
		}
	}
}

// What is announced is as the comment above says and no more, taken from the multicast itself.
func TestAnnouncementShowsNoBook(t *testing.T) {
	if !multicast(t) {
		t.Skip("SKIPPED, NOT PASSED: this machine delivers no multicast, so no announcement was looked at")
	}
	in, err := net.ListenMulticastUDP("udp4", nil, &net.UDPAddr{IP: net.IPv4(224, 0, 0, 251), Port: 5353})
	if err != nil {
		t.Fatal(err)
	}
	defer in.Close()
	h := expose(t, "Dry Creek", "Lead One", 3, lan.Options{})
	quiet := open(t, lan.Options{Network: book(t, "Dry Creek"), Key: key("Dry Creek"), Listen: []string{"0.0.0.0:0"}, Discover: true})
	label, _, _ := strings.Cut(lan.ServiceName(book(t, "Dry Creek")), ".")
	in.SetReadDeadline(time.Now().Add(20 * time.Second))
	for packet := make([]byte, 9000); ; {
		n, err := in.Read(packet)
		if err != nil {
			t.Fatalf("no announcement from %v: %v", quiet.Addrs(), err)
		}
		got := packet[:n]
		if !bytes.Contains(got, []byte(label)) || !bytes.Contains(got, []byte(lan.PeerID(id("Dry Creek")))) {
			continue // of somebody else, or without its TXT record
		}
		for _, what := range []string{"book", "fingerprint", "network secret", "private key", "title", "name", "program"} {
			if form := shows(got, h.secrets[what]); form != "" {
				t.Errorf("the announcement shows the %s, %s: %q", what, form, got)
			}
		}
		return
	}
}

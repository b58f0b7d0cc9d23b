package lan_test

import (
	"bytes"
	"context"
	"crypto/ed25519"
	"crypto/sha256"
	"errors"
	"io"
	"log/slog"
	"net"
	"strings"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"example.org/chargehand/ledger/record"
	"example.org/chargehand/sync/lan"
)

func key(name string) ed25519.PrivateKey {
	seed := sha256.Sum256([]byte(name))
	return ed25519.NewKeyFromSeed(seed[:])
}

func id(name string) record.KeyID { return record.KeyID(key(name).Public().(ed25519.PublicKey)) }

func book(t *testing.T, secret string) lan.Network {
	t.Helper()
	n, err := lan.BookNetwork(sha256.Sum256([]byte(secret)))
	if err != nil {
		t.Fatal(err)
	}
	return n
}

func only(names ...string) func(record.KeyID) bool {
	return func(k record.KeyID) bool {
		for _, n := range names {
			if k == id(n) {
				return true
			}
		}
		return false
	}
}

func open(t *testing.T, o lan.Options) *lan.Host {
	t.Helper()
	if o.Handle == nil {
		o.Handle = func(_ context.Context, who record.KeyID, rw io.ReadWriteCloser) {
			t.Errorf("a stream from %s", who)
			rw.Close()
		}
	}
	h, err := lan.Open(o)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := h.Close(); err != nil {
			t.Error(err)
		}
	})
	return h
}

const greeting = "title of the book: Hangar 2"

// greet answers every stream with the greeting and what it read.
func greet(who chan<- record.KeyID) func(context.Context, record.KeyID, io.ReadWriteCloser) {
	return func(_ context.Context, k record.KeyID, rw io.ReadWriteCloser) {
		defer rw.Close()
		var said [5]byte
		if _, err := io.ReadFull(rw, said[:]); err == nil {
			io.WriteString(rw, greeting+string(said[:]))
		}
		who <- k
	}
}

func ctx(t *testing.T) context.Context {
	t.Helper()
	c, cancel := context.WithTimeout(t.Context(), 20*time.Second)
	t.Cleanup(cancel)
	return c
}

func TestTwoHostsMeet(t *testing.T) {
	who := make(chan record.KeyID, 1)
	net := book(t, "secret")
	lead := open(t, lan.Options{Network: net, Key: key("lead"), Allow: only("tech"), Listen: []string{"127.0.0.1:0"}, Handle: greet(who)})
	tech := open(t, lan.Options{Network: net, Key: key("tech"), Allow: only("lead")})
	at := lead.Addrs()[0]
	got, rw, err := tech.Dial(ctx(t), at)
	if err != nil {
		t.Fatal(err)
	}
	if got != id("lead") {
		t.Errorf("met %s", got)
	}
	if _, err := io.WriteString(rw, "hello"); err != nil {
		t.Fatal(err)
	}
	said, err := io.ReadAll(rw)
	if err != nil || string(said) != greeting+"hello" {
		t.Errorf("%q, %v", said, err)
	}
	rw.Close()
	if k := <-who; k != id("tech") {
		t.Errorf("the lead met %s", k)
	}
	if c := tech.Connected(); len(c) != 1 || c[0] != id("lead") {
		t.Errorf("connected: %v", c)
	}
	// The lead can open one back on the same connection, though the technician does not listen.
	host, port, _ := strings.Cut(at, ":")
	if _, rw, err := tech.Dial(ctx(t), "/ip4/"+host+"/tcp/"+port); err != nil {
		t.Errorf("by multiaddr: %v", err)
	} else {
		io.WriteString(rw, "again")
		<-who
		rw.Close()
	}
}

func TestStrangerGetsNothing(t *testing.T) {
	net := book(t, "secret")
	lead := open(t, lan.Options{Network: net, Key: key("lead"), Listen: []string{"127.0.0.1:0"}})
	t.Run("another secret, an allowed key", func(t *testing.T) {
		t.Parallel()
		stranger := open(t, lan.Options{Network: book(t, "other"), Key: key("tech")})
		_, _, err := stranger.Dial(ctx(t), lead.Addrs()[0])
		if !errors.Is(err, lan.ErrNoAnswer) {
			t.Errorf("%v", err)
		}
	})
	t.Run("the same bytes as a joining tag", func(t *testing.T) {
		t.Parallel()
		join, err := lan.JoinNetwork(sha256.Sum256([]byte("secret")))
		if err != nil {
			t.Fatal(err)
		}
		stranger := open(t, lan.Options{Network: join, Key: key("tech")})
		if _, _, err := stranger.Dial(ctx(t), lead.Addrs()[0]); !errors.Is(err, lan.ErrNoAnswer) {
			t.Errorf("%v", err)
		}
	})
	t.Run("plain TCP", func(t *testing.T) { rawStranger(t, lead.Addrs()[0]) })
}

// rawStranger talks without any key: what comes back must be short and not one of the protocols' names.
func rawStranger(t *testing.T, at string) {
	c, err := net.Dial("tcp", at)
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close()
	c.SetDeadline(time.Now().Add(20 * time.Second))
	if _, err := c.Write(bytes.Repeat([]byte("\x13/multistream/1.0.0\n"), 8)); err != nil {
		t.Fatal(err)
	}
	if err := c.(*net.TCPConn).CloseWrite(); err != nil && !errors.Is(err, syscall.ENOTCONN) { // the host may have hung up first
		t.Fatal(err)
	}
	got, _ := io.ReadAll(io.LimitReader(c, 4096))
	pub := key("lead").Public().(ed25519.PublicKey)
	for _, secret := range []string{"multistream", "noise", "chargehand", "Hangar", string(pub)} {
		if bytes.Contains(got, []byte(secret)) {
			t.Errorf("a stranger reads %q in %q", secret, got)
		}
	}
	if len(got) > 256 {
		t.Errorf("a stranger gets %d bytes", len(got))
	}
}

// relay copies bytes between two hosts and keeps what passed.
func relay(t *testing.T, to string) (at string, passed func() []byte) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { l.Close() })
	seen := make(chan []byte, 64)
	open := make(chan struct{}, 64)
	go func() {
		for {
			c, err := l.Accept()
			if err != nil {
				return
			}
			s, err := net.Dial("tcp", to)
			if err != nil {
				c.Close()
				return
			}
			for _, p := range [][2]net.Conn{{c, s}, {s, c}} {
				open <- struct{}{}
				go func() {
					var b bytes.Buffer
					io.Copy(io.MultiWriter(p[0], &b), p[1])
					p[0].Close()
					seen <- b.Bytes()
				}()
			}
		}
	}()
	return l.Addr().String(), func() []byte {
		var all []byte
		for range len(open) {
			all = append(all, <-seen...)
		}
		return all
	}
}

func TestWireShowsNothing(t *testing.T) {
	who := make(chan record.KeyID, 1)
	n := book(t, "secret")
	lead, err := lan.Open(lan.Options{Network: n, Key: key("lead"), Allow: only("tech"), Listen: []string{"127.0.0.1:0"}, Handle: greet(who)})
	if err != nil {
		t.Fatal(err)
	}
	at, passed := relay(t, lead.Addrs()[0])
	tech, err := lan.Open(lan.Options{Network: n, Key: key("tech"), Allow: only("lead"), Handle: greet(who)})
	if err != nil {
		t.Fatal(err)
	}
	_, rw, err := tech.Dial(ctx(t), at)
	if err != nil {
		t.Fatal(err)
	}
	io.WriteString(rw, "hello")
	if said, err := io.ReadAll(rw); err != nil || len(said) == 0 {
		t.Fatal(err)
	}
	if err := errors.Join(tech.Close(), lead.Close()); err != nil {
		t.Fatal(err)
	}
	wire := passed()
	if len(wire) < 200 {
		t.Fatalf("only %d bytes passed", len(wire))
	}
	for _, secret := range []string{"Hangar", "hello", "chargehand", "noise", "yamux", string(key("lead").Public().(ed25519.PublicKey))} {
		if bytes.Contains(wire, []byte(secret)) {
			t.Errorf("the wire shows %q", secret)
		}
	}
}

func TestRetiredKeyIsCutOff(t *testing.T) {
	net := book(t, "secret")
	logged := make(chan string, 8)
	lead := open(t, lan.Options{
		Network: net, Key: key("lead"), Allow: only("tech"), Listen: []string{"127.0.0.1:0"},
		Log: slog.New(slog.NewTextHandler(writerFunc(func(p []byte) (int, error) { logged <- string(p); return len(p), nil }), nil)),
	})
	retired := open(t, lan.Options{Network: net, Key: key("retired")})
	_, rw, err := retired.Dial(ctx(t), lead.Addrs()[0])
	if err == nil { // the dialler may believe in the stream until it reads
		io.WriteString(rw, "hello")
		if said, err := io.ReadAll(rw); err == nil || len(said) > 0 {
			t.Errorf("a retired laptop reads %q, %v", said, err)
		}
	}
	if line := <-logged; !strings.Contains(line, "may not be met") {
		t.Errorf("log: %s", line)
	}
	if _, _, err := lead.Dial(ctx(t), "127.0.0.1:1"); !errors.Is(err, lan.ErrNoAnswer) {
		t.Errorf("dial where nobody is: %v", err)
	}
}

type writerFunc func([]byte) (int, error)

func (f writerFunc) Write(p []byte) (int, error) { return f(p) }

func TestDoesNotDialWhoMayNotBeMet(t *testing.T) {
	net := book(t, "secret")
	retired := open(t, lan.Options{Network: net, Key: key("retired"), Listen: []string{"127.0.0.1:0"}})
	lead := open(t, lan.Options{Network: net, Key: key("lead"), Allow: only("tech")})
	if _, _, err := lead.Dial(ctx(t), retired.Addrs()[0]); !errors.Is(err, lan.ErrNotAllowed) {
		t.Errorf("%v", err)
	}
}

func TestRetiredWhileConnected(t *testing.T) {
	net := book(t, "secret")
	who := make(chan record.KeyID, 1)
	var retired atomic.Bool
	lead := open(t, lan.Options{
		Network: net, Key: key("lead"), Listen: []string{"127.0.0.1:0"}, Handle: greet(who),
		Allow: func(record.KeyID) bool { return !retired.Load() },
	})
	tech := open(t, lan.Options{Network: net, Key: key("tech")})
	_, rw, err := tech.Dial(ctx(t), lead.Addrs()[0])
	if err != nil {
		t.Fatal(err)
	}
	io.WriteString(rw, "hello")
	<-who
	retired.Store(true)
	rw, err = tech.Stream(ctx(t), id("lead"))
	if err != nil {
		return
	}
	io.WriteString(rw, "hello")
	if said, err := io.ReadAll(rw); err == nil || len(said) > 0 {
		t.Errorf("read %q, %v", said, err)
	}
}

func TestJoinersMeetByTag(t *testing.T) {
	n, err := lan.JoinNetwork(sha256.Sum256([]byte("tag")))
	if err != nil {
		t.Fatal(err)
	}
	who := make(chan record.KeyID, 1)
	lead := open(t, lan.Options{Network: n, Key: key("lead"), Listen: []string{"127.0.0.1:0"}, Handle: greet(who)})
	newcomer := open(t, lan.Options{Network: n, Key: key("newcomer")})
	k, rw, err := newcomer.Dial(ctx(t), lead.Addrs()[0])
	if err != nil || k != id("lead") {
		t.Fatal(k, err)
	}
	io.WriteString(rw, "hello")
	if k := <-who; k != id("newcomer") {
		t.Errorf("the lead met %s", k)
	}
}

func TestAddressesAreChecked(t *testing.T) {
	h := open(t, lan.Options{Network: book(t, "secret"), Key: key("lead")})
	for _, a := range []string{"", "nonsense", "/ip4", "/p2p/nobody", "127.0.0.1", "127.0.0.1:99999"} {
		if _, _, err := h.Dial(ctx(t), a); err == nil || !strings.Contains(err.Error(), "address") {
			t.Errorf("%q: %v", a, err)
		}
	}
}

func TestDiscovery(t *testing.T) {
	if !multicast(t) {
		t.Skip("SKIPPED, NOT PASSED: this machine delivers no multicast, so discovery was not tried")
	}
	n := book(t, "discovery")
	seen := make(chan record.KeyID, 8)
	found := func(_ context.Context, k record.KeyID) { seen <- k }
	listen := []string{"0.0.0.0:0"}
	open(t, lan.Options{Network: n, Key: key("lead"), Allow: only("tech"), Listen: listen, Discover: true, Found: found})
	tech := open(t, lan.Options{Network: n, Key: key("tech"), Allow: only("lead"), Listen: listen, Discover: true, Found: found})
	select {
	case k := <-seen:
		if k != id("lead") && k != id("tech") {
			t.Errorf("found %s", k)
		}
	case <-ctx(t).Done():
		t.Errorf("nobody found; own addresses %v", tech.Addrs())
	}
}

// multicast tells whether a datagram to the mDNS group (RFC 6762) comes back to this machine.
func multicast(t *testing.T) bool {
	group := &net.UDPAddr{IP: net.IPv4(224, 0, 0, 251), Port: 5353}
	in, err := net.ListenMulticastUDP("udp4", nil, group)
	if err != nil {
		t.Log(err)
		return false
	}
	defer in.Close()
	out, err := net.DialUDP("udp4", nil, group)
	if err != nil {
		t.Log(err)
		return false
	}
	defer out.Close()
	if _, err := out.Write([]byte("is anybody there")); err != nil {
		t.Log(err)
		return false
	}
	in.SetReadDeadline(time.Now().Add(2 * time.Second))
	for {
		var b [64]byte
		k, err := in.Read(b[:])
		if err != nil {
			t.Log(err)
			return false
		}
		if string(b[:k]) == "is anybody there" {
			return true
		}
	}
}

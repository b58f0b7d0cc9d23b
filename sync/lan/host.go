// Package lan lets laptops of one book reach each other on a local network: TCP, the book's private network key (XSalsa20
// under a key that only they have), Noise with the hands' own Ed25519 keys, yamux. Nothing else of libp2p runs: no relay, no
// routing, no hole punching, no identify, no metrics. It knows nothing of what is said: a handler gets the peer's key
// and a stream.
//
// A stranger without the secret gets random-looking bytes and no answer. A laptop with the secret whose key is not allowed is
// cut off as soon as it has proved its key, before any stream. Discovery by multicast shows addresses, and the hand's public
// key to whoever listens; the service name is derived from the secret.
package lan

import (
	"context"
	"crypto/ed25519"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"slices"
	"strings"
	"sync"
	"time"

	"github.com/libp2p/go-libp2p/core/control"
	"github.com/libp2p/go-libp2p/core/crypto"
	"github.com/libp2p/go-libp2p/core/network"
	"github.com/libp2p/go-libp2p/core/peer"
	"github.com/libp2p/go-libp2p/core/peerstore"
	"github.com/libp2p/go-libp2p/core/protocol"
	"github.com/libp2p/go-libp2p/core/sec"
	"github.com/libp2p/go-libp2p/p2p/discovery/mdns"
	blankhost "github.com/libp2p/go-libp2p/p2p/host/blank"
	"github.com/libp2p/go-libp2p/p2p/host/eventbus"
	"github.com/libp2p/go-libp2p/p2p/host/peerstore/pstoremem"
	"github.com/libp2p/go-libp2p/p2p/muxer/yamux"
	"github.com/libp2p/go-libp2p/p2p/net/swarm"
	"github.com/libp2p/go-libp2p/p2p/net/upgrader"
	"github.com/libp2p/go-libp2p/p2p/security/noise"
	"github.com/libp2p/go-libp2p/p2p/transport/tcp"
	ma "github.com/multiformats/go-multiaddr"
	manet "github.com/multiformats/go-multiaddr/net"

	"example.org/chargehand/ledger/record"
)

const (
	meetProtocol = protocol.ID("/chargehand/meet/1")
	dialTimeout  = 10 * time.Second
	patience     = 15 * time.Second
	announce     = 15 * time.Second // how often the laptop's own addresses are looked at
)

// ErrNotAllowed: the peer proved a key that may not be met.
var ErrNotAllowed = errors.New("that laptop's key may not be met")

// ErrNoAnswer: nobody with the network's key answered there.
var ErrNoAnswer = errors.New("nobody of this network answers there")

// Options of a Host. Network, Key and Handle are needed.
type Options struct {
	Network Network
	Key     ed25519.PrivateKey
	// Allow tells whether the holder of a key may be met. It is asked at every connection and stream, from several goroutines.
	// Nil lets in everybody who has the network's key: for joining.
	Allow func(record.KeyID) bool
	// Listen holds addresses as host:port or multiaddr. Empty: this laptop only dials.
	Listen []string
	// Discover announces this laptop by multicast DNS and looks for others.
	Discover bool
	// Found is called for an allowed laptop that discovery saw and that is not connected, one call at a time for a laptop. ctx ends
	// with the host.
	Found func(ctx context.Context, who record.KeyID)
	// Handle is called for each stream that a peer opens, and closes rw. ctx ends with the host.
	Handle func(ctx context.Context, who record.KeyID, rw io.ReadWriteCloser)
	// Patience is how long whoever connects may take to prove a key before the connection is closed; zero stands for 15 s.
	Patience time.Duration
	Log      *slog.Logger // nil: no log
}

// Host is this laptop on the network. Its methods may be called from several goroutines.
type Host struct {
	o       Options
	host    *blankhost.BlankHost
	limits  network.ResourceManager
	peers   io.Closer
	tcp     *tcp.TcpTransport
	ctx     context.Context // ends with the host; handlers get it
	cancel  context.CancelFunc
	running sync.WaitGroup

	mu     sync.Mutex // guards what follows
	busy   map[peer.ID]bool
	closed bool
}

// Open starts a host. Close ends it.
func Open(o Options) (_ *Host, err error) {
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	if o.Patience == 0 {
		o.Patience = patience
	}
	listen := make([]ma.Multiaddr, len(o.Listen))
	for i, s := range o.Listen {
		if listen[i], _, err = parseAddr(s); err != nil {
			return nil, err
		}
	}
	key, err := crypto.UnmarshalEd25519PrivateKey(o.Key)
	if err != nil {
		return nil, fmt.Errorf("network identity: %w", err)
	}
	id, err := peer.IDFromPrivateKey(key)
	if err != nil {
		return nil, fmt.Errorf("network identity: %w", err)
	}
	h := &Host{o: o, busy: map[peer.ID]bool{}}
	h.ctx, h.cancel = context.WithCancel(context.Background())
	var closers []io.Closer
	defer func() {
		if err != nil {
			h.cancel()
			for _, c := range slices.Backward(closers) {
				err = errors.Join(err, c.Close())
			}
		}
	}()
	if h.limits, err = newLimits(); err != nil {
		return nil, err
	}
	closers = append(closers, h.limits)
	store, err := pstoremem.NewPeerstore()
	if err != nil {
		return nil, fmt.Errorf("network peers: %w", err)
	}
	h.peers = store
	closers = append(closers, store)
	if err := errors.Join(store.AddPrivKey(id, key), store.AddPubKey(id, key.GetPublic())); err != nil {
		return nil, fmt.Errorf("network identity: %w", err)
	}
	bus := eventbus.NewBus()
	sw, err := swarm.NewSwarm(id, store, bus, swarm.WithConnectionGater(gater{h}), swarm.WithResourceManager(h.limits),
		swarm.WithDialTimeout(dialTimeout), swarm.WithDialTimeoutLocal(dialTimeout))
	if err != nil {
		return nil, fmt.Errorf("start the network: %w", err)
	}
	closers = append(closers, sw)
	muxers := []upgrader.StreamMuxer{{ID: yamux.ID, Muxer: yamux.DefaultTransport}}
	secure, err := noise.New(noise.ID, key, muxers)
	if err != nil {
		return nil, fmt.Errorf("start the network: %w", err)
	}
	up, err := upgrader.New([]sec.SecureTransport{secure}, muxers, o.Network.key, h.limits, gater{h}, upgrader.WithAcceptTimeout(o.Patience))
	if err != nil {
		return nil, fmt.Errorf("start the network: %w", err)
	}
	if h.tcp, err = tcp.NewTCPTransport(up, h.limits, nil, tcp.DisableReuseport()); err != nil {
		return nil, fmt.Errorf("start the network: %w", err)
	}
	if err := sw.AddTransport(h.tcp); err != nil {
		return nil, fmt.Errorf("start the network: %w", err)
	}
	if len(listen) > 0 {
		if err := sw.Listen(listen...); err != nil {
			return nil, fmt.Errorf("listen on %s: %w", strings.Join(o.Listen, ", "), err)
		}
	}
	h.host = blankhost.NewBlankHost(sw, blankhost.WithEventBus(bus))
	if h.host == nil {
		return nil, errors.New("start the network: no host")
	}
	h.host.SetStreamHandler(meetProtocol, h.incoming)
	if o.Discover {
		h.running.Go(h.discover)
	}
	return h, nil
}

// Close ends discovery, cuts all connections and waits for all handlers.
func (h *Host) Close() error {
	h.mu.Lock()
	h.closed = true
	h.mu.Unlock()
	h.cancel()
	err := h.host.Close()
	h.running.Wait()
	return errors.Join(err, h.peers.Close(), h.limits.Close())
}

// start runs f unless the host is closing.
func (h *Host) start(f func()) bool {
	h.mu.Lock()
	defer h.mu.Unlock()
	if h.closed {
		return false
	}
	h.running.Go(f)
	return true
}

// Addrs returns where others can reach this laptop, as host:port.
func (h *Host) Addrs() []string {
	var out []string
	for _, a := range h.host.Addrs() {
		if _, s, err := manet.DialArgs(a); err == nil {
			out = append(out, s)
		}
	}
	return out
}

// Connected returns the laptops that are connected now, sorted.
func (h *Host) Connected() []record.KeyID {
	var keys []record.KeyID
	for _, p := range h.host.Network().Peers() {
		if k, err := keyOf(p); err == nil {
			keys = append(keys, k)
		}
	}
	slices.SortFunc(keys, func(a, b record.KeyID) int { return slices.Compare(a[:], b[:]) })
	return keys
}

// Dial opens a stream to the laptop at an address: host:port, or a multiaddr with or without a peer's id. ErrNoAnswer when
// nobody with the network's key is there, ErrNotAllowed when the key that answered may not be met.
func (h *Host) Dial(ctx context.Context, addr string) (record.KeyID, io.ReadWriteCloser, error) {
	ctx, cancel := context.WithTimeout(ctx, dialTimeout)
	defer cancel()
	where, who, err := parseAddr(addr)
	if err != nil {
		return record.KeyID{}, nil, err
	}
	if who == "" {
		if who, err = h.ask(ctx, where); err != nil {
			return record.KeyID{}, nil, fmt.Errorf("%s: %w", addr, err)
		}
	}
	key, err := keyOf(who)
	if err != nil {
		return record.KeyID{}, nil, fmt.Errorf("%s: %w", addr, err)
	}
	h.host.Peerstore().AddAddr(who, where, peerstore.RecentlyConnectedAddrTTL)
	h.host.Network().(*swarm.Swarm).Backoff().Clear(who) // a person asked for it: now
	rw, err := h.Stream(ctx, key)
	if err != nil {
		return key, nil, fmt.Errorf("%s: %w", addr, err)
	}
	return key, rw, nil
}

// Stream opens a stream to a laptop that was found, dialled or connected before.
func (h *Host) Stream(ctx context.Context, who record.KeyID) (io.ReadWriteCloser, error) {
	if !h.allowed(who) {
		return nil, ErrNotAllowed
	}
	id, err := idOf(who)
	if err != nil {
		return nil, err
	}
	s, err := h.host.NewStream(ctx, id, meetProtocol)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrNoAnswer, err)
	}
	return stream{s}, nil
}

// ask learns which key answers at an address, by expecting one that cannot be: the Noise handshake then names the one that
// proved itself, before this laptop has shown its own.
func (h *Host) ask(ctx context.Context, where ma.Multiaddr) (peer.ID, error) {
	_, pub, err := crypto.GenerateEd25519Key(rand.Reader)
	if err != nil {
		return "", err
	}
	nobody, err := peer.IDFromPublicKey(pub)
	if err != nil {
		return "", err
	}
	conn, err := h.tcp.Dial(ctx, where, nobody)
	if err == nil {
		return "", errors.Join(ErrNoAnswer, conn.Close())
	}
	var other sec.ErrPeerIDMismatch
	if errors.As(err, &other) {
		return other.Actual, nil
	}
	return "", fmt.Errorf("%w: %w", ErrNoAnswer, err)
}

func (h *Host) incoming(s network.Stream) {
	who, err := keyOf(s.Conn().RemotePeer())
	if err != nil || !h.allowed(who) { // allowed when it connected, perhaps no more
		s.Reset()
		s.Conn().Close()
		return
	}
	done := make(chan struct{})
	if !h.start(func() { defer close(done); h.o.Handle(h.ctx, who, stream{s}) }) {
		s.Reset()
		return
	}
	<-done
}

func (h *Host) allowed(who record.KeyID) bool { return h.o.Allow == nil || h.o.Allow(who) }

// discover announces and looks until the host closes. The announcement holds the addresses of its start, so it begins anew
// when they change.
func (h *Host) discover() {
	ticks := time.NewTicker(announce)
	defer ticks.Stop()
	var service mdns.Service
	var announced []string
	stop := func() {
		if service != nil {
			if err := service.Close(); err != nil {
				h.o.Log.Warn("stop discovery", "error", err)
			}
			service = nil
		}
	}
	defer stop()
	for {
		if now := h.Addrs(); service == nil || !slices.Equal(now, announced) {
			stop()
			announced = now
			service = mdns.NewMdnsService(h.host, h.o.Network.service, found{h})
			if err := service.Start(); err != nil {
				h.o.Log.Warn("discovery does not work here; dial by address", "error", err)
				stop()
			}
		}
		select {
		case <-ticks.C:
		case <-h.ctx.Done():
			return
		}
	}
}

type found struct{ *Host }

// HandlePeerFound is called for each sighting, also of a laptop that is being dialled.
func (h found) HandlePeerFound(info peer.AddrInfo) {
	who, err := keyOf(info.ID)
	if err != nil || info.ID == h.host.ID() || !h.allowed(who) {
		return
	}
	h.host.Peerstore().AddAddrs(info.ID, info.Addrs, peerstore.RecentlyConnectedAddrTTL)
	if h.o.Found == nil || h.host.Network().Connectedness(info.ID) == network.Connected {
		return
	}
	h.mu.Lock()
	busy := h.busy[info.ID]
	h.busy[info.ID] = true
	h.mu.Unlock()
	if busy {
		return
	}
	h.start(func() {
		h.o.Found(h.ctx, who)
		h.mu.Lock()
		defer h.mu.Unlock()
		delete(h.busy, info.ID)
	})
}

// gater cuts off whoever proved a key that is not allowed, and does not dial one.
type gater struct{ *Host }

func (g gater) allowedID(p peer.ID) bool {
	who, err := keyOf(p)
	return err == nil && g.allowed(who)
}

func (g gater) InterceptPeerDial(p peer.ID) bool                                { return g.allowedID(p) }
func (g gater) InterceptAddrDial(peer.ID, ma.Multiaddr) bool                    { return true }
func (g gater) InterceptAccept(network.ConnMultiaddrs) bool                     { return true }
func (g gater) InterceptUpgraded(network.Conn) (bool, control.DisconnectReason) { return true, 0 }

func (g gater) InterceptSecured(_ network.Direction, p peer.ID, at network.ConnMultiaddrs) bool {
	if g.allowedID(p) {
		return true
	}
	g.o.Log.Warn("cut off a laptop whose key may not be met", "peer", p.String(), "address", at.RemoteMultiaddr().String())
	return false
}

// stream is a libp2p stream with a reset told as what it is to a reader: an end too early.
type stream struct{ network.Stream }

func (s stream) Read(p []byte) (int, error) {
	n, err := s.Stream.Read(p)
	if errors.Is(err, network.ErrReset) {
		err = fmt.Errorf("%w: %w", io.ErrUnexpectedEOF, err)
	}
	return n, err
}

func keyOf(p peer.ID) (record.KeyID, error) {
	pub, err := p.ExtractPublicKey()
	if err != nil {
		return record.KeyID{}, fmt.Errorf("peer %s: %w", p, err)
	}
	raw, err := pub.Raw()
	if err != nil || pub.Type() != crypto.Ed25519 {
		return record.KeyID{}, fmt.Errorf("peer %s has no Ed25519 key", p)
	}
	return record.KeyID(raw), nil
}

func idOf(k record.KeyID) (peer.ID, error) {
	pub, err := crypto.UnmarshalEd25519PublicKey(k[:])
	if err != nil {
		return "", fmt.Errorf("key %s: %w", k, err)
	}
	return peer.IDFromPublicKey(pub)
}

// parseAddr takes host:port or a multiaddr; the id is empty where the address has none. A name is looked up.
func parseAddr(s string) (ma.Multiaddr, peer.ID, error) {
	if strings.HasPrefix(s, "/") {
		a, err := ma.NewMultiaddr(s)
		if err != nil {
			return nil, "", fmt.Errorf("address %q: %w", s, err)
		}
		where, id := peer.SplitAddr(a)
		if where == nil {
			return nil, "", fmt.Errorf("address %q has no host and port", s)
		}
		return where, id, nil
	}
	at, err := net.ResolveTCPAddr("tcp", s)
	if err == nil && s == "" {
		err = errors.New("no host and port")
	}
	if err != nil {
		return nil, "", fmt.Errorf("address %q: %w", s, err)
	}
	if at.IP == nil {
		at.IP = net.IPv4zero
	}
	a, err := manet.FromNetAddr(at)
	if err != nil {
		return nil, "", fmt.Errorf("address %q: %w", s, err)
	}
	return a, "", nil
}

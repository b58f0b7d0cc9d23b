package lan

import (
	"fmt"
	"math"
	"net/netip"
	"time"

	"github.com/libp2p/go-libp2p/core/network"
	rcmgr "github.com/libp2p/go-libp2p/p2p/host/resource-manager"
	"github.com/libp2p/go-libp2p/x/rate"
)

// The networks on which laptops meet. libp2p counts per address and, for IPv6, per /56: there a whole hangar would share the
// eight connections and twelve attempts a minute meant for one stranger. (Loopback is exempt already.)
var (
	nearbyV4 = []netip.Prefix{
		netip.MustParsePrefix("10.0.0.0/8"), netip.MustParsePrefix("172.16.0.0/12"), netip.MustParsePrefix("192.168.0.0/16"), // RFC 1918
		netip.MustParsePrefix("169.254.0.0/16"), // RFC 3927
	}
	nearbyV6 = []netip.Prefix{netip.MustParsePrefix("fc00::/7"), netip.MustParsePrefix("fe80::/10")} // RFC 4193, RFC 4291
	loopback = []netip.Prefix{netip.MustParsePrefix("127.0.0.0/8"), netip.MustParsePrefix("::1/128")}
)

const (
	maxConns       = 48 // laptops at once, with some to spare for both dialling each other
	maxPeerConns   = 4
	maxStreams     = 8 // a peer
	nearbyPerSec   = 20
	nearbyBurst    = 100
	elsewherePer   = 0.5
	elsewhereBurst = 16
)

func newLimits() (network.ResourceManager, error) {
	conns := rcmgr.ResourceLimits{
		Conns: maxConns, ConnsInbound: maxConns, ConnsOutbound: maxConns,
		Streams: maxConns * maxStreams, StreamsInbound: maxConns * maxStreams, StreamsOutbound: maxConns * maxStreams,
		FD: 2 * maxConns, Memory: 128 << 20,
	}
	limits := rcmgr.PartialLimitConfig{
		System:    conns,
		Transient: rcmgr.ResourceLimits{Conns: 24, ConnsInbound: 16, ConnsOutbound: 16, FD: 48, Memory: 32 << 20},
		PeerDefault: rcmgr.ResourceLimits{
			Conns: maxPeerConns, ConnsInbound: maxPeerConns, ConnsOutbound: maxPeerConns,
			Streams: 2 * maxStreams, StreamsInbound: maxStreams, StreamsOutbound: maxStreams, Memory: 32 << 20,
		},
	}.Build(rcmgr.DefaultLimits.Scale(128<<20, 256))

	var v4, v6 []rcmgr.NetworkPrefixLimit
	var rates []rate.PrefixLimit
	add := func(to *[]rcmgr.NetworkPrefixLimit, ps []netip.Prefix) {
		for _, p := range ps {
			*to = append(*to, rcmgr.NetworkPrefixLimit{Network: p, ConnCount: maxConns})
			rates = append(rates, rate.PrefixLimit{Prefix: p, Limit: rate.Limit{RPS: nearbyPerSec, Burst: nearbyBurst}})
		}
	}
	add(&v4, nearbyV4)
	add(&v6, nearbyV6)
	for i, to := range []*[]rcmgr.NetworkPrefixLimit{&v4, &v6} {
		*to = append(*to, rcmgr.NetworkPrefixLimit{Network: loopback[i], ConnCount: math.MaxInt})
		rates = append(rates, rate.PrefixLimit{Prefix: loopback[i]})
	}
	m, err := rcmgr.NewResourceManager(rcmgr.NewFixedLimiter(limits),
		rcmgr.WithMetricsDisabled(),
		rcmgr.WithNetworkPrefixLimit(v4, v6),
		rcmgr.WithConnRateLimiters(&rate.Limiter{
			NetworkPrefixLimits: rates,
			SubnetRateLimiter: rate.SubnetLimiter{
				IPv4SubnetLimits: []rate.SubnetLimit{{PrefixLength: 32, Limit: rate.Limit{RPS: elsewherePer, Burst: elsewhereBurst}}},
				IPv6SubnetLimits: []rate.SubnetLimit{{PrefixLength: 56, Limit: rate.Limit{RPS: elsewherePer, Burst: elsewhereBurst}}},
				GracePeriod:      time.Minute,
			},
		}))
	if err != nil {
		return nil, fmt.Errorf("set the network limits: %w", err)
	}
	return m, nil
}

package sync_test

import (
	"crypto/ed25519"
	"crypto/sha256"
	"net"
	"testing"
	"time"

	"golang.org/x/sync/errgroup"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	peersync "example.org/chargehand/sync"
)

// Two real books in two stores, each with work that the other has not seen, end with equal fingerprints.
func TestTwoRealBooksMeet(t *testing.T) {
	key := func(name string) ed25519.PrivateKey {
		seed := sha256.Sum256([]byte(name))
		return ed25519.NewKeyFromSeed(seed[:])
	}
	lead, err := ledger.Found(t.TempDir(), key("lead"), record.Founding{Title: "Dry Creek", Name: "Lead", Roles: []record.Role{record.RoleLead}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}, time.Now)
	if err != nil {
		t.Fatal(err)
	}
	defer lead.Close()
	tech, err := ledger.Open(t.TempDir(), lead.ID(), time.Now)
	if err != nil {
		t.Fatal(err)
	}
	defer tech.Close()
	sign := func(b *ledger.Book, who string, kind record.Kind, body any) {
		t.Helper()
		if _, err := b.Author(key(who), ledger.Draft{Kind: kind, Body: body}); err != nil {
			t.Fatal(err)
		}
	}
	meet := func() (a, b peersync.Report) {
		t.Helper()
		x, y := net.Pipe()
		g, ctx := errgroup.WithContext(t.Context())
		g.Go(func() (err error) { a, err = (&peersync.Session{Book: lead}).Run(ctx, x); return err })
		g.Go(func() (err error) { b, err = (&peersync.Session{Book: tech}).Run(ctx, y); return err })
		if err := g.Wait(); err != nil {
			t.Fatal(err)
		}
		return a, b
	}
	k := key("tech").Public().(ed25519.PublicKey)
	sign(lead, "lead", record.KindHandAdmitted, record.HandAdmitted{Name: "Tech", Roles: []record.Role{record.RoleTechnician}, Key: record.KeyID(k)})
	if _, r := meet(); !r.Equal || len(r.Changes.Added) != 2 {
		t.Fatalf("an empty copy: %+v", r)
	}
	sign(tech, "tech", record.KindUnitRegistered, record.UnitRegistered{Part: "HA-40", Serial: "104"})
	sign(lead, "lead", record.KindUnitRegistered, record.UnitRegistered{Part: "HA-40", Serial: "104"})
	a, b := meet()
	if !a.Equal || !b.Equal || len(a.Changes.Added) != 1 || len(b.Changes.Added) != 1 || lead.Fingerprint() != tech.Fingerprint() {
		t.Errorf("lead %+v, tech %+v", a, b)
	}
	if n := len(tech.Meaning().Units); n != 1 {
		t.Errorf("%d units; the one registered on both laptops is one", n)
	}
}

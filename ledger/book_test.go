package ledger_test

import (
	"context"
	"crypto/ed25519"
	"crypto/sha256"
	"errors"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// laptop is one hand's copy of the book in a test, with a clock that the test moves.
type laptop struct {
	*ledger.Book
	key ed25519.PrivateKey
	at  *time.Time
}

func testKey(name string) ed25519.PrivateKey {
	seed := sha256.Sum256([]byte(name))
	return ed25519.NewKeyFromSeed(seed[:])
}

func keyID(k ed25519.PrivateKey) record.KeyID {
	return record.KeyID(k.Public().(ed25519.PublicKey))
}

var epoch = time.Date(2031, 3, 4, 5, 0, 0, 0, time.UTC)

type failer interface {
	Helper()
	Fatalf(string, ...any)
	Cleanup(func())
	Context() context.Context
}

func found(t failer, dir string) *laptop {
	t.Helper()
	at := epoch
	l := &laptop{key: testKey("founder"), at: &at}
	b, err := ledger.Found(dir, l.key, record.Founding{Title: "Dry Creek", Name: "Founder", Roles: allRoles, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}, func() time.Time { return *l.at })
	if err != nil {
		t.Fatalf("found: %v", err)
	}
	l.Book = b
	t.Cleanup(func() { b.Close() })
	return l
}

func join(t failer, dir, name string, of *laptop) *laptop {
	t.Helper()
	at := epoch
	l := &laptop{key: testKey(name), at: &at}
	b, err := ledger.Open(dir, of.ID(), func() time.Time { return *l.at })
	if err != nil {
		t.Fatalf("open: %v", err)
	}
	l.Book = b
	t.Cleanup(func() { b.Close() })
	pull(t, l, of)
	return l
}

// pull merges what from holds into to.
func pull(t failer, to, from *laptop) {
	t.Helper()
	var batch []record.Verified
	for v, err := range from.Missing(t.Context(), to.Frontier()) {
		if err != nil {
			t.Fatalf("missing: %v", err)
		}
		batch = append(batch, v)
	}
	c, err := to.Merge(t.Context(), batch)
	if err != nil || c.Waiting > 0 {
		t.Fatalf("merge: %v, %d waiting", err, c.Waiting)
	}
}

func (l *laptop) sign(kind record.Kind, body any) (record.ID, error) {
	*l.at = l.at.Add(time.Minute)
	v, err := l.Author(l.key, ledger.Draft{Kind: kind, Body: body})
	if err != nil {
		return record.ID{}, err
	}
	return v.ID(), nil
}

func (l *laptop) must(t failer, kind record.Kind, body any) record.ID {
	t.Helper()
	id, err := l.sign(kind, body)
	if err != nil {
		t.Fatalf("sign %s: %v", kind, err)
	}
	return id
}

var (
	allRoles = []record.Role{record.RoleLead, record.RoleTechnician, record.RoleInspector}
	unit104  = record.UnitRef{Part: "HA-40", Serial: "104"}
)

func admit(l *laptop, t failer, name string, roles ...record.Role) record.ID {
	return l.must(t, record.KindHandAdmitted, record.HandAdmitted{Name: name, Roles: roles, Key: keyID(testKey(name))})
}

func amount(m int64, unit string) record.Amount { return record.Amount{Mantissa: m, Unit: unit} }

func stamp(t time.Time) record.Time { return record.Time{Unix: t.Unix()} }

func reading(psi int64, at time.Time) record.Reading {
	return record.Reading{Unit: unit104, Gauge: "G-1", Pressure: amount(psi, "psi"), Temperature: amount(70, "F"), TemperatureFrom: "shell", Relieved: "brake applied until the gauge was dead", FluidPressure: amount(0, "psi"), Done: stamp(at)}
}

func equip(l *laptop, t failer) {
	l.must(t, record.KindUnitRegistered, record.UnitRegistered{Part: unit104.Part, Serial: unit104.Serial})
	l.must(t, record.KindGauge, record.Gauge{Asset: "G-1", Span: amount(3000, "psi"), Accuracy: "ASME 1A", Graduation: amount(10, "psi"), Calibrated: stamp(epoch.AddDate(0, -1, 0)), Due: stamp(epoch.AddDate(1, 0, 0)), Certificate: "C-1"})
}

func TestRolesOnWrite(t *testing.T) {
	lead := found(t, t.TempDir())
	equip(lead, t)
	admit(lead, t, "tech", record.RoleTechnician)
	admit(lead, t, "inspector", record.RoleInspector)
	tech, insp := join(t, t.TempDir(), "tech", lead), join(t, t.TempDir(), "inspector", lead)
	r := tech.must(t, record.KindReading, reading(1180, epoch))
	pull(t, insp, tech)

	refused := func(name string, l *laptop, kind record.Kind, body any, want string) {
		t.Helper()
		before := l.Fingerprint()
		_, err := l.sign(kind, body)
		if re := (*ledger.RefusedError)(nil); !errors.As(err, &re) || !strings.Contains(re.Reason, want) {
			t.Errorf("%s: got %v, want a refusal with %q", name, err, want)
		}
		if l.Fingerprint() != before {
			t.Errorf("%s: the book changed", name)
		}
	}
	refused("technician admits", tech, record.KindHandAdmitted, record.HandAdmitted{Name: "x", Roles: allRoles, Key: keyID(testKey("x"))}, "a lead")
	refused("inspector charges", insp, record.KindCharge, record.Charge{Unit: unit104, Gauge: "G-1", AsFound: record.Observation{Pressure: amount(900, "psi"), Temperature: amount(70, "F"), TemperatureFrom: "shell"}, AsLeft: record.Observation{Pressure: amount(1000, "psi"), Temperature: amount(70, "F"), TemperatureFrom: "shell"}, Relieved: "x", FluidPressure: amount(0, "psi"), Gas: "nitrogen", Bottle: "B-1", Done: stamp(epoch)}, "a technician")
	refused("technician countersigns", tech, record.KindCountersign, record.Countersign{Of: []record.ID{r}, Meaning: "inspected"}, "an inspector or a lead")
	refused("inspector corrects another's", insp, record.KindWithdrawal, record.Withdrawal{Of: r, Reason: "wrong unit"}, "only the hand who signed")
	refused("unit unknown", tech, record.KindUnitFitted, record.UnitFitted{Unit: record.UnitRef{Part: "HA-40", Serial: "999"}, Aircraft: "A1", Position: "left", When: stamp(epoch)}, "not registered")
	refused("stranger", join(t, t.TempDir(), "stranger", lead), record.KindReading, reading(1, epoch), "nobody")

	c := insp.must(t, record.KindCountersign, record.Countersign{Of: []record.ID{r}, Meaning: "inspected"})
	own := insp.must(t, record.KindReading, reading(1175, epoch))
	refused("own entry", insp, record.KindCountersign, record.Countersign{Of: []record.ID{own}, Meaning: "inspected"}, "another person")
	if got := insp.Meaning().Item(r).Countersigned; !slices.Equal(got, []record.ID{c}) {
		t.Errorf("countersigns of the reading: %v, want %v", got, c)
	}

	// A correction keeps the original and makes the countersign of the old body fall.
	fixed, err := record.EncodeBody(record.KindReading, reading(1185, epoch))
	if err != nil {
		t.Fatal(err)
	}
	pull(t, tech, insp)
	tech.must(t, record.KindCorrection, record.Correction{Of: r, Kind: record.KindReading, Body: fixed, Reason: "misread"})
	it := tech.Meaning().Item(r)
	if got := it.Body.(record.Reading).Pressure.Mantissa; got != 1185 {
		t.Errorf("corrected reading: %d, want 1185", got)
	}
	if got := it.Entry().Body.(record.Reading).Pressure.Mantissa; got != 1180 {
		t.Errorf("original reading: %d, want 1180", got)
	}
	if len(it.Countersigned) != 0 || len(it.Fallen) != 1 {
		t.Errorf("countersigns after a correction: %d stand, %d fallen; want 0, 1", len(it.Countersigned), len(it.Fallen))
	}
}

func TestRetirement(t *testing.T) {
	lead := found(t, t.TempDir())
	equip(lead, t)
	admit(lead, t, "tech", record.RoleTechnician)
	tech := join(t, t.TempDir(), "tech", lead)
	kept := tech.must(t, record.KindReading, reading(1180, epoch))
	pull(t, lead, tech)
	late := tech.must(t, record.KindReading, reading(1170, epoch)) // signed before tech hears of the retirement
	lead.must(t, record.KindKeyRetired, record.KeyRetired{Key: keyID(tech.key), LastSeq: 1, LastID: kept, Reason: "laptop lost"})
	pull(t, lead, tech)
	m := lead.Meaning()
	if why := m.Item(kept).SetAside; why != "" {
		t.Errorf("entry before the retirement: set aside: %s", why)
	}
	if why := m.Item(late).SetAside; !strings.Contains(why, "retired after number 1") {
		t.Errorf("entry after the retirement: %q", why)
	}
	if lead.MayMeet(keyID(tech.key)) {
		t.Error("a retired key may still meet")
	}
}

func TestFounderCannotBeRetiredAndEarlierLeadStands(t *testing.T) {
	founder := found(t, t.TempDir())
	admit(founder, t, "a", record.RoleLead)
	admit(founder, t, "b", record.RoleLead)
	a, b := join(t, t.TempDir(), "a", founder), join(t, t.TempDir(), "b", founder)
	if _, err := b.sign(record.KindKeyRetired, record.KeyRetired{Key: keyID(founder.key), LastSeq: 1, Reason: "coup"}); err == nil {
		t.Error("the founder was retired")
	}
	ra := a.must(t, record.KindKeyRetired, record.KeyRetired{Key: keyID(b.key), Reason: "quarrel"})
	rb := b.must(t, record.KindKeyRetired, record.KeyRetired{Key: keyID(a.key), Reason: "quarrel"})
	pull(t, founder, b)
	pull(t, founder, a)
	pull(t, a, b)
	pull(t, b, a)
	for _, l := range []*laptop{founder, a, b} {
		m := l.Meaning()
		if m.Item(ra).SetAside != "" || m.Item(rb).SetAside == "" {
			t.Errorf("retirements: a's %q, b's %q; want a's to stand: a was admitted earlier", m.Item(ra).SetAside, m.Item(rb).SetAside)
		}
	}
}

// A retirement by a hand whose admission falls must not keep its effect.
func TestRetirementFallsWithItsSigner(t *testing.T) {
	founder := found(t, t.TempDir())
	admit(founder, t, "a", record.RoleLead)
	admit(founder, t, "tech", record.RoleTechnician)
	a := join(t, t.TempDir(), "a", founder)
	admit(a, t, "mole", record.RoleLead)
	mole := join(t, t.TempDir(), "mole", a)
	r := mole.must(t, record.KindKeyRetired, record.KeyRetired{Key: keyID(testKey("tech")), Reason: "none"})
	pull(t, founder, mole)
	founder.must(t, record.KindKeyRetired, record.KeyRetired{Key: keyID(a.key), Reason: "key stolen"})
	m := founder.Meaning()
	if m.Item(r).SetAside == "" || !m.InGoodStanding(keyID(testKey("tech"))) || m.Hand(keyID(mole.key)) != nil {
		t.Errorf("the mole's retirement: %q, technician in good standing: %v", m.Item(r).SetAside, m.InGoodStanding(keyID(testKey("tech"))))
	}
}

func TestForkIsSetAsideFromTheForkOn(t *testing.T) {
	lead := found(t, t.TempDir())
	equip(lead, t)
	admit(lead, t, "tech", record.RoleTechnician)
	one, two := join(t, t.TempDir(), "tech", lead), join(t, t.TempDir(), "tech", lead) // a copied disk
	before := one.must(t, record.KindReading, reading(1180, epoch))
	pull(t, two, one)
	x := one.must(t, record.KindReading, reading(1181, epoch))
	y := two.must(t, record.KindReading, reading(1182, epoch))
	pull(t, lead, one)
	pull(t, lead, two)
	m := lead.Meaning()
	if m.Item(before).SetAside != "" || m.Item(x).SetAside == "" || m.Item(y).SetAside == "" {
		t.Errorf("before the fork %q, branches %q and %q", m.Item(before).SetAside, m.Item(x).SetAside, m.Item(y).SetAside)
	}
	lead.must(t, record.KindKeyRetired, record.KeyRetired{Key: keyID(one.key), LastSeq: 2, LastID: x, Reason: "copied disk"})
	m = lead.Meaning()
	if m.Item(x).SetAside != "" || m.Item(y).SetAside == "" {
		t.Errorf("after the lead chose: chosen %q, other %q", m.Item(x).SetAside, m.Item(y).SetAside)
	}
}

// Laptops sign and meet at random; then the set is dealt out in another order, in other batches and with duplicates. The
// meaning must be the same.
func TestAnyOrderOfArrivalGivesOneMeaning(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		dir, err := os.MkdirTemp(t.TempDir(), "")
		if err != nil {
			rt.Fatalf("%v", err)
		}
		tt := failer(rt)
		sub := func(n string) string { return filepath.Join(dir, n) }
		lead := found(tt, sub("lead"))
		equip(lead, tt)
		admit(lead, tt, "second", record.RoleLead, record.RoleInspector)
		admit(lead, tt, "tech", record.RoleTechnician)
		all := []*laptop{lead, join(tt, sub("second"), "second", lead), join(tt, sub("tech"), "tech", lead)}
		for range rapid.IntRange(1, 14).Draw(rt, "steps") {
			l := all[rapid.IntRange(0, 2).Draw(rt, "who")]
			switch rapid.IntRange(0, 5).Draw(rt, "what") {
			case 0, 1:
				_, err = l.sign(record.KindReading, reading(rapid.Int64Range(900, 1300).Draw(rt, "psi"), *l.at))
			case 2:
				_, err = l.sign(record.KindKeyRetired, record.KeyRetired{Key: keyID(all[rapid.IntRange(0, 2).Draw(rt, "whom")].key), LastSeq: 0, Reason: "test"})
			case 3:
				if work := l.Meaning().Unit(unit104).Work; len(work) > 0 {
					_, err = l.sign(record.KindWithdrawal, record.Withdrawal{Of: work[0], Reason: "test"})
				}
			case 4, 5:
				pull(tt, l, all[rapid.IntRange(0, 2).Draw(rt, "from")])
			}
			if re := (*ledger.RefusedError)(nil); err != nil && !errors.As(err, &re) {
				rt.Fatalf("%v", err)
			}
		}
		for range 2 {
			for _, to := range all {
				for _, from := range all {
					pull(tt, to, from)
				}
			}
		}
		want := describe(lead.Meaning())
		lookedUp(rt, lead.Meaning())
		var entries []record.Verified
		for _, it := range lead.Meaning().Entries {
			entries = append(entries, it.Verified)
		}
		entries = append(entries, entries[:len(entries)/2]...)
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(rt, "shuffle"), 1))
		rng.Shuffle(len(entries), func(i, j int) { entries[i], entries[j] = entries[j], entries[i] })
		if diff := cmp.Diff(describe(ledger.Fold(lead.ID(), entries)), want); diff != "" {
			rt.Fatalf("shuffled (-got +want):\n%s", diff)
		}
		for _, l := range all[1:] {
			if diff := cmp.Diff(describe(l.Meaning()), want); diff != "" {
				rt.Fatalf("another laptop (-got +want):\n%s", diff)
			}
		}
	})
}

// lookedUp checks that what is looked up is what the lists hold.
func lookedUp(t failer, m *ledger.Meaning) {
	t.Helper()
	for _, h := range m.Hands {
		for _, k := range h.Keys {
			if first := m.Hands[slices.IndexFunc(m.Hands, func(h *ledger.Hand) bool { return slices.Contains(h.Keys, k) })]; m.Hand(k) != first {
				t.Fatalf("hand of key %s: not the first that has it", k.Short())
			}
		}
	}
	for _, u := range m.Units {
		if m.Unit(u.Ref) != u {
			t.Fatalf("unit %v is not found", u.Ref)
		}
	}
	for _, g := range m.Gauges {
		if m.Gauge(g.Asset) != g {
			t.Fatalf("gauge %s is not found", g.Asset)
		}
	}
	if m.Unit(record.UnitRef{Part: "none", Serial: "none"}) != nil || m.Gauge("none") != nil || m.Hand(record.KeyID{}) != nil {
		t.Fatalf("found what is not there")
	}
}

// describe puts into words all that laptops must agree on.
func describe(m *ledger.Meaning) []string {
	s := []string{fmt.Sprintf("%x", m.Fingerprint())}
	for _, it := range m.Entries {
		s = append(s, fmt.Sprintf("%s %s aside=%q withdrawn=%v counter=%v", it.ID().Short(), it.Entry().Kind, it.SetAside, it.WithdrawnBy, it.Countersigned))
	}
	for _, h := range m.Hands {
		s = append(s, fmt.Sprintf("%s %v retired %d of %d", h.Name, h.Roles, len(h.Retired), len(h.Keys)))
	}
	for _, u := range m.Units {
		s = append(s, fmt.Sprintf("%v %v", u.Ref, u.Work))
	}
	return s
}

func TestStoreOnDisk(t *testing.T) {
	dir := t.TempDir()
	l := found(t, dir)
	if _, err := ledger.Open(dir, l.ID(), time.Now); !errors.Is(err, ledger.ErrBusy) {
		t.Errorf("second open: %v, want ErrBusy", err)
	}
	equip(l, t)
	want := describe(l.Meaning())
	if err := l.Close(); err != nil {
		t.Fatal(err)
	}
	var size int64
	if err := filepath.WalkDir(dir, func(_ string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		info, err := d.Info()
		size += info.Size()
		return err
	}); err != nil {
		t.Fatal(err)
	}
	t.Logf("a nearly empty book takes %d bytes after close", size)
	if size > 5<<20 {
		t.Errorf("a nearly empty book takes %d bytes after close, want under 5 MB", size)
	}
	again, err := ledger.Open(dir, l.ID(), time.Now)
	if err != nil {
		t.Fatal(err)
	}
	defer again.Close()
	if diff := cmp.Diff(describe(again.Meaning()), want); diff != "" {
		t.Errorf("reopened (-got +want):\n%s", diff)
	}
}

// Entries that name what is not held are left out until it is.
func TestMergeLeavesNoGap(t *testing.T) {
	lead := found(t, t.TempDir())
	equip(lead, t)
	empty, err := ledger.Open(t.TempDir(), lead.ID(), time.Now)
	if err != nil {
		t.Fatal(err)
	}
	defer empty.Close()
	var all []record.Verified
	for v := range lead.Missing(t.Context(), nil) {
		all = append(all, v)
	}
	c, err := empty.Merge(t.Context(), all[1:])
	if err != nil || len(c.Added) != 0 || c.Waiting != len(all)-1 {
		t.Fatalf("without the founding entry: %+v, %v", c, err)
	}
	if c, err = empty.Merge(t.Context(), all); err != nil || len(c.Added) != len(all) || empty.Fingerprint() != lead.Fingerprint() {
		t.Fatalf("whole: %+v, %v", c, err)
	}
	if c, err = empty.Merge(t.Context(), all); err != nil || len(c.Added) != 0 || c.Held != len(all) {
		t.Fatalf("twice: %+v, %v", c, err)
	}
}

package ledger_test

import (
	"crypto/ed25519"
	"fmt"
	"slices"
	"sync"
	"testing"
	"time"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// history is an invented book of n entries, signed without a store: five lines that see each other now and then, 300 units,
// three gauges and two sheets.
func history(t testing.TB, n int) (record.BookID, []record.Verified) {
	t.Helper()
	const hands = 5
	keys := make([]ed25519.PrivateKey, hands)
	for i := range keys {
		keys[i] = testKey(fmt.Sprint("hand ", i))
	}
	var book record.BookID
	var all []record.Verified
	var heads [hands]record.Verified
	var met [hands][hands]record.ID // the heads of others that a line has named already
	tick := epoch
	sign := func(who int, kind record.Kind, body any) {
		tick = tick.Add(time.Minute)
		e := record.Entry{Seq: 1, Signed: stamp(tick), Clock: record.HLC{Wall: tick.UnixMilli()}, Kind: kind, Body: body}
		if h := heads[who]; h.ID() != (record.ID{}) {
			e.Seq, e.Prev = h.Entry().Seq+1, h.ID()
		}
		if len(all)%20 < 2 || e.Seq == 1 {
			for i, h := range heads {
				if id := h.ID(); i != who && id != (record.ID{}) && met[who][i] != id {
					e.Seen, met[who][i] = append(e.Seen, id), id
				}
			}
			slices.SortFunc(e.Seen, func(a, b record.ID) int { return slices.Compare(a[:], b[:]) })
		}
		v, err := record.Sign(keys[who], book, e)
		if err != nil {
			t.Fatal(err)
		}
		heads[who], all = v, append(all, v)
	}
	sign(0, record.KindFounding, record.Founding{Title: "Dry Creek", Name: "Founder", Roles: allRoles, PressureUnit: "psi", TemperatureUnit: "F", Format: 1})
	book = record.BookID(all[0].ID())
	for i := 1; i < hands; i++ {
		sign(0, record.KindHandAdmitted, record.HandAdmitted{Name: fmt.Sprint("hand ", i), Roles: allRoles, Key: keyID(keys[i])})
	}
	charge, tol := amount(1000, "psi"), amount(50, "psi")
	for i := range 2 {
		sign(0, record.KindSheet, record.Sheet{Part: unit104.Part, Construction: "bladder", Gas: "nitrogen", ReferenceTemperature: amount(70, "F"), Charge: &charge, Minus: &tol, Plus: &tol,
			Document: "DC-12", Revision: fmt.Sprint(i + 1), Effective: stamp(epoch.AddDate(0, -2+i, 0))})
	}
	for i := range 3 {
		sign(0, record.KindGauge, record.Gauge{Asset: fmt.Sprint("G-", i), Span: amount(3000, "psi"), Accuracy: "ASME 1A", Graduation: amount(10, "psi"), Calibrated: stamp(epoch.AddDate(0, -1, 0)), Due: stamp(epoch.AddDate(1, 0, 0)), Certificate: "C-1"})
	}
	units := make([]record.UnitRef, 300)
	for i := range units {
		units[i] = record.UnitRef{Part: unit104.Part, Serial: fmt.Sprint(100 + i)}
		sign(0, record.KindUnitRegistered, record.UnitRegistered{Part: units[i].Part, Serial: units[i].Serial})
	}
	for i := 1; i < hands; i++ { // each other line begins on top of what the founder laid down
		sign(i, record.KindUnitFitted, record.UnitFitted{Unit: units[i], Aircraft: "A1", Position: "left", When: stamp(tick)})
	}
	for i := 0; len(all) < n; i++ {
		r := reading(900+int64(i%200), tick)
		r.Unit, r.Gauge = units[i*7%len(units)], fmt.Sprint("G-", i%3)
		sign(i%hands, record.KindReading, r)
	}
	return book, all
}

type signed struct {
	book record.BookID
	all  []record.Verified
}

// histories makes each size once: signing takes longer than what is measured.
var histories = map[int]func(testing.TB) signed{1000: once(1000), 20000: once(20000)}

func once(n int) func(testing.TB) signed {
	var o sync.Once
	var s signed
	return func(t testing.TB) signed {
		o.Do(func() { s.book, s.all = history(t, n) })
		return s
	}
}

func sizes(b *testing.B, f func(b *testing.B, h signed)) {
	for _, n := range []int{1000, 20000} {
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			h := histories[n](b)
			f(b, h)
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/1e3/float64(b.N*n), "us/entry")
		})
	}
}

func BenchmarkFold(b *testing.B) {
	sizes(b, func(b *testing.B, h signed) {
		b.ReportAllocs()
		for b.Loop() {
			m := ledger.Fold(h.book, h.all)
			if it := m.Item(h.all[len(h.all)-1].ID()); len(m.Entries) != len(h.all) || it.SetAside != "" {
				b.Fatal(it.SetAside)
			}
		}
	})
}

func stored(b *testing.B, h signed) string {
	dir := b.TempDir()
	k, err := ledger.Open(dir, h.book, time.Now)
	if err != nil {
		b.Fatal(err)
	}
	if c, err := k.Merge(b.Context(), h.all); err != nil || len(c.Added) != len(h.all) {
		b.Fatal(c.Waiting, err)
	}
	if err := k.Close(); err != nil {
		b.Fatal(err)
	}
	return dir
}

// Open and close of a closed book, its meaning taken.
func BenchmarkOpen(b *testing.B) {
	sizes(b, func(b *testing.B, h signed) {
		dir := stored(b, h)
		b.ReportAllocs()
		for b.Loop() {
			k, err := ledger.Open(dir, h.book, time.Now)
			if err != nil {
				b.Fatal(err)
			}
			if got := len(k.Meaning().Entries); got != len(h.all) {
				b.Fatalf("%d entries, want %d", got, len(h.all))
			}
			if err := k.Close(); err != nil {
				b.Fatal(err)
			}
		}
	})
}

// One entry signed on a book of that size; us/entry is by the size of the book.
func BenchmarkAuthor(b *testing.B) {
	sizes(b, func(b *testing.B, h signed) {
		at := h.all[len(h.all)-1].Entry().Signed
		k, err := ledger.Open(stored(b, h), h.book, func() time.Time { return time.Unix(at.Unix+60, 0) })
		if err != nil {
			b.Fatal(err)
		}
		defer k.Close()
		for b.Loop() {
			if _, err := k.Author(testKey("hand 0"), ledger.Draft{Kind: record.KindUnitRegistered, Body: record.UnitRegistered{Part: "HA-41", Serial: "1"}}); err != nil {
				b.Fatal(err)
			}
		}
	})
}

// A book merged in batches of 250, as a meeting brings it, and its meaning taken at the end.
func BenchmarkMerge(b *testing.B) {
	sizes(b, func(b *testing.B, h signed) {
		for b.Loop() {
			k, err := ledger.Open(b.TempDir(), h.book, time.Now)
			if err != nil {
				b.Fatal(err)
			}
			for batch := range slices.Chunk(h.all, 250) {
				if c, err := k.Merge(b.Context(), batch); err != nil || c.Waiting > 0 {
					b.Fatal(c.Waiting, err)
				}
			}
			if got := len(k.Meaning().Entries); got != len(h.all) {
				b.Fatalf("%d entries, want %d", got, len(h.all))
			}
			if err := k.Close(); err != nil {
				b.Fatal(err)
			}
		}
	})
}

package verdict

import (
	"crypto/ed25519"
	"crypto/sha256"
	"fmt"
	"path/filepath"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"pgregory.net/rapid"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// Any order of arrival, any split into batches, duplicates: the same fingerprint, the same verdicts, the same kept view.
func TestVerdictsDoNotDependOnArrival(t *testing.T) {
	root, n := t.TempDir(), 0
	rapid.Check(t, func(t *rapid.T) {
		folder := func() string { n++; return filepath.Join(root, fmt.Sprint(n)) }
		hands := drawBook(t, folder)
		var all []record.Verified
		for v, err := range hands[0].Missing(t.Context(), nil) {
			if err != nil {
				t.Fatal(err)
			}
			all = append(all, v)
		}
		want, wantViews := hands[0].state(t)
		for range 2 {
			copy, err := ledger.Open(folder(), hands[0].ID(), time.Now)
			if err != nil {
				t.Fatal(err)
			}
			order := rapid.Permutation(all).Draw(t, "order")
			for round := 0; len(copy.Meaning().Entries) < len(all); round++ {
				if round > len(all) {
					t.Fatal("entries that never arrive")
				}
				for rest := order; len(rest) > 0; { // what waits for another comes again in the next round, the rest as a duplicate
					k := rapid.IntRange(1, len(rest)).Draw(t, "batch")
					if _, err := copy.Merge(t.Context(), rest[:k]); err != nil {
						t.Fatal(err)
					}
					if rapid.Bool().Draw(t, "look") {
						if _, err := Refresh(copy); err != nil {
							t.Fatal(err)
						}
					}
					rest = rest[k:]
				}
			}
			got, gotViews := (&hand{Book: copy}).state(t)
			if d := cmp.Diff(want, got); d != "" {
				t.Fatalf("verdicts differ: %s", d)
			}
			if d := cmp.Diff(wantViews, gotViews); d != "" {
				t.Fatalf("views differ: %s", d)
			}
			copy.Close()
		}
		for _, h := range hands {
			h.Close()
		}
	})
}

type hand struct {
	*ledger.Book
	key ed25519.PrivateKey
	now time.Time
}

func (h *hand) sign(kind record.Kind, body any) {
	h.now = h.now.Add(time.Minute)
	_, _ = h.Author(h.key, ledger.Draft{Kind: kind, Body: body}) // refused ones leave no trace
}

// state is the fingerprint with each verdict in words, and the view's bytes.
func (h *hand) state(t *rapid.T) (verdicts map[string]string, views map[string][]byte) {
	if _, err := Refresh(h.Book); err != nil {
		t.Fatal(err)
	}
	views, err := h.Views("")
	if err != nil {
		t.Fatal(err)
	}
	verdicts = map[string]string{"fingerprint": fmt.Sprintf("%x", h.Fingerprint())}
	for id, j := range All(h.Meaning()) {
		verdicts[id.String()] = j.Class.String() + " " + j.Sentence
	}
	return verdicts, views
}

// drawBook makes a lead's and a technician's book with random work apart, and joins them.
func drawBook(t *rapid.T, folder func() string) []*hand {
	var hands []*hand
	for _, name := range []string{"lead", "tech"} {
		seed := sha256.Sum256([]byte(name))
		hands = append(hands, &hand{key: ed25519.NewKeyFromSeed(seed[:]), now: time.Date(2031, 3, 4, 5, 0, 0, 0, time.UTC)})
	}
	lead, tech := hands[0], hands[1]
	roles := []record.Role{record.RoleLead, record.RoleTechnician, record.RoleInspector}
	var err error
	if lead.Book, err = ledger.Found(folder(), lead.key, record.Founding{Title: "Dry Creek", Name: "Lead", Roles: roles, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}, func() time.Time { return lead.now }); err != nil {
		t.Fatal(err)
	}
	lead.sign(record.KindHandAdmitted, record.HandAdmitted{Name: "Tech", Roles: roles, Key: record.KeyID(tech.key.Public().(ed25519.PublicKey))})
	at := func(minute int) record.Time {
		return record.Time{Unix: time.Date(2031, 3, 4, 5, minute, 0, 0, time.UTC).Unix()}
	}
	for _, asset := range []string{"G-7", "G-8"} {
		lead.sign(record.KindGauge, record.Gauge{Asset: asset, Span: amount(3000, "psi"), Accuracy: "ASME 1A", Graduation: amount(10, "psi"), Calibrated: at(-1000), Due: at(1_000_000)})
	}
	for _, serial := range []string{"104", "105"} {
		lead.sign(record.KindUnitRegistered, record.UnitRegistered{Part: "HA-40", Serial: serial})
	}
	if tech.Book, err = ledger.Open(folder(), lead.ID(), func() time.Time { return tech.now }); err != nil {
		t.Fatal(err)
	}
	meet(t, tech, lead)
	for range rapid.IntRange(5, 25).Draw(t, "acts") {
		act(t, rapid.SampledFrom(hands).Draw(t, "hand"), at)
		if rapid.IntRange(0, 5).Draw(t, "meet") == 0 {
			meet(t, tech, lead)
		}
	}
	meet(t, tech, lead)
	return hands
}

func meet(t *rapid.T, a, b *hand) {
	for _, way := range [][2]*hand{{a, b}, {b, a}} {
		var batch []record.Verified
		for v, err := range way[1].Missing(t.Context(), way[0].Frontier()) {
			if err != nil {
				t.Fatal(err)
			}
			batch = append(batch, v)
		}
		if _, err := way[0].Merge(t.Context(), batch); err != nil {
			t.Fatal(err)
		}
	}
}

// act signs one random entry of those that bear on verdicts.
func act(t *rapid.T, h *hand, at func(int) record.Time) {
	m := h.Meaning()
	minute := rapid.IntRange(0, 60).Draw(t, "minute")
	psi := amount(rapid.Int64Range(1000, 1400).Draw(t, "psi"), "psi")
	gauge := rapid.SampledFrom([]string{"G-7", "G-8"}).Draw(t, "gauge")
	reading := record.Reading{Unit: record.UnitRef{Part: "HA-40", Serial: rapid.SampledFrom([]string{"104", "105"}).Draw(t, "serial")}, Gauge: gauge, Pressure: psi, Temperature: amount(41, "F"),
		TemperatureFrom: "shell", Relieved: "pedal", FluidPressure: amount(0, "psi"), Done: at(minute)}
	some := func(kind record.Kind) (id record.ID, ok bool) {
		for i := range m.Entries {
			if m.Entries[i].Entry().Kind == kind && (!ok || rapid.Bool().Draw(t, "this")) {
				id, ok = m.Entries[i].ID(), true
			}
		}
		return id, ok
	}
	switch rapid.IntRange(0, 7).Draw(t, "act") {
	case 0:
		tol := amount(100, "psi")
		h.sign(record.KindSheet, record.Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: amount(70, "F"), Charge: &psi, Minus: &tol, Plus: &tol, Document: "CM-29", Revision: "A", Effective: at(minute - 30)})
	case 1:
		if id, ok := some(record.KindReading); ok {
			if body, err := record.EncodeBody(record.KindReading, reading); err == nil {
				h.sign(record.KindCorrection, record.Correction{Of: id, Kind: record.KindReading, Body: body, Reason: "misread"})
			}
		}
	case 2:
		if id, ok := some(rapid.SampledFrom([]record.Kind{record.KindReading, record.KindSheet, record.KindRecall, record.KindGauge}).Draw(t, "kind")); ok {
			h.sign(record.KindWithdrawal, record.Withdrawal{Of: id, Reason: "wrong"})
		}
	case 3:
		h.sign(record.KindGauge, record.Gauge{Asset: gauge, Span: amount(2000, "psi"), Accuracy: "ASME 2A", Graduation: amount(10, "psi"), Calibrated: at(minute - 30), Due: at(1_000_000)})
	case 4:
		r := record.Recall{Gauge: gauge, Since: at(minute), Reason: "reads high"}
		if rapid.Bool().Draw(t, "correction") {
			c := amount(-20, "psi")
			r.Correction = &c
		}
		h.sign(record.KindRecall, r)
	case 5:
		if id, ok := some(record.KindSheet); ok {
			h.sign(record.KindRecall, record.Recall{Sheet: id, Since: at(minute), Reason: "another type's page"})
		}
	default:
		h.sign(record.KindReading, reading)
	}
}

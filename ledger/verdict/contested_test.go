package verdict_test

import (
	"crypto/ed25519"
	"crypto/sha256"
	"strings"
	"testing"
	"time"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// Two leads enter other limits from one day apart: the worse verdict counts on both laptops until one of them, having seen both,
// settles it.
func TestContestedSheets(t *testing.T) {
	now := time.Date(2031, 3, 4, 5, 0, 0, 0, time.UTC)
	key := func(name string) ed25519.PrivateKey {
		seed := sha256.Sum256([]byte(name))
		return ed25519.NewKeyFromSeed(seed[:])
	}
	clock := func() time.Time { now = now.Add(time.Minute); return now }
	day := record.Time{Unix: now.Unix() - 86400}
	am := func(m int64, unit string) record.Amount { return record.Amount{Mantissa: m, Unit: unit} }
	roles := []record.Role{record.RoleLead, record.RoleTechnician}
	a, err := ledger.Found(t.TempDir(), key("a"), record.Founding{Title: "Dry Creek", Name: "A", Roles: roles, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}, clock)
	if err != nil {
		t.Fatal(err)
	}
	defer a.Close()
	b, err := ledger.Open(t.TempDir(), a.ID(), clock)
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	sign := func(book *ledger.Book, who string, kind record.Kind, body any) record.ID {
		t.Helper()
		v, err := book.Author(key(who), ledger.Draft{Kind: kind, Body: body})
		if err != nil {
			t.Fatal(err)
		}
		return v.ID()
	}
	meet := func() {
		t.Helper()
		for _, way := range [][2]*ledger.Book{{a, b}, {b, a}} {
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
	sheet := func(charge int64, revision string) record.Sheet {
		c, tol := am(charge, "psi"), am(100, "psi")
		return record.Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: am(70, "F"), Charge: &c, Minus: &tol, Plus: &tol, Document: "CM-29", Revision: revision, Effective: day}
	}
	sign(a, "a", record.KindHandAdmitted, record.HandAdmitted{Name: "B", Roles: roles, Key: record.KeyID(key("b").Public().(ed25519.PublicKey))})
	sign(a, "a", record.KindUnitRegistered, record.UnitRegistered{Part: "HA-40", Serial: "104"})
	sign(a, "a", record.KindGauge, record.Gauge{Asset: "G-7", Span: am(3000, "psi"), Accuracy: "ASME 1A", Graduation: am(10, "psi"), Calibrated: day, Due: record.Time{Unix: day.Unix + 1e8}})
	meet()
	reading := sign(b, "b", record.KindReading, record.Reading{Unit: record.UnitRef{Part: "HA-40", Serial: "104"}, Gauge: "G-7", Pressure: am(1180, "psi"), Temperature: am(41, "F"), TemperatureFrom: "shell", Relieved: "pedal", FluidPressure: am(0, "psi"), Done: record.Time{Unix: now.Unix()}})
	good := sign(a, "a", record.KindSheet, sheet(1250, "B"))
	bad := sign(b, "b", record.KindSheet, sheet(1600, "B"))
	judge := func(book *ledger.Book) verdict.Judged {
		t.Helper()
		m := book.Meaning()
		j, err := verdict.Judge(m, reading, m.Item(reading).Body)
		if err != nil {
			t.Fatal(err)
		}
		return j
	}
	if j := judge(b); j.Class != calc.Fail || len(j.Contested) != 0 {
		t.Errorf("before they meet: %s", j.Sentence)
	}
	if _, err := verdict.Refresh(a); err != nil {
		t.Fatal(err)
	}
	meet()
	for _, book := range []*ledger.Book{a, b} {
		j := judge(book)
		if j.Class != calc.Fail || j.Sheet.ID != bad || len(j.Contested) != 1 || j.Contested[0].ID != good || !strings.Contains(j.Sentence, "The sheet is contested: CM-29 rev B (entry "+good.Short()) || !strings.Contains(j.Next, "have a lead settle") {
			t.Errorf("contested: %s; next %s", j.Sentence, j.Next)
		}
	}
	settled := sign(a, "a", record.KindSheet, sheet(1250, "B"))
	r, err := verdict.Refresh(a)
	if err != nil {
		t.Fatal(err)
	}
	meet()
	for _, book := range []*ledger.Book{a, b} {
		if j := judge(book); j.Class != calc.Pass || j.Sheet.ID != settled || len(j.Contested) != 0 {
			t.Errorf("settled: %s", j.Sentence)
		}
	}
	if len(r.Moved) != 0 && r.Moved[0].Cause != settled {
		t.Errorf("%+v", r.Moved)
	}
	// The same words entered apart are no dispute.
	sign(a, "a", record.KindSheet, sheet(1300, "C"))
	sign(b, "b", record.KindSheet, sheet(1300, "C"))
	meet()
	if j := judge(a); len(j.Contested) != 0 {
		t.Errorf("equal sheets: %s", j.Sentence)
	}
	// Of two that contest each other the recalled one gives way, whichever of them stands first by the clock; one that both had
	// replaced does not come back when both are recalled.
	for _, first := range []*ledger.Book{a, b} {
		other, who, whom := b, "a", "b"
		if first == b {
			other, who, whom = a, "b", "a"
		}
		wrong := sign(first, who, record.KindSheet, sheet(1700, "D"))
		right := sign(other, whom, record.KindSheet, sheet(1255, "E"))
		meet()
		sign(a, "a", record.KindRecall, record.Recall{Sheet: wrong, Since: day, Reason: "another type's page"})
		meet()
		for _, book := range []*ledger.Book{a, b} {
			if j := judge(book); j.Class != calc.Pass || j.Sheet.ID != right || len(j.Contested) != 0 {
				t.Errorf("one recalled, first on %s: %s", who, j.Sentence)
			}
		}
		sign(a, "a", record.KindRecall, record.Recall{Sheet: right, Since: day, Reason: "another type's page too"})
		meet()
		if j := judge(b); j.Class != calc.NotAssessable {
			t.Errorf("both recalled: %s", j.Sentence)
		}
	}
}

package verdict_test

import (
	"crypto/ed25519"
	"crypto/sha256"
	"fmt"
	"testing"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// fleet is the meaning of a book of so many units with ten readings each.
func fleet(b *testing.B, units int) *ledger.Meaning {
	seed := sha256.Sum256([]byte("founder"))
	key := ed25519.NewKeyFromSeed(seed[:])
	var all []record.Verified
	const start = 1930000000
	var book record.BookID
	sign := func(kind record.Kind, body any) {
		n := uint64(len(all) + 1)
		e := record.Entry{Seq: n, Signed: record.Time{Unix: start + int64(n)}, Clock: record.HLC{Wall: 1000 * (start + int64(n))}, Kind: kind, Body: body}
		if n > 1 {
			e.Prev = all[n-2].ID()
		}
		v, err := record.Sign(key, book, e)
		if err != nil {
			b.Fatal(err)
		}
		if n == 1 {
			book = record.BookID(v.ID())
		}
		all = append(all, v)
	}
	am := func(m int64, unit string) record.Amount { return record.Amount{Mantissa: m, Unit: unit} }
	roles := []record.Role{record.RoleLead, record.RoleTechnician}
	sign(record.KindFounding, record.Founding{Title: "Dry Creek", Name: "Founder", Roles: roles, PressureUnit: "psi", TemperatureUnit: "F", Format: 1})
	charge, tol := am(1250, "psi"), am(100, "psi")
	sign(record.KindSheet, record.Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: am(70, "F"), Charge: &charge, Minus: &tol, Plus: &tol, Document: "CM-29", Revision: "A", Effective: record.Time{Unix: start - 1e8}})
	sign(record.KindGauge, record.Gauge{Asset: "G-7", Span: am(3000, "psi"), Accuracy: "ASME 1A", Graduation: am(10, "psi"), Calibrated: record.Time{Unix: start - 1e8}, Due: record.Time{Unix: start + 1e8}})
	for u := range units {
		sign(record.KindUnitRegistered, record.UnitRegistered{Part: "HA-40", Serial: fmt.Sprint(u)})
	}
	for r := range int64(10) {
		for u := range units {
			sign(record.KindReading, record.Reading{Unit: record.UnitRef{Part: "HA-40", Serial: fmt.Sprint(u)}, Gauge: "G-7", Pressure: am(1180-3*r+int64(u%7), "psi"), Temperature: am(41+r%3, "F"), TemperatureFrom: "shell",
				Relieved: "pedal", FluidPressure: am(0, "psi"), Done: record.Time{Unix: start - 1e6 + r*86400}})
		}
	}
	return ledger.Fold(book, all)
}

// The board of 2,000 units with ten readings each: every verdict of the last readings, and every trend.
func BenchmarkBoardWithTrends(b *testing.B) {
	m := fleet(b, 2000)
	b.ResetTimer()
	for b.Loop() {
		for _, w := range verdict.WatchAll(m) {
			if w.Fit == nil {
				b.Fatal(w.Why)
			}
		}
		for _, u := range m.Units {
			id := u.Work[len(u.Work)-1]
			if _, err := verdict.Judge(m, id, m.Item(id).Body); err != nil {
				b.Fatal(err)
			}
		}
	}
}

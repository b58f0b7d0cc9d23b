package verdict

import (
	"crypto/ed25519"
	"crypto/sha256"
	"slices"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

type shop struct {
	*ledger.Book
	t   *testing.T
	key ed25519.PrivateKey
	now time.Time
}

func amount(m int64, unit string) record.Amount { return record.Amount{Mantissa: m, Unit: unit} }

func newShop(t *testing.T) *shop {
	seed := sha256.Sum256([]byte("founder"))
	s := &shop{t: t, key: ed25519.NewKeyFromSeed(seed[:]), now: time.Date(2031, 3, 4, 5, 0, 0, 0, time.UTC)}
	f := record.Founding{Title: "Dry Creek", Name: "Founder", Roles: []record.Role{record.RoleLead, record.RoleTechnician}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}
	b, err := ledger.Found(t.TempDir(), s.key, f, func() time.Time { return s.now })
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { b.Close() })
	s.Book = b
	for _, serial := range []string{"104", "105"} {
		s.sign(record.KindUnitRegistered, record.UnitRegistered{Part: "HA-40", Serial: serial})
	}
	s.sign(record.KindGauge, record.Gauge{Asset: "G-7", Span: amount(3000, "psi"), Accuracy: "ASME 1A", Graduation: amount(10, "psi"), Calibrated: s.stamp(-1000), Due: s.stamp(1_000_000)})
	s.sheet("A", 1250, -900)
	return s
}

func (s *shop) stamp(minutes int64) record.Time { return record.Time{Unix: s.now.Unix() + 60*minutes} }

func (s *shop) sign(kind record.Kind, body any) record.ID {
	s.t.Helper()
	s.now = s.now.Add(time.Minute)
	v, err := s.Author(s.key, ledger.Draft{Kind: kind, Body: body})
	if err != nil {
		s.t.Fatal(err)
	}
	return v.ID()
}

func (s *shop) sheet(revision string, charge, effective int64) record.ID {
	c, tol := amount(charge, "psi"), amount(100, "psi")
	return s.sign(record.KindSheet, record.Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: amount(70, "F"), Charge: &c, Minus: &tol, Plus: &tol, Document: "CM-29", Revision: revision, Effective: s.stamp(effective)})
}

func (s *shop) reading(serial string, psi int64) record.ID {
	return s.sign(record.KindReading, record.Reading{Unit: record.UnitRef{Part: "HA-40", Serial: serial}, Gauge: "G-7", Pressure: amount(psi, "psi"), Temperature: amount(41, "F"), TemperatureFrom: "shell", Relieved: "pedal", FluidPressure: amount(0, "psi"), Done: s.stamp(0)})
}

func (s *shop) refresh(core string) Refreshed {
	s.t.Helper()
	r, err := refresh(s.Book, core)
	if err != nil {
		s.t.Fatal(err)
	}
	return r
}

func TestKeptVerdicts(t *testing.T) {
	s := newShop(t)
	a, b := s.reading("104", 1180), s.reading("105", 1180)
	if r := s.refresh("1"); r.Judged != 2 || r.Kept != 2 || len(r.Moved) != 0 {
		t.Errorf("at first: %+v", r)
	}
	if r := s.refresh("1"); !r.Complete || r.Judged != 0 {
		t.Errorf("with nothing new: %+v", r)
	}
	c := s.reading("104", 1175)
	if r := s.refresh("1"); r.Judged != 1 || r.Kept != 3 || len(r.Moved) != 0 {
		t.Errorf("one new reading: judged %d of %d, moved %v", r.Judged, r.Kept, r.Moved)
	}
	// A revised sheet moves all that it bears on, and is named.
	sheet := s.sheet("B", 1500, -800)
	r := s.refresh("1")
	if r.Judged != 3 || len(r.Moved) != 3 {
		t.Fatalf("a revised sheet: judged %d, moved %d", r.Judged, len(r.Moved))
	}
	for _, m := range r.Moved {
		if m.Was != calc.Pass || m.Now != calc.Fail || m.Cause != sheet || !slices.Contains([]record.ID{a, b, c}, m.Entry) {
			t.Errorf("%+v", m)
		}
	}
	// Withdrawn again: the withdrawal is what moved them back.
	back := s.sign(record.KindWithdrawal, record.Withdrawal{Of: sheet, Reason: "wrong type"})
	if r := s.refresh("1"); len(r.Moved) != 3 || r.Moved[0].Cause != back || r.Moved[0].Now != calc.Pass {
		t.Errorf("a withdrawn sheet: %+v", r.Moved)
	}
	// A recall with a correction touches what was read since.
	recall := s.sign(record.KindRecall, record.Recall{Gauge: "G-7", Since: s.stamp(-60), Correction: func() *record.Amount { x := amount(-300, "psi"); return &x }(), Reason: "reads high"})
	if r := s.refresh("1"); len(r.Moved) != 3 || r.Moved[0].Cause != recall || r.Moved[0].Now != calc.Fail {
		t.Errorf("a recalled gauge: %+v", r.Moved)
	}
	// Another core judges all anew; equal verdicts have not moved.
	if r := s.refresh("2"); r.Judged != 3 || !r.NewCore || len(r.Moved) != 0 {
		t.Errorf("another core: %+v", r)
	}
	// What cannot be read is made anew.
	rows, err := s.Views("")
	if err != nil {
		t.Fatal(err)
	}
	broken := map[string][]byte{}
	for name := range rows {
		broken[name] = []byte{0xff, 0x00}
	}
	if err := s.SetViews(broken); err != nil {
		t.Fatal(err)
	}
	if r := s.refresh("2"); r.Judged != 3 || len(r.Moved) != 0 {
		t.Errorf("a damaged view: %+v", r)
	}
	if got, _ := s.Views(""); !cmp.Equal(got, rows) {
		t.Error("a view made anew differs")
	}
	// Thrown away and made anew.
	if r, err := Rebuild(s.Book); err != nil || r.Judged != 3 || len(r.Moved) != 0 {
		t.Errorf("rebuilt: %+v, %v", r, err)
	}
}

// A row that holds another verdict than today's with the same grounds is told when all is computed anew, with no cause.
func TestRebuildTellsWhatDiffered(t *testing.T) {
	s := newShop(t)
	id := s.reading("104", 1180)
	s.refresh(calc.CoreVersion)
	name := rowName(record.UnitRef{Part: "HA-40", Serial: "104"})
	row, err := viewEncoding.Marshal([]kept{{Entry: id, Class: calc.Fail, Rests: rests(s.Meaning(), id)}})
	if err != nil {
		t.Fatal(err)
	}
	if err := s.SetViews(map[string][]byte{name: row}); err != nil {
		t.Fatal(err)
	}
	r, err := Rebuild(s.Book)
	if err != nil || len(r.Moved) != 1 || r.Moved[0].Was != calc.Fail || r.Moved[0].Now != calc.Pass || r.Moved[0].Cause != (record.ID{}) {
		t.Errorf("%+v, %v", r, err)
	}
}

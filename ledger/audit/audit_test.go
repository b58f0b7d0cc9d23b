package audit_test

import (
	"bytes"
	"crypto/ed25519"
	"crypto/sha256"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/audit"
	"example.org/chargehand/ledger/record"
)

func key(name string) ed25519.PrivateKey {
	seed := sha256.Sum256([]byte(name))
	return ed25519.NewKeyFromSeed(seed[:])
}

func id(k ed25519.PrivateKey) record.KeyID { return record.KeyID(k.Public().(ed25519.PublicKey)) }

var start = time.Date(2031, 3, 4, 5, 0, 0, 0, time.UTC)

func psi(n int64) record.Amount { return record.Amount{Mantissa: n, Unit: "psi"} }

// history founds a book, admits a technician, equips it, and signs two readings.
func history(t *testing.T, dir string) (*ledger.Book, []record.Verified) {
	t.Helper()
	at := start
	b, err := ledger.Found(dir, key("lead"), record.Founding{Title: "Dry Creek", Name: "Lead", Roles: []record.Role{record.RoleLead, record.RoleTechnician}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}, func() time.Time { at = at.Add(time.Minute); return at })
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { b.Close() })
	sign := func(who string, kind record.Kind, body any) {
		t.Helper()
		if _, err := b.Author(key(who), ledger.Draft{Kind: kind, Body: body}); err != nil {
			t.Fatalf("%s: %v", kind, err)
		}
	}
	sign("lead", record.KindHandAdmitted, record.HandAdmitted{Name: "Tech", Roles: []record.Role{record.RoleTechnician}, Key: id(key("tech"))})
	sign("lead", record.KindUnitRegistered, record.UnitRegistered{Part: "HA-40", Serial: "104"})
	sign("lead", record.KindGauge, record.Gauge{Asset: "G-1", Span: psi(3000), Accuracy: "ASME 1A", Graduation: psi(10), Calibrated: record.Time{Unix: start.AddDate(0, -1, 0).Unix()}, Due: record.Time{Unix: start.AddDate(1, 0, 0).Unix()}})
	c, tol := psi(1250), psi(100)
	sign("lead", record.KindSheet, record.Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: record.Amount{Mantissa: 70, Unit: "F"}, Charge: &c, Minus: &tol, Plus: &tol, Document: "CM-29", Revision: "A", Effective: record.Time{Unix: start.Unix()}})
	sign("tech", record.KindReading, reading(1180))
	sign("tech", record.KindReading, reading(1175))
	return b, entries(b.Meaning())
}

func reading(p int64) record.Reading {
	return record.Reading{Unit: record.UnitRef{Part: "HA-40", Serial: "104"}, Gauge: "G-1", Pressure: psi(p), Temperature: record.Amount{Mantissa: 41, Unit: "F"}, TemperatureFrom: "shell", Relieved: "pedal", FluidPressure: psi(0), Done: record.Time{Unix: start.Add(time.Minute).Unix()}}
}

func entries(m *ledger.Meaning) []record.Verified {
	var vs []record.Verified
	for _, it := range m.Entries {
		vs = append(vs, it.Verified)
	}
	return vs
}

func sentences(r audit.Report) string {
	var s []string
	for _, f := range r.Findings {
		s = append(s, f.Severity.String()+": "+f.Sentence)
	}
	return strings.Join(s, "\n")
}

func TestCleanBook(t *testing.T) {
	b, _ := history(t, t.TempDir())
	if r := audit.Run(b.Meaning(), nil, audit.Outside{}); len(r.Findings) != 0 || r.Verdicts != 2 || r.Entries != 7 {
		t.Errorf("%d entries, %d verdicts, found:\n%s", r.Entries, r.Verdicts, sentences(r))
	}
}

func TestWhatAnAuditFinds(t *testing.T) {
	b, vs := history(t, t.TempDir())
	last := vs[len(vs)-1]
	forge := func(who string, change func(*record.Entry)) record.Verified {
		t.Helper()
		e := last.Entry()
		e.Clock.Count++
		change(&e)
		v, err := record.Sign(key(who), b.ID(), e)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	stranger := forge("stranger", func(e *record.Entry) { e.Seq, e.Prev, e.Seen = 1, record.ID{}, []record.ID{last.ID()} })
	// Written anew with the technician's own key and an earlier date: the line then holds two entries of one number.
	redated := forge("tech", func(e *record.Entry) { e.Signed.Unix -= 86400 })
	backdated := forge("tech", func(e *record.Entry) {
		e.Seq, e.Prev, e.Seen, e.Signed.Unix = e.Seq+1, last.ID(), nil, e.Signed.Unix-86400
	})
	with := func(v record.Verified) []record.Verified { return append(slices.Clone(vs), v) }
	for name, c := range map[string]struct {
		entries []record.Verified
		want    string
	}{
		"an entry removed from the middle": {slices.Delete(slices.Clone(vs), 3, 4), "fault: it builds on entry " + vs[3].ID().Short() + ", which is missing"},
		"a stranger's key":                 {with(stranger), "fault: the reading is set aside: nobody whom it had seen admitted its key"},
		"an entry re-dated":                {with(redated), "fault: the reading is set aside: its line is forked at number 2"},
		"signed before what it has seen":   {with(backdated), "warning: its clock contradicts its past"},
		"the founding entry removed":       {vs[1:], "fault: the founding entry is missing"},
	} {
		if r := audit.Run(ledger.Fold(b.ID(), c.entries), nil, audit.Outside{}); !strings.Contains(sentences(r), c.want) {
			t.Errorf("%s: want %q in\n%s", name, c.want, sentences(r))
		}
	}
	other := record.BookID{1}
	if r := audit.Run(b.Meaning(), nil, audit.Outside{Founding: &other}); !strings.Contains(sentences(r), "another book") {
		t.Errorf("another founding fingerprint: %s", sentences(r))
	}
}

func TestRetiredKey(t *testing.T) {
	b, vs := history(t, t.TempDir())
	first := vs[5]
	if _, err := b.Author(key("lead"), ledger.Draft{Kind: record.KindKeyRetired, Body: record.KeyRetired{Key: id(key("tech")), LastSeq: 1, LastID: first.ID(), Reason: "laptop lost"}}); err != nil {
		t.Fatal(err)
	}
	r := audit.Run(b.Meaning(), nil, audit.Outside{})
	if len(r.Findings) != 1 || r.Findings[0].Entry != vs[6].ID() || !strings.Contains(sentences(r), "retired after number 1") {
		t.Errorf("found:\n%s", sentences(r))
	}
}

// A sheet revised with effect from before the reading moves its verdict; the audit names the cause.
func TestVerdictMovedSinceItWasShown(t *testing.T) {
	b, _ := history(t, t.TempDir())
	v, err := b.Author(key("tech"), ledger.Draft{Kind: record.KindReading, Body: reading(1180), Shown: &record.Shown{Verdict: "pass", Core: "1"}})
	if err != nil {
		t.Fatal(err)
	}
	c, tol := psi(1500), psi(100)
	s, err := b.Author(key("lead"), ledger.Draft{Kind: record.KindSheet, Body: record.Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: record.Amount{Mantissa: 70, Unit: "F"}, Charge: &c, Minus: &tol, Plus: &tol, Document: "CM-29", Revision: "B", Effective: record.Time{Unix: start.Unix() + 1}}})
	if err != nil {
		t.Fatal(err)
	}
	r := audit.Run(b.Meaning(), nil, audit.Outside{})
	want := `its signer was shown "pass", rightly by what the book held then; the verdict is now "fail" because of entry ` + s.ID().Short()
	if len(r.Findings) != 1 || r.Findings[0].Entry != v.ID() || r.Findings[0].Sentence != want {
		t.Errorf("found:\n%s\nwant %s", sentences(r), want)
	}
}

// One bit flipped in the files of a closed store is found, or it lay where no entry's bytes are.
func TestFlippedBitInTheStore(t *testing.T) {
	dir := t.TempDir()
	b, vs := history(t, dir)
	book := b.ID()
	if err := b.Close(); err != nil {
		t.Fatal(err)
	}
	tables, err := filepath.Glob(filepath.Join(dir, "*.sst"))
	if err != nil || len(tables) == 0 {
		t.Fatalf("no table of the store: %v", err)
	}
	data, err := os.ReadFile(tables[0])
	if err != nil {
		t.Fatal(err)
	}
	sig := vs[6].Raw()
	at := bytes.Index(data, sig[len(sig)-40:]) // a signature does not compress, so it stands there as it is
	if at < 0 {
		t.Fatal("the entry's signature is not in the table")
	}
	data[at] ^= 4
	if err := os.WriteFile(tables[0], data, 0o600); err != nil {
		t.Fatal(err)
	}
	found := 0
	_, err = ledger.Inspect(dir, book, func(string, error) { found++ })
	if found == 0 && err == nil {
		t.Error("a flipped bit was not found")
	}
	if _, err := ledger.Open(dir, book, time.Now); err == nil || !errors.Is(err, ledger.ErrDamaged) {
		t.Errorf("opening the damaged store: %v, want ErrDamaged", err)
	}
}

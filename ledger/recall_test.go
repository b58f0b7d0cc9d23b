package ledger_test

import (
	"context"
	"strings"
	"testing"

	"example.org/chargehand/ledger/record"
)

func at(minutes int64) record.Time { return record.Time{Unix: epoch.Unix() + 60*minutes} }

func gaugeBody(asset string, calibrated int64) record.Gauge {
	return record.Gauge{Asset: asset, Span: amount(3000, "psi"), Accuracy: "ASME 1A", Graduation: amount(10, "psi"), Calibrated: at(calibrated), Due: at(1_000_000)}
}

func readingBody(unit record.UnitRef, gauge string, done int64) record.Reading {
	return record.Reading{Unit: unit, Gauge: gauge, Pressure: amount(1180, "psi"), Temperature: amount(41, "F"), TemperatureFrom: "shell", Relieved: "pedal", FluidPressure: amount(0, "psi"), Done: at(done)}
}

func TestARecalledGaugeIsRefusedByWhoHasHeard(t *testing.T) {
	lead := found(t, t.TempDir())
	admit(lead, t, "tech", record.RoleTechnician)
	lead.must(t, record.KindUnitRegistered, record.UnitRegistered{Part: unit104.Part, Serial: unit104.Serial})
	lead.must(t, record.KindGauge, gaugeBody("G-7", 0))
	tech := join(t, t.TempDir(), "tech", lead)
	recall := lead.must(t, record.KindRecall, record.Recall{Gauge: "G-7", Since: at(10), Reason: "15 psi high at calibration"})

	unheard := tech.must(t, record.KindReading, readingBody(unit104, "G-7", 20))
	if _, err := lead.sign(record.KindReading, readingBody(unit104, "G-7", 20)); err == nil || !strings.Contains(err.Error(), "was recalled by entry "+recall.Short()) {
		t.Errorf("the lead has heard: %v", err)
	}
	lead.must(t, record.KindReading, readingBody(unit104, "G-7", 5)) // a late entry of work done before
	pull(t, lead, tech)
	pull(t, tech, lead)
	if it := lead.Meaning().Item(unheard); !it.Counts() {
		t.Errorf("signed by one who had not heard: %s", it.SetAside)
	}
	if _, err := tech.sign(record.KindReading, readingBody(unit104, "G-7", 30)); err == nil {
		t.Error("the technician has heard now")
	}
	m := tech.Meaning()
	if r := m.GaugeRecall("G-7", at(20)); r == nil || r.ID != recall {
		t.Error("the recall does not reach the reading of minute 20")
	}
	if m.GaugeRecall("G-7", at(5)) != nil || m.GaugeRecall("G-8", at(20)) != nil {
		t.Error("the recall reaches too far")
	}
	// Calibrated again on minute 40: what is done from then on is sound, what was done before is not.
	lead.must(t, record.KindGauge, gaugeBody("G-7", 40))
	lead.must(t, record.KindReading, readingBody(unit104, "G-7", 50))
	m = lead.Meaning()
	if m.GaugeRecall("G-7", at(50)) != nil || m.GaugeRecall("G-7", at(39)) == nil {
		t.Error("a new calibration does not end the recall where it should")
	}
	// A recall that is withdrawn was none.
	lead.must(t, record.KindWithdrawal, record.Withdrawal{Of: recall, Reason: "the wrong gauge"})
	if lead.Meaning().GaugeRecall("G-7", at(20)) != nil {
		t.Error("a withdrawn recall counts")
	}
}

func TestARecalledSheetGivesWayToOneEnteredSince(t *testing.T) {
	lead := found(t, t.TempDir())
	sheet := func(revision string, effective int64) record.ID {
		charge, tol := amount(1250, "psi"), amount(100, "psi")
		return lead.must(t, record.KindSheet, record.Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: amount(70, "F"), Charge: &charge, Minus: &tol, Plus: &tol, Document: "CM-29", Revision: revision, Effective: at(effective)})
	}
	a, b := sheet("A", 0), sheet("B", 10)
	recall := lead.must(t, record.KindRecall, record.Recall{Sheet: b, Since: at(10), Reason: "a page of another type"})
	if s := lead.Meaning().SheetAt("HA-40", at(20)); s.ID != b || lead.Meaning().SheetRecall(b, at(20)).ID != recall {
		t.Error("nobody has said what holds instead, so nothing does")
	}
	if s := lead.Meaning().SheetAt("HA-40", at(5)); s.ID != a {
		t.Error("what held before the recalled sheet")
	}
	again := sheet("A", 5)
	if s := lead.Meaning().SheetAt("HA-40", at(20)); s.ID != again {
		t.Errorf("revision %s holds, and not the one entered since the recall", s.Revision)
	}
	if _, err := lead.sign(record.KindRecall, record.Recall{Sheet: recall, Since: at(10), Reason: "x"}); err == nil {
		t.Error("a recall of a recall")
	}
}

// A corrected entry names a unit and a gauge that are known, as the entry itself had to.
func TestACorrectionNamesWhatIsKnown(t *testing.T) {
	lead := found(t, t.TempDir())
	lead.must(t, record.KindUnitRegistered, record.UnitRegistered{Part: unit104.Part, Serial: unit104.Serial})
	lead.must(t, record.KindGauge, gaugeBody("G-7", 0))
	id := lead.must(t, record.KindReading, readingBody(unit104, "G-7", 1))
	for name, body := range map[string]record.Reading{
		"unit":  readingBody(record.UnitRef{Part: "HA-40", Serial: "999"}, "G-7", 1),
		"gauge": readingBody(unit104, "G-99", 1),
	} {
		enc, err := record.EncodeBody(record.KindReading, body)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := lead.sign(record.KindCorrection, record.Correction{Of: id, Kind: record.KindReading, Body: enc, Reason: "x"}); err == nil || !strings.Contains(err.Error(), "not registered") {
			t.Errorf("another %s: %v", name, err)
		}
	}
}

// A clock that lies puts an entry before what it had seen; its meaning is not disturbed.
func TestALyingClockDisturbsNothing(t *testing.T) {
	lead := found(t, t.TempDir())
	lead.must(t, record.KindUnitRegistered, record.UnitRegistered{Part: unit104.Part, Serial: unit104.Serial})
	head := lead.Frontier()[0]
	v, err := record.Sign(lead.key, lead.ID(), record.Entry{Seq: head.Seq + 1, Prev: head.ID, Signed: at(-1000), Clock: record.HLC{}, Kind: record.KindUnitFitted,
		Body: record.UnitFitted{Unit: unit104, Aircraft: "KITE 2", Position: "left brake", When: at(0)}})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := lead.Merge(context.Background(), []record.Verified{v}); err != nil {
		t.Fatal(err)
	}
	if u := lead.Meaning().Unit(unit104); u == nil || u.Aircraft != "KITE 2" {
		t.Errorf("%+v", u)
	}
	if it := lead.Meaning().Item(v.ID()); len(it.Flags) == 0 {
		t.Error("the clock is not flagged")
	}
}

func TestAHoldTestIsOfOneUnitAndOneGauge(t *testing.T) {
	lead := found(t, t.TempDir())
	other := record.UnitRef{Part: "HA-40", Serial: "105"}
	for _, u := range []record.UnitRef{unit104, other} {
		lead.must(t, record.KindUnitRegistered, record.UnitRegistered{Part: u.Part, Serial: u.Serial})
	}
	lead.must(t, record.KindGauge, gaugeBody("G-7", 0))
	lead.must(t, record.KindGauge, gaugeBody("G-8", 0))
	start := lead.must(t, record.KindReading, readingBody(unit104, "G-7", 1))
	hold := func(end record.ID) error {
		_, err := lead.sign(record.KindHold, record.Hold{Start: start, End: end, Limit: amount(20, "psi"), Document: "CM-29"})
		return err
	}
	for body, want := range map[*record.Reading]string{ptr(readingBody(other, "G-7", 60)): "of one unit", ptr(readingBody(unit104, "G-8", 60)): "with one gauge"} {
		if err := hold(lead.must(t, record.KindReading, *body)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%v, want %q", err, want)
		}
	}
	if err := hold(lead.Meaning().Gauge("G-7").ID); err == nil || !strings.Contains(err.Error(), "is of two readings") {
		t.Errorf("a hold test that ends with a gauge: %v", err)
	}
	if err := hold(lead.must(t, record.KindReading, readingBody(unit104, "G-7", 61))); err != nil {
		t.Error(err)
	}
	if n := len(lead.Meaning().Unit(unit104).Holds); n != 1 {
		t.Errorf("%d hold tests", n)
	}
}

func ptr[T any](v T) *T { return &v }

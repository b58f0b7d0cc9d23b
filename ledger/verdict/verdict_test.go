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

func key(name string) ed25519.PrivateKey {
	seed := sha256.Sum256([]byte(name))
	return ed25519.NewKeyFromSeed(seed[:])
}

var (
	start  = time.Date(2031, 3, 4, 5, 0, 0, 0, time.UTC)
	unit   = record.UnitRef{Part: "HA-40", Serial: "104"}
	worked = stamp(start.Add(time.Minute))
)

func stamp(t time.Time) record.Time { return record.Time{Unix: t.Unix()} }

func psi(n int64) record.Amount        { return record.Amount{Mantissa: n, Unit: "psi"} }
func fahrenheit(n int64) record.Amount { return record.Amount{Mantissa: n, Unit: "F"} }
func of(a record.Amount) *record.Amount {
	return &a
}

// laptop is one hand's copy of the book, with a clock that moves a minute an entry.
type laptop struct {
	*ledger.Book
	t   *testing.T
	who string
}

// book is a lead's, with a technician admitted, a unit and a gauge, and no sheet.
func book(t *testing.T) *laptop {
	t.Helper()
	at := start
	b, err := ledger.Found(t.TempDir(), key("lead"), record.Founding{Title: "Dry Creek", Name: "Lead", Roles: []record.Role{record.RoleLead, record.RoleTechnician}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}, func() time.Time { at = at.Add(time.Minute); return at })
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { b.Close() })
	l := &laptop{b, t, "lead"}
	l.sign(record.KindHandAdmitted, record.HandAdmitted{Name: "Tech", Roles: []record.Role{record.RoleTechnician}, Key: record.KeyID(key("tech").Public().(ed25519.PublicKey))}, nil)
	l.sign(record.KindUnitRegistered, record.UnitRegistered{Part: unit.Part, Serial: unit.Serial}, nil)
	l.sign(record.KindGauge, gauge(), nil)
	return l
}

// tech is a technician's laptop with what the other one holds.
func tech(t *testing.T, from *laptop) *laptop {
	t.Helper()
	at := start.Add(time.Hour)
	b, err := ledger.Open(t.TempDir(), from.ID(), func() time.Time { at = at.Add(time.Minute); return at })
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { b.Close() })
	l := &laptop{b, t, "tech"}
	l.pull(from)
	return l
}

func (l *laptop) pull(from *laptop) {
	l.t.Helper()
	var batch []record.Verified
	for v, err := range from.Missing(l.t.Context(), l.Frontier()) {
		if err != nil {
			l.t.Fatal(err)
		}
		batch = append(batch, v)
	}
	if c, err := l.Merge(l.t.Context(), batch); err != nil || c.Waiting > 0 {
		l.t.Fatalf("merge: %v, %d waiting", err, c.Waiting)
	}
}

func (l *laptop) sign(kind record.Kind, body any, shown *record.Shown) record.ID {
	l.t.Helper()
	v, err := l.Author(key(l.who), ledger.Draft{Kind: kind, Body: body, Shown: shown})
	if err != nil {
		l.t.Fatalf("%s: %v", kind, err)
	}
	return v.ID()
}

// shows signs a body as the program does: with the verdict that the signer was shown.
func (l *laptop) shows(kind record.Kind, body any) record.ID {
	l.t.Helper()
	j, err := verdict.Judge(l.Meaning(), record.ID{}, body)
	if err != nil {
		l.t.Fatal(err)
	}
	return l.sign(kind, body, &record.Shown{Verdict: j.Class.String(), Core: calc.CoreVersion})
}

func (l *laptop) correct(id record.ID, kind record.Kind, body any) record.ID {
	l.t.Helper()
	raw, err := record.EncodeBody(kind, body)
	if err != nil {
		l.t.Fatal(err)
	}
	return l.sign(record.KindCorrection, record.Correction{Of: id, Kind: kind, Body: raw, Reason: "misread"}, nil)
}

func gauge() record.Gauge {
	return record.Gauge{Asset: "G-1", Span: psi(3000), Accuracy: "ASME 3A", Graduation: psi(5), Calibrated: stamp(start.AddDate(0, -1, 0)), Due: stamp(start.AddDate(1, 0, 0))}
}

// sheet is in force from the start: 1,250 psi +/-100 at 70 degF.
func sheet(revision string) record.Sheet {
	return record.Sheet{Part: unit.Part, Gas: "nitrogen", ReferenceTemperature: fahrenheit(70), Charge: of(psi(1250)), Minus: of(psi(100)), Plus: of(psi(100)), Document: "CM-29", Revision: revision, Effective: stamp(start)}
}

func tight(revision string, charge int64) record.Sheet {
	s := sheet(revision)
	s.Charge = of(psi(charge))
	return s
}

func reading(p int64) record.Reading {
	return record.Reading{Unit: unit, Gauge: "G-1", Pressure: psi(p), Temperature: fahrenheit(70), TemperatureFrom: "shell", Relieved: "pedal", FluidPressure: psi(0), Done: worked}
}

// Each reason that comes from joining entries; those of the core have their tests there.
func TestJudgeSaysWhyNot(t *testing.T) {
	chart := sheet("chart")
	chart.Charge, chart.Minus, chart.Plus = nil, nil, nil
	chart.Chart = []record.ChartRow{{Temperature: fahrenheit(32), Low: psi(1100), Charge: psi(1150), High: psi(1200)}, {Temperature: fahrenheit(60), Low: psi(1150), Charge: psi(1200), High: psi(1250)}}
	falling := chart
	falling.Chart = []record.ChartRow{chart.Chart[0], {Temperature: fahrenheit(60), Low: psi(1000), Charge: psi(1100), High: psi(1200)}}
	odd := func(edit func(*record.Sheet)) record.Sheet { s := sheet("odd"); edit(&s); return s }
	bad := func(edit func(*record.Gauge)) record.Gauge { g := gauge(); edit(&g); return g }
	read := func(edit func(*record.Reading)) record.Reading { r := reading(1250); edit(&r); return r }
	for _, x := range []struct {
		name   string
		sheets []record.Sheet
		gauge  record.Gauge
		body   any
		why    string
	}{
		{"no sheet", nil, gauge(), reading(1250), "no sheet for part HA-40 was in force"},
		{"the sheet came later", []record.Sheet{odd(func(s *record.Sheet) { s.Effective = stamp(start.Add(time.Hour)) })}, gauge(), reading(1250), "no sheet for part HA-40 was in force"},
		{"a sheet of another part", []record.Sheet{odd(func(s *record.Sheet) { s.Part = "HA-41" })}, gauge(), reading(1250), "no sheet for part HA-40 was in force"},
		{"a gas nobody knows", []record.Sheet{odd(func(s *record.Sheet) { s.Gas = "argon" })}, gauge(), reading(1250), `sheet CM-29 rev odd cannot be used: gas "argon"`},
		{"a charge in minutes", []record.Sheet{odd(func(s *record.Sheet) { s.Charge = &record.Amount{Mantissa: 5, Unit: "min"} })}, gauge(), reading(1250), "sheet CM-29 rev odd cannot be used: charge"},
		{"a chart that falls", []record.Sheet{falling}, gauge(), reading(1250), "sheet CM-29 rev chart cannot be used: the chart falls"},
		{"chart exceeded", []record.Sheet{chart}, gauge(), reading(1250), "outside the chart"},
		{"gauge not registered", []record.Sheet{sheet("A")}, gauge(), read(func(r *record.Reading) { r.Gauge = "G-9" }), "gauge G-9 is not registered"},
		{"gauge with an accuracy nobody knows", []record.Sheet{sheet("A")}, bad(func(g *record.Gauge) { g.Accuracy = "ASME Z" }), reading(1250), "gauge G-1 cannot be used: grade"},
		{"gauge with a span in degrees", []record.Sheet{sheet("A")}, bad(func(g *record.Gauge) { g.Span = fahrenheit(3000) }), reading(1250), "gauge G-1 cannot be used: span"},
		{"calibration ran out", []record.Sheet{sheet("A")}, bad(func(g *record.Gauge) { g.Due = stamp(start) }), reading(1250), "gauge G-1 is out of calibration (calibrated 2031-02-04, due 2031-03-04)"},
		{"calibrated after the work", []record.Sheet{sheet("A")}, bad(func(g *record.Gauge) { g.Calibrated = stamp(start.Add(time.Hour)) }), reading(1250), "gauge G-1 is out of calibration"},
		{"pressure in degrees", []record.Sheet{sheet("A")}, gauge(), read(func(r *record.Reading) { r.Pressure = fahrenheit(1250) }), "gauge reading"},
		{"temperature not known", []record.Sheet{sheet("A")}, gauge(), read(func(r *record.Reading) { r.TemperatureFrom = "unknown" }), "the gas temperature is not known"},
		{"fluid not relieved", []record.Sheet{sheet("A")}, gauge(), read(func(r *record.Reading) { r.FluidPressure = psi(900) }), "hydraulic pressure was not relieved: 900 psi"},
	} {
		t.Run(x.name, func(t *testing.T) {
			l := book(t)
			l.sign(record.KindGauge, x.gauge, nil)
			for _, s := range x.sheets {
				l.sign(record.KindSheet, s, nil)
			}
			j, err := verdict.Judge(l.Meaning(), record.ID{7}, x.body)
			if err != nil || j.Class != calc.NotAssessable || len(j.Reasons) != 1 || !strings.Contains(j.Reasons[0], x.why) || !strings.Contains(j.Sentence, x.why) || j.Next == "" {
				t.Errorf("%v: %s, %q, next %q; want %q", err, j.Class, j.Reasons, j.Next, x.why)
			}
			if j.Entry != (record.ID{7}) || j.Unit != unit {
				t.Errorf("it is the verdict on %v of %v", j.Entry, j.Unit)
			}
		})
	}
}

// The sheet in force is the one at the time of the work, not at the time of the question; a charge is judged as left.
func TestJudgeByTheSheetOfTheDay(t *testing.T) {
	l := book(t)
	l.sign(record.KindSheet, sheet("A"), nil)
	later := tight("B", 1700)
	later.Effective = stamp(start.Add(time.Hour))
	b := l.sign(record.KindSheet, later, nil)
	left := func(p int64) record.Observation {
		return record.Observation{Pressure: psi(p), Temperature: fahrenheit(70), TemperatureFrom: "shell"}
	}
	charge := func(done record.Time) record.Charge {
		return record.Charge{Unit: unit, Gauge: "G-1", AsFound: left(700), AsLeft: left(1250), Relieved: "pedal", FluidPressure: psi(0), Bottle: "B-1", Gas: "nitrogen", Done: done}
	}
	if j, err := verdict.Judge(l.Meaning(), record.ID{}, charge(worked)); err != nil || j.Class != calc.Pass || j.Sheet.Revision != "A" {
		t.Errorf("%v: %s", err, j.Sentence)
	}
	if j, err := verdict.Judge(l.Meaning(), record.ID{}, charge(stamp(start.Add(2*time.Hour)))); err != nil || j.Class != calc.Fail || j.Sheet.ID != b {
		t.Errorf("%v: %s", err, j.Sentence)
	}
	if j, err := verdict.Judge(l.Meaning(), record.ID{}, sheet("A")); err == nil {
		t.Errorf("a sheet has the verdict %s", j.Class)
	}
}

func TestAllIsJudgeOfEach(t *testing.T) {
	l := book(t)
	l.sign(record.KindSheet, sheet("A"), nil)
	var ids []record.ID
	for _, p := range []int64{900, 1140, 1160, 1250, 1340, 1600} {
		ids = append(ids, l.sign(record.KindReading, reading(p), nil))
	}
	l.sign(record.KindWithdrawal, record.Withdrawal{Of: ids[0], Reason: "wrong unit"}, nil)
	m := l.Meaning()
	all := verdict.All(m)
	if len(all) != len(ids)-1 {
		t.Errorf("%d verdicts on %d readings, of which one is withdrawn", len(all), len(ids))
	}
	classes := map[calc.Class]bool{}
	for _, id := range ids[1:] {
		j, err := verdict.Judge(m, id, m.Item(id).Body)
		if err != nil || j.Sentence != all[id].Sentence || all[id].Entry != id {
			t.Errorf("%s: alone %q, among all %q", id.Short(), j.Sentence, all[id].Sentence)
		}
		classes[j.Class] = true
	}
	if len(classes) < 3 {
		t.Errorf("only %d classes: the test says little", len(classes))
	}
}

// Each entry that can move a verdict, and that it is named; what does not bear on a verdict moves none.
func TestCompareNamesTheCause(t *testing.T) {
	for _, x := range []struct {
		name     string
		act      func(l *laptop, sheet, read record.ID) record.ID
		was, now calc.Class
		none     bool
	}{
		{"a new revision", func(l *laptop, _, _ record.ID) record.ID { return l.sign(record.KindSheet, tight("B", 1500), nil) }, calc.Pass, calc.Fail, false},
		{"the sheet corrected", func(l *laptop, s, _ record.ID) record.ID { return l.correct(s, record.KindSheet, tight("A", 1500)) }, calc.Pass, calc.Fail, false},
		{"the sheet withdrawn", func(l *laptop, s, _ record.ID) record.ID {
			return l.sign(record.KindWithdrawal, record.Withdrawal{Of: s, Reason: "of another part"}, nil)
		}, calc.Pass, calc.NotAssessable, false},
		{"the gauge entered again", func(l *laptop, _, _ record.ID) record.ID {
			g := gauge()
			g.Accuracy = "ASME D"
			return l.sign(record.KindGauge, g, nil)
		}, calc.Pass, calc.NotMeasurable, false},
		{"the reading corrected", func(l *laptop, _, r record.ID) record.ID { return l.correct(r, record.KindReading, reading(1000)) }, calc.Pass, calc.Fail, false},
		{"corrected twice", func(l *laptop, _, r record.ID) record.ID {
			l.correct(r, record.KindReading, reading(1000))
			return l.correct(r, record.KindReading, reading(900))
		}, calc.Pass, calc.Fail, false},
		{"a revision with the same limits", func(l *laptop, _, _ record.ID) record.ID { return l.sign(record.KindSheet, sheet("B"), nil) }, 0, 0, true},
		{"another reading", func(l *laptop, _, _ record.ID) record.ID { return l.sign(record.KindReading, reading(700), nil) }, 0, 0, true},
		{"a sheet from later on", func(l *laptop, _, _ record.ID) record.ID {
			s := tight("B", 1500)
			s.Effective = stamp(start.Add(time.Hour))
			return l.sign(record.KindSheet, s, nil)
		}, 0, 0, true},
		{"the reading withdrawn", func(l *laptop, _, r record.ID) record.ID {
			return l.sign(record.KindWithdrawal, record.Withdrawal{Of: r, Reason: "wrong unit"}, nil)
		}, 0, 0, true},
	} {
		t.Run(x.name, func(t *testing.T) {
			l := book(t)
			s := l.sign(record.KindSheet, sheet("A"), nil)
			r := l.sign(record.KindReading, reading(1250), nil)
			before := l.Meaning()
			cause := x.act(l, s, r)
			moved := verdict.Compare(before, l.Meaning())
			switch {
			case x.none && len(moved) > 0:
				t.Errorf("moved: %+v", moved)
			case !x.none && (len(moved) != 1 || moved[0].Entry != r || moved[0].Unit != unit || moved[0].Was != x.was || moved[0].Now != x.now || moved[0].Cause != cause || moved[0].Sentence == ""):
				t.Errorf("moved: %+v; want %s from %s to %s by %s", moved, r.Short(), x.was, x.now, cause.Short())
			}
		})
	}
}

// A technician signs by what is known on that laptop; what a lead signed meanwhile moves the verdict, and is named.
func TestAgainstShownNamesWhatTheSignerHadNotSeen(t *testing.T) {
	for _, x := range []struct {
		name string
		act  func(lead *laptop, sheet record.ID) record.ID
		now  calc.Class
	}{
		{"a revision", func(l *laptop, _ record.ID) record.ID { return l.sign(record.KindSheet, tight("B", 1500), nil) }, calc.Fail},
		{"a gauge entered again", func(l *laptop, _ record.ID) record.ID {
			g := gauge()
			g.Due = stamp(start)
			return l.sign(record.KindGauge, g, nil)
		}, calc.NotAssessable},
		{"the sheet corrected", func(l *laptop, s record.ID) record.ID { return l.correct(s, record.KindSheet, tight("A", 1500)) }, calc.Fail},
		{"the gauge recalled", func(l *laptop, _ record.ID) record.ID {
			return l.sign(record.KindRecall, record.Recall{Gauge: gauge().Asset, Since: stamp(start), Correction: of(psi(-300)), Reason: "reads high"}, nil)
		}, calc.Fail},
		{"the sheet recalled", func(l *laptop, s record.ID) record.ID {
			return l.sign(record.KindRecall, record.Recall{Sheet: s, Since: stamp(start), Reason: "a page of another type"}, nil)
		}, calc.NotAssessable},
		{"nothing that bears on it", func(l *laptop, _ record.ID) record.ID {
			l.sign(record.KindUnitRegistered, record.UnitRegistered{Part: unit.Part, Serial: "105"}, nil)
			return record.ID{}
		}, calc.Pass},
	} {
		t.Run(x.name, func(t *testing.T) {
			lead := book(t)
			s := lead.sign(record.KindSheet, sheet("A"), nil)
			away := tech(t, lead)
			cause := x.act(lead, s)
			r := away.shows(record.KindReading, reading(1250))
			plain := away.sign(record.KindReading, reading(1250), nil) // its signer was shown nothing
			if moved := verdict.AgainstShown(away.Meaning(), []record.ID{r, plain}); len(moved) > 0 {
				t.Errorf("on the laptop that signed: %+v", moved)
			}
			lead.pull(away)
			moved := verdict.AgainstShown(lead.Meaning(), []record.ID{r, plain, s, {9}})
			switch {
			case x.now == calc.Pass && len(moved) > 0:
				t.Errorf("moved: %+v", moved)
			case x.now != calc.Pass && (len(moved) != 1 || moved[0].Entry != r || moved[0].Was != calc.Pass || moved[0].Now != x.now || moved[0].Cause != cause):
				t.Errorf("moved: %+v; want from pass to %s by %s", moved, x.now, cause.Short())
			}
		})
	}
	t.Run("a correction", func(t *testing.T) {
		lead := book(t)
		lead.sign(record.KindSheet, sheet("A"), nil)
		r := lead.shows(record.KindReading, reading(1250))
		c := lead.correct(r, record.KindReading, reading(1000))
		if moved := verdict.AgainstShown(lead.Meaning(), []record.ID{r}); len(moved) != 1 || moved[0].Cause != c || moved[0].Now != calc.Fail {
			t.Errorf("moved: %+v; want by %s", moved, c.Short())
		}
		lead.sign(record.KindWithdrawal, record.Withdrawal{Of: r, Reason: "wrong unit"}, nil)
		if moved := verdict.AgainstShown(lead.Meaning(), []record.ID{r}); len(moved) > 0 {
			t.Errorf("an entry that is withdrawn moved: %+v", moved)
		}
	})
}

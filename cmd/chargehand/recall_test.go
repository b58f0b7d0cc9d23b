package main

import (
	"crypto/ed25519"
	"crypto/sha256"
	"fmt"
	"maps"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

func TestFaults(t *testing.T) {
	b := newBench(t)
	b.equip()
	days := []string{"2031-01-01", "2031-01-06", "2031-01-11", "2031-01-16", "2031-01-21", "2031-01-26", "2031-01-31", "2031-02-05"}
	for i, day := range days { // tight, in changing weather
		b.read(day, "M-1", 1250+float64(i%2), 40+7*(i%4))
	}
	var j faultsJSON
	b.json(&j, "faults", "104")
	for _, c := range j.Causes {
		if c.Fault || j.Readings != len(days) {
			t.Errorf("a sound unit: %+v", j)
		}
	}
	if out := b.want(statusOK, "faults", "104"); !strings.Contains(out, "nothing in these readings points to a fault") {
		t.Error(out)
	}
	for remark, cause := range map[string]string{"oil at the gas valve": "fluid on the gas side, separator failed", "bubbles at the valve": "gas leaks outside"} {
		b.json(&j, "faults", "104", "--seen", remark, "--all")
		if !slices.ContainsFunc(j.Causes, func(c faultJSON) bool { return c.Cause == cause && c.Next != "" }) {
			t.Errorf("%s: %+v", remark, j.Causes)
		}
	}
	if out := b.want(statusUsage, "faults", "104", "--seen", "a ghost"); !strings.Contains(out, `"a ghost" is none of what can be noted`) || !strings.Contains(out, "bubbles at the valve") {
		t.Error(out)
	}
	// A leak faster than the sheet allows, noted with the reading itself; the remark is signed with it and can be read back.
	for i, day := range []string{"2031-02-10", "2031-02-15", "2031-02-20", "2031-02-25", "2031-03-02"} {
		line := fmt.Sprintf("check 104 --gauge M-1 --pressure %dpsi --temperature 50F --from shell --relieved pedal --fluid 0psi --done %sT08:00Z --unlikely-because x --seen bubbles_at_the_valve --passphrase-file pp", dial(t, 1250-20*float64(i+1), 50), day)
		b.want2(words(line)...)
	}
	b.json(&j, "faults", "104")
	if len(j.Causes) == 0 || j.Causes[0].Cause != "gas leaks outside" || j.Causes[0].Strength != "points strongly to it" {
		t.Errorf("a leak with bubbles: %+v", j.Causes)
	}
	if out := b.want(statusOK, "unit", "show", "104"); !strings.Contains(out, "noticed: bubbles at the valve") {
		t.Error(out)
	}
}

func TestRecallOfAGauge(t *testing.T) {
	b := newBench(t)
	b.equip()
	b.read("2031-01-01", "M-1", 1160, 40)
	b.read("2031-02-01", "M-1", 1200, 40)
	b.read("2031-02-02", "M-2", 1200, 40)
	recall := words("recall gauge M-1 --since 2031-01-15 --reason reads_60_psi_high --correction=-60psi")
	var j recallJSON
	b.json(&j, append(recall, "--look")...)
	if len(j.Touched) != 1 || j.Touched[0].Was != "pass" || j.Touched[0].Becomes != "conditional fail" || j.Entry != "" {
		t.Fatalf("%+v", j)
	}
	out := b.sign(recall...)
	for _, want := range []string{"pass becomes conditional fail", "touched     1, of which 1 change", "signed", "moved       HA-40/104, entry " + j.Touched[0].Entry[:8] + ": pass, now conditional fail, because of recall"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	if out := b.want(statusOK, "gauge", "list"); !strings.Contains(out, "recalled") {
		t.Error(out)
	}
	if out := b.want(statusNot, words("check 104 --gauge M-1 --pressure 1100psi --temperature 40F --from shell --relieved pedal --fluid 0psi --done 2031-03-01 --unlikely-because x --passphrase-file pp")...); !strings.Contains(out, "was recalled") {
		t.Error(out)
	}
	var list []recallJSON
	b.json(&list, "recall", "list")
	if len(list) != 1 || len(list[0].Touched) != 1 || list[0].Touched[0] != j.Touched[0] {
		t.Errorf("%+v", list)
	}
	// Without a correction its readings say nothing; withdrawn, the recall was none.
	b.sign("withdraw", list[0].Entry[:8], "--reason", "a slip")
	b.json(&j, words("recall gauge M-1 --since 2031-01-15 --reason dropped --look")...)
	if len(j.Touched) != 1 || j.Touched[0].Becomes != "not assessable" || !strings.Contains(j.Touched[0].Sentence, "was recalled: dropped") {
		t.Errorf("%+v", j)
	}
	// Calibrated again, it serves again.
	b.sign(words("recall gauge M-1 --since 2031-01-15 --reason dropped")...)
	b.sign(words("gauge add --asset M-1 --span 2000psi --accuracy ASME_3A --division 5psi --calibrated 2031-02-20 --due 2120-01-10")...)
	b.read("2031-03-01", "M-1", 1200, 40)
	for line, want := range map[string]string{
		"recall gauge M-9 --since 2031-01-15 --reason x":                `no gauge "M-9"`,
		"recall gauge M-1 --since never --reason x":                     `"never" is not a time`,
		"recall gauge M-1 --since 2031-01-15":                           "--reason is missing",
		"recall sheet ffff --since 2031-01-15 --reason x":               `"ffff" names 0 entries`,
		"recall gauge M-1 --since 2031-01-15 --reason x --correction=x": `--correction: "x"`,
	} {
		if out := b.want(statusUsage, append(words(line), "--passphrase-file", "pp")...); !strings.Contains(out, want) {
			t.Errorf("%s: %s", line, out)
		}
	}
}

func TestRecallOfASheet(t *testing.T) {
	b := newBench(t)
	b.equip()
	b.read("2031-02-01", "M-1", 1250, 40)
	var sheets []sheetJSON
	b.json(&sheets, "sheet", "show")
	out := b.sign("recall", "sheet", sheets[0].Entry[:8], "--since", "2031-01-01", "--reason", "a page of another type")
	if !strings.Contains(out, "pass becomes not assessable") {
		t.Error(out)
	}
	b.sign(words("sheet add --part HA-40 --charge 1240psi --minus 100psi --plus 100psi --at 70F --document CM-29 --revision A1 --effective 2020-01-01")...)
	if out := b.want(statusOK, "board"); !strings.Contains(out, "1140 to 1340 psi") {
		t.Error(out)
	}
}

var movedLine = regexp.MustCompile(`moved       (\S+), entry (\w+): (still )?([^,]+), (?:now ([^,]+), because|by other figures, because) of recall`)

// movedBy are the entries that a signing told as moved by a recall, with what each was and became.
func movedBy(out string) map[string]string {
	moved := map[string]string{}
	for _, m := range movedLine.FindAllStringSubmatch(out, -1) {
		was, now := m[4], m[5]
		if m[3] != "" {
			now = was
		}
		moved[m[2]] = m[1] + " " + was + " > " + now
	}
	return moved
}

// What a recall lists before it is signed is what moves when it is: the same entries, from and to the same verdicts. Withdrawn, it leaves
// every verdict as it was.
func TestARecallListsWhatMoves(t *testing.T) {
	b := newBench(t)
	b.equip()
	b.sign(words("unit add --part HA-40 --serial 105")...)
	for _, x := range []struct {
		unit, day, gauge string
		psi              float64
	}{{"104", "2031-01-01", "M-1", 1250}, {"104", "2031-02-01", "M-1", 1200}, {"105", "2031-02-01", "M-1", 1300}, {"105", "2031-02-02", "M-2", 1200}, {"104", "2031-02-03", "M-1", 1380}} {
		b.want2(words(fmt.Sprintf("check %s --gauge %s --pressure %dpsi --temperature 40F --from shell --relieved pedal --fluid 0psi --done %sT08:00Z --unlikely-because x --passphrase-file pp", x.unit, x.gauge, dial(t, x.psi, 40), x.day))...)
	}
	b.want2(words("charge 105 --gauge M-1 --found 1100psi --found-temperature 70F --found-from shell --left 1200psi --left-temperature 70F --left-from shell --bottle none --relieved pedal --fluid 0psi --done 2031-02-05T08:00Z --unlikely-because x --passphrase-file pp")...)
	board := func() string { return b.want(statusOK, "board") }
	before := board()
	for _, line := range []string{
		"recall gauge M-1 --since 2031-01-15 --reason reads_high --correction=-60psi",
		"recall gauge M-1 --since 2031-01-15 --reason dropped",
		"recall sheet HA-40 --since 2031-02-02 --reason a_page_of_another_type",
	} {
		var look recallJSON
		b.json(&look, append(words(line), "--look")...)
		if board() != before {
			t.Fatalf("%s: looking changed the board", line)
		}
		out := b.sign(words(line)...)
		list := map[string]string{}
		for _, x := range look.Touched {
			list[x.Entry[:8]] = x.Unit + " " + x.Was + " > " + x.Becomes
			if !strings.Contains(out[:strings.Index(out, "signed ")], "entry "+x.Entry[:8]) {
				t.Errorf("%s: %.8s is not told before it is signed", line, x.Entry)
			}
		}
		if moved := movedBy(out); len(moved) == 0 || !maps.Equal(moved, list) {
			t.Errorf("%s: lists %v, and moved %v\n%s", line, list, moved, out)
		}
		if board() == before {
			t.Errorf("%s: the board is as before", line)
		}
		var inForce []recallJSON
		b.json(&inForce, "recall", "list")
		if len(inForce) != 1 || !slices.Equal(inForce[0].Touched, look.Touched) {
			t.Fatalf("%s: in force %+v", line, inForce)
		}
		out = b.sign("withdraw", inForce[0].Entry[:8], "--reason", "a slip")
		if n := strings.Count(out, "moved "); n != len(list) || board() != before {
			t.Errorf("%s: withdrawn, %d moved back of %d\n%s%s", line, n, len(list), out, board())
		}
	}
	if out := b.want(statusOK, "recall", "list"); !strings.Contains(out, "no recall is in force") {
		t.Error(out)
	}
}

// What was done after the new calibration is not touched, and the list says when that was.
func TestARecallEndsWithANewCalibration(t *testing.T) {
	b := newBench(t)
	b.equip()
	b.read("2031-01-01", "M-1", 1250, 40)
	b.sign(words("recall gauge M-1 --since 2030-12-01 --reason dropped")...)
	b.sign(words("gauge add --asset M-1 --span 2000psi --accuracy ASME_3A --division 5psi --calibrated 2031-02-01 --due 2120-01-10")...)
	b.read("2031-03-01", "M-1", 1250, 40)
	var list []recallJSON
	b.json(&list, "recall", "list")
	if len(list) != 1 || len(list[0].Touched) != 1 || !strings.HasPrefix(list[0].Touched[0].At, "2031-01-01") || !strings.HasPrefix(list[0].Until, "2031-02-01") {
		t.Errorf("%+v", list)
	}
	if out := b.want(statusOK, "recall", "list"); !strings.Contains(out, "until       2031-02-01") {
		t.Error(out)
	}
	if out := b.want(statusOK, "gauge", "list"); strings.Contains(out, "recalled") {
		t.Error(out)
	}
}

// A part names its sheet only when there is no doubt which.
func TestASheetIsRecalledByItsPart(t *testing.T) {
	b := newBench(t)
	b.equip()
	look := func(status int, arg string) string {
		return b.want(status, append(words("recall sheet "+arg+" --since 2031-01-01 --reason x"), "--look")...)
	}
	if out := look(statusOK, "HA-40"); !strings.Contains(out, "sheet CM-29 rev A of HA-40") {
		t.Error(out)
	}
	b.sign(words("sheet add --part HA-40 --charge 1250psi --minus 50psi --plus 50psi --at 70F --document CM-29 --revision B --effective 2020-02-01")...)
	if out := look(statusUsage, "HA-40"); !strings.Contains(out, `part "HA-40" has 2 sheets`) || !strings.Contains(out, "CM-29 rev B") {
		t.Error(out)
	}
	var sheets []sheetJSON
	b.json(&sheets, "sheet", "show")
	for _, s := range sheets {
		b.sign("recall", "sheet", s.Entry[:8], "--since", "2031-01-01", "--reason", "x")
	}
	if out := look(statusUsage, "HA-40"); !strings.Contains(out, "is recalled already") {
		t.Error(out)
	}
	if out := look(statusUsage, "HA-99"); !strings.Contains(out, `"HA-99" names`) {
		t.Error(out)
	}
}

// Recalling one of two contested sheets touches what was judged by the other, too, since the worse of them counted.
func TestARecallOfAContestedSheet(t *testing.T) {
	now := time.Date(2031, 3, 4, 5, 0, 0, 0, time.UTC)
	clock := func() time.Time { now = now.Add(time.Minute); return now }
	keys := map[string]ed25519.PrivateKey{}
	for _, who := range []string{"a", "b"} {
		seed := sha256.Sum256([]byte(who))
		keys[who] = ed25519.NewKeyFromSeed(seed[:])
	}
	roles := []record.Role{record.RoleLead, record.RoleTechnician}
	a, err := ledger.Found(t.TempDir(), keys["a"], record.Founding{Title: "Dry Creek", Name: "A", Roles: roles, PressureUnit: "psi", TemperatureUnit: "F", Format: 1}, clock)
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
		v, err := book.Author(keys[who], ledger.Draft{Kind: kind, Body: body})
		if err != nil {
			t.Fatal(err)
		}
		return v.ID()
	}
	pull := func(to, from *ledger.Book) {
		t.Helper()
		var batch []record.Verified
		for v, err := range from.Missing(t.Context(), to.Frontier()) {
			if err != nil {
				t.Fatal(err)
			}
			batch = append(batch, v)
		}
		if _, err := to.Merge(t.Context(), batch); err != nil {
			t.Fatal(err)
		}
	}
	am := func(m int64, unit string) record.Amount { return record.Amount{Mantissa: m, Unit: unit} }
	day, unit := record.Time{Unix: now.Unix() - 86400}, record.UnitRef{Part: "HA-40", Serial: "104"}
	sheet := func(charge int64) record.Sheet {
		c, tol := am(charge, "psi"), am(100, "psi")
		return record.Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: am(70, "F"), Charge: &c, Minus: &tol, Plus: &tol, Document: "CM-29", Revision: "B", Effective: day}
	}
	sign(a, "a", record.KindHandAdmitted, record.HandAdmitted{Name: "B", Roles: roles, Key: record.KeyID(keys["b"].Public().(ed25519.PublicKey))})
	sign(a, "a", record.KindUnitRegistered, record.UnitRegistered{Part: unit.Part, Serial: unit.Serial})
	sign(a, "a", record.KindGauge, record.Gauge{Asset: "G-7", Span: am(3000, "psi"), Accuracy: "ASME 1A", Graduation: am(10, "psi"), Calibrated: day, Due: record.Time{Unix: day.Unix + 1e8}})
	pull(b, a)
	good, bad := sign(a, "a", record.KindSheet, sheet(1250)), sign(b, "b", record.KindSheet, sheet(1600))
	reading := sign(a, "a", record.KindReading, record.Reading{Unit: unit, Gauge: "G-7", Pressure: am(1180, "psi"), Temperature: am(41, "F"), TemperatureFrom: "shell", Relieved: "pedal", FluidPressure: am(0, "psi"), Done: record.Time{Unix: now.Unix()}})
	pull(a, b)
	m := a.Meaning()
	for name, id := range map[string]record.ID{"that gave the verdict": bad, "beside it": good} {
		r := &ledger.Recall{Recall: record.Recall{Sheet: id, Since: day, Reason: "x"}}
		if j := recallFacts(m, m.WithRecall(r.Recall), r); len(j.Touched) != 1 || j.Touched[0].Entry != reading.String() || j.Touched[0].Was != "fail" {
			t.Errorf("the sheet %s: %+v", name, j.Touched)
		}
	}
}

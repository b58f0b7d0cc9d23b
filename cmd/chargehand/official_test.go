package main

import (
	"encoding/csv"
	"encoding/json"
	"os"
	"strings"
	"testing"
)

// The elements are those of 14 CFR 43.9(a): description with reference to data, date of completion, name, certificate number.
func TestOfficialRecord(t *testing.T) {
	b := newBench(t, "--certificate", "L-7")
	b.equip()
	b.sign(words("unit fit 104 --aircraft KITE_2 --position left_brake")...)
	var v verdictJSON
	if err := json.Unmarshal([]byte(b.sign(words("charge 104 --gauge M-1 --found 1010psi --found-temperature 41F --found-from shell --left 1175psi --left-temperature 43F --left-from shell --bottle N2-3 --relieved pedal --fluid 0psi --json")...)), &v); err != nil {
		t.Fatal(err)
	}
	out := b.want(statusOK, "record", v.Entry[:8])
	for _, want := range []string{"Hydraulic accumulator part HA-40, serial 104, KITE 2, left brake: gas charge serviced.", "found 1010 psi at 41 F", "nitrogen from bottle N2-3", "CM-29 rev A; gauge M-1, ASME 3A",
		"Performed by: Asha Brandt, certificate L-7", "no second signature", v.Entry, "It is no approval for return to service"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	b.sign(words("sheet add --part HA-40 --charge 1255psi --minus 100psi --plus 100psi --at 70F --document CM-29 --revision B --effective 2020-01-02")...)
	if out := b.want(statusOK, "record", v.Entry[:8]); !strings.Contains(out, "its signer worked by CM-29 rev A") {
		t.Error(out)
	}
	if out := b.want(statusUsage, "record", "ffff"); !strings.Contains(out, `"ffff" names 0 entries`) {
		t.Error(out)
	}
	b.sign("withdraw", v.Entry[:8], "--reason", "wrong unit")
	if out := b.want(statusNot, "record", v.Entry[:8]); !strings.Contains(out, "is withdrawn") {
		t.Error(out)
	}
}

func TestExport(t *testing.T) {
	b := newBench(t)
	b.equip()
	b.sign(words(`check 104 --gauge M-1 --pressure 1180psi --temperature 41F --from shell --relieved =HYPERLINK("x") --fluid 0psi`)...)
	b.want(statusOK, "export", "--to", "all.csv")
	data, err := os.ReadFile("all.csv")
	if err != nil {
		t.Fatal(err)
	}
	if n := strings.Count(string(data), "\r\n"); n != 7 {
		t.Errorf("%d lines end as RFC 4180 has it, want 7", n)
	}
	rows, err := csv.NewReader(strings.NewReader(string(data))).ReadAll()
	if err != nil || len(rows) != 7 || len(rows[0]) != len(exportHead) || rows[6][11] != "pass" || rows[6][12] != "1264.51" {
		t.Fatalf("%v, %q", err, rows)
	}
	for _, row := range rows[1:] {
		for _, cell := range row {
			if cell != "" && strings.ContainsRune("=+-@", rune(cell[0])) {
				t.Errorf("a spreadsheet would run %q", cell)
			}
		}
	}
	lines := strings.Split(strings.TrimSpace(b.want(statusOK, "export", "--as", "jsonl", "--unit", "104")), "\n")
	if len(lines) != 2 { // the registration and the reading
		t.Fatalf("%d lines", len(lines))
	}
	var r exportRow
	if err := json.Unmarshal([]byte(lines[1]), &r); err != nil || r.Kind != "reading" || r.Verdict != "pass" || r.Shown != "pass" {
		t.Errorf("%+v, %v", r, err)
	}
	b.want(statusUsage, "export", "--as", "pdf")
	b.want(statusNot, "export", "--to", "no/such/folder/x.csv")
	if harmless("-12 C") != "'-12 C" || harmless("ok") != "ok" {
		t.Error("formulas are not marked")
	}
}

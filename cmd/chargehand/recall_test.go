package main

import (
	"fmt"
	"slices"
	"strings"
	"testing"
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

package main

import (
	"fmt"
	"os"
	"strings"
	"testing"
	"time"

	"example.org/chargehand/calc/fault"
)

// An occasion is a check of an invented unit, as it is signed: a charge of psi at 70 F, seen with the gas at so many F.
type occasion struct {
	day   int
	psi   float64
	at    int
	extra string // flags beside those of every check, or instead of them; an underscore stands for a space
}

// signed is what was signed of the units of one invented history.
type signed map[string][]occasion

// faultBench is a book with units 104, 105 and 106 and gauges, to be copied for each history.
func faultBench(t *testing.T) (folder string) {
	b := newBench(t)
	b.equip()
	for _, line := range []string{"unit add --part HA-40 --serial 105", "unit add --part HA-40 --serial 106", "unit add --part HA-20 --serial 20",
		"sheet add --part HA-20 --charge 250psi --minus 30psi --plus 30psi --at 70F --system-pressure 3000psi --document CM-30 --revision A --effective 2020-01-01",
		"gauge add --asset M-3 --span 4000psi --accuracy ASME_3A --division 5psi --calibrated 2020-01-10 --due 2120-01-10",
		"gauge add --asset M-4 --span 2000psi --accuracy ASME_4A --division 1psi --calibrated 2020-01-10 --due 2120-01-10"} {
		b.sign(words(line)...)
	}
	folder, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	return folder
}

// of signs a history into a copy of a book, by the commands that a technician would give.
func (h signed) of(t *testing.T, folder string) bench {
	t.Helper()
	dir := t.TempDir()
	if err := os.CopyFS(dir, os.DirFS(folder)); err != nil {
		t.Fatal(err)
	}
	t.Chdir(dir)
	b := bench{t}
	for unit, occasions := range h {
		for _, o := range occasions {
			done := time.Date(2031, 1, 1+o.day, 8, 0, 0, 0, time.UTC).Format("2006-01-02T15:04Z")
			p := dial(t, o.psi, o.at)
			line := fmt.Sprintf("check %s --gauge M-1 --pressure %dpsi --temperature %dF --from shell --soak 90m", unit, p, o.at)
			if strings.Contains(o.extra, "--left ") {
				line = fmt.Sprintf("charge %s --gauge M-1 --found %dpsi --found-temperature %dF --left-temperature %dF --found-from shell --left-from shell --bottle none", unit, p, o.at, o.at)
			}
			b.want2(words(line + " --relieved pedal --fluid 0psi --unlikely-because weather --passphrase-file pp --done " + done + " " + o.extra)...)
		}
	}
	return b
}

// Each pattern of the trade that readings and what is noticed beside them can show, and its nearest look-alike, signed as a technician signs
// them: the cause is ranked first. The histories are invented; the patterns are those of NAVEDTRA 14018 (leak, oil at the valve), of the gas law
// (temperature, heat of a charge, ambient pressure) and, the rest, common practice, no source.
func TestFaultPatterns(t *testing.T) {
	folder := faultBench(t)
	line := func(last ...string) []occasion { // 1,250 psi throughout
		return []occasion{{0, 1250, 70, ""}, {5, 1248, 55, ""}, {10, 1251, 62, ""}, {15, 1249, 50, ""}, {20, 1250, 41, strings.Join(last, " ")}}
	}
	falling := func(last string) []occasion { // 5 psi a day, where the sheet allows about 2
		return []occasion{{0, 1250, 70, ""}, {5, 1225, 60, ""}, {10, 1200, 65, ""}, {15, 1175, 62, ""}, {20, 1150, 68, last}}
	}
	const high = "--gauge M-4 --elevation 10000ft"
	one := func(h []occasion) signed { return signed{"104": h} }
	for _, x := range []struct {
		name string
		h    signed
		want fault.Cause
		at   fault.Strength // at least
	}{
		{"falls, bubbles at the valve", one(falling("--seen bubbles_at_the_valve")), fault.LeakOutside, fault.Strong},
		{"falls, no bubbles, foam in the reservoir", one(falling("--seen soap_test_without_bubbles --seen foam_in_the_reservoir")), fault.LeakIntoFluid, fault.Likely},
		{"falls, controls spongy, reservoir level falls", one(falling("--seen spongy_controls --seen reservoir_level_falls_when_pressurised")), fault.LeakIntoFluid, fault.Likely},
		{"falls, and nothing is noticed", one(falling("")), fault.LeakOutside, fault.Likely},
		{"oil out of the cracked gas valve", one(line("--seen oil_at_the_gas_valve")), fault.FluidOnGasSide, fault.Likely},
		{"gas gauge at system pressure, fluid side too", one(line("--gauge M-3 --pressure 2990psi --fluid 2950psi --seen no_sudden_drop_when_bled_down")), fault.FluidNotRelieved, fault.Likely},
		{"gas gauge at system pressure, relieved, oil at the valve", one(line("--gauge M-3 --pressure 2990psi --seen oil_at_the_gas_valve --seen no_sudden_drop_when_bled_down")), fault.FluidOnGasSide, fault.Likely},
		{"pump cycles fast, hardly any gas", one(line("--pressure 160psi --seen pump_cycles_fast_or_needle_swings")), fault.LeakOutside, fault.Possible},
		{"hammering, hardly any gas", one(line("--pressure 160psi --seen hammering_in_the_system")), fault.LeakOutside, fault.Possible},
		{"pressure gone with the pump, hardly any gas", one(line("--pressure 160psi --seen system_pressure_gone_when_the_pump_stops")), fault.LeakOutside, fault.Possible},
		{"as low, and it was bar", one(line("--pressure 80psi")), fault.PressureUnitSlip, fault.Likely},
		{"too few strokes, no sudden drop, at system pressure", one(line("--gauge M-3 --pressure 2990psi --seen too_few_applications_or_strokes --seen no_sudden_drop_when_bled_down")), fault.FluidOnGasSide, fault.Possible},
		{"high the hour it was charged, low next morning", one([]occasion{{0, 1150, 70, "--left 1320psi --left-soak 5m"}, {1, 1250, 60, ""}, {4, 1251, 66, ""}}), fault.HotReading, fault.Likely},
		{"left settled, and low every morning", one([]occasion{{0, 1150, 70, "--left 1250psi --left-soak 3h"}, {1, 1215, 68, ""}, {4, 1150, 60, ""}, {8, 1060, 66, ""}}), fault.LeakOutside, fault.Likely},
		{"the dial follows the weather", one([]occasion{{0, 1250, 70, ""}, {3, 1249, 40, ""}, {6, 1251, 10, ""}, {9, 1250, -10, ""}}), fault.TemperatureOnly, fault.Likely},
		{"the same dials, and no weather", one([]occasion{{0, 1250, 70, ""}, {3, 1164, 70, ""}, {6, 1085, 70, ""}, {9, 1030, 70, ""}}), fault.LeakOutside, fault.Likely},
		{"one gauge off on every unit alike", signed{"104": line("--gauge M-2 --pressure 1310psi"),
			"105": {{0, 1350, 70, ""}, {7, 1350, 60, ""}, {14, 1350, 65, ""}, {20, 1500, 68, "--gauge M-2"}}, "106": {{0, 1240, 70, ""}, {7, 1240, 60, ""}, {14, 1240, 65, ""}, {20, 1390, 68, "--gauge M-2"}}}, fault.GaugeOff, fault.Likely},
		{"one unit low by that gauge, the others in line", signed{"104": line("--gauge M-2 --pressure 1020psi"),
			"105": {{0, 1350, 70, ""}, {7, 1350, 60, ""}, {14, 1350, 65, ""}, {20, 1350, 68, "--gauge M-2"}}, "106": {{0, 1240, 70, ""}, {7, 1240, 60, ""}, {14, 1240, 65, ""}, {20, 1240, 68, "--gauge M-2"}}}, fault.LeakOutside, fault.Possible},
		{"it rises, with pressure on the fluid side", one([]occasion{{0, 1200, 70, ""}, {5, 1240, 70, ""}, {10, 1280, 70, ""}, {15, 1320, 70, "--fluid 900psi"}}), fault.FluidNotRelieved, fault.Likely},
		{"it rises, relieved by what was seen", one([]occasion{{0, 1200, 70, ""}, {5, 1240, 70, ""}, {10, 1280, 70, ""}, {15, 1320, 70, ""}}), fault.FluidNotRelieved, fault.Possible},
		// At 1,250 psi the readings are known to no better than 6 psi; only a low charge shows what a field's height makes.
		{"a low charge 5 psi up at a field of 10,000 ft, once its elevation was left out", signed{"20": {{0, 250, 70, high}, {5, 250, 69, high}, {10, 250, 71, high}, {15, 250, 70, high}, {20, 250, 70, "--gauge M-4"}}}, fault.AmbientShift, fault.Likely},
		{"a low charge 15 psi up there, by what was seen on the fluid side", signed{"20": {{0, 250, 70, high}, {5, 250, 69, high}, {10, 250, 71, high}, {15, 250, 70, high}, {20, 265, 70, high + " --fluid 400psi"}}}, fault.FluidNotRelieved, fault.Likely},
		{"41 F typed as 41 C", one(line("--temperature 41C")), fault.TemperatureSlip, fault.Likely},
		{"the needle stands while the weather goes", one([]occasion{{0, 1250, 70, "--pressure 1250psi"}, {3, 1250, 40, "--pressure 1250psi"}, {6, 1250, 10, "--pressure 1250psi"}, {9, 1250, 60, "--pressure 1250psi"}}), fault.GaugeStuck, fault.Likely},
	} {
		b := x.h.of(t, folder)
		var j faultsJSON
		unit := "104"
		if x.h[unit] == nil {
			unit = "20"
		}
		b.json(&j, "faults", unit, "--all")
		if len(j.Causes) == 0 || j.Causes[0].Cause != x.want.String() || !atLeast(j.Causes[0].Strength, x.at) || j.Causes[0].Next == "" || len(j.Causes[0].For) == 0 {
			t.Errorf("%s: want %q, at least %q", x.name, x.want, x.at)
			for _, c := range j.Causes {
				t.Logf("  %s: %s\n    for %s\n    against %s", c.Cause, c.Strength, strings.Join(c.For, "\n        "), strings.Join(c.Against, "\n        "))
			}
		}
	}
}

func atLeast(words string, least fault.Strength) bool {
	for s := least; s <= fault.Strong; s++ {
		if s.String() == words {
			return true
		}
	}
	return false
}

// A sound unit is accused of nothing, whatever the weather and however it is charged and read.
func TestFaultsOfSoundUnits(t *testing.T) {
	folder := faultBench(t)
	for name, h := range map[string]signed{
		"one reading":                   {"104": {{0, 1250, 41, ""}}},
		"steady, one temperature":       {"104": {{0, 1250, 70, ""}, {5, 1251, 69, ""}, {10, 1249, 71, ""}, {15, 1250, 70, ""}}},
		"steady, all weathers":          {"104": {{0, 1250, 70, ""}, {5, 1252, 10, ""}, {10, 1249, 95, ""}, {15, 1250, -20, ""}, {20, 1251, 40, ""}}},
		"soaped, no bubbles":            {"104": {{0, 1250, 70, ""}, {5, 1251, 60, ""}, {10, 1249, 50, "--seen soap_test_without_bubbles --seen dry_gas_at_the_cracked_gas_valve"}}},
		"charged, soak not noted":       {"104": {{0, 1180, 60, "--left 1225psi"}, {3, 1251, 50, ""}, {6, 1250, 66, ""}, {9, 1249, 58, ""}}},
		"charged, read 5 minutes on":    {"104": {{0, 1180, 60, "--left 1225psi --left-soak 5m"}, {3, 1251, 50, ""}, {6, 1250, 66, ""}, {9, 1249, 58, ""}}},
		"charged just now":              {"104": {{0, 1180, 60, "--left 1225psi --left-soak 5m"}}},
		"two gauges inside their class": {"104": {{0, 1250, 70, ""}, {5, 1250, 55, ""}, {10, 1244, 62, "--gauge M-2"}, {15, 1251, 50, ""}, {20, 1245, 41, "--gauge M-2"}}},
		"loses what the sheet allows":   {"104": {{0, 1300, 70, ""}, {10, 1285, 60, ""}, {20, 1269, 65, ""}, {30, 1254, 62, ""}}},
		"beside a leaking one":          {"104": {{0, 1250, 70, ""}, {5, 1251, 60, ""}, {10, 1249, 65, ""}, {15, 1250, 62, ""}}, "105": {{0, 1250, 70, ""}, {5, 1200, 60, ""}, {10, 1150, 65, ""}, {15, 1100, 62, "--seen bubbles_at_the_valve"}}},
	} {
		b := h.of(t, folder)
		var j faultsJSON
		b.json(&j, "faults", "104")
		for _, c := range j.Causes {
			if c.Fault || c.Cause == fault.HotReading.String() {
				t.Errorf("%s: %+v", name, c)
			}
		}
	}
}

// What it rests on is said: the readings, the allowed loss in each way that a sheet can state it, and what was passed over.
func TestFaultsSayWhatTheyRestOn(t *testing.T) {
	b := newBench(t)
	b.equip()
	var j faultsJSON
	b.json(&j, "faults", "104")
	if j.Readings != 0 || len(j.Causes) != 0 || j.Allowed != "loss not known: nothing was read on it that can be used" || !strings.Contains(b.want(statusOK, "faults", "104"), "nothing to reason from") {
		t.Errorf("nothing read: %+v", j)
	}
	b.json(&j, "faults", "104", "--seen", "Oil at the gas valve", "--seen", "foam in the reservoir")
	if len(j.Noticed) != 2 || len(j.Causes) == 0 || j.Causes[0].Cause != fault.FluidOnGasSide.String() || j.Causes[0].For[0] != "oil at the gas valve, noticed now" {
		t.Errorf("noticed with nothing read: %+v", j)
	}
	b.read("2031-01-01", "M-1", 1250, 40)
	b.read("2031-01-08", "M-2", 1250, 60)
	b.json(&j, "faults", "104")
	// MIL-DTL-5498G allows 5 mL/h of free gas from 50 in3: 2.2 psi a day, by the domain's notes at 1,000 psig.
	if j.Readings != 2 || j.First != "2031-01-01" || j.Last != "2031-01-08" || strings.Join(j.Gauges, " ") != "M-1 M-2" || j.Allowed != "a loss of 2.2 psi a day, by sheet CM-29 rev A" {
		t.Errorf("%+v", j)
	}
	for revision, want := range map[string]string{
		"B --leak 3psi/day":   "a loss of 3 psi a day, by sheet CM-29 rev B",
		"C --leak 5mL/h":      "loss not known: the sheet allows 5 mL/h of free gas but gives no gas volume to turn it into pressure",
		"D --gas-volume 1in3": "loss not known: sheet CM-29 rev D states none",
	} {
		b.sign(words("sheet add --part HA-40 --charge 1250psi --minus 100psi --plus 100psi --at 70F --document CM-29 --effective 2020-01-02 --revision " + revision)...)
		if b.json(&j, "faults", "104"); j.Allowed != want {
			t.Errorf("%s: %s", revision, j.Allowed)
		}
	}
	b.sign(words("recall gauge M-2 --since 2031-01-05 --reason dropped")...)
	if b.json(&j, "faults", "104"); j.Readings != 1 || len(j.Passed) != 1 || !strings.Contains(j.Passed[0].Why, "gauge M-2 was recalled: dropped") {
		t.Errorf("%+v", j)
	}
	for _, args := range [][]string{{"faults", "999"}, {"faults"}, {"faults", "104", "105"}} {
		b.want(statusUsage, args...)
	}
	t.Setenv("CHARGEHAND_BOOK", "nowhere")
	b.want(statusNot, "faults", "104")
}

// What was noticed beside a charge is signed with it, and put right or taken back by a correction that leaves the rest.
func TestWhatWasNoticedIsCorrected(t *testing.T) {
	b := newBench(t)
	b.equip()
	b.want2(words("charge 104 --gauge M-1 --found 1100psi --found-temperature 70F --found-from shell --left 1250psi --left-temperature 70F --left-from shell --bottle none --relieved pedal --fluid 0psi " +
		"--done 2031-01-01T08:00Z --unlikely-because x --seen bubbles_at_the_valve --seen spongy_controls --passphrase-file pp")...)
	var show struct{ History []eventJSON }
	b.json(&show, "unit", "show", "104")
	charge := show.History[len(show.History)-1].Entry
	for _, x := range []struct{ sets, noticed string }{
		{"--set note=x", "noticed: bubbles at the valve, spongy controls; x"},
		{"--set seen=oil_at_the_gas_valve --set seen=hammering_in_the_system", "noticed: oil at the gas valve, hammering in the system; x"},
		{"--set seen=", "0 psi seen; x"},
		{"--set seen=Spongy_controls", "noticed: spongy controls; x"},
	} {
		out := b.sign(words("correct " + charge + " --reason slip " + x.sets)...)
		if _, becomes, _ := strings.Cut(out, "becomes"); !strings.HasSuffix(strings.SplitN(becomes, "\n", 2)[0], x.noticed) {
			t.Errorf("%s: %s", x.sets, out)
		}
	}
	if out := b.want(statusUsage, "correct", charge, "--reason", "slip", "--set", "seen=a ghost"); !strings.Contains(out, `"a ghost" is none of what can be noted`) {
		t.Error(out)
	}
	var j faultsJSON
	b.json(&j, "faults", "104", "--all")
	if text := fmt.Sprint(j.Causes); !strings.Contains(text, "spongy controls, noted 2031-01-01 08:00") || strings.Contains(text, "bubbles") {
		t.Errorf("by what counts now: %s", text)
	}
	b.want(statusUsage, words("check 104 --seen= --passphrase-file pp")...) // nothing to take back
}

package main

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// Outside check: 5.0 L bottle at 3,000 psig, a unit of 50 in3, all at 20 C, 0 to 1,500 psig, computed elsewhere with the equation of
// Span et al. (2000): 97.19 g a charge; the bottle after charges 1 to 6.
func TestPlanAgainstTheBottleSeries(t *testing.T) {
	b := newBench(t, "--temperature-unit", "C")
	b.sign(words("sheet add --part HA-50 --charge 1500psi --minus 50psi --plus 50psi --at 20C --gas-volume 50in3 --document CM-30 --revision A --effective 2020-01-01")...)
	b.sign(words("unit add --part HA-50 --serial 1")...)
	bottle := 3000.0
	for i, want := range []float64{2702.2, 2416.7, 2141.8, 1875.6, 1616.6, 1363.3} {
		var j planJSON
		args := words(fmt.Sprintf("plan 1 --pressure 0psi --temperature 20C --bottle-volume 5L --bottle-pressure %.2fpsi --in 30m --json", bottle))
		if i == 5 { // the last bottle stands below the target: the plan says so
			out := b.want(statusNo, args...)
			if !strings.Contains(out, `"supply": "falls short"`) {
				t.Error(out)
			}
			break
		}
		b.json(&j, args[:len(args)-1]...)
		if math.Abs(j.BottleAfterPsi-want) > 0.06 || math.Abs(j.MassG-97.2) > 0.06 {
			t.Errorf("charge %d: the bottle ends at %v psi with %v g, want %v psi with 97.19 g", i+1, j.BottleAfterPsi, j.MassG, want)
		}
		bottle = j.BottleAfterPsi
	}
}

func TestPlan(t *testing.T) {
	b := newBench(t)
	b.equip()
	if out := b.want(statusUsage, "plan", "104", "--pressure", "930psi", "--temperature", "18F"); !strings.Contains(out, "no bottle is named") {
		t.Error(out)
	}
	b.sign(words("bottle add --name N2-3 --volume 5L --pressure 2400psi --temperature 18F")...)
	b.sign(words("bottle add --name A-1 --volume 5L --gas air --pressure 2400psi --temperature 18F")...)
	var fast, slow planJSON
	b.json(&fast, words("plan 104 --pressure 930psi --temperature 18F --bottle N2-3 --rate 600psi/min")...)
	b.json(&slow, words("plan 104 --pressure 930psi --temperature 18F --bottle N2-3 --rate 20psi/min")...)
	if !(*fast.HotStopPsi > *slow.HotStopPsi && *slow.HotStopPsi > fast.TargetPsi && *fast.HotStopPsi < *fast.AdiabaticPsi && *fast.IsothermalPsi <= *slow.HotStopPsi) {
		t.Errorf("hot stops %v (fast) and %v (slow) between %v and %v", *fast.HotStopPsi, *slow.HotStopPsi, *fast.IsothermalPsi, *fast.AdiabaticPsi)
	}
	if math.Abs(fast.TargetPsi-float64(dial(t, 1250, 18))) > 0.6 {
		t.Errorf("target %v psi at 18 F", fast.TargetPsi)
	}
	out := b.want(statusOK, words("plan 104 --pressure 930psi --temperature 18F --bottle N2-3 --gauge M-1 --plot p.pdf")...)
	for _, want := range []string{"HOT STOP", "gauge       rated 2000 psi", "valve       rating not stated", "Dry nitrogen only", "The maintenance manual decides"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	for line, want := range map[string]string{
		"--pressure 930psi --temperature 18F --bottle A-1":                          "Do not mix gases",
		"--pressure 930psi --temperature 18F --bottle N9":                           `no bottle "N9"`,
		"--pressure 930psi --bottle N2-3":                                           "only one of --pressure and --temperature",
		"--bottle N2-3":                                                             "was never read",
		"--pressure 930psi --temperature 18F --bottle N2-3 --rate 9psi/min --in 4m": "Give one of them",
	} {
		if out := b.want(statusUsage, append([]string{"plan", "104"}, words(line)...)...); !strings.Contains(out, want) {
			t.Errorf("%s: %s", line, out)
		}
	}
	if out := b.want(statusNot, words("plan 104 --pressure 1400psi --temperature 18F --bottle N2-3")...); !strings.Contains(out, "nothing to add") {
		t.Error(out)
	}
	if out := b.want(statusNo, words("plan 104 --pressure 930psi --temperature 18F --bottle N2-3 --hose-rating 2000psi")...); !strings.Contains(out, "hose        rated 2000 psi, sees up to 2400 psi: TOO LOW") {
		t.Error(out)
	}
	// The unit's own constants, learnt from a charge that settled, are taken for the next plan.
	settle := words("settle 104 --gauge M-1 --closed 2031-03-04T21:15Z")
	for _, s := range []float64{30, 60, 120, 300, 600, 1200, 1800, 2400, 3600} {
		settle = append(settle, "--reading", fmt.Sprintf("%.0fs=%.0fpsi", s, 1250+120*math.Exp(-s/60)+60*math.Exp(-s/900)))
	}
	b.sign(settle...)
	var own planJSON
	b.json(&own, words("plan 104 --pressure 930psi --temperature 18F --bottle N2-3")...)
	if !own.ConstantsLearnt || own.GasSeconds < 40 || own.GasSeconds > 80 {
		t.Errorf("gas to shell %v s, learnt %v; the truth is 60 s", own.GasSeconds, own.ConstantsLearnt)
	}
}

func TestNight(t *testing.T) {
	b := newBench(t)
	b.equip()
	for _, s := range []string{"105", "106", "107"} {
		b.sign("unit", "add", "--part", "HA-40", "--serial", s)
	}
	if out := b.want(statusUsage, words("night 104 --found 104=930psi@18F --temperature 20F")...); !strings.Contains(out, "no bottle of nitrogen") {
		t.Error(out)
	}
	b.sign(words("bottle add --name N2-1 --volume 5L --pressure 1300psi --temperature 20F")...)
	b.sign(words("bottle add --name N2-3 --volume 5L --pressure 2400psi --temperature 20F")...)
	var j nightJSON
	b.json(&j, words("night 104 105 106 --found 104=930psi@18F --found 105=200psi@18F --found 106=0psi@20F --temperature 20F")...)
	if j.Completed != 3 || !j.Best || len(j.Undone) != 0 {
		t.Fatalf("%+v", j)
	}
	// The poorer bottle goes first, and what the units gained the bottles lost.
	if j.Steps[0].Draws[0].Bottle != "N2-1" || j.Bottles[1].AfterPsi < 2300 {
		t.Errorf("%+v", j)
	}
	// Beyond what the cart holds: the first that cannot be done, and what it would need.
	out := b.want(statusNo, words("night 104 105 106 107 --bottle N2-1 --found 104=0psi@20F --found 105=0psi@20F --found 106=0psi@20F --found 107=930psi@20F --temperature 20F")...)
	if !strings.Contains(out, "CANNOT BE DONE") || !strings.Contains(out, "one more bottle of 5 L needs") {
		t.Error(out)
	}
	for line, want := range map[string]string{
		"104 --found 104=930psi --temperature 20F":                "HA-40/104=930psi@18F",
		"104 --found 104=930furlongs@18F --temperature 20F":       "furlongs",
		"104 --bottle X --found 104=930psi@18F --temperature 20F": `no bottle "X"`,
		"104 --temperature 20F":                                   "was never read",
		"--temperature 20F":                                       "no unit of the book needs gas",
		"104 --found 104=930psi@18F":                              "--temperature is missing",
	} {
		if out := b.want(statusUsage, append([]string{"night"}, words(line)...)...); !strings.Contains(out, want) {
			t.Errorf("%s: %s", line, out)
		}
	}
	// With no units named: those whose last verdict calls for gas.
	b.read("2031-01-01", "M-1", 1000, 40)
	out = b.want(statusOK, words("night --temperature 20F")...)
	if !strings.Contains(out, " 1. HA-40/104") {
		t.Error(out)
	}
}

package main

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"strings"
	"testing"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// bench is a book with keys that open at once, and commands on it.
type bench struct{ *testing.T }

func newBench(t *testing.T, start ...string) bench {
	t.Helper()
	t.Chdir(t.TempDir())
	t.Setenv("CHARGEHAND_BOOK", "b")
	if err := os.WriteFile("pp", []byte("cold nitrogen night\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	b := bench{t}
	b.sign(append([]string{"book", "start", "--title", "Dry Creek", "--name", "Asha Brandt"}, start...)...)
	return b
}

// sign runs a command that must be done; what it prints is returned.
func (b bench) sign(args ...string) string {
	return b.want(statusOK, append(args, "--passphrase-file", "pp")...)
}

func (b bench) want(status int, args ...string) string {
	b.Helper()
	got, out, errs := command(b.T, args...)
	if got != status {
		b.Fatalf("%q: status %d, want %d\n%s%s", args, got, status, out, errs)
	}
	return out + errs
}

func (b bench) json(into any, args ...string) {
	b.Helper()
	if err := json.Unmarshal([]byte(b.want(statusOK, append(args, "--json")...)), into); err != nil {
		b.Fatal(err)
	}
}

// words splits at spaces; an underscore stands for a space inside one argument.
func words(line string) []string {
	w := strings.Fields(line)
	for i := range w {
		w[i] = strings.ReplaceAll(w[i], "_", " ")
	}
	return w
}

const equip = `sheet add --part HA-40 --charge 1250psi --minus 100psi --plus 100psi --at 70F --leak 5mL/h --gas-volume 50in3 --system-pressure 3000psi --document CM-29 --revision A --effective 2020-01-01
unit add --part HA-40 --serial 104
gauge add --asset M-1 --span 2000psi --accuracy ASME_3A --division 5psi --calibrated 2020-01-10 --due 2120-01-10
gauge add --asset M-2 --span 2000psi --accuracy ASME_3A --division 5psi --calibrated 2020-01-10 --due 2120-01-10`

func (b bench) equip() {
	for _, line := range strings.Split(equip, "\n") {
		b.sign(words(line)...)
	}
}

// dial is what a gauge with no error shows at a temperature in F when the charge is corrected psi at 70 F, to the psi.
func dial(t *testing.T, corrected float64, at int) int {
	t.Helper()
	temperature := func(s string) quantity.Temperature {
		v, err := quantity.ParseTemperature(s)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	g, err := quantity.ParseGauge(fmt.Sprintf("%.6fpsi", corrected))
	if err != nil {
		t.Fatal(err)
	}
	m, err := gas.ByName("nitrogen")
	if err != nil {
		t.Fatal(err)
	}
	p, err := calc.Correct(m, g.Abs(quantity.StandardAtmosphere), temperature("70F"), temperature(fmt.Sprintf("%dF", at)))
	if err != nil {
		t.Fatal(err)
	}
	return int(math.Round(inPsi(p.Gauge(quantity.StandardAtmosphere))))
}

// read signs a reading of an invented unit whose charge is corrected psi.
func (b bench) read(day string, gauge string, corrected float64, at int) {
	b.Helper()
	b.want2(words(fmt.Sprintf("check 104 --gauge %s --pressure %dpsi --temperature %dF --from shell --relieved pedal --fluid 0psi --done %sT08:00Z --unlikely-because weather --passphrase-file pp", gauge, dial(b.T, corrected, at), at, day))...)
}

// want2 takes any verdict.
func (b bench) want2(args ...string) {
	b.Helper()
	if got, out, errs := command(b.T, args...); got != statusOK && got != statusNo {
		b.Fatalf("%q: status %d\n%s%s", args, got, out, errs)
	}
}

// An invented unit that loses 1.5 psi a day by its own charge, read in changing weather by two gauges.
func TestTrendOfALeak(t *testing.T) {
	b := newBench(t)
	b.equip()
	if out := b.want(statusOK, "trend", "104"); !strings.Contains(out, "rate        none: nothing was read") {
		t.Errorf("with nothing read: %s", out)
	}
	for i, day := range []string{"2031-01-01", "2031-01-06", "2031-01-11", "2031-01-16", "2031-01-21", "2031-01-26", "2031-01-31", "2031-02-05", "2031-02-10", "2031-02-15"} {
		b.read(day, []string{"M-1", "M-1", "M-2"}[i%3], 1290-1.5*5*float64(i), 40+7*(i%4))
	}
	var j trendJSON
	b.json(&j, "trend", "104")
	if !j.LeakSeen || *j.LowPsiPerDay > -1.5 || *j.HighPsiPerDay < -1.5 || math.Abs(*j.PsiPerDay+1.5) > 0.15 {
		t.Errorf("rate %v (%v to %v), seen %v; the truth is -1.5 psi/day", *j.PsiPerDay, *j.LowPsiPerDay, *j.HighPsiPerDay, j.LeakSeen)
	}
	// MIL-DTL-5498G allows 5 mL/h of free gas from 50 in3, 2.2 psi/day at 1,000 psig by the domain's notes; at 1,250 psig about 2.2 too.
	if *j.AllowedPsiPerDay < 2.1 || *j.AllowedPsiPerDay > 2.3 || *j.AboveAllowed > 0.05 {
		t.Errorf("allowed %v psi/day, above with %v", *j.AllowedPsiPerDay, *j.AboveAllowed)
	}
	// 1,290 psi falls to 1,150 psi in 93.3 days.
	if j.Forecast == nil || !(j.Forecast.NotBefore < "2031-04-04" && j.Forecast.By > "2031-04-04" && j.Forecast.Likely > "2031-03-20" && j.Forecast.Likely < "2031-04-20") {
		t.Errorf("forecast %+v; the truth is 2031-04-04", j.Forecast)
	}
	out := b.want(statusOK, "trend", "104", "--plot", "t.svg")
	for _, want := range []string{"leak        it loses", "forecast    leaves 1150 psi between", "robust      -1.5 psi/day"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	if svg, err := os.ReadFile("t.svg"); err != nil || !strings.Contains(string(svg), "it loses") {
		t.Errorf("the picture: %v", err)
	}
	if out := b.want(statusUsage, "trend", "104", "--plot", "t.gif"); !strings.Contains(out, `"t.gif"`) {
		t.Error(out)
	}
	if out := b.want(statusOK, "board"); !strings.Contains(out, "HA-40/104: it loses") {
		t.Errorf("the board: %s", out)
	}
}

// A tight unit, a change of gauge by an amount inside the classes: no leak is claimed.
func TestTrendOfATightUnit(t *testing.T) {
	b := newBench(t)
	b.equip()
	for i, day := range []string{"2031-01-01", "2031-01-11", "2031-01-21", "2031-01-31", "2031-02-10", "2031-02-20", "2031-03-02", "2031-03-12"} {
		gauge, off := "M-1", 0.0
		if i > 3 {
			gauge, off = "M-2", -6
		}
		b.read(day, gauge, 1250+off+float64(i%2), 40+7*(i%4))
	}
	var j trendJSON
	b.json(&j, "trend", "104")
	if j.LeakSeen || !strings.Contains(j.Leak, "no leak seen above") {
		t.Errorf("%s, at %v psi/day", j.Leak, *j.PsiPerDay)
	}
	if out := b.want(statusOK, "board"); strings.Contains(out, "it loses") {
		t.Error(out)
	}
}

// A charge that settles by an invented law: 1,250 psi + 60 psi over 30 s + 35 psi over 20 min.
func TestSettling(t *testing.T) {
	b := newBench(t)
	b.equip()
	args := words("settle 104 --gauge M-1 --closed 2031-03-04T21:15Z")
	for _, s := range []float64{30, 60, 120, 300, 600, 1200, 1800, 2400} {
		args = append(args, "--reading", fmt.Sprintf("%.0fs=%.0fpsi", s, 1250+60*math.Exp(-s/30)+35*math.Exp(-s/1200)))
	}
	if out := b.want(statusUsage, "settle", "104"); !strings.Contains(out, "no settling readings") {
		t.Error(out)
	}
	if out := b.want(statusNo, append(args, "--passphrase-file", "pp", "--retest", "20m", "--plot", "s.png")...); !strings.Contains(out, "20m is too early") || !strings.Contains(out, "signed") {
		t.Error(out)
	}
	var j settleJSON
	b.json(&j, "settle", "104")
	if j.LowPsi > 1250 || j.HighPsi < 1250 || j.HighPsi-j.LowPsi > 40 || !j.Learnt {
		t.Errorf("%+v; the truth is 1250 psi", j)
	}
	for reading, want := range map[string]string{"2m": `"2m" is not a time`, "x=1200psi": `"x=1200psi"`, "2m=12furlongs": "furlongs", "2m=2500psi": "above the span"} {
		if out := b.want(statusUsage, append(args, "--reading", reading, "--passphrase-file", "pp")...); !strings.Contains(out, want) {
			t.Errorf("%s: %s", reading, out)
		}
	}
	// A recalled gauge: with a correction the settled pressure is another, without one it says nothing.
	b.sign(words("recall gauge M-1 --since 2031-01-01 --reason reads_high --correction=-20psi")...)
	was := j.SettledPsi
	b.json(&j, "settle", "104")
	if math.Abs(j.SettledPsi-was+20) > 0.1 {
		t.Errorf("corrected by -20 psi it settles at %v psi, before at %v", j.SettledPsi, was)
	}
	var list []recallJSON
	b.json(&list, "recall", "list")
	b.sign("withdraw", list[0].Entry[:8], "--reason", "dropped, not high")
	b.sign(words("recall gauge M-1 --since 2031-01-01 --reason dropped")...)
	if out := b.want(statusNot, "settle", "104"); !strings.Contains(out, "gauge M-1 was recalled: dropped") {
		t.Error(out)
	}
	b.sign(words("gauge add --asset M-1 --span 2000psi --accuracy ASME_3A --division 5psi --calibrated 2031-02-01 --due 2120-01-10")...)
	few := words("settle 104 --gauge M-1 --closed 2031-03-04T21:15Z --reading 30s=1300psi --reading 60s=1290psi --passphrase-file pp")
	if out := b.want(statusNot, few...); !strings.Contains(out, "too few readings") || strings.Contains(out, "signed  ") {
		t.Error(out)
	}
}

func TestHoldTest(t *testing.T) {
	b := newBench(t)
	b.equip()
	if out := b.want(statusUsage, "hold", "104", "--limit", "50psi", "--document", "CM-29"); !strings.Contains(out, "needs two") {
		t.Error(out)
	}
	b.read("2031-01-01", "M-1", 1290, 40)
	b.read("2031-01-15", "M-1", 1250, 68) // warmer: the dial rises, the charge has fallen by 40 psi
	out := b.sign("hold", "104", "--limit", "60psi", "--document", "CM-29")
	for _, want := range []string{"psi: a fall of ", "verdict     pass", "signed"} {
		if !strings.Contains(out, want) {
			t.Errorf("no %q in\n%s", want, out)
		}
	}
	b.want(statusNo, "hold", "104", "--limit", "2psi", "--document", "CM-29", "--unsigned")
	b.read("2031-02-15", "M-2", 1270, 40)
	if out := b.want(statusUsage, "hold", "104", "--limit", "60psi", "--document", "CM-29"); !strings.Contains(out, "one gauge") {
		t.Error(out)
	}
	b.read("2031-03-15", "M-2", 1330, 40)
	if out := b.want(statusNot, "hold", "104", "--limit", "60psi", "--document", "CM-29"); !strings.Contains(out, "rose by") || !strings.Contains(out, "psi") || strings.Contains(out, " Pa") {
		t.Error(out)
	}
}

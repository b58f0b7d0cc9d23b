package main

import (
	"encoding/json"
	"math"
	"os"
	"strings"
	"testing"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
)

// A book in bar and Celsius reads cubic centimetres, and a lowest charge rounded up to what is written.
func TestCapacityInBar(t *testing.T) {
	c := capacityAnswer{in: calc.Units{P: "bar", T: "C"}}
	if got := c.fluid(0.00012345); got != "123 cm3" {
		t.Errorf("%q", got)
	}
	for in, want := range map[string]string{"81.41bar": "81.5 bar", "81.4bar": "81.4 bar", "80.001bar": "80.1 bar"} {
		g, err := quantity.ParseGauge(in)
		if err != nil {
			t.Fatal(err)
		}
		if got := c.in.Pressure(roundUp(g, c.in)); got != want {
			t.Errorf("%s is written %s, want %s", in, got, want)
		}
	}
}

// A unit whose sheet lacks what capacity needs is told what to enter, and then what it delivers; the figures are those of the
// library, whose tests hold them against sources.
func TestCapacity(t *testing.T) {
	work := t.TempDir()
	t.Chdir(work)
	t.Setenv("CHARGEHAND_BOOK", "b")
	if err := os.WriteFile("pp", []byte("cold nitrogen night\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	sign := func(line string) {
		t.Helper()
		if status, _, errs := command(t, append(strings.Fields(line), "--passphrase-file", "pp")...); status != statusOK {
			t.Fatalf("%s: %d, %s", line, status, errs)
		}
	}
	sign("book start --title Dry_Creek --name Asha_Brandt")
	sign("unit add --part HA-40 --serial 104")
	sign("gauge add --asset G-7 --span 3000psi --accuracy 0.5% --division 10psi --calibrated 2020-01-10 --due 2120-01-10")
	const sheet = "sheet add --part HA-40 --charge 1250psi --minus 100psi --plus 100psi --at 70F --document CM-29 --effective 2020-01-01 "
	sign(sheet + "--revision A --system-pressure 3000psi")

	ask := func(want int, line string, says ...string) string {
		t.Helper()
		status, out, errs := command(t, strings.Fields("capacity HA-40/104 "+line)...)
		if status != want {
			t.Errorf("%s: status %d, want %d\n%s%s", line, status, want, out, errs)
		}
		for _, s := range says {
			if !strings.Contains(out+errs, s) {
				t.Errorf("%s does not say %q:\n%s%s", line, s, out, errs)
			}
		}
		if x := goish.FindString(out + errs); x != "" {
			t.Errorf("%s: %q in\n%s%s", line, x, out, errs)
		}
		t.Logf("capacity HA-40/104 %s\n%s%s", line, out, errs)
		return out
	}
	ask(statusUsage, "--demand 6", "does not state: gas volume, least useful, application, least temperature, highest temperature", "--set gas-volume=50in3", "--reason")
	ask(statusUsage, "--temperature 70F", "does not state: gas volume, least useful.")

	sign(sheet + "--revision B --system-pressure 3000psi --least-useful 1500psi --gas-volume 50in3 --gas-volume-tolerance 1in3 --application 1.5in3 --least-temperature -40F --highest-temperature 160F")
	ask(statusNot, "", "nothing was read on it", "--charge and --at")
	sign("check HA-40/104 --gauge G-7 --pressure 1180psi --temperature 41F --from shell --relieved pedal --fluid 0psi")

	ask(statusOK, "", "1265 psi at 70 F", "slow", "fast", "worst at -40 F", "the manual decides")
	ask(statusOK, "--demand 3", "met fast", "the sheet asks for at least 1150 psi")
	ask(statusNo, "--demand 6 --within 20s", "NOT MET in 20s", "meets it in 20s", "common practice, no source", "but the sheet allows no more than 1350 psi")
	ask(statusNo, "--demand 40in3", "no charge meets it fast", "leaves less room")
	ask(statusOK, "--charge 1180psi --at 41F --flow 30in3/min --temperature 70F --demand 6", "as asked", "met at 30 in3/min")
	ask(statusOK, "--charge 2000 --at 70 --temperature 70", "and 2000 psi: it has filled its volume")
	ask(statusNo, "--charge 3100psi --at 70F --temperature 70F --demand 1", "takes no fluid", "1 application, 1.5 in3: NOT MET")

	// By the figures: what the lowest charge delivers is the demand.
	var j capacityJSON
	if err := json.Unmarshal([]byte(ask(statusNo, "--demand 8in3 --json")), &j); err != nil {
		t.Fatal(err)
	}
	if j.Lowest == nil || !j.Lowest.Met || !j.Lowest.TooHigh || math.Abs(j.Lowest.FluidIn3-8) > 0.001 || *j.Met || j.DecidedBy != "fast" || len(j.Slow.Curve) != capacitySteps {
		t.Errorf("%+v", j)
	}
	if w := j.Fast.Worst; w.TemperatureF != -40 || w.FluidIn3 >= j.Slow.Worst.FluidIn3 || math.Abs(w.HighIn3/w.FluidIn3-1.02) > 0.001 || w.EndF >= -40 {
		t.Errorf("%+v", w)
	}

	ask(statusNo, "--demand 5 --within 8s --plot left.png", "NOT MET in 8s")
	if data, err := os.ReadFile("left.png"); err != nil || !strings.HasPrefix(string(data), "\x89PNG") {
		t.Errorf("no picture: %v", err)
	}
	for line, says := range map[string]string{
		"--demand none": `"none" is neither`, "--demand -6": `"-6" is neither`, "--demand 0in3": "above zero", "--demand 6psi": "not a volume", "--within 0s": "--within 0s", "--within soon": `"soon"`, "--time-constant -1s": "--time-constant -1s",
		"--flow 30psi": "not a volume over time", "--within 20s --flow 30in3/min": "both say", "--charge 1180psi": "--at", "--at 41F": "--charge", "--temperature 900F": "inside that range", "--temperature 70F --plot x.png": "one temperature", "--plot x.gif": ".svg",
	} {
		ask(statusUsage, line, says)
	}
	ask(statusNot, "--charge 20000psi --at 41F", "outside", "--charge, --at")
	if keep := os.Getenv("CAPACITY_PICTURE"); keep != "" {
		data, err := os.ReadFile("left.png")
		if err == nil {
			err = os.WriteFile(keep, data, 0o600)
		}
		if err != nil {
			t.Error(err)
		}
	}
}

package fault

import (
	"math/rand/v2"
	"testing"
	"time"
)

// Invented units read as people read them: each gauge has a bias and each reading an error, together within the stated U
// (k = 2, half of it shared by the gauge), temperatures go up and down, and a gauge is changed now and then. psi is the charge by day.
func simulated(t *testing.T, r *rand.Rand, charge func(day float64) float64, remarks ...Remark) History {
	const u = 20.0
	bias := map[string]float64{"G-7": r.NormFloat64() * u / 4, "G-9": r.NormFloat64() * u / 4}
	g := "G-7"
	h := history()
	for d := 0.; d <= 24; d += 2 + 3*r.Float64() {
		if r.Float64() < 0.1 {
			g = "G-9"
		}
		o := obs(t, d, charge(d), 55+25*r.NormFloat64(), by(g), off(bias[g]+r.NormFloat64()*u/4))
		if d == 0 {
			left(3 * time.Hour)(&o)
		}
		h.Seen = append(h.Seen, o)
	}
	h.Seen[len(h.Seen)-1].Remarks = remarks
	return h
}

// How often a sound unit is accused, and a leaking one found. The bounds are what the rules do, with room; they are no promise of a standard.
func TestFalseAlarmsAndMisses(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	const n = 400
	alarms, found, soaped := 0, 0, 0
	for range n {
		for _, f := range Explain(simulated(t, r, func(float64) float64 { return 1250 })) {
			if f.Strength >= Likely && f.Cause != TemperatureOnly {
				alarms++
				break
			}
		}
		fs := Explain(simulated(t, r, func(d float64) float64 { return 1250 - 4*d }))
		if len(fs) > 0 && (fs[0].Cause == LeakOutside || fs[0].Cause == LeakIntoFluid) {
			found++
		}
		fs = Explain(simulated(t, r, func(d float64) float64 { return 1250 - 4*d }, BubblesAtValve))
		if len(fs) > 0 && fs[0].Cause == LeakOutside && fs[0].Strength == Strong {
			soaped++
		}
	}
	t.Logf("of %d: %d sound units accused; leaks of 4 psi a day over 24 days: %d first, %d strong with bubbles", n, alarms, found, soaped)
	if alarms > n/10 || found < n*85/100 || soaped < n*90/100 {
		t.Errorf("of %d: %d sound units accused, %d leaks first, %d strong with bubbles", n, alarms, found, soaped)
	}
}

package capacity

import (
	"fmt"
	"math"
	"time"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Pace is how fast the fluid is drawn.
//
// In a pace with a time the gas at T takes heat from walls at the temperature Tw it was pumped up at:
//
//	dT/dt = (Tw - T)/tau - (T/cv) (dp/dT)_v dv/dt
//
// Source: Otis and Pourmovahed (1985); Pourmovahed and Otis, J. Dyn. Sys. Meas. Control (1990); the equation is from memory.
// Their correlations for tau are not used: the domain's notes could not find the constants. At tau -> 0 it is Slow, at tau ->
// infinity Fast.
type Pace struct {
	kind kind
	flow quantity.VolumeRate
	time time.Duration
	tau  time.Duration
}

type kind int

const (
	slow kind = iota
	fast
	flow
	within
)

// DefaultTimeConstant lies between the 10 s and 60 s of bare gas in vessels of a litre's size (common practice, no source).
const DefaultTimeConstant = 20 * time.Second

// Slow draws over many minutes: the gas keeps its temperature.
func Slow() Pace { return Pace{kind: slow} }

// Fast draws in a second or two: the gas takes no heat from its walls.
func Fast() Pace { return Pace{kind: fast} }

// AtFlow draws at a steady flow. Both the flow and the thermal time constant tau must be above zero.
func AtFlow(q quantity.VolumeRate, tau time.Duration) (Pace, error) {
	if !(q > 0) || math.IsInf(float64(q), 0) {
		return Pace{}, fmt.Errorf("a flow of %v m3/s draws nothing; give one above zero", float64(q))
	}
	return Pace{kind: flow, flow: q, tau: tau}, checkTau(tau)
}

// Within draws all that is to be had in a time, at the steady flow which does so. Both times must be above zero.
func Within(d, tau time.Duration) (Pace, error) {
	if d <= 0 {
		return Pace{}, fmt.Errorf("nothing is drawn in %v; give a time above zero", d)
	}
	return Pace{kind: within, time: d, tau: tau}, checkTau(tau)
}

func checkTau(tau time.Duration) error {
	if tau <= 0 {
		return fmt.Errorf("a thermal time constant of %v is not above zero; %v is usual", tau, DefaultTimeConstant)
	}
	return nil
}

// end returns the gas where delivery ends.
func (a Pace) end(p path, v quantity.Volume, charge gas.Density) (gas.State, error) {
	switch a.kind {
	case slow:
		return p.slow(charge)
	case fast:
		return p.fast(charge)
	case flow:
		return p.drawn(v, charge, a.flow, a.tau)
	}
	// More flow is colder gas, which delivers less: between the flows that deliver what a fast and a slow change do lies one.
	least, err := p.volume(v, charge, Fast())
	if err != nil {
		return gas.State{}, err
	}
	most, err := p.volume(v, charge, Slow())
	if err != nil {
		return gas.State{}, err
	}
	lo, hi := float64(least)/a.time.Seconds(), float64(most)/a.time.Seconds()
	for {
		// The end hardly depends on the flow, so feeding back what was delivered closes in within a few rounds.
		q := (lo + hi) / 2
		end, err := p.drawn(v, charge, quantity.VolumeRate(q), a.tau)
		if err != nil || hi-lo <= 1e-7*hi {
			return end, err
		}
		got := float64(p.fluid(v, charge, p.full.Rho)-p.fluid(v, charge, end.Rho)) / a.time.Seconds()
		if math.Abs(got-q) <= 1e-5*q {
			return end, nil
		}
		if got > q { // so is the answer, and no higher than what this flow delivers
			lo, hi = q, min(hi, got)
		} else {
			lo, hi = max(lo, got), q
		}
	}
}

// stepError is the error of entropy that a step may make, as a part of cv: 1e-5 of it moves the temperature by 3 mK.
const stepError = 1e-5

// drawn integrates a steady flow to its end.
//
// The unknown is entropy, not temperature. Only heat changes it: ds/dt = cv (Tw/T - 1)/tau is the equation of Pace, with the work
// term gone by identity, so that a fast draw keeps its entropy exactly. The equation is stiff where tau is short against the
// draw, hence a Rosenbrock method of second order, with a third for its error (Shampine and Reichelt, SIAM J. Sci. Comput. 18, 1
// (1997); from memory). It stays of second order with a rough derivative.
func (p path) drawn(v quantity.Volume, charge gas.Density, q quantity.VolumeRate, tauTime time.Duration) (gas.State, error) {
	const d, e = 0.29289321881345247560, 7.41421356237309504880 // 1/(2+sqrt 2), 6+sqrt 2
	tau, wall := tauTime.Seconds(), float64(p.t)
	mass := float64(v) * float64(charge)
	start := mass / float64(p.full.Rho)
	flow := float64(q)
	whole := (float64(v) - start) / flow // when the gas has filled its volume
	var failed error
	// at returns the gas after a time, with the slope of entropy there.
	at := func(t, s float64, near gas.State) (gas.State, float64) {
		x, err := p.u.Gas.AtEntropy(s, gas.Density(mass/(start+flow*t)), near.T)
		if err != nil && failed == nil {
			failed = err
		}
		return x, x.Cv / tau * (wall/float64(x.T) - 1)
	}
	// try makes one step, and returns its error as a part of what it may be.
	try := func(t float64, x gas.State, f, h float64) (gas.State, float64, float64) {
		temp := float64(x.T)
		slope := h * d * wall / temp * x.DpDT * flow / (mass * tau) // df/dt at constant entropy, where the work cools the gas
		w := 1 + h*d*wall/temp/tau                                  // df/ds = -(Tw/T)/tau
		k1 := (f + slope) / w
		mid, f1 := at(t+h/2, x.S+h/2*k1, x)
		if failed != nil {
			return x, 0, 0
		}
		k2 := (f1-k1)/w + k1
		end, f2 := at(t+h, x.S+h*k2, mid)
		if failed != nil {
			return x, 0, 0
		}
		k3 := (f2 - e*(k2-f1) - 2*(k1-f) + slope) / w
		return end, f2, h / 6 * math.Abs(k1-2*k2+k3) / (stepError * x.Cv)
	}
	x := p.full
	t, f, h := 0.0, 0.0, min(tau, whole)/100
	for steps := 0; steps < 100_000; steps++ {
		h = min(h, whole-t)
		next, slope, wrong := try(t, x, f, h)
		if failed == nil && wrong > 1 {
			h *= max(0.2, 0.8*math.Pow(wrong, -1.0/3))
			continue
		}
		if failed != nil && h > 1e-6*whole { // the end may lie before the limit that this step ran into
			failed, h = nil, h/2
			continue
		}
		if failed != nil {
			return gas.State{}, failed
		}
		if next.P <= p.least {
			return p.crossing(x, next, func(part float64) (gas.State, error) {
				y, _, _ := try(t, x, f, part*h)
				return y, failed
			})
		}
		if t, x, f = t+h, next, slope; t >= whole*(1-1e-12) {
			return p.u.Gas.AtEntropy(x.S, charge, x.T)
		}
		h *= min(4, 0.8*math.Pow(max(wrong, 1e-6), -1.0/3))
	}
	return gas.State{}, gas.ErrNoConvergence
}

// crossing finds where within a step the gas comes down to the least useful pressure.
func (p path) crossing(from, to gas.State, step func(part float64) (gas.State, error)) (gas.State, error) {
	lo, hi := 0.0, 1.0
	above, below := float64(from.P-p.least), float64(to.P-p.least)
	for range 60 {
		part := lo + (hi-lo)*above/(above-below)
		x, err := step(part)
		if err != nil {
			return gas.State{}, err
		}
		gap := float64(x.P - p.least)
		if math.Abs(gap) <= 1e-9*float64(p.least) || hi-lo < 1e-12 {
			return x, nil
		}
		// Halving the end that stays keeps the false position from creeping.
		if gap > 0 {
			lo, above, below = part, gap, below/2
		} else {
			hi, below, above = part, gap, above/2
		}
	}
	return to, gas.ErrNoConvergence
}

package capacity

import (
	"fmt"
	"math"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Curve returns the deliveries at n temperatures evenly from low to high, both included; one where they are equal. Errors as
// Deliver.
func (u Unit) Curve(c Charge, low, high quantity.Temperature, n int, at Pace) ([]Delivery, error) {
	rho, err := c.Density(u.Gas)
	if err != nil {
		return nil, err
	}
	paths, err := u.paths(low, high, n)
	if err != nil {
		return nil, err
	}
	out := make([]Delivery, len(paths))
	for i, p := range paths {
		if out[i], err = p.deliver(rho, at); err != nil {
			return nil, err
		}
	}
	return out, nil
}

func (u Unit) paths(low, high quantity.Temperature, n int) ([]path, error) {
	if !(low <= high) || n < 1 || n == 1 && low != high {
		return nil, fmt.Errorf("%d temperatures from %v K to %v K are no range", n, float64(low), float64(high))
	}
	if low == high {
		n = 1
	}
	out := make([]path, n)
	for i := range out {
		t := low
		if i > 0 {
			t += (high - low) * quantity.Temperature(i) / quantity.Temperature(n-1)
		}
		var err error
		if out[i], err = u.path(min(t, high)); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// Worst returns the delivery with the least fluid, at the lowest temperature among equals. It panics for an empty curve.
func Worst(curve []Delivery) Delivery {
	w := curve[0]
	for _, d := range curve[1:] {
		if d.Volume < w.Volume {
			w = d
		}
	}
	return w
}

// Lowest is the lowest charge that delivers a demand over a range of temperature, or the one that comes nearest to it.
type Lowest struct {
	Met    bool
	Charge quantity.GaugePressure // at the reference, against the unit's Ambient
	Worst  Delivery               // with that charge, at the temperature that decides
}

// Lowest returns the lowest charge, as a gauge shows it at the reference temperature, that delivers a demand at each of n
// temperatures from low to high, also with the smallest gas volume of the tolerance. More charge is not always more fluid: above
// some charge the gas fills its volume before the fluid is down to the least useful pressure, and the more of it, the less fluid
// fits in. So there may be none; then Met is false, and Charge is the one that delivers most.
//
// At a pace in time the density of the charge is found to a hundred-thousandth, for the other paces exactly. Errors as Deliver.
func (u Unit) Lowest(reference, low, high quantity.Temperature, n int, demand quantity.Volume, at Pace) (Lowest, error) {
	if !(demand > 0) {
		return Lowest{}, fmt.Errorf("a demand of %v m3 asks for nothing; give one above zero", float64(demand))
	}
	paths, err := u.paths(low, high, n)
	if err != nil {
		return Lowest{}, err
	}
	slowly, err := lines(paths, Slow())
	if err != nil {
		return Lowest{}, err
	}
	want := float64(demand / (u.Volume - u.Tolerance))
	var charge float64 // density
	var met bool
	if at.kind == slow {
		charge, met = slowly.lowest(want)
	} else {
		fastly, err := lines(paths, Fast())
		if err != nil {
			return Lowest{}, err
		}
		charge, met = fastly.lowest(want)
		if at.kind != fast {
			charge, met, err = between(paths, at, float64(demand), slowly, fastly, want)
			if err != nil {
				return Lowest{}, err
			}
		}
	}
	l := Lowest{Met: met}
	p, err := u.Gas.Pressure(reference, gas.Density(charge))
	if err != nil {
		return Lowest{}, err
	}
	l.Charge = p.Gauge(u.Ambient)
	for i, p := range paths {
		d, err := p.deliver(gas.Density(charge), at)
		if err != nil {
			return Lowest{}, err
		}
		if i == 0 || d.Volume < l.Worst.Volume {
			l.Worst = d
		}
	}
	return l, nil
}

// hill is what a unit of gas volume delivers as a function of the charge's density, at the worst temperature: the least of the
// rising lines up*rho (down to the least useful pressure) and the falling 1-down*rho (to the stop). Neither the gas at system
// pressure nor at the least useful depends on the charge, so the lines are straight and there is one top.
type hill struct{ up, down float64 }

// lines returns the hill of a slow or fast pace. All rising lines begin at zero, and all falling ones at the whole volume, so the
// flattest rising and the steepest falling decide.
func lines(paths []path, at Pace) (hill, error) {
	h := hill{up: math.Inf(1)}
	for _, p := range paths {
		end, err := at.end(p, p.u.Volume, 0) // a charge of nothing never stops
		if err != nil {
			return h, err
		}
		h.up = min(h.up, float64(1/end.Rho-1/p.full.Rho))
		h.down = max(h.down, float64(1/p.full.Rho))
	}
	return h, nil
}

func (h hill) top() float64 { return 1 / (h.up + h.down) }

// lowest returns the density that delivers a part of the gas volume, or the top.
func (h hill) lowest(want float64) (rho float64, met bool) {
	if rho = want / h.up; rho <= h.top()*(1+1e-12) {
		return rho, true
	}
	return h.top(), false
}

// between finds the lowest charge of a pace in time, which delivers no more than a slow one and no less than a fast one.
func between(paths []path, at Pace, demand float64, slowly, fastly hill, want float64) (rho float64, met bool, err error) {
	worst := func(rho float64) float64 {
		least := math.Inf(1)
		for _, p := range paths {
			v, e := p.volume(p.u.Volume-p.u.Tolerance, gas.Density(rho), at)
			if e != nil && err == nil {
				err = e
			}
			least = min(least, float64(v))
		}
		return least
	}
	lo, met := slowly.lowest(want)
	hi, sure := fastly.lowest(want)
	if !met || !sure {
		// The hill in time has its top between those of the slow and the fast pace.
		hi = top(worst, slowly.top(), fastly.top())
		if err != nil || worst(hi) < demand {
			return hi, false, err
		}
		lo = min(lo, hi)
	}
	for hi-lo > 1e-5*hi && err == nil {
		if mid := (lo + hi) / 2; worst(mid) >= demand {
			hi = mid
		} else {
			lo = mid
		}
	}
	return hi, true, err
}

// top finds the top of a hill by golden section.
func top(f func(float64) float64, lo, hi float64) float64 {
	const g = 0.61803398874989485
	a, b := hi-g*(hi-lo), lo+g*(hi-lo)
	fa, fb := f(a), f(b)
	for hi-lo > 1e-4*hi {
		if fa >= fb {
			hi, b, fb = b, a, fa
			a = hi - g*(hi-lo)
			fa = f(a)
		} else {
			lo, a, fa = a, b, fb
			b = lo + g*(hi-lo)
			fb = f(b)
		}
	}
	return (lo + hi) / 2
}

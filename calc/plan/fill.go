package plan

import (
	"errors"
	"math"
	"time"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// filling is the model of one fill in numbers. rho in kg/m3, masses in kg, k1 and k2 in W/K, shell in J/K.
type filling struct {
	g              *gas.Model
	volume, bottle float64 // m3
	m0, added      float64
	rhoB           float64 // in the bottle at the start
	tb, ta         quantity.Temperature
	ambient        quantity.Pressure
	k1, k2, shell  float64
	start          vec
	tolerance      float64
	near           quantity.Temperature // where the next inversion starts: costs steps only
}

func (in *ChargeInput) fill(rho0, rho1, rhoB float64, target quantity.Pressure) (*Fill, error) {
	v := float64(in.Volume)
	found, err0 := in.Gas.State(in.FoundAt, gas.Density(rho0))
	full, err1 := in.Gas.State(in.Temperature, gas.Density(rho1))
	if err := errors.Join(err0, err1); err != nil {
		return nil, err
	}
	m1 := rho1 * v
	heat := m1 * full.Cv
	f := &filling{
		g: in.Gas, volume: v, bottle: float64(in.Bottle.Volume), m0: rho0 * v, added: (rho1 - rho0) * v, rhoB: rhoB,
		tb: in.Bottle.Temperature, ta: in.Temperature, ambient: in.Ambient,
		k1: heat / in.Thermal.Gas.Seconds(), k2: (in.Thermal.ShellHeat + heat) / in.Thermal.Shell.Seconds(), shell: in.Thermal.ShellHeat,
		start:     vec{gas: rho0 * v * found.U, shell: in.Thermal.ShellHeat * float64(in.FoundAt-in.Temperature)},
		tolerance: 1e-8 * heat * float64(in.Temperature), near: in.FoundAt,
	}
	took := in.Duration.Seconds()
	if in.Rate != 0 {
		var err error
		if took, err = f.durationAt(float64(in.Rate), float64(found.P), float64(target-found.P)); err != nil {
			return nil, err
		}
	}
	out := &Fill{Duration: seconds(took), Isothermal: Bound{target.Gauge(in.Ambient), in.Temperature}}
	end, err := f.run(took, &out.Trace)
	if err != nil {
		return nil, err
	}
	hot, err := f.at(f.m0+f.added, end.gas)
	if err != nil {
		return nil, err
	}
	out.HotStop, out.HotAt = hot.P.Gauge(in.Ambient), hot.T
	out.Rate = Rate(float64(hot.P-found.P) / took)
	out.OverPrecedent = out.Rate > 1.001*OxygenServicingRate()
	out.Energy = Energy{In: end.in, Shell: end.shell - f.start.shell, Lost: end.lost}
	if err := out.span(*f, took); err != nil {
		return nil, err
	}
	insulated := *f
	insulated.k1, insulated.tolerance = 0, f.tolerance*coarse
	if last, err := insulated.run(took, nil); err == nil {
		if s, err := f.at(f.m0+f.added, last.gas); err == nil {
			out.Adiabatic = &Bound{s.P.Gauge(in.Ambient), s.T}
		}
	}
	return out, f.settle(out, took, end, hot, target, quantity.Pressure(in.Within))
}

// coarse is by how much the trials of a duration and the bounds may be less exact than the plan itself: to 1e-6 of the gas's energy,
// about 0.02 psi of a dial.
const coarse = 100

// span fills in the hot stops of a gas that gives off its heat twice as fast and half as fast. Where the slower one leaves the limits
// of the gas, the hot stop itself stands in.
func (out *Fill) span(f filling, took float64) error {
	out.HotLow, out.HotHigh = out.HotStop, out.HotStop
	f.tolerance *= coarse
	k1 := f.k1
	for _, times := range []float64{2, 0.5} {
		f.k1 = k1 * times
		end, err := f.run(took, nil)
		if errors.Is(err, quantity.ErrOutOfRange) {
			continue
		}
		if err != nil {
			return err
		}
		s, err := f.at(f.m0+f.added, end.gas)
		if err != nil {
			return err
		}
		out.HotLow = min(out.HotLow, s.P.Gauge(f.ambient))
		out.HotHigh = max(out.HotHigh, s.P.Gauge(f.ambient))
	}
	return nil
}

// at is the gas of the unit at a mass and internal energy.
func (f *filling) at(mass, energy float64) (gas.State, error) {
	s, err := f.g.StateAtEnergy(gas.Density(mass/f.volume), energy/mass, f.near)
	if err == nil {
		f.near = s.T
	}
	return s, err
}

// slope is the balance of energy at a mass in the unit and a mass flow in kg/s.
func (f *filling) slope(mass, flow float64, y vec) (vec, error) {
	t, err := f.g.TemperatureAtEnergy(gas.Density(mass/f.volume), y.gas/mass, f.near)
	if err != nil {
		return vec{}, err
	}
	f.near = t
	excess := y.shell / f.shell
	toShell := f.k1 * (float64(t-f.ta) - excess)
	toAmbient := f.k2 * excess
	in := 0.0
	if flow > 0 {
		source, err := f.g.State(f.tb, gas.Density(f.rhoB-(mass-f.m0)/f.bottle))
		if err != nil {
			return vec{}, err
		}
		in = flow * source.H
	}
	return vec{gas: in - toShell, shell: toShell - toAmbient, lost: toAmbient, in: in}, nil
}

// run fills in a number of seconds and adds the way to trace, when there is one.
func (f *filling) run(took float64, trace *[]Moment) (vec, error) {
	flow := f.added / took
	f.near = f.ta
	mass := func(t float64) float64 { return f.m0 + f.added*t/took }
	note := func(t float64, y vec) bool { return f.note(trace, t, mass(t), y) }
	if trace != nil {
		note(0, f.start)
	}
	return integrate(func(t float64, y vec) (vec, error) { return f.slope(mass(t), flow, y) }, 0, took, f.start, f.tolerance, note)
}

func (f *filling) note(trace *[]Moment, t, mass float64, y vec) bool {
	if trace == nil {
		return true
	}
	s, err := f.at(mass, y.gas)
	if err != nil {
		return true // the integration meets the same limit and says so
	}
	*trace = append(*trace, Moment{seconds(t), s.P.Gauge(f.ambient), s.T, f.ta + quantity.Temperature(y.shell/f.shell), mass})
	return true
}

// durationAt returns the seconds in which the dial rises at a mean rate in Pa/s from p0 to the hot stop, which itself falls with the
// duration. rise is the settled rise. A trial too short for the limits of the gas counts as too short.
func (f filling) durationAt(rate, p0, rise float64) (float64, error) {
	f.tolerance *= 10 * coarse // only how long the fill takes hangs on it, to 1e-4
	shortest, longest := 1.0, longest.Seconds()
	over := func(took float64) (float64, error) {
		end, err := f.run(took, nil)
		if errors.Is(err, quantity.ErrOutOfRange) {
			return math.Inf(1), nil
		}
		if err != nil {
			return 0, err
		}
		s, err := f.at(f.m0+f.added, end.gas)
		return float64(s.P) - p0 - rate*took, err
	}
	low, atLow := 0.0, math.Inf(1)
	high := min(max(1.1*rise/rate, shortest), longest)
	atHigh, err := over(high)
	for err == nil && atHigh > 0 {
		if high == longest {
			return 0, within("duration of the fill at this rate", max(rise/rate, math.Nextafter(longest, 2*longest)), shortest, longest, "s")
		}
		low, atLow = high, atHigh
		high = min(2*high, longest)
		atHigh, err = over(high)
	}
	if err != nil {
		return 0, err
	}
	// False position with the Illinois weight, by halves while the lower end is not finite.
	for side := 0; high-low > 1e-5*high; {
		mid := low + (high-low)/2
		if !math.IsInf(atLow, 1) {
			mid = high - atHigh*(high-low)/(atHigh-atLow)
		}
		if !(mid > low && mid < high) {
			break
		}
		v, err := over(mid)
		if err != nil {
			return 0, err
		}
		if math.Abs(v) <= 1e-5*(rate*mid) { // Pa: below any dial
			high = mid
			break
		}
		if v > 0 {
			low, atLow = mid, v
			if side == 1 {
				atHigh /= 2
			}
			side = 1
		} else {
			high, atHigh = mid, v
			if side == -1 {
				atLow /= 2
			}
			side = -1
		}
	}
	return high, within("duration of the fill at this rate", high, shortest, longest, "s")
}

// step is one step of the integration.
type step struct {
	from, to float64
	y        vec // at from
}

// settle follows the unit after the stop until it must stay within d of the target, and fills in the rest of out.
func (f *filling) settle(out *Fill, took float64, end vec, hot gas.State, target, d quantity.Pressure) error {
	mass := f.m0 + f.added
	together, err := f.together(mass, end)
	if err != nil {
		return err
	}
	out.AfterStageOne = together.P.Gauge(f.ambient)

	slope := func(_ float64, y vec) (vec, error) { return f.slope(mass, 0, y) }
	type distance struct{ shell, target, most quantity.Pressure } // of the dial from the shell's, from the target, and at most from now on
	measure := func(y vec) (distance, error) {
		s, err := f.at(mass, y.gas)
		above, shell := float64(s.T-f.ta), y.shell/f.shell
		// Gas and shell only approach ambient from now on, so neither is ever further from it than the further one is. 1.05 is for
		// the curvature of the isochore.
		most := 1.05 * s.DpDT * max(math.Abs(above), math.Abs(shell))
		return distance{quantity.Pressure(math.Abs(above-shell) * s.DpDT), abs(s.P - target), quantity.Pressure(most)}, err
	}
	was, err := measure(end)
	if err != nil {
		return err
	}
	var stage, whole *step // that ends stage one; the last one that began outside the target's band
	last := step{y: end}
	var failed error
	each := func(t float64, y vec) bool {
		f.note(&out.Trace, took+t, mass, y)
		is, err := measure(y)
		if err != nil {
			failed = err
			return false
		}
		last.to = t
		this := last
		if stage == nil && was.shell > d && is.shell <= d {
			stage = &this
		}
		if was.target > d {
			whole = &this
		}
		was, last = is, step{from: t, y: y}
		return is.most > d
	}
	heat := mass * hot.Cv
	horizon := 40 * (heat/f.k1 + (f.shell+heat)/f.k2)
	if _, err := integrate(slope, 0, horizon, end, f.tolerance, each); err != nil {
		return err
	}
	if failed != nil {
		return failed
	}
	// crossing narrows a step down to where a distance comes within d.
	crossing := func(in *step, of func(distance) quantity.Pressure) (time.Duration, error) {
		if in == nil {
			return 0, nil
		}
		at := *in
		for at.to-at.from > 0.01 {
			mid := (at.from + at.to) / 2
			y, err := integrate(slope, at.from, mid, at.y, f.tolerance, func(float64, vec) bool { return true })
			if err != nil {
				return 0, err
			}
			is, err := measure(y)
			if err != nil {
				return 0, err
			}
			if of(is) <= d {
				at.to = mid
			} else {
				at.from, at.y = mid, y
			}
		}
		return seconds(at.to), nil
	}
	if out.StageOne, err = crossing(stage, func(is distance) quantity.Pressure { return is.shell }); err != nil {
		return err
	}
	out.Settled, err = crossing(whole, func(is distance) quantity.Pressure { return is.target })
	return err
}

func abs(p quantity.Pressure) quantity.Pressure { return max(p, -p) }

// together is the gas when it and the shell have come to one temperature with no heat lost.
func (f *filling) together(mass float64, end vec) (gas.State, error) {
	total := end.gas + end.shell
	rho := gas.Density(mass / f.volume)
	t := f.near
	for range 60 {
		s, err := f.g.State(t, rho)
		if err != nil {
			return gas.State{}, err
		}
		d := (total - mass*s.U - f.shell*float64(t-f.ta)) / (mass*s.Cv + f.shell)
		if math.Abs(d) <= 1e-10*float64(t) {
			return s, nil
		}
		t += quantity.Temperature(d)
	}
	return gas.State{}, gas.ErrNoConvergence
}

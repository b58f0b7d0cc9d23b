// Package settle reads the approach to rest after a charge: from timed readings to the pressure that the unit settles at, when a
// retest means something, and the unit's own time constants. It is pure: no clock, no files.
//
// Charging heats the gas. It gives its heat to the shell in tens of seconds, and the shell gives it to the air in tens of minutes:
// a hot shell fools a wait of one minute.
package settle

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"example.org/chargehand/calc/quantity"
)

// Reading is one reading after the charge, with the charging valve closed.
type Reading struct {
	After    time.Duration // since the valve was closed
	Pressure quantity.GaugePressure
	U        quantity.GaugePressure // standard uncertainty of what is new in each reading; the gauge's bias shifts all alike
	// Shell is the temperature of the shell, when a probe gave one; it tells the slow stage apart long before the pressure does.
	Shell quantity.Temperature
}

// Air is what a shell is compared with, and what a kelvin of the gas is worth. The zero Air is for readings without a shell.
type Air struct {
	Temperature quantity.Temperature
	U           quantity.TemperatureDifference // standard uncertainty of its difference from a shell at rest, by the same probe
	ProbeU      quantity.TemperatureDifference // standard uncertainty of what is new in each shell temperature
	PerKelvin   float64                        // (dp/dT) of the gas at constant density, Pa/K
}

// Constant is a time constant as it is known: log-normal, with 95 % between Median/Factor and Median x Factor.
type Constant struct {
	Median time.Duration
	Factor float64 // above 1
}

// Between returns the 95 % interval.
func (c Constant) Between() (low, high time.Duration) {
	return time.Duration(float64(c.Median) / c.Factor), time.Duration(float64(c.Median) * c.Factor)
}

// spread is the standard deviation of the logarithm.
func (c Constant) spread() float64 { return math.Log(c.Factor) / 1.96 }

// Constants of a unit.
type Constants struct {
	Fast Constant // gas to shell
	Slow Constant // shell to air
}

// Usual returns what is taken of a unit that has not been followed: 10 to 90 s for the gas (publications give 10 to 60 s for bare
// gas in vessels of litres, from memory), 8 to 72 min for a steel shell in still air (common practice, no source).
func Usual() Constants {
	return Constants{Fast: Constant{30 * time.Second, 3}, Slow: Constant{24 * time.Minute, 3}}
}

// Options of a fit; the zero value is that of a unit never followed before.
type Options struct {
	Air Air
	// Known are the unit's constants as learnt from its last settling; the zero value stands for Usual.
	Known Constants
	// Useful is the half-width of the settled pressure's interval above which it is refused; 0 stands for 2 % of the pressure.
	Useful quantity.GaugePressure
}

// Fit is what the readings say.
type Fit struct {
	Settled   quantity.GaugePressure // the pressure at rest, as this gauge would show it: median
	Low, High quantity.GaugePressure // 95 % interval; the gauge's bias is not in it
	U         quantity.GaugePressure // standard deviation
	Scatter   float64                // how many times their stated uncertainty the readings scatter, at least 1
	// Constants are to be kept with the unit and given as Known the next time. Where the readings say nothing of one, it is as it was.
	Constants
	LearntFast, LearntSlow bool // the readings made it notably better known

	nodes   []node
	unit    float64 // Pa, of the nodes
	last    time.Duration
	reading quantity.GaugePressure // the last one
}

// Errors of readings that cannot tell. The text quotes the figures.
var (
	ErrTooFew   = errors.New("too few readings to see the settling")
	ErrRising   = errors.New("the pressure rises after the charge")
	ErrTooShort = errors.New("the readings do not yet show where the pressure settles")
	ErrScatter  = errors.New("the readings do not follow any settling")
)

const fewest = 3

// New fits p(t) = settled + A1 exp(-t/fast) + A2 exp(-t/slow) to readings given in any order; the shell, where it was read, is
// air + A2/PerKelvin exp(-t/slow).
//
// Method: for each pair of constants on a grid the rest of the model is linear and its posterior normal; the pairs are weighted by
// their likelihood and by what is known of them (Bayes). So the interval holds the doubt about the constants too, and a stage that
// the readings cannot see keeps what was known of it: with few readings only one is in fact fitted. Of A1 and A2 it is known
// how much a charge heats gas and shell, see fastPart. Valid for pressures up to 1 GPa, readings within a week of the charge.
//
// Errors wrap one of ErrTooFew, ErrRising, ErrTooShort and ErrScatter, or quote a value that cannot be used.
func New(readings []Reading, o Options) (*Fit, error) {
	if o.Known == (Constants{}) {
		o.Known = Usual()
	}
	if err := check(readings, o); err != nil {
		return nil, err
	}
	rs := slices.Clone(readings)
	slices.SortFunc(rs, func(a, b Reading) int {
		return cmp.Or(cmp.Compare(a.After, b.After), cmp.Compare(a.Pressure, b.Pressure), cmp.Compare(a.U, b.U), cmp.Compare(a.Shell, b.Shell))
	})
	if err := rising(rs); err != nil {
		return nil, err
	}
	f := &Fit{Scatter: 1, last: rs[len(rs)-1].After, reading: rs[len(rs)-1].Pressure}
	p := newProblem(rs, o)
	nodes, err := p.solve(1)
	if err != nil {
		return nil, err
	}
	// A scatter that chance explains in less than 1 in 20 widens everything.
	if f.Scatter = p.widened(nodes); f.Scatter > 1 {
		if f.Scatter > 5 {
			return nil, fmt.Errorf("%w: they lie %.1f times their uncertainty off; see that no valve leaked and no reading is mistyped", ErrScatter, f.Scatter)
		}
		if nodes, err = p.solve(f.Scatter); err != nil {
			return nil, err
		}
	}
	f.nodes, f.unit = nodes, p.unit
	base := float64(f.reading)
	at := func(q float64) quantity.GaugePressure {
		return quantity.GaugePressure(base + p.unit*settledQuantile(nodes, q))
	}
	f.Settled, f.Low, f.High = at(0.5), at(0.025), at(0.975)
	f.U = quantity.GaugePressure(p.unit * settledSpread(nodes))
	useful := o.Useful
	if useful == 0 {
		useful = max(0.02*f.reading, 4*rs[len(rs)-1].U)
	}
	if half := (f.High - f.Low) / 2; !(half <= useful) {
		return nil, fmt.Errorf("%w: after %s it may be anywhere within +/-%.0f Pa of %.0f Pa; read again in some minutes",
			ErrTooShort, f.last, float64(half), float64(f.Settled))
	}
	f.Constants, f.LearntFast, f.LearntSlow = learnt(nodes, o.Known)
	return f, nil
}

const (
	mostPressure = 1e9
	mostAfter    = 7 * 24 * time.Hour
)

func check(rs []Reading, o Options) error {
	for i, r := range rs {
		switch {
		case r.After < 0 || r.After > mostAfter:
			return fmt.Errorf("reading %d is %s after the charge; give the time since the valve was closed, up to a week", i+1, r.After)
		case !(r.Pressure > 0 && r.Pressure <= mostPressure):
			return fmt.Errorf("reading %d is %v Pa, which is no charge", i+1, float64(r.Pressure))
		case !(r.U > 0 && r.U >= 1e-6*r.Pressure && r.U <= r.Pressure):
			return fmt.Errorf("reading %d of %v Pa has the standard uncertainty %v Pa; give the dial's", i+1, float64(r.Pressure), float64(r.U))
		case r.Shell != 0 && !(r.Shell > 150 && r.Shell < 500):
			return fmt.Errorf("reading %d has a shell at %v K, which none is", i+1, float64(r.Shell))
		}
	}
	if a := o.Air; slices.ContainsFunc(rs, func(r Reading) bool { return r.Shell != 0 }) &&
		!(a.Temperature > 150 && a.Temperature < 500 && a.U > 0 && a.U < 50 && a.ProbeU > 0 && a.ProbeU < 50 && a.PerKelvin > 0 && a.PerKelvin < 1e7) {
		return fmt.Errorf("shell temperatures need the air's, both uncertainties and the gas's pressure per kelvin; %+v will not do", a)
	}
	for _, c := range []Constant{o.Known.Fast, o.Known.Slow} {
		if !(c.Median >= time.Second && c.Median <= 24*time.Hour && c.Factor > 1 && c.Factor <= 20) {
			return fmt.Errorf("a time constant of %s, known to a factor of %v, is none", c.Median, c.Factor)
		}
	}
	if !(o.Useful >= 0 && o.Useful <= mostPressure) {
		return fmt.Errorf("a useful half-width of %v Pa is none", float64(o.Useful))
	}
	times := map[time.Duration]bool{}
	for _, r := range rs {
		times[r.After] = true
	}
	if len(times) < fewest {
		return fmt.Errorf("%w: %d at different times; %d are needed, better five over 20 minutes", ErrTooFew, len(times), fewest)
	}
	return nil
}

// rising refuses a slope above zero by three standard uncertainties. Gas that has been heated only falls.
func rising(rs []Reading) error {
	var w, wt, wp float64
	for _, r := range rs {
		k := 1 / float64(r.U*r.U)
		w, wt, wp = w+k, wt+k*r.After.Seconds(), wp+k*float64(r.Pressure)
	}
	var stt, stp float64
	for _, r := range rs {
		k, t := 1/float64(r.U*r.U), r.After.Seconds()-wt/w
		stt, stp = stt+k*t*t, stp+k*t*(float64(r.Pressure)-wp/w)
	}
	if stp/math.Sqrt(stt) > 3 {
		rise := stp / stt * (rs[len(rs)-1].After - rs[0].After).Seconds()
		return fmt.Errorf("%w, by %.0f Pa in %s: fluid is coming in, the air is warming the unit, or it was bled and not charged",
			ErrRising, rise, rs[len(rs)-1].After-rs[0].After)
	}
	return nil
}

// Package trace finds the gas charge of an accumulator from a bleed-down on its fluid side. While fluid is bled slowly the gas
// expands and the fluid's pressure follows it; when the last fluid has left, the pressure collapses. The pressure at which the
// fall breaks is the charge. What it gives is an indication with a wide interval: see Indication. It is pure: no clock, no files,
// no state.
package trace

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

// Indication is what a charge found on the fluid side is worth.
const Indication = "an indication: confirm with a gas-side reading, unless the manual accepts it"

// Pair is one reading of a bleed-down.
type Pair struct {
	// Drawn is the fluid drawn so far: a volume, strokes, or seconds of a steady bleed, in any one unit and from any start.
	Drawn    float64
	Pressure quantity.GaugePressure // on the fluid side, pascals above ambient
}

// Options are what else it takes.
type Options struct {
	Gas         *gas.Model           // nil stands for nitrogen
	Temperature quantity.Temperature // of the gas before the bleed; 200 K to 420 K
	Ambient     quantity.Pressure    // 0 stands for the standard atmosphere
	// U is the standard uncertainty of each reading on its own, above zero, such as of reading the dial; Bias that of the gauge,
	// shared by all readings of the trace. Pascals.
	U, Bias quantity.GaugePressure
	// Friction is the most, with 95 %, that a piston's seals hold back, pascals; 0 for a bladder or a diaphragm.
	Friction quantity.GaugePressure
	In       calc.Units // of the words
}

// Reasons for which a trace is refused.
var (
	ErrNoBreak = errors.New("the fall has no break")
	ErrFew     = errors.New("too few readings on a side of the break")
	ErrRising  = errors.New("the pressure rises")
	ErrScatter = errors.New("the readings scatter too much")
	ErrRepeat  = errors.New("two readings at one amount drawn")
)

// RefusedError says why a trace gives no charge, and what to do. Its kind is one of the five above.
type RefusedError struct {
	Kind      error
	Why, Todo string
}

func (e *RefusedError) Error() string { return e.Kind.Error() + ": " + e.Why }
func (e *RefusedError) Unwrap() error { return e.Kind }

// Bounds on a trace.
const (
	leastAbove = 4   // readings before the break: three would fit any curve of the gas
	leastBelow = 2   // after it, so that one slip of the pen is no collapse
	mostPairs  = 500 // as many as an entry of the ledger holds
)

// What makes a break (common practice, no source; the simulations in the tests bear them out).
const (
	sudden    = 3.0 // the collapse is at least so many times as steep as the gas's own fall at the break
	collapsed = 0.5 // the last reading is below this part of the charge
	rises     = 4.5 // a rise by so many standard uncertainties of the difference is one
	scatters  = 3.0 // and a scatter of so many times the stated uncertainty is too much
)

// Fit is the charge that a trace shows. Pressures are gauge pascals at the gas temperature of Options.
type Fit struct {
	Charge    quantity.GaugePressure // the middle of what the readings leave
	Low, High quantity.GaugePressure // 95 % of it
	// Break is where the fall breaks, in the unit of Drawn, halfway between the two readings that hold it; From and To are those.
	Break, From, To float64
	Shown           quantity.GaugePressure // what the gauge would show at Break
	Above, Below    int                    // readings before and after it
	// GasVolume is the volume of the gas with all fluid out, in the unit of Drawn.
	GasVolume float64
	// Needle is half the gas's own fall between the two readings that hold the break: the part of the interval that a closer
	// look at the moving needle would take away.
	Needle quantity.GaugePressure
	// Scatter is the root mean square of the readings about the fit, as a part of the stated uncertainty.
	Scatter float64
	// Cooled is what the readings make likeliest of the speed of the bleed, 0 the isotherm and 1 the isentrope: c/(1 + c), with c
	// the growth of the gas while the shell gives back most of the heat, as a part of its volume before the bleed.
	Cooled float64
	// Fast: the fall is bent more than the isotherm allows, so the gas cooled while it was bled and the gauge read low. Friction:
	// the readings lie below the isotherm by an offset, as a piston's seals cause. Both: the trace cannot tell which. The interval
	// holds either then.
	Fast, Friction bool
	fall           func(x float64) quantity.GaugePressure
}

// Fall returns what the gauge would show at x while fluid is left, by the likeliest curve. Past the break it runs on.
func (f *Fit) Fall(x float64) quantity.GaugePressure { return f.fall(x) }

// Flags returns what was seen beside the break, in words.
func (f *Fit) Flags() []string {
	switch {
	case f.Fast && f.Friction:
		return []string{"the fall is bent more than slowly bled gas falls: bled fast, so that the gas cooled, or a piston with friction; the trace cannot tell which, and " +
			"the interval is widened upward for either"}
	case f.Fast:
		return []string{"the fall is bent more than slowly bled gas falls: it was bled fast and the gas cooled; the interval is widened towards gas that gets no heat back"}
	case f.Friction:
		return []string{"the readings lie below the gas by an offset, as a piston's friction causes; the interval is widened upward for it"}
	}
	return nil
}

// New finds the break. The order of the pairs and the unit of Drawn make no difference. Errors: a *quantity.RangeError for a
// temperature, a pressure or an uncertainty that cannot be used; a *RefusedError when the trace gives no charge.
//
// Before the break the gas's volume grows linearly with what was drawn, so that its specific volume is a line in Drawn; the
// pressure follows from the equation of state along the isotherm, or along a path between it and the isentrope when the gas cools.
// Unknown are the line, the path, an offset (the gauge's bias; a piston's friction) and the place of the break. After the break
// nothing is assumed but that the reading lies between zero and what the gas would show, anywhere equally likely, so the shape of
// the collapse does not matter. The interval holds 95 % of the likelihood over the place of the break and all unknowns, with
// the gauge's bias normal, friction half normal, and Cooled half normal with a standard deviation of 0.15 unless the readings
// contradict it (common practice, no source: manuals ask for a slow bleed). Where they do not rule out a slow bleed by a chance of
// one in a thousand, its low end is not above that of one. Charge is the middle of a slow bleed when nothing is flagged. The
// needle's term comes in with the place of the break, anywhere alike between the two readings that hold it.
//
// Source: the sudden drop as the charge is the manuals' own method (NAVEDTRA 14315, ch. 12; TM 5-3805-290-23-2, WP 0126). Gas by
// its equation of state, nitrogen by Span et al. (2000). A change of regime by its likelihood is textbook statistics.
func New(pairs []Pair, o Options) (*Fit, error) {
	o.Gas, o.Ambient = cmp.Or(o.Gas, gas.Nitrogen()), cmp.Or(o.Ambient, quantity.StandardAtmosphere)
	ps := slices.Clone(pairs)
	slices.SortFunc(ps, func(a, b Pair) int { return cmp.Or(cmp.Compare(a.Drawn, b.Drawn), cmp.Compare(b.Pressure, a.Pressure)) })
	if err := o.check(ps); err != nil {
		return nil, err
	}
	m, err := newModel(ps, o)
	if err != nil {
		return nil, err
	}
	best, err := m.settle()
	if err != nil {
		return nil, err
	}
	if err := m.refuse(best); err != nil {
		return nil, err
	}
	return m.fit(best)
}

func (o Options) check(ps []Pair) error {
	between := func(what string, v, low, high float64, unit string) error {
		if v >= low && v <= high {
			return nil
		}
		return &quantity.RangeError{Quantity: what, Value: v, Low: low, High: high, Unit: unit}
	}
	const most = float64(gas.MaxPressure)
	errs := []error{
		between("gas temperature", float64(o.Temperature), float64(gas.MinTemperature), float64(gas.MaxTemperature), "K"),
		between("ambient pressure", float64(o.Ambient), 1e4, 2e5, "Pa"),
		between("uncertainty of a reading", float64(o.U), 1, most, "Pa"),
		between("uncertainty of the gauge", float64(o.Bias), 0, most, "Pa"),
		between("friction", float64(o.Friction), 0, most, "Pa"),
		between("number of readings", float64(len(ps)), 0, mostPairs, "readings"),
	}
	for _, p := range ps {
		errs = append(errs, between("amount drawn", p.Drawn, -1e12, 1e12, "units"), between("fluid pressure", float64(p.Pressure)/1e6, 0, most/1e6, "MPa"))
	}
	for _, err := range errs {
		if err != nil {
			return err
		}
	}
	return o.shape(ps)
}

// shape refuses what no fit can help.
func (o Options) shape(ps []Pair) error {
	if n := len(ps); n < leastAbove+leastBelow {
		return &RefusedError{ErrFew, fmt.Sprintf("%d readings, and it takes %d before the break and %d after it", n, leastAbove, leastBelow),
			"Charge the fluid side again and read at every stroke, to zero and once more"}
	}
	lowest := ps[0]
	for i, p := range ps[1:] {
		if p.Drawn == ps[i].Drawn {
			return &RefusedError{ErrRepeat, fmt.Sprintf("%s and %s both at %g", o.In.Pressure(ps[i].Pressure), o.In.Pressure(p.Pressure), p.Drawn), "Look which was meant and leave the other out"}
		}
		if float64(p.Pressure-lowest.Pressure) > rises*math.Sqrt2*float64(o.U) {
			return &RefusedError{ErrRising, fmt.Sprintf("from %s at %g to %s at %g, and it can only fall while fluid is bled", o.In.Pressure(lowest.Pressure), lowest.Drawn, o.In.Pressure(p.Pressure), p.Drawn),
				"See that the pump is off, that no figure is mistyped, and bleed again"}
		}
		if p.Pressure < lowest.Pressure {
			lowest = p
		}
	}
	return nil
}

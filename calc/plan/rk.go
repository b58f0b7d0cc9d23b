package plan

import (
	"errors"
	"math"
)

// vec is what the model integrates: all joules, so that one tolerance serves all.
type vec struct {
	gas   float64 // internal energy of the gas in the unit
	shell float64 // heat in the shell above ambient temperature
	lost  float64 // heat given to ambient
	in    float64 // enthalpy that came in
}

func (a vec) plus(h float64, b vec) vec {
	return vec{a.gas + h*b.gas, a.shell + h*b.shell, a.lost + h*b.lost, a.in + h*b.in}
}

func (a vec) size() float64 {
	return max(math.Abs(a.gas), math.Abs(a.shell), math.Abs(a.lost), math.Abs(a.in))
}

// The embedded pair of orders 5 and 4 with seven stages of Dormand and Prince (J. Comp. Appl. Math. 6, 19-26, 1980), from
// memory; the tests check the conditions of order. The last row of a is the fifth-order result itself, so that its slope is the next
// step's first.
var (
	dpC = [7]float64{0, 1. / 5, 3. / 10, 4. / 5, 8. / 9, 1, 1}
	dpA = [7][6]float64{
		{},
		{1. / 5},
		{3. / 40, 9. / 40},
		{44. / 45, -56. / 15, 32. / 9},
		{19372. / 6561, -25360. / 2187, 64448. / 6561, -212. / 729},
		{9017. / 3168, -355. / 33, 46732. / 5247, 49. / 176, -5103. / 18656},
		{35. / 384, 0, 500. / 1113, 125. / 192, -2187. / 6784, 11. / 84},
	}
	dpLow = [7]float64{5179. / 57600, 0, 7571. / 16695, 393. / 640, -92097. / 339200, 187. / 2100, 1. / 40}
)

// maxSteps bounds an integration; the limits of the inputs keep it below a tenth of this.
const maxSteps = 200_000

var errSteps = errors.New("the charge could not be followed in a reasonable number of steps: the time constants are too far apart")

// integrate follows y' = f(t, y) from t0 to t1 and calls each with every step's end; each returning false ends it early. The error
// of a step is kept below tolerance (J). Where f fails within a step, as it does beyond the limits of the gas, the step is
// shortened first, since a trial stage may overshoot what the solution does not.
func integrate(f func(t float64, y vec) (vec, error), t0, t1 float64, y vec, tolerance float64, each func(t float64, y vec) bool) (vec, error) {
	var k [7]vec
	var err error
	if k[0], err = f(t0, y); err != nil {
		return y, err
	}
	t, h := t0, (t1-t0)/1000
	smallest := (t1 - t0) * 1e-12
	for range maxSteps {
		last := t+h >= t1
		if last {
			h = t1 - t
		}
		next, bad, err := y, 0.0, error(nil)
		for i := 1; i < 7 && err == nil; i++ {
			next = y
			for j := range i {
				next = next.plus(h*dpA[i][j], k[j])
			}
			k[i], err = f(t+dpC[i]*h, next)
		}
		if err != nil {
			if h /= 4; h < smallest {
				return y, err
			}
			continue
		}
		var low vec
		for i, b := range dpLow {
			w := b
			if i < 6 {
				w -= dpA[6][i]
			}
			low = low.plus(h*w, k[i])
		}
		bad = low.size() / tolerance
		if !(bad <= 1) {
			if h *= max(0.2, 0.9*math.Pow(bad, -0.2)); !(h >= smallest) {
				return y, errSteps
			}
			continue
		}
		y, k[0] = next, k[6]
		if t += h; last {
			t = t1
		}
		if !each(t, y) || last {
			return y, nil
		}
		h *= min(5, 0.9*math.Pow(max(bad, 1e-10), -0.2))
	}
	return y, errSteps
}

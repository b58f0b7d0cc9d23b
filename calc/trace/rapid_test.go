package trace_test

import (
	"errors"
	"math"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/trace"
)

// bled draws a trace of an ideal isotherm with a break, read to 1 psi or so.
func bled(t *rapid.T) []trace.Pair {
	n := rapid.IntRange(5, 12).Draw(t, "strokes")
	from, part := rapid.Float64Range(1000, 3000).Draw(t, "from"), rapid.Float64Range(0.35, 0.7).Draw(t, "part")
	var ps []trace.Pair
	for x := range n + 3 {
		p := 0.
		if x <= n {
			p = from/(1+(1/part-1)*float64(x)/(float64(n)+0.3)) + rapid.Float64Range(-3, 3).Draw(t, "noise")
		}
		ps = append(ps, trace.Pair{Drawn: float64(x), Pressure: quantity.GaugePressure(p) * psi})
	}
	return ps
}

var usualOptions = trace.Options{Temperature: 294, U: 3 * psi, Bias: 8 * psi}

// close2 compares what two fits say, to a part of the charge; both must be given or both refused.
func close2(t *rapid.T, a, b *trace.Fit, errA, errB error, scale, shift float64) {
	if (errA == nil) != (errB == nil) {
		t.Fatalf("%v, but %v", errA, errB)
	}
	if errA != nil {
		return
	}
	for _, v := range [][2]float64{{float64(a.Charge), float64(b.Charge)}, {float64(a.Low), float64(b.Low)}, {float64(a.High), float64(b.High)}, {a.Break*scale + shift, b.Break}, {a.GasVolume * scale, b.GasVolume}} {
		if !(math.Abs(v[0]-v[1]) <= 1e-4*(math.Abs(v[0])+math.Abs(shift))) {
			t.Fatalf("%v is not %v", v[0], v[1])
		}
	}
}

func TestOrderIsIrrelevant(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		ps := bled(t)
		a, errA := trace.New(ps, usualOptions)
		mixed := rapid.Permutation(ps).Draw(t, "mixed")
		was := slices.Clone(mixed)
		b, errB := trace.New(mixed, usualOptions)
		close2(t, a, b, errA, errB, 1, 0)
		if errA == nil && (a.Charge != b.Charge || a.High != b.High) {
			t.Fatalf("%v, mixed %v", a, b)
		}
		if !slices.Equal(mixed, was) {
			t.Fatal("the pairs were changed")
		}
	})
}

func TestUnitOfDrawnIsIrrelevant(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		ps := bled(t)
		scale, shift := rapid.Float64Range(1e-6, 1e3).Draw(t, "scale"), rapid.Float64Range(0, 10).Draw(t, "shift")
		shift *= scale
		a, errA := trace.New(ps, usualOptions)
		for i := range ps {
			ps[i].Drawn = ps[i].Drawn*scale + shift
		}
		b, errB := trace.New(ps, usualOptions)
		close2(t, a, b, errA, errB, scale, shift)
	})
}

// Whatever comes in, what comes out is a refusal or an interval in order.
func TestAnythingGivesFiguresOrARefusal(t *testing.T) {
	odd := rapid.OneOf(rapid.Float64(), rapid.Float64Range(0, 3e7), rapid.SampledFrom([]float64{0, 1, math.NaN(), math.Inf(1), -1, 7e7, 2e5}))
	rapid.Check(t, func(t *rapid.T) {
		var ps []trace.Pair
		for i := range rapid.IntRange(0, 12).Draw(t, "n") {
			ps = append(ps, trace.Pair{Drawn: float64(i), Pressure: quantity.GaugePressure(rapid.Float64Range(0, 3e7).Draw(t, "p"))})
		}
		if rapid.Bool().Draw(t, "falls") {
			slices.SortFunc(ps, func(a, b trace.Pair) int { return int(b.Pressure - a.Pressure) })
			for i := range ps {
				ps[i].Drawn = float64(i)
			}
		}
		if len(ps) > 0 && rapid.Bool().Draw(t, "odd one") {
			i := rapid.IntRange(0, len(ps)-1).Draw(t, "which")
			ps[i].Drawn, ps[i].Pressure = odd.Draw(t, "x"), quantity.GaugePressure(odd.Draw(t, "y"))
		}
		o := trace.Options{Temperature: quantity.Temperature(rapid.Float64Range(190, 430).Draw(t, "t")), U: quantity.GaugePressure(rapid.Float64Range(0, 1e6).Draw(t, "u")),
			Bias: quantity.GaugePressure(rapid.Float64Range(0, 1e6).Draw(t, "bias")), Friction: quantity.GaugePressure(rapid.Float64Range(0, 1e6).Draw(t, "friction"))}
		f, err := trace.New(ps, o)
		if err != nil {
			var no *trace.RefusedError
			if !errors.As(err, &no) && !errors.Is(err, quantity.ErrOutOfRange) || err.Error() == "" {
				t.Fatalf("%T: %v", err, err)
			}
			return
		}
		if !(f.Low <= f.Charge && f.Charge <= f.High) || math.IsInf(float64(f.High-f.Low), 0) || !(f.From <= f.Break && f.Break <= f.To) || math.IsNaN(f.GasVolume+f.Scatter+float64(f.Needle+f.Shown+f.Fall(f.Break))) {
			t.Fatalf("%+v", f)
		}
	})
}

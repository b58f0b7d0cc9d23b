package plan

import (
	"math"
	"testing"
)

// Source: the conditions of order 5 of Runge-Kutta methods (Butcher's 17 rooted trees), with weights of both orders.
func TestOrderConditions(t *testing.T) {
	type stage = [7]float64
	a := func(v stage) (out stage) {
		for i := range 7 {
			for j := range i {
				out[i] += dpA[i][j] * v[j]
			}
		}
		return out
	}
	times := func(vs ...stage) (out stage) {
		for i := range out {
			out[i] = 1
			for _, v := range vs {
				out[i] *= v[i]
			}
		}
		return out
	}
	one, c := stage{1, 1, 1, 1, 1, 1, 1}, stage(dpC)
	for i, v := range a(one) {
		if math.Abs(v-c[i]) > 1e-15 {
			t.Errorf("stage %d: its weights sum to %v, not %v", i, v, c[i])
		}
	}
	trees := []struct {
		order int
		v     stage
		want  float64
	}{
		{1, one, 1}, {2, c, 1. / 2},
		{3, times(c, c), 1. / 3}, {3, a(c), 1. / 6},
		{4, times(c, c, c), 1. / 4}, {4, times(c, a(c)), 1. / 8}, {4, a(times(c, c)), 1. / 12}, {4, a(a(c)), 1. / 24},
		{5, times(c, c, c, c), 1. / 5}, {5, times(c, c, a(c)), 1. / 10}, {5, times(a(c), a(c)), 1. / 20},
		{5, times(c, a(times(c, c))), 1. / 15}, {5, a(times(c, c, c)), 1. / 20}, {5, times(c, a(a(c))), 1. / 30},
		{5, a(times(c, a(c))), 1. / 40}, {5, a(a(times(c, c))), 1. / 60}, {5, a(a(a(c))), 1. / 120},
	}
	high := stage{}
	copy(high[:], dpA[6][:])
	for order, weights := range map[int]stage{5: high, 4: stage(dpLow)} {
		for i, tree := range trees {
			if tree.order > order {
				continue
			}
			sum := 0.0
			for j, w := range weights {
				sum += w * tree.v[j]
			}
			if math.Abs(sum-tree.want) > 1e-14 {
				t.Errorf("order %d, tree %d: %v, want %v", order, i, sum, tree.want)
			}
		}
	}
}

// Source: the closed form of two bodies that cool one into the other, as gas and shell do.
func TestIntegrateCooling(t *testing.T) {
	const a, b = 1. / 30, 1. / 1200
	end, err := integrate(func(_ float64, y vec) (vec, error) {
		return vec{gas: -a * y.gas, shell: a*y.gas - b*y.shell, lost: b * y.shell}, nil
	}, 0, 600, vec{gas: 1e4}, 1e-6, func(float64, vec) bool { return true })
	if err != nil {
		t.Fatal(err)
	}
	gas := 1e4 * math.Exp(-a*600)
	shell := 1e4 * a / (a - b) * (math.Exp(-b*600) - math.Exp(-a*600))
	if math.Abs(end.gas-gas) > 1e-4 || math.Abs(end.shell-shell) > 1e-4 || math.Abs(end.gas+end.shell+end.lost-1e4) > 1e-9 {
		t.Errorf("%+v, want %v, %v", end, gas, shell)
	}
}

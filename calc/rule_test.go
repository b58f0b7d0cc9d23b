package calc

import (
	"testing"

	"example.org/chargehand/calc/quantity"
)

// Source: the four classes of ILAC-G8:09/2019 with w = U, k = 2, for a value with one limit; by arithmetic.
func TestDecideWithOneLimit(t *testing.T) {
	for _, c := range []struct {
		inside quantity.GaugePressure
		want   Class
	}{{200, Pass}, {199, ConditionalPass}, {0, ConditionalPass}, {-1, ConditionalFail}, {-200, ConditionalFail}, {-201, Fail}} {
		if got, w := GuardBanded().Decide(c.inside, 100); got != c.want || w != 200 {
			t.Errorf("%v Pa inside with u = 100 Pa: %s, guard band %v; want %s", c.inside, got, w, c.want)
		}
	}
	for inside, want := range map[quantity.GaugePressure]Class{0.4: Pass, -0.4: Pass, -1: Fail} { // whole pascals decide
		if got, w := SimpleAcceptance().Decide(inside, 100); got != want || w != 0 {
			t.Errorf("%v Pa inside, simple acceptance: %s, %v; want %s", inside, got, w, want)
		}
	}
}

package calc

import (
	"math"
	"strings"
	"testing"

	"example.org/chargehand/calc/quantity"
)

func TestUnitsWriteWhatADialShows(t *testing.T) {
	p := func(s string) quantity.GaugePressure {
		g, err := quantity.ParseGauge(s)
		if err != nil {
			t.Fatal(err)
		}
		return g
	}
	for _, c := range []struct {
		in        Units
		low, high string
		want      string
	}{
		{Units{}, "1150psi", "1350psi", "1150 to 1350 psi"},
		{Units{P: "bar"}, "79bar", "93.04bar", "79.0 to 93.0 bar"},
		{Units{P: "MPa"}, "7.904MPa", "9.3MPa", "7.90 to 9.30 MPa"},
		{Units{P: "kPa"}, "7904.4kPa", "9300kPa", "7904 to 9300 kPa"},
		{Units{P: "furlong"}, "2.5psi", "10psi", "2.5 to 10 psi"}, // a unit that is none
	} {
		if got := c.in.Between(p(c.low), p(c.high)); got != c.want {
			t.Errorf("%+v: %q, want %q", c.in, got, c.want)
		}
	}
	if got := (Units{T: "C"}).Temperature(272.65); got != "-1 C" { // rounds half away from zero
		t.Errorf("272.65 K is %q", got)
	}
	if got := (Units{T: "C"}).Temperature(273.0); got != "0 C" {
		t.Errorf("273 K is %q", got)
	}
	if got := (Units{}).Pressure(quantity.GaugePressure(math.NaN())); got != "no pressure" {
		t.Errorf("NaN is %q", got)
	}
}

// A better gauge is named in ranges of the reader's own unit.
func TestBetterGaugeInTheBooksUnit(t *testing.T) {
	for unit, want := range map[string]string{"psi": "ASME 3A, 0 to 2000 psi", "bar": "EN 0.25, 0 to 160.0 bar"} {
		b := betterGauge(Units{P: unit}, 1180*onePsi, 293.15, 0, 5*onePsi)
		if b == nil {
			t.Fatalf("%s: none", unit)
		}
		if got := b.Accuracy.String() + ", 0 to " + (Units{P: unit}).Pressure(b.Span); !strings.HasPrefix(got, want) {
			t.Errorf("%s: %s, want %s", unit, got, want)
		}
	}
}

// Package quantity holds the physical quantities of the job as Go types, their parsing and printing with units, and the exact
// conversion factors in one table. Gauge and absolute pressure are two types, so that mixing them does not compile.
package quantity

import (
	"errors"
	"fmt"
	"math"
)

// Quantities, in SI units.
type (
	Pressure              float64 // absolute, pascals
	GaugePressure         float64 // pascals above ambient
	Temperature           float64 // kelvins
	TemperatureDifference float64 // kelvins
	Volume                float64 // cubic metres
	Elevation             float64 // geopotential metres
	VolumeRate            float64 // cubic metres a second
	PressureRate          float64 // pascals a second
)

// StandardAtmosphere is 101,325 Pa exactly (NIST SP 811, appendix B.8).
const StandardAtmosphere Pressure = 101325

// Abs returns the absolute pressure at an ambient pressure.
func (g GaugePressure) Abs(ambient Pressure) Pressure { return Pressure(g) + ambient }

// Gauge returns the pressure above an ambient pressure.
func (p Pressure) Gauge(ambient Pressure) GaugePressure { return GaugePressure(p - ambient) }

// ErrOutOfRange is what every RangeError is.
var ErrOutOfRange = errors.New("outside the valid range")

// RangeError says which input was outside the validity range, and the range.
type RangeError struct {
	Quantity         string
	Value, Low, High float64
	Unit             string
}

func (e *RangeError) Error() string {
	return fmt.Sprintf("%s %.6g %s is outside %.6g to %.6g %s", e.Quantity, e.Value, e.Unit, e.Low, e.High, e.Unit)
}

// Is makes errors.Is(err, ErrOutOfRange) true.
func (e *RangeError) Is(target error) bool { return target == ErrOutOfRange }

// StandardAtmosphereAt returns the ambient pressure of the U.S. Standard Atmosphere 1976 at an elevation, for -500 m to
// 11,000 m geopotential; outside, a *RangeError. A field's real pressure differs from it by some percent with the weather.
//
// Source: U.S. Standard Atmosphere, 1976, eq. (33a), with the troposphere's constants (from memory, checked against the
// table of printed values in the tests).
func StandardAtmosphereAt(h Elevation) (Pressure, error) {
	if !(h >= -500 && h <= 11000) {
		return 0, &RangeError{"elevation", float64(h), -500, 11000, "m"}
	}
	const (
		base     = 288.15         // K
		lapse    = 0.0065         // K/m
		exponent = 5.255876113278 // g0 M/(R L) with g0 9.80665, M 28.9644e-3, R 8.31432
	)
	return StandardAtmosphere * Pressure(math.Pow(1-lapse*float64(h)/base, exponent)), nil
}

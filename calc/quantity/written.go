package quantity

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Written is a value as a person typed it: Mantissa x 10^Exponent Unit. 1180 psi stays 1180 psi, and 70.0 F keeps its zero.
type Written struct {
	Mantissa int64
	Exponent int
	Unit     string // as in the table of units; "" for a bare number
}

type kind int

const (
	pressure kind = iota
	temperature
	volume
	length
	volumeRate
	pressureRate
)

var kindNames = [...]string{"a pressure", "a temperature", "a volume", "an elevation", "a volume over time", "a pressure over time"}

// unit converts to SI: si = (value + offset) * factor.
type unit struct {
	name   string
	kind   kind
	factor float64
	offset float64
}

// Exact factors of NIST SP 811 (2008), appendix B.8: the pound-force is 0.45359237 x 9.80665 N and the inch 0.0254 m exactly.
var units = []unit{
	{"psi", pressure, 0.45359237 * 9.80665 / (0.0254 * 0.0254), 0},
	{"bar", pressure, 1e5, 0},
	{"kPa", pressure, 1e3, 0},
	{"MPa", pressure, 1e6, 0},
	{"hPa", pressure, 100, 0},
	{"kgf/cm2", pressure, 98066.5, 0},
	{"inHg", pressure, 3386.388640341, 0}, // conventional: 13,595.1 kg/m3 x 9.80665 m/s2 x 0.0254 m
	{"F", temperature, 5.0 / 9, 459.67},
	{"C", temperature, 1, 273.15},
	{"K", temperature, 1, 0},
	{"in3", volume, 16.387064e-6, 0},
	{"cm3", volume, 1e-6, 0},
	{"mL", volume, 1e-6, 0},
	{"L", volume, 1e-3, 0},
	{"USgal", volume, 231 * 16.387064e-6, 0},
	{"ft", length, 0.3048, 0},
	{"m", length, 1, 0},
	{"mL/h", volumeRate, 1e-6 / 3600, 0},
	{"cm3/min", volumeRate, 1e-6 / 60, 0},
	{"in3/min", volumeRate, 16.387064e-6 / 60, 0},
	{"in3/s", volumeRate, 16.387064e-6, 0},
	{"L/min", volumeRate, 1e-3 / 60, 0},
	{"USgal/min", volumeRate, 231 * 16.387064e-6 / 60, 0},
	{"psi/day", pressureRate, 0.45359237 * 9.80665 / (0.0254 * 0.0254) / 86400, 0},
	{"bar/day", pressureRate, 1e5 / 86400.0, 0},
	{"psi/min", pressureRate, 0.45359237 * 9.80665 / (0.0254 * 0.0254) / 60, 0},
	{"bar/min", pressureRate, 1e5 / 60.0, 0},
}

func unitNamed(name string) (unit, bool) {
	for _, u := range units {
		if u.name == name {
			return u, true
		}
	}
	return unit{}, false
}

func unitsOf(k kind) string {
	var names []string
	for _, u := range units {
		if u.kind == k {
			names = append(names, u.name)
		}
	}
	return strings.Join(names, ", ")
}

// SyntaxError says what is wrong with a typed value.
type SyntaxError struct{ Value, Problem string }

func (e *SyntaxError) Error() string { return fmt.Sprintf("%q %s", e.Value, e.Problem) }

const maxDigits = 15

// Parse reads a value with or without a unit: "1180psi", "1,180 psi", "-12C", "81.4 bar". A comma groups three digits and is
// never a decimal sign. Units are matched whatever their case, except that a unit is always one of the table. The error is a
// *SyntaxError.
func Parse(s string) (Written, error) {
	fail := func(problem string) (Written, error) { return Written{}, &SyntaxError{s, problem} }
	t := strings.TrimSpace(s)
	end := 0
	for end < len(t) && (t[end] >= '0' && t[end] <= '9' || strings.IndexByte(",.+-", t[end]) >= 0) {
		end++
	}
	number, name := t[:end], strings.TrimSpace(t[end:])
	negative := strings.HasPrefix(number, "-")
	digits := strings.TrimPrefix(number, "-")
	if !negative {
		digits = strings.TrimPrefix(number, "+")
	}
	whole, fraction, point := strings.Cut(digits, ".")
	if whole == "" || point && fraction == "" {
		return fail("is not a number with a unit")
	}
	if groups := strings.Split(whole, ","); len(groups) > 1 {
		for i, g := range groups {
			if i > 0 && len(g) != 3 || i == 0 && (len(g) == 0 || len(g) > 3) {
				return fail("has a comma that does not group thousands; write the decimal sign as a point")
			}
		}
		whole = strings.Join(groups, "")
	}
	all := whole + fraction
	if len(strings.TrimLeft(all, "0")) > maxDigits || len(fraction) > 9 || len(all) > 30 {
		return fail("has more digits than can be kept exactly")
	}
	m, err := strconv.ParseUint(all, 10, 63)
	if err != nil {
		return fail("is not a number with a unit")
	}
	w := Written{Mantissa: int64(m), Exponent: -len(fraction)}
	if negative {
		w.Mantissa = -w.Mantissa
	}
	if name == "" {
		return w, nil
	}
	for _, u := range units {
		if strings.EqualFold(u.name, name) && (u.name != "MPa" || name[0] == 'M') {
			w.Unit = u.name
			return w, nil
		}
	}
	return fail(fmt.Sprintf("has a unit %q that is not known", name))
}

// String writes the value as it was typed, with a space before the unit. An exponent that no typed value has is written as one,
// so that a made-up value can neither fill the memory with zeros nor look like another.
func (w Written) String() string {
	digits := strconv.FormatUint(magnitude(w.Mantissa), 10)
	if w.Exponent < -18 || w.Exponent > 18 {
		digits += "e" + strconv.Itoa(w.Exponent)
	} else if n := -w.Exponent; n > 0 {
		if len(digits) <= n {
			digits = strings.Repeat("0", n-len(digits)+1) + digits
		}
		digits = digits[:len(digits)-n] + "." + digits[len(digits)-n:]
	} else if w.Exponent > 0 && w.Mantissa != 0 {
		digits += strings.Repeat("0", w.Exponent)
	}
	if w.Mantissa < 0 {
		digits = "-" + digits
	}
	return strings.TrimSpace(digits + " " + w.Unit)
}

func magnitude(m int64) uint64 {
	if m < 0 {
		return -uint64(m)
	}
	return uint64(m)
}

// In gives a bare number the unit; a value that has one keeps it.
func (w Written) In(name string) Written {
	if w.Unit == "" {
		w.Unit = name
	}
	return w
}

func (w Written) value() float64 {
	if w.Exponent < 0 { // a division by an exact power of ten rounds once
		return float64(w.Mantissa) / math.Pow10(-w.Exponent)
	}
	return float64(w.Mantissa) * math.Pow10(w.Exponent)
}

func (w Written) si(k kind, difference bool) (float64, error) {
	if w.Unit == "" {
		return 0, &SyntaxError{w.String(), fmt.Sprintf("has no unit; write one of %s after it", unitsOf(k))}
	}
	u, ok := unitNamed(w.Unit)
	if !ok || u.kind != k {
		return 0, &SyntaxError{w.String(), fmt.Sprintf("is not %s; write one of %s after it", kindNames[k], unitsOf(k))}
	}
	v := w.value()
	if !difference {
		v += u.offset
	}
	v *= u.factor
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return 0, &SyntaxError{w.String(), "is too large"}
	}
	return v, nil
}

// Gauge returns the value as a gauge pressure in pascals. The error is a *SyntaxError when it has no unit of pressure.
func (w Written) Gauge() (GaugePressure, error) {
	v, err := w.si(pressure, false)
	return GaugePressure(v), err
}

// Absolute returns the value as an absolute pressure in pascals; it must be positive.
func (w Written) Absolute() (Pressure, error) {
	v, err := w.si(pressure, false)
	if err == nil && v <= 0 {
		err = &SyntaxError{w.String(), "is not an absolute pressure: it must be above zero"}
	}
	return Pressure(v), err
}

// Temperature returns the value in kelvins; it must be above absolute zero.
func (w Written) Temperature() (Temperature, error) {
	v, err := w.si(temperature, false)
	if err == nil && v <= 0 {
		err = &SyntaxError{w.String(), "is below absolute zero"}
	}
	return Temperature(v), err
}

// TemperatureDifference returns the value as a difference in kelvins: 9 F is 5 K.
func (w Written) TemperatureDifference() (TemperatureDifference, error) {
	v, err := w.si(temperature, true)
	return TemperatureDifference(v), err
}

// Volume returns the value in cubic metres; it must be positive.
func (w Written) Volume() (Volume, error) {
	v, err := w.si(volume, false)
	if err == nil && v <= 0 {
		err = &SyntaxError{w.String(), "is not a volume: it must be above zero"}
	}
	return Volume(v), err
}

// Elevation returns the value in metres.
func (w Written) Elevation() (Elevation, error) {
	v, err := w.si(length, false)
	return Elevation(v), err
}

// VolumeRate returns the value in cubic metres a second; it must be positive. A leak is of free gas, a flow of fluid.
func (w Written) VolumeRate() (VolumeRate, error) {
	v, err := w.si(volumeRate, false)
	if err == nil && v <= 0 {
		err = &SyntaxError{w.String(), "is no rate: it must be above zero"}
	}
	return VolumeRate(v), err
}

// PressureRate returns the value in pascals a second; it must be positive.
func (w Written) PressureRate() (PressureRate, error) {
	v, err := w.si(pressureRate, false)
	if err == nil && v <= 0 {
		err = &SyntaxError{w.String(), "is no rate: it must be above zero"}
	}
	return PressureRate(v), err
}

func parseAs[T any](s string, as func(Written) (T, error)) (T, error) {
	w, err := Parse(s)
	if err != nil {
		var zero T
		return zero, err
	}
	return as(w)
}

// ParseGauge reads a gauge pressure with its unit.
func ParseGauge(s string) (GaugePressure, error) { return parseAs(s, Written.Gauge) }

// ParsePressure reads an absolute pressure with its unit.
func ParsePressure(s string) (Pressure, error) { return parseAs(s, Written.Absolute) }

// ParseTemperature reads a temperature with its unit.
func ParseTemperature(s string) (Temperature, error) { return parseAs(s, Written.Temperature) }

// ParseVolume reads a volume with its unit.
func ParseVolume(s string) (Volume, error) { return parseAs(s, Written.Volume) }

// ParseElevation reads an elevation with its unit.
func ParseElevation(s string) (Elevation, error) { return parseAs(s, Written.Elevation) }

func inUnit(si float64, name string, k kind) (float64, error) {
	u, ok := unitNamed(name)
	if !ok || u.kind != k {
		return 0, &SyntaxError{name, fmt.Sprintf("is not a unit of %s; use one of %s", strings.TrimPrefix(kindNames[k], "a "), unitsOf(k))}
	}
	return si/u.factor - u.offset, nil
}

// InUnit returns the pressure in a unit of the table.
func (g GaugePressure) InUnit(name string) (float64, error) {
	return inUnit(float64(g), name, pressure)
}

// InUnit returns the absolute pressure in a unit of the table.
func (p Pressure) InUnit(name string) (float64, error) { return inUnit(float64(p), name, pressure) }

// InUnit returns the temperature in a unit of the table.
func (t Temperature) InUnit(name string) (float64, error) {
	return inUnit(float64(t), name, temperature)
}

// InUnit returns the volume in a unit of the table.
func (v Volume) InUnit(name string) (float64, error) { return inUnit(float64(v), name, volume) }

// InUnit returns the rate in a unit of the table.
func (r VolumeRate) InUnit(name string) (float64, error) { return inUnit(float64(r), name, volumeRate) }

// InUnit returns the rate in a unit of the table.
func (r PressureRate) InUnit(name string) (float64, error) {
	return inUnit(float64(r), name, pressureRate)
}

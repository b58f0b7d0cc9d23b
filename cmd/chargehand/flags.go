package main

import (
	"errors"
	"fmt"
	"slices"
	"strings"
	"time"

	"example.org/chargehand/calc/fault"
	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger/record"
)

// valueError says what is wrong with a typed value and what to write instead.
type valueError struct {
	what, todo string
	cause      error
}

func (e *valueError) Error() string { return e.what + ". " + e.todo }
func (e *valueError) Unwrap() error { return e.cause }

// typed is a flag that keeps a value as written beside what it means.
type typed[T any] struct {
	written quantity.Written
	value   T
	kind    string
	example string
	as      func(quantity.Written) (T, error)
	check   func(T) error
	unit    func(record.Founding) string // nil: a bare number is refused
	bare    string                       // a number that waits for the book's unit
}

// Set reads the value; the error is a *valueError.
func (f *typed[T]) Set(s string) error {
	w, err := quantity.Parse(s)
	if err != nil {
		return f.wrong(s, err)
	}
	if f.bare = ""; w.Unit == "" && f.unit != nil {
		f.bare = s
		return nil
	}
	v, err := f.as(w)
	if err != nil {
		return f.wrong(s, err)
	}
	if f.check != nil {
		if err := f.check(v); err != nil {
			return f.wrong(s, err)
		}
	}
	f.written, f.value = w, v
	return nil
}

func (f *typed[T]) wrong(s string, err error) error {
	var syntax *quantity.SyntaxError
	what := fmt.Sprintf("%q: %v", s, err)
	todo := fmt.Sprintf("Write the %s as %s", f.kind, f.example)
	if errors.As(err, &syntax) {
		problem, hint, found := cutHint(syntax.Problem)
		what = fmt.Sprintf("%q %s", s, problem)
		if found {
			todo = fmt.Sprintf("%s, such as %s", hint, f.example)
		}
	} else if errors.Is(err, quantity.ErrOutOfRange) {
		todo = "Give one inside that range"
	}
	return &valueError{what, todo, err}
}

func (f *typed[T]) String() string {
	if f == nil || f.written == (quantity.Written{}) {
		return ""
	}
	return f.written.String()
}

func (f *typed[T]) withUnit(founding record.Founding) string {
	if f.bare == "" {
		return ""
	}
	return f.bare + f.unit(founding)
}

// amount returns the value as entries keep it, nil when none was given.
func (f *typed[T]) amount() *record.Amount {
	if f.written.Unit == "" {
		return nil
	}
	a := amountOf(f.written)
	return &a
}

func amountOf(w quantity.Written) record.Amount {
	return record.Amount{Mantissa: w.Mantissa, Exponent: w.Exponent, Unit: w.Unit}
}

// load sets the value that an entry holds.
func (f *typed[T]) load(a *record.Amount) error {
	if a == nil {
		return nil
	}
	return f.Set(written(*a).String())
}

func written(a record.Amount) quantity.Written {
	return quantity.Written{Mantissa: a.Mantissa, Exponent: a.Exponent, Unit: a.Unit}
}

// Type names the kind of value in help.
func (f *typed[T]) Type() string { return f.kind }

func gaugePressure() *typed[quantity.GaugePressure] {
	return &typed[quantity.GaugePressure]{kind: "gauge pressure", example: "1180psi or 81.4bar", as: quantity.Written.Gauge}
}

// bookPressure and bookTemperature take a bare number in the book's own unit.
func bookPressure() *typed[quantity.GaugePressure] {
	p := gaugePressure()
	p.unit = func(f record.Founding) string { return f.PressureUnit }
	return p
}

func bookTemperature() *typed[quantity.Temperature] {
	t := gasTemperature()
	t.unit = func(f record.Founding) string { return f.TemperatureUnit }
	return t
}

func absolutePressure() *typed[quantity.Pressure] {
	return &typed[quantity.Pressure]{kind: "absolute pressure", example: "29.92inHg or 1013.25hPa", as: quantity.Written.Absolute}
}

func elevation() *typed[quantity.Elevation] {
	return &typed[quantity.Elevation]{kind: "elevation", example: "6200ft or 1890m", as: quantity.Written.Elevation,
		check: func(h quantity.Elevation) error { _, err := quantity.StandardAtmosphereAt(h); return err }}
}

// gasTemperature accepts what the gas models do: 200 K to 420 K.
func gasTemperature() *typed[quantity.Temperature] {
	return &typed[quantity.Temperature]{kind: "temperature", example: "41F or -12C", as: quantity.Written.Temperature,
		check: func(t quantity.Temperature) error {
			if t >= gas.MinTemperature && t <= gas.MaxTemperature {
				return nil
			}
			c, err := t.InUnit("C")
			if err != nil {
				return err
			}
			return &quantity.RangeError{Quantity: "gas temperature", Value: c, Low: float64(gas.MinTemperature) - 273.15, High: float64(gas.MaxTemperature) - 273.15, Unit: "C"}
		}}
}

// cutHint splits a problem at its hint, and begins the hint as a sentence.
func cutHint(problem string) (what, hint string, found bool) {
	what, hint, found = strings.Cut(problem, "; ")
	if found {
		hint = strings.ToUpper(hint[:1]) + hint[1:]
	}
	return what, hint, found
}

func volume() *typed[quantity.Volume] {
	return &typed[quantity.Volume]{kind: "volume", example: "50in3 or 820cm3", as: quantity.Written.Volume}
}

func fillRate() *typed[quantity.PressureRate] {
	return &typed[quantity.PressureRate]{kind: "rate of pressure", example: "100psi/min or 7bar/min", as: quantity.Written.PressureRate}
}

func flow() *typed[quantity.VolumeRate] {
	return &typed[quantity.VolumeRate]{kind: "flow", example: "120in3/min or 2L/min", as: quantity.Written.VolumeRate}
}

// leakRate takes either way of stating a leak: free gas, or pressure.
func leakRate() *typed[float64] {
	return &typed[float64]{kind: "leak rate", example: "5mL/h of free gas, or 2psi/day", as: func(w quantity.Written) (float64, error) {
		if v, err := w.VolumeRate(); err == nil {
			return float64(v), nil
		}
		v, err := w.PressureRate()
		return float64(v), err
	}}
}

// choice is a flag that takes one of a few words.
type choice struct {
	is string
	of []string
}

func (c *choice) String() string { return c.is }
func (c *choice) Type() string   { return "word" }

func (c *choice) Set(s string) error {
	if !slices.Contains(c.of, s) {
		return &valueError{fmt.Sprintf("%q is none of the words for it", s), "Write " + strings.Join(c.of[:len(c.of)-1], ", ") + " or " + c.of[len(c.of)-1], nil}
	}
	c.is = s
	return nil
}

// minutes is a flag for a span of time, kept in whole minutes; n is nil when none was given.
type minutes struct{ n *uint64 }

func (m *minutes) String() string {
	if m == nil || m.n == nil {
		return ""
	}
	return fmt.Sprintf("%dm", *m.n)
}

func (m *minutes) Type() string { return "duration" }

func (m *minutes) Set(s string) error {
	d, err := time.ParseDuration(s)
	if err != nil || d < 0 || d > 1000*time.Hour {
		return &valueError{fmt.Sprintf("%q is not a span of time", s), "Write it as 45m or 1h30m", nil}
	}
	n := uint64(d / time.Minute)
	m.n = &n
	return nil
}

// remarks is a flag for what was noticed, in the words of calc/fault; it may be given again. What an entry held gives way to the
// first that is given; none at all takes it back.
type remarks struct {
	is     []string
	loaded bool
}

func (r *remarks) load(seen []string) { r.is, r.loaded = slices.Clone(seen), true }

func (r *remarks) String() string { return strings.Join(r.is, "; ") }
func (r *remarks) Type() string   { return "words" }

func (r *remarks) Set(s string) error {
	if s == "" && r.loaded {
		r.is = nil
		return nil
	}
	what, err := fault.ParseRemark(s)
	if err != nil {
		var all []string
		for _, x := range fault.Remarks() {
			all = append(all, x.String())
		}
		return &valueError{fmt.Sprintf("%q is none of what can be noted", s), "Write one of: " + strings.Join(all, "; "), nil}
	}
	if r.loaded {
		r.is, r.loaded = nil, false
	}
	if !slices.Contains(r.is, what.String()) {
		r.is = append(r.is, what.String())
	}
	return nil
}

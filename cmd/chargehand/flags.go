package main

import (
	"errors"
	"fmt"
	"strings"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
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
}

// Set reads the value; the error is a *valueError.
func (f *typed[T]) Set(s string) error {
	w, err := quantity.Parse(s)
	if err != nil {
		return f.wrong(s, err)
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

// Type names the kind of value in help.
func (f *typed[T]) Type() string { return f.kind }

func gaugePressure() *typed[quantity.GaugePressure] {
	return &typed[quantity.GaugePressure]{kind: "gauge pressure", example: "1180psi or 81.4bar", as: quantity.Written.Gauge}
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

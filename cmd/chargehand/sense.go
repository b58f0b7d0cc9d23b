package main

import (
	"fmt"
	"time"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// Values that are each well written and cannot be, together or by what they are of. A reading that can be and that nothing can
// be said of is signed, with a verdict of not assessable; what no dial can show is a slip of the keys.

// refuseReading refuses a pressure that the gauge cannot show, and a soak below zero.
func refuseReading(pressure *typed[quantity.GaugePressure], g *ledger.Gauge, soak time.Duration) error {
	if pressure.value < 0 {
		return usageError(fmt.Sprintf("--pressure: %q is below zero, and no dial shows that", pressure), "Read the gauge again; 0psi is an empty one")
	}
	span := quantity.Written{Mantissa: g.Span.Mantissa, Exponent: g.Span.Exponent, Unit: g.Span.Unit}
	if p, err := span.Gauge(); err == nil && pressure.value > p {
		return usageError(fmt.Sprintf("--pressure: %q is above the span of gauge %s, %q", pressure, g.Asset, span), "Read the gauge again, or name the gauge that was used with --gauge")
	}
	if soak < 0 {
		return usageError(fmt.Sprintf("--soak: %q is below zero", soak), "Write how long the unit stood, 0 or more, such as 45m")
	}
	return nil
}

// refuseTolerance refuses a tolerance below zero, which would turn the limits round.
func refuseTolerance(minus, plus *typed[quantity.GaugePressure]) error {
	for name, f := range map[string]*typed[quantity.GaugePressure]{"minus": minus, "plus": plus} {
		if f.value < 0 {
			return usageError(fmt.Sprintf("--%s: %q is below zero", name, f), "Write both tolerances as 0 or more; the sign is in the flag's name")
		}
	}
	return nil
}

func refuseDates(calibrated, due *stamp) error {
	if due.at.Before(calibrated.at) {
		return usageError(fmt.Sprintf("--due: %q is before --calibrated %q", due.at.Format(time.DateOnly), calibrated.at.Format(time.DateOnly)), "Read both dates off the gauge's label or certificate")
	}
	return nil
}

// refuseUnits refuses a book's units that are none.
func refuseUnits(f record.Founding) error {
	if _, err := (quantity.Written{Mantissa: 1, Unit: f.PressureUnit}).Gauge(); err != nil {
		return usageError(fmt.Sprintf("--pressure-unit: %q is not a unit of pressure here", f.PressureUnit), "Write psi, bar, kPa, MPa or kgf/cm2")
	}
	if _, err := (quantity.Written{Mantissa: 300, Unit: f.TemperatureUnit}).Temperature(); err != nil {
		return usageError(fmt.Sprintf("--temperature-unit: %q is not a unit of temperature here", f.TemperatureUnit), "Write F, C or K")
	}
	return nil
}

package main

import (
	"fmt"

	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
)

// Values that are each well written and cannot be, together or by what they are of. A reading that can be and that nothing can
// be said of is signed, with a verdict of not assessable; what no dial can show is a slip of the keys.

// refusePressure refuses a pressure that the gauge cannot show; flag is where it was given.
func refusePressure(flag string, pressure *typed[quantity.GaugePressure], g *ledger.Gauge) error {
	if pressure.value < 0 {
		return usageError(fmt.Sprintf("--%s: %q is below zero, and no dial shows that", flag, pressure), "Read the gauge again; 0psi is an empty one")
	}
	span := written(g.Span)
	if p, err := span.Gauge(); err == nil && pressure.value > p {
		return usageError(fmt.Sprintf("--%s: %q is above the span of gauge %s, %q", flag, pressure, g.Asset, span), "Read the gauge again, or name the gauge that was used with --gauge")
	}
	return nil
}

// refuseTolerance refuses a tolerance below zero, which would turn the limits round.
func refuseTolerance(flag string, tolerance *typed[quantity.GaugePressure]) error {
	if tolerance.value < 0 {
		return usageError(fmt.Sprintf("--%s: %q is below zero", flag, tolerance), "Write both tolerances as 0 or more; the sign is in the flag's name")
	}
	return nil
}

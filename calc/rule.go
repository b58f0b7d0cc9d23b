package calc

import "example.org/chargehand/calc/quantity"

// Decide classes a value that has one limit only, as a leak has: it lies so far inside it (negative: outside) with standard
// uncertainty u. The guard band comes back with it. Both are rounded to whole pascals first, as everywhere a value decides.
func (r Rule) Decide(inside, u quantity.GaugePressure) (Class, quantity.GaugePressure) {
	w := step(r.guard() * u)
	inside = step(inside)
	return decide(inside, 2*w, w), w // one limit is never too narrow
}

package gas

// ideal has no residual part, and cv = 5/2 R: the perfect gas of the textbooks.
var ideal = Model{
	name: "ideal gas",
	r:    nitrogen.r, m: nitrogen.m, tRed: nitrogen.tRed,
	rhoRed:      2 * nitrogen.rhoRed, // shifts entropies only; three times it must hold 70 MPa at 200 K
	logTau:      2.5,
	uncertainty: func(float64, float64) float64 { return 0 },
}

// Ideal returns the ideal gas of nitrogen's molar mass with cp/cv = 1.4: to hold methods against textbook results and to show
// what the real gas changes. ByName does not know it: no unit is filled with it.
func Ideal() *Model { return &ideal }

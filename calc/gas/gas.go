// Package gas evaluates the Helmholtz equations of state of nitrogen and dry air in full: pressure, density and the caloric
// properties, with analytic derivatives.
//
// With a(T, rho)/(R T) = alpha0(tau, delta) + alphar(tau, delta), tau = T_red/T and delta = rho/rho_red, every property is a
// combination of derivatives of the two parts; the relations are those of table 3 in Span et al. (2000).
package gas

import (
	"errors"
	"fmt"
	"math"

	"example.org/chargehand/calc/quantity"
)

// Density is a mass density in kg/m3.
type Density float64

// Limits of the tool within the wider validity of both equations: what a charge of nitrogen on an aircraft can meet.
const (
	MinTemperature quantity.Temperature = 200
	MaxTemperature quantity.Temperature = 420
	MinPressure    quantity.Pressure    = 0.05e6
	MaxPressure    quantity.Pressure    = 70e6
)

// Model is one gas. Models are immutable and shared.
type Model struct {
	name         string
	r, m         float64 // J/(mol K), kg/mol
	tRed, rhoRed float64 // K, mol/m3
	logTau       float64
	idealPowers  []idealPower
	idealExps    []idealExp
	terms        []term
	gauss        []gaussian
	start        [5]float64           // constants of isotherm.guess
	coldest      quantity.Temperature // of ColdState
	uncertainty  func(t, p float64) float64
}

type (
	idealPower struct{ n, t float64 }
	// idealExp is n ln(1 - exp(-theta tau)), or with plus n ln(2/3 + exp(theta tau)).
	idealExp struct {
		n, theta float64
		plus     bool
	}
	// term is n delta^d tau^t, times exp(-delta^l) where l > 0.
	term struct {
		n, t float64
		d, l int
	}
	// gaussian is n delta^d tau^t exp(-phi (delta-epsilon)^2 - beta (tau-gamma)^2).
	gaussian struct {
		n, t                      float64
		d                         int
		phi, beta, gamma, epsilon float64
	}
)

// Nitrogen returns the model of nitrogen.
func Nitrogen() *Model { return &nitrogen }

// DryAir returns the model of dry air.
func DryAir() *Model { return &air }

// ByName returns the model of "nitrogen" or "air".
func ByName(name string) (*Model, error) {
	switch name {
	case nitrogen.name:
		return &nitrogen, nil
	case air.name:
		return &air, nil
	}
	return nil, fmt.Errorf("gas %q is not known; it is nitrogen or air", name)
}

// Name returns the gas's name.
func (g *Model) Name() string { return g.name }

// MolarMass returns kg/mol.
func (g *Model) MolarMass() float64 { return g.m }

// SpecificGasConstant returns R/M in J/(kg K).
func (g *Model) SpecificGasConstant() float64 { return g.r / g.m }

// RelativeUncertainty returns the expanded relative uncertainty (k = 2) of density that the source of the equation states at
// a temperature and pressure.
func (g *Model) RelativeUncertainty(t quantity.Temperature, p quantity.Pressure) float64 {
	return g.uncertainty(float64(t), float64(p))
}

// ErrNoConvergence is a defect of the equation or of this package: no input within the limits is known to give it.
var ErrNoConvergence = errors.New("the density iteration did not converge")

func checkTemperature(t quantity.Temperature) error {
	if !(t >= MinTemperature && t <= MaxTemperature) {
		return &quantity.RangeError{Quantity: "gas temperature", Value: float64(t), Low: float64(MinTemperature), High: float64(MaxTemperature), Unit: "K"}
	}
	return nil
}

func checkPressure(p quantity.Pressure) error {
	if !(p >= MinPressure && p <= MaxPressure) {
		return &quantity.RangeError{Quantity: "absolute gas pressure", Value: float64(p) / 1e6, Low: float64(MinPressure) / 1e6, High: float64(MaxPressure) / 1e6, Unit: "MPa"}
	}
	return nil
}

// Pressure returns the absolute pressure at a temperature and density. Valid for 200 K to 420 K and where the result lies
// within 0.05 MPa to 70 MPa; outside, a *quantity.RangeError.
func (g *Model) Pressure(t quantity.Temperature, rho Density) (quantity.Pressure, error) {
	if err := checkTemperature(t); err != nil {
		return 0, err
	}
	var iso isotherm
	g.fix(&iso, float64(t))
	p, _ := iso.pressure(float64(rho) / g.m)
	if err := checkPressure(quantity.Pressure(p)); err != nil {
		return 0, err
	}
	return quantity.Pressure(p), nil
}

// Density returns the density at a temperature and absolute pressure. Valid for 200 K to 420 K and 0.05 MPa to 70 MPa;
// outside, a *quantity.RangeError. The result substituted back gives the pressure to a few units of the last digit.
func (g *Model) Density(t quantity.Temperature, p quantity.Pressure) (Density, error) {
	if err := checkTemperature(t); err != nil {
		return 0, err
	}
	if err := checkPressure(p); err != nil {
		return 0, err
	}
	return g.density(float64(t), float64(p))
}

// density solves p(T, rho) = p by Newton's method, kept inside a bracket by bisection. Above the critical temperature the
// pressure rises with density throughout, so the root is single.
func (g *Model) density(t, p float64) (Density, error) {
	var iso isotherm
	g.fix(&iso, t)
	lo, hi := 0.0, 3*g.rhoRed
	rho := iso.guess(p)
	for range 60 {
		f, df := iso.pressure(rho)
		f -= p
		if f > 0 {
			hi = rho
		} else {
			lo = rho
		}
		step := f / df
		// Newton doubles the digits: a step of 1e-8 leaves an error near 1e-16.
		if math.Abs(step) <= 1e-8*rho {
			return Density((rho - step) * g.m), nil
		}
		next := rho - step
		if !(next > lo && next < hi) {
			next = (lo + hi) / 2
		}
		rho = next
	}
	return 0, ErrNoConvergence
}

// maxTerms bounds the arrays of an isotherm so that it lives on the stack.
const maxTerms, maxGauss = 36, 4

// isotherm is the equation at one temperature: each term's tau part is done once, so that the iteration on density only
// evaluates polynomials.
type isotherm struct {
	g       *Model
	rt, tau float64
	c       [maxTerms]float64
	gauss   [maxGauss]float64
}

func (g *Model) fix(iso *isotherm, t float64) {
	tau := g.tRed / t
	iso.g, iso.rt, iso.tau = g, g.r*t, tau
	ln := math.Log(tau)
	// Most exponents of tau are whole eighths: two short tables of powers cost less than an exponential a term.
	var eighths [8]float64
	var wholes [17]float64
	eighths[0], wholes[0] = 1, 1
	root := math.Sqrt(math.Sqrt(math.Sqrt(tau)))
	for i := 1; i < len(eighths); i++ {
		eighths[i] = eighths[i-1] * root
	}
	for i := 1; i < len(wholes); i++ {
		wholes[i] = wholes[i-1] * tau
	}
	for i := range g.terms {
		k := &g.terms[i]
		if e := int(k.t * 8); float64(e) == k.t*8 {
			iso.c[i] = k.n * wholes[e>>3] * eighths[e&7]
		} else {
			iso.c[i] = k.n * math.Exp(k.t*ln)
		}
	}
	for i := range g.gauss {
		k := &g.gauss[i]
		d := tau - k.gamma
		if x := k.beta * d * d; x < 60 { // else below the last digit of the sum
			iso.gauss[i] = k.n * math.Exp(k.t*ln-x)
		}
	}
}

// guess starts the iteration within some percent, from a compressibility factor rational in the ideal gas's density x. Its
// constants are fitted to the equation over the tool's range: they save steps and leave no trace in the result.
func (iso *isotherm) guess(p float64) float64 {
	c := &iso.g.start
	rho := p / iso.rt
	x := rho / iso.g.rhoRed
	return rho * (1 + x*(c[3]+c[4]*iso.tau)) / (1 + x*(c[0]+c[1]*iso.tau+c[2]*x))
}

// pressure returns p and dp/drho at a molar density.
func (iso *isotherm) pressure(rho float64) (p, dp float64) {
	g := iso.g
	delta := rho / g.rhoRed
	ad, add := iso.derivatives(delta)
	// p = rho R T (1 + delta ar_d)
	p = rho * iso.rt * (1 + ad)
	dp = iso.rt * (1 + 2*ad + add)
	return p, dp
}

// derivatives returns delta ar_d and delta^2 ar_dd.
func (iso *isotherm) derivatives(delta float64) (ad, add float64) {
	g := iso.g
	var pow [13]float64 // delta^0 to delta^12
	pow[0] = 1
	for i := 1; i < len(pow); i++ {
		pow[i] = pow[i-1] * delta
	}
	var e [5]float64
	e[0] = 1
	for l := 1; l <= 4; l++ {
		e[l] = math.Exp(-pow[l])
	}
	// With x = d - l delta^l: delta ar_d = sum a x, delta^2 ar_dd = sum a (x (x - 1) - l^2 delta^l).
	for i := range g.terms {
		k := &g.terms[i]
		a := iso.c[i] * pow[k.d] * e[k.l]
		x := float64(k.d)
		var y float64
		if k.l > 0 {
			l := float64(k.l)
			x -= l * pow[k.l]
			y = l * l * pow[k.l]
		}
		ad += a * x
		add += a * (x*(x-1) - y)
	}
	for i := range g.gauss {
		if iso.gauss[i] == 0 {
			continue
		}
		k := &g.gauss[i]
		u := delta - k.epsilon
		a := iso.gauss[i] * pow[k.d] * math.Exp(-k.phi*u*u)
		x := float64(k.d) - 2*k.phi*delta*u
		ad += a * x
		add += a * (x*x - float64(k.d) - 2*k.phi*delta*delta)
	}
	return ad, add
}

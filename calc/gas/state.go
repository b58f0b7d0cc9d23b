package gas

import (
	"math"

	"example.org/chargehand/calc/quantity"
)

// State is the gas at one temperature and density. Reference states of U, H and S are those of the source's equation.
type State struct {
	T          quantity.Temperature
	Rho        Density
	P          quantity.Pressure
	Z          float64 // compressibility factor p/(rho R T)
	U, H       float64 // J/kg
	S, Cv, Cp  float64 // J/(kg K)
	W          float64 // speed of sound, m/s
	DpDT       float64 // (dp/dT) at constant density, Pa/K
	DpDRho     float64 // (dp/drho) at constant temperature, Pa m3/kg
	Isentropic float64 // exponent (rho/p)(dp/drho) at constant entropy
}

// State returns all properties at a temperature and density. Valid as Pressure.
func (g *Model) State(t quantity.Temperature, rho Density) (State, error) {
	if err := checkTemperature(t); err != nil {
		return State{}, err
	}
	s := g.state(float64(t), float64(rho))
	if err := checkPressure(s.P); err != nil {
		return State{}, err
	}
	return s, nil
}

func (g *Model) state(t, rho float64) State {
	tau, delta := g.tRed/t, rho/(g.m*g.rhoRed)
	i, r := g.ideal(tau, delta), g.residual(tau, delta)
	rs := g.r / g.m
	// Names of table 3 of Span et al. (2000): q is 1 + delta ar_d, and so on.
	q := 1 + r.d
	b := 1 + 2*r.d + r.dd
	c := 1 + r.d - r.dt
	cv := -(i.tt + r.tt)
	s := State{
		T: quantity.Temperature(t), Rho: Density(rho), Z: q,
		P:      quantity.Pressure(rho * rs * t * q),
		U:      rs * t * (i.t + r.t),
		S:      rs * (i.t + r.t - i.a - r.a),
		Cv:     rs * cv,
		Cp:     rs * (cv + c*c/b),
		W:      math.Sqrt(rs * t * (b + c*c/cv)),
		DpDT:   rho * rs * c,
		DpDRho: rs * t * b,
	}
	s.H = s.U + float64(s.P)/rho
	s.Isentropic = s.W * s.W * rho / float64(s.P)
	return s
}

// parts are a part of the Helmholtz energy and its logarithmic derivatives: d is delta a_d, dd delta^2 a_dd, t tau a_t, tt
// tau^2 a_tt and dt delta tau a_dt.
type parts struct{ a, d, dd, t, tt, dt float64 }

func (g *Model) ideal(tau, delta float64) parts {
	p := parts{a: math.Log(delta) + g.logTau*math.Log(tau), d: 1, dd: -1, t: g.logTau, tt: -g.logTau}
	for _, k := range g.idealPowers {
		v := k.n * math.Pow(tau, k.t)
		p.a += v
		p.t += k.t * v
		p.tt += k.t * (k.t - 1) * v
	}
	for _, k := range g.idealExps {
		x := k.theta * tau
		if k.plus {
			e := math.Exp(-x) // ln(2/3 + e^x) = x + ln(1 + 2/3 e^-x), which does not overflow
			f := 1 / (1 + 2*e/3)
			p.a += k.n * (x + math.Log1p(2*e/3))
			p.t += k.n * x * f
			p.tt += k.n * x * x * f * (1 - f)
			continue
		}
		e := math.Exp(-x)
		f := e / -math.Expm1(-x)
		p.a += k.n * math.Log(-math.Expm1(-x))
		p.t += k.n * x * f
		p.tt -= k.n * x * x * f * (1 + f)
	}
	return p
}

func (g *Model) residual(tau, delta float64) parts {
	var p parts
	add := func(v, x, xx, y, yy float64) {
		p.a += v
		p.d += v * x
		p.dd += v * xx
		p.t += v * y
		p.tt += v * yy
		p.dt += v * x * y
	}
	for _, k := range g.terms {
		d := float64(k.d)
		v := k.n * math.Pow(delta, d) * math.Pow(tau, k.t)
		x, lift := d, 0.0
		if k.l > 0 {
			l := float64(k.l)
			dl := math.Pow(delta, l)
			v *= math.Exp(-dl)
			x, lift = d-l*dl, l*l*dl
		}
		add(v, x, x*(x-1)-lift, k.t, k.t*(k.t-1))
	}
	for _, k := range g.gauss {
		d := float64(k.d)
		u, w := delta-k.epsilon, tau-k.gamma
		v := k.n * math.Pow(delta, d) * math.Pow(tau, k.t) * math.Exp(-k.phi*u*u-k.beta*w*w)
		x, y := d-2*k.phi*delta*u, k.t-2*k.beta*tau*w
		add(v, x, x*x-d-2*k.phi*delta*delta, y, y*y-k.t-2*k.beta*tau*tau)
	}
	return p
}

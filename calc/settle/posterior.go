package settle

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"time"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"example.org/chargehand/calc/quantity"
)

// Amplitudes of the two stages as parts of the pressure: 6 % +/- 6 % and 2.5 % +/- 2 %, standard deviations. So gas seldom starts
// more than 40 K above the shell, and the shell 15 K above the air; neither starts far below it, since charging heats (common
// practice, no source).
const (
	fastPart, fastPartU = 0.06, 0.06
	slowPart, slowPartU = 0.025, 0.02
)

// The grid of constants: so many steps over what is known of them, to 3.2 standard deviations either way, and again over what
// the readings leave of that.
const (
	fastSteps  = 13
	slowSteps  = 25
	reach      = 3.2
	mostPasses = 20
	negligible = 1e-7 // weight of a node, as a part of all
)

// Unknowns of the linear part.
const (
	settled = iota // in units of the problem, from the last reading
	fastAmplitude
	slowAmplitude
	airOffset // K, of the air from a shell at rest
	unknowns
)

// problem is the linear part, ready for any pair of constants.
type problem struct {
	rs   []Reading
	o    Options
	unit float64 // Pa: the mean uncertainty
	base float64 // Pa: the last reading
}

func newProblem(rs []Reading, o Options) *problem {
	p := &problem{rs: rs, o: o, base: float64(rs[len(rs)-1].Pressure)}
	for _, r := range rs {
		p.unit += float64(r.U) / float64(len(rs))
	}
	return p
}

// node is a pair of constants with its weight and the normal posterior of the linear part.
type node struct {
	zFast      float64 // where it lies in what is known
	zSlow      float64
	fast, slow float64 // logarithms of seconds
	perFast    float64 // 1/s
	perSlow    float64
	weight     float64
	chi2       float64
	mean       [unknowns]float64
	cov        [unknowns][unknowns]float64
}

// span is a range of one constant, in standard deviations of what is known of its logarithm.
type span struct{ low, high float64 }

func (s span) at(i, steps int) float64 { return s.low + (s.high-s.low)*float64(i)/float64(steps-1) }

// around returns the span of what was seen and a step more either way, within s.
func (s span) around(low, high float64, steps int) span {
	step := (s.high - s.low) / float64(steps-1)
	return span{max(s.low, low-step), min(s.high, high+step)}
}

// solve returns the nodes that weigh anything, weights summing to 1, with the stated uncertainties times scale. The grid closes in
// until it no longer narrows by much, so that its steps are finer than what the readings can tell.
func (p *problem) solve(scale float64) ([]node, error) {
	fast, slow := span{-reach, reach}, span{-reach, reach}
	for pass := 0; ; pass++ {
		nodes, err := p.grid(scale, fast, slow)
		if err != nil {
			return nil, err
		}
		seenFast, seenSlow := span{reach, -reach}, span{reach, -reach}
		for _, n := range nodes {
			seenFast = span{min(seenFast.low, n.zFast), max(seenFast.high, n.zFast)}
			seenSlow = span{min(seenSlow.low, n.zSlow), max(seenSlow.high, n.zSlow)}
		}
		nextFast, nextSlow := fast.around(seenFast.low, seenFast.high, fastSteps), slow.around(seenSlow.low, seenSlow.high, slowSteps)
		area := func(f, s span) float64 { return (f.high - f.low) * (s.high - s.low) }
		if pass == mostPasses || area(nextFast, nextSlow) > 0.6*area(fast, slow) {
			return nodes, nil
		}
		fast, slow = nextFast, nextSlow
	}
}

// grid is one pass of solve.
func (p *problem) grid(scale float64, fastSpan, slowSpan span) ([]node, error) {
	var nodes []node
	best := math.Inf(-1)
	var chol mat.Cholesky
	var b mat.VecDense
	var cov mat.SymDense
	info, rhs := mat.NewSymDense(unknowns, nil), mat.NewVecDense(unknowns, nil)
	fast, slow := p.o.Known.Fast, p.o.Known.Slow
	for i := range fastSteps {
		for j := range slowSteps {
			n := node{zFast: fastSpan.at(i, fastSteps), zSlow: slowSpan.at(j, slowSteps)}
			n.fast, n.slow = math.Log(fast.Median.Seconds())+n.zFast*fast.spread(), math.Log(slow.Median.Seconds())+n.zSlow*slow.spread()
			if n.slow < n.fast+math.Log(2) { // the slow stage is the slower one
				continue
			}
			n.perFast, n.perSlow = math.Exp(-n.fast), math.Exp(-n.slow)
			yy := p.normal(info, rhs, n.perFast, n.perSlow, scale)
			if !chol.Factorize(info) {
				return nil, fmt.Errorf("%w: the readings cannot be weighed", ErrTooShort)
			}
			if err := errors.Join(chol.SolveVecTo(&b, rhs), chol.InverseTo(&cov)); err != nil {
				return nil, fmt.Errorf("%w: %v", ErrTooShort, err)
			}
			n.chi2 = max(0, yy-mat.Dot(&b, rhs))
			// The marginal likelihood: the linear unknowns are integrated out.
			n.weight = -(n.chi2 + chol.LogDet() + n.zFast*n.zFast + n.zSlow*n.zSlow) / 2
			best = max(best, n.weight)
			for r := range unknowns {
				n.mean[r] = b.AtVec(r)
				for c := range unknowns {
					n.cov[r][c] = cov.At(r, c)
				}
			}
			nodes = append(nodes, n)
		}
	}
	if len(nodes) == 0 {
		return nil, fmt.Errorf("a slow constant of %s is not slower than a fast one of %s", slow.Median, fast.Median)
	}
	sum := 0.0
	for i := range nodes {
		nodes[i].weight = math.Exp(nodes[i].weight - best)
		sum += nodes[i].weight
	}
	nodes = slices.DeleteFunc(nodes, func(n node) bool { return n.weight < negligible*sum })
	for i := range nodes {
		nodes[i].weight /= sum
	}
	return nodes, nil
}

// normal fills the normal equations for a pair of constants and returns the weighted sum of squares of the data.
func (p *problem) normal(info *mat.SymDense, rhs *mat.VecDense, perFast, perSlow, scale float64) (yy float64) {
	var a [unknowns][unknowns]float64
	var b [unknowns]float64
	add := func(row [unknowns]float64, y, u float64) {
		w := 1 / (u * u)
		for i := range unknowns {
			b[i] += w * row[i] * y
			for j := range i + 1 {
				a[i][j] += w * row[i] * row[j]
			}
		}
		yy += w * y * y
	}
	amplitude := p.base / p.unit
	add([unknowns]float64{fastAmplitude: 1}, fastPart*amplitude, fastPartU*amplitude)
	add([unknowns]float64{slowAmplitude: 1}, slowPart*amplitude, slowPartU*amplitude)
	air := p.o.Air
	offset := float64(air.U)
	if offset == 0 {
		offset = 1 // no shell was read, and the offset stands alone
	}
	add([unknowns]float64{airOffset: 1}, 0, offset)
	for _, r := range p.rs {
		t := r.After.Seconds()
		e := math.Exp(-t * perSlow)
		add([unknowns]float64{1, math.Exp(-t * perFast), e, 0}, (float64(r.Pressure)-p.base)/p.unit, scale*float64(r.U)/p.unit)
		if r.Shell != 0 {
			add([unknowns]float64{slowAmplitude: p.unit / air.PerKelvin * e, airOffset: 1}, float64(r.Shell-air.Temperature), scale*float64(air.ProbeU))
		}
	}
	for i := range unknowns {
		rhs.SetVec(i, b[i])
		for j := range i + 1 {
			info.SetSym(i, j, a[i][j])
		}
	}
	return yy
}

// widened returns the Birge ratio when the best node's scatter is more than chance explains in 1 of 20, else 1.
func (p *problem) widened(nodes []node) float64 {
	least, free := math.Inf(1), len(p.rs)
	for _, n := range nodes {
		least = min(least, n.chi2)
	}
	for _, r := range p.rs {
		if r.Shell != 0 {
			free++
		}
	}
	free = max(1, free-2) // the settled pressure, and what the rest takes on the whole
	if least <= (distuv.ChiSquared{K: float64(free)}).Quantile(0.95) {
		return 1
	}
	return math.Sqrt(least / float64(free))
}

// bisect finds where a rising function reaches zero.
func bisect(lo, hi float64, below func(float64) bool) float64 {
	for range 32 {
		if mid := (lo + hi) / 2; below(mid) {
			lo = mid
		} else {
			hi = mid
		}
	}
	return (lo + hi) / 2
}

func phi(z float64) float64 { return distuv.UnitNormal.CDF(z) }

// settledQuantile returns that of the mixture, in units of the problem.
func settledQuantile(nodes []node, q float64) float64 {
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, n := range nodes {
		s := 10 * math.Sqrt(n.cov[settled][settled])
		lo, hi = min(lo, n.mean[settled]-s), max(hi, n.mean[settled]+s)
	}
	return bisect(lo, hi, func(x float64) bool {
		below := 0.0
		for i := range nodes {
			n := &nodes[i]
			below += n.weight * phi((x-n.mean[settled])/math.Sqrt(n.cov[settled][settled]))
		}
		return below < q
	})
}

func settledSpread(nodes []node) float64 {
	m, s := 0.0, 0.0
	for _, n := range nodes {
		m += n.weight * n.mean[settled]
	}
	for _, n := range nodes {
		d := n.mean[settled] - m
		s += n.weight * (n.cov[settled][settled] + d*d)
	}
	return math.Sqrt(s)
}

// learnt returns the constants' posterior as log-normals of the same mean and spread. A unit's surroundings change from day to
// day, so none is taken as known to better than a factor of 1.2 the next time (common practice, no source).
func learnt(nodes []node, known Constants) (c Constants, fast, slow bool) {
	of := func(value func(node) float64, was Constant) (Constant, bool) {
		m, s := 0.0, 0.0
		for _, n := range nodes {
			m += n.weight * value(n)
		}
		for _, n := range nodes {
			s += n.weight * (value(n) - m) * (value(n) - m)
		}
		s = math.Sqrt(s)
		if s > 0.7*was.spread() {
			return was, false
		}
		return Constant{time.Duration(math.Exp(m) * 1e9).Round(time.Millisecond), max(1.2, math.Exp(1.96*s))}, true
	}
	c.Fast, fast = of(func(n node) float64 { return n.fast }, known.Fast)
	c.Slow, slow = of(func(n node) float64 { return n.slow }, known.Slow)
	return c, fast, slow
}

// within is the probability that the pressure lies no farther than d, in units of the problem, from where it settles.
func (f *Fit) within(after time.Duration, d, unit float64) float64 {
	p, t := 0.0, after.Seconds()
	for i := range f.nodes {
		n := &f.nodes[i]
		a, b := math.Exp(-t*n.perFast), math.Exp(-t*n.perSlow)
		m := a*n.mean[fastAmplitude] + b*n.mean[slowAmplitude]
		v := a*a*n.cov[fastAmplitude][fastAmplitude] + 2*a*b*n.cov[fastAmplitude][slowAmplitude] + b*b*n.cov[slowAmplitude][slowAmplitude]
		s := math.Sqrt(max(v, 1e-300))
		p += n.weight * (phi((d/unit-m)/s) - phi((-d/unit-m)/s))
	}
	return p
}

// Within is the probability that at a time after the charge the pressure lies within d of where it settles.
func (f *Fit) Within(after time.Duration, d quantity.GaugePressure) (float64, error) {
	if after < 0 || !(d > 0 && d <= mostPressure) {
		return 0, fmt.Errorf("a retest after %s within %v Pa is none", after, float64(d))
	}
	return f.within(after, float64(d), f.unit), nil
}

// Retest is whether a retest means something.
type Retest struct {
	TooEarly bool
	Chance   float64       // that the pressure is then within what was asked of where it settles
	Earliest time.Duration // after the charge: from then on it is, at 95 %
	Likely   time.Duration // and at 50 %
}

// Retest judges a retest proposed for a time after the charge, when the pressure is to be within d of where it settles.
func (f *Fit) Retest(after time.Duration, d quantity.GaugePressure) (Retest, error) {
	chance, err := f.Within(after, d)
	if err != nil {
		return Retest{}, err
	}
	r := Retest{Chance: chance}
	for want, to := range map[float64]*time.Duration{0.95: &r.Earliest, 0.5: &r.Likely} {
		if *to, err = f.when(want, d); err != nil {
			return Retest{}, err
		}
	}
	r.TooEarly = after < r.Earliest
	return r, nil
}

// when returns the last time at which the chance of being within d is below want: two stages of unlike sign can cross on the way.
func (f *Fit) when(want float64, d quantity.GaugePressure) (time.Duration, error) {
	const steps = 36
	at := func(i int) time.Duration { // from a second to a week
		return time.Duration(math.Pow(mostAfter.Seconds(), float64(i)/steps) * 1e9)
	}
	if f.within(mostAfter, float64(d), f.unit) < want {
		return 0, fmt.Errorf("%w to within %v Pa in a week", ErrTooShort, float64(d))
	}
	for i := steps - 1; i >= 0; i-- {
		if f.within(at(i), float64(d), f.unit) < want {
			s := bisect(at(i).Seconds(), at(i+1).Seconds(), func(s float64) bool {
				return f.within(time.Duration(s*1e9), float64(d), f.unit) < want
			})
			return time.Duration(s * 1e9).Round(time.Second), nil
		}
	}
	return 0, nil
}

// At returns the pressure that the readings let expect at a time after the charge.
func (f *Fit) At(after time.Duration) quantity.GaugePressure {
	p, t := 0.0, after.Seconds()
	for i := range f.nodes {
		n := &f.nodes[i]
		p += n.weight * (n.mean[settled] + math.Exp(-t*n.perFast)*n.mean[fastAmplitude] + math.Exp(-t*n.perSlow)*n.mean[slowAmplitude])
	}
	return f.reading + quantity.GaugePressure(f.unit*p)
}

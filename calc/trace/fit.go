package trace

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/floats"
	"gonum.org/v1/gonum/stat/distuv"

	"example.org/chargehand/calc/quantity"
)

// The grid over the unknowns: so many steps over what is possible, and again over what the readings leave of that.
const (
	pathSteps   = 25
	offsetSteps = 9
	reach       = 2.8    // standard deviations of the offset
	farBelow    = 40.0   // of cost: places of the break that need no look
	negligible  = 1e-6   // weight of a node, as a part of the largest
	usualCooled = 0.15   // standard deviation of Cooled for a slow bleed
	telling     = 3.84   // a fall of cost that chance gives once in twenty
	certain     = 10.8   // and once in a thousand
	places      = 5      // of the break between the two readings that hold it
	inside      = 0.95   // the interval
	odds        = 0.05   // for the scatter to count as more than stated
	unclear     = 2.0    // a difference of cost that tells two causes apart
	zeroSigmas  = 4.0    // a charge within so many standard uncertainties of zero is none
	smallest    = 2000.0 // Pa, of the offset: below it there is none
)

// friction is the standard deviation of what a piston holds back.
func (m *model) friction() float64 { return float64(m.o.Friction) / 1.96 }

// slack is -2 ln of the prior of an offset: the gauge's bias, and below the gas also friction.
func (m *model) slack(offset float64, rubs bool) float64 {
	u := float64(m.o.Bias)
	if rubs && offset < 0 {
		u = math.Hypot(u, m.friction())
	}
	if offset == 0 {
		return 0
	}
	return offset * offset / max(u*u, 1)
}

// penalty is -2 ln of the prior of a node.
func (m *model) penalty(n node) float64 {
	var c float64
	if !m.fast && !m.rubbing { // a trace that rubs may hide a cooled one
		c = n.cooled * n.cooled / (usualCooled * usualCooled)
	}
	if m.rubbing && n.offset < 0 {
		return c // the readings themselves say how much
	}
	return c + m.slack(n.offset, true)
}

func (m *model) total(n node) float64 { return n.cost + m.penalty(n) }

// cells are the middles of n cells over a range, closer together towards 0 by the square, and ln of their widths; a range of no
// width is one cell.
func cells(r [2]float64, n int, squared bool) (at, ln []float64) {
	if r[1] <= r[0] {
		return r[:1], []float64{0}
	}
	at = floats.Span(make([]float64, n), r[0], r[1])
	if squared {
		floats.Span(at, math.Sqrt(r[0]), math.Sqrt(r[1]))
		floats.Mul(at, at)
	}
	for i := range at {
		ln = append(ln, math.Log((at[min(i+1, n-1)]-at[max(i-1, 0)])/2))
	}
	return at, ln
}

// later is ln of the volume before the bleed when the gauge shows so much above the gas, against that at no offset.
func (m *model) later(offset float64) float64 {
	first := float64(m.ps[0].Pressure) + float64(m.o.Ambient)
	v, _, ok := m.still.volume(first - offset)
	if !ok {
		return 0
	}
	return math.Log(v) - m.expand.start
}

// grid are all nodes for a range of paths and of offsets.
func (m *model) grid(cooled, offset [2]float64, ks []int) ([]node, error) {
	var all []node
	cs, wide := cells(cooled, pathSteps, true)
	os, tall := cells(offset, offsetSteps, false)
	for i, c := range cs {
		p, err := m.expand.path(c)
		if err != nil {
			return nil, err
		}
		for j, o := range os {
			p, err := p.from(m.later(o))
			if err != nil {
				return nil, err
			}
			for _, n := range m.nodes(p, o, ks) {
				n.volume += wide[i] + tall[j]
				all = append(all, n)
			}
		}
	}
	return all, nil
}

func (m *model) offsets() [2]float64 {
	low, high := -reach*math.Hypot(float64(m.o.Bias), m.friction()), reach*float64(m.o.Bias)
	if high-low < smallest {
		return [2]float64{}
	}
	return [2]float64{low, high}
}

// settle finds the places of the break that matter, whether the scatter is more than stated, and what bends the fall; it returns
// the likeliest node.
func (m *model) settle() (node, error) {
	every := make([]int, 0, len(m.ps))
	for k := 2; k <= len(m.ps); k++ {
		every = append(every, k)
	}
	var coarse []node
	for range 2 { // once more with the scatter that was found
		var rough []node
		for _, c := range []float64{0, 0.02, 0.05, 0.1, 0.2, 0.35, 0.6, 1} {
			p, err := m.expand.path(c)
			if err != nil {
				return node{}, err
			}
			rough = append(rough, m.nodes(p, 0, every)...)
		}
		if len(rough) == 0 {
			return node{}, &RefusedError{ErrNoBreak, fmt.Sprintf("the pressure does not fall as a gas lets it, from %s on", m.o.In.Pressure(m.ps[0].Pressure)), tryAgain}
		}
		least := slices.MinFunc(rough, byCost).cost
		m.ks = nil
		for _, n := range rough {
			if n.cost < least+farBelow && !slices.Contains(m.ks, n.above) {
				m.ks = append(m.ks, n.above)
			}
		}
		slices.Sort(m.ks)
		var err error
		if coarse, err = m.grid([2]float64{0, 1}, m.offsets(), m.ks); err != nil {
			return node{}, err
		}
		best := slices.MinFunc(coarse, byCost)
		free := float64(max(best.above-2, 1))
		spread := math.Sqrt(best.chi2/free) * m.sigma / float64(m.o.U)
		m.chance = math.Sqrt(best.chi2/float64(best.above)) * m.sigma / float64(m.o.U)
		if m.sigma > float64(m.o.U) || best.chi2 <= (distuv.ChiSquared{K: free}).Quantile(1-odds) {
			break
		}
		m.sigma = spread * float64(m.o.U)
	}
	m.bent(coarse)
	return slices.MinFunc(coarse, func(a, b node) int { return cmp.Compare(m.total(a), m.total(b)) }), nil
}

func byCost(a, b node) int { return cmp.Compare(a.cost, b.cost) }

// bent tells whether the fall is bent more than the isotherm allows, and by what.
func (m *model) bent(ns []node) {
	slow, cold, rubbed := math.Inf(1), math.Inf(1), math.Inf(1)
	for _, n := range ns {
		c := n.cost + m.slack(n.offset, false)
		cold = min(cold, c)
		if n.cooled == 0 {
			slow = min(slow, c)
			if m.o.Friction > 0 {
				rubbed = min(rubbed, n.cost)
			}
		}
	}
	if m.gain = slow - min(cold, rubbed); m.gain < telling {
		return
	}
	m.fast, m.rubbing = cold < rubbed+unclear, rubbed < cold+unclear
}

const tryAgain = "Bleed again, slowly and to zero, and read at every stroke; or read the charge on the gas side"

// refuse says why the likeliest node is no break.
func (m *model) refuse(n node) error {
	in, last := m.o.In, m.ps[len(m.ps)-1]
	below := m.ps[n.above:]
	shown := m.shown(n, m.x[n.above-1])
	no := func(kind error, todo, format string, args ...any) error {
		return &RefusedError{kind, fmt.Sprintf(format, args...), todo}
	}
	smooth := func() error {
		return no(ErrNoBreak, "Read the charge on the gas side: there may be none", "it goes smoothly from %s to %s", in.Pressure(m.ps[0].Pressure), in.Pressure(last.Pressure))
	}
	switch {
	case float64(last.Pressure) > collapsed*shown || len(below) == 0 && float64(last.Pressure) > zeroSigmas*m.sigma:
		return no(ErrNoBreak, tryAgain, "it never collapses, and the last reading is %s", in.Pressure(last.Pressure))
	case len(below) == 0:
		return smooth()
	case n.above >= leastAbove && (shown < zeroSigmas*m.sigma || !m.sudden(n, below)):
		return smooth()
	case n.above < leastAbove:
		return no(ErrFew, tryAgain, "%d before the break, and it takes %d", n.above, leastAbove)
	case len(below) < leastBelow:
		return no(ErrFew, tryAgain, "%d after the break, and it takes %d", len(below), leastBelow)
	case m.sigma > scatters*float64(m.o.U):
		return no(ErrScatter, "Look at the odd readings, or bleed again with a steady hand", "%s about the fitted fall, where %s was to be expected",
			in.Pressure(quantity.GaugePressure(m.sigma)), in.Pressure(m.o.U))
	}
	return nil
}

// sudden tells whether the fall from the last reading before the break to the first that has collapsed is much steeper than the
// gas's own.
func (m *model) sudden(n node, below []Pair) bool {
	from := m.x[n.above-1]
	v, _ := n.line.at(from)
	_, slope := n.path.pressure(v)
	shown := m.shown(n, from)
	for j, p := range below {
		if float64(p.Pressure) <= collapsed*shown {
			return (shown-float64(p.Pressure))/(m.x[n.above+j]-from) >= sudden*slope*n.line.b
		}
	}
	return false
}

// shown is what the gauge would show at x.
func (m *model) shown(n node, x float64) float64 {
	v, _ := n.line.at(x)
	p, _ := n.path.pressure(v)
	return p - float64(m.o.Ambient) + n.offset
}

// fit goes over the unknowns finely and gathers what the readings leave of the charge.
func (m *model) fit(best node) (*Fit, error) {
	var ks []int
	for _, k := range m.ks {
		if k >= leastAbove && k < len(m.ps) {
			ks = append(ks, k)
		}
	}
	cooled, offset := [2]float64{0, 1}, m.offsets()
	var ns []node
	for range 2 {
		var err error
		if ns, err = m.grid(cooled, offset, ks); err != nil {
			return nil, err
		}
		if ns = m.weighty(ns); len(ns) == 0 {
			return nil, &RefusedError{ErrNoBreak, "no place for one agrees with the readings", tryAgain}
		}
		cooled, offset = around(ns, cooled, pathSteps, func(n node) float64 { return n.cooled }), around(ns, offset, offsetSteps, func(n node) float64 { return n.offset })
	}
	best = slices.MinFunc(ns, func(a, b node) int { return cmp.Compare(m.total(a), m.total(b)) })
	q := m.charges(ns, m.weight)
	middle, low, high := q(0.5), q((1-inside)/2), q((1+inside)/2)
	if m.gain < certain && slices.ContainsFunc(ns, func(n node) bool { return n.cooled == 0 }) {
		slow := m.charges(ns, m.slow)
		low = min(low, slow((1-inside)/2)) // a slow bleed is not ruled out
		if !m.fast && !m.rubbing {         // and nothing speaks against it: the gas as read, with what else is possible above it
			middle, high = slow(0.5), max(high, slow((1+inside)/2))
		}
	}
	k := best.above
	mid := (m.x[k-1] + m.x[k]) / 2
	v, _ := best.line.at(mid)
	first, drawn := m.ps[0].Drawn, func(x float64) float64 { return m.ps[0].Drawn + x*m.scale }
	f := &Fit{Charge: middle, Low: low, High: high, Break: drawn(mid), From: m.ps[k-1].Drawn, To: m.ps[k].Drawn,
		Shown: quantity.GaugePressure(m.shown(best, mid)), Above: k, Below: len(m.ps) - k, GasVolume: v / best.line.b * m.scale,
		Needle: quantity.GaugePressure(m.shown(best, m.x[k-1])-m.shown(best, m.x[k])) / 2, Scatter: m.chance, Cooled: best.cooled, Fast: m.fast, Friction: m.rubbing}
	f.fall = func(x float64) quantity.GaugePressure {
		return quantity.GaugePressure(m.shown(best, (x-first)/m.scale))
	}
	return f, nil
}

// weight is ln of what a node counts for.
func (m *model) weight(n node) float64 { return n.volume - m.total(n)/2 }

// slow is the weight where the gas kept its temperature and nothing rubs.
func (m *model) slow(n node) float64 {
	if n.cooled > 0 {
		return math.Inf(-1)
	}
	return n.volume - (n.cost+m.slack(n.offset, false))/2
}

// weighty leaves out the nodes that do not count.
func (m *model) weighty(ns []node) []node {
	most := math.Inf(-1)
	for _, n := range ns {
		most = max(most, m.weight(n))
	}
	return slices.DeleteFunc(ns, func(n node) bool { return !(m.weight(n) > most+math.Log(negligible)) })
}

// around is the range that the nodes take, with some steps of the grid either way.
func around(ns []node, within [2]float64, steps int, of func(node) float64) [2]float64 {
	step := 2 * (within[1] - within[0]) / float64(steps-1)
	low, high := math.Inf(1), math.Inf(-1)
	for _, n := range ns {
		low, high = min(low, of(n)), max(high, of(n))
	}
	return [2]float64{max(within[0], low-step), min(within[1], high+step)}
}

// charges returns the quantiles of the charge: a mixture of normals, one for each node and place of the break.
func (m *model) charges(ns []node, weight func(node) float64) func(float64) quantity.GaugePressure {
	type part struct{ w, mean, sd float64 }
	var parts []part
	most, sum := weight(slices.MaxFunc(ns, func(a, b node) int { return cmp.Compare(weight(a), weight(b)) })), 0.0
	low, high := math.Inf(1), math.Inf(-1)
	for _, n := range ns {
		w := math.Exp(weight(n)-most) / places
		if w < negligible {
			continue
		}
		for i := range places {
			part := part{w: w}
			x := m.x[n.above-1] + (float64(i)+0.5)/places*(m.x[n.above]-m.x[n.above-1])
			v, variance := n.line.at(x)
			p, slope := m.still.pressure(v) // warm again
			part.mean, part.sd = p-float64(m.o.Ambient), max(slope*math.Sqrt(variance), 1)
			parts, sum = append(parts, part), sum+w
			low, high = min(low, part.mean-9*part.sd), max(high, part.mean+9*part.sd)
		}
	}
	return func(q float64) quantity.GaugePressure {
		low, high := low, high
		for range 40 {
			mid, below := (low+high)/2, 0.0
			for _, p := range parts {
				below += p.w * 0.5 * math.Erfc((p.mean-mid)/p.sd/math.Sqrt2)
			}
			if below < q*sum {
				low = mid
			} else {
				high = mid
			}
		}
		return quantity.GaugePressure((low + high) / 2)
	}
}

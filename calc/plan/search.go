package plan

import (
	"cmp"
	"math"
	"math/rand/v2"
	"slices"
)

// vessel is a volume in m3 and the density in it, kg/m3. At one temperature, level means equal density.
type vessel struct{ volume, rho float64 }

// search is the night's work in densities.
type search struct {
	units   []vessel
	targets []float64
	bottles []vessel
	top     float64 // highest target
	price   float64 // of a connection, kg
}

// visit serves one unit from the bottles whose bit in avoid is not set, the poorest first.
type visit struct {
	unit  int
	avoid uint32
}

// score is what is better, from the first member to the last; masses in steps of 10 g, so that no hose is moved for less.
type score struct {
	completed   int
	worth, left int64 // worth is the usable gas less the price of the connections
	connects    int
}

func (a score) compare(b score) int {
	return cmp.Or(cmp.Compare(a.completed, b.completed), cmp.Compare(a.worth, b.worth), cmp.Compare(a.left, b.left), cmp.Compare(b.connects, a.connects))
}

// outcome is a plan: the visits that complete their units.
type outcome struct {
	visits []visit
	score  score
}

func steps(kg float64) int64 { return int64(math.Round(kg * 100)) }

func (s *search) usable(bottles []vessel) float64 {
	sum := 0.0
	for _, b := range bottles {
		sum += b.volume * max(0, b.rho-s.top)
	}
	return sum
}

func (s *search) score(bottles []vessel, completed, connects int) score {
	left := 0.0
	for _, b := range bottles {
		left += b.volume * b.rho
	}
	return score{completed, steps(s.usable(bottles) - s.price*float64(connects)), steps(left), connects}
}

// serve draws from bottles, which it changes with unit, and tells each of every draw with the unit's density after it. It returns
// the number of connections, and whether the unit is on target.
func (s *search) serve(bottles []vessel, v visit, each func(bottle int, mass, level float64), unit *vessel) (int, bool) {
	target, connects, used := s.targets[v.unit], 0, v.avoid
	for unit.rho < target {
		poorest := -1
		for i, b := range bottles {
			if used>>i&1 == 0 && b.rho > unit.rho && (poorest < 0 || b.rho < bottles[poorest].rho) {
				poorest = i
			}
		}
		if poorest < 0 {
			return connects, false
		}
		b := &bottles[poorest]
		used |= 1 << poorest
		before := unit.rho
		level := (b.rho*b.volume + before*unit.volume) / (b.volume + unit.volume)
		if level >= target {
			unit.rho = target
			b.rho = max(b.rho-(target-before)*unit.volume/b.volume, target)
		} else {
			unit.rho, b.rho = level, level
		}
		connects++
		if each != nil {
			each(poorest, (unit.rho-before)*unit.volume, unit.rho)
		}
	}
	return connects, true
}

// exactNodes is how many draws the full search may try before the step-by-step one takes over.
const exactNodes = 2_000_000

func (s *search) solve() (outcome, bool) {
	best := s.improve()
	if factorialAbove(len(s.units), exactNodes) {
		return s.tidy(best), false
	}
	e := exact{search: s, best: best, nodes: exactNodes, most: s.completedAtMost(), done: make([]bool, len(s.units))}
	e.orders(slices.Clone(s.bottles), 0, 0)
	return s.tidy(e.best), e.nodes > 0
}

// tidy keeps to the order of the input where nothing is lost by it, saves connections one at a time, and leaves out the visits
// that complete nothing.
func (s *search) tidy(o outcome) outcome {
	o.visits = s.completing(o.visits)
	listed := make([]bool, len(s.units))
	for _, v := range o.visits {
		listed[v.unit] = true
	}
	for u, in := range listed {
		if !in {
			o.visits = append(o.visits, visit{unit: u})
		}
	}
	scratch, trial := make([]vessel, len(s.bottles)), make([]vessel, len(s.bottles))
	o.score, _ = s.play(o.visits, scratch, trial)
	gain := func() int { // of the changed visits; what is no loss stays
		now, _ := s.play(o.visits, scratch, trial)
		by := now.compare(o.score)
		if by > 0 {
			o.score = now
		}
		return by
	}
	for range o.visits {
		changed := false
		for i := range o.visits {
			v := &o.visits[i]
			for b := range s.bottles {
				if was := v.avoid; was>>b&1 == 0 {
					if v.avoid |= 1 << b; gain() > 0 {
						changed = true
					} else {
						v.avoid = was
					}
				}
			}
			if i == 0 || o.visits[i-1].unit < v.unit {
				continue
			}
			w := &o.visits[i-1]
			if *v, *w = *w, *v; gain() >= 0 {
				changed = true
			} else {
				*v, *w = *w, *v
			}
		}
		if !changed {
			break
		}
	}
	o.visits = s.completing(o.visits)
	return o
}

// factorialAbove tells whether n! exceeds a limit: then the orders alone are too many.
func factorialAbove(n, limit int) bool {
	f := 1
	for i := 2; i <= n; i++ {
		if f *= i; f > limit {
			return true
		}
	}
	return false
}

// exact tries all orders, and for each visit all choices of bottles, leaving out what cannot beat the best: along a branch worth and
// left only fall and connections only grow.
type exact struct {
	*search
	best   outcome
	nodes  int
	most   int // no plan completes more
	done   []bool
	visits []visit
}

func (e *exact) orders(bottles []vessel, completed, connects int) {
	here := e.score(bottles, completed, connects)
	if here.compare(e.best.score) > 0 {
		e.best = outcome{slices.Clone(e.visits), here}
	}
	here.completed = e.most
	if completed == e.most || here.compare(e.best.score) <= 0 {
		return
	}
	for u, done := range e.done {
		if done {
			continue
		}
		e.done[u] = true
		e.choices(bottles, visit{unit: u}, e.units[u], 0, completed, connects)
		e.done[u] = false
	}
}

// choices goes on with a visit that stands at unit.rho: it takes the poorest bottle that is neither used nor avoided, or avoids it.
func (e *exact) choices(bottles []vessel, v visit, unit vessel, used uint32, completed, connects int) {
	if e.nodes--; e.nodes <= 0 {
		return
	}
	target := e.targets[v.unit]
	if unit.rho >= target {
		e.visits = append(e.visits, v)
		e.orders(bottles, completed+1, connects)
		e.visits = e.visits[:len(e.visits)-1]
		return
	}
	poorest := -1
	for i, b := range bottles {
		if (used|v.avoid)>>i&1 == 0 && b.rho > unit.rho && (poorest < 0 || b.rho < bottles[poorest].rho) {
			poorest = i
		}
	}
	if poorest < 0 {
		return
	}
	after, next := slices.Clone(bottles), unit
	e.serve(after, visit{v.unit, ^(uint32(1) << poorest)}, nil, &next)
	e.choices(after, v, next, used|1<<poorest, completed, connects+1)
	v.avoid |= 1 << poorest
	e.choices(bottles, v, unit, used, completed, connects)
}

// play runs through visits in order; those that cannot complete their unit change nothing.
func (s *search) play(visits []visit, scratch, trial []vessel) (score, []vessel) {
	bottles := append(scratch[:0], s.bottles...)
	completed, connects := 0, 0
	for _, v := range visits {
		before := append(trial[:0], bottles...)
		unit := s.units[v.unit]
		n, ok := s.serve(bottles, v, nil, &unit)
		if !ok {
			copy(bottles, before)
			continue
		}
		completed++
		connects += n
	}
	return s.score(bottles, completed, connects), bottles
}

// Trials of the step-by-step search: ten times as many gain next to nothing on invented nights of 40 units and 8 bottles, and these
// take well under a second.
const (
	firstTrials = 2_000  // from each starting order
	lastTrials  = 15_000 // twice
	finalists   = 4      // of the starting orders go on
)

// improve starts from the orders that suggest themselves, each with and without a single bottle for a unit where one does, and changes
// one thing at a time.
func (s *search) improve() outcome {
	need := func(u int) float64 { return (s.targets[u] - s.units[u].rho) * s.units[u].volume }
	keys := []func(u int) float64{
		func(int) float64 { return 0 }, need, func(u int) float64 { return -need(u) },
		func(u int) float64 { return s.targets[u] }, func(u int) float64 { return -s.targets[u] },
		func(u int) float64 { return s.units[u].rho }, func(u int) float64 { return -s.units[u].rho },
		func(u int) float64 { return s.targets[u] - s.units[u].rho },
	}
	random := rand.New(rand.NewPCG(1, 2)) // always the same, so that the same input gives the same plan
	var starts []outcome
	for i := range 2 * len(keys) {
		visits, key := make([]visit, len(s.units)), keys[i/2]
		for u := range visits {
			visits[u].unit = u
		}
		slices.SortStableFunc(visits, func(a, b visit) int { return cmp.Compare(key(a.unit), key(b.unit)) })
		if i%2 == 1 {
			s.singly(visits)
		}
		starts = append(starts, s.climb(visits, firstTrials, random, s.work))
	}
	best := func(a, b outcome) int { return b.score.compare(a.score) }
	slices.SortStableFunc(starts, best)
	for i := range finalists {
		concentrated := s.climb(starts[i].visits, lastTrials, random, s.work)
		starts[i] = s.climb(concentrated.visits, lastTrials, random, func([]vessel) float64 { return 0 })
	}
	slices.SortStableFunc(starts[:finalists], best)
	return starts[0]
}

// work is what the bottles' gas, were it ideal, could do in expanding at one temperature, up to a factor and with 1 kg/m3 as zero: for
// one mass it is the more, the more of it stands in rich bottles.
func (s *search) work(bottles []vessel) float64 {
	sum := 0.0
	for _, b := range bottles {
		sum += b.volume * b.rho * math.Log(b.rho)
	}
	return sum
}

// climb changes a unit's place, two units' places, or a bottle that one of them avoids, and keeps what is no worse: by the units
// completed, then by a guide, then by the whole score.
func (s *search) climb(visits []visit, trials int, random *rand.Rand, guide func(bottles []vessel) float64) outcome {
	scratch, trial := make([]vessel, len(s.bottles)), make([]vessel, len(s.bottles))
	current, end := s.play(visits, scratch, trial)
	guided := guide(end)
	candidate := make([]visit, len(visits))
	for range trials {
		if len(visits) == 0 {
			break
		}
		copy(candidate, visits)
		s.change(candidate, random)
		next, end := s.play(candidate, scratch, trial)
		by := cmp.Compare(next.completed, current.completed)
		if by < 0 {
			continue
		}
		now := guide(end)
		if cmp.Or(by, cmp.Compare(now, guided), next.compare(current)) >= 0 {
			current, guided = next, now
			visits, candidate = candidate, visits
		}
	}
	return outcome{visits, current}
}

// singly lets each visit use no bottle but the poorest that can do it alone, where there is one.
func (s *search) singly(visits []visit) {
	bottles := slices.Clone(s.bottles)
	for i := range visits {
		v := &visits[i]
		target, alone := s.targets[v.unit], -1
		unit := s.units[v.unit]
		for b, from := range bottles {
			level := (from.rho*from.volume + unit.rho*unit.volume) / (from.volume + unit.volume)
			if level >= target && (alone < 0 || from.rho < bottles[alone].rho) {
				alone = b
			}
		}
		if alone >= 0 {
			v.avoid = ^(uint32(1) << alone)
		}
		trial := slices.Clone(bottles)
		if _, ok := s.serve(trial, *v, nil, &unit); ok {
			bottles = trial
		}
	}
}

func (s *search) change(visits []visit, random *rand.Rand) {
	i, j := random.IntN(len(visits)), random.IntN(len(visits))
	switch random.IntN(3) {
	case 0:
		visits[i], visits[j] = visits[j], visits[i]
	case 1:
		v := visits[i]
		if i < j {
			copy(visits[i:j], visits[i+1:j+1])
		} else {
			copy(visits[j+1:i+1], visits[j:i])
		}
		visits[j] = v
	case 2:
		visits[i].avoid ^= 1 << random.IntN(len(s.bottles))
	}
}

// completing leaves out the visits that complete nothing.
func (s *search) completing(visits []visit) []visit {
	bottles := slices.Clone(s.bottles)
	var out []visit
	for _, v := range visits {
		trial, unit := slices.Clone(bottles), s.units[v.unit]
		if _, ok := s.serve(trial, v, nil, &unit); ok {
			out = append(out, v)
			bottles = trial
		}
	}
	return out
}

// The bounds rest on one thing: what enters a unit while it stands above a density comes from a bottle that stands above it too, and
// no bottle ever gains. So for every density the units' demand above it is at most the bottles' supply above it. Between the densities
// of the input both are straight lines, so only those need a look.

func (s *search) densities() []float64 {
	out := append([]float64{0}, s.targets...)
	for _, v := range append(slices.Clone(s.units), s.bottles...) {
		out = append(out, v.rho)
	}
	return out
}

// demands are the masses that the units take above a density, the least first.
func (s *search) demands(above float64) []float64 {
	out := make([]float64, len(s.units))
	for i, u := range s.units {
		out[i] = u.volume * max(0, s.targets[i]-max(u.rho, above))
	}
	slices.Sort(out)
	return out
}

func (s *search) supply(above, below float64) float64 {
	sum := 0.0
	for _, b := range s.bottles {
		sum += b.volume * max(0, min(b.rho, below)-above)
	}
	return sum
}

func (s *search) completedAtMost() int {
	least := len(s.units)
	for _, rho := range s.densities() {
		supply, n := s.supply(rho, math.Inf(1))*(1+1e-12), 0
		for _, d := range s.demands(rho) {
			if supply -= d; supply < 0 {
				break
			}
			n++
		}
		least = min(least, n)
	}
	return least
}

// usableAtMost is for any choice of so many units: what they take above a density, beyond the supply between it and the highest
// target, is taken from the usable gas.
func (s *search) usableAtMost(completed int) float64 {
	taken := 0.0
	for _, rho := range s.densities() {
		if rho > s.top {
			continue
		}
		demand := -s.supply(rho, s.top)
		for _, d := range s.demands(rho)[:completed] {
			demand += d
		}
		taken = max(taken, demand)
	}
	return s.usable(s.bottles) - taken
}

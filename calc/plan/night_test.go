package plan

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"pgregory.net/rapid"

	"example.org/chargehand/calc/gas"
	"example.org/chargehand/calc/quantity"
)

func cart(jobs []NightJob, bottles []Bottle) NightInput {
	return NightInput{Gas: gas.Nitrogen(), Temperature: at20, Ambient: quantity.StandardAtmosphere, Jobs: jobs, Bottles: bottles}
}

// Source: the same independent evaluation as in TestBottleSeries: five charges of 97.19 g from one bottle, which ends at
// 1,616.6 psig; the sixth would need it to stand at 1,500 psig still.
func TestNightSeries(t *testing.T) {
	var jobs []NightJob
	for i := range 6 {
		jobs = append(jobs, NightJob{fmt.Sprint("U", i), fiftyIn, 0, psi(1500)})
	}
	p, err := Night(cart(jobs, []Bottle{{"N1", 5e-3, psi(3000), at20}}))
	if err != nil {
		t.Fatal(err)
	}
	if len(p.Steps) != 5 || len(p.Undone) != 1 || !p.Best || p.Undone[0].Job != 5 || p.Connects != 5 {
		t.Fatalf("%+v", p)
	}
	for i, want := range []float64{2702.2, 2416.7, 2141.8, 1875.6, 1616.6} {
		near(t, "bottle", inPsi(p.Steps[i].Draws[0].Left), want, 0.05)
		near(t, "unit", inPsi(p.Steps[i].Draws[0].Unit), 1500, 1e-6)
	}
	// What the undone one needs does it.
	u := p.Undone[0]
	if u.Needs == nil {
		t.Fatal("no need stated")
	}
	end := []Bottle{{"N1", 5e-3, p.Bottles[0].Pressure, at20}, {"N2", u.Size, *u.Needs + psi(0.01), at20}}
	again, err := Night(cart(jobs[5:], end))
	if err != nil || len(again.Steps) != 1 {
		t.Fatalf("with what it needs: %+v, %v", again, err)
	}
	near(t, "reaches", inPsi(u.Reaches), inPsi(equalised(t, 1616.6)), 0.1)
	end[1].Pressure -= psi(0.02)
	if again, err = Night(cart(jobs[5:], end)); err != nil || len(again.Steps) != 0 {
		t.Errorf("with less: %+v, %v", again, err)
	}
}

// equalised is where an empty unit and the 5.0 L bottle at a pressure come level.
func equalised(t *testing.T, bottle float64) quantity.GaugePressure {
	in := example()
	in.Bottle.Pressure = psi(bottle)
	p, err := Charge(in)
	if err != nil {
		t.Fatal(err)
	}
	return p.Bottle.Reaches
}

// brute is the best completed and worth (steps of 10 g) over all orders and, for each unit, all sets of bottles, poorest first: written
// apart from the search, on masses.
func brute(units, targets, bottles []vessel, top, price float64) (completed int, worth int64) {
	type level struct{ mass, volume float64 }
	best := [2]int64{-1, 0}
	var try func(done int, state []level, n, connects int)
	try = func(done int, state []level, n, connects int) {
		sum := -price * float64(connects)
		for _, b := range state {
			sum += max(0, b.mass-top*b.volume)
		}
		if score := [2]int64{int64(n), steps(sum)}; score[0] > best[0] || score[0] == best[0] && score[1] > best[1] {
			best = score
		}
		for u := range units {
			if done>>u&1 == 1 {
				continue
			}
			want := targets[u].rho * units[u].volume
			for set := range 1 << len(state) {
				next := append([]level(nil), state...)
				mass, left, made := units[u].rho*units[u].volume, set, 0
				for mass < want && left != 0 {
					i, low := 0, math.Inf(1)
					for k, b := range next {
						if left>>k&1 == 1 && b.mass/b.volume < low {
							i, low = k, b.mass/b.volume
						}
					}
					left &^= 1 << i
					b := &next[i]
					total := b.mass + mass
					take := min(want-mass, total*units[u].volume/(b.volume+units[u].volume)-mass)
					if take > 0 {
						b.mass -= take
						mass += take
						made++
					}
				}
				if mass >= want*(1-1e-15) {
					try(done|1<<u, next, n+1, connects+made)
				}
			}
		}
	}
	var state []level
	for _, b := range bottles {
		state = append(state, level{b.rho * b.volume, b.volume})
	}
	try(0, state, 0, 0)
	return int(best[0]), best[1]
}

// invented draws a night: units of usual sizes and bottles of which some are poor. plenty scales the bottles.
func invented(random *rand.Rand, units, bottles int, plenty float64) NightInput {
	var jobs []NightJob
	var bs []Bottle
	for i := range units {
		target := 600 + 2400*random.Float64()
		found := target * random.Float64()
		if random.IntN(3) == 0 {
			found = 0
		}
		in3 := []float64{25, 50, 100, 200, 400}[random.IntN(5)]
		jobs = append(jobs, NightJob{fmt.Sprint("U", i), quantity.Volume(in3 * 16.387064e-6), psi(found), psi(target)})
	}
	for i := range bottles {
		bs = append(bs, Bottle{fmt.Sprint("B", i), quantity.Volume((3 + 12*random.Float64()) * 1e-3 * plenty), psi(400 + 3200*random.Float64()), at20})
	}
	return cart(jobs, bs)
}

func densities(t testing.TB, in NightInput) (s search, targets []vessel) {
	rho := func(p quantity.GaugePressure) float64 {
		d, err := in.Gas.Density(in.Temperature, p.Abs(in.Ambient))
		if err != nil {
			t.Fatal(err)
		}
		return float64(d)
	}
	for _, j := range in.Jobs {
		s.units = append(s.units, vessel{float64(j.Volume), rho(j.Found)})
		s.targets = append(s.targets, rho(j.Target))
		targets = append(targets, vessel{float64(j.Volume), rho(j.Target)})
		s.top = max(s.top, rho(j.Target))
	}
	for _, b := range in.Bottles {
		s.bottles = append(s.bottles, vessel{float64(b.Volume), rho(b.Pressure)})
	}
	return s, targets
}

func TestNightAgainstBruteForce(t *testing.T) {
	random := rand.New(rand.NewPCG(3, 4))
	scarce := 0
	for i := range 63 {
		size := [][2]int{{1, 2}, {3, 2}, {3, 3}, {4, 2}, {5, 2}, {4, 3}}[i%6]
		if i >= 60 {
			size = [2]int{5, 3}
		}
		in := invented(random, size[0], size[1], 0.5)
		in.Connection = []float64{0, 0.02}[i%2]
		p, err := Night(in)
		if err != nil {
			t.Fatal(err)
		}
		s, targets := densities(t, in)
		completed, worth := brute(s.units, targets, s.bottles, s.top, in.Connection)
		if got := steps(p.Usable - in.Connection*float64(p.Connects)); len(p.Steps) != completed || got != worth || !p.Best {
			t.Errorf("case %d: completes %d worth %v (best: %v), by brute force %d worth %v", i, len(p.Steps), got, p.Best, completed, worth)
		}
		if completed > p.CompletedAtMost || in.Connection == 0 && float64(worth) > p.UsableAtMost*100+0.5 {
			t.Errorf("case %d: %d worth %v is above the bounds %d, %v", i, completed, worth, p.CompletedAtMost, p.UsableAtMost)
		}
		if completed < size[0] {
			scarce++
		}
	}
	if scarce < 15 {
		t.Errorf("only %d cases are scarce", scarce)
	}
}

// The step-by-step search against the full one, where both can be run.
func TestNightStepByStep(t *testing.T) {
	random := rand.New(rand.NewPCG(5, 6))
	cases, fewer, less, worst := 0, 0, 0, 0.0
	for range 24 {
		s, _ := densities(t, invented(random, 6, 3, 0.7))
		best, all := s.solve()
		if !all {
			continue
		}
		cases++
		got := s.improve().score
		if got.completed < best.score.completed {
			fewer++
		} else if gap := best.score.worth - got.worth; gap > 0 {
			less++
			worst = max(worst, float64(gap)/float64(steps(s.usable(s.bottles))))
		}
	}
	t.Logf("%d cases: %d complete fewer, %d leave less usable, at worst %.2g of what was usable at first", cases, fewer, less, worst)
	if cases < 12 || fewer > 0 || worst > 0.01 {
		t.Errorf("%d cases, %d complete fewer, worst gap %v", cases, fewer, worst)
	}
}

func TestNightLaws(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		random := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 0))
		in := invented(random, rapid.IntRange(0, 7).Draw(t, "units"), rapid.IntRange(1, 3).Draw(t, "bottles"), rapid.Float64Range(0.1, 2).Draw(t, "plenty"))
		p, err := Night(in)
		if err != nil {
			t.Fatal(err)
		}
		seen := map[int]bool{}
		taken := make([]float64, len(in.Bottles))
		last := make([]quantity.GaugePressure, len(in.Bottles))
		for i, b := range in.Bottles {
			last[i] = b.Pressure
		}
		mass := func(v quantity.Volume, g quantity.GaugePressure) float64 {
			rho, err := in.Gas.Density(in.Temperature, g.Abs(in.Ambient))
			if err != nil {
				t.Fatal(err)
			}
			return float64(rho) * float64(v)
		}
		connects := 0
		for _, s := range p.Steps {
			j, level, got := in.Jobs[s.Job], in.Jobs[s.Job].Found, 0.0
			if seen[s.Job] {
				t.Fatalf("unit %d is served twice", s.Job)
			}
			seen[s.Job] = true
			for _, d := range s.Draws {
				connects++
				if d.Left > last[d.Bottle] || d.Unit < level || d.Left < d.Unit-1 || last[d.Bottle] < level {
					t.Fatalf("gas flows up: %+v from %v into %v", d, last[d.Bottle], level)
				}
				last[d.Bottle], level = d.Left, d.Unit
				taken[d.Bottle] += d.Mass
				got += d.Mass
			}
			want := mass(j.Volume, j.Target) - mass(j.Volume, j.Found)
			if math.Abs(float64(level-j.Target)) > 1 || math.Abs(got-want) > 1e-9*mass(j.Volume, j.Target) {
				t.Fatalf("unit %d ends at %v with %v kg, target %v with %v", s.Job, level, got, j.Target, want)
			}
		}
		left := 0.0
		for i, b := range in.Bottles {
			full := mass(b.Volume, b.Pressure)
			if math.Abs(full-taken[i]-p.Bottles[i].Mass) > 1e-9*full || math.Abs(float64(p.Bottles[i].Pressure-last[i])) > 1 {
				t.Fatalf("bottle %d had %v kg, gave %v, has %v", i, full, taken[i], p.Bottles[i].Mass)
			}
			left += p.Bottles[i].Mass
		}
		for _, u := range p.Undone {
			if seen[u.Job] || !(u.Lacks > 0) || u.Reaches >= in.Jobs[u.Job].Target {
				t.Fatalf("undone: %+v", u)
			}
			seen[u.Job] = true
		}
		if len(seen) != len(in.Jobs) || math.Abs(left-p.Left) > 1e-9*left || p.Connects != connects || len(p.Steps) > p.CompletedAtMost || p.Usable > p.UsableAtMost {
			t.Fatalf("%+v", p)
		}
	})
}

func TestNightErrors(t *testing.T) {
	for name, change := range map[string]func(*NightInput){
		"temperature":        func(in *NightInput) { in.Temperature = 100 },
		"ambient":            func(in *NightInput) { in.Ambient = quantity.Pressure(math.NaN()) },
		"no bottles":         func(in *NightInput) { in.Bottles = nil },
		"volume":             func(in *NightInput) { in.Jobs[0].Volume = -1 },
		"target":             func(in *NightInput) { in.Jobs[0].Target = psi(20000) },
		"bottle temperature": func(in *NightInput) { in.Bottles[0].Temperature = 0 },
		"bottle volume":      func(in *NightInput) { in.Bottles[0].Volume = quantity.Volume(math.Inf(1)) },
		"connection":         func(in *NightInput) { in.Connection = math.NaN() },
		"too many":           func(in *NightInput) { in.Jobs = make([]NightJob, 201) },
	} {
		in := invented(rand.New(rand.NewPCG(7, 8)), 3, 2, 1)
		change(&in)
		if _, err := Night(in); !errors.Is(err, quantity.ErrOutOfRange) {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := Night(NightInput{}); err == nil {
		t.Error("a night without a gas passes")
	}
	p, err := Night(cart([]NightJob{{"full", fiftyIn, psi(1500), psi(1500)}}, []Bottle{{"N1", 5e-3, psi(100), at20}}))
	if err != nil || len(p.Steps) != 1 || p.Connects != 0 || !p.Best {
		t.Errorf("a unit on target: %+v, %v", p, err)
	}
}

// Large nights: the same input gives the same plan, and it is close to the bounds.
func TestNightLarge(t *testing.T) {
	random := rand.New(rand.NewPCG(9, 10))
	for _, plenty := range []float64{0.5, 1, 3} {
		in := invented(random, 40, 8, plenty)
		p, err := Night(in)
		if err != nil {
			t.Fatal(err)
		}
		in.Connection = 0.02
		fewer, err := Night(in)
		if err != nil || len(fewer.Steps) < len(p.Steps)-1 {
			t.Errorf("with a price on connections %d are completed: %v", len(fewer.Steps), err)
		}
		t.Logf("with 20 g for a connection: %d, usable %.3f kg, %d connections", len(fewer.Steps), fewer.Usable, fewer.Connects)
		in.Connection = 0
		again, err := Night(in)
		if err != nil || fmt.Sprint(again.Steps) != fmt.Sprint(p.Steps) {
			t.Errorf("not the same plan: %v", err)
		}
		t.Logf("plenty %v: %d of at most %d, usable %.3f of at most %.3f kg, %d connections",
			plenty, len(p.Steps), p.CompletedAtMost, p.Usable, p.UsableAtMost, p.Connects)
		if p.CompletedAtMost-len(p.Steps) > 2 || p.Best {
			t.Errorf("plenty %v: completes %d of at most %d", plenty, len(p.Steps), p.CompletedAtMost)
		}
	}
}

// 40 units and 8 bottles in under 2 seconds is the requirement.
func BenchmarkNight(b *testing.B) {
	in := invented(rand.New(rand.NewPCG(11, 12)), 40, 8, 1)
	for b.Loop() {
		if _, err := Night(in); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkNightExact(b *testing.B) {
	in := invented(rand.New(rand.NewPCG(11, 12)), 8, 4, 0.5)
	for b.Loop() {
		if _, err := Night(in); err != nil {
			b.Fatal(err)
		}
	}
}

func ExampleNight() {
	const litre = quantity.Volume(1e-3)
	jobs := []NightJob{
		{"U-101 brake", fiftyIn, psi(200), psi(1000)},
		{"U-102 pump", fiftyIn, psi(1100), psi(1500)},
		{"U-103 gear", 4 * fiftyIn, 0, psi(1500)},
	}
	p, err := Night(NightInput{
		Gas: gas.Nitrogen(), Temperature: at20, Ambient: quantity.StandardAtmosphere, Jobs: jobs,
		Bottles: []Bottle{{"poor", 5 * litre, psi(1250), at20}, {"rich", 5 * litre, psi(2200), at20}},
	})
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, s := range p.Steps {
		for _, d := range s.Draws {
			fmt.Printf("%s from bottle %d: to %.0f psi, bottle then at %.0f\n", jobs[s.Job].Name, d.Bottle, inPsi(d.Unit), inPsi(d.Left))
		}
	}
	for _, u := range p.Undone {
		fmt.Printf("%s cannot be done: reaches %.0f psi, lacks %.0f g\n", jobs[u.Job].Name, inPsi(u.Reaches), u.Lacks*1e3)
	}
	fmt.Printf("%.0f g stand above the highest target\n", p.Usable*1e3)
	// Output:
	// U-102 pump from bottle 0: to 1229 psi, bottle then at 1229
	// U-102 pump from bottle 1: to 1500 psi, bottle then at 2152
	// U-101 brake from bottle 0: to 1000 psi, bottle then at 1096
	// U-103 gear from bottle 0: to 660 psi, bottle then at 660
	// U-103 gear from bottle 1: to 1500 psi, bottle then at 1569
	// 26 g stand above the highest target
}

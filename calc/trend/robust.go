package trend

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// TheilSen is the median of the slopes between all pairs of readings of one gauge in one segment. It stays when up to 29 % of
// the readings are wrong, however wrong. It knows nothing of a gauge's own temperature, which through a season is no chance error:
// its interval is then too narrow, and it stands beside the fit and never in its place.
type TheilSen struct {
	Slope     Rate
	Low, High Rate // 95 %, by Kendall's statistic; infinite intervals are given as the least and greatest slope
	Pairs     int
}

// theilSen returns nil when there is no pair.
//
// Source: P.K. Sen, J. Am. Stat. Assoc. 63, 1379 (1968): the interval runs between the slopes of rank (N -/+ z sqrt(V))/2, with
// Kendall's variance V summed over the blocks and corrected for ties (from memory).
func theilSen(ps []Point) *TheilSen {
	type block struct{ gauge, segment string }
	blocks := map[block][]Point{}
	for _, p := range ps {
		b := block{p.Gauge, p.Segment}
		blocks[b] = append(blocks[b], p)
	}
	var slopes []float64
	variance := 0.0
	for _, b := range blocks {
		slices.SortFunc(b, compare)
		var x, y []float64
		for i, p := range b {
			x, y = append(x, p.At.Sub(b[0].At).Seconds()), append(y, float64(p.Pressure))
			for j := range i {
				if x[i] > x[j] {
					slopes = append(slopes, (y[i]-y[j])/(x[i]-x[j]))
				}
			}
		}
		variance += kendall(float64(len(b))) - ties(x) - ties(y)
	}
	if len(slopes) == 0 {
		return nil
	}
	slices.Sort(slopes)
	n := len(slopes)
	c := distuv.UnitNormal.Quantile(0.975) * math.Sqrt(max(0, variance))
	low := max(int(math.RoundToEven((float64(n)-c)/2))-1, 0)
	high := min(int(math.RoundToEven((float64(n)+c)/2)), n-1)
	return &TheilSen{Slope: Rate(median(slopes)), Low: Rate(slopes[low]), High: Rate(slopes[high]), Pairs: n}
}

func kendall(n float64) float64 { return n * (n - 1) * (2*n + 5) / 18 }

func ties(v []float64) float64 {
	s := slices.Sorted(slices.Values(v))
	sum, run := 0.0, 1.0
	for i := 1; i <= len(s); i++ {
		if i < len(s) && s[i] == s[i-1] {
			run++
			continue
		}
		sum += kendall(run)
		run = 1
	}
	return sum
}

// median of sorted values, at least one.
func median(s []float64) float64 {
	n := len(s)
	return (s[(n-1)/2] + s[n/2]) / 2
}

// Odd is a reading that does not fit the rest.
type Odd struct {
	Point Point
	// By is how far it lies from what the other readings foretell, in standard uncertainties of that difference; negative when
	// it reads low.
	By float64
}

// oddRisk is the chance of pointing at any reading of a history in which none is odd.
const oddRisk = 0.05

// hiding is how many odd readings in a row may hide another.
const hiding = 5

// odd points at readings that the rest do not bear out, and returns the rest. It takes away the reading that is farthest from
// what the others foretell, again and again; the largest number of readings whose last one was too far counts, so that two odd
// readings cannot hide each other.
//
// Source: B. Rosner, Technometrics 25, 165 (1983), the generalised extreme studentised deviate, with the stated uncertainty or a
// larger scatter as its scale (from memory).
func odd(f *Fit, o Options) (found []Odd, rest []Point) {
	left := slices.Clone(f.model.ps)
	var taken []Odd
	m := f.model
	// Fewer than four bearing readings cannot outvote one; more than 29 % odd ones are a matter for the technician.
	for most := int(0.29 * float64(len(left))); len(taken) < most && len(taken) < len(found)+hiding && m.bearing >= 4; {
		s, err := m.solve(1)
		if err != nil {
			break
		}
		worst := 0
		for i, z := range s.left {
			if math.Abs(z) > math.Abs(s.left[worst]) {
				worst = i
			}
		}
		z := s.left[worst]
		// Without this reading the chi-squared is less by z^2, and so is the scatter of the others.
		scale, freedom := widening(max(0, s.chi2-z*z), len(left)-m.fixed()-1)
		far := quantile(freedom, 1-oddRisk/2/float64(len(left)))
		taken = append(taken, Odd{left[worst], z / scale})
		left = slices.Delete(left, worst, worst+1)
		if math.Abs(z) > far*scale {
			found, rest = slices.Clone(taken), slices.Clone(left)
		}
		if m, err = newModel(left, o); err != nil {
			break
		}
	}
	for i := range found { // the others must not hide by how much
		at, _ := slices.BinarySearchFunc(rest, found[i].Point, compare)
		m, err := newModel(slices.Insert(slices.Clone(rest), at, found[i].Point), o)
		if err != nil {
			continue
		}
		if s, err := m.solve(1); err == nil {
			scale, _ := widening(max(0, s.chi2-s.left[at]*s.left[at]), len(rest)-m.fixed())
			found[i].By = s.left[at] / scale
		}
	}
	slices.SortStableFunc(found, func(a, b Odd) int { return compare(a.Point, b.Point) })
	return found, rest
}

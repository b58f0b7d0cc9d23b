package trend

import (
	"encoding/csv"
	"math"
	"os"
	"strconv"
	"testing"
	"time"

	"gonum.org/v1/gonum/mat"

	"example.org/chargehand/calc/quantity"
)

var start = time.Date(2031, 3, 1, 6, 0, 0, 0, time.UTC)

func after(seconds float64) time.Time {
	return start.Add(time.Duration(math.Round(seconds * 1e9)))
}

// norris reads NIST StRD Norris: the values by item, and the points with x as seconds and y as pascals.
func norris(t testing.TB) (map[string]float64, []Point) {
	t.Helper()
	file, err := os.Open("../../testdata/nist-strd-norris.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	rows, err := csv.NewReader(file).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	number := func(s string) float64 {
		v, err := strconv.ParseFloat(s, 64)
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
	values := map[string]float64{}
	var ps []Point
	for _, r := range rows[1:] {
		switch r[0] {
		case "certified", "computed_here":
			values[r[1]] = number(r[4])
			if r[5] != "" {
				values["sd "+r[1]] = number(r[5])
			}
		case "data":
			ps = append(ps, Point{At: after(number(r[2])), Pressure: quantity.GaugePressure(number(r[3])), U: 1, Gauge: "G"})
		}
	}
	if len(ps) != 36 {
		t.Fatalf("%d points", len(ps))
	}
	return values, ps
}

// Source: NIST/ITL StRD, linear regression, data set Norris, certified values; with one gauge and one segment the model is
// ordinary least squares. NIST's standard deviations carry the residual one, ours the stated 1.
func TestNorris(t *testing.T) {
	want, ps := norris(t)
	for _, bias := range []quantity.GaugePressure{0, 50} { // one gauge's bias is no slope
		for i := range ps {
			ps[i].Bias = bias
		}
		f, err := New(ps, Options{})
		if err != nil {
			t.Fatal(err)
		}
		level, levelU := f.line("", start)
		s := math.Sqrt(f.solved.chi2 / 34)
		if chi2, freedom := f.model.scatter(); f.Scatter != 1 || freedom != 34 || math.Abs(chi2-f.solved.chi2) > 1e-9 {
			t.Fatalf("scatter %v by %v of %d", f.Scatter, chi2, freedom)
		}
		check := func(name string, got, want float64) {
			t.Helper()
			if !(math.Abs(got/want-1) < 1e-9) {
				t.Errorf("bias %v: %s %.15g, certified %.15g", bias, name, got, want)
			}
		}
		check("B1", float64(f.Rate), want["B1"])
		check("B0", float64(level), want["B0"])
		check("residual standard deviation", s, want["residual_standard_deviation"])
		check("sum of squares", f.solved.chi2, want["residual_sum_of_squares"])
		check("sd of B1", float64(f.U)*s, want["sd B1"])
		if bias == 0 {
			check("sd of B0", float64(levelU)*s, want["sd B0"])
		}
	}
	// Not certified: exact rational arithmetic apart from this program, by the file's note.
	if got := float64(theilSen(ps).Slope); math.Abs(got/want["theil_sen_slope"]-1) > 1e-9 || theilSen(ps).Pairs != 629 {
		t.Errorf("Theil-Sen %.16g of %d pairs, want %.16g of 629", got, theilSen(ps).Pairs, want["theil_sen_slope"])
	}
}

// Source: NIST/ITL StRD, data sets NoInt1 and NoInt2, certified values from memory, recomputed in exact arithmetic. A line
// through the origin has no level, so the solver is given the one column.
func TestThroughOrigin(t *testing.T) {
	for _, c := range []struct {
		name          string
		x, y          []float64
		b, sd, s, sse float64
	}{
		{"NoInt1", seq(60, 11), seq(130, 11), 2.07438016528926, 0.0165289256198347, 3.56753034006338, 127.272727272727},
		{"NoInt2", seq(4, 3), []float64{3, 4, 4}, 0.727272727272727, 0.0420827318078432, 0.369274472937998, 0.272727272727273},
	} {
		s, err := leastSquares(mat.NewDense(len(c.x), 1, c.x), c.y)
		if err != nil {
			t.Fatal(err)
		}
		rsd := math.Sqrt(s.chi2 / float64(len(c.x)-1))
		for what, v := range map[string][2]float64{
			"B1": {s.b[0], c.b}, "sd of B1": {math.Sqrt(s.cov.At(0, 0)) * rsd, c.sd}, "residual sd": {rsd, c.s}, "sum of squares": {s.chi2, c.sse},
		} {
			if !(math.Abs(v[0]/v[1]-1) < 1e-9) {
				t.Errorf("%s: %s %.15g, certified %.15g", c.name, what, v[0], v[1])
			}
		}
	}
}

func seq(from float64, n int) []float64 {
	v := make([]float64, n)
	for i := range v {
		v[i] = from + float64(i)
	}
	return v
}

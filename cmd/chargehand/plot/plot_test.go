package plot

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

var start = time.Date(2026, 3, 2, 8, 0, 0, 0, time.UTC)

func day(d float64) time.Time { return start.Add(time.Duration(d * 24 * float64(time.Hour))) }

// trend is an invented history: a slow leak, a charge, and one reading that does not fit.
func trend() Trend {
	t := Trend{Title: "HA-40/104 loses 3.1 psi a day (2.4 to 3.8); it leaves the limits between 2026-04-19 and 2026-05-06",
		Quantity: "charge corrected to 70 F", Unit: "psi", Zone: time.FixedZone("", 2*3600), Limits: &Limits{1150, 1250, 1350},
		Charges: []Charge{{When: day(9), From: 1163, To: 1256, FromKnown: true}},
		Leaves:  &Leaves{day(48), day(65)}}
	for d, v := range map[float64]float64{0: 1192, 4: 1178, 8: 1166, 12: 1247, 17: 1230, 22: 1216, 33: 1180} {
		t.Readings = append(t.Readings, Reading{When: day(d), P: v, U: 22})
	}
	t.Readings = append(t.Readings, Reading{When: day(27), P: 1105, U: 22, Odd: "41 F typed as 41 C?"})
	for d := 9.; d <= 66; d += 3 {
		wide := 8 + math.Max(0, d-33)*1.1
		t.Fit = append(t.Fit, FitPoint{day(d), 1253 - 2.2*(d-9), 1253 - 2.2*(d-9) - wide, 1253 - 2.2*(d-9) + wide})
	}
	t.Allowed = []Point{{day(9), 1256}, {day(66), 1256 - 1.1*57}}
	return t
}

func capacity() Capacity {
	c := Capacity{Title: "At -40 F a fast application leaves 5.2 in3 less than five brake applications need", TemperatureUnit: "F", VolumeUnit: "in3",
		Demand: 18, DemandWords: "5 brake applications", Worst: &Worst{-40, 12.8}}
	for t := -40.; t <= 160; t += 20 {
		c.Points = append(c.Points, CapacityPoint{Temperature: t, Slow: 24.8 - 0.00012*(t-85)*(t-85), Fast: 12.8 + 0.03*(t+40) - 0.00006*(t+40)*(t+40)})
	}
	return c
}

func fill() Fill {
	x := Fill{Title: "Stop at 1,344 psi; it settles to 1,250 psi in about 40 minutes", PressureUnit: "psi", TemperatureUnit: "F", Stop: 6, HotStop: 1344, Settled: 1250, Shell: true,
		Bounds: []Bound{{Name: "no heat lost"}, {Name: "no heating"}}}
	for m := 0.; m <= 60; m++ {
		gas, shell := 70+58*(1-math.Exp(-math.Min(m, 6)/3))*math.Exp(-math.Max(0, m-6)/1.5)+8*math.Exp(-math.Max(0, m-6)/18)*math.Min(m, 6)/6, 70+9*math.Min(m, 6)/6*math.Exp(-math.Max(0, m-6)/18)
		p := math.Min(m, 6) / 6 * 1250 * (gas + 459.67) / 529.67
		x.Samples = append(x.Samples, Sample{m, p, gas, shell})
		x.Bounds[0].Points = append(x.Bounds[0].Points, Sample{Minutes: m, Pressure: math.Min(m, 6) / 6 * 1630})
		x.Bounds[1].Points = append(x.Bounds[1].Points, Sample{Minutes: m, Pressure: math.Min(m, 6) / 6 * 1250})
	}
	return x
}

func trace() Trace {
	t := Trace{Title: "The fall breaks at 1,247 psi +/- 35: the charge is in limits, to be confirmed on the gas side", Unit: "psi", X: "strokes of the hand lever", Break: &Break{14.3, 1240, 1247, 1212, 1290}}
	for s := 0.; s <= 18; s++ {
		p := 3000 / (1 + 0.0983*s)
		if s > 14.3 {
			p = math.Max(0, 1247-480*(s-14.3))
		}
		t.Points = append(t.Points, XY{s, p + 6*math.Sin(7*s)})
	}
	for s := 0.; s <= 14.3; s += 1.1 {
		t.Slope = append(t.Slope, XY{s, 3000 / (1 + 0.0983*s)})
	}
	t.Collapse = []XY{{14.3, 1247}, {16.9, 0}}
	return t
}

var pictures = map[string]struct {
	p      Picture
	labels []string
}{
	"trend":    {trend(), []string{"charge corrected to 70 F, psi", "upper limit 1,350", "target 1,250", "lower limit 1,150", "forecast", "allowed loss", "charged 1,163 to 1,256", "41 F typed as 41 C?", "leaves the limits 2026-04-19 to 2026-05-06", "UTC+02:00", "date, 2026", "20 Apr"}},
	"capacity": {capacity(), []string{"fluid delivered, in3", "slow (isothermal)", "fast (isentropic)", "5 brake applications: 18.0 in3", "worst: 12.8 in3 at -40 F", "temperature of gas and fluid, F"}},
	"fill":     {fill(), []string{"gas pressure, psi", "temperature, F", "stop here: 1,344 psi", "target once settled, 1,250", "no heat lost", "no heating", "shell", "minutes"}},
	"trace":    {trace(), []string{"pressure, psi", "strokes of the hand lever", "charge 1,247 psi (1,212 to 1,290)", "the fall breaks here", "3,000"}},
}

func svg(t fatal, p Picture, s Scheme) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := Write(&b, p, SVG, s); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

var numbers = regexp.MustCompile(`-?[0-9.]+(?:e[-+]?[0-9]+)?`)

// read walks an SVG: its texts, and its complaints about coordinates off the page, bad numbers, small type and style attributes.
func read(t fatal, b []byte) (texts []string, complaints []string) {
	t.Helper()
	complain := func(what string) { complaints = append(complaints, what) }
	number := func(s string) float64 {
		v, err := strconv.ParseFloat(s, 64)
		if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
			complain("number " + s)
		}
		return v
	}
	inside := func(x, y float64, what string) {
		if x < -1 || x > Width+1 || y < -1 || y > Height+1 {
			complain(what + " at " + strconv.FormatFloat(x, 'g', 5, 64) + "," + strconv.FormatFloat(y, 'g', 5, 64))
		}
	}
	d := xml.NewDecoder(bytes.NewReader(b))
	element := ""
	for {
		token, err := d.Token()
		if errors.Is(err, io.EOF) {
			return texts, complaints
		}
		if err != nil {
			t.Fatalf("not XML: %v", err)
		}
		switch e := token.(type) {
		case xml.StartElement:
			element = e.Name.Local
			at := map[string]string{}
			for _, a := range e.Attr {
				at[a.Name.Local] = a.Value
			}
			if at["style"] != "" {
				complain("style " + at["style"])
			}
			switch element {
			case "path":
				ns := numbers.FindAllString(at["d"], -1)
				if strings.ContainsAny(at["d"], "AaCcQqNI") || len(ns)%2 != 0 {
					complain("path " + at["d"])
				}
				for i := 0; i+1 < len(ns); i += 2 {
					inside(number(ns[i]), number(ns[i+1]), "path")
				}
			case "text":
				inside(number(at["x"]), -number(at["y"]), "text")
				if size := number(strings.TrimSuffix(at["font-size"], "px")); size < 14 {
					complain("type of " + at["font-size"])
				}
			}
		case xml.CharData:
			if s := strings.TrimSpace(string(e)); s != "" && element == "text" {
				texts = append(texts, s)
			}
		case xml.EndElement:
			element = ""
		}
	}
}

func TestPicturesAsSVG(t *testing.T) {
	for name, x := range pictures {
		for _, s := range []Scheme{Light, Dark} {
			b := svg(t, x.p, s)
			texts, complaints := read(t, b)
			if len(complaints) > 0 {
				t.Errorf("%s: %s", name, strings.Join(complaints, "; "))
			}
			all := strings.ReplaceAll(strings.Join(texts, " "), "\u00a0", " ")
			for _, l := range x.labels {
				if !strings.Contains(all, l) {
					t.Errorf("%s: %q is not in\n%s", name, l, all)
				}
			}
			f, _ := x.p.figure()
			for _, want := range []string{"<title>" + strings.ReplaceAll(f.title, ">", "&gt;") + "</title>", `class="fill-ink"`, `role="img"`, "stroke-mark"} {
				if !bytes.Contains(b, []byte(want)) {
					t.Errorf("%s: %q is missing", name, want)
				}
			}
			if again := svg(t, x.p, s); !bytes.Equal(b, again) {
				t.Errorf("%s: two drawings of one picture differ", name)
			}
		}
	}
}

// No two labels lie on each other, in the examples and in each of a range of histories.
func TestLabelsDoNotOverlap(t *testing.T) {
	crowd := trend()
	for i := range 12 {
		crowd.Charges = append(crowd.Charges, Charge{When: day(60 + 40*float64(i)), From: 1150, To: 1250, FromKnown: true})
	}
	check := func(t interface{ Errorf(string, ...any) }, name string, b []byte) {
		boxes := labelBoxes(b)
		for i, a := range boxes {
			for _, o := range boxes[:i] {
				if a.x0 < o.x1-1 && o.x0 < a.x1-1 && a.y0 < o.y1-2 && o.y0 < a.y1-2 {
					t.Errorf("%s: %q lies on %q", name, a.words, o.words)
				}
			}
			if a.x0 < 0 || a.x1 > Width {
				t.Errorf("%s: %q is cut at the page's edge", name, a.words)
			}
		}
	}
	for name, x := range pictures {
		check(t, name, svg(t, x.p, Light))
	}
	check(t, "many charges", svg(t, crowd, Light))
	near := trend()
	near.Limits = &Limits{1230, 1250, 1270}
	check(t, "narrow limits", svg(t, near, Light))
	far := trend()
	far.Readings = append(far.Readings, Reading{When: day(300), P: 1190, U: 20}, Reading{When: day(900), P: 1190, U: 20})
	check(t, "years", svg(t, far, Light))
}

type box struct {
	words          string
	x0, x1, y0, y1 float64
}

var textElement = regexp.MustCompile(`<text x="([^"]*)" y="([^"]*)"[^>]*?textLength="([^"]*)"[^>]*?font-size="([0-9.]+)px"[^>]*>([^<]*)</text>`)

func labelBoxes(svg []byte) []box {
	var out []box
	for _, m := range textElement.FindAllSubmatch(svg, -1) {
		x, _ := strconv.ParseFloat(string(m[1]), 64)
		y, _ := strconv.ParseFloat(string(m[2]), 64)
		size, _ := strconv.ParseFloat(string(m[4]), 64)
		words := strings.NewReplacer("&#39;", "'", "&lt;", "<", "&gt;", ">", "&amp;", "&").Replace(string(m[5]))
		w, _ := strconv.ParseFloat(string(m[3]), 64)
		out = append(out, box{words, x, x + w, y - size*0.75, y + size*0.22})
	}
	return out
}

func TestOtherFormats(t *testing.T) {
	for name, x := range pictures {
		for _, s := range []Scheme{Light, Dark} {
			var b bytes.Buffer
			if err := Write(&b, x.p, PNG, s); err != nil {
				t.Fatal(err)
			}
			m, err := png.Decode(&b)
			if err != nil || m.Bounds().Dx() != 2*Width || m.Bounds().Dy() != 2*Height {
				t.Errorf("%s: %v, %v", name, m.Bounds(), err)
			}
		}
		var b bytes.Buffer
		if err := Write(&b, x.p, PDF, Light); err != nil || !bytes.HasPrefix(b.Bytes(), []byte("%PDF-")) || !bytes.Contains(b.Bytes(), []byte("%%EOF")) {
			t.Errorf("%s: PDF of %d bytes, %v", name, b.Len(), err)
		}
	}
	if err := Write(io.Discard, trend(), "gif", Light); err == nil || !strings.Contains(err.Error(), `"gif"`) {
		t.Errorf("gif: %v", err)
	}
	for in, want := range map[string]Format{"svg": SVG, "left brake.PNG": PNG, "a/b.c.pdf": PDF, "gif": "", "": ""} {
		if got, err := ParseFormat(in); got != want || (err == nil) != (want != "") {
			t.Errorf("ParseFormat(%q) = %q, %v", in, got, err)
		}
	}
}

// Without a folder for temporary files a PDF is an error, not a panic. The library keeps its fonts once made, so that this takes
// a process of its own.
func TestNoTemporaryFolder(t *testing.T) {
	if os.Getenv("PLOT_TEST_CHILD") == "" {
		cmd := exec.Command(os.Args[0], "-test.run=^TestNoTemporaryFolder$")
		cmd.Env = append(os.Environ(), "PLOT_TEST_CHILD=1", "TMPDIR="+filepath.Join(t.TempDir(), "none"))
		if out, err := cmd.CombinedOutput(); err != nil {
			t.Errorf("%v\n%s", err, out)
		}
		return
	}
	if err := Write(io.Discard, trend(), PDF, Light); err == nil || !strings.Contains(err.Error(), "temporary folder") {
		t.Errorf("error %v", err)
	}
	if err := Write(io.Discard, trend(), SVG, Light); err != nil {
		t.Error(err)
	}
}

// PDF type is of Windows-1252; what it lacks loses its accent, not its letter.
func TestWindows1252(t *testing.T) {
	if got, want := windows1252("Bjørn Šimić ± 漢"), "Bj\xf8rn \x8aimic \xb1 ?"; got != want {
		t.Errorf("%q, want %q", got, want)
	}
}

func TestNothingToDraw(t *testing.T) {
	for _, p := range []Picture{Trend{Title: "x"}, Capacity{}, Fill{}, Trace{}} {
		if err := Write(io.Discard, p, SVG, Light); !errors.Is(err, ErrNothing) {
			t.Errorf("%T: %v", p, err)
		}
	}
	bad := trend()
	bad.Readings[0].P = math.NaN()
	if err := Write(io.Discard, bad, SVG, Light); err == nil || !strings.Contains(err.Error(), "NaN") {
		t.Errorf("NaN: %v", err)
	}
}

// Text of the book cannot leave its element.
func TestTextIsEscaped(t *testing.T) {
	x := trend()
	x.Title, x.Unit = `</title><script>alert(1)</script> & style="fill:red"`, `psi" style="fill:#16202a"`
	x.Readings[len(x.Readings)-1].Odd = `<b style="x">`
	texts, complaints := read(t, svg(t, x, Light))
	if len(complaints) > 0 || !strings.Contains(strings.Join(texts, " "), `style="fill:#16202a"`) {
		t.Errorf("%v in %q", complaints, texts)
	}
}

// Meaning is not in colour alone: kinds of mark differ in outline, kinds of line in dash or weight.
func TestShapesTellApart(t *testing.T) {
	f, err := trend().figure()
	if err != nil {
		t.Fatal(err)
	}
	shapes := map[shape]bool{}
	for _, s := range f.panels[0].spots {
		shapes[s.shape] = true
	}
	if !shapes[dot] || !shapes[diamond] || !shapes[wedge] {
		t.Errorf("shapes %v: a reading, one that does not fit and a charge must differ", shapes)
	}
	kinds := map[string]string{}
	for _, s := range f.panels[0].strokes {
		if s.label == "" || strings.Contains(s.label, "limit") {
			continue
		}
		key := strconv.Itoa(len(s.dash)) + strconv.FormatFloat(float64(s.width), 'g', 3, 64)
		for _, d := range s.dash {
			key += "," + strconv.FormatFloat(float64(d), 'g', 3, 64)
		}
		if other, ok := kinds[key]; ok {
			t.Errorf("%q and %q are drawn alike", other, s.label)
		}
		kinds[key] = s.label
	}
}

// Ticks are round, rising, in the range, and there are some.
func TestRoundTicks(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		low := rapid.Float64Range(-1e6, 1e6).Draw(rt, "low")
		high := low + rapid.Float64Range(1e-2, 1e6).Draw(rt, "width")
		ts := roundTicks(low, high, 6)
		if len(ts) < 3 || len(ts) > 10 {
			rt.Fatalf("%d ticks in %v to %v", len(ts), low, high)
		}
		step := ts[1].at - ts[0].at
		for i, x := range ts {
			if x.at < low-step*1e-6 || x.at > high+step*1e-6 || i > 0 && math.Abs(x.at-ts[i-1].at-step) > 1e-6*step {
				rt.Fatalf("ticks %v in %v to %v", ts, low, high)
			}
			if v, err := strconv.ParseFloat(strings.ReplaceAll(x.label, ",", ""), 64); err != nil || math.Abs(v-x.at) > 1e-6*step+1e-9*math.Abs(x.at) {
				rt.Fatalf("tick %v is labelled %q", x.at, x.label)
			}
		}
	})
}

// Ticks of time fall on round times of the zone, whatever the length of the history.
func TestTimeTicks(t *testing.T) {
	place := time.FixedZone("", 5*3600+1800)
	rapid.Check(t, func(rt *rapid.T) {
		from := float64(start.Unix()) + rapid.Float64Range(-3e8, 3e8).Draw(rt, "from")
		width := math.Exp(rapid.Float64Range(math.Log(3600), math.Log(6e8)).Draw(rt, "log width"))
		ts, title := timeTicks(from, from+width, 8, place)
		if len(ts) < 1 || len(ts) > 10 || !strings.Contains(title, "UTC+05:30") {
			rt.Fatalf("%d ticks over %v s, %q", len(ts), width, title)
		}
		for _, x := range ts {
			at := time.Unix(int64(x.at), 0).In(place)
			if x.at < from || x.at > from+width || at.Second() != 0 || width > 40*24*3600 && (at.Hour() != 0 || at.Minute() != 0) {
				rt.Fatalf("tick %v over %v s", at, width)
			}
		}
	})
}

// Any history draws inside the page.
func TestAnyTrend(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		x := Trend{Title: rapid.String().Draw(rt, "title"), Quantity: "charge", Unit: "bar"}
		for range rapid.IntRange(1, 12).Draw(rt, "n") {
			r := Reading{When: day(rapid.Float64Range(0, 400).Draw(rt, "day")), P: rapid.Float64Range(0, 400).Draw(rt, "p"), U: rapid.Float64Range(0, 40).Draw(rt, "u")}
			if rapid.Bool().Draw(rt, "odd") {
				r.Odd = "does not fit the others"
			}
			x.Readings = append(x.Readings, r)
		}
		if rapid.Bool().Draw(rt, "limits") {
			x.Limits = &Limits{80, 85, 90}
			x.Leaves = &Leaves{First: day(rapid.Float64Range(0, 900).Draw(rt, "first"))}
		}
		if _, complaints := read(rt, svg(rt, x, Light)); len(complaints) > 0 {
			rt.Fatal(complaints)
		}
	})
}

func TestAnyOtherPicture(t *testing.T) {
	rapid.Check(t, func(rt *rapid.T) {
		number := func(name string) float64 { return rapid.Float64Range(-50, 5000).Draw(rt, name) }
		var tr Trace
		c := Capacity{Timed: rapid.SampledFrom([]string{"", "in 20 s"}).Draw(rt, "pace")}
		x := Fill{Shell: rapid.Bool().Draw(rt, "shell"), Stop: number("stop"), HotStop: number("hot"), Settled: number("settled"), Bounds: []Bound{{Name: "no heat lost"}}}
		for range rapid.IntRange(1, 9).Draw(rt, "n") {
			q := XY{number("x"), number("y")}
			tr.Points, tr.Slope, tr.Collapse = append(tr.Points, q), append(tr.Slope, XY{q.X, number("slope")}), append(tr.Collapse, XY{number("after"), q.Y})
			c.Points = append(c.Points, CapacityPoint{q.X, q.Y, number("fast"), number("timed")})
			s := Sample{q.X, q.Y, number("gas"), number("wall")}
			x.Samples, x.Bounds[0].Points = append(x.Samples, s), append(x.Bounds[0].Points, s)
		}
		tr.Break = &Break{number("break"), number("shown"), number("charge"), number("low"), number("high")}
		c.Worst, c.Demand = &Worst{number("at"), number("worst")}, number("demand")
		for _, p := range []Picture{tr, c, x} {
			if _, complaints := read(rt, svg(rt, p, Dark)); len(complaints) > 0 {
				rt.Fatalf("%T: %v", p, complaints)
			}
		}
	})
}

// fatal is what testing.T and rapid.T share.
type fatal interface {
	Helper()
	Fatal(...any)
	Fatalf(string, ...any)
}

// Words that each fill a line are one line each, and a whisker far longer than the page is cut at it.
func TestNoEndlessWork(t *testing.T) {
	long := strings.Repeat("w", 400)
	x := Trend{Title: long + " " + long, Quantity: "charge", Unit: "bar", Readings: []Reading{
		{When: day(0), P: 80, U: 1}, {When: day(1), P: 80.0001, U: 1}, {When: day(2), P: 80, U: 1e12}}}
	if out := svg(t, x, Light); len(out) > 1<<20 {
		t.Errorf("a figure of %d bytes", len(out))
	}
	tr := Trace{Title: "x", Unit: "bar", X: "strokes", Points: []XY{{0, 1}, {1, 1.0000001}}, Break: &Break{0.5, 1, 1, -1e12, 1e12}}
	if out := svg(t, tr, Light); len(out) > 1<<20 {
		t.Errorf("a figure of %d bytes", len(out))
	}
}

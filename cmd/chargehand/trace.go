package main

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/trace"
	"example.org/chargehand/cmd/chargehand/plot"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// traceJSON is what a bleed-down says of a unit's charge.
type traceJSON struct {
	Unit         string   `json:"unit"`
	Indication   string   `json:"indication"` // in words; never a verdict
	InLimits     *bool    `json:"in_limits,omitempty"`
	ChargePsi    float64  `json:"charge_psi"` // at the reference, where limits are given
	LowPsi       float64  `json:"low_psi"`    // 95 % interval
	HighPsi      float64  `json:"high_psi"`
	AtF          float64  `json:"at_f"`
	LimitLowPsi  *float64 `json:"limit_low_psi,omitempty"`
	LimitHighPsi *float64 `json:"limit_high_psi,omitempty"`
	NotCompared  string   `json:"not_compared,omitempty"`
	BreakFrom    float64  `json:"break_from"` // in the unit drawn in
	BreakTo      float64  `json:"break_to"`
	DrawnIn      string   `json:"drawn_in"`
	ShownPsi     float64  `json:"shown_psi"` // at the break
	Readings     int      `json:"readings"`
	Flags        []string `json:"flags,omitempty"`
	Done         string   `json:"done"`
	Sheet        string   `json:"sheet"`
	Entry        string   `json:"entry,omitempty"` // signed
}

// traceForm is what a person gives of a bleed-down.
type traceForm struct {
	home                     home
	gauge, file, note, image string
	pairs                    []string
	drawn                    choice
	temperature              *typed[quantity.Temperature]
	from                     choice
	done                     stamp
	asJSON, unsigned         bool
}

func newTrace() *cobra.Command {
	f := traceForm{drawn: choice{is: "strokes", of: []string{"strokes", "s", "in3", "cm3", "L"}}, temperature: bookTemperature(), from: choice{of: temperatureSources}}
	cmd := &cobra.Command{Use: "trace UNIT", Short: "Find the charge from a bleed-down on the fluid side", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand trace HA-40/104 --gauge G-9 --temperature 41F --from shell --csv bleed.csv --plot bleed.svg\n" +
			"  chargehand trace HA-40/104 --gauge G-9 --temperature 41F --from shell --pair 0=2950psi --pair 1=2540psi (and so on, to zero)",
		Long: "Find the charge from the pressure on the fluid side while fluid is bled slowly: it falls with the gas, then drops at once to\n" +
			"zero, and the last reading before the drop is about the charge. Pump off; bleed slowly, a stroke at a time; read four times or\n" +
			"more before the drop and twice after it. What comes out is an indication: confirm it with a gas-side reading, unless the manual\n" +
			"accepts it. The file has two columns under a heading: drawn, pressure. Without readings the last signed trace is shown.\n\n" +
			"Exit status 1: the charge found is out of limits, or cannot be compared with them. 3: the trace gives none; nothing is signed.",
	}
	addHome(cmd, &f.home, true)
	addJSON(cmd, &f.asJSON)
	addPlot(cmd, &f.image)
	fs := cmd.Flags()
	fs.StringVar(&f.file, "csv", "", "CSV file of the readings: drawn,pressure, one row a line, after a heading")
	fs.StringArrayVar(&f.pairs, "pair", nil, "one reading, such as 3=1980psi; give it for each")
	fs.Var(&f.drawn, "drawn-in", "what was drawn is counted in: strokes, s, in3, cm3 or L")
	fs.StringVar(&f.gauge, "gauge", "", "asset number of the gauge on the fluid side")
	fs.Var(f.temperature, "temperature", "gas temperature before the bleed")
	fs.Var(&f.from, "from", "where the temperature was taken: shell, ambient or unknown")
	fs.Var(&f.done, "done", "when it was done (else now)")
	fs.StringVar(&f.note, "note", "", "anything worth keeping")
	fs.BoolVar(&f.unsigned, "unsigned", false, "show the indication and sign nothing")
	cmd.RunE = f.run
	return cmd
}

func (f *traceForm) run(cmd *cobra.Command, args []string) error {
	return f.home.with(cmd, func(b *ledger.Book, dir string) error {
		m := b.Meaning()
		u, err := pickUnit(cmd, m, args)
		if err != nil {
			return err
		}
		var body record.Trace
		var entry record.ID
		recall := f.file == "" && len(f.pairs) == 0
		if recall {
			body, entry, err = lastTrace(m, u)
		} else {
			body, err = f.body(cmd, m, u)
		}
		if err != nil {
			return err
		}
		t, err := verdict.Trace(m, body)
		if err != nil {
			var no *trace.RefusedError
			if errors.As(err, &no) {
				return couldNot(fmt.Errorf("the trace of %s gives no charge: %w", unitName(u.Ref), err), no.Todo)
			}
			return couldNot(fmt.Errorf("the trace of %s cannot be used: %w", unitName(u.Ref), err), "Put that right and try again")
		}
		in := verdict.UnitsOf(m)
		facts := traceFacts(t, body, in)
		w := cmd.OutOrStdout()
		if f.asJSON {
			w = io.Discard
		}
		printTrace(w, t, body, in)
		if f.image != "" {
			if err := writePlot(f.image, tracePicture(t, body, in)); err != nil {
				return err
			}
		}
		switch {
		case recall:
			it := m.Item(entry)
			fmt.Fprintf(w, "signed      entry %s of %s\n", entry.Short(), day(it.Entry().Signed))
			facts.Entry = entry.String()
		case !f.unsigned:
			v, err := f.home.sign(cmd, w, b, dir, ledger.Draft{Kind: record.KindTrace, Body: body})
			if err != nil {
				return err
			}
			facts.Entry = v.ID().String()
		}
		if f.asJSON {
			if err := writeJSON(cmd.OutOrStdout(), facts); err != nil {
				return err
			}
		}
		if !t.In() {
			return errNo
		}
		return nil
	})
}

// lastTrace is the one that was done last.
func lastTrace(m *ledger.Meaning, u *ledger.Unit) (last record.Trace, id record.ID, err error) {
	for _, i := range u.Traces {
		if b, ok := m.Item(i).Body.(record.Trace); ok && (id == record.ID{} || b.Done.Unix >= last.Done.Unix) {
			last, id = b, i
		}
	}
	if (id == record.ID{}) {
		return last, id, usageError(fmt.Sprintf("no trace of %s was signed", unitName(u.Ref)), "Give the readings with --csv, or with --pair for each")
	}
	return last, id, nil
}

const pairWords = "Write each as drawn and pressure, such as 3 and 1980psi"

// body makes the entry from the flags, its readings by what was drawn.
func (f *traceForm) body(cmd *cobra.Command, m *ledger.Meaning, u *ledger.Unit) (record.Trace, error) {
	none := record.Trace{}
	if f.file != "" && len(f.pairs) > 0 {
		return none, usageError(fmt.Sprintf("--csv %q and --pair %q both give readings", f.file, f.pairs[0]), "Give all in the file, or all with --pair")
	}
	if err := fill(cmd, m, want{"gauge", usual(m, unitName(u.Ref))}, want{"temperature", ""}, want{"from", "shell"}); err != nil {
		return none, err
	}
	g := m.Gauge(f.gauge)
	if g == nil {
		return none, usageError(fmt.Sprintf("no gauge %q in this book", f.gauge), "See 'chargehand gauge list', or register it with 'chargehand gauge add'")
	}
	rows, err := f.rows()
	if err != nil {
		return none, err
	}
	var drawn, shown []quantity.Written
	for _, r := range rows {
		x, p, err := f.pair(m, g, r.drawn, r.pressure)
		if err != nil {
			return none, usageError(fmt.Sprintf("%s: %v", r.where, err), pairWords)
		}
		drawn, shown = append(drawn, x), append(shown, p)
	}
	order := make([]int, len(rows))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(i, j int) int { return compareWritten(drawn[i], drawn[j]) })
	for i, k := range order[1:] {
		if before := order[i]; compareWritten(drawn[before], drawn[k]) == 0 {
			return none, usageError(fmt.Sprintf("%s and %s are both at %s", rows[before].where, rows[k].where, drawn[k]), "Look which was meant and leave the other out")
		}
		if shown[k].Unit != shown[order[0]].Unit {
			return none, usageError(fmt.Sprintf("%s: %q is in another unit than %q", rows[k].where, shown[k], shown[order[0]]), "Write all pressures in the unit of the dial")
		}
	}
	b := record.Trace{Unit: u.Ref, Gauge: f.gauge, Temperature: *f.temperature.amount(), From: f.from.is, Done: f.done.record(), Note: f.note}
	for _, s := range []struct {
		to   *record.Series
		of   []quantity.Written
		name string
	}{{&b.Drawn, drawn, "amounts drawn"}, {&b.Pressures, shown, "pressures"}} {
		if *s.to, err = series(s.of, order); err != nil {
			return none, usageError(fmt.Sprintf("the %s cannot be kept together: %v", s.name, err), "Write them with as many digits as were read")
		}
	}
	b.Drawn.Unit = f.drawn.is
	return b, nil
}

// tracePair is one reading as it was given.
type tracePair struct{ where, drawn, pressure string }

func (f *traceForm) rows() (rows []tracePair, err error) {
	for _, s := range f.pairs {
		x, p, ok := strings.Cut(s, "=")
		if !ok {
			return nil, usageError(fmt.Sprintf("--pair: %q has no =", s), "Write it as 3=1980psi")
		}
		rows = append(rows, tracePair{fmt.Sprintf("--pair %q", s), x, p})
	}
	if f.file == "" {
		return rows, nil
	}
	file, err := os.Open(f.file)
	if err != nil {
		return nil, usageError(fmt.Sprintf("--csv: %v", plainly(err)), "Name a CSV file")
	}
	defer file.Close()
	r := csv.NewReader(io.LimitReader(file, 1<<20))
	r.FieldsPerRecord, r.TrimLeadingSpace = 2, true
	const shape = "Write a heading and then rows such as 3,1980psi"
	for first := true; ; first = false {
		cells, err := r.Read()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			return nil, usageError(fmt.Sprintf("--csv %q: %v", f.file, plainly(err)), shape)
		}
		line, _ := r.FieldPos(0)
		if _, err := quantity.Parse(cells[0]); first && err == nil {
			return nil, usageError(fmt.Sprintf("--csv %q, line %d: %q is a reading where the heading should be", f.file, line, strings.Join(cells, ",")), shape)
		}
		if !first {
			rows = append(rows, tracePair{fmt.Sprintf("--csv %q, line %d", f.file, line), cells[0], cells[1]})
		}
	}
	if len(rows) == 0 {
		return nil, usageError(fmt.Sprintf("--csv %q: it has no readings", f.file), shape)
	}
	return rows, nil
}

// pair reads what was drawn and the pressure then.
func (f *traceForm) pair(m *ledger.Meaning, g *ledger.Gauge, drawn, pressure string) (x, p quantity.Written, err error) {
	number := strings.TrimSpace(strings.TrimSuffix(strings.TrimSpace(drawn), f.drawn.is))
	if x, err = quantity.Parse(number); err != nil {
		return x, p, err
	}
	if x.Unit != "" {
		return x, p, fmt.Errorf("%q is not in %s; say what it is counted in with --drawn-in", drawn, f.drawn.is)
	}
	v := bookPressure()
	if err = v.Set(pressure); err == nil && v.bare != "" {
		err = v.Set(v.withUnit(m.Founding))
	}
	var wrong *valueError
	if errors.As(err, &wrong) {
		err = errors.New(wrong.what)
	}
	var no *problem
	if err == nil {
		if errors.As(refusePressure("pressure", v, g), &no) {
			err = errors.New(strings.TrimPrefix(no.what, "--pressure: "))
		}
	}
	return x, v.written, err
}

// compareWritten compares bare numbers exactly where a float would do.
func compareWritten(a, b quantity.Written) int {
	x, y := numberOf(a), numberOf(b)
	switch {
	case x < y:
		return -1
	case x > y:
		return 1
	}
	return 0
}

func numberOf(w quantity.Written) float64 {
	return float64(w.Mantissa) / math.Pow10(-w.Exponent)
}

// series keeps numbers with the exponent of the finest.
func series(of []quantity.Written, order []int) (record.Series, error) {
	s := record.Series{Exponent: of[0].Exponent, Unit: of[0].Unit}
	for _, w := range of {
		s.Exponent = min(s.Exponent, w.Exponent)
	}
	for _, i := range order {
		v := of[i].Mantissa
		for range of[i].Exponent - s.Exponent {
			if v > math.MaxInt64/10 || v < math.MinInt64/10 {
				return s, fmt.Errorf("%q has too many digits beside the finest of them", of[i])
			}
			v *= 10
		}
		s.Values = append(s.Values, v)
	}
	return s, nil
}

// traceWords is the indication in words.
func traceWords(t *verdict.Traced) string {
	switch {
	case !t.Compared:
		return "not compared with limits: " + t.NotCompared
	case t.AllIn:
		return "in limits"
	case t.AllOut:
		return "out of limits"
	case t.In():
		return "in limits, but the interval reaches beyond them"
	}
	return "out of limits, but the interval reaches into them"
}

func traceFacts(t *verdict.Traced, b record.Trace, in calc.Units) traceJSON {
	f := t.Fit
	j := traceJSON{Unit: unitName(t.Unit), Indication: traceWords(t) + "; " + trace.Indication, ChargePsi: inPsi(t.Charge), LowPsi: inPsi(t.Low), HighPsi: inPsi(t.High), AtF: inF(t.At),
		NotCompared: t.NotCompared, BreakFrom: f.From, BreakTo: f.To, DrawnIn: b.Drawn.Unit, ShownPsi: inPsi(f.Shown), Readings: len(t.Pairs), Flags: f.Flags(), Done: clock(b.Done),
		Sheet: t.Sheet.Document + " rev " + t.Sheet.Revision}
	if t.Compared {
		j.InLimits, j.LimitLowPsi, j.LimitHighPsi = ptr(t.In()), ptr(inPsi(t.LeastIn)), ptr(inPsi(t.MostIn))
	}
	return j
}

func printTrace(w io.Writer, t *verdict.Traced, b record.Trace, in calc.Units) {
	f := t.Fit
	words, why, _ := strings.Cut(traceWords(t), ": ")
	fmt.Fprintf(w, "unit        %s\nindication  %s\n", unitName(t.Unit), strings.ToUpper(words))
	if why != "" {
		fmt.Fprintf(w, "because     %s\n", why)
	}
	fmt.Fprintf(w, "charge      %s at %s (95 %%: %s)", in.Pressure(t.Charge), in.Temperature(t.At), in.Between(t.Low, t.High))
	if t.Compared {
		fmt.Fprintf(w, ", limits %s", in.Between(t.LeastIn, t.MostIn))
	}
	fmt.Fprintf(w, "\nbreak       between %g and %g %s, where the gauge shows %s; %d readings before it, %d after\n", f.From, f.To, b.Drawn.Unit, in.Pressure(f.Shown), f.Above, f.Below)
	for _, s := range f.Flags() {
		fmt.Fprintf(w, "look        %s\n", s)
	}
	fmt.Fprintf(w, "worth       %s\nby          %s rev %s, gauge %s, %s\n", trace.Indication, t.Sheet.Document, t.Sheet.Revision, b.Gauge, clock(b.Done))
}

// tracePicture is drawn at the gas temperature of the bleed, in the book's own unit.
func tracePicture(t *verdict.Traced, b record.Trace, in calc.Units) plot.Trace {
	unit := in.P
	if _, err := quantity.GaugePressure(0).InUnit(unit); err != nil {
		unit = "psi"
	}
	v := func(g quantity.GaugePressure) float64 { return show(g.InUnit(unit)) }
	f := t.Fit
	x := map[string]string{"strokes": "strokes", "s": "time, s"}[b.Drawn.Unit]
	if x == "" {
		x = "fluid drawn, " + b.Drawn.Unit
	}
	p := plot.Trace{Title: fmt.Sprintf("%s: points to a charge of %s; %s", unitName(t.Unit), in.Pressure(f.Charge), trace.Indication), Unit: unit, X: x,
		Break: &plot.Break{X: f.Break, Shown: v(f.Shown), Charge: v(f.Charge), Low: v(f.Low), High: v(f.High)}}
	p.Collapse = append(p.Collapse, plot.XY{X: f.Break, Y: v(f.Shown)})
	pairs := slices.Clone(t.Pairs)
	for _, q := range pairs {
		p.Points = append(p.Points, plot.XY{X: q.Drawn, Y: v(q.Pressure)})
		if q.Drawn >= f.To {
			p.Collapse = append(p.Collapse, plot.XY{X: q.Drawn, Y: v(q.Pressure)})
		}
	}
	const steps = 50
	for i := range steps + 1 {
		at := pairs[0].Drawn + (f.Break-pairs[0].Drawn)*float64(i)/steps
		p.Slope = append(p.Slope, plot.XY{X: at, Y: v(f.Fall(at))})
	}
	return p
}

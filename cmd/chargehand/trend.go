package main

import (
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/trend"
	"example.org/chargehand/cmd/chargehand/plot"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/verdict"
)

// trendJSON is what a unit's history says of its loss of gas. A loss is negative.
type trendJSON struct {
	Unit             string        `json:"unit"`
	Readings         int           `json:"readings"` // that bear on it
	Segments         int           `json:"segments"` // stretches between charges
	From             string        `json:"from,omitempty"`
	To               string        `json:"to,omitempty"`
	PsiPerDay        *float64      `json:"psi_per_day,omitempty"`
	LowPsiPerDay     *float64      `json:"low_psi_per_day,omitempty"` // 95 % interval
	HighPsiPerDay    *float64      `json:"high_psi_per_day,omitempty"`
	FreeGasMLPerHour *float64      `json:"free_gas_ml_per_hour,omitempty"` // lost, at 20 C and 101.325 kPa
	Leak             string        `json:"leak"`                           // in words
	LeakSeen         bool          `json:"leak_seen"`
	AllowedPsiPerDay *float64      `json:"allowed_psi_per_day,omitempty"`
	AboveAllowed     *float64      `json:"above_allowed,omitempty"` // probability
	RobustPsiPerDay  *float64      `json:"robust_psi_per_day,omitempty"`
	RobustDisagrees  bool          `json:"robust_disagrees,omitempty"`
	GaugesDisagree   bool          `json:"gauges_disagree,omitempty"`
	Forecast         *forecastJSON `json:"forecast,omitempty"`
	NoForecast       string        `json:"no_forecast,omitempty"`
	Odd              []oddJSON     `json:"odd,omitempty"`
	Passed           []passedJSON  `json:"passed_over,omitempty"`
	Why              string        `json:"why,omitempty"` // there is no rate
}

type forecastJSON struct {
	LimitPsi  float64 `json:"limit_psi"`
	Out       bool    `json:"out_already"`
	NotBefore string  `json:"not_before"` // 95 %
	Likely    string  `json:"likely,omitempty"`
	By        string  `json:"by,omitempty"` // 95 %; none: the history does not show that it ever leaves
}

type oddJSON struct {
	Entry string  `json:"entry"`
	By    float64 `json:"by"` // in standard uncertainties; negative: reads low
}

type passedJSON struct {
	Entry string `json:"entry"`
	Why   string `json:"why"`
}

func newTrend() *cobra.Command {
	var h home
	var asJSON bool
	var picture string
	cmd := &cobra.Command{Use: "trend UNIT", Short: "How fast a unit loses gas, and when it leaves its limits", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand trend HA-40/104\n  chargehand trend HA-40/104 --plot trend.svg",
		Long: "Fit a unit's readings between charges: the rate with its 95 % interval, against what the sheet allows, and when the charge\n" +
			"leaves its limits. A gauge's own error is shared by all its readings, so neither a steady error nor a change of gauge is a leak.\n" +
			"Few readings give wide intervals; a date needs eight between charges. Readings that do not fit are pointed at and stay in.",
	}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	addPlot(cmd, &picture)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			u, err := pickUnit(cmd, m, args)
			if err != nil {
				return err
			}
			w := verdict.Watch(m, u)
			in := verdict.UnitsOf(m)
			if picture != "" {
				if w.Fit == nil {
					return couldNot(fmt.Errorf("there is no trend of %s to draw: %s", unitName(u.Ref), w.Why), "Read the unit again, or draw another")
				}
				if err := writePlot(picture, trendPicture(&w, in)); err != nil {
					return err
				}
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), trendFacts(&w, in))
			}
			printTrend(cmd.OutOrStdout(), &w, in)
			return nil
		})
	}
	return cmd
}

func ptr[T any](v T) *T { return &v }

// round2 is for figures whose digits beyond the second say nothing.
func round2(v float64) float64 {
	if v == 0 || math.IsInf(v, 0) || math.IsNaN(v) {
		return 0
	}
	step := math.Pow(10, 2-math.Floor(math.Log10(math.Abs(v))))
	return math.Round(v*step) / step
}

func trendFacts(w *verdict.Watched, in calc.Units) trendJSON {
	j := trendJSON{Unit: unitName(w.Unit), Readings: len(w.Points), Why: w.Why, NoForecast: w.NoDate, Leak: leakWords(w, in)}
	for _, p := range w.Passed {
		j.Passed = append(j.Passed, passedJSON{p.Entry.String(), p.Why})
	}
	if w.Allowed > 0 {
		j.AllowedPsiPerDay = ptr(round2(w.Allowed.PsiPerDay()))
	}
	f := w.Fit
	if f == nil {
		return j
	}
	j.Segments, j.LeakSeen, j.RobustDisagrees, j.GaugesDisagree = len(f.Levels), f.LeakSeen(), f.RobustDisagrees, f.GaugesDisagree
	j.From, j.To = w.Seen[0].At.Format(time.DateOnly), w.Last().Format(time.DateOnly)
	j.PsiPerDay, j.LowPsiPerDay, j.HighPsiPerDay = ptr(round2(f.Rate.PsiPerDay())), ptr(round2(f.Low.PsiPerDay())), ptr(round2(f.High.PsiPerDay()))
	if w.Charge != nil {
		if q, err := w.Charge.FreeGas(f.Rate); err == nil {
			j.FreeGasMLPerHour = ptr(round2(float64(q)))
		}
	}
	if w.Allowed > 0 {
		if p, ok := f.Exceeds(w.Allowed); ok {
			j.AboveAllowed = ptr(math.Round(p*1e4) / 1e4)
		}
	}
	if f.Robust != nil {
		j.RobustPsiPerDay = ptr(round2(f.Robust.Slope.PsiPerDay()))
	}
	for id, by := range w.OddEntries() {
		j.Odd = append(j.Odd, oddJSON{id.String(), round2(by)})
	}
	if c := w.Forecast; c != nil {
		j.Forecast = &forecastJSON{LimitPsi: inPsi(c.Limit), Out: c.Out, NotBefore: c.NotBefore.Format(time.DateOnly)}
		if !c.Likely.IsZero() {
			j.Forecast.Likely = c.Likely.Format(time.DateOnly)
		}
		if !c.By.IsZero() {
			j.Forecast.By = c.By.Format(time.DateOnly)
		}
	}
	return j
}

// leakWords says what may be claimed, and no more.
func leakWords(w *verdict.Watched, in calc.Units) string {
	f := w.Fit
	switch {
	case f == nil:
		return "nothing can be said"
	case f.LeakSeen():
		return fmt.Sprintf("it loses %s to %s", in.PerDay((-f.High).PerDay()), in.PerDay((-f.Low).PerDay()))
	case f.Standing == trend.BudgetOnly:
		return fmt.Sprintf("too few readings to claim anything; a loss above %s would not fit them", in.PerDay(f.LossBelow().PerDay()))
	}
	return fmt.Sprintf("no leak seen above %s", in.PerDay(f.LossBelow().PerDay()))
}

// forecastWords never gives a bare date.
func forecastWords(c *trend.Forecast, in calc.Units) string {
	limit := in.Pressure(c.Limit)
	switch {
	case c.Out && c.By.IsZero():
		return fmt.Sprintf("the line lies beyond %s already, and the readings cannot tell it from in limits", limit)
	case c.Out:
		return fmt.Sprintf("out of limits by the line already, beyond %s; surely by %s", limit, c.By.Format(time.DateOnly))
	case c.By.IsZero():
		return fmt.Sprintf("not before %s at %s; the readings do not show that it ever leaves", c.NotBefore.Format(time.DateOnly), limit)
	}
	return fmt.Sprintf("leaves %s between %s and %s, likely about %s", limit, c.NotBefore.Format(time.DateOnly), c.By.Format(time.DateOnly), c.Likely.Format(time.DateOnly))
}

func printTrend(out io.Writer, w *verdict.Watched, in calc.Units) {
	fmt.Fprintf(out, "unit        %s\n", unitName(w.Unit))
	defer func() {
		for _, p := range w.Passed {
			fmt.Fprintf(out, "passed over entry %s: %s\n", p.Entry.Short(), p.Why)
		}
	}()
	f := w.Fit
	if f == nil {
		fmt.Fprintf(out, "rate        none: %s\n", w.Why)
		return
	}
	fmt.Fprintf(out, "readings    %d in %s between charges, %s to %s\n", len(w.Points), stretches(len(f.Levels)), w.Seen[0].At.Format(time.DateOnly), w.Last().Format(time.DateOnly))
	fmt.Fprintf(out, "rate        %s (95 %%: %s to %s)", in.PerDay(f.Rate.PerDay()), in.PerDay(f.Low.PerDay()), in.PerDay(f.High.PerDay()))
	if w.Charge != nil {
		if q, err := w.Charge.FreeGas(f.Rate); err == nil {
			fmt.Fprintf(out, ", %.2g mL/h of free gas lost", float64(q)+0)
		}
	}
	fmt.Fprintf(out, "\nleak        %s\n", leakWords(w, in))
	switch p, ok := f.Exceeds(w.Allowed); {
	case w.NoAllow != "":
		fmt.Fprintf(out, "allowed     %s\n", w.NoAllow)
	case w.Allowed == 0:
		fmt.Fprintf(out, "allowed     %s rev %s states no allowed loss\n", w.Sheet.Document, w.Sheet.Revision)
	case !ok:
		fmt.Fprintf(out, "allowed     %s by %s rev %s; too few readings to compare\n", in.PerDay(w.Allowed.PerDay()), w.Sheet.Document, w.Sheet.Revision)
	default:
		fmt.Fprintf(out, "allowed     %s by %s rev %s; chance that the loss is above it: %s\n", in.PerDay(w.Allowed.PerDay()), w.Sheet.Document, w.Sheet.Revision, chance(p))
	}
	if w.Forecast != nil {
		fmt.Fprintf(out, "forecast    %s, if nothing changes\n", forecastWords(w.Forecast, in))
	} else {
		fmt.Fprintf(out, "forecast    none: %s\n", w.NoDate)
	}
	if r := f.Robust; r != nil {
		note := ""
		if f.RobustDisagrees {
			note = "; it disagrees with the fit: look at the odd readings"
		}
		fmt.Fprintf(out, "robust      %s by the median of all pairs (Theil-Sen)%s\n", in.PerDay(r.Slope.PerDay()), note)
	}
	if f.GaugesDisagree {
		fmt.Fprintln(out, "gauges      they differ by more than their classes make likely: compare two on one unit")
	}
	for _, o := range f.Odd {
		for i, p := range w.Points {
			if p == o.Point {
				s := w.Seen[w.Of[i]]
				fmt.Fprintf(out, "odd         entry %s of %s, gauge %s: %s, %.1f standard uncertainties %s the rest\n", s.Entry.Short(), s.At.Format(time.DateOnly), s.Gauge.Name, in.Pressure(p.Pressure), math.Abs(o.By), map[bool]string{true: "below", false: "above"}[o.By < 0])
			}
		}
	}
	if g := f.Without; g != nil {
		fmt.Fprintf(out, "without     %s (95 %%: %s to %s) when the odd ones are left out\n", in.PerDay(g.Rate.PerDay()), in.PerDay(g.Low.PerDay()), in.PerDay(g.High.PerDay()))
	}
}

// chance writes a probability.
func chance(p float64) string {
	switch {
	case p > 0.999:
		return "over 99.9 %"
	case p < 0.001:
		return "under 0.1 %"
	}
	return fmt.Sprintf("%.1f %%", 100*p)
}

// addPlot gives a command the flag that names a picture.
func addPlot(cmd *cobra.Command, file *string) {
	cmd.Flags().StringVar(file, "plot", "", "write a picture to this file: .svg, .png or .pdf by its name")
}

// writePlot draws to a temporary name and renames, so that no half picture is left under the final one.
func writePlot(file string, p plot.Picture) (err error) {
	as, err := plot.ParseFormat(strings.TrimPrefix(filepath.Ext(file), "."))
	if err != nil {
		return usageError(fmt.Sprintf("--plot %q: the name must end in .svg, .png or .pdf", file), "Name the file so")
	}
	f, err := os.CreateTemp(filepath.Dir(file), ".chargehand-*")
	if err != nil {
		return couldNot(fmt.Errorf("--plot: %w", plainly(err)), "Name a file in a folder that can be written")
	}
	defer os.Remove(f.Name())
	if err := plot.Write(f, p, as, plot.Light); err != nil {
		f.Close()
		return couldNot(fmt.Errorf("--plot %q: %w", file, err), "Try another format, or without --plot")
	}
	if err := f.Close(); err != nil {
		return couldNot(fmt.Errorf("--plot: %w", plainly(err)), "Make room on the disk")
	}
	if err := os.Chmod(f.Name(), 0o644); err != nil {
		return err
	}
	if err := os.Rename(f.Name(), file); err != nil {
		return couldNot(fmt.Errorf("--plot: %w", plainly(err)), "Name a file in a folder that can be written")
	}
	return nil
}

// trendPicture is drawn in the book's own units; the fit runs on past the last reading for half of what was seen, or to the
// forecast where that is nearer.
func trendPicture(w *verdict.Watched, in calc.Units) plot.Trend {
	unit := in.P
	if _, err := quantity.GaugePressure(0).InUnit(unit); err != nil {
		unit = "psi"
	}
	v := func(g quantity.GaugePressure) float64 { return show(g.InUnit(unit)) }
	f := w.Fit
	at := in.Temperature(w.Limits.Reference)
	if w.Limits.Chart != nil {
		at = in.Temperature(293.15)
	}
	t := plot.Trend{Title: unitName(w.Unit) + ": " + leakWords(w, in), Quantity: "charge corrected to " + at, Unit: unit,
		Limits: &plot.Limits{Low: v(w.Low), Target: v(w.Target), High: v(w.High)}}
	odd := w.OddEntries()
	for i, p := range w.Points {
		s := w.Seen[w.Of[i]]
		r := plot.Reading{When: p.At, P: v(p.Pressure), U: 2 * v(quantity.GaugePressure(math.Hypot(float64(p.U), math.Hypot(float64(p.Bias), float64(p.Warm)))))}
		if by, is := odd[s.Entry]; is {
			r.Odd = fmt.Sprintf("%.1f u %s", math.Abs(by), map[bool]string{true: "low", false: "high"}[by < 0])
		}
		t.Readings = append(t.Readings, r)
		if s.Left && i > 0 && w.Seen[w.Of[i-1]].Entry == s.Entry {
			t.Charges = append(t.Charges, plot.Charge{When: p.At, From: v(w.Points[i-1].Pressure), To: v(p.Pressure), FromKnown: true})
		}
	}
	first, last := w.Points[0].At, w.Last()
	until := last.Add(last.Sub(first) / 2)
	if c := w.Forecast; c != nil && !c.By.IsZero() && c.By.Before(last.Add(2*last.Sub(first))) {
		t.Leaves = &plot.Leaves{First: c.NotBefore, Last: c.By}
		if c.By.After(until) {
			until = c.By
		}
	}
	start := f.Levels[len(f.Levels)-1].Start
	const steps = 40
	for i := range steps + 1 {
		when := start.Add(time.Duration(float64(until.Sub(start)) * float64(i) / steps))
		p, low, high := f.Line(when)
		t.Fit = append(t.Fit, plot.FitPoint{When: when, P: v(p), Low: v(low), High: v(high)})
	}
	if w.Allowed > 0 {
		p, _, _ := f.Line(start)
		t.Allowed = []plot.Point{{When: start, P: v(p)}, {When: until, P: v(p - quantity.GaugePressure(float64(w.Allowed)*until.Sub(start).Seconds()))}}
	}
	return t
}

func stretches(n int) string {
	if n == 1 {
		return "1 stretch"
	}
	return fmt.Sprintf("%d stretches", n)
}

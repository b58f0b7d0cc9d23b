package main

import (
	"errors"
	"fmt"
	"io"
	"math"
	"regexp"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/calc/settle"
	"example.org/chargehand/cmd/chargehand/plot"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// enough is how near to rest a retest must be to mean something: one division of a common dial (common practice, no source).
const enough = 10 // psi

type settleJSON struct {
	Unit        string  `json:"unit"`
	Readings    int     `json:"readings"`
	SettledPsi  float64 `json:"settled_psi"` // on this gauge, at rest
	LowPsi      float64 `json:"low_psi"`     // 95 %
	HighPsi     float64 `json:"high_psi"`
	WithinPsi   float64 `json:"within_psi"` // what a retest is to be within
	RetestAfter string  `json:"retest_after"`
	GasToShell  string  `json:"gas_to_shell"` // time constant, with its 95 % interval
	ShellToAir  string  `json:"shell_to_air"`
	Learnt      bool    `json:"learnt"`
	Entry       string  `json:"entry,omitempty"`
}

func newSettle() *cobra.Command {
	var h home
	var gauge, note, picture string
	var closed stamp
	var readings []string
	var asJSON, unsigned bool
	var retest time.Duration
	surrounding, within := bookTemperature(), bookPressure()
	cmd := &cobra.Command{Use: "settle UNIT", Short: "Follow a charge while it settles: where it ends, and when a retest means something", Args: usageArgs(cobra.MaximumNArgs(1)),
		Example: "  chargehand settle HA-40/104 --gauge G-7 --closed 2031-03-04T21:15Z --reading 30s=1325psi --reading 2m=1309psi --reading 10m=1296psi --reading 25m=1287psi",
		Long: "Follow a charge while it settles. Filling heats the gas: it cools to the shell in tens of seconds, and the shell to the air in\n" +
			"tens of minutes, so a wait of one minute means little. Give three or more timed readings after the valve was closed. The unit's\n" +
			"own time constants are learnt for its next plan. Without readings it shows what the last ones said.\n\nExit status 1: a retest at --retest is too early."}
	addHome(cmd, &h, true)
	addJSON(cmd, &asJSON)
	addPlot(cmd, &picture)
	f := cmd.Flags()
	f.StringVar(&gauge, "gauge", "", "asset number of the gauge, one for all readings")
	f.Var(&closed, "closed", "when the charging valve was closed")
	f.StringArrayVar(&readings, "reading", nil, "TIME=PRESSURE since then, such as 2m=1309psi; once for each reading")
	f.Var(surrounding, "surrounding", "temperature around the unit")
	f.DurationVar(&retest, "retest", 0, "when you mean to read again, after the valve was closed, such as 20m")
	f.Var(within, "within", "how near to rest a retest is to be (else 10 psi)")
	f.StringVar(&note, "note", "", "anything worth keeping")
	f.BoolVar(&unsigned, "unsigned", false, "show the result and sign nothing")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, dir string) error {
			m := b.Meaning()
			in := verdict.UnitsOf(m)
			u, err := pickUnit(cmd, m, args)
			if err != nil {
				return err
			}
			var shown record.ID
			body, fresh := record.Settling{}, len(readings) > 0
			if fresh {
				if err := fill(cmd, m, want{"gauge", usual(m, unitName(u.Ref))}, want{"closed", ""}); err != nil {
					return err
				}
				if body, err = settlingBody(m, u, gauge, readings, in); err != nil {
					return err
				}
				body.Closed, body.Surrounding, body.Note = closed.record(), surrounding.amount(), note
			} else if len(u.Settled) > 0 {
				shown = u.Settled[len(u.Settled)-1]
				body = m.Item(shown).Body.(record.Settling)
			} else {
				return usageError(fmt.Sprintf("no settling readings of %s in this book", unitName(u.Ref)), "Give three or more with --reading, such as --reading 2m=1309psi")
			}
			fit, err := verdict.Settling(m, u, shown, body)
			if err != nil {
				return couldNot(fmt.Errorf("the readings cannot tell where it settles: %w", inBookUnits(err, in)), "Take more readings over a longer time, by one gauge with the valve closed")
			}
			d := within.value
			if d <= 0 {
				d = must(quantity.Written{Mantissa: enough, Unit: "psi"}.Gauge())
			}
			last := time.Duration(float64(body.Seconds.Values[len(body.Seconds.Values)-1]) * math.Pow10(body.Seconds.Exponent) * 1e9)
			r, err := fit.Retest(max(retest, last), d)
			if err != nil {
				return couldNot(inBookUnits(err, in), "Ask for less with --within, or take more readings")
			}
			if picture != "" {
				if err := writePlot(picture, settlePicture(u, body, fit, r, in)); err != nil {
					return err
				}
			}
			w := quietWith(cmd, asJSON)
			printSettle(w, u, body, fit, r, d, in)
			facts := settleFacts(u, body, fit, r, d)
			if fresh && !unsigned {
				v, err := h.sign(cmd, w, b, dir, ledger.Draft{Kind: record.KindSettling, Body: body})
				if err != nil {
					return err
				}
				facts.Entry = v.ID().String()
			}
			if asJSON {
				if err := writeJSON(cmd.OutOrStdout(), facts); err != nil {
					return err
				}
			}
			if retest > 0 && r.TooEarly {
				fmt.Fprintf(w, "retest      %s is too early: the chance of being within %s of rest is then %s; wait until %s after the valve was closed\n", lasting(retest), in.Pressure(d), chance(r.Chance), lasting(r.Earliest))
				return errNo
			}
			return nil
		})
	}
	return cmd
}

// must is for conversions of this program's own constants.
func must[T any](v T, err error) T {
	if err != nil {
		panic(err)
	}
	return v
}

// settlingBody reads TIME=PRESSURE pairs in any order.
func settlingBody(m *ledger.Meaning, u *ledger.Unit, gauge string, readings []string, in calc.Units) (record.Settling, error) {
	b := record.Settling{Unit: u.Ref, Gauge: gauge}
	if m.Gauge(gauge) == nil {
		return b, usageError(fmt.Sprintf("no gauge %q in this book", gauge), "See 'chargehand gauge list', or register it with 'chargehand gauge add'")
	}
	type pair struct {
		seconds int64
		p       *typed[quantity.GaugePressure]
	}
	var pairs []pair
	for _, r := range readings {
		when, value, ok := strings.Cut(r, "=")
		after, err := time.ParseDuration(when)
		if !ok || err != nil || after < 0 || after%time.Second != 0 {
			return b, usageError(fmt.Sprintf("--reading %q is not a time with a pressure", r), "Write it as 2m=1309psi: the time since the valve was closed, then what the gauge showed")
		}
		p := bookPressure()
		if err := p.Set(value); err == nil && p.withUnit(m.Founding) != "" {
			value = p.withUnit(m.Founding)
		}
		if err := p.Set(value); err != nil {
			var v *valueError
			if errors.As(err, &v) {
				return b, usageError(fmt.Sprintf("--reading %q: %s", r, v.what), v.todo)
			}
			return b, err
		}
		if err := refusePressure("reading", p, m.Gauge(gauge)); err != nil {
			return b, err
		}
		pairs = append(pairs, pair{int64(after / time.Second), p})
	}
	slices.SortFunc(pairs, func(a, b pair) int { return int(a.seconds - b.seconds) })
	b.Seconds, b.Pressures = record.Series{Unit: "s"}, record.Series{}
	for i, p := range pairs {
		w := p.p.written
		switch {
		case i > 0 && p.seconds == pairs[i-1].seconds:
			return b, usageError(fmt.Sprintf("two readings at %s", time.Duration(p.seconds)*time.Second), "Give one of them")
		case i > 0 && w.Unit != b.Pressures.Unit:
			return b, usageError(fmt.Sprintf("readings in %s and in %s", b.Pressures.Unit, w.Unit), "Write all in the unit of the dial")
		}
		b.Pressures.Unit = w.Unit
		b.Seconds.Values = append(b.Seconds.Values, p.seconds)
		b.Pressures.Exponent = min(b.Pressures.Exponent, w.Exponent)
	}
	for _, p := range pairs {
		w := p.p.written
		b.Pressures.Values = append(b.Pressures.Values, w.Mantissa*int64(math.Pow10(w.Exponent-b.Pressures.Exponent)))
	}
	return b, nil
}

// lasting writes a span of time to the second under three minutes, to the minute beyond.
func lasting(d time.Duration) string {
	if d < 3*time.Minute {
		return d.Round(time.Second).String()
	}
	return strings.TrimSuffix(d.Round(time.Minute).String(), "0s")
}

func constantWords(c settle.Constant) string {
	low, high := c.Between()
	return fmt.Sprintf("%s (95 %%: %s to %s)", lasting(c.Median), lasting(low), lasting(high))
}

func settleFacts(u *ledger.Unit, b record.Settling, f *settle.Fit, r settle.Retest, d quantity.GaugePressure) settleJSON {
	return settleJSON{Unit: unitName(u.Ref), Readings: len(b.Seconds.Values), SettledPsi: inPsi(f.Settled), LowPsi: inPsi(f.Low), HighPsi: inPsi(f.High), WithinPsi: inPsi(d),
		RetestAfter: lasting(r.Earliest), GasToShell: constantWords(f.Fast), ShellToAir: constantWords(f.Slow), Learnt: f.LearntFast || f.LearntSlow}
}

func printSettle(w io.Writer, u *ledger.Unit, b record.Settling, f *settle.Fit, r settle.Retest, d quantity.GaugePressure, in calc.Units) {
	fmt.Fprintf(w, "unit        %s%s\n", unitName(u.Ref), fitted(u))
	fmt.Fprintf(w, "readings    %d by gauge %s, valve closed %s\n", len(b.Seconds.Values), b.Gauge, clock(b.Closed))
	fmt.Fprintf(w, "settles at  %s on this gauge (95 %%: %s)\n", in.Pressure(f.Settled), in.Between(f.Low, f.High))
	if f.Scatter > 1.5 {
		fmt.Fprintf(w, "scatter     the readings scatter %.1f times what the gauge explains; the interval is widened by it\n", f.Scatter)
	}
	fmt.Fprintf(w, "retest      from %s after the valve was closed on, at %s, it is within %s of rest (95 %%)\n", lasting(r.Earliest), clock(record.Time{Unix: b.Closed.Unix + int64(r.Earliest.Seconds()), OffsetMin: b.Closed.OffsetMin}), in.Pressure(d))
	state := "as is usual; these readings taught nothing new"
	if f.LearntFast || f.LearntSlow {
		state = "learnt, for the next plan"
	}
	fmt.Fprintf(w, "constants   gas to shell %s, shell to air %s: %s\n", constantWords(f.Fast), constantWords(f.Slow), state)
}

// inBookUnits words an error of the core that quotes pascals.
func inBookUnits(err error, in calc.Units) error {
	return errors.New(pascals.ReplaceAllStringFunc(err.Error(), func(s string) string {
		var v float64
		if _, scan := fmt.Sscanf(s, "%g Pa", &v); scan != nil {
			return s
		}
		return in.Pressure(quantity.GaugePressure(v))
	}))
}

// settlePicture shows the readings and where they lead, to twice as long or to the retest.
func settlePicture(u *ledger.Unit, b record.Settling, f *settle.Fit, r settle.Retest, in calc.Units) plot.Settling {
	unit := in.P
	if _, err := quantity.GaugePressure(0).InUnit(unit); err != nil {
		unit = "psi"
	}
	v := func(g quantity.GaugePressure) float64 { return show(g.InUnit(unit)) }
	p := plot.Settling{Title: fmt.Sprintf("%s settles at %s (95 %%: %s)", unitName(u.Ref), in.Pressure(f.Settled), in.Between(f.Low, f.High)), Unit: unit,
		Settled: v(f.Settled), Low: v(f.Low), High: v(f.High), Retest: r.Earliest.Minutes()}
	for i, s := range b.Seconds.Values {
		g := must(quantity.Written{Mantissa: b.Pressures.Values[i], Exponent: b.Pressures.Exponent, Unit: b.Pressures.Unit}.Gauge())
		p.Points = append(p.Points, plot.XY{X: float64(s) * math.Pow10(b.Seconds.Exponent) / 60, Y: v(g)})
	}
	end := max(2*p.Points[len(p.Points)-1].X, p.Retest)
	start := p.Points[0].X
	for i := range 81 { // closer together where it moves fast
		x := start + (end-start)*float64(i*i)/6400
		p.Approach = append(p.Approach, plot.XY{X: x, Y: v(f.At(time.Duration(x * 60 * 1e9)))})
	}
	return p
}

var pascals = regexp.MustCompile(`-?[0-9][0-9.e+]* Pa\b`)

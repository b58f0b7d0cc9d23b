package main

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

func amountOf(w quantity.Written) record.Amount {
	return record.Amount{Mantissa: w.Mantissa, Exponent: w.Exponent, Unit: w.Unit}
}

func optional(w quantity.Written) *record.Amount {
	if w.Unit == "" {
		return nil
	}
	a := amountOf(w)
	return &a
}

func newSheet() *cobra.Command {
	var h home
	var s record.Sheet
	var chart string
	var effective stamp
	charge, minus, plus, system, rating := gaugePressure(), gaugePressure(), gaugePressure(), gaugePressure(), gaugePressure()
	ref := gasTemperature()
	cmd := &cobra.Command{Use: "add", Short: "Enter the approved limits of a type, as its manual gives them", Args: usageArgs(cobra.NoArgs),
		Example: "  chargehand sheet add --part HA-40 --charge 1000psi --minus 50psi --plus 50psi --at 70F --document CM-29 --revision B\n  chargehand sheet add --part HA-60 --chart chart.csv --at 70F --document CM-31 --revision A"}
	f := cmd.Flags()
	f.StringVar(&s.Part, "part", "", "part number of the type")
	f.StringVar(&s.Gas, "gas", "nitrogen", "gas of the charge: nitrogen or air")
	f.StringVar(&s.Construction, "construction", "", "spherical diaphragm, spherical bladder, bladder or piston")
	f.Var(charge, "charge", "reference charge")
	f.Var(minus, "minus", "tolerance below it")
	f.Var(plus, "plus", "tolerance above it")
	f.Var(ref, "at", "temperature that the reference charge holds at")
	f.StringVar(&chart, "chart", "", "CSV file of the manual's chart: temperature,low,charge,high with units, one row a line, after a heading")
	f.Var(system, "system-pressure", "hydraulic system pressure")
	f.Var(rating, "valve-rating", "pressure class of the charging valve")
	f.StringVar(&s.Document, "document", "", "the manual's number")
	f.StringVar(&s.Revision, "revision", "", "its revision")
	f.Var(&effective, "effective", "in force from (else now)")
	signing(cmd, &h, record.KindSheet, func(*ledger.Meaning, []string) (any, error) {
		if err := requireFlags(cmd, "part", "at", "document", "revision"); err != nil {
			return nil, err
		}
		if err := refuseTolerance(minus, plus); err != nil {
			return nil, err
		}
		s.ReferenceTemperature, s.Effective = amountOf(ref.written), effective.record()
		s.Charge, s.Minus, s.Plus = optional(charge.written), optional(minus.written), optional(plus.written)
		s.SystemPressure, s.ValveRating = optional(system.written), optional(rating.written)
		if chart != "" {
			rows, err := readChart(chart)
			if err != nil {
				return nil, err
			}
			s.Chart = rows
		}
		l, err := verdict.Limits(s)
		if err != nil {
			return nil, usageError("the sheet cannot be used: "+err.Error(), "Compare it with the manual and enter it again")
		}
		if l.Chart == nil {
			return s, nil
		}
		misfits, err := l.Chart.Misfits(l.Gas, l.Ambient)
		if err != nil {
			return nil, usageError("the chart cannot be compared with the gas: "+err.Error(), "Check the temperatures and pressures of its rows")
		}
		for _, m := range misfits {
			fmt.Fprintf(cmd.ErrOrStderr(), "look again  the row at %.0f F says %.0f psi; the other rows' gas would show %.0f psi there\n", show(m.Row.Temperature.InUnit("F")), show(m.Row.Charge.InUnit("psi")), show(m.Expected.InUnit("psi")))
		}
		return s, nil
	})
	return group("sheet", "Approved limits of a type", cmd)
}

// show drops the error of a conversion whose unit is a constant of this program.
func show(v float64, _ error) float64 { return v }

func readChart(name string) ([]record.ChartRow, error) {
	f, err := os.Open(name)
	if err != nil {
		return nil, usageError(fmt.Sprintf("--chart: %v", plainly(err)), "Name a CSV file")
	}
	defer f.Close()
	r := csv.NewReader(io.LimitReader(f, 1<<20))
	r.FieldsPerRecord, r.TrimLeadingSpace = 4, true
	lines, err := r.ReadAll()
	if err == nil && len(lines) < 3 {
		err = fmt.Errorf("%d rows", max(len(lines)-1, 0))
	}
	if err != nil {
		return nil, usageError(fmt.Sprintf("--chart %q: not a chart of two rows or more (%v)", name, err), "Write a heading and then rows such as 70F,950psi,1000psi,1050psi")
	}
	var rows []record.ChartRow
	for i, l := range lines[1:] {
		var w [4]quantity.Written
		for k, cell := range l {
			var err error
			if w[k], err = quantity.Parse(cell); err == nil && k == 0 {
				_, err = w[k].Temperature()
			} else if err == nil {
				_, err = w[k].Gauge()
			}
			if err != nil {
				return nil, usageError(fmt.Sprintf("--chart %q, line %d: %v", name, i+2, err), "Write each row as temperature,low,charge,high with units")
			}
		}
		rows = append(rows, record.ChartRow{Temperature: amountOf(w[0]), Low: amountOf(w[1]), Charge: amountOf(w[2]), High: amountOf(w[3])})
	}
	return rows, nil
}

func newUnit() *cobra.Command {
	var h, hf home
	var b record.UnitRegistered
	add := &cobra.Command{Use: "add", Short: "Make a unit known, by part number and serial", Args: usageArgs(cobra.NoArgs), Example: "  chargehand unit add --part HA-40 --serial 104"}
	add.Flags().StringVar(&b.Part, "part", "", "part number")
	add.Flags().StringVar(&b.Serial, "serial", "", "serial number")
	add.Flags().StringVar(&b.Note, "note", "", "anything worth keeping")
	signing(add, &h, record.KindUnitRegistered, func(*ledger.Meaning, []string) (any, error) {
		return b, requireFlags(add, "part", "serial")
	})
	var fit record.UnitFitted
	var when stamp
	fitting := &cobra.Command{Use: "fit UNIT", Short: "Say where a unit was fitted", Args: usageArgs(cobra.ExactArgs(1)), Example: "  chargehand unit fit HA-40/104 --aircraft \"KITE 2\" --position \"left brake\""}
	fitting.Flags().StringVar(&fit.Aircraft, "aircraft", "", "which aircraft")
	fitting.Flags().StringVar(&fit.Position, "position", "", "where on it")
	fitting.Flags().Var(&when, "when", "when it was fitted (else now)")
	signing(fitting, &hf, record.KindUnitFitted, func(m *ledger.Meaning, args []string) (any, error) {
		if err := requireFlags(fitting, "aircraft", "position"); err != nil {
			return nil, err
		}
		u, err := findUnit(m, args[0])
		if err != nil {
			return nil, err
		}
		fit.Unit, fit.When = u.Ref, when.record()
		return fit, nil
	})
	return group("unit", "Accumulators", add, fitting)
}

// findUnit takes PART/SERIAL, or a serial alone where only one unit has it.
func findUnit(m *ledger.Meaning, name string) (*ledger.Unit, error) {
	var found []*ledger.Unit
	for _, u := range m.Units {
		if unitName(u.Ref) == name || u.Ref.Serial == name {
			found = append(found, u)
		}
	}
	switch len(found) {
	case 1:
		return found[0], nil
	case 0:
		return nil, usageError(fmt.Sprintf("no unit %q in this book", name), "See 'chargehand board' for the units, or register it with 'chargehand unit add'")
	}
	return nil, usageError(fmt.Sprintf("%d units have the serial %q", len(found), name), "Name it with its part: "+unitName(found[0].Ref))
}

func unitName(r record.UnitRef) string { return r.Part + "/" + r.Serial }

func newGauge() *cobra.Command {
	var h home
	var b record.Gauge
	var calibrated, due stamp
	span, division := gaugePressure(), gaugePressure()
	add := &cobra.Command{Use: "add", Short: "Register a pressure gauge", Args: usageArgs(cobra.NoArgs), Example: "  chargehand gauge add --asset G-7 --span 3000psi --accuracy \"ASME 1A\" --division 10psi --calibrated 2031-01-10 --due 2032-01-10"}
	f := add.Flags()
	f.StringVar(&b.Asset, "asset", "", "asset number")
	f.Var(span, "span", "full scale")
	f.StringVar(&b.Accuracy, "accuracy", "", "ASME grade, EN class, or a figure such as 0.5% of span")
	f.Var(division, "division", "one division of the dial")
	f.Var(&calibrated, "calibrated", "day of calibration")
	f.Var(&due, "due", "day it is due again")
	f.StringVar(&b.Certificate, "certificate", "", "number of the calibration certificate")
	signing(add, &h, record.KindGauge, func(*ledger.Meaning, []string) (any, error) {
		if err := requireFlags(add, "asset", "span", "accuracy", "division", "calibrated", "due"); err != nil {
			return nil, err
		}
		if _, err := calc.ParseAccuracy(b.Accuracy); err != nil {
			what, todo, _ := cutHint(err.Error())
			return nil, usageError("--accuracy: "+what, todo)
		}
		if err := refuseDates(&calibrated, &due); err != nil {
			return nil, err
		}
		if span.value <= 0 || division.value <= 0 || division.value > span.value/4 {
			return nil, usageError(fmt.Sprintf("a span of %s with divisions of %s cannot be", span, division), "Read both off the dial")
		}
		b.Span, b.Graduation, b.Calibrated, b.Due = amountOf(span.written), amountOf(division.written), calibrated.record(), due.record()
		b.Due.Unix += 24*60*60 - 1 // to the end of that day
		return b, nil
	})
	return group("gauge", "Pressure gauges", add)
}

func newCheck() *cobra.Command {
	var h home
	var r record.Reading
	var done stamp
	var soak time.Duration
	pressure, fluid, temperature, ambient, field := gaugePressure(), gaugePressure(), gasTemperature(), absolutePressure(), elevation()
	cmd := &cobra.Command{Use: "check UNIT", Short: "Record an as-found reading, with its verdict", Args: usageArgs(cobra.ExactArgs(1)),
		Example: "  chargehand check HA-40/104 --gauge G-7 --pressure 1180psi --temperature 41F --from shell --relieved \"brake pedal, 12 strokes\" --fluid 0psi",
		Long:    "Record an as-found reading. Before you read: pumps off and locked out, hydraulic pressure relieved by working every unit\nthat the accumulator feeds; eyes protected; stand clear of the valve's axis. The maintenance manual decides.\n\nExit status 1: the verdict is not a pass or conditional pass."}
	f := cmd.Flags()
	f.StringVar(&r.Gauge, "gauge", "", "asset number of the gauge")
	f.Var(pressure, "pressure", "what it shows")
	f.Var(temperature, "temperature", "gas temperature")
	f.StringVar(&r.TemperatureFrom, "from", "", "where the temperature was taken: shell, ambient or unknown")
	f.DurationVar(&soak, "soak", 0, "how long the unit stood at that temperature, such as 45m")
	f.StringVar(&r.Relieved, "relieved", "", "how the fluid side was relieved")
	f.Var(fluid, "fluid", "pressure seen on the fluid side then")
	f.Var(ambient, "ambient", "station pressure, absolute")
	f.Var(field, "elevation", "elevation of the field, for its standard pressure")
	f.Var(&done, "done", "when it was read (else now)")
	f.StringVar(&r.Note, "note", "", "anything worth keeping")
	f.StringVar(&r.Override, "unlikely-because", "", "why a reading far from the unit's history is right")
	addHome(cmd, &h, true)
	cmd.RunE = func(cmd *cobra.Command, args []string) (err error) {
		if err := requireFlags(cmd, "gauge", "pressure", "temperature", "from", "relieved", "fluid"); err != nil {
			return err
		}
		b, dir, err := h.open()
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, b.Close()) }()
		m := b.Meaning()
		u, err := findUnit(m, args[0])
		if err != nil {
			return err
		}
		if m.Gauge(r.Gauge) == nil {
			return usageError(fmt.Sprintf("no gauge %q in this book", r.Gauge), "Register it with 'chargehand gauge add'")
		}
		r.Unit, r.Pressure, r.Temperature, r.FluidPressure, r.Done = u.Ref, amountOf(pressure.written), amountOf(temperature.written), amountOf(fluid.written), done.record()
		if cmd.Flags().Changed("soak") {
			min := uint64(max(soak, 0) / time.Minute)
			r.SoakMin = &min
		}
		r.Ambient = optional(ambient.written)
		if field.written.Unit != "" {
			if r.Ambient != nil {
				return usageError("--ambient and --elevation both given", "Give the one that was measured")
			}
			p, err := quantity.StandardAtmosphereAt(field.value)
			if err != nil {
				return err
			}
			r.Ambient = &record.Amount{Mantissa: int64(p + 0.5), Exponent: -2, Unit: "hPa"}
		}
		if err := refuseReading(pressure, m.Gauge(r.Gauge), soak); err != nil {
			return err
		}
		j, err := verdict.Judge(m, record.ID{}, r)
		if err != nil {
			return err
		}
		if why := unlikely(m, u, j); why != "" && r.Override == "" {
			return usageError(why, "Read again; if it is right, say why with --unlikely-because")
		}
		if j.Sheet != nil {
			r.Sheet = j.Sheet.ID
		}
		printVerdict(cmd.OutOrStdout(), u, j)
		if _, err := h.sign(cmd, b, dir, ledger.Draft{Kind: record.KindReading, Body: r, Shown: shown(j)}); err != nil {
			return err
		}
		if j.Class != calc.Pass && j.Class != calc.ConditionalPass {
			return errNo
		}
		return nil
	}
	return cmd
}

func shown(j verdict.Judged) *record.Shown {
	s := &record.Shown{Verdict: j.Class.String(), Core: calc.CoreVersion}
	if j.Class != calc.NotAssessable {
		s.Corrected = &record.Amount{Mantissa: int64(j.Corrected), Exponent: -3, Unit: "kPa"}
	}
	return s
}

// unlikely compares with the unit's last reading: a corrected pressure more than a fifth away is asked about again (common
// practice, no source).
func unlikely(m *ledger.Meaning, u *ledger.Unit, j verdict.Judged) string {
	if len(u.Work) == 0 || j.Class == calc.NotAssessable {
		return ""
	}
	id := u.Work[len(u.Work)-1]
	last, err := verdict.Judge(m, id, m.Item(id).Body)
	if err != nil || last.Class == calc.NotAssessable || last.Corrected <= 0 || last.Sheet.ID != j.Sheet.ID {
		return ""
	}
	// A chart's pressures hold at the reading's own temperature, so both are taken against their targets.
	if x := float64(j.Corrected / j.Target * last.Target / last.Corrected); x > 1.2 || x < 0.8 {
		return fmt.Sprintf("the corrected pressure of %.0f psi is far from the %.0f psi of this unit's last entry", show(j.Corrected.InUnit("psi")), show(last.Corrected.InUnit("psi")))
	}
	return ""
}

func printVerdict(w io.Writer, u *ledger.Unit, j verdict.Judged) {
	fmt.Fprintf(w, "unit        %s", unitName(u.Ref))
	if u.Aircraft != "" {
		fmt.Fprintf(w, ", %s, %s", u.Aircraft, u.Position)
	}
	fmt.Fprintf(w, "\nverdict     %s\n", strings.ToUpper(j.Class.String()))
	if j.Class != calc.NotAssessable {
		in := func(g quantity.GaugePressure) float64 { return show(g.InUnit("psi")) }
		fmt.Fprintf(w, "corrected   %.0f psi, limits %.0f to %.0f psi, known to +/-%.0f psi (k = 2)\n", in(j.Corrected), in(j.Low), in(j.High), in(j.U))
		fmt.Fprintf(w, "in words    %s\n", j.Sentence)
	}
	for _, r := range j.Reasons {
		fmt.Fprintf(w, "because     %s\n", r)
	}
	fmt.Fprintf(w, "next        %s\n", j.Next)
	if j.Sheet != nil {
		fmt.Fprintf(w, "by          %s rev %s\n", j.Sheet.Document, j.Sheet.Revision)
	}
}

// findEntry takes an id or its first digits.
func findEntry(m *ledger.Meaning, name string) (record.ID, error) {
	var found []record.ID
	for i := range m.Entries {
		if id := m.Entries[i].ID(); len(name) >= 4 && strings.HasPrefix(id.String(), strings.ToLower(name)) {
			found = append(found, id)
		}
	}
	if len(found) != 1 {
		return record.ID{}, usageError(fmt.Sprintf("%q names %d entries", name, len(found)), "Give 4 or more of the first digits of one entry's id")
	}
	return found[0], nil
}

func newCountersign() *cobra.Command {
	var h home
	var b record.Countersign
	cmd := &cobra.Command{Use: "countersign ENTRY...", Short: "Put your signature to another hand's entries", Args: usageArgs(cobra.MinimumNArgs(1)), Example: "  chargehand countersign 3f2a91c0 --meaning inspected"}
	cmd.Flags().StringVar(&b.Meaning, "meaning", "inspected", "what your signature means")
	cmd.Flags().StringVar(&b.Note, "note", "", "anything worth keeping")
	return signing(cmd, &h, record.KindCountersign, func(m *ledger.Meaning, args []string) (any, error) {
		for _, a := range args {
			id, err := findEntry(m, a)
			if err != nil {
				return nil, err
			}
			b.Of = append(b.Of, id)
		}
		return b, nil
	})
}

func newWithdraw() *cobra.Command {
	var h home
	var b record.Withdrawal
	cmd := &cobra.Command{Use: "withdraw ENTRY", Short: "Take an entry out of force; it stays in the book", Args: usageArgs(cobra.ExactArgs(1)), Example: "  chargehand withdraw 3f2a91c0 --reason \"wrong unit\""}
	cmd.Flags().StringVar(&b.Reason, "reason", "", "why")
	return signing(cmd, &h, record.KindWithdrawal, func(m *ledger.Meaning, args []string) (any, error) {
		if err := requireFlags(cmd, "reason"); err != nil {
			return nil, err
		}
		id, err := findEntry(m, args[0])
		b.Of = id
		return b, err
	})
}

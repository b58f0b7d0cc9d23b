package main

import (
	"encoding/csv"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
	"text/tabwriter"

	"github.com/spf13/cobra"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

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

func newSheet() *cobra.Command {
	return group("sheet", "Approved limits of a type", newSheetAdd(), newSheetShow())
}

func newSheetAdd() *cobra.Command {
	var h home
	s := newSheetForm()
	var confirmed bool
	cmd := &cobra.Command{Use: "add", Short: "Enter the approved limits of a type, as its manual gives them", Args: usageArgs(cobra.NoArgs),
		Example: "  chargehand sheet add --part HA-40 --charge 1000psi --minus 50psi --plus 50psi --at 70F --document CM-29 --revision B\n  chargehand sheet add --part HA-60 --chart chart.csv --at 70F --document CM-31 --revision A",
		Long:    "Enter the approved limits of a type, from its manual and no other source. A newer revision is a sheet of its own, in force\nfrom its effective date. A chart's rows are compared with the gas: rows that do not fit the others are pointed at."}
	s.flags(cmd.Flags())
	cmd.Flags().BoolVar(&confirmed, "odd-rows-confirmed", false, "the chart's rows were compared with the manual, also those that do not fit the others")
	return signing(cmd, &h, record.KindSheet, func(m *ledger.Meaning, _ []string) (any, error) {
		if err := fill(cmd, m, s.wants(m)...); err != nil {
			return nil, err
		}
		b, err := s.body(m)
		if err != nil || len(s.misfits) == 0 || confirmed {
			return b, err
		}
		in := verdict.UnitsOf(m)
		for _, r := range s.misfits {
			fmt.Fprintf(cmd.ErrOrStderr(), "look again  the row at %s says %s; the other rows' gas would show %s there\n", in.Temperature(r.Row.Temperature), in.Pressure(r.Row.Charge), in.Pressure(r.Expected))
		}
		if terminal(cmd) == nil {
			return nil, usageError(fmt.Sprintf("--chart %q: %d rows do not fit the others", s.chart, len(s.misfits)), "Compare them with the manual; if they are as printed, say so with --odd-rows-confirmed")
		}
		if yes, err := askLine(cmd, "Are these rows as the manual prints them? yes or no: "); err != nil || yes != "yes" {
			return nil, couldNot(errors.New("the chart was not confirmed"), "Put the rows right in the file and enter it again; nothing was signed")
		}
		return b, nil
	})
}

type sheetJSON struct {
	Entry      string      `json:"entry"`
	Part       string      `json:"part"`
	Document   string      `json:"document"`
	Revision   string      `json:"revision"`
	Effective  string      `json:"effective"`
	InForce    bool        `json:"in_force"`
	Contested  bool        `json:"contested,omitempty"` // another says otherwise from the same day
	Gas        string      `json:"gas"`
	ReferenceF float64     `json:"reference_f"`
	LowPsi     float64     `json:"low_psi,omitempty"`
	TargetPsi  float64     `json:"target_psi,omitempty"`
	HighPsi    float64     `json:"high_psi,omitempty"`
	Chart      []chartJSON `json:"chart,omitempty"`
	SignedBy   string      `json:"signed_by"`
	limits     calc.Limits
	unusable   error
	written    record.Sheet
}

type chartJSON struct {
	TemperatureF float64 `json:"temperature_f"`
	LowPsi       float64 `json:"low_psi"`
	ChargePsi    float64 `json:"charge_psi"`
	HighPsi      float64 `json:"high_psi"`
}

func newSheetShow() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "show [PART]", Short: "Show the sheets, of one part or of all", Args: usageArgs(cobra.MaximumNArgs(1)), Example: "  chargehand sheet show HA-40"}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			sheets := []sheetJSON{}
			for _, s := range m.Sheets {
				if len(args) == 0 || s.Part == args[0] {
					sheets = append(sheets, sheetFacts(m, s))
				}
			}
			if len(args) == 1 && len(sheets) == 0 {
				return usageError(fmt.Sprintf("no sheet for part %q in this book", args[0]), "See 'chargehand sheet show' for all, or enter it with 'chargehand sheet add'")
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), sheets)
			}
			for _, s := range sheets {
				s.print(cmd.OutOrStdout(), verdict.UnitsOf(m))
			}
			return nil
		})
	}
	return cmd
}

func sheetFacts(m *ledger.Meaning, s *ledger.Sheet) sheetJSON {
	now := (&stamp{}).record()
	j := sheetJSON{Entry: s.ID.String(), Part: s.Part, Document: s.Document, Revision: s.Revision, Effective: day(s.Effective), Gas: s.Gas,
		SignedBy: handName(m, m.Item(s.ID).Key()), written: s.Sheet}
	in := m.SheetAt(s.Part, now)
	j.InForce = in != nil && in.ID == s.ID
	for _, o := range m.Contested(s.Part, now) {
		if o.ID == s.ID {
			j.InForce = true
		}
		j.Contested = j.Contested || j.InForce
	}
	if j.limits, j.unusable = verdict.Limits(s.Sheet, verdict.UnitsOf(m)); j.unusable != nil {
		return j
	}
	l := j.limits
	j.ReferenceF = inF(l.Reference)
	if l.Chart == nil {
		j.LowPsi, j.TargetPsi, j.HighPsi = inPsi(l.Charge-l.Minus), inPsi(l.Charge), inPsi(l.Charge+l.Plus)
		return j
	}
	for _, r := range l.Chart.Rows() {
		j.Chart = append(j.Chart, chartJSON{inF(r.Temperature), inPsi(r.Low), inPsi(r.Charge), inPsi(r.High)})
	}
	return j
}

func (s sheetJSON) print(w io.Writer, in calc.Units) {
	state := "not in force"
	if s.InForce {
		state = "in force"
	}
	if s.Contested {
		state = "CONTESTED: another sheet says otherwise from the same day; a lead settles it by a sheet that has seen both, or by withdrawing one"
	}
	fmt.Fprintf(w, "sheet       %s: %s rev %s, effective %s, %s\n", s.Part, s.Document, s.Revision, s.Effective, state)
	if s.unusable != nil {
		fmt.Fprintf(w, "cannot be used: %v\n", s.unusable)
		return
	}
	l := s.limits
	if l.Chart == nil {
		fmt.Fprintf(w, "limits      %s, target %s, at %s\n", in.Between(l.Charge-l.Minus, l.Charge+l.Plus), in.Pressure(l.Charge), in.Temperature(l.Reference))
	}
	if l.Chart != nil {
		for _, r := range l.Chart.Rows() {
			fmt.Fprintf(w, "at %-8s %s, target %s\n", in.Temperature(r.Temperature), in.Between(r.Low, r.High), in.Pressure(r.Charge))
		}
	}
	fmt.Fprintf(w, "gas         %s\n", s.Gas)
	for _, x := range []struct {
		name string
		a    *record.Amount
	}{{"system", s.written.SystemPressure}, {"useful to", s.written.LeastUseful}, {"gas volume", s.written.GasVolume}, {"application", s.written.Application}, {"leak up to", s.written.Leak}, {"valve class", s.written.ValveRating},
		{"from", s.written.TempLow}, {"up to", s.written.TempHigh}} {
		if x.a != nil {
			fmt.Fprintf(w, "%-11s %s\n", x.name, written(*x.a))
		}
	}
	for _, x := range []struct{ name, text string }{{"built as", s.written.Construction}, {"valve", s.written.Valve}, {"torque", s.written.Torque}} {
		if x.text != "" {
			fmt.Fprintf(w, "%-11s %s\n", x.name, x.text)
		}
	}
	fmt.Fprintf(w, "signed by   %s, entry %.8s\n", s.SignedBy, s.Entry)
}

func newUnit() *cobra.Command {
	return group("unit", "Accumulators", newUnitAdd(), newUnitFit(), newUnitRemove(), newUnitShow())
}

func newUnitAdd() *cobra.Command {
	var h home
	var b record.UnitRegistered
	cmd := &cobra.Command{Use: "add", Short: "Make a unit known, by part number and serial", Args: usageArgs(cobra.NoArgs), Example: "  chargehand unit add --part HA-40 --serial 104"}
	cmd.Flags().StringVar(&b.Part, "part", "", "part number")
	cmd.Flags().StringVar(&b.Serial, "serial", "", "serial number")
	cmd.Flags().StringVar(&b.Note, "note", "", "anything worth keeping")
	return signing(cmd, &h, record.KindUnitRegistered, func(m *ledger.Meaning, _ []string) (any, error) {
		if err := fill(cmd, m, needs("part", "serial")...); err != nil {
			return nil, err
		}
		if m.Unit(record.UnitRef{Part: b.Part, Serial: b.Serial}) != nil {
			return nil, usageError(fmt.Sprintf("unit %s/%s is in this book already", b.Part, b.Serial), "See 'chargehand unit show "+b.Part+"/"+b.Serial+"'")
		}
		return b, nil
	})
}

// signingUnit makes a command on one unit that signs what a form holds.
func signingUnit(cmd *cobra.Command, kind record.Kind, f form, unit *string) *cobra.Command {
	var h home
	f.flags(cmd.Flags())
	cmd.Args = usageArgs(cobra.MaximumNArgs(1))
	return signing(cmd, &h, kind, func(m *ledger.Meaning, args []string) (any, error) {
		u, err := pickUnit(cmd, m, args)
		if err != nil {
			return nil, err
		}
		*unit = unitName(u.Ref)
		if err := fill(cmd, m, f.wants(m)...); err != nil {
			return nil, err
		}
		return f.body(m)
	})
}

func newUnitFit() *cobra.Command {
	f := &fittedForm{}
	return signingUnit(&cobra.Command{Use: "fit UNIT", Short: "Say where a unit was fitted", Example: "  chargehand unit fit HA-40/104 --aircraft \"KITE 2\" --position \"left brake\""},
		record.KindUnitFitted, f, &f.unit)
}

func newUnitRemove() *cobra.Command {
	f := &removedForm{}
	return signingUnit(&cobra.Command{Use: "remove UNIT", Short: "Say that a unit was taken off; it stays in the book", Example: "  chargehand unit remove HA-40/104 --reason \"loses gas\""},
		record.KindUnitRemoved, f, &f.unit)
}

// pickUnit finds the unit that the argument names, and asks for it on a terminal where none was given.
func pickUnit(cmd *cobra.Command, m *ledger.Meaning, args []string) (*ledger.Unit, error) {
	if len(args) == 1 {
		return findUnit(m, args[0])
	}
	if terminal(cmd) == nil {
		return nil, usageError("no unit is named", "Name it as PART/SERIAL, such as: "+cmd.CommandPath()+" HA-40/104")
	}
	for _, u := range m.Units {
		fmt.Fprintf(cmd.ErrOrStderr(), "  %s%s\n", unitName(u.Ref), fitted(u))
	}
	for {
		name, err := askLine(cmd, "unit: ")
		if err != nil {
			return nil, err
		}
		u, err := findUnit(m, name)
		if err == nil {
			return u, nil
		}
		fmt.Fprintln(cmd.ErrOrStderr(), err)
	}
}

func fitted(u *ledger.Unit) string {
	if u.Aircraft == "" {
		return ""
	}
	return ", " + u.Aircraft + ", " + u.Position
}

type unitJSON struct {
	Unit     string      `json:"unit"`
	Aircraft string      `json:"aircraft,omitempty"`
	Position string      `json:"position,omitempty"`
	Sheet    *sheetJSON  `json:"sheet,omitempty"`
	History  []eventJSON `json:"history"`
}

// eventJSON is one entry of a unit's history, also one that no longer counts.
type eventJSON struct {
	Entry         string       `json:"entry"`
	Kind          record.Kind  `json:"kind"`
	At            string       `json:"at"`
	By            string       `json:"by"`
	What          string       `json:"what"` // as it was entered
	Verdict       *verdictJSON `json:"verdict,omitempty"`
	Standing      string       `json:"standing"` // "counts", or why it does not
	CorrectedBy   []string     `json:"corrected_by,omitempty"`
	Countersigned []string     `json:"countersigned_by,omitempty"`
	Flags         []string     `json:"flags,omitempty"`
}

func newUnitShow() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "show UNIT", Short: "Show a unit with its history, corrections and withdrawals visible", Args: usageArgs(cobra.MaximumNArgs(1)), Example: "  chargehand unit show HA-40/104"}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m := b.Meaning()
			u, err := pickUnit(cmd, m, args)
			if err != nil {
				return err
			}
			j := unitJSON{Unit: unitName(u.Ref), Aircraft: u.Aircraft, Position: u.Position, History: history(m, u)}
			if s := m.SheetAt(u.Ref.Part, (&stamp{}).record()); s != nil {
				facts := sheetFacts(m, s)
				j.Sheet = &facts
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), j)
			}
			w := cmd.OutOrStdout()
			fmt.Fprintf(w, "unit        %s%s\n", j.Unit, fitted(u))
			if j.Sheet != nil {
				j.Sheet.print(w, verdict.UnitsOf(m))
			} else {
				fmt.Fprintf(w, "sheet       none in force for part %s\n", u.Ref.Part)
			}
			for _, e := range j.History {
				fmt.Fprintf(w, "\n%s  %s, entry %.8s, %s\n            %s\n", e.At, e.Kind, e.Entry, e.By, e.What)
				if e.Verdict != nil {
					fmt.Fprintf(w, "            %s\n", e.Verdict.line(verdict.UnitsOf(m)))
				}
				if e.Standing != "counts" {
					fmt.Fprintf(w, "            does not count: %s\n", e.Standing)
				}
				for _, by := range e.CorrectedBy {
					fmt.Fprintf(w, "            corrected: %s\n", by)
				}
				for _, by := range e.Countersigned {
					fmt.Fprintf(w, "            countersigned: %s\n", by)
				}
				for _, f := range e.Flags {
					fmt.Fprintf(w, "            note: %s\n", f)
				}
			}
			return nil
		})
	}
	return cmd
}

// history lists every entry about a unit, in display order.
func history(m *ledger.Meaning, u *ledger.Unit) []eventJSON {
	events := []eventJSON{}
	for i := range m.Entries {
		it := &m.Entries[i]
		ref, about := unitOf(it.Entry().Body)
		now, _ := unitOf(it.Body)
		if !about || ref != u.Ref && now != u.Ref {
			continue
		}
		e := eventJSON{Entry: it.ID().String(), Kind: it.Entry().Kind, At: clock(it.Entry().Signed), By: handName(m, it.Key()), What: inWords(it.Entry().Body), Standing: "counts", Flags: it.Flags}
		if at, ok := ledger.Done(it.Body); ok {
			e.At = clock(at)
		}
		switch {
		case it.SetAside != "":
			e.Standing = "set aside: " + it.SetAside
		case it.WithdrawnBy != record.ID{}:
			e.Standing = amendment(m, "withdrawn", it.WithdrawnBy)
		default:
			if j, err := verdict.Judge(m, it.ID(), it.Body); err == nil {
				v := verdictFacts(u, j)
				e.Verdict = &v
			}
		}
		for _, id := range it.CorrectedBy {
			c := m.Item(id).Entry().Body.(record.Correction)
			if body, err := record.DecodeBody(c.Kind, c.Body); err == nil {
				e.CorrectedBy = append(e.CorrectedBy, amendment(m, "to "+inWords(body), id))
			}
		}
		for _, id := range it.Countersigned {
			e.Countersigned = append(e.Countersigned, amendment(m, m.Item(id).Entry().Body.(record.Countersign).Meaning, id))
		}
		for _, id := range it.Fallen {
			e.Flags = append(e.Flags, amendment(m, "a countersign fell, since it was made before a correction", id))
		}
		events = append(events, e)
	}
	return events
}

// amendment names an entry that changes the standing of another, who signed it and, where it gives one, the reason.
func amendment(m *ledger.Meaning, what string, by record.ID) string {
	it := m.Item(by)
	reason := ""
	switch b := it.Entry().Body.(type) {
	case record.Correction:
		reason = ": " + b.Reason
	case record.Withdrawal:
		reason = ": " + b.Reason
	}
	return fmt.Sprintf("%s, by %s, entry %s%s", what, handName(m, it.Key()), by.Short(), reason)
}

func unitOf(body any) (record.UnitRef, bool) {
	switch b := body.(type) {
	case record.UnitRegistered:
		return record.UnitRef{Part: b.Part, Serial: b.Serial}, true
	case record.UnitFitted:
		return b.Unit, true
	case record.UnitRemoved:
		return b.Unit, true
	case record.Reading:
		return b.Unit, true
	case record.Charge:
		return b.Unit, true
	case record.Snag:
		return b.Unit, true
	}
	return record.UnitRef{}, false
}

// inWords says what a person entered, in their units.
func inWords(body any) string {
	observed := func(p, t record.Amount, from string, soak *uint64) string {
		s := fmt.Sprintf("%s at %s (%s", written(p), written(t), from)
		if soak != nil {
			s += fmt.Sprintf(", %d min", *soak)
		}
		return s + ")"
	}
	after := func(relieved string, fluid record.Amount, seen []string, note string) string {
		s := fmt.Sprintf("; fluid side relieved by %s, %s seen", relieved, written(fluid))
		if len(seen) > 0 {
			s += "; noticed: " + strings.Join(seen, ", ")
		}
		if note != "" {
			s += "; " + note
		}
		return s
	}
	switch b := body.(type) {
	case record.UnitRegistered:
		return strings.TrimSuffix("made known; "+b.Note, "; ")
	case record.UnitFitted:
		return "fitted to " + b.Aircraft + ", " + b.Position
	case record.UnitRemoved:
		return "taken off: " + b.Reason
	case record.Reading:
		return "gauge " + b.Gauge + " showed " + observed(b.Pressure, b.Temperature, b.TemperatureFrom, b.SoakMin) + after(b.Relieved, b.FluidPressure, b.Seen, b.Note)
	case record.Charge:
		return fmt.Sprintf("gauge %s: found %s, left %s, %s from bottle %s%s", b.Gauge, observed(b.AsFound.Pressure, b.AsFound.Temperature, b.AsFound.TemperatureFrom, b.AsFound.SoakMin),
			observed(b.AsLeft.Pressure, b.AsLeft.Temperature, b.AsLeft.TemperatureFrom, b.AsLeft.SoakMin), b.Gas, b.Bottle, after(b.Relieved, b.FluidPressure, b.Seen, b.Note))
	case record.Sheet:
		limits := fmt.Sprintf("a chart of %d rows", len(b.Chart))
		if b.Charge != nil && b.Minus != nil && b.Plus != nil {
			limits = fmt.Sprintf("%s, -%s +%s at %s", written(*b.Charge), written(*b.Minus), written(*b.Plus), written(b.ReferenceTemperature))
		}
		return fmt.Sprintf("%s rev %s for %s: %s", b.Document, b.Revision, b.Part, limits)
	case record.Bottle:
		return fmt.Sprintf("bottle %s, %s of %s at %s and %s", b.Name, written(b.Volume), b.Gas, written(b.Pressure), written(b.Temperature))
	case record.Gauge:
		return fmt.Sprintf("gauge %s, 0 to %s, %s, divisions of %s, calibrated %s, due %s", b.Asset, written(b.Span), b.Accuracy, written(b.Graduation), day(b.Calibrated), day(b.Due))
	}
	return otherwise(body)
}

// otherwise words the kinds that are about no equipment.
func otherwise(body any) string {
	switch b := body.(type) {
	case record.Founding:
		return fmt.Sprintf("founded %q, by %s", b.Title, b.Name)
	case record.HandAdmitted:
		return fmt.Sprintf("admitted %s as %s, key %s", b.Name, roleList(b.Roles), b.Key.Short())
	case record.KeyAdded:
		return fmt.Sprintf("another key %s for hand %s", b.Key.Short(), b.Hand.Short())
	case record.KeyRetired:
		return fmt.Sprintf("retired key %s after number %d: %s", b.Key.Short(), b.LastSeq, b.Reason)
	case record.Correction:
		return fmt.Sprintf("corrects entry %s: %s", b.Of.Short(), b.Reason)
	case record.Withdrawal:
		return fmt.Sprintf("withdraws entry %s: %s", b.Of.Short(), b.Reason)
	case record.Countersign:
		var of []string
		for _, id := range b.Of {
			of = append(of, id.Short())
		}
		return fmt.Sprintf("%s: entries %s", b.Meaning, strings.Join(of, ", "))
	case record.Settling:
		return fmt.Sprintf("gauge %s: %d readings while it settled, valve closed %s", b.Gauge, len(b.Pressures.Values), clock(b.Closed))
	case record.Hold:
		return fmt.Sprintf("hold test from entry %s to %s, limit %s by %s", b.Start.Short(), b.End.Short(), written(b.Limit), b.Document)
	case record.Trace:
		return fmt.Sprintf("gauge %s: bleed-down of %d readings at %s", b.Gauge, len(b.Pressures.Values), written(b.Temperature))
	case record.Recall:
		what := "gauge " + b.Gauge
		if b.Gauge == "" {
			what = "sheet " + b.Sheet.Short()
		}
		return fmt.Sprintf("recalls %s since %s: %s", what, clock(b.Since), b.Reason)
	case record.Snag:
		return "snag: " + b.What
	case record.SnagCleared:
		return fmt.Sprintf("clears snag %s: %s", b.Of.Short(), b.How)
	case record.Handover:
		if b.Takes != (record.ID{}) {
			return fmt.Sprintf("takes over what entry %s gave, %d matters open", b.Takes.Short(), len(b.Open))
		}
		return fmt.Sprintf("hands over, %d matters open", len(b.Open))
	case record.Unknown:
		return "written by a newer chargehand"
	}
	return fmt.Sprintf("%T", body)
}

func newGauge() *cobra.Command {
	return group("gauge", "Pressure gauges", newGaugeAdd(), newGaugeList())
}

func newGaugeAdd() *cobra.Command {
	var h home
	g := newGaugeForm()
	cmd := &cobra.Command{Use: "add", Short: "Register a pressure gauge, or its new calibration", Args: usageArgs(cobra.NoArgs),
		Example: "  chargehand gauge add --asset G-7 --span 3000psi --accuracy \"ASME 1A\" --division 10psi --calibrated 2031-01-10 --due 2032-01-10"}
	g.flags(cmd.Flags())
	return signing(cmd, &h, record.KindGauge, func(m *ledger.Meaning, _ []string) (any, error) {
		if err := fill(cmd, m, g.wants(m)...); err != nil {
			return nil, err
		}
		return g.body(m)
	})
}

type gaugeJSON struct {
	Asset       string  `json:"asset"`
	SpanPsi     float64 `json:"span_psi"`
	DivisionPsi float64 `json:"division_psi"`
	Accuracy    string  `json:"accuracy"`
	Calibrated  string  `json:"calibrated"`
	Due         string  `json:"due"`
	State       string  `json:"state"` // "in calibration", "not yet calibrated", "out of calibration" or "recalled"
	Certificate string  `json:"certificate,omitempty"`
	Entry       string  `json:"entry"`
}

func newGaugeList() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "list", Short: "List the gauges and whether they are in calibration", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			m, now := b.Meaning(), (&stamp{}).record()
			gauges := []gaugeJSON{}
			w := tabwriter.NewWriter(cmd.OutOrStdout(), 0, 0, 2, ' ', 0)
			fmt.Fprintln(w, "GAUGE\tSPAN\tDIVISION\tACCURACY\tCALIBRATED\tDUE\tSTATE")
			for _, g := range m.Gauges {
				state := "in calibration"
				if m.Recalled(g.Asset) {
					state = "recalled"
				} else if now.Unix < g.Calibrated.Unix {
					state = "not yet calibrated"
				} else if now.Unix > g.Due.Unix {
					state = "out of calibration"
				}
				gauges = append(gauges, gaugeJSON{g.Asset, amountPsi(g.Span), amountPsi(g.Graduation), g.Accuracy, day(g.Calibrated), day(g.Due), state, g.Certificate, g.ID.String()})
				fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\t%s\n", g.Asset, written(g.Span), written(g.Graduation), g.Accuracy, day(g.Calibrated), day(g.Due), state)
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), gauges)
			}
			return w.Flush()
		})
	}
	return cmd
}

func newBottle() *cobra.Command {
	return group("bottle", "Gas bottles on the cart", newBottleAdd(), newBottleList())
}

func newBottleAdd() *cobra.Command {
	var h home
	f := newBottleForm()
	cmd := &cobra.Command{Use: "add", Short: "Make a bottle known, or enter what it holds now", Args: usageArgs(cobra.NoArgs),
		Example: "  chargehand bottle add --name N2-3 --volume 50L --pressure 2400psi --temperature 41F --label \"nitrogen, technical\"",
		Long:    "Make a bottle known, or enter what it holds now: the newest reading of a name counts. Read the label, not the colour."}
	f.flags(cmd.Flags())
	return signing(cmd, &h, record.KindBottle, func(m *ledger.Meaning, _ []string) (any, error) {
		if err := fill(cmd, m, f.wants(m)...); err != nil {
			return nil, err
		}
		return f.body(m)
	})
}

type bottleJSON struct {
	Name         string  `json:"name"`
	Gas          string  `json:"gas"`
	VolumeL      float64 `json:"volume_l"`
	PressurePsi  float64 `json:"pressure_psi"`
	TemperatureF float64 `json:"temperature_f"`
	Read         string  `json:"read"`
	Label        string  `json:"label,omitempty"`
	Entry        string  `json:"entry"`
}

func newBottleList() *cobra.Command {
	var h home
	var asJSON bool
	cmd := &cobra.Command{Use: "list", Short: "List the bottles and what each held when it was last read", Args: usageArgs(cobra.NoArgs)}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return h.with(cmd, func(b *ledger.Book, _ string) error {
			bottles := []bottleJSON{}
			w := tabwriter.NewWriter(cmd.OutOrStdout(), 0, 0, 2, ' ', 0)
			fmt.Fprintln(w, "BOTTLE\tGAS\tVOLUME\tPRESSURE\tAT\tREAD\tLABEL")
			for _, x := range b.Meaning().Bottles {
				v, _ := written(x.Volume).Volume()
				t, _ := written(x.Temperature).Temperature()
				bottles = append(bottles, bottleJSON{x.Name, x.Gas, show(v.InUnit("L")), amountPsi(x.Pressure), inF(t), clock(x.Read), x.Label, x.ID.String()})
				fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\t%s\n", x.Name, x.Gas, written(x.Volume), written(x.Pressure), written(x.Temperature), clock(x.Read), x.Label)
			}
			if asJSON {
				return writeJSON(cmd.OutOrStdout(), bottles)
			}
			return w.Flush()
		})
	}
	return cmd
}

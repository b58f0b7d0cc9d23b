// Package audit finds what is wrong with a set of entries, with no key and no store: signatures, lines and forks, causal
// completeness, authority, clocks, calibration, and verdicts shown against verdicts recomputed.
package audit

import (
	"cmp"
	"fmt"
	"slices"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// Severity orders findings: what breaks the proof, what breaks a rule, what a reader should know.
type Severity int

// Severities.
const (
	Note Severity = iota
	Rule
	Proof
)

func (s Severity) String() string { return [...]string{"note", "rule", "proof"}[s] }

// Finding is one thing found.
type Finding struct {
	Severity Severity
	Entry    record.ID // zero where no single entry is meant
	Sentence string
}

// Unreadable is bytes that stood where an entry should and did not verify.
type Unreadable struct {
	Where string
	Err   error
}

// Report is the outcome of an audit.
type Report struct {
	Book        record.BookID
	Fingerprint [32]byte
	Entries     int
	Lines       int
	Verdicts    int
	Findings    []Finding // the gravest first, then in display order
}

// Run audits the entries of a book. want is the founding fingerprint given from outside, nil when none was.
func Run(m *ledger.Meaning, unreadable []Unreadable, want *record.BookID) Report {
	r := Report{Book: m.Book, Fingerprint: m.Fingerprint(), Entries: len(m.Entries), Lines: len(m.Frontier())}
	add := func(s Severity, id record.ID, format string, args ...any) {
		r.Findings = append(r.Findings, Finding{s, id, fmt.Sprintf(format, args...)})
	}
	if want != nil && *want != m.Book {
		add(Proof, record.ID{}, "the founding fingerprint is %s, and %s was given from outside: this is another book", m.Book, want)
	}
	if m.Item(record.ID(m.Book)) == nil {
		add(Proof, record.ID{}, "the founding entry is missing: nobody's authority can be shown")
	}
	for _, u := range unreadable {
		add(Proof, record.ID{}, "%s does not verify: %v", u.Where, u.Err)
	}
	for i := range m.Entries {
		entry(m, &m.Entries[i], add)
	}
	judged := verdict.All(m)
	r.Verdicts = len(judged)
	var ids []record.ID
	for _, it := range m.Entries {
		ids = append(ids, it.ID())
		j, ok := judged[it.ID()]
		if !ok || j.Sheet == nil {
			continue
		}
		if asset := ledger.GaugeOf(it.Body); asset != "" {
			if g, done := m.Gauge(asset), doneOf(it.Body); g != nil && (done.Unix < g.Calibrated.Unix || done.Unix > g.Due.Unix) {
				add(Rule, it.ID(), "gauge %s was out of calibration when it was read", asset)
			}
		}
	}
	for _, mv := range verdict.AgainstShown(m, ids) {
		because := "by the calculation of this version"
		if mv.Cause != (record.ID{}) {
			because = "because of entry " + mv.Cause.Short()
		}
		add(Note, mv.Entry, "its signer was shown %q; the verdict is now %q %s", mv.Was, mv.Now, because)
	}
	slices.SortStableFunc(r.Findings, func(a, b Finding) int { return cmp.Compare(b.Severity, a.Severity) })
	return r
}

func entry(m *ledger.Meaning, it *ledger.Item, add func(Severity, record.ID, string, ...any)) {
	e, id := it.Entry(), it.ID()
	missing := false
	named := slices.Clone(e.Seen)
	if e.Seq > 1 {
		named = append(named, e.Prev)
	}
	for _, n := range named {
		if m.Item(n) == nil {
			missing = true
			add(Proof, id, "it builds on entry %s, which is missing: something was withheld or removed", n.Short())
		}
	}
	if it.SetAside != "" && !missing {
		add(Proof, id, "the %s is set aside: %s", e.Kind, it.SetAside)
	}
	for _, f := range it.Flags {
		add(Rule, id, "%s", f)
	}
	if it.WithdrawnBy != (record.ID{}) {
		add(Note, id, "the %s was withdrawn by entry %s", e.Kind, it.WithdrawnBy.Short())
	}
	for _, c := range it.CorrectedBy {
		add(Note, id, "the %s was corrected by entry %s", e.Kind, c.Short())
	}
	for _, c := range it.Fallen {
		add(Rule, id, "countersign %s was given for what a correction has changed since", c.Short())
	}
}

func doneOf(body any) record.Time {
	t, _ := ledger.Done(body)
	return t
}

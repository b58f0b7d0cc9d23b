// Package audit finds what is wrong with a set of entries, with no key and no store: signatures, lines and forks, causal
// completeness, authority, clocks, calibration, and verdicts shown against verdicts recomputed. ReadFolder takes the entries
// from a folder of files.
package audit

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"example.org/chargehand/calc"
	"example.org/chargehand/calc/quantity"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
	"example.org/chargehand/ledger/verdict"
)

// Severity orders findings.
type Severity int

// Severities. A book with notes alone is in order.
const (
	Note    Severity = iota // what a reader should know; nothing is wrong
	Warning                 // a rule of the work was not kept, or something cannot be judged here
	Fault                   // the record does not prove what it should
)

func (s Severity) String() string { return [...]string{"note", "warning", "fault"}[s] }

// Finding is one thing found.
type Finding struct {
	Severity Severity
	Entry    record.ID // zero where no single entry is meant; then the next three say nothing
	Kind     record.Kind
	Signer   string
	Signed   record.Time
	Sentence string
}

// Unreadable is bytes that stood where an entry should and did not verify.
type Unreadable struct {
	Where string // "" for the whole store
	Err   error
}

// Outside is what an auditor was told by another way than through the book; nil where nothing was.
type Outside struct {
	Founding    *record.BookID
	Fingerprint []byte // its first 8 bytes or more
}

// Report is the outcome of an audit.
type Report struct {
	Book        record.BookID
	Title       string
	Founder     string
	Fingerprint [32]byte
	Entries     int
	Lines       int
	Verdicts    int
	Findings    []Finding // the gravest first, then in display order
}

// Count returns how many findings are of a severity.
func (r *Report) Count(s Severity) int {
	n := 0
	for _, f := range r.Findings {
		if f.Severity == s {
			n++
		}
	}
	return n
}

// Clean tells whether nothing graver than notes was found.
func (r *Report) Clean() bool { return r.Count(Note) == len(r.Findings) }

// Run audits the entries of a book.
func Run(m *ledger.Meaning, unreadable []Unreadable, told Outside) Report {
	r := Report{Book: m.Book, Title: m.Founding.Title, Founder: m.Founding.Name, Fingerprint: m.Fingerprint(), Entries: len(m.Entries), Lines: len(m.Frontier())}
	add := func(s Severity, id record.ID, format string, args ...any) {
		f := Finding{Severity: s, Entry: id, Sentence: fmt.Sprintf(format, args...)}
		if it := m.Item(id); it != nil {
			f.Kind, f.Signer, f.Signed = it.Entry().Kind, signer(m, it), it.Entry().Signed
		}
		r.Findings = append(r.Findings, f)
	}
	if told.Founding != nil && *told.Founding != m.Book {
		add(Fault, record.ID{}, "the founding fingerprint is %s, and %s was given from outside: this is another book", m.Book, told.Founding)
	}
	if n := len(told.Fingerprint); n > 0 && (n > 32 || !slices.Equal(told.Fingerprint, r.Fingerprint[:n])) {
		add(Fault, record.ID{}, "the fingerprint is %x, and %x was given from outside: entries were added, removed or withheld since that was told",
			r.Fingerprint[:min(n, 32)], told.Fingerprint)
	}
	if m.Item(record.ID(m.Book)) == nil {
		add(Fault, record.ID{}, "the founding entry is missing: nobody's authority can be shown")
	}
	for _, u := range unreadable {
		if u.Where == "" {
			add(Fault, record.ID{}, "%v", u.Err)
		} else {
			add(Fault, record.ID{}, "%s does not verify: %v", u.Where, u.Err)
		}
	}
	for i := range m.Entries {
		entry(m, &m.Entries[i], add)
	}
	judged := verdict.All(m)
	r.Verdicts = len(judged)
	compare(m, judged, add)
	slices.SortStableFunc(r.Findings, func(a, b Finding) int { return cmp.Compare(b.Severity, a.Severity) })
	return r
}

// signer names who signed an entry, as far as the book tells.
func signer(m *ledger.Meaning, it *ledger.Item) string {
	if h := m.Hand(it.Key()); h != nil {
		return h.Name
	}
	return "key " + it.Key().Short() + ", whom nobody admitted"
}

type adder = func(s Severity, id record.ID, format string, args ...any)

func entry(m *ledger.Meaning, it *ledger.Item, add adder) {
	e, id := it.Entry(), it.ID()
	missing := false
	for _, n := range named(e) {
		if m.Item(n) == nil {
			missing = true
			add(Fault, id, "it builds on entry %s, which is missing: something was withheld or removed", n.Short())
		}
	}
	if it.SetAside != "" && !missing {
		s := Fault
		if _, unknown := it.Body.(record.Unknown); unknown && it.Hand != (record.KeyID{}) {
			s = Warning
		}
		add(s, id, "the %s is set aside: %s", e.Kind, it.SetAside)
	}
	for _, f := range it.Flags {
		add(Warning, id, "%s", f)
	}
	if _, asset, done := ledger.Subject(it.Body); asset != "" && it.Counts() {
		if g := m.Gauge(asset); g != nil && (done.Unix < g.Calibrated.Unix || done.Unix > g.Due.Unix) {
			add(Warning, id, "gauge %s was out of calibration when it was read", asset)
		}
	}
	if it.WithdrawnBy != (record.ID{}) {
		add(Note, id, "the %s was withdrawn by entry %s", e.Kind, it.WithdrawnBy.Short())
	}
	for _, c := range it.CorrectedBy {
		add(Note, id, "the %s was corrected by entry %s", e.Kind, c.Short())
	}
	for _, c := range it.Fallen {
		add(Warning, id, "countersign %s was given for what a correction has changed since", c.Short())
	}
}

// named returns the entries that an entry builds on.
func named(e record.Entry) []record.ID {
	ids := slices.Clone(e.Seen)
	if e.Seq > 1 {
		ids = append(ids, e.Prev)
	}
	return ids
}

// compare tells where today's verdict is not what the signer was shown. What they had seen then, folded anew, shows whether
// that was right: if so, something that came later moved it; if not, the program that signed showed what this one would not.
func compare(m *ledger.Meaning, judged map[record.ID]verdict.Judged, add adder) {
	pasts := pasts{m: m, known: map[string]*ledger.Meaning{}}
	for i := range m.Entries {
		it := &m.Entries[i]
		e, id := it.Entry(), it.ID()
		now, ok := judged[id]
		if !ok || e.Shown == nil || agrees(e.Shown, now) {
			continue
		}
		then, err := verdict.Judge(pasts.of(it), id, e.Body)
		if err != nil {
			continue // only readings and charges are judged
		}
		switch {
		case agrees(e.Shown, then):
			if now.Class.String() == e.Shown.Verdict {
				continue
			}
			because := "because of what came into the book after it"
			if mv := verdict.AgainstShown(m, []record.ID{id}); len(mv) == 1 && mv[0].Cause != (record.ID{}) {
				because = "because of entry " + mv[0].Cause.Short()
			}
			add(Note, id, "its signer was shown %q, rightly by what the book held then; the verdict is now %q %s", e.Shown.Verdict, now.Class, because)
		case e.Shown.Core != calc.CoreVersion:
			add(Warning, id, "its signer was shown %s by calculation %q, and calculation %q of this program gives %s", said(e.Shown), e.Shown.Core, calc.CoreVersion, gives(then))
		default:
			add(Fault, id, "its signer was shown %s, and the same readings, sheet and gauge give %s", said(e.Shown), gives(then))
		}
	}
}

// agreeWithin is the difference between a corrected pressure shown and one computed that tells nothing: 1 kPa, some 0.15 psi.
// Both are kept to 1 Pa, and processors differ far below that.
const agreeWithin = 1000

func agrees(s *record.Shown, j verdict.Judged) bool {
	if s.Verdict != j.Class.String() {
		return false
	}
	if s.Corrected == nil || j.Class == calc.NotAssessable {
		return true
	}
	p, err := corrected(s)
	return err == nil && math.Abs(float64(p-j.Corrected)) <= agreeWithin
}

func corrected(s *record.Shown) (quantity.GaugePressure, error) {
	return quantity.Written{Mantissa: s.Corrected.Mantissa, Exponent: s.Corrected.Exponent, Unit: s.Corrected.Unit}.Gauge()
}

func said(s *record.Shown) string {
	if s.Corrected == nil {
		return fmt.Sprintf("%q", s.Verdict)
	}
	if p, err := corrected(s); err == nil {
		return fmt.Sprintf("%q at %s", s.Verdict, psi(p))
	}
	return fmt.Sprintf("%q at %d e%d %s", s.Verdict, s.Corrected.Mantissa, s.Corrected.Exponent, s.Corrected.Unit)
}

func gives(j verdict.Judged) string {
	if j.Class == calc.NotAssessable {
		return fmt.Sprintf("%q", j.Class)
	}
	return fmt.Sprintf("%q at %s", j.Class, psi(j.Corrected))
}

func psi(p quantity.GaugePressure) string {
	v, _ := p.InUnit("psi") // a unit of the table
	return fmt.Sprintf("%.1f psi", v)
}

// pasts folds what the signers of entries had seen. Entries whose signers had seen the same of what bears on any verdict
// share one fold, so that a sheet revised under ten thousand readings costs one.
type pasts struct {
	m       *ledger.Meaning
	bearing []record.ID
	known   map[string]*ledger.Meaning
}

func (p *pasts) of(it *ledger.Item) *ledger.Meaning {
	if p.bearing == nil {
		for i := range p.m.Entries {
			switch o := &p.m.Entries[i]; o.Entry().Body.(type) {
			case record.Reading, record.Charge, record.UnitRegistered, record.UnitFitted, record.UnitRemoved, record.Countersign:
			default:
				p.bearing = append(p.bearing, o.ID())
			}
		}
	}
	seen := make([]byte, len(p.bearing))
	for i, id := range p.bearing {
		if p.m.Saw(it.ID(), id) {
			seen[i] = 1
		}
	}
	if past := p.known[string(seen)]; past != nil {
		return past
	}
	held := map[record.ID]bool{}
	var entries []record.Verified
	for next := named(it.Entry()); len(next) > 0; {
		id := next[len(next)-1]
		next = next[:len(next)-1]
		if o := p.m.Item(id); o != nil && !held[id] {
			held[id] = true
			entries = append(entries, o.Verified)
			next = append(next, named(o.Entry())...)
		}
	}
	past := ledger.Fold(p.m.Book, entries)
	p.known[string(seen)] = past
	return past
}

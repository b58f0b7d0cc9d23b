package ledger

import (
	"cmp"
	"fmt"
	"slices"

	"example.org/chargehand/ledger/record"
)

// Meaning is what a set of entries says: a pure function of the set, the same on every laptop whatever the order of arrival.
type Meaning struct {
	Book     record.BookID
	Founding record.Founding
	Founder  record.KeyID
	Hands    []*Hand // in the order of their admission
	Units    []*Unit // by part, then serial
	Gauges   []*Gauge
	Sheets   []*Sheet  // by part, then from the earliest effective date
	Bottles  []*Bottle // by name
	Entries  []Item    // all entries held, in display order
	items    map[record.ID]int
	set      *set
	roster   *roster
}

// Item is one entry with its standing.
type Item struct {
	record.Verified
	Hand     record.KeyID // the hand whose key signed it, zero when nobody admitted that key
	SetAside string       // why it does not count, "" when it does
	// Body is the entry's body as the corrections that stand leave it. The signed one is Entry().Body.
	Body          any
	CorrectedBy   []record.ID // in display order
	WithdrawnBy   record.ID   // zero when not withdrawn
	Countersigned []record.ID // countersigns that stand and saw the body as it stands now
	Fallen        []record.ID // countersigns of a body that a correction has changed since
	Flags         []string    // what an auditor should see: late entry, clock against causality
}

// Counts tells whether the entry's statement is in force: it stands and is not withdrawn.
func (it *Item) Counts() bool { return it.SetAside == "" && it.WithdrawnBy == record.ID{} }

// Unit is one accumulator with what was entered of it.
type Unit struct {
	Ref      record.UnitRef
	Aircraft string // where it is fitted, "" when it is not
	Position string
	Work     []record.ID // readings and charges in force, by the time the work was done
}

// Gauge is a pressure gauge as its newest entry describes it.
type Gauge struct {
	record.Gauge
	ID record.ID
}

// Bottle is a gas bottle as its newest entry describes it.
type Bottle struct {
	record.Bottle
	ID record.ID
}

// Sheet is the approved limits of a type, of one revision.
type Sheet struct {
	record.Sheet
	ID record.ID
}

// Fold returns the meaning of the entries. Duplicates count once.
func Fold(book record.BookID, entries []record.Verified) *Meaning {
	m := &Meaning{Book: book, set: newSet(entries), items: map[record.ID]int{}}
	m.roster = settleRoster(m.set)
	m.stand()
	m.amend()
	m.people()
	m.equipment()
	return m
}

// stand decides entry by entry in causal order whether it counts: references of an entry are to its past only.
func (m *Meaning) stand() {
	all := append(slices.Clone(m.set.order), m.set.lost...)
	items := make(map[record.ID]*Item, len(all))
	for _, n := range all {
		it := &Item{Verified: n.Verified, Body: n.body, SetAside: m.roster.aside(n)}
		hand, roles, known := m.roster.rolesAt(n.key, n)
		it.Hand = hand
		if it.SetAside == "" {
			it.SetAside = m.refuse(n, it, items, roles, known)
		}
		it.Flags = flags(n, it)
		items[n.id] = it
	}
	slices.SortFunc(all, compareDisplay)
	for i, n := range all {
		m.items[n.id] = i
		m.Entries = append(m.Entries, *items[n.id])
	}
}

// refuse returns why the entry has no authority or names what is not there, "" when it stands.
func (m *Meaning) refuse(n *node, it *Item, before map[record.ID]*Item, roles []record.Role, known bool) string {
	if _, ok := n.body.(record.Founding); ok {
		m.Founding, m.Founder = n.body.(record.Founding), n.key
		return ""
	}
	if !known {
		return "nobody whom it had seen admitted its key"
	}
	if _, ok := n.body.(record.KeyRetired); ok {
		if !m.roster.mayRetire(n) || !slices.Contains(m.roster.ends[n.body.(record.KeyRetired).Key], n) {
			return "its signer may not retire that key, or a retirement that goes before it says otherwise"
		}
		return ""
	}
	if _, ok := n.body.(record.Unknown); ok {
		return "it was written by a newer chargehand: its kind " + string(n.e.Kind) + " is not known to this one"
	}
	may := maySign[n.e.Kind]
	if !slices.ContainsFunc(may, func(r record.Role) bool { return slices.Contains(roles, r) }) {
		return fmt.Sprintf("a %s must be signed by %s; its signer had seen no such role given to them", n.e.Kind, either(may))
	}
	// target finds an entry that n refers to; it must stand and be in n's causal past.
	target := func(id record.ID) (*Item, string) {
		o, ok := m.set.byID[id]
		if !ok || o == n || !n.hasSeen(o) || before[id] == nil {
			return nil, fmt.Sprintf("it refers to entry %s, which its signer cannot have seen", id.Short())
		}
		if before[id].SetAside != "" {
			return nil, fmt.Sprintf("it refers to entry %s, which is set aside", id.Short())
		}
		return before[id], ""
	}
	ownOrLead := func(t *Item) bool { return t.Hand == it.Hand || slices.Contains(roles, record.RoleLead) }
	switch b := n.body.(type) {
	case record.Correction:
		t, why := target(b.Of)
		switch {
		case why != "":
			return why
		case t.Entry().Kind != b.Kind || !correctable(b.Kind):
			return fmt.Sprintf("a %s cannot correct a %s", b.Kind, t.Entry().Kind)
		case !ownOrLead(t):
			return "only the hand who signed an entry, or a lead, may correct it"
		case b.Kind == record.KindSheet && !slices.Contains(roles, record.RoleLead):
			return "only a lead may correct a sheet"
		}
		if _, err := record.DecodeBody(b.Kind, b.Body); err != nil {
			return "the corrected body cannot be read: " + err.Error()
		}
	case record.Withdrawal:
		t, why := target(b.Of)
		switch {
		case why != "":
			return why
		case !correctable(t.Entry().Kind) && t.Entry().Kind != record.KindCountersign:
			return fmt.Sprintf("a %s cannot be withdrawn", t.Entry().Kind)
		case !ownOrLead(t):
			return "only the hand who signed an entry, or a lead, may withdraw it"
		}
	case record.Countersign:
		for _, id := range b.Of {
			t, why := target(id)
			if why != "" {
				return why
			}
			if t.Hand == it.Hand {
				return "nobody countersigns their own entry: the second signature must come from another person"
			}
		}
	case record.Reading:
		return m.knows(n, b.Unit, b.Gauge)
	case record.Charge:
		return m.knows(n, b.Unit, b.Gauge)
	case record.UnitFitted:
		return m.knows(n, b.Unit, "")
	case record.UnitRemoved:
		return m.knows(n, b.Unit, "")
	}
	return ""
}

// knows tells why a unit or gauge is not registered in n's causal past, "" when both are.
func (m *Meaning) knows(n *node, unit record.UnitRef, gauge string) string {
	haveUnit, haveGauge := false, gauge == ""
	for _, o := range m.set.order {
		if o == n {
			break
		}
		switch b := o.body.(type) {
		case record.UnitRegistered:
			haveUnit = haveUnit || (record.UnitRef{Part: b.Part, Serial: b.Serial} == unit && n.hasSeen(o) && m.roster.aside(o) == "")
		case record.Gauge:
			haveGauge = haveGauge || (b.Asset == gauge && n.hasSeen(o) && m.roster.aside(o) == "")
		}
	}
	switch {
	case !haveUnit:
		return fmt.Sprintf("unit %s serial %s is not registered", unit.Part, unit.Serial)
	case !haveGauge:
		return fmt.Sprintf("gauge %s is not registered", gauge)
	}
	return ""
}

func correctable(k record.Kind) bool {
	switch k {
	case record.KindReading, record.KindCharge, record.KindSheet, record.KindGauge, record.KindUnitFitted, record.KindUnitRemoved, record.KindBottle:
		return true
	}
	return false
}

// lateAfter is the gap between work and signature from which an entry is marked late: a shift.
const lateAfter = 12 * 60 * 60

func flags(n *node, it *Item) []string {
	var f []string
	if done, ok := Done(it.Body); ok {
		if gap := n.e.Signed.Unix - done.Unix; gap > lateAfter {
			f = append(f, fmt.Sprintf("late entry: signed %d h after the work", gap/3600))
		} else if gap < -300 {
			f = append(f, "the work is dated after the signature")
		}
	}
	for _, id := range parents(n) {
		if p := n.set.byID[id]; p != nil && n.e.Signed.Unix < p.e.Signed.Unix-300 {
			f = append(f, fmt.Sprintf("its clock contradicts its past: signed before entry %s, which it had seen", id.Short()))
			break
		}
	}
	return f
}

// Done returns the time of the work of a reading or charge.
func Done(body any) (record.Time, bool) {
	switch b := body.(type) {
	case record.Reading:
		return b.Done, true
	case record.Charge:
		return b.Done, true
	}
	return record.Time{}, false
}

// GaugeOf returns the asset number of the gauge of a reading or charge, "" for other bodies.
func GaugeOf(body any) string {
	switch b := body.(type) {
	case record.Reading:
		return b.Gauge
	case record.Charge:
		return b.Gauge
	}
	return ""
}

// amend applies corrections, withdrawals and countersigns in display order.
func (m *Meaning) amend() {
	for i := range m.Entries {
		it := &m.Entries[i]
		if it.SetAside != "" {
			continue
		}
		if w, ok := it.Entry().Body.(record.Withdrawal); ok {
			m.Item(w.Of).WithdrawnBy = it.ID()
		}
	}
	for i := range m.Entries {
		it := &m.Entries[i]
		if c, ok := it.Entry().Body.(record.Correction); ok && it.Counts() {
			t := m.Item(c.Of)
			t.Body, _ = record.DecodeBody(c.Kind, c.Body) // refuse has tried it
			t.CorrectedBy = append(t.CorrectedBy, it.ID())
		}
	}
	for i := range m.Entries {
		it := &m.Entries[i]
		c, ok := it.Entry().Body.(record.Countersign)
		if !ok || !it.Counts() {
			continue
		}
		for _, id := range c.Of {
			t := m.Item(id)
			sawAll := true
			for _, by := range t.CorrectedBy {
				sawAll = sawAll && m.Saw(it.ID(), by)
			}
			if sawAll {
				t.Countersigned = append(t.Countersigned, it.ID())
			} else {
				t.Fallen = append(t.Fallen, it.ID())
			}
		}
	}
}

func (m *Meaning) people() {
	for _, g := range m.roster.grants {
		i := slices.IndexFunc(m.Hands, func(h *Hand) bool { return h.ID == g.hand })
		if i < 0 {
			m.Hands = append(m.Hands, &Hand{ID: g.hand, Admitted: g.at.id})
			i = len(m.Hands) - 1
		}
		h := m.Hands[i]
		if g.roles != nil {
			h.Name, h.Certificate, h.Roles = g.name, g.certificate, g.roles
		}
		if !slices.Contains(h.Keys, g.key) {
			h.Keys = append(h.Keys, g.key)
			if len(m.roster.ends[g.key]) > 0 {
				h.Retired = append(h.Retired, g.key)
			}
		}
	}
}

func (m *Meaning) equipment() {
	units, gauges, bottles := map[record.UnitRef]*Unit{}, map[string]*Gauge{}, map[string]*Bottle{}
	for i := range m.Entries {
		it := &m.Entries[i]
		if !it.Counts() {
			continue
		}
		switch b := it.Body.(type) {
		case record.UnitRegistered:
			ref := record.UnitRef{Part: b.Part, Serial: b.Serial}
			if units[ref] == nil {
				units[ref] = &Unit{Ref: ref}
			}
		case record.UnitFitted:
			units[b.Unit].Aircraft, units[b.Unit].Position = b.Aircraft, b.Position
		case record.UnitRemoved:
			units[b.Unit].Aircraft, units[b.Unit].Position = "", ""
		case record.Gauge:
			gauges[b.Asset] = &Gauge{b, it.ID()}
		case record.Bottle:
			bottles[b.Name] = &Bottle{b, it.ID()}
		case record.Sheet:
			m.Sheets = append(m.Sheets, &Sheet{b, it.ID()})
		case record.Reading:
			units[b.Unit].Work = append(units[b.Unit].Work, it.ID())
		case record.Charge:
			units[b.Unit].Work = append(units[b.Unit].Work, it.ID())
		}
	}
	for _, u := range units {
		slices.SortStableFunc(u.Work, func(a, b record.ID) int {
			x, _ := Done(m.Item(a).Body)
			y, _ := Done(m.Item(b).Body)
			return cmp.Compare(x.Unix, y.Unix)
		})
		m.Units = append(m.Units, u)
	}
	for _, g := range gauges {
		m.Gauges = append(m.Gauges, g)
	}
	for _, b := range bottles {
		m.Bottles = append(m.Bottles, b)
	}
	slices.SortFunc(m.Bottles, func(a, b *Bottle) int { return cmp.Compare(a.Name, b.Name) })
	slices.SortFunc(m.Units, func(a, b *Unit) int {
		return cmp.Or(cmp.Compare(a.Ref.Part, b.Ref.Part), cmp.Compare(a.Ref.Serial, b.Ref.Serial))
	})
	slices.SortFunc(m.Gauges, func(a, b *Gauge) int { return cmp.Compare(a.Asset, b.Asset) })
	slices.SortStableFunc(m.Sheets, func(a, b *Sheet) int {
		return cmp.Or(cmp.Compare(a.Part, b.Part), cmp.Compare(a.Effective.Unix, b.Effective.Unix))
	})
}

// Item returns the entry with its standing, nil when it is not held.
func (m *Meaning) Item(id record.ID) *Item {
	i, ok := m.items[id]
	if !ok {
		return nil
	}
	return &m.Entries[i]
}

// Saw tells whether the signer of entry by had seen entry id.
func (m *Meaning) Saw(by, id record.ID) bool {
	b, o := m.set.byID[by], m.set.byID[id]
	return b != nil && o != nil && b.hasSeen(o)
}

// Hand returns the hand that a key belongs to, nil when nobody admitted it.
func (m *Meaning) Hand(key record.KeyID) *Hand {
	for _, h := range m.Hands {
		if slices.Contains(h.Keys, key) {
			return h
		}
	}
	return nil
}

// InGoodStanding tells whether a key was admitted and is not retired.
func (m *Meaning) InGoodStanding(key record.KeyID) bool {
	h := m.Hand(key)
	return h != nil && !slices.Contains(h.Retired, key)
}

// Unit returns a unit, nil when it is not registered.
func (m *Meaning) Unit(ref record.UnitRef) *Unit {
	i := slices.IndexFunc(m.Units, func(u *Unit) bool { return u.Ref == ref })
	if i < 0 {
		return nil
	}
	return m.Units[i]
}

// Gauge returns the gauge of that asset number, nil when it is not registered.
func (m *Meaning) Gauge(asset string) *Gauge {
	i := slices.IndexFunc(m.Gauges, func(g *Gauge) bool { return g.Asset == asset })
	if i < 0 {
		return nil
	}
	return m.Gauges[i]
}

// SheetAt returns the sheet of a part in force at a time: the one of the latest effective date not after it, and of several
// with one date the last in display order. nil when none is.
func (m *Meaning) SheetAt(part string, at record.Time) *Sheet {
	var in *Sheet
	for _, s := range m.Sheets {
		if s.Part == part && s.Effective.Unix <= at.Unix {
			in = s
		}
	}
	return in
}

func either(roles []record.Role) string {
	s := ""
	for i, r := range roles {
		switch {
		case i == 0:
		case i == len(roles)-1:
			s += " or "
		default:
			s += ", "
		}
		if r == record.RoleInspector || r == record.RoleAuditor {
			s += "an " + string(r)
		} else {
			s += "a " + string(r)
		}
	}
	return s
}

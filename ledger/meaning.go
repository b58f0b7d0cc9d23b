package ledger

import (
	"cmp"
	"fmt"
	"reflect"
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
	Recalls  []*Recall // that stand, in display order
	Snags    []*Snag   // all that count, in display order
	items    map[record.ID]int
	hands    map[record.KeyID]*Hand // by each key
	units    map[record.UnitRef]*Unit
	gauges   map[string]*Gauge
	sheets   map[string][]*Sheet // by part
	set      *set
	roster   *roster
	named    names
}

// names is where units and gauges are named in the causal order: registrations, and for gauges recalls too.
type names struct {
	units  map[record.UnitRef][]*node
	gauges map[string][]*node
}

func (s *set) names() names {
	in := names{map[record.UnitRef][]*node{}, map[string][]*node{}}
	for _, n := range s.order {
		switch b := n.body.(type) {
		case record.UnitRegistered:
			ref := record.UnitRef{Part: b.Part, Serial: b.Serial}
			in.units[ref] = append(in.units[ref], n)
		case record.Gauge:
			in.gauges[b.Asset] = append(in.gauges[b.Asset], n)
		case record.Recall:
			if b.Gauge != "" {
				in.gauges[b.Gauge] = append(in.gauges[b.Gauge], n)
			}
		}
	}
	return in
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
	Settled  []record.ID // settling readings in force, in display order
	Holds    []record.ID // hold tests in force
	Traces   []record.ID // bleed-down traces in force
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
	m := &Meaning{Book: book, set: newSet(entries)}
	m.roster = settleRoster(m.set)
	m.named = m.set.names()
	m.stand()
	m.amend()
	m.people()
	m.equipment()
	m.recalls()
	m.snags()
	return m
}

// stand decides entry by entry in causal order whether it counts: references of an entry are to its past only.
func (m *Meaning) stand() {
	all := append(slices.Clone(m.set.order), m.set.lost...)
	items := make(map[record.ID]*Item, len(all))
	each := make([]Item, len(all))
	for i, n := range all {
		it := &each[i]
		*it = Item{Verified: n.Verified, Body: n.body, SetAside: m.roster.aside(n)}
		hand, roles, known := m.roster.rolesAt(n.key, n)
		it.Hand = hand
		if it.SetAside == "" {
			it.SetAside = m.refuse(n, it, items, roles, known)
		}
		it.Flags = flags(n, it)
		items[n.id] = it
	}
	slices.SortFunc(all, compareDisplay)
	m.Entries, m.items = make([]Item, 0, len(all)), make(map[record.ID]int, len(all))
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
		body, err := record.DecodeBody(b.Kind, b.Body)
		if err != nil {
			return "the corrected body cannot be read: " + err.Error()
		}
		return m.namesKnown(n, body, before)
	case record.Withdrawal:
		t, why := target(b.Of)
		switch {
		case why != "":
			return why
		case !correctable(t.Entry().Kind) && !withdrawable(t.Entry().Kind):
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
	case record.Recall:
		if b.Sheet != (record.ID{}) {
			t, why := target(b.Sheet)
			if why == "" && t.Entry().Kind != record.KindSheet {
				why = fmt.Sprintf("a %s is no sheet", t.Entry().Kind)
			}
			return why
		}
		return m.knowsGauge(n, b.Gauge, before)
	case record.SnagCleared:
		t, why := target(b.Of)
		if why == "" && t.Entry().Kind != record.KindSnag {
			why = fmt.Sprintf("a %s is no snag", t.Entry().Kind)
		}
		return why
	case record.Handover:
		if b.Takes == (record.ID{}) {
			return ""
		}
		t, why := target(b.Takes)
		switch {
		case why != "":
			return why
		case t.Entry().Kind != record.KindHandover:
			return fmt.Sprintf("a %s hands nothing over", t.Entry().Kind)
		case t.Hand == it.Hand:
			return "nobody takes over from themselves"
		}
		return ""
	case record.Hold:
		return testsOne(target, b)
	default:
		return m.namesKnown(n, b, before)
	}
	return ""
}

// namesKnown tells why the unit or the gauge that a body names cannot be meant, "" when the body names none or both are known.
func (m *Meaning) namesKnown(n *node, body any, before map[record.ID]*Item) string {
	switch b := body.(type) {
	case record.Reading, record.Charge, record.Settling, record.Trace:
		ref, gauge, done := Subject(b)
		return m.knows(n, ref, gauge, done, before)
	case record.UnitFitted:
		return m.knows(n, b.Unit, "", b.When, before)
	case record.UnitRemoved:
		return m.knows(n, b.Unit, "", b.When, before)
	case record.Snag:
		return m.knows(n, b.Unit, "", b.Found, before)
	}
	return ""
}

// knowsGauge tells why a gauge is not registered in n's causal past.
func (m *Meaning) knowsGauge(n *node, gauge string, before map[record.ID]*Item) string {
	for _, o := range m.named.gauges[gauge] {
		if _, ok := o.body.(record.Gauge); ok && n.hasSeen(o) && before[o.id] != nil && before[o.id].SetAside == "" {
			return ""
		}
	}
	return fmt.Sprintf("gauge %s is not registered", gauge)
}

// testsOne tells why two readings make no hold test: they must be readings of one unit by one gauge.
func testsOne(target func(record.ID) (*Item, string), h record.Hold) string {
	var of [2]record.Reading
	for i, id := range []record.ID{h.Start, h.End} {
		t, why := target(id)
		if why != "" {
			return why
		}
		r, ok := t.Entry().Body.(record.Reading)
		if !ok {
			return fmt.Sprintf("a hold test is of two readings, and entry %s is a %s", id.Short(), t.Entry().Kind)
		}
		of[i] = r
	}
	switch {
	case of[0].Unit != of[1].Unit:
		return "a hold test is of one unit, and its readings are of two"
	case of[0].Gauge != of[1].Gauge:
		return fmt.Sprintf("a hold test is read with one gauge, and its readings are by %s and %s", of[0].Gauge, of[1].Gauge)
	}
	return ""
}

// Subject returns the unit, the gauge and the time of the work of an entry that reports a pressure; zero for other bodies.
func Subject(body any) (unit record.UnitRef, gauge string, done record.Time) {
	switch b := body.(type) {
	case record.Reading:
		return b.Unit, b.Gauge, b.Done
	case record.Charge:
		return b.Unit, b.Gauge, b.Done
	case record.Settling:
		return b.Unit, b.Gauge, b.Closed
	case record.Trace:
		return b.Unit, b.Gauge, b.Done
	}
	return record.UnitRef{}, "", record.Time{}
}

// knows tells why a unit or gauge is not registered in n's causal past, or the gauge recalled there, "" when n may name both.
func (m *Meaning) knows(n *node, unit record.UnitRef, gauge string, done record.Time, before map[record.ID]*Item) string {
	stands := func(o *node) bool {
		return o != n && n.hasSeen(o) && before[o.id] != nil && before[o.id].SetAside == ""
	}
	if !slices.ContainsFunc(m.named.units[unit], stands) {
		return fmt.Sprintf("unit %s serial %s is not registered", unit.Part, unit.Serial)
	}
	if gauge == "" {
		return ""
	}
	registered := false
	var recalled record.ID
	for _, o := range m.named.gauges[gauge] {
		if !stands(o) {
			continue
		}
		switch b := o.body.(type) {
		case record.Gauge:
			registered, recalled = true, record.ID{}
		case record.Recall:
			if b.Since.Unix <= done.Unix {
				recalled = o.id
			}
		}
	}
	switch {
	case !registered:
		return fmt.Sprintf("gauge %s is not registered", gauge)
	case recalled != record.ID{}:
		return fmt.Sprintf("gauge %s was recalled by entry %s and not entered again since", gauge, recalled.Short())
	}
	return ""
}

func correctable(k record.Kind) bool {
	switch k {
	case record.KindReading, record.KindCharge, record.KindSheet, record.KindGauge, record.KindUnitFitted, record.KindUnitRemoved, record.KindBottle, record.KindSettling, record.KindTrace:
		return true
	}
	return false
}

// withdrawable are the kinds that can be taken out of force but not corrected.
func withdrawable(k record.Kind) bool {
	switch k {
	case record.KindCountersign, record.KindHold, record.KindRecall, record.KindSnag, record.KindSnagCleared:
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
	switch body.(type) {
	case record.Reading, record.Charge:
		_, _, done := Subject(body)
		return done, true
	}
	return record.Time{}, false
}

// GaugeOf returns the asset number of the gauge of an entry that reports a pressure, "" for other bodies.
func GaugeOf(body any) string {
	_, gauge, _ := Subject(body)
	return gauge
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
	named := map[record.KeyID]*Hand{}
	for _, g := range m.roster.grants {
		h := named[g.hand]
		if h == nil {
			h = &Hand{ID: g.hand, Admitted: g.at.id}
			named[g.hand] = h
			m.Hands = append(m.Hands, h)
		}
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
	m.hands = map[record.KeyID]*Hand{}
	for _, h := range slices.Backward(m.Hands) { // a key that two leads gave to two hands is the first one's
		for _, k := range h.Keys {
			m.hands[k] = h
		}
	}
}

func (m *Meaning) equipment() {
	units, gauges, bottles := map[record.UnitRef]*Unit{}, map[string]*Gauge{}, map[string]*Bottle{}
	// Units first: a clock that lies can put an entry before the registration that it had seen.
	for i := range m.Entries {
		if b, ok := m.Entries[i].Body.(record.UnitRegistered); ok && m.Entries[i].Counts() {
			ref := record.UnitRef{Part: b.Part, Serial: b.Serial}
			units[ref] = &Unit{Ref: ref}
		}
	}
	for i := range m.Entries {
		it := &m.Entries[i]
		if !it.Counts() {
			continue
		}
		switch b := it.Body.(type) {
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
		case record.Settling:
			units[b.Unit].Settled = append(units[b.Unit].Settled, it.ID())
		case record.Trace:
			units[b.Unit].Traces = append(units[b.Unit].Traces, it.ID())
		case record.Hold:
			if r, ok := m.Item(b.Start).Body.(record.Reading); ok {
				units[r.Unit].Holds = append(units[r.Unit].Holds, it.ID())
			}
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
	m.units, m.gauges, m.sheets = units, gauges, map[string][]*Sheet{}
	for _, s := range m.Sheets {
		m.sheets[s.Part] = append(m.sheets[s.Part], s)
	}
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
	return m.hands[key]
}

// InGoodStanding tells whether a key was admitted and is not retired.
func (m *Meaning) InGoodStanding(key record.KeyID) bool {
	h := m.Hand(key)
	return h != nil && !slices.Contains(h.Retired, key)
}

// Unit returns a unit, nil when it is not registered.
func (m *Meaning) Unit(ref record.UnitRef) *Unit {
	return m.units[ref]
}

// Gauge returns the gauge of that asset number, nil when it is not registered.
func (m *Meaning) Gauge(asset string) *Gauge {
	return m.gauges[asset]
}

// SheetAt returns the sheet of a part in force at a time: the one of the latest effective date not after it, and of several
// with one date the one that had seen the others, or where none had, the last in display order: see Contested. A recalled one
// gives way to any that was entered by somebody who knew of the recall. nil when none is in force.
func (m *Meaning) SheetAt(part string, at record.Time) *Sheet {
	if in := m.inForce(part, at); len(in) > 0 {
		return in[len(in)-1]
	}
	return nil
}

// Contested returns the sheets that say something else than SheetAt's, from the same date, by somebody who had not seen it and
// whom it had not seen. A lead settles them by a sheet that has seen all of them, or by withdrawing one.
func (m *Meaning) Contested(part string, at record.Time) []*Sheet {
	in := m.inForce(part, at)
	if len(in) < 2 {
		return nil
	}
	last := in[len(in)-1]
	return slices.DeleteFunc(in[:len(in)-1], func(s *Sheet) bool { return reflect.DeepEqual(s.Sheet, last.Sheet) })
}

// inForce returns the sheets of the latest effective date of which none had seen another.
func (m *Meaning) inForce(part string, at record.Time) []*Sheet {
	var in *Sheet
	for _, s := range m.sheets[part] {
		if s.Effective.Unix > at.Unix {
			break
		}
		if in != nil {
			now, then := m.SheetRecall(s.ID, at), m.SheetRecall(in.ID, at)
			if then == nil && now != nil && m.Saw(in.ID, now.ID) {
				continue
			}
		}
		in = s
	}
	if in == nil {
		return nil
	}
	var same []*Sheet
	for _, s := range m.sheets[part] {
		if s.Effective.Unix == in.Effective.Unix {
			same = append(same, s)
		}
	}
	if len(same) < 2 {
		return same
	}
	left := slices.DeleteFunc(slices.Clone(same), func(s *Sheet) bool {
		return slices.ContainsFunc(same, func(o *Sheet) bool { return o != s && m.Saw(o.ID, s.ID) })
	})
	// Of sheets that contest each other a recalled one gives way; one that was replaced before does not come back.
	recalled := func(s *Sheet) bool { return m.SheetRecall(s.ID, at) != nil }
	if !slices.ContainsFunc(left, func(s *Sheet) bool { return !recalled(s) }) {
		return left
	}
	return slices.DeleteFunc(left, recalled)
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

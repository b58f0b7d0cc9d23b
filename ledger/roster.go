package ledger

import (
	"cmp"
	"fmt"
	"slices"

	"example.org/chargehand/ledger/record"
)

// maySign says which role may sign which kind. The founding entry needs none; a hand may always retire its own key.
var maySign = map[record.Kind][]record.Role{
	record.KindHandAdmitted:   {record.RoleLead},
	record.KindKeyAdded:       {record.RoleLead},
	record.KindKeyRetired:     {record.RoleLead},
	record.KindSheet:          {record.RoleLead},
	record.KindUnitRegistered: {record.RoleLead, record.RoleTechnician},
	record.KindUnitFitted:     {record.RoleLead, record.RoleTechnician},
	record.KindUnitRemoved:    {record.RoleLead, record.RoleTechnician},
	record.KindGauge:          {record.RoleLead, record.RoleTechnician, record.RoleInspector},
	record.KindReading:        {record.RoleTechnician, record.RoleInspector},
	record.KindCharge:         {record.RoleTechnician},
	record.KindCorrection:     {record.RoleLead, record.RoleTechnician, record.RoleInspector},
	record.KindWithdrawal:     {record.RoleLead, record.RoleTechnician, record.RoleInspector},
	record.KindCountersign:    {record.RoleInspector, record.RoleLead},
	record.KindBottle:         {record.RoleLead, record.RoleTechnician},
	record.KindSettling:       {record.RoleTechnician},
	record.KindHold:           {record.RoleTechnician, record.RoleInspector},
	record.KindTrace:          {record.RoleTechnician, record.RoleInspector},
	record.KindRecall:         {record.RoleLead, record.RoleInspector},
	record.KindSnag:           {record.RoleLead, record.RoleTechnician, record.RoleInspector},
	record.KindSnagCleared:    {record.RoleLead, record.RoleTechnician, record.RoleInspector},
	record.KindHandover:       {record.RoleLead, record.RoleTechnician, record.RoleInspector},
}

// MayRoles returns the roles that may sign a kind, nil for the founding entry and for kinds this version does not know.
func MayRoles(k record.Kind) []record.Role { return slices.Clone(maySign[k]) }

// Hand is a person who may sign, named by the first key admitted for them.
type Hand struct {
	ID          record.KeyID
	Name        string
	Certificate string
	Roles       []record.Role
	Keys        []record.KeyID
	Admitted    record.ID // the entry that let them in
	Retired     []record.KeyID
}

// Has tells whether the hand holds the role.
func (h *Hand) Has(r record.Role) bool { return slices.Contains(h.Roles, r) }

// Standing tells whether the hand has a key that is not retired.
func (h *Hand) Standing() bool { return len(h.Retired) < len(h.Keys) }

// a grant gives a key to a hand; it counts for entries that have it in their causal past.
type grant struct {
	at          *node
	key         record.KeyID
	hand        record.KeyID
	name        string
	certificate string
	roles       []record.Role // nil for a further key of a hand admitted before
}

// a roster is the outcome of all roster entries: grants that stand, and where each retired line ends.
type roster struct {
	founder record.KeyID
	grants  []grant
	ends    map[record.KeyID][]*node // retirements in force, by the key they retire
}

// cut tells whether a retirement in force sets n aside. A retirement names the last entry that stands: what is not that
// entry or before it on its line falls, whenever it arrives.
func (r *roster) cut(n *node) *node {
	for _, by := range r.ends[n.key] {
		if kills(by, n) {
			return by
		}
	}
	return nil
}

// aside returns why n is set aside whatever its signer's roles, "" when nothing speaks against it.
func (r *roster) aside(n *node) string {
	if n.fault != "" {
		return n.fault
	}
	if by := r.cut(n); by != nil {
		return fmt.Sprintf("its key was retired after number %d of its line by entry %s", by.body.(record.KeyRetired).LastSeq, by.id.Short())
	}
	fork := n.set.forks[n.line]
	chosen := slices.ContainsFunc(r.ends[n.key], func(by *node) bool {
		ret := by.body.(record.KeyRetired)
		return ret.LastSeq >= fork && ret.LastID != record.ID{} // and cut found n on the branch it names
	})
	if fork > 0 && n.seq >= fork && !chosen {
		return fmt.Sprintf("its line is forked at number %d: two different entries carry that number", fork)
	}
	return ""
}

// kills tells whether the retirement by would set n aside.
func kills(by, n *node) bool {
	ret := by.body.(record.KeyRetired)
	if ret.Key != n.key {
		return false
	}
	if n.seq > ret.LastSeq {
		return true
	}
	// With the last entry's id a retirement also chooses the branch of a forked line.
	if ret.LastSeq == 0 || ret.LastID == (record.ID{}) {
		return false
	}
	last := n.set.byID[ret.LastID]
	if last == nil {
		return false
	}
	for last.prev != nil && last.seq > n.seq {
		last = last.prev
	}
	return last != n
}

// rolesAt returns the hand and the roles of a key as an entry at n may claim them: from grants in its causal past only.
func (r *roster) rolesAt(key record.KeyID, n *node) (hand record.KeyID, roles []record.Role, ok bool) {
	for _, g := range r.grants {
		if g.key == key && n.hasSeen(g.at) {
			hand, ok = g.hand, true
		}
	}
	for _, g := range r.grants { // a later admission of the same hand changes its roles
		if ok && g.hand == hand && g.roles != nil && n.hasSeen(g.at) {
			roles = g.roles
		}
	}
	return hand, roles, ok
}

// settleRoster decides which roster entries stand.
//
// Retirements are taken in causal order, and among those that had not seen each other by the rank of their signer (the one
// admitted earlier first). One that no longer stands when its turn comes is void; one that strikes out a retirement taken
// before voids that one for good and the decision starts again. Each start has one void retirement more, so it ends; and
// nothing in it depends on the order of arrival.
func settleRoster(s *set) *roster {
	var retirements []*node
	for _, n := range s.order {
		if _, ok := n.body.(record.KeyRetired); ok {
			retirements = append(retirements, n)
		}
	}
	void := map[*node]bool{}
again:
	taken := []*node{}
	r := grantsUnder(s, taken)
	left := slices.DeleteFunc(slices.Clone(retirements), func(n *node) bool { return void[n] })
	for len(left) > 0 {
		next := nextRetirement(r, left)
		left = slices.DeleteFunc(left, func(n *node) bool { return n == next })
		if !r.mayRetire(next) {
			continue
		}
		taken = append(taken, next)
		r = grantsUnder(s, taken)
		for _, t := range taken[:len(taken)-1] {
			if !r.mayRetire(t) {
				void[t] = true
				goto again
			}
		}
	}
	return r
}

// nextRetirement picks one of which no other in the list is in the causal past, the best ranked signer's first.
func nextRetirement(r *roster, left []*node) *node {
	free := slices.DeleteFunc(slices.Clone(left), func(n *node) bool {
		return slices.ContainsFunc(left, func(o *node) bool { return o != n && n.hasSeen(o) })
	})
	rank := func(n *node) int {
		i := slices.IndexFunc(r.grants, func(g grant) bool { return g.key == n.key })
		if i < 0 {
			return len(r.grants)
		}
		return i
	}
	return slices.MinFunc(free, func(a, b *node) int {
		return cmp.Or(cmp.Compare(rank(a), rank(b)), compareDisplay(a, b))
	})
}

// mayRetire tells whether a retirement stands: its own line reaches it, its signer may, and the founder is not its target
// unless the founder signed it.
func (r *roster) mayRetire(n *node) bool {
	if r.aside(n) != "" {
		return false
	}
	hand, roles, ok := r.rolesAt(n.key, n)
	if !ok {
		return false
	}
	target, _, known := r.rolesAt(n.body.(record.KeyRetired).Key, n)
	if !known {
		return false
	}
	if hand == target {
		return true
	}
	return target != r.founder && slices.Contains(roles, record.RoleLead)
}

// grantsUnder walks the entries in causal order and collects the admissions that stand under the retirements taken.
func grantsUnder(s *set, taken []*node) *roster {
	r := &roster{ends: map[record.KeyID][]*node{}}
	for _, t := range taken {
		k := t.body.(record.KeyRetired).Key
		r.ends[k] = append(r.ends[k], t)
	}
	for _, n := range s.order {
		if r.aside(n) != "" {
			continue
		}
		switch b := n.body.(type) {
		case record.Founding:
			r.founder = n.key
			r.grants = append(r.grants, grant{n, n.key, n.key, b.Name, b.Certificate, b.Roles})
		case record.HandAdmitted:
			if r.isLead(n) {
				hand := b.Key
				if prior, _, ok := r.rolesAt(b.Key, n); ok {
					hand = prior // admitted before: this entry changes the roles
				}
				r.grants = append(r.grants, grant{n, b.Key, hand, b.Name, b.Certificate, b.Roles})
			}
		case record.KeyAdded:
			if _, _, taken := r.rolesAt(b.Key, n); !taken && r.isLead(n) {
				if _, _, known := r.rolesAt(b.Hand, n); known {
					r.grants = append(r.grants, grant{at: n, key: b.Key, hand: b.Hand})
				}
			}
		}
	}
	return r
}

func (r *roster) isLead(n *node) bool {
	_, roles, ok := r.rolesAt(n.key, n)
	return ok && slices.Contains(roles, record.RoleLead)
}

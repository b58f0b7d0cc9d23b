package ledger

import "example.org/chargehand/ledger/record"

// Snag is a defect raised on a unit, with what cleared it.
type Snag struct {
	record.Snag
	ID        record.ID
	ClearedBy record.ID // zero while it is open
}

// Open tells whether it was not cleared.
func (s *Snag) Open() bool { return s.ClearedBy == record.ID{} }

// snags collects those that count. Cleared twice apart, the last in display order is named.
func (m *Meaning) snags() {
	by := map[record.ID]*Snag{}
	for i := range m.Entries {
		it := &m.Entries[i]
		if b, ok := it.Body.(record.Snag); ok && it.Counts() {
			s := &Snag{Snag: b, ID: it.ID()}
			by[it.ID()] = s
			m.Snags = append(m.Snags, s)
		}
	}
	if len(by) == 0 {
		return
	}
	for i := range m.Entries {
		it := &m.Entries[i]
		if b, ok := it.Body.(record.SnagCleared); ok && it.Counts() {
			if s := by[b.Of]; s != nil {
				s.ClearedBy = it.ID()
			}
		}
	}
}

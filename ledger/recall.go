package ledger

import (
	"example.org/chargehand/ledger/record"
)

// Recall is a gauge or sheet found wrong, as long as it stands.
type Recall struct {
	record.Recall
	ID record.ID
	// Until is when the gauge was calibrated again by an entry that had seen the recall; 0 while it was not.
	Until int64
}

// covers tells whether work done at a time is touched.
func (r *Recall) covers(at record.Time) bool {
	return r.Since.Unix <= at.Unix && (r.Until == 0 || at.Unix < r.Until)
}

// recalls collects the recalls that stand, and where each ends.
func (m *Meaning) recalls() {
	for i := range m.Entries {
		it := &m.Entries[i]
		if b, ok := it.Body.(record.Recall); ok && it.Counts() {
			m.Recalls = append(m.Recalls, &Recall{Recall: b, ID: it.ID()})
		}
	}
	if len(m.Recalls) == 0 {
		return
	}
	for i := range m.Entries {
		it := &m.Entries[i]
		g, ok := it.Body.(record.Gauge)
		if !ok || !it.Counts() {
			continue
		}
		for _, r := range m.Recalls {
			if r.Gauge == g.Asset && m.Saw(it.ID(), r.ID) && (r.Until == 0 || g.Calibrated.Unix < r.Until) {
				r.Until = max(g.Calibrated.Unix, r.Since.Unix)
			}
		}
	}
}

// GaugeRecall returns the recall that touches what a gauge showed at a time, nil when none does. Of several the last in
// display order counts.
func (m *Meaning) GaugeRecall(asset string, at record.Time) (in *Recall) {
	for _, r := range m.Recalls {
		if r.Gauge == asset && r.covers(at) {
			in = r
		}
	}
	return in
}

// SheetRecall returns the recall that touches a sheet at a time, nil when none does.
func (m *Meaning) SheetRecall(sheet record.ID, at record.Time) (in *Recall) {
	for _, r := range m.Recalls {
		if r.Sheet == sheet && r.covers(at) {
			in = r
		}
	}
	return in
}

package ledger

import (
	"slices"

	"example.org/chargehand/ledger/record"
)

// Recall is a gauge or sheet found wrong, as long as it stands.
type Recall struct {
	record.Recall
	ID record.ID
	// Until is when the gauge was calibrated again by an entry that had seen the recall; 0 while it was not.
	Until int64
}

// Covers tells whether work done at a time is touched.
func (r *Recall) Covers(at record.Time) bool {
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
		if r.Gauge == asset && r.Covers(at) {
			in = r
		}
	}
	return in
}

// Recalled tells whether a gauge is recalled and was not entered again since.
func (m *Meaning) Recalled(asset string) bool {
	return slices.ContainsFunc(m.Recalls, func(r *Recall) bool { return r.Gauge == asset && r.Until == 0 })
}

// SheetRecall returns the recall that touches a sheet at a time, nil when none does.
func (m *Meaning) SheetRecall(sheet record.ID, at record.Time) (in *Recall) {
	for _, r := range m.Recalls {
		if r.Sheet == sheet && r.Covers(at) {
			in = r
		}
	}
	return in
}

// WithRecall returns what the book would mean with one more recall, which nobody has signed: to see what it touches before
// anybody does. Only what is judged differs; the recall is no entry.
func (m *Meaning) WithRecall(r record.Recall) *Meaning {
	more := *m
	more.Recalls = append(slices.Clone(m.Recalls), &Recall{Recall: r})
	return &more
}

// WithoutRecall returns what the book would mean without one recall.
func (m *Meaning) WithoutRecall(entry record.ID) *Meaning {
	less := *m
	less.Recalls = slices.DeleteFunc(slices.Clone(m.Recalls), func(r *Recall) bool { return r.ID == entry })
	return &less
}

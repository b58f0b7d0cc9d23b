package verdict

import (
	"fmt"
	"slices"

	"github.com/fxamacker/cbor/v2"

	"example.org/chargehand/calc"
	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// kept is a verdict as this laptop last computed it, and the entries that it rested on.
type kept struct {
	_         struct{} `cbor:",toarray"`
	Entry     record.ID
	Class     calc.Class
	Corrected int64 // pascals
	Low, High int64
	Rests     []record.ID
}

func keep(j Judged, rests []record.ID) kept {
	return kept{Entry: j.Entry, Class: j.Class, Corrected: int64(j.Corrected), Low: int64(j.Low), High: int64(j.High), Rests: rests}
}

// rests returns the entries whose words make the verdict on an entry: its own corrections, the sheet in force, the gauge, recalls,
// and what corrected those. Equal lists, and the same core, mean an equal verdict.
func rests(m *ledger.Meaning, id record.ID) []record.ID {
	it := m.Item(id)
	var on []record.ID // the newest correction first: it is the one in force
	corrections := func(of *ledger.Item) {
		for _, id := range slices.Backward(of.CorrectedBy) {
			on = append(on, id)
		}
	}
	corrections(it)
	add := func(id record.ID) {
		on = append(on, id)
		corrections(m.Item(id))
	}
	ref, gauge, done := ledger.Subject(it.Body)
	if s := m.SheetAt(ref.Part, done); s != nil {
		add(s.ID)
		if r := m.SheetRecall(s.ID, done); r != nil {
			add(r.ID)
		}
	}
	for _, s := range m.Contested(ref.Part, done) {
		add(s.ID)
	}
	if g := m.Gauge(gauge); g != nil {
		add(g.ID)
		if r := m.GaugeRecall(gauge, done); r != nil {
			add(r.ID)
		}
	}
	return on
}

// movedFrom compares a verdict with what was kept of it.
func movedFrom(m *ledger.Meaning, was kept, j Judged, now kept) (Moved, bool) {
	if was.Class == now.Class && was.Corrected == now.Corrected && was.Low == now.Low && was.High == now.High {
		return Moved{}, false
	}
	return Moved{j.Entry, j.Unit, was.Class, j.Class, j.Sentence, cause(m, was, now)}, true
}

// cause is the entry that moved a verdict: what it rested on was withdrawn, or it rests on something new.
func cause(m *ledger.Meaning, was, now kept) record.ID {
	for _, id := range was.Rests {
		if it := m.Item(id); it != nil && it.WithdrawnBy != (record.ID{}) {
			return it.WithdrawnBy
		}
	}
	for _, id := range now.Rests {
		if !slices.Contains(was.Rests, id) {
			return id
		}
	}
	return record.ID{}
}

// Compare says which verdicts moved between two meanings of one book, and by which entry, in the order of after.
func Compare(before, after *ledger.Meaning) []Moved {
	var moved []Moved
	was, now := All(before), All(after)
	for _, u := range after.Units {
		for _, id := range u.Work {
			w, held := was[id]
			if !held {
				continue
			}
			j := now[id]
			if mv, yes := movedFrom(after, keep(w, rests(before, id)), j, keep(j, rests(after, id))); yes {
				moved = append(moved, mv)
			}
		}
	}
	return moved
}

// The view: one row of kept verdicts a unit, and a mark that says what all of them were computed from, written last.
const (
	viewRows = "verdicts/"
	viewMark = "verdict-mark"
)

// rowName tells part and serial apart whatever they hold.
func rowName(r record.UnitRef) string {
	return fmt.Sprintf("%s%d/%s/%s", viewRows, len(r.Part), r.Part, r.Serial)
}

type mark struct {
	_           struct{} `cbor:",toarray"`
	Core        string
	Fingerprint [32]byte
}

var viewEncoding = func() cbor.EncMode {
	m, err := cbor.CoreDetEncOptions().EncMode()
	if err != nil {
		panic(err) // constant options
	}
	return m
}()

// Refreshed says what a look at the kept verdicts found.
type Refreshed struct {
	Moved    []Moved
	Judged   int  // verdicts computed; the others rest on what they rested on before
	Kept     int  // verdicts now in the view
	NewCore  bool // the view was another calculation core's: a verdict that moved with no cause moved by that
	Complete bool // the view was of this book's entries already, and nothing was done
}

// Refresh brings the kept verdicts up to what the book says now, and tells which moved since this laptop last computed them.
// Every path that changes a book (sign, meet) calls it. A view that is missing, damaged or of another core is made anew.
//
// The kept verdicts are a memory and no truth: everything shown is judged from entries. A crash before the mark is written
// leaves a view that the next call completes; only what had moved may then go untold.
func Refresh(b *ledger.Book) (Refreshed, error) { return refresh(b, calc.CoreVersion) }

func refresh(b *ledger.Book, core string) (Refreshed, error) {
	m := b.Meaning()
	want := mark{Core: core, Fingerprint: m.Fingerprint()}
	raw, err := b.Views(viewMark)
	if err != nil {
		return Refreshed{}, fmt.Errorf("kept verdicts: %w", err)
	}
	var had mark
	if cbor.Unmarshal(raw[viewMark], &had) == nil && had == want {
		return Refreshed{Complete: true}, nil
	}
	r := Refreshed{NewCore: had.Core != "" && had.Core != core}
	rows, err := b.Views(viewRows)
	if err != nil {
		return Refreshed{}, fmt.Errorf("kept verdicts: %w", err)
	}
	set := map[string][]byte{}
	var doubtful []record.ID
	was := map[string]map[record.ID]kept{}
	for _, u := range m.Units {
		name := rowName(u.Ref)
		was[name] = decodeRow(rows[name])
		for _, id := range u.Work {
			if w, ok := was[name][id]; !ok || had.Core != core || !slices.Equal(w.Rests, rests(m, id)) {
				doubtful = append(doubtful, id)
			}
		}
	}
	judged := judgeAll(m, doubtful)
	r.Judged = len(judged)
	for _, u := range m.Units {
		name := rowName(u.Ref)
		now := make([]kept, 0, len(u.Work))
		for _, id := range u.Work {
			j, again := judged[id]
			if !again {
				now = append(now, was[name][id])
				continue
			}
			k := keep(j, rests(m, id))
			if w, ok := was[name][id]; ok {
				if mv, yes := movedFrom(m, w, j, k); yes {
					r.Moved = append(r.Moved, mv)
				}
			}
			now = append(now, k)
		}
		r.Kept += len(now)
		data, err := viewEncoding.Marshal(now)
		if err != nil {
			return r, fmt.Errorf("kept verdicts: %w", err)
		}
		if len(now) == 0 {
			data = nil
		}
		if !slices.Equal(data, rows[name]) {
			set[name] = data
		}
		delete(rows, name)
	}
	for name := range rows { // of units that are no more
		set[name] = nil
	}
	data, err := viewEncoding.Marshal(want)
	if err == nil {
		if err = b.SetViews(set); err == nil {
			err = b.SetViews(map[string][]byte{viewMark: data})
		}
	}
	if err != nil {
		return r, fmt.Errorf("kept verdicts: %w", err)
	}
	return r, nil
}

// Rebuild throws the kept verdicts away and computes all anew. It tells what differs from what was kept.
func Rebuild(b *ledger.Book) (Refreshed, error) {
	rows, err := b.Views(viewRows)
	if err != nil {
		return Refreshed{}, fmt.Errorf("kept verdicts: %w", err)
	}
	if err := b.DropViews(); err != nil {
		return Refreshed{}, fmt.Errorf("kept verdicts: %w", err)
	}
	r, err := Refresh(b)
	if err != nil {
		return r, err
	}
	m := b.Meaning()
	for _, u := range m.Units {
		was := decodeRow(rows[rowName(u.Ref)])
		for id, j := range judgeAll(m, u.Work) {
			if w, ok := was[id]; ok {
				if mv, yes := movedFrom(m, w, j, keep(j, rests(m, id))); yes {
					r.Moved = append(r.Moved, mv)
				}
			}
		}
	}
	return r, nil
}

// decodeRow returns nothing for a row that cannot be read: its verdicts are then computed anew.
func decodeRow(data []byte) map[record.ID]kept {
	var row []kept
	if cbor.Unmarshal(data, &row) != nil {
		return nil
	}
	by := make(map[record.ID]kept, len(row))
	for _, k := range row {
		by[k.Entry] = k
	}
	return by
}

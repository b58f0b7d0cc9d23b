package ledger

import (
	"bytes"
	"cmp"
	"container/heap"
	"fmt"
	"slices"

	"example.org/chargehand/ledger/record"
)

// a node is one entry of the set with its place in the causal order.
type node struct {
	record.Verified
	set  *set
	id   record.ID
	key  record.KeyID
	seq  uint64
	e    record.Entry
	body any
	prev *node
	line int
	past []uint64 // per line: the highest sequence in this entry's causal past, itself included
	// while the set is sorted: the entries that name this one, and how many of those that this one names are to come
	children []*node
	waits    int
	// fault is why the entry cannot stand whoever signed it: something it names is missing, or its line is forked.
	fault string
}

// hasSeen tells whether o is n itself or in its causal past. On a forked line it does not tell the branches apart; of those
// at most the one that a retirement chose carries any authority.
func (n *node) hasSeen(o *node) bool { return o.line < len(n.past) && n.past[o.line] >= o.seq }

// a set is all entries held, indexed, in one causal order that depends on nothing but the entries.
type set struct {
	byID  map[record.ID]*node
	lines [][]*node // by line, by sequence; a fork has several nodes of one sequence
	forks []uint64  // by line: the lowest sequence that several entries carry, 0 for none
	order []*node
	lost  []*node    // entries of which an ancestor is missing
	heads []LineHead // entries that no other of their line follows, by key and id
}

func newSet(entries []record.Verified) *set {
	s := &set{byID: make(map[record.ID]*node, len(entries))}
	for _, v := range entries {
		if s.byID[v.ID()] != nil {
			continue
		}
		e := v.Entry()
		s.byID[v.ID()] = &node{Verified: v, set: s, id: v.ID(), key: v.Key(), seq: e.Seq, e: e, body: e.Body}
	}
	s.index()
	s.sort()
	for _, n := range s.order {
		n.past = s.pastOf(n)
	}
	s.heads = s.findHeads()
	return s
}

func (s *set) index() {
	all := make([]*node, 0, len(s.byID))
	for _, n := range s.byID {
		if n.seq > 1 {
			n.prev = s.byID[n.e.Prev]
		}
		all = append(all, n)
	}
	slices.SortFunc(all, func(a, b *node) int {
		return cmp.Or(bytes.Compare(a.key[:], b.key[:]), cmp.Compare(a.seq, b.seq), bytes.Compare(a.id[:], b.id[:]))
	})
	for i, n := range all {
		if i == 0 || all[i-1].key != n.key {
			s.lines, s.forks = append(s.lines, nil), append(s.forks, 0)
		}
		n.line = len(s.lines) - 1
		if i > 0 && all[i-1].key == n.key && all[i-1].seq == n.seq && s.forks[n.line] == 0 {
			s.forks[n.line] = n.seq
		}
		s.lines[n.line] = append(s.lines[n.line], n)
	}
}

// compareDisplay is the total order for people: hybrid clock, key, sequence, id.
func compareDisplay(a, b *node) int {
	return cmp.Or(
		cmp.Compare(a.e.Clock.Wall, b.e.Clock.Wall), cmp.Compare(a.e.Clock.Count, b.e.Clock.Count),
		bytes.Compare(a.key[:], b.key[:]), cmp.Compare(a.seq, b.seq), bytes.Compare(a.id[:], b.id[:]))
}

type ready []*node

func (r ready) Len() int           { return len(r) }
func (r ready) Less(i, j int) bool { return compareDisplay(r[i], r[j]) < 0 }
func (r ready) Swap(i, j int)      { r[i], r[j] = r[j], r[i] }
func (r *ready) Push(x any)        { *r = append(*r, x.(*node)) }
func (r *ready) Pop() any {
	last := (*r)[len(*r)-1]
	*r = (*r)[:len(*r)-1]
	return last
}

// sort puts causes before effects; where neither caused the other, the display order decides. Entries below a missing
// ancestor are lost until it arrives.
func (s *set) sort() {
	var free ready
	for _, l := range s.lines {
		for _, n := range l {
			for _, id := range parents(n) {
				if p := s.byID[id]; p != nil {
					p.children = append(p.children, n)
				}
				n.waits++
			}
			if n.waits == 0 {
				free = append(free, n)
			}
		}
	}
	heap.Init(&free)
	s.order = make([]*node, 0, len(s.byID))
	for free.Len() > 0 {
		n := heap.Pop(&free).(*node)
		s.order = append(s.order, n)
		for _, c := range n.children {
			if c.waits--; c.waits == 0 {
				heap.Push(&free, c)
			}
		}
		n.children = nil
	}
	for _, l := range s.lines {
		for _, n := range l {
			if n.waits > 0 {
				n.fault = "an entry that it builds on is missing"
				s.lost = append(s.lost, n)
			}
		}
	}
	slices.SortFunc(s.lost, compareDisplay)
}

func parents(n *node) []record.ID {
	if n.seq == 1 {
		return n.e.Seen
	}
	return append(slices.Clone(n.e.Seen), n.e.Prev)
}

// pastOf joins the causal pasts of the entries that n names. It also notes what is wrong with the names themselves.
func (s *set) pastOf(n *node) []uint64 {
	past := make([]uint64, len(s.lines))
	for _, id := range parents(n) {
		p := s.byID[id]
		for i, q := range p.past {
			past[i] = max(past[i], q)
		}
		if p.fault != "" && p.line == n.line && n.fault == "" {
			n.fault = "it follows an entry that is set aside: " + p.fault
		}
	}
	if n.seq > 1 && (n.prev.key != n.key || n.prev.seq+1 != n.seq) {
		n.fault = fmt.Sprintf("it names %s as the entry before it, which is not number %d of its line", n.e.Prev.Short(), n.seq-1)
	}
	past[n.line] = n.seq
	return past
}

func (s *set) findHeads() []LineHead {
	var hs []LineHead
	for _, l := range s.lines {
		followed := map[record.ID]bool{}
		for _, n := range l {
			followed[n.e.Prev] = true
		}
		for _, n := range l {
			if !followed[n.id] {
				hs = append(hs, LineHead{n.key, n.seq, n.id})
			}
		}
	}
	return hs
}

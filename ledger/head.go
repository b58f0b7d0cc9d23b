package ledger

import "example.org/chargehand/ledger/record"

// LineHead is the newest entry held of one line: the hash-chained sequence of entries made by one key.
type LineHead struct {
	Key record.KeyID
	Seq uint64
	ID  record.ID
}

// Changes says what a merge brought: the entries that were new, in the order taken, how many were held already, and how
// many were left out because an entry that they name is not there yet.
type Changes struct {
	Added   []record.ID
	Held    int
	Waiting int
}

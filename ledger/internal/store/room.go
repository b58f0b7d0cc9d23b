//go:build linux || darwin

package store

import (
	"fmt"
	"syscall"
)

// leastRoom is the space that must be free, in bytes: Badger writes through mapped files that have holes, and where a hole
// cannot be filled the system ends the process. It is two memtables and the tables that a compaction writes anew.
const leastRoom = 24 << 20

// room tells whether there is space for Badger to work in and for size more bytes. Errors: ErrFull, or the file system's.
func room(dir string, size int) error {
	var s syscall.Statfs_t
	if err := syscall.Statfs(dir, &s); err != nil {
		return fmt.Errorf("how much room there is in %s: %w", dir, err)
	}
	free, need := uint64(s.Bavail)*uint64(s.Bsize), uint64(leastRoom+4*size)
	if free < need {
		return fmt.Errorf("%w: %d kB are free for %q, and the book needs %d kB to work in", ErrFull, free>>10, dir, need>>10)
	}
	return nil
}

//go:build unix

package store

import (
	"io/fs"
	"syscall"
)

// blocks returns the bytes that a file takes on the disk.
func blocks(info fs.FileInfo) int64 { return int64(info.Sys().(*syscall.Stat_t).Blocks) * 512 }

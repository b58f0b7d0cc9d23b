//go:build !unix

package store

import "io/fs"

func blocks(info fs.FileInfo) int64 { return info.Size() }

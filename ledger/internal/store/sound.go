package store

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"syscall"

	"github.com/dgraph-io/badger/v4"
	"github.com/dgraph-io/badger/v4/options"
	"github.com/dgraph-io/badger/v4/table"
)

// sound looks at a store's files before Badger opens them, since Badger deletes the tables that its manifest does not name,
// makes a new manifest where there is none, and ends the process at a table whose end is cut off. A store that was closed
// holds no memtable (*.mem); then what is on the disk and what the manifest says must be the same. One that was killed holds
// one, and may have tables that are not named yet: what they hold is in the memtable still. changed names the
// tables that soundTable finds changed.
func sound(dir string, o badger.Options) (changed, broken error) {
	tables, err := filepath.Glob(filepath.Join(dir, "*.sst"))
	if err != nil {
		return nil, err
	}
	f, err := os.Open(filepath.Join(dir, badger.ManifestFilename))
	if errors.Is(err, fs.ErrNotExist) {
		if len(tables) > 0 {
			return nil, fmt.Errorf("%w: its file %s is missing", ErrDamaged, badger.ManifestFilename)
		}
		return nil, nil
	} else if err != nil {
		return nil, err
	}
	defer f.Close()
	m, read, err := badger.ReplayManifestFile(f, magic, o)
	if err != nil {
		return nil, unreadable(badger.ManifestFilename)
	}
	info, err := f.Stat()
	if err != nil {
		return nil, err
	}
	memtables, err := filepath.Glob(filepath.Join(dir, "*.mem"))
	if err != nil {
		return nil, err
	}
	closed := len(memtables) == 0
	if closed && read < info.Size() {
		return nil, unreadable(badger.ManifestFilename)
	}
	held, altered := map[uint64]bool{}, []string(nil)
	for _, name := range tables {
		id, err := strconv.ParseUint(strings.TrimSuffix(filepath.Base(name), ".sst"), 10, 64)
		if err != nil {
			continue // none of Badger's
		}
		held[id] = true
		if _, named := m.Tables[id]; named {
			same, err := soundTable(name)
			if err != nil {
				return nil, err
			}
			if !same {
				altered = append(altered, filepath.Base(name))
			}
		} else if closed {
			return nil, fmt.Errorf("%w: its file %s does not name %s", ErrDamaged, badger.ManifestFilename, filepath.Base(name))
		}
	}
	for id := range m.Tables {
		if !held[id] {
			return nil, fmt.Errorf("%w: its file %06d.sst is missing", ErrDamaged, id)
		}
	}
	if len(altered) > 0 {
		changed = fmt.Errorf("%w: its file %s is not as it was written", ErrDamaged, strings.Join(altered, " and "))
	}
	return changed, nil
}

func unreadable(name string) error {
	return fmt.Errorf("%w: its file %s cannot be read", ErrDamaged, name)
}

// soundTable reads a table from end to end. broken says that Badger could not, or would end the process at it. Where it can and
// a checksum does not fit, same is false: entries can be read, and each has its signature to show for itself.
func soundTable(path string) (same bool, broken error) {
	name := filepath.Base(path)
	defer func() {
		if recover() != nil { // Badger's reader trusts the lengths that it finds
			broken = unreadable(name)
		}
	}()
	data, err := os.ReadFile(path)
	if err != nil {
		return false, err
	}
	t, err := table.OpenInMemoryTable(data, 0, &table.Options{Compression: options.Snappy})
	if err != nil {
		return false, unreadable(name)
	}
	it := t.NewIterator(0)
	for it.Rewind(); it.Valid(); it.Next() {
		it.Value()
	}
	if err := it.Close(); err != nil {
		return false, unreadable(name)
	}
	return t.VerifyChecksum() == nil, nil
}

var badgerFile = regexp.MustCompile(`\d{6}\.(sst|vlog|mem)|MANIFEST|KEYREGISTRY|DISCARD`)

// whole makes what Badger says of a store that it cannot open into damage, with the file it names, unless translate knew
// better or the file system refused.
func whole(dir string, err error) error {
	if s := err.Error(); strings.Contains(s, "read-only file system") || strings.Contains(s, "permission denied") { // Badger does not wrap these
		return &fs.PathError{Op: "open", Path: dir, Err: fs.ErrPermission}
	}
	for _, known := range []error{ErrBusy, ErrFull, fs.ErrPermission, syscall.EROFS, syscall.EMFILE, syscall.EIO} {
		if errors.Is(err, known) {
			return err
		}
	}
	return damage(err)
}

// damage names the file that Badger stumbled over, where it does.
func damage(err error) error {
	if name := badgerFile.FindString(err.Error()); name != "" {
		return unreadable(name)
	}
	if strings.Contains(strings.ToLower(err.Error()), "key") {
		return unreadable("KEYREGISTRY")
	}
	return fmt.Errorf("%w: its files do not belong together", ErrDamaged)
}

package audit

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"path"
	"strings"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// Suffix ends the name of a file that holds the bytes of one entry. The rest of the name says nothing to ReadFolder.
const Suffix = ".cose"

// BookFile names the file beside the entries that holds the founding fingerprint. A folder can do without.
const BookFile = "book"

// Reasons why a folder cannot be audited at all.
var (
	ErrNoEntries = errors.New("it holds no file of an entry (*" + Suffix + ")")
	ErrWhichBook = errors.New("it does not tell which book it is of")
)

// ReadFolder reads the entries of a folder, one file each, and changes nothing there. What does not verify is returned with
// its file's name. Without a file that names the book, its one founding entry does. Errors: ErrNoEntries, ErrWhichBook, or
// the file system's.
func ReadFolder(folder fs.FS) (*ledger.Meaning, []Unreadable, error) {
	files, err := fs.ReadDir(folder, ".")
	if err != nil {
		return nil, nil, err
	}
	type file struct {
		name string
		raw  []byte
	}
	var held []file
	var bad []Unreadable
	for _, f := range files {
		if !strings.EqualFold(path.Ext(f.Name()), Suffix) {
			continue
		}
		raw, err := readEntry(folder, f)
		if err != nil {
			bad = append(bad, Unreadable{"file " + f.Name(), err})
			continue
		}
		held = append(held, file{f.Name(), raw})
	}
	if len(held)+len(bad) == 0 {
		return nil, nil, ErrNoEntries
	}
	id, named, err := bookNamed(folder)
	if err != nil {
		return nil, nil, err
	}
	if !named {
		founded := map[record.BookID]bool{}
		for _, f := range held {
			if v, err := record.VerifyFounding(f.raw); err == nil {
				id = record.BookID(v.ID())
				founded[id] = true
			}
		}
		if len(founded) != 1 {
			return nil, nil, fmt.Errorf("%w: there is no file %q, and %d founding entries stand among the others", ErrWhichBook, BookFile, len(founded))
		}
	}
	var entries []record.Verified
	for _, f := range held {
		v, err := record.Verify(f.raw, id)
		if err != nil {
			bad = append(bad, Unreadable{"file " + f.name, err})
			continue
		}
		entries = append(entries, v)
	}
	return ledger.Fold(id, entries), bad, nil
}

func bookNamed(folder fs.FS) (id record.BookID, named bool, err error) {
	f, err := folder.Open(BookFile)
	if errors.Is(err, fs.ErrNotExist) {
		return id, false, nil
	} else if err != nil {
		return id, false, err
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, 100))
	if err != nil {
		return id, false, err
	}
	if id, err = record.ParseBookID(strings.TrimSpace(string(text))); err != nil {
		return id, false, fmt.Errorf("%w: its file %q: %w", ErrWhichBook, BookFile, err)
	}
	return id, true, nil
}

// readEntry reads one file, and no more of it than an entry can have.
func readEntry(folder fs.FS, file fs.DirEntry) ([]byte, error) {
	if !file.Type().IsRegular() { // opening a pipe would wait for a writer
		return nil, errors.New("it is not a plain file")
	}
	f, err := folder.Open(file.Name())
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return io.ReadAll(io.LimitReader(f, record.MaxSize+1))
}

package main

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"time"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/audit"
	"example.org/chargehand/ledger/record"
)

func newBookCopy() *cobra.Command {
	var h home
	cmd := &cobra.Command{Use: "copy DIR", Short: "Copy every entry, one file each, for an auditor",
		Long: `Copy every entry of the book into a new folder, one file each, for an auditor: 'chargehand audit DIR' verifies it with no key and
no store, and other people's COSE tools can. The folder is there complete or not at all. It holds no key and no secret.`,
		Example: "  chargehand book copy /media/stick/dry-creek",
		Args: usageArgs(func(_ *cobra.Command, args []string) error {
			if len(args) != 1 {
				return usageError(fmt.Sprintf("book copy takes one new folder and got %d: %q", len(args), args), "Name one, such as 'chargehand book copy for-the-auditor'")
			}
			return nil
		})}
	addHome(cmd, &h, false)
	cmd.RunE = func(cmd *cobra.Command, args []string) (err error) {
		b, _, err := h.open()
		if err != nil {
			return err
		}
		defer func() { err = errors.Join(err, b.Close()) }()
		m := b.Meaning()
		if err := writeCopy(args[0], m, time.Now()); err != nil {
			return err
		}
		fp := m.Fingerprint()
		p := &printer{w: cmd.OutOrStdout()}
		p.line("copied      %d entries of %d lines into %s", len(m.Entries), len(m.Frontier()), args[0])
		p.line("founding    %s", m.Book)
		p.line("fingerprint %s", grouped(fp[:8]))
		p.line("next        tell the auditor both by another way than with the folder; they run 'chargehand audit %s'", args[0])
		return p.err
	}
	return cmd
}

// writeCopy makes the folder under a temporary name beside it, syncs it and gives it its name.
func writeCopy(dir string, m *ledger.Meaning, at time.Time) (err error) {
	if _, err := os.Lstat(dir); err == nil {
		return couldNot(fmt.Errorf("there is something at %q already", dir), "Name a new folder; nothing was changed")
	}
	dir = filepath.Clean(dir)
	fail := func(err error) error {
		return couldNot(fmt.Errorf("the copy %q was not made: %w", dir, plainly(err)), "See that the folder above it is there, may be written and has room; nothing is left of the copy")
	}
	temp, err := os.MkdirTemp(filepath.Dir(dir), ".copy-*")
	if err != nil {
		return fail(err)
	}
	defer func() {
		if err != nil {
			err = fail(errors.Join(err, os.RemoveAll(temp)))
		}
	}()
	for i := range m.Entries {
		it := &m.Entries[i]
		if err := writeSynced(filepath.Join(temp, entryFile(it.Verified)), it.Raw()); err != nil {
			return err
		}
	}
	if err := writeSynced(filepath.Join(temp, audit.BookFile), []byte(m.Book.String()+"\n")); err != nil {
		return err
	}
	if err := writeSynced(filepath.Join(temp, "READ-ME.txt"), readMe(m, at)); err != nil {
		return err
	}
	if err := syncFolder(temp); err != nil {
		return err
	}
	if err := os.Rename(temp, dir); err != nil { // refused when a folder that holds anything has come there since
		return err
	}
	return syncFolder(filepath.Dir(dir))
}

// entryFile makes a listing read as the lines, each in its order.
func entryFile(v record.Verified) string {
	return fmt.Sprintf("%s-%08d-%s%s", v.Key().Short(), v.Entry().Seq, v.ID().Short(), audit.Suffix)
}

func writeSynced(path string, data []byte) error {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return err
	}
	_, err = f.Write(data)
	if err == nil {
		err = f.Sync()
	}
	return errors.Join(err, f.Close())
}

func syncFolder(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	return errors.Join(d.Sync(), d.Close())
}

func readMe(m *ledger.Meaning, at time.Time) []byte {
	fp := m.Fingerprint()
	return fmt.Appendf(nil, `A copy of the book %q, founded by %s, for an auditor.

copied      %s
holds       %d entries of %d lines
founding    %s
fingerprint %x

Each file *.cose is one signed entry of a record of how the gas charges of hydraulic accumulators were checked and charged:
readings, limits, gauges, corrections, and who may sign them. The name is the first digits of the signing key, the number in
that key's line, and the first digits of the entry's id. The file book holds the founding fingerprint.

To check all of it, with no key:

    chargehand audit THIS-FOLDER --founding DIGITS --fingerprint DIGITS

Take both digits from the lead by another way, such as by telephone, and not from this file: whoever could change the folder
could change this file too.

To check one signature with other tools: a file is a COSE_Sign1 message (RFC 9052), tagged 18, signed with Ed25519. The
protected header's key id (4) is the public key itself, 32 bytes. External data is the founding fingerprint, 32 bytes; for
the founding entry itself it is empty. An entry's id is SHA-256 of what is signed, the Sig_structure. The payload is a map:
1 number in the line, 2 id of the entry before, 3 ids of other lines' newest entries that the signer had seen, 4 time and zone
offset in minutes, 5 clock, 6 kind, 7 what it says, 8 the verdict that the signer was shown.
`, m.Founding.Title, m.Founding.Name, at.Format(time.RFC3339), len(m.Entries), len(m.Frontier()), m.Book, fp)
}

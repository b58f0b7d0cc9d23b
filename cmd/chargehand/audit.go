package main

import (
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/audit"
	"example.org/chargehand/ledger/record"
)

// statusUnaudited says that no audit was made; an auditor's script tells it from findings, and needs no finer word.
const statusUnaudited = 2

func newAudit() *cobra.Command {
	var h home
	var founding, fingerprint string
	var asJSON bool
	cmd := &cobra.Command{Use: "audit [FOLDER]", Short: "Verify every signature, line, authority and verdict of a book or of a copy of it",
		Long: `Verify a book, or the copy of one that 'chargehand book copy' makes: signatures, lines and forks, that nothing named is missing,
who might sign what and when, clocks, calibration, and each verdict shown to its signer against the verdict computed now.
FOLDER is a book's folder, or a folder of entries, one file each (*.cose); without it the audit is of the book that --book or
$CHARGEHAND_BOOK names. It needs no key, and changes nothing in a folder of entries.

Findings are faults (the record does not prove what it should), warnings (a rule of the work was not kept, or something
cannot be judged here) and notes (worth knowing; nothing is wrong). What only a person can know comes from outside: give the
founding fingerprint as the founder told it with --founding, and the fingerprint as it was told when the book was handed over
with --fingerprint. An entry taken from the end of a line leaves no gap; only --fingerprint shows that.

Exit status 0: nothing but notes; 1: faults or warnings; 2: could not audit (no such folder, a store that cannot be read, a
book held by another process, a wrong flag).`,
		Example: "  chargehand audit\n  chargehand audit /media/stick/dry-creek --fingerprint \"1f0c 22a1 94be 7d03\"",
		Args: usageArgs(func(_ *cobra.Command, args []string) error {
			if len(args) > 1 {
				return usageError(fmt.Sprintf("audit takes one folder and got %d: %q", len(args), args), "Name one")
			}
			return nil
		})}
	addHome(cmd, &h, false)
	addJSON(cmd, &asJSON)
	cmd.Flags().StringVar(&founding, "founding", "", "the founding fingerprint as given to you from outside, 64 digits")
	cmd.Flags().StringVar(&fingerprint, "fingerprint", "", "the book's fingerprint as given to you from outside, 16 digits or more; spaces do not count")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		told, err := outside(founding, fingerprint)
		if err != nil {
			return err
		}
		if len(args) == 1 && h.dir != "" {
			return usageError(fmt.Sprintf("the folder %q and --book %q are both given", args[0], h.dir), "Give one of them")
		} else if len(args) == 1 {
			h.dir = args[0]
		}
		m, bad, err := inspect(&h, len(args) == 1)
		if err != nil {
			return unaudited(err)
		}
		r := audit.Run(m, bad, told)
		if asJSON {
			err = writeJSON(cmd.OutOrStdout(), auditJSON(&r))
		} else {
			err = printAudit(cmd.OutOrStdout(), &r, told)
		}
		if err == nil && !r.Clean() {
			return errNo
		}
		return err
	}
	return cmd
}

func outside(founding, fingerprint string) (told audit.Outside, err error) {
	if founding != "" {
		id, err := record.ParseBookID(founding)
		if err != nil {
			return told, usageError("--founding: "+err.Error(), "Copy all 64 digits")
		}
		told.Founding = &id
	}
	if fingerprint != "" {
		told.Fingerprint, err = hex.DecodeString(strings.Join(strings.Fields(fingerprint), ""))
		if n := len(told.Fingerprint); err != nil || n < 8 || n > 32 {
			return told, usageError(fmt.Sprintf("--fingerprint: %q is not 16 to 64 hexadecimal digits", fingerprint), "Copy it as 'book show' or 'book copy' prints it, in quotes")
		}
	}
	return told, nil
}

// unaudited gives an error the status of an audit that was not made.
func unaudited(err error) error {
	p := &problem{what: plainly(err).Error(), todo: "Put right what is named there and audit again", cause: err}
	if q := (*problem)(nil); errors.As(err, &q) {
		p.what, p.todo = q.what, q.todo
	}
	p.status = statusUnaudited
	return p
}

// inspect reads the book's folder, or, where that may be one, a folder of entries.
func inspect(h *home, orEntries bool) (*ledger.Meaning, []audit.Unreadable, error) {
	if orEntries {
		info, err := os.Stat(h.dir)
		if err != nil || !info.IsDir() {
			return nil, nil, couldNot(fmt.Errorf("there is no folder %q", h.dir), "Name the folder of a book, or one that 'chargehand book copy' made")
		}
		if !holds(h.dir, "store") && !holds(h.dir, "key") {
			return inspectEntries(h.dir)
		}
	}
	id, dir, err := h.id()
	if err != nil {
		return nil, nil, err
	}
	var bad []audit.Unreadable
	m, err := ledger.Inspect(filepath.Join(dir, "store"), id, func(where string, err error) { bad = append(bad, audit.Unreadable{Where: where, Err: err}) })
	switch {
	case m != nil:
		if err != nil {
			bad = append(bad, audit.Unreadable{Err: err})
		}
		return m, bad, nil
	case errors.Is(err, ledger.ErrDamaged):
		return nil, nil, couldNot(fmt.Errorf("the store in %q cannot be opened: %w", dir, err), "Audit the copy of another laptop; keep this folder as it is for whoever looks into it")
	case errors.Is(err, ledger.ErrNoBook):
		return nil, nil, couldNot(fmt.Errorf("the folder %q names a book and has no store", dir), "Restore the folder store from a backup, or audit the copy of another laptop")
	}
	return nil, nil, explain(err, dir)
}

func holds(dir, name string) bool {
	_, err := os.Stat(filepath.Join(dir, name))
	return !errors.Is(err, fs.ErrNotExist)
}

func inspectEntries(dir string) (*ledger.Meaning, []audit.Unreadable, error) {
	m, bad, err := audit.ReadFolder(os.DirFS(dir))
	switch {
	case errors.Is(err, audit.ErrNoEntries):
		err = couldNot(fmt.Errorf("the folder %q is no book and no copy of one: %w", dir, err), "Name the folder of a book, or one that 'chargehand book copy' made")
	case errors.Is(err, audit.ErrWhichBook):
		err = couldNot(fmt.Errorf("the folder %q: %w", dir, err), "Put the founding fingerprint, 64 digits, in its file book, or take out what is of another book")
	}
	return m, bad, err
}

var severityWords = map[audit.Severity]string{
	audit.Fault:   "the record does not prove what it should",
	audit.Warning: "a rule of the work was not kept, or something cannot be judged here",
	audit.Note:    "worth knowing; nothing is wrong",
}

func printAudit(w io.Writer, r *audit.Report, told audit.Outside) error {
	p := &printer{w: w}
	if r.Title != "" {
		p.line("book        %s, founded by %s", r.Title, r.Founder)
	}
	p.line("founding    %s%s", r.Book, compared(told.Founding != nil, told.Founding != nil && *told.Founding == r.Book))
	same := len(told.Fingerprint) > 0 && strings.HasPrefix(hex.EncodeToString(r.Fingerprint[:]), hex.EncodeToString(told.Fingerprint))
	p.line("fingerprint %s%s", grouped(r.Fingerprint[:8]), compared(len(told.Fingerprint) > 0, same))
	p.line("checked     %d entries of %d lines, %d verdicts recomputed", r.Entries, r.Lines, r.Verdicts)
	var last audit.Severity = -1
	for _, f := range r.Findings {
		if f.Severity != last {
			last = f.Severity
			p.line("\n%s: %s", strings.ToUpper(plural(r.Count(last), last.String())), severityWords[last])
		}
		if f.Entry == (record.ID{}) {
			p.line("- the book: %s", f.Sentence)
			continue
		}
		p.line("- entry %s, %s, signed by %s on %s:\n  %s", f.Entry.Short(), f.Kind, f.Signer, clock(f.Signed), f.Sentence)
	}
	if len(r.Findings) > 0 {
		p.line("")
	}
	p.line("found       %s, %s, %s", plural(r.Count(audit.Fault), "fault"), plural(r.Count(audit.Warning), "warning"), plural(r.Count(audit.Note), "note"))
	return p.err
}

func compared(given, same bool) string {
	switch {
	case !given:
		return " (not compared with one given from outside)"
	case same:
		return " (as given from outside)"
	}
	return " (NOT as given from outside)"
}

func plural(n int, word string) string {
	if n == 1 {
		return "1 " + word
	}
	return fmt.Sprintf("%d %ss", n, word)
}

// printer keeps the first error of several writes.
type printer struct {
	w   io.Writer
	err error
}

func (p *printer) line(format string, args ...any) {
	if p.err == nil {
		_, p.err = fmt.Fprintf(p.w, format+"\n", args...)
	}
}

func auditJSON(r *audit.Report) any {
	type finding struct {
		Severity string `json:"severity"`
		Entry    string `json:"entry,omitempty"`
		Kind     string `json:"kind,omitempty"`
		Signer   string `json:"signer,omitempty"`
		Signed   string `json:"signed,omitempty"`
		Sentence string `json:"sentence"`
	}
	out := struct {
		Founding    string    `json:"founding"`
		Fingerprint string    `json:"fingerprint"`
		Entries     int       `json:"entries"`
		Lines       int       `json:"lines"`
		Verdicts    int       `json:"verdicts"`
		Faults      int       `json:"faults"`
		Warnings    int       `json:"warnings"`
		Notes       int       `json:"notes"`
		Findings    []finding `json:"findings"`
	}{r.Book.String(), fmt.Sprintf("%x", r.Fingerprint), r.Entries, r.Lines, r.Verdicts,
		r.Count(audit.Fault), r.Count(audit.Warning), r.Count(audit.Note), []finding{}}
	for _, f := range r.Findings {
		x := finding{Severity: f.Severity.String(), Sentence: f.Sentence}
		if f.Entry != (record.ID{}) {
			x.Entry, x.Kind, x.Signer, x.Signed = f.Entry.String(), string(f.Kind), f.Signer, clock(f.Signed)
		}
		out.Findings = append(out.Findings, x)
	}
	return out
}

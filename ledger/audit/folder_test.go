package audit_test

import (
	"errors"
	"fmt"
	"strings"
	"testing"
	"testing/fstest"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/audit"
	"example.org/chargehand/ledger/record"
)

// One flipped bit anywhere in any file of a folder is found; so is a file that is cut, empty, too large or no file.
func TestFolder(t *testing.T) {
	b, vs := history(t, t.TempDir())
	folder := fstest.MapFS{}
	for i, v := range vs {
		folder[fmt.Sprintf("%02d.cose", i)] = &fstest.MapFile{Data: v.Raw()}
	}
	folder["notes.txt"] = &fstest.MapFile{Data: []byte("not an entry")}
	m, bad, err := audit.ReadFolder(folder)
	if err != nil || len(bad) > 0 || m.Book != b.ID() || m.Fingerprint() != b.Fingerprint() {
		t.Fatalf("a good folder: %d bad, %v", len(bad), err)
	}
	with := func(name string, data []byte) fstest.MapFS {
		f := fstest.MapFS{audit.BookFile: {Data: []byte(b.ID().String() + "\n")}}
		for k, v := range folder {
			f[k] = v
		}
		f[name] = &fstest.MapFile{Data: data}
		return f
	}
	raw := vs[6].Raw()
	for at := range raw {
		flipped := append([]byte(nil), raw...)
		flipped[at] ^= 1 << (at % 8)
		m, bad, err := audit.ReadFolder(with("06.cose", flipped))
		if err != nil || len(bad) != 1 || bad[0].Where != "file 06.cose" {
			t.Fatalf("a bit of byte %d: %v, %v", at, bad, err)
		}
		if r := audit.Run(m, bad, audit.Outside{}); r.Clean() {
			t.Errorf("a bit of byte %d: nothing found", at)
		}
	}
	for name, data := range map[string][]byte{"cut": raw[:40], "empty": {}, "large": make([]byte, record.MaxSize+1)} {
		if _, bad, err := audit.ReadFolder(with("extra.cose", data)); err != nil || len(bad) != 1 {
			t.Errorf("%s: %v, %v", name, bad, err)
		}
	}
	if _, _, err := audit.ReadFolder(with(audit.BookFile, []byte("nonsense"))); !errors.Is(err, audit.ErrWhichBook) {
		t.Errorf("nonsense in the file book: %v", err)
	}
	delete(folder, "00.cose")
	if _, _, err := audit.ReadFolder(folder); !errors.Is(err, audit.ErrWhichBook) {
		t.Errorf("neither book nor founding entry: %v", err)
	}
	if _, _, err := audit.ReadFolder(fstest.MapFS{"notes.txt": folder["notes.txt"]}); !errors.Is(err, audit.ErrNoEntries) {
		t.Errorf("no entries: %v", err)
	}
}

// What a signer was shown is held against what they had seen: a verdict or a pressure that this program would not have shown is a
// fault, and another program's calculation a warning.
func TestShownOtherThanComputed(t *testing.T) {
	// 1,180 psi at 41 F is 1,264.5 psi at 70 F (README), 8,718,400 Pa.
	pa := func(n int64) *record.Amount { return &record.Amount{Mantissa: n, Exponent: -3, Unit: "kPa"} }
	for _, c := range []struct {
		shown record.Shown
		want  string
	}{
		{record.Shown{Verdict: "pass", Corrected: pa(8_718_400), Core: "1"}, ""},
		{record.Shown{Verdict: "fail", Core: "1"}, `fault: its signer was shown "fail", and the same readings, sheet and gauge give "pass" at 1264.5 psi`},
		{record.Shown{Verdict: "pass", Corrected: pa(8_818_400), Core: "1"}, `fault: its signer was shown "pass" at 1279.0 psi, and the same`},
		{record.Shown{Verdict: "fail", Core: "0"}, `warning: its signer was shown "fail" by calculation "0"`},
		{record.Shown{Verdict: "splendid", Core: "1"}, `fault: its signer was shown "splendid"`},
	} {
		b, _ := history(t, t.TempDir())
		if _, err := b.Author(key("tech"), ledger.Draft{Kind: record.KindReading, Body: reading(1180), Shown: &c.shown}); err != nil {
			t.Fatal(err)
		}
		r := audit.Run(b.Meaning(), nil, audit.Outside{})
		if got := sentences(r); c.want == "" && got != "" || !strings.HasPrefix(got, c.want) || strings.Contains(got, "\n") {
			t.Errorf("%q: found %q, want %q", c.shown.Verdict, got, c.want)
		}
		if r.Clean() != (c.want == "") {
			t.Errorf("%q: clean %v", c.shown.Verdict, r.Clean())
		}
	}
}

// A fingerprint told from outside shows what no gap does: the newest entry of a line taken away.
func TestNewestEntryRemoved(t *testing.T) {
	b, vs := history(t, t.TempDir())
	fp := b.Fingerprint()
	short := ledger.Fold(b.ID(), vs[:len(vs)-1])
	if r := audit.Run(short, nil, audit.Outside{}); !r.Clean() {
		t.Errorf("without the fingerprint: %s", sentences(r))
	}
	if r := audit.Run(short, nil, audit.Outside{Fingerprint: fp[:8]}); r.Clean() || !strings.Contains(sentences(r), "removed or withheld") {
		t.Errorf("with it: %s", sentences(r))
	}
	if r := audit.Run(b.Meaning(), nil, audit.Outside{Fingerprint: fp[:]}); !r.Clean() {
		t.Errorf("the whole book: %s", sentences(r))
	}
}

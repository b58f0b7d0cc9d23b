package main

import (
	"strings"
	"testing"
)

// A defect stands on the board until it is cleared, and nobody clears it twice.
func TestSnags(t *testing.T) {
	b := newBench(t)
	b.equip()
	if out := b.want(statusUsage, "snag", "raise", "104", "--passphrase-file", "pp"); !strings.Contains(out, "--what is missing") {
		t.Error(out)
	}
	b.sign("snag", "raise", "104", "--what", "bubbles at the charging valve")
	var snags []snagJSON
	b.json(&snags, "snag", "list")
	if len(snags) != 1 || snags[0].Unit != "HA-40/104" || snags[0].Cleared != "" {
		t.Fatalf("%+v", snags)
	}
	for _, args := range [][]string{{"board"}, {"unit", "show", "104"}} {
		if out := b.want(statusOK, args...); !strings.Contains(out, "bubbles at the charging valve") {
			t.Errorf("%q: %s", args, out)
		}
	}
	b.sign("snag", "clear", snags[0].Entry[:8], "--how", "valve core replaced")
	if out := b.want(statusOK, "snag", "list"); !strings.Contains(out, "no open snag") {
		t.Error(out)
	}
	b.json(&snags, "snag", "list", "--all")
	if len(snags) != 1 || !strings.Contains(snags[0].Cleared, "valve core replaced") {
		t.Errorf("%+v", snags)
	}
	if out := b.want(statusUsage, "snag", "clear", snags[0].Entry[:8], "--how", "again", "--passphrase-file", "pp"); !strings.Contains(out, "cleared already") {
		t.Error(out)
	}
	if out := b.want(statusOK, "board"); strings.Contains(out, "bubbles") {
		t.Error(out)
	}
}

// What is handed over is stated with the fingerprint; nobody takes over from themselves.
func TestHandover(t *testing.T) {
	b := newBench(t)
	b.equip()
	b.sign("snag", "raise", "104", "--what", "gauge glass cracked")
	var given handoverJSON
	b.json(&given, "handover", "give", "--passphrase-file", "pp")
	if len(given.Open) != 2 || !strings.Contains(given.Open[0], "HA-40/104: not read yet") || !strings.Contains(given.Open[1], "gauge glass cracked") || len(given.Fingerprint) != 64 {
		t.Errorf("%+v", given)
	}
	if out := b.want(statusNot, "handover", "take", given.Entry[:8], "--passphrase-file", "pp"); !strings.Contains(out, "nobody takes over from themselves") {
		t.Error(out)
	}
	if out := b.want(statusUsage, "handover", "take", "ffff", "--passphrase-file", "pp"); !strings.Contains(out, `"ffff"`) {
		t.Error(out)
	}
}

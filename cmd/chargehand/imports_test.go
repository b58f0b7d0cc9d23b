package main

import (
	"os"
	"os/exec"
	"slices"
	"strings"
	"testing"
)

const module = "example.org/chargehand/"

// layers says which of our packages each may depend on, and why. The first that fits a package counts.
var layers = []struct {
	layer  string
	reach  []string
	reason string
}{
	{"calc", []string{"calc"}, "physics knows no records"},
	{"ledger/record", []string{"ledger/record"}, "an entry is valid whatever this laptop computes or stores"},
	{"ledger/verdict", []string{"ledger", "calc"}, "a verdict joins entries with physics"},
	{"ledger/audit", []string{"ledger", "calc"}, "an audit recomputes verdicts"},
	{"ledger", []string{"ledger/record", "ledger/keys", "ledger/internal", "ledger"}, "two releases must hold the same book whatever they compute"},
	{"sync", []string{"sync", "ledger"}, "a conversation does not care what an entry means"},
	{"cmd/chargehand/plot", []string{"cmd/chargehand/plot"}, "a figure knows no records"},
}

// only names the one package that may import a foreign module, so that it can be replaced and its errors stay inside.
var only = map[string]string{
	"github.com/dgraph-io/badger": "ledger/internal/store",
	"github.com/libp2p/go-libp2p": "sync/lan",
	"gonum.org/v1/plot":           "cmd/chargehand/plot",
}

func within(pkg, folder string) bool { return pkg == folder || strings.HasPrefix(pkg, folder+"/") }

func goList(t *testing.T, args ...string) []string {
	t.Helper()
	cmd := exec.Command("go", append([]string{"list", "-e"}, args...)...)
	cmd.Dir = "../.."
	cmd.Stderr = os.Stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("go list %q: %v", args, err)
	}
	return strings.Split(strings.TrimSpace(string(out)), "\n")
}

func TestLayersReachOnlyWhatTheyMay(t *testing.T) {
	for _, line := range goList(t, "-f", `{{.ImportPath}} {{join .Deps " "}}`, "./...") {
		fields := strings.Fields(line)
		pkg := strings.TrimPrefix(fields[0], module)
		for _, l := range layers {
			if !within(pkg, l.layer) {
				continue
			}
			for _, dep := range fields[1:] {
				ours, found := strings.CutPrefix(dep, module)
				if found && !slices.ContainsFunc(l.reach, func(folder string) bool { return within(ours, folder) }) {
					t.Errorf("%s reaches %s: %s", pkg, ours, l.reason)
				}
			}
			break
		}
	}
}

func TestForeignModulesHaveOneImporter(t *testing.T) {
	// Tests are left out: some act as somebody who has the files and their own tools.
	for _, line := range goList(t, "-f", `{{.ImportPath}} {{join .Imports " "}}`, "./...") {
		fields := strings.Fields(line)
		pkg := strings.TrimPrefix(fields[0], module)
		for _, imported := range fields[1:] {
			for foreign, owner := range only {
				if within(imported, foreign) && !within(pkg, owner) {
					t.Errorf("%s imports %s; only %s may", pkg, imported, owner)
				}
			}
			if within(imported, module+"cmd") && !within(pkg, "cmd") {
				t.Errorf("%s imports %s; nothing imports cmd but cmd", pkg, imported)
			}
		}
	}
}

package main

import (
	"bytes"
	"errors"
	"fmt"
	"maps"
	"os"
	"os/exec"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"

	"github.com/rogpeppe/go-internal/testscript"
)

func TestMain(m *testing.M) {
	testscript.Main(m, map[string]func(){"chargehand": main})
}

func TestScripts(t *testing.T) {
	cmds := map[string]func(*testscript.TestScript, bool, []string){"status": status, "waitfor": waitFor, "readme": readme}
	maps.Copy(cmds, tampering)
	testscript.Run(t, testscript.Params{
		Dir:                 "testdata/script",
		RequireExplicitExec: true,
		RequireUniqueNames:  true,
		Cmds:                cmds,
		Condition: func(name string) (bool, error) {
			if name != "mounts" {
				return false, fmt.Errorf("no condition %q", name)
			}
			return exec.Command("unshare", "-rm", "mount", "-t", "tmpfs", "none", os.TempDir()).Run() == nil, nil
		},
	})
}

// status N COMMAND ARGS... runs a command and compares its exit status.
func status(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: status N command args...")
	}
	want, err := strconv.Atoi(args[0])
	ts.Check(err)
	got := 0
	if err := ts.Exec(args[1], args[2:]...); err != nil {
		var exit *exec.ExitError
		if !errors.As(err, &exit) {
			ts.Fatalf("%q: %v", args[1:], err)
		}
		got = exit.ExitCode()
	}
	if got != want {
		ts.Fatalf("%q: exit status %d, want %d", args[1:], got, want)
	}
}

// waitFor FILE PATTERN [VAR] waits until a line of a file that a background command writes matches, and keeps the
// pattern's first group in a variable.
func waitFor(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 || len(args) > 3 {
		ts.Fatalf("usage: waitfor file pattern [var]")
	}
	pattern, err := regexp.Compile("(?m)" + args[1])
	ts.Check(err)
	look := time.NewTicker(20 * time.Millisecond)
	defer look.Stop()
	for deadline := time.Now().Add(time.Minute); time.Now().Before(deadline); <-look.C {
		data, err := os.ReadFile(ts.MkAbs(args[0]))
		if err != nil {
			continue // not there yet
		}
		if m := pattern.FindSubmatch(data); m != nil {
			if len(args) == 3 {
				ts.Setenv(args[2], string(m[1]))
			}
			return
		}
	}
	ts.Fatalf("no line of %s matches %q: %s", args[0], args[1], ts.ReadFile(args[0]))
}

// Nonsense is refused with status 2, the value quoted, and what to do.
func TestNonsense(t *testing.T) {
	tests := []struct{ line, quoted, todo string }{
		{"convert 1180 --at 41F --to 70F", `"1180" has no unit`, "psi, bar"},
		{"convert abc --at 41F --to 70F", `"abc"`, "as 1180psi"},
		{"convert NaN --at 41F --to 70F", `"NaN"`, "as 1180psi"},
		{"convert Infpsi --at 41F --to 70F", `"Infpsi"`, "as 1180psi"},
		{"convert 1e3psi --at 41F --to 70F", `"1e3psi"`, "as 1180psi"},
		{"convert 1180C --at 41F --to 70F", `"1180C" is not a pressure`, "psi, bar"},
		{"convert 1180furlongs --at 41F --to 70F", `"1180furlongs"`, "as 1180psi"},
		{"convert 99999999psi --at 41F --to 70F", `"99999999psi"`, "Give a pressure inside that range"},
		{"convert 1180psi --at 41 --to 70F", `--at: "41" has no unit`, "F, C, K"},
		{"convert 1180psi --at 300C --to 70F", `--at: "300C"`, "inside that range"},
		{"convert 1180psi --at -100C --to 70F", `--at: "-100C"`, "inside that range"},
		{"convert 1180psi --at -500C --to 70F", `--at: "-500C" is below absolute zero`, "as 41F"},
		{"convert 1180psi --at 41F --to NaN", `--to: "NaN"`, "as 41F"},
		{"convert 1180psi --at 41F --to 70psi", `--to: "70psi" is not a temperature`, "F, C, K"},
		{"convert 1180psi --at 41F", "--to is missing", "Give it: --to"},
		{"convert 1180psi --at 41F --to 70F --gas argon", `"argon"`, "Write nitrogen or air"},
		{"convert 1180psi --at 41F --to 70F --ambient 0psi", `--ambient: "0psi"`, "above zero"},
		{"convert 1180psi --at 41F --to 70F --ambient 1180psi", `--ambient: "1180 psi"`, "station pressure"},
		{"convert 1180psi --at 41F --to 70F --elevation 60000ft", `--elevation: "60000ft"`, "inside that range"},
		{"convert 1180psi --at 41F --to 70F --ambient 1bar --elevation 50ft", `"1 bar"`, "Give one of them"},
		{"convert -5psi --at 41F --to 70F", "-5psi", "after '--'"},
		{"convert 1180psi 1190psi --at 41F --to 70F", `"1190psi"`, "Write one"},
		{"convert --at 41F --to 70F", "got 0", "Write one"},
		{"convert 1180psi --at 41F --to 70F --nope", "--nope", "--help"},
		{"conevrt 1180psi", `"conevrt"`, "--help"},
		{"prove it", `"it"`, "--help"},
	}
	for _, test := range tests {
		t.Run(test.line, func(t *testing.T) {
			var out, errs strings.Builder
			got := run(t.Context(), strings.Fields(test.line), streams{strings.NewReader(""), &out, &errs})
			if got != statusUsage || out.String() != "" {
				t.Errorf("exit status %d, output %q; want %d and none\n%s", got, out.String(), statusUsage, errs.String())
			}
			for _, want := range []string{test.quoted, test.todo} {
				if !strings.Contains(errs.String(), want) {
					t.Errorf("message %q does not contain %q", errs.String(), want)
				}
			}
			if n := strings.Count(errs.String(), "\n"); n != 1 {
				t.Errorf("message has %d lines, want 1: %q", n, errs.String())
			}
		})
	}
}

// A changed published value is found: prove can say no.
func TestProveSaysNo(t *testing.T) {
	altered := bytes.Replace(publishedCSV, []byte(",350,20,,6.3552,"), []byte(",350,20,,6.3553,"), 1)
	proofs, err := prove(altered, examplesCSV)
	if err != nil {
		t.Fatal(err)
	}
	differ := 0
	for _, p := range proofs {
		if !p.Agrees {
			differ++
		}
	}
	if differ != 1 {
		t.Errorf("%d checks differ after one published value was changed, want 1", differ)
	}
}

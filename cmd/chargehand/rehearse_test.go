package main

import (
	"errors"
	"strings"
	"testing"
)

// A story does not go on over an error: nothing is told after it, and it says which step failed and how.
func TestRehearsalStops(t *testing.T) {
	tests := []struct {
		name   string
		fail   func(*rehearsal, player)
		quoted string
	}{
		{"a step that cannot be done", func(r *rehearsal, p player) { r.run(p, statusOK, "VERDICT", "board") }, "ended with status 3 and not 0: chargehand: there is no book"},
		{"a step that goes better than told", func(r *rehearsal, p player) { r.do(p, statusNo, "version") }, "ended with status 0 and not 1"},
		{"a figure that is not there", func(r *rehearsal, _ player) { r.say("%s", r.find("verdict PASS\n", `corrected +(\S+ psi)`)) }, "verdict PASS"},
		{"a host that does not come in reach", func(r *rehearsal, p player) {
			r.pair(p, []string{"meet", "--once"}, p, func(string) []string { t.Error("a guest was called"); return nil })
		}, "ended with status 3 and not 0: chargehand: there is no book"},
	}
	for _, test := range tests {
		t.Run(test.name, func(t *testing.T) {
			var out, log strings.Builder
			r := &rehearsal{ctx: t.Context(), out: &out, log: &log, dir: t.TempDir()}
			p := r.enter("laptop-1", "asha")
			test.fail(r, p)
			r.say("and so")
			r.do(p, statusOK, "version")
			r.pair(p, []string{"version"}, p, nil)
			var failed *problem
			if !errors.As(r.err, &failed) || failed.status != statusNot || !strings.Contains(failed.what, test.quoted) {
				t.Errorf("ended with %v; want status %d and %q", r.err, statusNot, test.quoted)
			}
			if out.String() != "" {
				t.Errorf("told after the error: %q", out.String())
			}
			if n := strings.Count(log.String(), "(exit status"); n > 1 {
				t.Errorf("%d commands in the log, want the one that failed: %s", n, log.String())
			}
		})
	}
}

func TestTyped(t *testing.T) {
	got := asTyped("ben$ ", []string{"check", "104", "--relieved", "pedal, 12 strokes", "--from", "shell", "--note", strings.Repeat("x", 60)})
	want := "ben$ chargehand check 104 --relieved \"pedal, 12 strokes\" --from shell \\\n    --note " + strings.Repeat("x", 60)
	if got != want {
		t.Errorf("typed %q, want %q", got, want)
	}
}

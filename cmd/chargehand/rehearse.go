package main

import (
	"bufio"
	"bytes"
	"context"
	"embed"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"golang.org/x/sync/errgroup"
)

//go:embed rehearsal
var rehearsalCharts embed.FS

const rehearsalPassphrase = "cold nitrogen night"

// rehearsalWorkFactor lets a rehearsal's keys open in no time: they guard nothing.
const rehearsalWorkFactor = 10

func newRehearse() *cobra.Command {
	var dir string
	cmd := &cobra.Command{Use: "rehearse", Short: "Work an invented shift on two laptops, told as a story, and leave its books to play with", Args: usageArgs(cobra.NoArgs),
		Long: "Work a shift with an invented detachment: two laptops, a lead, a technician, an inspector, six units. Every step is a command as\nyou would type it, with what it printed. The books are left for you to go on with; nothing else on this machine is touched."}
	cmd.Flags().StringVar(&dir, "dir", "", "folder for the books; it must not exist or be empty (else a new temporary folder)")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		dir, err := rehearsalFolder(dir)
		if err != nil {
			return err
		}
		r := &rehearsal{ctx: context.WithValue(cmd.Context(), workFactorKey{}, rehearsalWorkFactor), dir: dir, w: cmd.OutOrStdout(), entries: map[string]string{}}
		if err := r.prepare(); err != nil {
			return err
		}
		if r.shift(); r.err != nil {
			return couldNot(r.err, fmt.Sprintf("The rehearsal ends here; its books are in %s", dir))
		}
		return nil
	}
	return cmd
}

func rehearsalFolder(dir string) (string, error) {
	if dir == "" {
		return os.MkdirTemp("", "chargehand-rehearsal-")
	}
	if names, err := os.ReadDir(dir); err == nil && len(names) > 0 {
		return "", usageError(fmt.Sprintf("--dir %q holds something already", dir), "Name a new or empty folder")
	}
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return "", usageError(fmt.Sprintf("--dir %q: %v", dir, err), "Name a folder that can be made")
	}
	return filepath.Abs(dir)
}

// rehearsal runs commands of this program in this process, each laptop with a folder of its own, and tells them. The first
// thing that goes other than expected ends the story.
type rehearsal struct {
	ctx     context.Context
	dir     string
	w       io.Writer
	entries map[string]string // names that the story gives to entries
	err     error
}

func (r *rehearsal) prepare() error {
	if err := os.WriteFile(filepath.Join(r.dir, "passphrase"), []byte(rehearsalPassphrase+"\n"), 0o600); err != nil {
		return err
	}
	for _, name := range []string{"HA-60-rev-A.csv", "HA-60-rev-B.csv"} {
		data, err := rehearsalCharts.ReadFile("rehearsal/" + name)
		if err != nil {
			return err
		}
		if err := os.WriteFile(filepath.Join(r.dir, name), data, 0o600); err != nil {
			return err
		}
	}
	return nil
}

// say tells what a person does and why.
func (r *rehearsal) say(text string) {
	if r.err == nil {
		fmt.Fprintf(r.w, "\n%s\n", fold(text, "", 92))
	}
}

// A step is one command with what must come of it.
type step struct {
	laptop string
	line   string   // the command, after chargehand; @name stands for an entry named before
	status int      // the exit status that must come
	expect string   // that the output must hold, as a regular expression
	name   string   // names the entry that it signs
	show   []string // beginnings of the lines told; all when empty, none when quiet
	quiet  bool
}

var signedEntry = regexp.MustCompile(`signed +entry ([0-9a-f]{8})`)

// do runs a step and tells it.
func (r *rehearsal) do(s step) {
	if r.err != nil {
		return
	}
	line := s.line
	for name, id := range r.entries {
		line = strings.ReplaceAll(line, "@"+name, id)
	}
	var out bytes.Buffer
	status := run(r.ctx, r.args(s.laptop, line), streams{strings.NewReader(""), &out, &out})
	if !s.quiet {
		r.tell(s.laptop, line, out.String(), s.show)
	}
	if status != s.status || !regexp.MustCompile(s.expect).MatchString(out.String()) {
		r.err = fmt.Errorf("'chargehand %s' ended with status %d and printed %q; the rehearsal expected %d and %q", line, status, out.String(), s.status, s.expect)
		return
	}
	if m := signedEntry.FindStringSubmatch(out.String()); m != nil && s.name != "" {
		r.entries[s.name] = m[1]
	}
}

// args splits a command line as the story prints it and adds where the laptop's book lies.
func (r *rehearsal) args(laptop, line string) []string {
	args := splitWords(line)
	args = append(args, "--book", filepath.Join(r.dir, laptop))
	for i, a := range args {
		if strings.HasSuffix(a, ".csv") {
			args[i] = filepath.Join(r.dir, a)
		}
	}
	if needsPassphrase(args[0], line) {
		args = append(args, "--passphrase-file", filepath.Join(r.dir, "passphrase"))
	}
	return args
}

func needsPassphrase(command, line string) bool {
	return command != "board" && command != "audit" && !strings.Contains(line, " show") && !strings.Contains(line, " list")
}

// splitWords splits at spaces outside double quotes; there are no escapes.
func splitWords(line string) []string {
	var words []string
	for i, part := range strings.Split(line, `"`) {
		if i%2 == 1 {
			words = append(words, part)
			continue
		}
		words = append(words, strings.Fields(part)...)
	}
	return words
}

func (r *rehearsal) tell(laptop, line, out string, show []string) {
	fmt.Fprintf(r.w, "\n  %s$ chargehand %s\n", laptop, fold(line, "      ", 84))
	told := true
	for _, l := range strings.Split(strings.TrimRight(out, "\n"), "\n") {
		if !strings.HasPrefix(l, " ") || len(show) == 0 { // a line that is indented belongs to the one before it
			told = len(show) == 0 || slices.ContainsFunc(show, func(s string) bool { return strings.HasPrefix(l, s) })
		}
		if told {
			fmt.Fprintf(r.w, "    %s\n", fold(l, "                ", 96))
		}
	}
}

// fold breaks a line at spaces before width, and indents what follows.
func fold(text, indent string, width int) string {
	var lines []string
	for len(text) > width {
		at := strings.LastIndex(text[:width], " ")
		if at < width/3 {
			break
		}
		lines = append(lines, text[:at])
		text = strings.TrimLeft(text[at:], " ")
		if len(lines) == 1 {
			width = 96 - len(indent)
		}
	}
	return strings.Join(append(lines, text), "\n"+indent)
}

// together runs a command on one laptop that waits to be reached, and one on another that reaches it over a real socket. The
// second's line may name @CODE and @ADDRESS, which the first prints.
func (r *rehearsal) together(first, second step) {
	if r.err != nil {
		return
	}
	pr, pw := io.Pipe()
	var one, two bytes.Buffer
	var status1, status2 int
	var line2 string
	var g errgroup.Group
	ctx, cancel := context.WithTimeout(r.ctx, 2*time.Minute)
	defer cancel()
	g.Go(func() error {
		defer pw.Close()
		status1 = run(ctx, append(r.args(first.laptop, first.line), "--listen", "127.0.0.1:0"), streams{strings.NewReader(""), io.MultiWriter(&one, pw), pw})
		return nil
	})
	g.Go(func() error {
		lines := bufio.NewScanner(pr)
		found := map[string]string{}
		for lines.Scan() {
			if f := strings.Fields(lines.Text()); len(f) > 1 && f[0] == "code" {
				found["@CODE"] = f[1]
			} else if len(f) > 3 && f[0] == "in" && f[1] == "reach" {
				found["@ADDRESS"] = f[3]
				break
			}
		}
		g.Go(func() error { _, err := io.Copy(io.Discard, pr); return err }) // what the first prints from here on
		if found["@ADDRESS"] == "" {
			return fmt.Errorf("'chargehand %s' did not come in reach: %s", first.line, one.String())
		}
		line2 = strings.NewReplacer("@CODE", found["@CODE"], "@ADDRESS", found["@ADDRESS"]).Replace(second.line)
		status2 = run(ctx, r.args(second.laptop, line2), streams{strings.NewReader(""), &two, &two})
		return nil
	})
	if r.err = g.Wait(); r.err != nil {
		return
	}
	if !first.quiet {
		r.tell(first.laptop, first.line, one.String(), first.show)
	}
	if !second.quiet {
		r.tell(second.laptop, line2, two.String(), second.show)
	}
	for _, x := range []struct {
		s      step
		status int
		out    string
	}{{first, status1, one.String()}, {second, status2, two.String()}} {
		if x.status != x.s.status || !regexp.MustCompile(x.s.expect).MatchString(x.out) {
			r.err = errors.Join(r.err, fmt.Errorf("'chargehand %s' ended with status %d and printed %q; the rehearsal expected %d and %q", x.s.line, x.status, x.out, x.s.status, x.s.expect))
		}
	}
}

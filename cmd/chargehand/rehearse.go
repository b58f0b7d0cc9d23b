package main

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"

	"github.com/spf13/cobra"
)

// The story keeps to this width; a longer line of a command's output is folded, and a row of a table is cut.
const storyWidth = 98

// rehearsalWorkFactor lets the keys of a rehearsal, which protect nothing, open at once.
const rehearsalWorkFactor = 10

func newRehearse() *cobra.Command {
	var dir string
	cmd := &cobra.Command{Use: "rehearse", Short: "Run an invented shift through the real commands, and keep its books to try things on", Args: usageArgs(cobra.NoArgs),
		Long: `Set up an invented detachment in a temporary folder and run a shift: three hands on two laptops, six accumulators, three gauges;
readings, a charge, a second signature, a meeting over a socket of this machine that moves a verdict, an audit. Each step is a
real command with its real output; a step that does not go as it should ends the rehearsal. The books stay for you to go on with.`,
		Example: "  chargehand rehearse\n  chargehand rehearse --dir dry-creek"}
	cmd.Flags().StringVar(&dir, "dir", "", "new or empty folder for it (else a temporary one)")
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		dir, err := rehearsalFolder(dir)
		if err != nil {
			return err
		}
		log, err := os.Create(filepath.Join(dir, "shift.log"))
		if err != nil {
			return err
		}
		r := &rehearsal{ctx: context.WithValue(cmd.Context(), workFactorKey{}, rehearsalWorkFactor), out: cmd.OutOrStdout(), log: log, dir: dir}
		r.shift()
		return errors.Join(r.err, log.Close())
	}
	return cmd
}

// rehearsalFolder returns a folder that has nothing in it.
func rehearsalFolder(dir string) (string, error) {
	if dir == "" {
		return os.MkdirTemp("", "chargehand-rehearsal-")
	}
	dir, err := filepath.Abs(dir)
	if err != nil {
		return "", err
	}
	switch entries, err := os.ReadDir(dir); {
	case errors.Is(err, os.ErrNotExist):
		return dir, os.MkdirAll(dir, 0o700)
	case err != nil:
		return "", usageError(fmt.Sprintf("--dir %q: %v", dir, err), "Name a new folder")
	case len(entries) > 0:
		return "", usageError(fmt.Sprintf("--dir %q is not empty", dir), "Name a new folder; a rehearsal writes over nothing")
	}
	return dir, nil
}

// A rehearsal runs commands and tells them. After the first error it does nothing more.
type rehearsal struct {
	ctx      context.Context
	out, log io.Writer // the story; every command in full
	dir      string
	gap      string // before the next paragraph
	err      error
}

// A player is a person with a folder for their book and key.
type player struct{ prompt, book, passphrase string }

// enter gives a person a laptop's folder and a passphrase.
func (r *rehearsal) enter(laptop, name string) player {
	p := player{name, filepath.Join(r.dir, laptop, name), filepath.Join(r.dir, laptop, name+".passphrase")}
	if r.err == nil {
		r.err = os.MkdirAll(filepath.Dir(p.book), 0o700)
	}
	if r.err == nil {
		r.err = os.WriteFile(p.passphrase, []byte(name+" rehearses a cold night\n"), 0o600)
	}
	return p
}

func (r *rehearsal) printf(format string, args ...any) {
	if r.err == nil {
		_, r.err = fmt.Fprintf(r.out, format, args...)
	}
}

// say tells a paragraph. Its figures come from find, so that they are the commands' own.
func (r *rehearsal) say(format string, args ...any) {
	r.printf("%s%s\n", r.gap, fold("", strings.Fields(fmt.Sprintf(format, args...)), 90, ""))
	r.gap = "\n"
}

func (r *rehearsal) head(title string) {
	r.printf("\n-- %s\n", title)
	r.gap = ""
}

// find returns the first group of a pattern in an output; a story whose figure is not there ends.
func (r *rehearsal) find(output, pattern string) string {
	if r.err != nil {
		return ""
	}
	m := regexp.MustCompile("(?m)" + pattern).FindStringSubmatch(output)
	if m == nil {
		r.err = couldNot(fmt.Errorf("the rehearsal looked for %q in what a command printed, and it is not there:\n%s", pattern, output), "Report this; the books so far are in "+r.dir)
		return ""
	}
	return m[1]
}

// own returns the flags that the story leaves out, those of them that a command takes: whose book, and the passphrase.
func (p player) own(args []string) (own []string) {
	c, _, err := newRoot().Find(args)
	if err != nil {
		return nil // run says what is wrong
	}
	if c.Flags().Lookup("book") != nil {
		own = append(own, "--book", p.book)
	}
	if c.Flags().Lookup("passphrase-file") != nil {
		own = append(own, "--passphrase-file", p.passphrase)
	}
	return own
}

func quoted(args []string) []string {
	var words []string
	for _, a := range args {
		if strings.ContainsAny(a, " '\\$&;") {
			a = `"` + a + `"`
		}
		words = append(words, a)
	}
	return words
}

// run runs a command that must end with a status, tells it with the lines of its output that begin with one of the labels, parted
// by commas, and returns the output.
func (r *rehearsal) run(p player, want int, labels string, args ...string) string {
	output := r.do(p, want, args...)
	r.tell(p, args, output, strings.Split(labels, ", ")...)
	return output
}

// asTyped writes a command after its prompt, broken where an option begins, so that it can be pasted.
func asTyped(prompt string, args []string) string {
	words := []string{"chargehand"}
	for _, w := range quoted(args) {
		if last := words[len(words)-1]; strings.HasPrefix(last, "--") && !strings.Contains(last, " ") && !strings.HasPrefix(w, "--") {
			words[len(words)-1] += " " + w
		} else {
			words = append(words, w)
		}
	}
	return strings.ReplaceAll(fold(prompt, words, storyWidth-2, "    "), "\n", " \\\n")
}

// do runs a command that must end with a status, and keeps it for the log.
func (r *rehearsal) do(p player, want int, args ...string) string {
	if r.err != nil {
		return ""
	}
	var out strings.Builder
	full := slices.Concat(args, p.own(args))
	r.check(p, full, want, run(r.ctx, full, streams{strings.NewReader(""), &out, &out}), out.String())
	return out.String()
}

// check writes a finished command to the log, and ends the rehearsal when it did not go as expected.
func (r *rehearsal) check(p player, full []string, want, got int, output string) {
	if r.err != nil {
		return
	}
	line := strings.Join(quoted(full), " ")
	if _, r.err = fmt.Fprintf(r.log, "%s$ chargehand %s\n%s(exit status %d)\n\n", p.prompt, line, output, got); r.err == nil && got != want {
		r.err = couldNot(fmt.Errorf("the rehearsal's step 'chargehand %s' ended with status %d and not %d: %s", line, got, want, strings.TrimRight(output, ".\n")), "Report this; the books so far are in "+r.dir)
	}
}

// tell shows a command, and of its output the lines that begin with one of the labels.
func (r *rehearsal) tell(p player, args []string, output string, labels ...string) {
	r.printf("%s\n", asTyped(p.prompt+"$ ", args))
	r.gap = "\n"
	shown := false
	for _, l := range strings.Split(output, "\n") {
		if !strings.HasPrefix(l, " ") { // one that is indented belongs to the line before it
			shown = slices.ContainsFunc(labels, func(label string) bool { return strings.HasPrefix(l, label) })
		}
		if shown {
			first, rest := "", l
			if at := strings.LastIndex(l[:min(len(l), 12)], " ") + 1; at > 1 {
				first, rest = l[:at], l[at:]
			}
			if len(l) > storyWidth-4 { // a table that fits keeps its columns
				l = fold(first, strings.Fields(rest), storyWidth-4, "            ")
			}
			r.printf("    %s\n", strings.ReplaceAll(strings.TrimRight(l, " "), "\n", "\n    "))
		}
	}
}

// pair runs a command that waits for a laptop, and when it says how it is reached the other laptop's command.
func (r *rehearsal) pair(host player, hostArgs []string, guest player, guestArgs func(output string) []string) (atHost, atGuest string, guestLine []string) {
	if r.err != nil {
		return "", "", nil
	}
	ctx, cancel := context.WithCancel(r.ctx)
	defer cancel()
	fullHost := slices.Concat(hostArgs, host.own(hostArgs))
	read, write := io.Pipe()
	hostStatus, guestStatus := make(chan int, 1), make(chan int, 1)
	go func() {
		hostStatus <- run(ctx, fullHost, streams{strings.NewReader(""), write, write})
		write.Close()
	}()
	var hostOut, guestOut strings.Builder
	var fullGuest []string
	for lines := bufio.NewScanner(read); lines.Scan(); { // to the end of the host's command
		fmt.Fprintln(&hostOut, lines.Text())
		if fullGuest == nil && strings.HasPrefix(lines.Text(), "in reach ") {
			guestLine = guestArgs(hostOut.String())
			fullGuest = slices.Concat(guestLine, guest.own(guestLine))
			go func() {
				got := run(ctx, fullGuest, streams{strings.NewReader(""), &guestOut, &guestOut})
				if got != statusOK {
					cancel() // nobody else comes
				}
				guestStatus <- got
			}()
		}
	}
	read.Close()
	got := <-hostStatus
	if fullGuest != nil { // first: where both fail, the guest's error says why
		r.check(guest, fullGuest, statusOK, <-guestStatus, guestOut.String())
	}
	r.check(host, fullHost, statusOK, got, hostOut.String())
	return hostOut.String(), guestOut.String(), guestLine
}

// fold puts words on lines no wider than width after what the first begins with; the others begin with the indent.
func fold(first string, words []string, width int, indent string) string {
	var lines []string
	line := first
	for i, w := range words {
		if i > 0 && len(line)+1+len(w) > width {
			lines = append(lines, line)
			line = indent
		} else if i > 0 {
			line += " "
		}
		line += w
	}
	return strings.Join(append(lines, line), "\n")
}

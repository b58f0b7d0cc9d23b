package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
	"golang.org/x/term"

	"example.org/chargehand/ledger"
	"example.org/chargehand/ledger/record"
)

// A want is a flag that a command cannot do without, and what an empty answer means when a person is asked for it.
type want struct{ flag, otherwise string }

func needs(flags ...string) []want {
	var w []want
	for _, f := range flags {
		w = append(w, want{flag: f})
	}
	return w
}

// terminal returns the terminal that a person types on, nil when there is none.
func terminal(cmd *cobra.Command) *os.File {
	if in, ok := cmd.InOrStdin().(*os.File); ok && term.IsTerminal(int(in.Fd())) {
		return in
	}
	return nil
}

// missing tells whether fill has anything to ask.
func missing(cmd *cobra.Command, wants []want) bool {
	return slices.ContainsFunc(wants, func(w want) bool { return !cmd.Flags().Changed(w.flag) })
}

// fill asks for the wants that were not given, each until the answer is one. Without a terminal it names the first that is
// missing.
func fill(cmd *cobra.Command, m *ledger.Meaning, wants ...want) error {
	for _, w := range wants {
		f := cmd.Flags().Lookup(w.flag)
		if f.Changed {
			continue
		}
		if terminal(cmd) == nil {
			return usageError(fmt.Sprintf("--%s is missing", f.Name), fmt.Sprintf("Give it: --%s %s, %s", f.Name, f.Value.Type(), f.Usage))
		}
		if err := askFlag(cmd, m, f, w.otherwise); err != nil {
			return err
		}
	}
	return nil
}

func askFlag(cmd *cobra.Command, m *ledger.Meaning, f *pflag.Flag, otherwise string) error {
	prompt := f.Name + ", " + f.Usage
	if otherwise != "" {
		prompt += " [" + otherwise + "]"
	}
	for {
		answer, err := askLine(cmd, prompt+": ")
		if err != nil {
			return err
		}
		if answer == "" {
			answer = otherwise
		}
		if answer == "" {
			continue
		}
		if err := cmd.Flags().Set(f.Name, answer); err != nil {
			fmt.Fprintln(cmd.ErrOrStderr(), flagError(cmd, err))
			continue
		}
		if m == nil {
			return nil
		}
		if err := giveUnits(cmd, m.Founding); err != nil {
			fmt.Fprintln(cmd.ErrOrStderr(), err)
			continue
		}
		return nil
	}
}

// errLeft: the person ended the questions.
var errLeft = couldNot(errors.New("left before the end"), "Nothing was signed")

// askLine asks on the terminal for one line.
func askLine(cmd *cobra.Command, prompt string) (string, error) {
	in := terminal(cmd)
	if in == nil {
		return "", usageError("no terminal to ask on", fmt.Sprintf("See '%s --help' for the flags", cmd.CommandPath()))
	}
	fmt.Fprint(cmd.ErrOrStderr(), prompt)
	line, err := interruptible(cmd.Context(), func() (string, error) { return readLine(in) })
	if err != nil {
		fmt.Fprintln(cmd.ErrOrStderr())
		return "", errLeft
	}
	return strings.TrimSpace(line), nil
}

// readLine reads to the end of the line and not a byte beyond, so that the next question finds the rest.
func readLine(r io.Reader) (string, error) {
	var line []byte
	var b [1]byte
	for len(line) < 4096 {
		n, err := r.Read(b[:])
		if n == 1 && b[0] == '\n' {
			return string(line), nil
		}
		line = append(line, b[:n]...)
		if err != nil {
			return string(line), err
		}
	}
	return "", errors.New("the line is too long")
}

// interruptible gives up waiting for a terminal when the person presses Ctrl-C: a read of a terminal cannot be ended, so it is
// left to end with the process.
func interruptible[T any](ctx context.Context, read func() (T, error)) (T, error) {
	type result struct {
		v   T
		err error
	}
	done := make(chan result, 1)
	go func() { v, err := read(); done <- result{v, err} }()
	select {
	case r := <-done:
		return r.v, r.err
	case <-ctx.Done():
		var zero T
		return zero, context.Cause(ctx)
	}
}

// A bareValue is a flag that may hold a number without a unit until the book says which.
type bareValue interface {
	// withUnit returns a number that has no unit yet with the book's own, "" when there is none to give.
	withUnit(record.Founding) string
}

// giveUnits gives all bare numbers of a command the book's own units.
func giveUnits(cmd *cobra.Command, founding record.Founding) (err error) {
	cmd.Flags().Visit(func(f *pflag.Flag) {
		if v, ok := f.Value.(bareValue); ok && err == nil {
			if text := v.withUnit(founding); text != "" {
				err = cmd.Flags().Set(f.Name, text)
			}
		}
	})
	if err != nil {
		return flagError(cmd, err)
	}
	return nil
}

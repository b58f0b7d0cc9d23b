// Chargehand keeps the charges of hydraulic accumulators: whether each is in limits, and a record that shows it.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"os/signal"
	"strings"
	"syscall"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
)

// Exit statuses.
const (
	statusOK    = 0
	statusNo    = 1 // the answer is no: out of limits, findings
	statusUsage = 2 // a wrong command, flag or value
	statusNot   = 3 // could not
)

type streams struct {
	in       io.Reader
	out, err io.Writer
}

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	os.Exit(run(ctx, os.Args[1:], streams{os.Stdin, os.Stdout, os.Stderr}))
}

// run executes one command line and returns its exit status.
func run(ctx context.Context, args []string, s streams) int {
	root := newRoot()
	root.SetArgs(args)
	root.SetIn(s.in)
	root.SetOut(s.out)
	root.SetErr(s.err)
	err := root.ExecuteContext(ctx)
	var p *problem
	switch {
	case err == nil:
		return statusOK
	case errors.Is(err, errNo):
		return statusNo
	case errors.As(err, &p):
		fmt.Fprintln(s.err, "chargehand:", p)
		return p.status
	default:
		fmt.Fprintln(s.err, "chargehand:", couldNot(plainly(err), "Put right what is named there and try again"))
		return statusNot
	}
}

func newRoot() *cobra.Command {
	root := &cobra.Command{
		Use:           "chargehand",
		Short:         "Check, correct and record the gas charge of hydraulic accumulators",
		SilenceErrors: true,
		SilenceUsage:  true,
		Args: usageArgs(func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				return fmt.Errorf("%q is not a command", args[0])
			}
			return nil
		}),
		RunE: func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	root.SetFlagErrorFunc(flagError)
	for _, g := range []struct {
		title    string
		commands []*cobra.Command
	}{
		{"At the aircraft", []*cobra.Command{newCheck(), newCharge(), newSettle(), newHold(), newTrace(), newSnag(), newBoard()}},
		{"What the numbers say", []*cobra.Command{newPlan(), newNight(), newCapacity(), newTrend(), newFaults()}},
		{"What was signed", []*cobra.Command{newCountersign(), newCorrect(), newWithdraw(), newRecall(), newRecord(), newExport(), newAudit()}},
		{"The book and its laptops", []*cobra.Command{newBook(), newHand(), newMeet(), newHandover()}},
		{"Equipment", []*cobra.Command{newUnit(), newGauge(), newSheet(), newBottle()}},
		{"Without a book", []*cobra.Command{newConvert(), newProve(), newRehearse(), newVersion()}},
	} {
		root.AddGroup(&cobra.Group{ID: g.title, Title: g.title + ":"})
		for _, c := range g.commands {
			c.GroupID = g.title
			root.AddCommand(c)
		}
	}
	root.SetHelpCommandGroupID("Without a book")
	root.SetCompletionCommandGroupID("Without a book")
	return root
}

// errNo ends a command whose output already says that the answer is no.
var errNo = errors.New("the answer is no")

// problem is what a person reads: what is wrong, with the value quoted, and what to do.
type problem struct {
	status     int
	what, todo string
	cause      error
}

func (p *problem) Error() string { return p.what + ". " + p.todo + "." }
func (p *problem) Unwrap() error { return p.cause }

// plainly says an error of the file system in words: which file, and what it said of it.
func plainly(err error) error {
	var p *fs.PathError
	switch {
	case !errors.As(err, &p):
		return err
	case errors.Is(err, fs.ErrNotExist):
		return fmt.Errorf("there is no file or folder %q", p.Path)
	case errors.Is(err, syscall.ENOSPC):
		return fmt.Errorf("no space is left on the disk for %q", p.Path)
	case errors.Is(err, fs.ErrPermission), errors.Is(err, syscall.EROFS):
		return fmt.Errorf("%q may not be read or written: %w", p.Path, p.Err)
	}
	return fmt.Errorf("%q: %w", p.Path, p.Err)
}

// usageError is a wrong command, flag or value.
func usageError(what, todo string) error {
	return &problem{status: statusUsage, what: what, todo: todo}
}

// couldNot is a right command that could not be carried out.
func couldNot(err error, todo string) error {
	return &problem{status: statusNot, what: err.Error(), todo: todo, cause: err}
}

// usageArgs makes an argument check's error a usage error.
func usageArgs(check cobra.PositionalArgs) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		err := check(cmd, args)
		var p *problem
		if err == nil || errors.As(err, &p) {
			return err
		}
		return usageError(err.Error(), fmt.Sprintf("See '%s --help'", cmd.CommandPath()))
	}
}

func flagError(cmd *cobra.Command, err error) error {
	see := fmt.Sprintf("See '%s --help'", cmd.CommandPath())
	if s := new(pflag.NotExistError); errors.As(err, &s) && len(s.GetSpecifiedShortnames()) > 0 { // "-5psi" reads as flags
		return usageError(err.Error(), "Write a value below zero after '--'; otherwise "+strings.ToLower(see[:1])+see[1:])
	}
	var invalid *pflag.InvalidValueError
	if !errors.As(err, &invalid) {
		return usageError(err.Error(), see)
	}
	var v *valueError
	if errors.As(err, &v) {
		return usageError(fmt.Sprintf("--%s: %s", invalid.GetFlag().Name, v.what), v.todo)
	}
	return usageError(fmt.Sprintf("--%s: %q is not a value for it", invalid.GetFlag().Name, invalid.GetValue()), see)
}

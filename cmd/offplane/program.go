package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"strings"
	"syscall"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"offplane/scenarios/strict"
)

// Exit codes.
const (
	exitOK          = 0
	exitFailed      = 1
	exitMisuse      = 2   // wrong command line or bad input
	exitUnmet       = 3   // finished, but a gate that was asked for was not met
	exitStopped     = 75  // told to stop (a time limit); the same command goes on
	exitInterrupted = 130 // by the keyboard
)

// A program is one execution: its arguments and where it writes.
type program struct {
	args           []string
	stdout, stderr io.Writer
}

// Main executes the program with its arguments, without its name, and returns the
// exit code.
func Main(args []string, stdout, stderr io.Writer) int {
	out := &output{w: stdout}
	p := &program{args: args, stdout: out, stderr: stderr}
	ctx, stop := withSignals(context.Background())
	defer stop()
	root := p.root()
	root.SetArgs(args)
	cmd, err := root.ExecuteContextC(ctx)
	if f := (*fault)(nil); out.err != nil && !errors.As(err, &f) {
		err = &fault{exitFailed, fmt.Errorf("results on standard output: %w", out.err)}
	}
	return p.exit(ctx, cmd, err)
}

// output is standard output; it remembers the first error, which few of those who print
// look at.
type output struct {
	w   io.Writer
	err error
}

func (o *output) Write(b []byte) (int, error) {
	n, err := o.w.Write(b)
	if o.err == nil {
		o.err = err
	}
	return n, err
}

func (p *program) root() *cobra.Command {
	root := &cobra.Command{
		Use:   "offplane",
		Short: "What plane-of-sky assumptions cost coronal field maps",
		Long: `offplane takes a corona whose magnetic field is known, makes the data that an
instrument would record of it, inverts them blind by the standard method of coronal
seismology and reports how far the inferred field is from the known one, and why.

The data are synthetic and every verdict depends on the corona that was assumed.`,
		Example: `  offplane run quick -o out
  offplane scenario list
  offplane line --density 1e7,1e8,1e9 --height 1.1`,
		Version:       version().String(),
		SilenceUsage:  true,
		SilenceErrors: true,
		Args:          noCommand,
		RunE:          func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	root.SetVersionTemplate("{{.Version}}\n")
	root.SetFlagErrorFunc(flagError)
	root.AddCommand(p.runCommand(), p.synthCommand(), p.invertCommand(), p.compareCommand(), p.explainCommand(), p.viewCommand(), p.budgetCommand(), p.planCommand(), p.scenarioCommand(), p.lineCommand(), p.ensembleCommand(), p.exactCommand(), p.manualCommand(), p.tableCommand())
	root.SetOut(p.stdout) // before the next line, which remembers it
	root.SetErr(p.stderr)
	root.InitDefaultCompletionCmd()
	root.SetHelpCommand(helpCommand(root))
	for _, c := range root.Commands() {
		if c.Name() == "completion" {
			c.Args, c.RunE = noCommand, func(cmd *cobra.Command, _ []string) error { return cmd.Help() }
		}
	}
	return root
}

// helpCommand is the usual one, but a command that there is not is an error.
func helpCommand(root *cobra.Command) *cobra.Command {
	return &cobra.Command{
		Use:   "help [COMMAND]",
		Short: "Tell about a command",
		ValidArgsFunction: func(_ *cobra.Command, args []string, _ string) (names []string, _ cobra.ShellCompDirective) {
			if cmd, _, err := root.Find(args); err == nil {
				for _, c := range cmd.Commands() {
					names = append(names, c.Name())
				}
			}
			return names, cobra.ShellCompDirectiveNoFileComp
		},
		RunE: func(_ *cobra.Command, args []string) error {
			cmd, rest, err := root.Find(args)
			if err != nil {
				return err
			}
			if err := noCommand(cmd, rest); err != nil {
				return err
			}
			return cmd.Help()
		},
	}
}

// group returns a command that only holds others.
func group(use, short string, commands ...*cobra.Command) *cobra.Command {
	cmd := &cobra.Command{
		Use:   use,
		Short: short,
		Args:  noCommand,
		RunE:  func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
	}
	cmd.AddCommand(commands...)
	return cmd
}

// noCommand is what a command that only has subcommands makes of an argument.
func noCommand(cmd *cobra.Command, args []string) error {
	if len(args) == 0 {
		return nil
	}
	var names []string
	for _, c := range cmd.Commands() {
		if !c.Hidden {
			names = append(names, c.Name())
		}
	}
	if len(names) == 0 {
		return fmt.Errorf("%s has no commands of its own; %q is too much", cmd.CommandPath(), args[0])
	}
	return fmt.Errorf("%s has no command %q%s (there are %s)", cmd.CommandPath(), args[0], strict.Hint(args[0], names), strings.Join(names, ", "))
}

// flagError adds the flag that was most likely meant.
func flagError(cmd *cobra.Command, err error) error {
	unknown, ok := strings.CutPrefix(err.Error(), "unknown flag: --")
	if !ok {
		return err
	}
	var names []string
	cmd.Flags().VisitAll(func(f *pflag.Flag) { names = append(names, f.Name) })
	if near := strict.Nearest(unknown, names); near != "" {
		return fmt.Errorf("%w; did you mean --%s?", err, near)
	}
	return err
}

// A fault is an error with its exit code.
type fault struct {
	code int
	err  error
}

func (f *fault) Error() string { return f.err.Error() }
func (f *fault) Unwrap() error { return f.err }

// misuse marks an error as one of the command line or the input; nil stays nil.
func misuse(err error) error {
	if err == nil {
		return nil
	}
	return &fault{exitMisuse, err}
}

func misusef(format string, args ...any) error { return misuse(fmt.Errorf(format, args...)) }

// do makes a command of f. An error without a code of its own is a failure; what
// cobra reports before f is called has none at all and is misuse.
func do(f func(ctx context.Context, args []string) error) func(*cobra.Command, []string) error {
	return func(cmd *cobra.Command, args []string) error {
		err := f(cmd.Context(), args)
		if f := (*fault)(nil); err != nil && !errors.As(err, &f) {
			err = &fault{exitFailed, err}
		}
		return err
	}
}

// exit reports an error and returns the exit code.
func (p *program) exit(ctx context.Context, cmd *cobra.Command, err error) int {
	if err == nil {
		return exitOK
	}
	if s := (*signalled)(nil); errors.Is(err, context.Canceled) && errors.As(context.Cause(ctx), &s) {
		p.say("%s", s)
		return s.code()
	}
	f := (*fault)(nil)
	if !errors.As(err, &f) {
		p.say("%s (see %s --help)", err, cmd.CommandPath())
		return exitMisuse
	}
	if ps := (strict.Problems)(nil); errors.As(err, &ps) {
		// Where the mistake is comes first, as editors expect it.
		fmt.Fprintln(p.stderr, ps)
		noun := "problems"
		if len(ps) == 1 {
			noun = "problem"
		}
		p.say("%d %s in the input", len(ps), noun)
		return f.code
	}
	p.say("%s", err)
	return f.code
}

// say writes one message line.
func (p *program) say(format string, args ...any) {
	fmt.Fprintf(p.stderr, "offplane: "+format+"\n", args...)
}

// signalled is the cause of a cancelled context.
type signalled struct{ signal os.Signal }

func (s *signalled) Error() string {
	if s.signal == os.Interrupt {
		return "interrupted; the same command starts again"
	}
	return "told to stop; the same command starts again"
}

func (s *signalled) code() int {
	if s.signal == os.Interrupt {
		return exitInterrupted
	}
	return exitStopped
}

// withSignals returns a context that the first interrupt or request to terminate
// cancels. The second one kills.
func withSignals(parent context.Context) (ctx context.Context, stop func()) {
	ctx, cancel := context.WithCancelCause(parent)
	ch := make(chan os.Signal, 1)
	signal.Notify(ch, os.Interrupt, syscall.SIGTERM)
	go func() {
		select {
		case s := <-ch:
			signal.Stop(ch)
			cancel(&signalled{s})
		case <-ctx.Done():
		}
	}()
	return ctx, func() {
		signal.Stop(ch)
		cancel(nil)
	}
}

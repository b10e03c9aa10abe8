package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"runtime/debug"
	"strings"

	"context"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"pathtally/properties/report"
)

// version is set by the linker in releases.
var version = "development"

// Exit statuses; doc.go says when.
const (
	exitHolds     = 0
	exitBroken    = 1
	exitFailed    = 2
	exitUndecided = 3
)

func main() {
	if os.Getenv("GOGC") == "" {
		// A run allocates what it keeps: collecting less often costs memory for a
		// while and saves a fifth of the time.
		debug.SetGCPercent(250)
	}
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt)
	status := run(ctx, os.Args[1:], streams{out: os.Stdout, err: os.Stderr,
		outTerminal: term.IsTerminal(int(os.Stdout.Fd())), errTerminal: term.IsTerminal(int(os.Stderr.Fd())),
		width: terminalWidth(), noColour: os.Getenv("NO_COLOR") != "" || os.Getenv("TERM") == "dumb"})
	stop()
	os.Exit(status)
}

func terminalWidth() int {
	if w, _, err := term.GetSize(int(os.Stdout.Fd())); err == nil && w > 0 {
		return w
	}
	return 0
}

// streams is where a run writes, and what is known of it.
type streams struct {
	out, err                 io.Writer
	outTerminal, errTerminal bool
	width                    int // columns of the terminal; 0 if unknown
	noColour                 bool
}

// A failure ends a run with status 2. Text stands on standard error as it is.
type failure struct {
	stage   string // usage, load, rules, internal
	message string // first line for JSON
	text    string // for a person; "" is message
	places  []string
}

func (f *failure) Error() string { return f.message }

// A status ends a run that could run.
type status int

func (s status) Error() string { return fmt.Sprintf("exit status %d", int(s)) }

// run is main without the process around it.
func run(ctx context.Context, args []string, s streams) int {
	root := command(ctx, s)
	root.SetArgs(args)
	root.SetOut(s.out)
	root.SetErr(s.err)
	err := root.Execute()
	var st status
	var f *failure
	switch {
	case err == nil:
		return exitHolds
	case errors.As(err, &st):
		return int(st)
	case !errors.As(err, &f):
		f = &failure{stage: "usage", message: strings.TrimSpace(err.Error()), text: "pathtally: " + strings.TrimSpace(err.Error()) + "\nSee: pathtally --help"}
	}
	text := f.text
	if text == "" {
		text = "pathtally: " + f.message
	}
	fmt.Fprintln(s.err, strings.TrimRight(text, "\n"))
	if wantsJSON(args) {
		if err := report.JSONError(s.out, version, f.stage, f.message, f.places); err != nil {
			fmt.Fprintln(s.err, "pathtally: writing the result:", err)
		}
	}
	return exitFailed
}

// wantsJSON looks for --format json even where the flags could not be parsed.
func wantsJSON(args []string) bool {
	for i, a := range args {
		if a == "--" {
			return false
		}
		if a == "--format=json" || (a == "--format" && i+1 < len(args) && args[i+1] == "json") {
			return true
		}
	}
	return false
}

const rootHelp = `pathtally: do things that belong in pairs come out even on every call path?

  pathtally check [packages]      judge the rules; exit 1 if something is broken
  pathtally count FUNCTION        which counts can this function produce?
  pathtally accept [packages]     record today's findings; later runs stop only for new ones
  pathtally rules  COMMAND        list, show, try
  pathtally export [packages]     the model as JSON or DOT, a question as SMT-LIB 2
  pathtally join FILES            one result out of the parts of a run
  pathtally completion SHELL      completion of commands and flags

Packages are named as for the go command; without any, the one in this folder.
Start with:  pathtally check ./...          Help on one:  pathtally check --help
`

func command(ctx context.Context, s streams) *cobra.Command {
	root := &cobra.Command{
		Use:           "pathtally",
		Version:       version,
		SilenceErrors: true,
		SilenceUsage:  true,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) > 0 {
				return fmt.Errorf("there is no command %s: there are check, count, accept, rules, export, join and completion", args[0])
			}
			return nil
		},
		RunE: func(c *cobra.Command, _ []string) error { return c.Help() },
	}
	root.CompletionOptions.DisableDefaultCmd = true
	root.SetHelpCommand(&cobra.Command{Use: "help", Hidden: true, RunE: func(c *cobra.Command, args []string) error {
		target, _, err := root.Find(args)
		if err != nil || target == nil {
			return fmt.Errorf("there is no command %s: there are check, count, accept, rules, export, join and completion", strings.Join(args, " "))
		}
		return target.Help()
	}})
	setHelp(root, rootHelp)
	root.AddCommand(checkCommand(ctx, s), acceptCommand(ctx, s), rulesCommand(ctx, s), countCommand(ctx, s), exportCommand(ctx, s), joinCommand(s), completionCommand(s))
	return root
}

// setHelp gives a command its own help text, written by hand so that it reads
// in one screen; a test compares it with the flags that exist.
func setHelp(c *cobra.Command, text string) {
	c.SetHelpFunc(func(c *cobra.Command, _ []string) { fmt.Fprint(c.OutOrStdout(), text) })
	c.SetUsageFunc(func(c *cobra.Command) error { _, err := fmt.Fprint(c.OutOrStderr(), text); return err })
}

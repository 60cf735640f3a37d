// Tautwire is a plucked-string instrument for the stage: a daemon that a MIDI
// keyboard plays, and the commands around it.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"runtime/debug"
	"slices"
	"strings"

	"tautwire/engine/output"
)

// version is the release that this source is on its way to.
const version = "0.1.0"

// Exit codes.
const (
	exitDone   = 0
	exitFailed = 1
	exitUsage  = 2
)

// streams are where a command reads and writes.
type streams struct {
	out io.Writer // results, so that they pipe
	err io.Writer // errors, cautions and progress
}

// command is one word after "tautwire".
type command struct {
	name  string
	args  string // as the usage line shows them
	brief string // one line, in the list of commands
	about string // what --help says before the options
	// prepare declares the options and gives what runs once they are read.
	prepare func(o *options) func(ctx context.Context, s streams, args []string) error
}

func commands() []command {
	return []command{
		playCommand(), renderCommand(), checkCommand(), devicesCommand(), reportCommand(),
	}
}

func main() {
	s := streams{out: os.Stdout, err: os.Stderr}
	// Sound libraries are hushed by closing standard error to them.
	if apart, err := output.Stderr(); err == nil {
		s.err = apart
		// so that a crash tells itself there, hushed or not
		_ = debug.SetCrashOutput(apart, debug.CrashOptions{})
	}
	os.Exit(run(context.Background(), os.Args[1:], s))
}

// run carries out one command line and gives its exit code.
func run(ctx context.Context, args []string, s streams) int {
	err := dispatch(ctx, args, s)
	if err == nil {
		return exitDone
	}
	var told alreadyTold
	if !errors.As(err, &told) {
		fmt.Fprintf(s.err, "tautwire: %v\n", err)
	}
	var usage usageError
	if errors.As(err, &usage) {
		return exitUsage
	}
	return exitFailed
}

func dispatch(ctx context.Context, args []string, s streams) error {
	all := commands()
	if len(args) == 0 {
		return usageError{"no command given; `tautwire help` lists them, `tautwire play` plays"}
	}
	word := args[0]
	switch word {
	case "-h", "-help", "--help", "help":
		if len(args) < 2 {
			overview(s.out, all)
			return nil
		}
		word, args = args[1], []string{args[1], "--help"}
	case "-version", "--version", "version":
		fmt.Fprintln(s.out, versionLine())
		return nil
	}
	at := slices.IndexFunc(all, func(c command) bool { return c.name == word })
	if at < 0 {
		return unknownCommand(word, all)
	}
	c := all[at]
	o := newOptions()
	act := c.prepare(o)
	rest, err := o.read(args[1:])
	switch {
	case errors.Is(err, errHelp):
		help(s.out, c, o)
		return nil
	case errors.Is(err, errVersion):
		fmt.Fprintln(s.out, versionLine())
		return nil
	case err != nil:
		return usageError{fmt.Sprintf("%s: %v; see `tautwire %s --help`", c.name, err, c.name)}
	}
	if err := act(ctx, s, rest); err != nil {
		return fmt.Errorf("%s: %w", c.name, err)
	}
	return nil
}

func unknownCommand(word string, all []command) error {
	names := make([]string, len(all))
	for i, c := range all {
		names[i] = c.name
	}
	if strings.HasPrefix(word, "-") {
		return usageError{fmt.Sprintf("option %q stands before a command; begin with one of %s", word, strings.Join(names, ", "))}
	}
	if guess, ok := closest(word, names); ok {
		return usageError{fmt.Sprintf("unknown command %q; did you mean `tautwire %s`?", word, guess)}
	}
	return usageError{fmt.Sprintf("unknown command %q; there are %s", word, strings.Join(names, ", "))}
}

// versionLine tells the release and, where the build knows it, the revision.
func versionLine() string {
	line := "tautwire " + version
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return line
	}
	var revision, changed string
	for _, s := range info.Settings {
		switch {
		case s.Key == "vcs.revision":
			revision = s.Value[:min(12, len(s.Value))]
		case s.Key == "vcs.modified" && s.Value == "true":
			changed = ", changed"
		}
	}
	if revision == "" {
		return line + " (" + info.GoVersion + ")"
	}
	return line + " (" + revision + changed + ", " + info.GoVersion + ")"
}

// usageError is a command line that asks for what there is not: exit code 2.
type usageError struct{ text string }

func (e usageError) Error() string { return e.text }

// alreadyTold is a failure whose lines are out already: only the exit code is left.
type alreadyTold struct{}

func (alreadyTold) Error() string { return "failed" }

package main

import (
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"slices"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/mattn/go-isatty"
)

// What read gives where a command line asks about the program itself.
var (
	errHelp    = errors.New("help is asked for")
	errVersion = errors.New("the version is asked for")
)

// options are a command's options: a flag.FlagSet with messages of its own, in
// which options and arguments may stand in any order, with one dash or two.
type options struct{ *flag.FlagSet }

func newOptions() *options {
	return &options{flag.NewFlagSet("", flag.ContinueOnError)}
}

// read sets the options and gives the arguments that are none.
func (o *options) read(args []string) (rest []string, err error) {
	for len(args) > 0 {
		word := args[0]
		args = args[1:]
		if word == "--" {
			return append(rest, args...), nil
		}
		if word == "-" || !strings.HasPrefix(word, "-") {
			rest = append(rest, word)
			continue
		}
		name, value, given := strings.Cut(strings.TrimPrefix(strings.TrimPrefix(word, "-"), "-"), "=")
		f := o.Lookup(name)
		switch {
		case f == nil && (name == "help" || name == "h"):
			return nil, errHelp
		case f == nil && name == "version":
			return nil, errVersion
		case f == nil:
			return nil, o.unknown(name)
		case !given && isSwitch(f):
			value = "true"
		case !given && len(args) == 0:
			wanted, _ := flag.UnquoteUsage(f)
			return nil, fmt.Errorf("--%s needs its %s after it", name, wanted)
		case !given:
			value, args = args[0], args[1:]
		}
		if err := f.Value.Set(value); err != nil {
			return nil, fmt.Errorf("--%s: found %q; %w", name, value, err)
		}
	}
	return rest, nil
}

func (o *options) unknown(name string) error {
	names := []string{"help", "version"}
	o.VisitAll(func(f *flag.Flag) { names = append(names, f.Name) })
	if guess, ok := closest(name, names); ok {
		return fmt.Errorf("unknown option --%s; did you mean --%s?", name, guess)
	}
	return fmt.Errorf("unknown option --%s", name)
}

func isSwitch(f *flag.Flag) bool {
	b, ok := f.Value.(interface{ IsBoolFlag() bool })
	return ok && b.IsBoolFlag()
}

// whole declares a whole number from low to high; 0 stands for "not given".
func (o *options) whole(name string, low, high int, usage string) *int {
	v := &wholeValue{low: low, high: high}
	o.Var(v, name, usage)
	return &v.n
}

type wholeValue struct{ n, low, high int }

func (v *wholeValue) String() string { return "" }

func (v *wholeValue) Set(s string) error {
	n, err := strconv.Atoi(s)
	if err != nil || n < v.low || n > v.high {
		return fmt.Errorf("a whole number from %d to %d is wanted", v.low, v.high)
	}
	v.n = n
	return nil
}

// number declares a number from low to high that is initial where not given.
func (o *options) number(name string, low, high, initial float64, usage string) *float64 {
	v := &numberValue{x: initial, low: low, high: high}
	o.Var(v, name, usage)
	return &v.x
}

type numberValue struct{ x, low, high float64 }

func (v *numberValue) String() string { return "" }

func (v *numberValue) Set(s string) error {
	x, err := strconv.ParseFloat(s, 64)
	if err != nil || !(x >= v.low && x <= v.high) {
		return fmt.Errorf("a number from %g to %g is wanted", v.low, v.high)
	}
	v.x = x
	return nil
}

// choice declares a word out of several, which is initial where none is given.
func (o *options) choice(name, initial, usage string, words ...string) *string {
	v := &choiceValue{words: words, word: initial}
	o.Var(v, name, usage)
	return &v.word
}

type choiceValue struct {
	word  string
	words []string
}

func (v *choiceValue) String() string { return "" }

func (v *choiceValue) Set(s string) error {
	if !slices.Contains(v.words, s) {
		return fmt.Errorf("one of %s is wanted", strings.Join(v.words, ", "))
	}
	v.word = s
	return nil
}

// list declares an option that may be given several times.
func (o *options) list(name, usage string) *[]string {
	v := &listValue{}
	o.Var(v, name, usage)
	return &v.words
}

type listValue struct{ words []string }

func (v *listValue) String() string { return "" }

func (v *listValue) Set(s string) error {
	if s == "" {
		return errors.New("a name or a path is wanted")
	}
	v.words = append(v.words, s)
	return nil
}

// overview is what `tautwire help` prints.
func overview(w io.Writer, all []command) {
	fmt.Fprintln(w, "Tautwire is a plucked-string instrument that a MIDI keyboard plays.")
	fmt.Fprintln(w)
	fmt.Fprintln(w, "Usage: tautwire COMMAND [options]")
	fmt.Fprintln(w)
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for _, c := range all {
		fmt.Fprintf(t, "  %s\t%s\n", c.name, c.brief)
	}
	t.Flush()
	fmt.Fprintln(w)
	fmt.Fprintln(w, "`tautwire help COMMAND` tells more of one; `tautwire --version` tells the release.")
	fmt.Fprintln(w, "Exit codes: 0 done, 1 failed, 2 wrong usage.")
}

// help is what `tautwire COMMAND --help` prints.
func help(w io.Writer, c command, o *options) {
	usage := "Usage: tautwire " + c.name
	if c.args != "" {
		usage += " " + c.args
	}
	fmt.Fprintln(w, usage+" [options]")
	fmt.Fprintln(w)
	fmt.Fprintln(w, strings.TrimSpace(c.about))
	fmt.Fprintln(w)
	fmt.Fprintln(w, "Options:")
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	o.VisitAll(func(f *flag.Flag) {
		value, text := flag.UnquoteUsage(f)
		if isSwitch(f) {
			value = ""
		}
		fmt.Fprintf(t, "  --%s\t%s\n", strings.TrimSpace(f.Name+" "+value), text)
	})
	fmt.Fprintln(t, "  --help\tthis text")
	fmt.Fprintln(t, "  --version\tthe release")
	t.Flush()
}

// closest gives the word nearest to what was typed, if one is near enough to
// be what was meant.
func closest(typed string, words []string) (string, bool) {
	best, least := "", 3
	for _, w := range words {
		if d := distance(typed, w); d < least && d < len(w) {
			best, least = w, d
		}
	}
	return best, best != ""
}

// distance counts the insertions, deletions and replacements between a and b
// (Levenshtein 1966).
func distance(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		diagonal := row[0]
		row[0] = i + 1
		for j := range len(b) {
			replaced := diagonal
			if a[i] != b[j] {
				replaced++
			}
			diagonal = row[j+1]
			row[j+1] = min(replaced, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}

// isTerminal tells whether w is a person's screen, where progress is welcome.
func isTerminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	return ok && isatty.IsTerminal(f.Fd())
}

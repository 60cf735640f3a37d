package config

import (
	"fmt"
	"sort"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Problem is one thing that is wrong in a file. Its Error is one line.
type Problem struct {
	// Path is the file.
	Path string
	// Line counts from 1; 0 is the whole file.
	Line int
	// Key is the full name of the key, "zone.excitation.position"; it may be empty.
	Key string
	// Text says what was found, what is allowed and what to do.
	Text string
}

// Error is "file:line: key: text" in one line, without the parts it lacks.
func (p *Problem) Error() string {
	var b strings.Builder
	b.WriteString(oneLine(p.Path))
	if p.Line > 0 {
		fmt.Fprintf(&b, ":%d", p.Line)
	}
	b.WriteString(": ")
	if p.Key != "" {
		b.WriteString(oneLine(p.Key) + ": ")
	}
	b.WriteString(oneLine(p.Text))
	return b.String()
}

// Problems is everything that is wrong in a file and in the files that it
// names, in the order of its lines.
type Problems []*Problem

// Error is one line for each problem.
func (ps Problems) Error() string {
	lines := make([]string, len(ps))
	for i, p := range ps {
		lines[i] = p.Error()
	}
	return strings.Join(lines, "\n")
}

// Unwrap gives each problem to errors.Is and errors.As.
func (ps Problems) Unwrap() []error {
	errs := make([]error, len(ps))
	for i, p := range ps {
		errs[i] = p
	}
	return errs
}

// err is nil when there is no problem.
func (ps Problems) err() error {
	if len(ps) == 0 {
		return nil
	}
	return ps
}

// sorted puts each file's problems in the order of their lines, those of the
// file itself first, then those of others in the order in which they were met.
func (ps Problems) sorted(path string) Problems {
	met := map[string]int{path: 0}
	for _, p := range ps {
		if _, ok := met[p.Path]; !ok {
			met[p.Path] = len(met)
		}
	}
	sort.SliceStable(ps, func(i, j int) bool {
		if ps[i].Path != ps[j].Path {
			return met[ps[i].Path] < met[ps[j].Path]
		}
		return ps[i].Line < ps[j].Line
	})
	return ps
}

// oneLine replaces what would break a line or a terminal.
func oneLine(text string) string {
	return strings.Map(func(r rune) rune {
		if r == utf8.RuneError || !unicode.IsPrint(r) {
			return '?'
		}
		return r
	}, text)
}

// quote shows a text from a file, shortened where it is long.
func quote(text string) string {
	return `"` + oneLine(shorten(text, shownValue)) + `"`
}

// How much of a file's own words a message shows, in letters.
const (
	shownValue   = 60
	shownProblem = 400
)

// shorten cuts a long text for a message.
func shorten(text string, shown int) string {
	if r := []rune(text); len(r) > shown {
		return string(r[:shown]) + "..."
	}
	return text
}

// nearest gives the name that a misspelt word was probably meant to be, or ""
// when none is near.
func nearest(word string, names []string) string {
	const longest = 64
	if len(word) > longest {
		return ""
	}
	best, at := "", max(2, len(word)/3)+1
	for _, name := range names {
		if d := distance(strings.ToLower(word), strings.ToLower(name)); d < at && d < len(name) {
			best, at = name, d
		}
	}
	return best
}

// distance counts the insertions, deletions, replacements and swaps of
// neighbours that make one word of the other: Damerau, "A technique for
// computer detection and correction of spelling errors", CACM 7(3), 1964, in
// the form in which no part is changed twice.
func distance(a, b string) int {
	x, y := []rune(a), []rune(b)
	before, last := make([]int, len(y)+1), make([]int, len(y)+1)
	for j := range last {
		last[j] = j
	}
	for i := 1; i <= len(x); i++ {
		row := make([]int, len(y)+1)
		row[0] = i
		for j := 1; j <= len(y); j++ {
			cost := 1
			if x[i-1] == y[j-1] {
				cost = 0
			}
			row[j] = min(last[j]+1, row[j-1]+1, last[j-1]+cost)
			if i > 1 && j > 1 && x[i-1] == y[j-2] && x[i-2] == y[j-1] {
				row[j] = min(row[j], before[j-2]+1)
			}
		}
		before, last = last, row
	}
	return last[len(y)]
}

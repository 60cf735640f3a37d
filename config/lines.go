package config

import (
	"strconv"
	"strings"

	"github.com/BurntSushi/toml"
)

// lineIndex knows the line of every key and table of a TOML text by its place:
// "zone#2.excitation.kind" is a key of the second [[zone]].
//
// The TOML library keeps positions for its own errors only, and for an array
// of tables only the last. So the index gives the library each statement
// by itself, which says what the statement's keys are.
type lineIndex map[string]int

// longestValue is how many lines are tried for one value; what is longer keeps
// the line that it starts at for everything that follows.
const longestValue = 500

// indexLines indexes a text that the library has accepted as a whole.
func indexLines(text string) lineIndex {
	lines := strings.SplitAfter(strings.TrimPrefix(text, "\ufeff"), "\n")
	index, counts, table := lineIndex{}, map[string]int{}, ""
	for i := 0; i < len(lines); {
		first := strings.TrimSpace(lines[i])
		if first == "" || first[0] == '#' {
			i++
			continue
		}
		keys, n := statement(lines[i:])
		if n == 0 {
			return index
		}
		if first[0] == '[' && len(keys) > 0 {
			key := keys[len(keys)-1]
			table = header(key, strings.HasPrefix(first, "[["), counts)
			index.add(strings.Join(key, "."), i+1) // the array as a whole
			index.add(table, i+1)
			keys = nil
		}
		for _, key := range keys {
			for end := range key {
				index.add(join(table, strings.Join(key[:end+1], ".")), i+1)
			}
		}
		i += n
	}
	return index
}

func (x lineIndex) add(place string, line int) {
	if _, ok := x[place]; !ok {
		x[place] = line
	}
}

// statement finds the first statement of some lines: its keys and how many
// lines it has, 0 when none ends within longestValue.
func statement(lines []string) ([]toml.Key, int) {
	var text strings.Builder
	for n, line := range lines {
		if n == longestValue {
			break
		}
		text.WriteString(line)
		if n > 0 && !strings.ContainsAny(line, `]}"'`) {
			continue // ends no value that began on an earlier line
		}
		var values map[string]any
		if md, err := toml.Decode(text.String(), &values); err == nil {
			return md.Keys(), n + 1
		}
	}
	return nil, 0
}

// header gives the place of a [table] or an [[array of tables]], and counts
// the latter.
func header(key toml.Key, array bool, counts map[string]int) string {
	place := ""
	for i, part := range key {
		place = join(place, part)
		if array && i == len(key)-1 {
			counts[place]++
		}
		if n := counts[place]; n > 0 {
			place = numbered(place, n)
		}
	}
	return place
}

// of gives the line of a place, or of the nearest thing around it that has one
// (a value inside an inline table has its table's).
func (x lineIndex) of(place string) int {
	for place != "" {
		if line, ok := x[place]; ok {
			return line
		}
		place = place[:max(0, strings.LastIndexAny(place, ".#"))]
	}
	return 0
}

// join puts a name below a place.
func join(place, name string) string {
	if place == "" {
		return name
	}
	return place + "." + name
}

// numbered is the place of the n-th table of an array, from 1.
func numbered(place string, n int) string {
	return place + "#" + strconv.Itoa(n)
}

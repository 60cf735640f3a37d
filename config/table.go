package config

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
	"time"
	"unicode/utf8"

	"github.com/BurntSushi/toml"
)

// source is one file while it is read: what it may say and what is wrong in it.
type source struct {
	path     string
	keys     []Key
	strange  []Key // of the other kind of file
	kind     string
	problems Problems
	lines    lineIndex
}

// table is a table of a source. Its readers set what the file says and leave
// alone, with a Problem, what the file says wrongly.
type table struct {
	*source
	name   string // "zone.excitation", as in Key.Name; "" is the top
	place  string // "zone#2.excitation", as in lineIndex
	values map[string]any
}

// parse reads a file's text as TOML. ok is false where nothing of it can be
// used; the problem then says why.
func (s *source) parse(text []byte) (top table, ok bool) {
	if !utf8.Valid(text) {
		s.note(brokenLine(text), "", "not UTF-8 text; save the file as UTF-8 in your editor")
		return table{}, false
	}
	values := map[string]any{}
	if _, err := toml.Decode(string(text), &values); err != nil {
		s.syntax(string(text), err)
		return table{}, false
	}
	s.lines = indexLines(string(text))
	return table{source: s, values: values}, true
}

// brokenLine is the line of the first byte that is not UTF-8.
func brokenLine(text []byte) int {
	line := 1
	for len(text) > 0 {
		r, n := utf8.DecodeRune(text)
		if r == utf8.RuneError && n == 1 {
			break
		}
		if r == '\n' {
			line++
		}
		text = text[n:]
	}
	return line
}

// syntax notes what the TOML library found.
func (s *source) syntax(text string, err error) {
	broken, ok := err.(toml.ParseError)
	if !ok {
		s.note(0, "", err.Error())
		return
	}
	// The library's own line is the next one where a line ends too soon.
	at := min(max(broken.Position.Start, 0), len(text))
	line := 1 + strings.Count(text[:at], "\n")
	found := strings.TrimSuffix(broken.Message, ".")
	if name, ok := between(found, "Key '", "' has already been defined"); ok {
		s.note(line, name, "stands here a second time; keep one of them")
		return
	}
	if name, ok := between(found, "Key '", "' was already created"); ok {
		s.note(line, name, "is one table above and a list of tables here; write all its headings alike, with one pair of brackets or two")
		return
	}
	found = strings.NewReplacer(`'\x00'`, "the file's end", `'\n'`, "the line's end").Replace(found)
	do := `write key = value, with "quotes" round text and a point in numbers`
	switch {
	case strings.Contains(found, "NULL bytes"):
		found, do = "not UTF-8 text", "save the file as UTF-8 in your editor"
	case strings.Contains(found, "out of range for"):
		found, _, _ = strings.Cut(found, " is out of range for")
		found, do = "found "+found+", which is too large for any key", "write a smaller number"
	case strings.Contains(found, "control characters"):
		found, do = "holds a character that no keyboard types", "delete the line and write it again"
	case strings.Contains(found, "to end table name") || strings.Contains(found, "end of table"):
		do = "close the heading with as many brackets as it opens with"
	case strings.Contains(found, "cannot contain newlines"):
		found, do = "the text has no end on its line", "close it with a quote"
	}
	s.note(line, broken.LastKey, shorten(found, 2*shownValue)+"; "+do)
}

// between is what stands after one text and before another.
func between(text, before, after string) (string, bool) {
	rest, ok := strings.CutPrefix(text, before)
	if !ok {
		return "", false
	}
	middle, _, ok := strings.Cut(rest, after)
	return middle, ok
}

// note keeps a problem.
func (s *source) note(line int, key, text string) {
	s.problems = append(s.problems, &Problem{
		Path: s.path,
		Line: line,
		Key:  shorten(key, shownValue),
		Text: shorten(text, shownProblem),
	})
}

// key is what the format says of a name.
func (s *source) key(name string) (Key, bool) {
	for _, k := range s.keys {
		if k.Name == name {
			return k, true
		}
	}
	return Key{}, false
}

// line is where a key of the table stands, or the table itself for "".
func (t table) line(name string) int {
	if name == "" {
		return t.lines.of(t.place)
	}
	return t.lines.of(join(t.place, name))
}

// bad notes that a key's value is not what it may be.
func (t table) bad(name, found, allowed, do string) {
	t.say(name, fmt.Sprintf("found %s; allowed is %s; %s", found, allowed, do))
}

// say notes a problem with a key of the table, or with the table itself for "".
func (t table) say(name, text string) {
	full := t.name
	if name != "" {
		full = join(t.name, name)
	}
	t.note(t.line(name), full, text)
}

// has tells whether the file has a key.
func (t table) has(name string) bool {
	_, ok := t.values[name]
	return ok
}

// wrong notes a value of the wrong form.
func (t table) wrong(k Key, v any) {
	do := map[Form]string{
		Number:  "write a number without quotes",
		Whole:   "write a whole number without quotes",
		Pair:    "write a number without quotes, or [lowest key's, highest key's]",
		Wholes:  "write them as [1, 2]",
		Numbers: "write twelve numbers, C's first",
		Modes:   "write them as [[100, 0.4, 0], [200, 0.3, -3]]",
		Text:    "write it in quotes",
		Texts:   `write them as ["one", "two"]`,
		Choice:  "write one of them in quotes",
		Table:   "write " + k.heading() + " on a line of its own, and its keys below",
		Array:   "write " + k.heading() + " on a line of its own, and its keys below",
	}[k.Form]
	t.bad(k.last(), describe(v), k.Allowed(), do)
}

// value gives a key's value and what the format says of it.
func (t table) value(name string) (any, Key, bool) {
	v, ok := t.values[name]
	if !ok {
		return nil, Key{}, false
	}
	k, ok := t.key(join(t.name, name))
	return v, k, ok
}

// sub is a table in the table; an empty one where the file has none.
func (t table) sub(name string) (sub table, ok bool) {
	sub = table{source: t.source, name: join(t.name, name), place: join(t.place, name)}
	v, k, ok := t.value(name)
	if !ok {
		return sub, false
	}
	if sub.values, ok = v.(map[string]any); !ok {
		t.wrong(k, v)
	}
	return sub, ok
}

// subs is every table of an array of tables.
func (t table) subs(name string) []table {
	v, k, ok := t.value(name)
	if !ok {
		return nil
	}
	var list []map[string]any
	switch v := v.(type) {
	case []map[string]any:
		list = v
	case []any: // written inline
		for _, one := range v {
			values, ok := one.(map[string]any)
			if !ok {
				t.wrong(k, v)
				return nil
			}
			list = append(list, values)
		}
	default:
		t.wrong(k, v)
		return nil
	}
	subs := make([]table, len(list))
	for i, values := range list {
		subs[i] = table{source: t.source, name: join(t.name, name), place: numbered(join(t.place, name), i+1), values: values}
	}
	return subs
}

// number reads a Number.
func (t table) number(name string, to *float64) {
	v, k, ok := t.value(name)
	if !ok {
		return
	}
	n, ok := numeric(v)
	if !ok {
		t.wrong(k, v)
		return
	}
	if t.within(k, v, n) {
		*to = n
	}
}

// whole reads a Whole; ok tells that the value is set.
func (t table) whole(name string, to *int) (ok bool) {
	v, k, ok := t.value(name)
	if !ok {
		return false
	}
	n, ok := v.(int64)
	if !ok {
		t.wrong(k, v)
		return false
	}
	if ok = t.within(k, v, float64(n)); ok {
		*to = int(n)
	}
	return ok
}

// span reads a Pair.
func (t table) span(name string, to *Span) {
	v, k, ok := t.value(name)
	if !ok {
		return
	}
	list, paired := v.([]any)
	if !paired {
		list = []any{v, v}
	}
	if len(list) != 2 {
		t.wrong(k, v)
		return
	}
	low, lowOK := numeric(list[0])
	high, highOK := numeric(list[1])
	if !lowOK || !highOK {
		t.wrong(k, v)
		return
	}
	if t.within(k, v, low) && t.within(k, v, high) {
		*to = Span{low, high}
	}
}

// list reads a list of numbers, whole ones where the form says so; ok tells
// that it is set.
func (t table) list(name string) (numbers []float64, ok bool) {
	v, k, ok := t.value(name)
	if !ok {
		return nil, false
	}
	list, ok := v.([]any)
	if !ok {
		t.wrong(k, v)
		return nil, false
	}
	numbers = make([]float64, len(list))
	for i, one := range list {
		n, ok := numeric(one)
		if _, whole := one.(int64); !ok || k.Form == Wholes && !whole {
			t.wrong(k, v)
			return nil, false
		}
		if !t.within(k, one, n) {
			return nil, false
		}
		numbers[i] = n
	}
	return numbers, true
}

// text reads a Text or a Choice; ok tells that the value is set.
func (t table) text(name string, to *string) (ok bool) {
	v, k, ok := t.value(name)
	if !ok {
		return false
	}
	word, ok := v.(string)
	if !ok {
		t.wrong(k, v)
		return false
	}
	if k.Form == Choice && !slices.Contains(k.Words, word) {
		do := "write one of them"
		if near := nearest(word, k.Words); near != "" {
			do = fmt.Sprintf("did you mean %q?", near)
		}
		t.bad(name, quote(word), k.Allowed(), do)
		return false
	}
	*to = word
	return true
}

// texts reads a Texts.
func (t table) texts(name string) []string {
	v, k, ok := t.value(name)
	if !ok {
		return nil
	}
	list, ok := v.([]any)
	if !ok {
		t.wrong(k, v)
		return nil
	}
	words := make([]string, len(list))
	for i, one := range list {
		if words[i], ok = one.(string); !ok {
			t.wrong(k, v)
			return nil
		}
	}
	return words
}

// within notes a number out of its range; NaN is out of every one.
func (t table) within(k Key, v any, n float64) bool {
	unit := ""
	if k.Unit != "" {
		unit = " " + k.Unit
	}
	do := ""
	switch {
	case n >= k.Low && n <= k.High:
		return true
	case math.IsNaN(n) || math.IsInf(n, 0):
		do = "write a plain number"
	case n < k.Low:
		do = "write " + plain(k.Low) + unit + " or more"
	default:
		do = "write " + plain(k.High) + unit + " or less"
	}
	t.bad(k.last(), describe(v), k.Allowed(), do)
	return false
}

// known notes every key of the table that the format does not have.
func (t table) known() {
	for _, name := range slices.Sorted(maps.Keys(t.values)) {
		if _, ok := t.key(join(t.name, name)); ok {
			continue
		}
		t.note(t.line(name), join(t.name, toml.Key{name}.String()), "no such key; "+t.guess(name))
	}
}

// guess says what an unknown key of the table may have been meant to be.
func (t table) guess(name string) string {
	var here, elsewhere []string
	for _, k := range t.keys {
		if k.table() == t.name {
			here = append(here, k.last())
		} else if k.last() == name {
			elsewhere = append(elsewhere, k.table())
		}
	}
	if near := nearest(name, here); near != "" {
		if k, _ := t.key(join(t.name, near)); k.Form == Table || k.Form == Array {
			return "did you mean " + k.heading() + "?"
		}
		return fmt.Sprintf("did you mean %q?", near)
	}
	for _, k := range t.strange {
		if t.name == "" && k.Name == name && (k.Form == Table || k.Form == Array) {
			return "this one is no " + t.kind + "'s; name a " + t.kind + " file here, or take the table out"
		}
	}
	if k, ok := t.key(name); ok && k.Form == Table {
		return "it is a table of its own: " + k.heading()
	}
	if len(elsewhere) > 0 {
		headings := make([]string, len(elsewhere))
		for i, table := range elsewhere {
			k, ok := t.key(table)
			headings[i] = "at the top of the file"
			if ok {
				headings[i] = "below " + k.heading()
			}
		}
		return "it belongs " + or(headings)
	}
	return "here may stand " + or(here)
}

// numeric takes a float or a whole number.
func numeric(v any) (float64, bool) {
	switch v := v.(type) {
	case float64:
		return v, true
	case int64:
		return float64(v), true
	}
	return 0, false
}

// describe shows a value as a player wrote it, shortened where it is long.
func describe(v any) string {
	const shown = 6
	switch v := v.(type) {
	case string:
		return quote(v)
	case bool:
		return fmt.Sprint(v)
	case int64:
		return fmt.Sprint(v)
	case float64:
		text := strings.ToLower(plain(v))
		if v == math.Trunc(v) && !math.IsInf(v, 0) && !strings.Contains(text, "e") {
			text += ".0" // as written, or it would be a whole number
		}
		return text
	case time.Time:
		return "a date"
	case map[string]any:
		return "a table"
	case []map[string]any:
		return "a list of tables"
	case []any:
		parts := make([]string, 0, shown+1)
		for i, one := range v {
			if i == shown {
				parts = append(parts, "...")
				break
			}
			if list, ok := one.([]any); ok && len(list) > shown {
				one = list[:shown]
			}
			parts = append(parts, describe(one))
		}
		return shorten("["+strings.Join(parts, ", ")+"]", shownValue)
	}
	return "something else"
}

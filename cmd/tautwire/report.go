package main

import (
	"bufio"
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"slices"
	"strings"
	"text/tabwriter"
	"time"

	"tautwire/engine"
)

const (
	// lineMost is the longest line of a log that is read as a record; no
	// record of ours comes near.
	lineMost = 1 << 20
	// rowsMost is how many hours a report lists one by one before it goes
	// over to days.
	rowsMost = 48
)

func reportCommand() command {
	return command{
		name:  "report",
		args:  "LOG",
		brief: "what a log says about latency, load and dropouts",
		about: `
Reads a log that "tautwire play --log FILE" wrote ("-" is standard input) and
tells counts and percentiles. Lines that are no records, and a last line that
is cut off, are counted and left out.`,
		prepare: func(o *options) func(context.Context, streams, []string) error {
			return func(ctx context.Context, s streams, args []string) error {
				if len(args) != 1 {
					return usageError{"report: one log file is wanted; see `tautwire report --help`"}
				}
				return report(ctx, s, args[0])
			}
		},
	}
}

func report(ctx context.Context, s streams, path string) error {
	var from io.Reader = os.Stdin
	if path != "-" {
		f, err := os.Open(path)
		if err != nil {
			return fmt.Errorf("%w; name a file that `tautwire play --log FILE` wrote", err)
		}
		defer f.Close()
		from = f
	}
	var p *progress
	if f, ok := from.(*os.File); ok {
		if info, err := f.Stat(); err == nil && info.Mode().IsRegular() {
			p = newProgress(s.err, "reading "+path, float64(info.Size()))
		}
	}
	var t tally
	err := t.read(ctx, from, p)
	p.done()
	if err != nil {
		return fmt.Errorf("reading %s: %w", path, err)
	}
	if t.records == 0 {
		return fmt.Errorf("%s holds no record of Tautwire (%d lines read); name a file that `tautwire play --log FILE` wrote", path, t.lines)
	}
	w := bufio.NewWriter(s.out)
	t.print(w)
	return w.Flush()
}

// record is one line of the log, as far as a report needs it.
type record struct {
	Time  time.Time `json:"time"`
	Level string    `json:"level"`
	Event string    `json:"event"`

	Version string `json:"version"`
	Patch   string `json:"patch"`
	Device  string `json:"device"`
	Host    string `json:"host"`
	Rate    int    `json:"rate"`
	Period  int    `json:"period"`

	Callbacks uint64  `json:"callbacks"`
	Load      float64 `json:"load"`
	Render    spread  `json:"render_us"`
	Wake      spread  `json:"wake_us"`
	Note      spread  `json:"note_us"`
	Strings   int     `json:"strings"`
	Events    uint64  `json:"events"`
	Refused   uint64  `json:"refused"`

	Cause string `json:"cause"`
	What  string `json:"what"`
}

// spread is a measure of one window, in us. An xrun's record has a plain
// number under the same name, which is taken as the greatest.
type spread struct {
	P50  float64 `json:"p50"`
	P99  float64 `json:"p99"`
	P999 float64 `json:"p999"`
	Max  float64 `json:"max"`
}

func (s *spread) UnmarshalJSON(text []byte) error {
	if len(text) > 0 && text[0] != '{' {
		return json.Unmarshal(text, &s.Max)
	}
	type plain spread
	return json.Unmarshal(text, (*plain)(s))
}

// tally is what a log adds up to.
type tally struct {
	lines, records, garbage uint64
	truncated               bool
	first, last             time.Time
	levels                  map[string]uint64
	starts                  []record // the last few
	startCount              uint64

	callbacks, windows, events, refused uint64
	strings                             int
	loadSum, loadMax                    float64
	render, wake, note                  overWindows
	xruns                               map[string]uint64
	changes                             map[string]uint64 // "port lost", "device regained", ...
	hours                               map[int64]*hour   // by hour of Unix time
}

// overWindows is a spread over many windows.
type overWindows struct {
	p50, p99, p999 engine.Histogram // of the windows
	max            float64          // us
}

func (m *overWindows) add(s spread) {
	if s.P50 == 0 && s.Max == 0 {
		return
	}
	m.p50.Add(nanoseconds(s.P50))
	m.p99.Add(nanoseconds(s.P99))
	m.p999.Add(nanoseconds(s.P999))
	m.max = max(m.max, s.Max)
}

func nanoseconds(us float64) int64 { return int64(us * 1e3) }

func microseconds(ns int64) float64 { return float64(ns) / 1e3 }

// hour is a row of the table over time.
type hour struct {
	callbacks, xruns uint64
	load, wake, note float64 // the greatest of its windows: load, and us
}

// read takes in a log of any length, a line at a time.
func (t *tally) read(ctx context.Context, from io.Reader, p *progress) error {
	t.levels = map[string]uint64{}
	t.xruns = map[string]uint64{}
	t.changes = map[string]uint64{}
	t.hours = map[int64]*hour{}
	r := bufio.NewReaderSize(from, 1<<16)
	for {
		line, size, err := boundedLine(r)
		if size > 0 {
			p.add(float64(size))
			t.lines++
			blank := size == len(line) && len(bytes.TrimSpace(line)) == 0
			switch added := t.line(line); {
			case added, blank:
			case errors.Is(err, io.EOF):
				t.truncated = true
			default:
				t.garbage++
			}
		}
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
		if t.lines%4096 == 0 && ctx.Err() != nil {
			return ctx.Err()
		}
	}
}

// boundedLine reads up to and including a newline. Of a line longer than
// lineMost it gives nil, and its size.
func boundedLine(r *bufio.Reader) (line []byte, size int, err error) {
	for {
		part, err := r.ReadSlice('\n')
		size += len(part)
		if size <= lineMost {
			line = append(line, part...)
		} else {
			line = nil
		}
		if !errors.Is(err, bufio.ErrBufferFull) {
			return line, size, err
		}
	}
}

// line adds one record and tells whether it was one.
func (t *tally) line(text []byte) bool {
	var r record
	if err := json.Unmarshal(text, &r); err != nil || r.Event == "" || r.Time.IsZero() {
		return false
	}
	t.records++
	t.levels[r.Level]++
	if t.first.IsZero() || r.Time.Before(t.first) {
		t.first = r.Time
	}
	if r.Time.After(t.last) {
		t.last = r.Time
	}
	switch r.Event {
	case "start":
		t.startCount++
		t.starts = append(t.starts, r)
		if len(t.starts) > 3 {
			t.starts = t.starts[1:]
		}
	case "window":
		t.window(r)
	case "xrun":
		t.xruns[cmp.Or(r.Cause, "unknown")]++
		t.hour(r.Time).xruns++
	default:
		t.changes[strings.TrimSpace(r.Event+" "+r.What)]++
	}
	return true
}

func (t *tally) window(r record) {
	t.windows++
	t.callbacks += r.Callbacks
	t.events += r.Events
	t.refused += r.Refused
	t.strings = max(t.strings, r.Strings)
	t.loadSum += r.Load * float64(r.Callbacks)
	t.loadMax = max(t.loadMax, r.Load)
	t.render.add(r.Render)
	t.wake.add(r.Wake)
	t.note.add(r.Note)
	h := t.hour(r.Time)
	h.callbacks += r.Callbacks
	h.load = max(h.load, r.Load)
	h.wake = max(h.wake, r.Wake.Max)
	h.note = max(h.note, r.Note.Max)
}

func (t *tally) hour(at time.Time) *hour {
	key := at.Unix() / 3600
	h := t.hours[key]
	if h == nil {
		h = &hour{}
		t.hours[key] = h
	}
	return h
}

func (t *tally) print(w io.Writer) {
	const stamp = "2006-01-02 15:04:05"
	span := t.last.Sub(t.first).Round(time.Second)
	fmt.Fprintf(w, "%s from %s to %s (%s)\n", plural(t.records, "record"), t.first.Format(stamp), t.last.Format(stamp), span)
	if t.garbage > 0 {
		fmt.Fprintf(w, "%s that held no record, left out\n", plural(t.garbage, "line"))
	}
	if t.truncated {
		fmt.Fprintln(w, "the last line is cut off and was left out")
	}
	if t.startCount > uint64(len(t.starts)) {
		fmt.Fprintf(w, "%d starts; the last %d:\n", t.startCount, len(t.starts))
	}
	for _, r := range t.starts {
		fmt.Fprintf(w, "started %s: version %s, patch %s, on %s (%s), %d Hz, %d frames\n",
			r.Time.Format(stamp), r.Version, r.Patch, r.Device, r.Host, r.Rate, r.Period)
	}
	fmt.Fprintln(w)
	t.printMeasures(w)
	t.printXruns(w)
	t.printCounts(w, "Ports, devices, patches and the rest", t.changes)
	troubles := maps.Clone(t.levels)
	delete(troubles, "info")
	delete(troubles, "debug")
	t.printCounts(w, "Records above information", troubles)
	if span > time.Hour {
		t.printHours(w)
	}
}

func (t *tally) printMeasures(w io.Writer) {
	if t.windows == 0 {
		fmt.Fprintf(w, "No window of measures: the log ends before the first %s were over.\n", windowLength)
		return
	}
	fmt.Fprintf(w, "%d callbacks in %d windows, %d events, at most %d strings\n", t.callbacks, t.windows, t.events, t.strings)
	if t.refused > 0 {
		fmt.Fprintf(w, "%d events were refused by a full queue\n", t.refused)
	}
	if t.callbacks > 0 {
		fmt.Fprintf(w, "load: mean %.1f %%, the busiest window %.1f %%\n", 100*t.loadSum/float64(t.callbacks), 100*t.loadMax)
	}
	fmt.Fprintln(w)
	c := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintln(c, "us\tp50\tp99\tp99.9\tworst window p50\tp99\tp99.9\tmax\t")
	for _, m := range []struct {
		name string
		of   *overWindows
	}{{"render", &t.render}, {"wake", &t.wake}, {"note", &t.note}} {
		if m.of.p50.N() == 0 {
			fmt.Fprintf(c, "%s\t-\t-\t-\t-\t-\t-\t-\t\n", m.name)
			continue
		}
		fmt.Fprintf(c, "%s\t%.1f\t%.1f\t%.1f\t%.1f\t%.1f\t%.1f\t%.1f\t\n", m.name,
			microseconds(m.of.p50.Quantile(0.5)), microseconds(m.of.p99.Quantile(0.5)), microseconds(m.of.p999.Quantile(0.5)),
			microseconds(m.of.p50.Max()), microseconds(m.of.p99.Max()), microseconds(m.of.p999.Max()), m.of.max)
	}
	c.Flush()
	fmt.Fprintln(w, "render: what a callback took. wake: how late it was woken. note: from a note's first byte")
	fmt.Fprintln(w, "to the frame at which it leaves the callback. The first three columns are a typical window's.")
	fmt.Fprintln(w)
}

func (t *tally) printXruns(w io.Writer) {
	var sum uint64
	for _, n := range t.xruns {
		sum += n
	}
	if sum == 0 {
		fmt.Fprintln(w, "No dropouts.")
		return
	}
	fmt.Fprint(w, plural(sum, "dropout"))
	if hours := t.last.Sub(t.first).Hours(); hours > 1 {
		fmt.Fprintf(w, ", %.2f an hour", float64(sum)/hours)
	}
	fmt.Fprintln(w)
	meaning := map[string]string{
		"late":   "woken late: something held the processor, or real-time scheduling is not permitted",
		"slow":   "rendering outran the period: fewer strings or a longer period help",
		"device": "reported by the driver alone",
	}
	c := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for _, cause := range slices.Sorted(maps.Keys(t.xruns)) {
		fmt.Fprintf(c, "  %s\t%d\t%s\n", cause, t.xruns[cause], meaning[cause])
	}
	c.Flush()
}

func (t *tally) printCounts(w io.Writer, title string, counts map[string]uint64) {
	if len(counts) == 0 {
		return
	}
	fmt.Fprintf(w, "\n%s\n", title)
	c := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	for _, name := range slices.Sorted(maps.Keys(counts)) {
		fmt.Fprintf(c, "  %s\t%d\n", cmp.Or(name, "(no level)"), counts[name])
	}
	c.Flush()
}

// printHours shows where in a long run the trouble lies: a row an hour, or a
// day where the hours are many.
func (t *tally) printHours(w io.Writer) {
	every, title, stamp := int64(1), "hour", "2006-01-02 15:00"
	if len(t.hours) > rowsMost {
		every, title, stamp = 24, "day", "2006-01-02"
	}
	rows := map[int64]hour{}
	for at, h := range t.hours {
		r := rows[at/every]
		r.callbacks += h.callbacks
		r.xruns += h.xruns
		r.load, r.wake, r.note = max(r.load, h.load), max(r.wake, h.wake), max(r.note, h.note)
		rows[at/every] = r
	}
	fmt.Fprintln(w)
	c := tabwriter.NewWriter(w, 0, 0, 2, ' ', tabwriter.AlignRight)
	fmt.Fprintf(c, "%s (UTC)\tcallbacks\tdropouts\tload max\twake us max\tnote us max\t\n", title)
	for _, at := range slices.Sorted(maps.Keys(rows)) {
		r := rows[at]
		fmt.Fprintf(c, "%s\t%d\t%d\t%.1f %%\t%.1f\t%.1f\t\n",
			time.Unix(at*every*3600, 0).UTC().Format(stamp), r.callbacks, r.xruns, 100*r.load, r.wake, r.note)
	}
	c.Flush()
}

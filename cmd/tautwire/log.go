package main

import (
	"context"
	"fmt"
	"io"
	"math"
	"os"
	"strings"
	"sync"
	"time"

	"github.com/rs/zerolog"

	"tautwire/engine"
)

const (
	// windowLength is how much time one "window" record is about.
	windowLength = 10 * time.Second
	// drainEvery is how often the measures are taken from their ring, which is
	// long enough for a second at the shortest periods.
	drainEvery = 50 * time.Millisecond
	// xrunsMost is how many dropouts of one window have a record of their own;
	// the window counts them all.
	xrunsMost = 100
	// logTime is the form of times in the log.
	logTime = "2006-01-02T15:04:05.000000Z07:00"
)

// journal keeps the log and tells the player what concerns him. Nothing that
// goes wrong with it stops the sound.
type journal struct {
	kept zerolog.Logger // the file; the screen too when verbose
	told zerolog.Logger // both
	file *logFile
}

// newJournal writes JSON lines to the end of the file at path, none if "", and
// readable lines to screen.
//
// # Errors
//
// The file can't be opened for writing.
func newJournal(path string, screen io.Writer, verbose bool) (*journal, error) {
	readable := readableForm(screen, verbose)
	file := &logFile{path: path, complain: screen}
	if path != "" {
		f, err := os.OpenFile(path, os.O_APPEND|os.O_CREATE|os.O_WRONLY, 0o644)
		if err != nil {
			return nil, fmt.Errorf("the log can't be written: %w; name another file with --log", err)
		}
		file.to = f
	}
	j := &journal{file: file, told: zerolog.New(zerolog.MultiLevelWriter(file, readable))}
	j.kept = zerolog.New(file).Level(zerolog.InfoLevel)
	if verbose {
		j.kept = j.told
	}
	return j, nil
}

// keep begins a record of the log; the caller adds its fields and sends it.
func (j *journal) keep(level zerolog.Level, event string) *zerolog.Event {
	return j.keepOf(time.Now(), level, event)
}

// keepOf begins a record of something that happened before.
func (j *journal) keepOf(at time.Time, level zerolog.Level, event string) *zerolog.Event {
	return stamped(&j.kept, at, level, event)
}

// tell begins a record whose message is shown to the player as well.
func (j *journal) tell(level zerolog.Level, event string) *zerolog.Event {
	return stamped(&j.told, time.Now(), level, event)
}

func stamped(l *zerolog.Logger, at time.Time, level zerolog.Level, event string) *zerolog.Event {
	return l.WithLevel(level).Str("time", at.Format(logTime)).Str("event", event)
}

func (j *journal) close() { j.file.close() }

// readableForm shows the message of a record, and all of it when verbose.
func readableForm(w io.Writer, verbose bool) io.Writer {
	form := zerolog.ConsoleWriter{
		Out:     w,
		NoColor: true,
		FormatLevel: func(level any) string {
			switch level {
			case zerolog.LevelWarnValue:
				return "caution:"
			case zerolog.LevelErrorValue:
				return "error:"
			}
			return ""
		},
	}
	if verbose {
		form.TimeFormat = "15:04:05.000"
		form.PartsOrder = []string{zerolog.TimestampFieldName, zerolog.LevelFieldName, "event", zerolog.MessageFieldName}
		form.FieldsExclude = []string{"event"}
		return form
	}
	form.PartsOrder = []string{zerolog.LevelFieldName, zerolog.MessageFieldName}
	form.FormatPrepare = func(fields map[string]any) error {
		for name := range fields {
			if name != zerolog.LevelFieldName && name != zerolog.MessageFieldName {
				delete(fields, name)
			}
		}
		return nil
	}
	return form
}

// logFile is a file that may fail: a full disk is told once, and writing is
// tried again with the next record.
type logFile struct {
	path     string
	to       io.WriteCloser // nil: no log is wanted
	complain io.Writer

	mu      sync.Mutex
	failed  bool // told
	partial bool // the last line may be cut off
}

// Write never fails.
func (f *logFile) Write(line []byte) (int, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.to == nil {
		return len(line), nil
	}
	text := line
	if f.partial {
		text = append([]byte{'\n'}, line...)
	}
	_, err := f.to.Write(text)
	f.partial = err != nil
	if err != nil && !f.failed {
		fmt.Fprintf(f.complain, "caution: the log is not written (%v); the sound goes on, free some space for the log\n", err)
	}
	f.failed = err != nil
	return len(line), nil
}

func (f *logFile) close() {
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.to != nil {
		f.to.Close()
		f.to = nil
	}
}

// gauge takes the measures of the callbacks out of their ring and writes them
// to the log, on one goroutine of its own.
type gauge struct {
	journal *journal
	rate    int
	ring    *engine.Measures
	counts  func() engine.Counts

	window  engine.Window
	began   time.Time
	before  engine.Counts
	dropped uint64
	shown   int    // dropouts of this window with a record of their own
	missed  uint64 // dropouts not yet told to the player
	toldAt  time.Time
}

// run gauges until ctx ends, and then writes what it has of the last window.
func (g *gauge) run(ctx context.Context) {
	g.began = time.Now()
	tick := time.NewTicker(drainEvery)
	defer tick.Stop()
	for {
		select {
		case <-ctx.Done():
			g.drain()
			g.close(time.Now())
			return
		case now := <-tick.C:
			g.drain()
			g.warn(now)
			if now.Sub(g.began) >= windowLength {
				g.close(now)
			}
		}
	}
}

func (g *gauge) drain() {
	var m engine.Measure
	for g.ring.Take(&m) {
		g.window.Add(&m)
		if m.Cause == engine.NoXrun {
			continue
		}
		g.missed++
		if g.shown < xrunsMost {
			g.shown++
			ago := time.Duration(engine.Now() - m.Start)
			g.journal.keepOf(time.Now().Add(-ago), zerolog.WarnLevel, "xrun").
				Str("cause", m.Cause.String()).
				Float64("render_us", microseconds(m.Render)).
				Float64("gap_us", microseconds(m.Gap)).
				Int32("strings", m.Strings).
				Send()
		}
	}
}

// warn tells the player of dropouts, once a window at most.
func (g *gauge) warn(now time.Time) {
	if g.missed == 0 || now.Sub(g.toldAt) < windowLength {
		return
	}
	x := &g.window.Xruns
	advice := "a longer --period gives more time"
	if x[engine.Late] > x[engine.Slow] {
		advice = "the machine was busy; permit real-time scheduling, or take a longer --period"
	}
	g.journal.tell(zerolog.WarnLevel, "dropouts").
		Uint64("count", g.missed).
		Msgf("%s of sound; %s", plural(g.missed, "dropout"), advice)
	g.missed, g.toldAt = 0, now
}

// close writes the record of a window and begins the next.
func (g *gauge) close(now time.Time) {
	w := &g.window
	counts := g.counts()
	e := g.journal.keep(zerolog.InfoLevel, "window").
		Float64("seconds", rounded(now.Sub(g.began).Seconds())).
		Uint64("callbacks", w.Callbacks).
		Dict("render_us", quantiles(&w.Render)).
		Dict("wake_us", quantiles(&w.Wake)).
		Dict("note_us", quantiles(&w.Note)).
		Float64("load", rounded(w.Load(g.rate))).
		Uint64("xruns", w.Missed()).
		Int32("strings", w.Strings).
		Uint64("events", w.Events).
		Uint64("notes", w.Notes).
		Uint64("refused", counts.Refused-g.before.Refused).
		Uint64("stolen", counts.Stolen-g.before.Stolen)
	if dropped := g.ring.Dropped(); dropped != g.dropped {
		e = e.Uint64("unmeasured", dropped-g.dropped)
		g.dropped = dropped
	}
	e.Send()
	g.before = counts
	g.window, g.began, g.shown = engine.Window{}, now, 0
}

// rounded keeps four digits after the point: more digits would tell nothing.
func rounded(x float64) float64 { return math.Round(x*1e4) / 1e4 }

func quantiles(h *engine.Histogram) *zerolog.Event {
	return zerolog.Dict().
		Float64("p50", microseconds(h.Quantile(0.5))).
		Float64("p99", microseconds(h.Quantile(0.99))).
		Float64("p999", microseconds(h.Quantile(0.999))).
		Float64("max", microseconds(h.Max()))
}

// plural counts things in words: "1 dropout", "3 dropouts", "2 patches".
func plural[N int | int32 | uint64](n N, thing string) string {
	if n == 1 {
		return "1 " + thing
	}
	if strings.HasSuffix(thing, "ch") {
		thing += "e"
	}
	return fmt.Sprintf("%d %ss", n, thing)
}

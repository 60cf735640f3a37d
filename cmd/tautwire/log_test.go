package main

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"testing/synctest"
	"time"

	"github.com/rs/zerolog"

	"tautwire/engine"
)

// TestGauge: measures become windows and xruns of the log.
func TestGauge(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		path := filepath.Join(t.TempDir(), "log")
		var screen text
		j, err := newJournal(path, &screen, false)
		if err != nil {
			t.Fatal(err)
		}
		ring := engine.NewMeasures(1 << 14)
		var counts engine.Counts
		g := &gauge{journal: j, rate: 48000, ring: ring, counts: func() engine.Counts { return counts }}
		ctx, stop := context.WithCancel(t.Context())
		var done sync.WaitGroup
		done.Go(func() { g.run(ctx) })

		// 12 s of periods of 64 frames, of which each renders for a quarter of its time.
		const callbacks = 12 * 48000 / 64
		for i := range callbacks {
			m := engine.Measure{Frames: 64, Render: 333_333, Wake: 10_000, Strings: 7, Events: 1}
			m.Note(1_333_333)
			if i%3000 == 2999 {
				m.Cause, m.Gap = engine.Slow, 5_000_000
			}
			ring.Put(&m)
			time.Sleep(64 * time.Second / 48000)
		}
		stop()
		done.Wait()
		j.close()

		var callbacksSeen, xruns, shown float64
		for _, r := range records(t, path) {
			switch r["event"] {
			case "window":
				callbacksSeen += r["callbacks"].(float64)
				xruns += r["xruns"].(float64)
				if load := r["load"].(float64); load < 0.249 || load > 0.251 {
					t.Errorf("load %g, want 0.25", load)
				}
				if p50 := r["note_us"].(map[string]any)["p50"].(float64); p50 < 1300 || p50 > 1370 {
					t.Errorf("note p50 %g us, want 1333", p50)
				}
			case "xrun":
				shown++
				if r["cause"] != "slow" || r["gap_us"] != 5000.0 || r["strings"] != 7.0 {
					t.Errorf("xrun %v", r)
				}
			}
		}
		if callbacksSeen != callbacks || xruns != 3 || shown != 3 {
			t.Errorf("windows count %g callbacks and %g xruns, %g records of xruns; want %d, 3 and 3", callbacksSeen, xruns, shown, callbacks)
		}
		if said := screen.String(); !strings.Contains(said, "caution: 1 dropout of sound") {
			t.Errorf("the screen says %q", said)
		}
	})
}

// brokenFile fails until it is mended, after writing a part.
type brokenFile struct {
	text
	mended bool
}

func (f *brokenFile) Write(p []byte) (int, error) {
	if f.mended {
		return f.text.Write(p)
	}
	f.text.Write(p[:len(p)/2])
	return len(p) / 2, errors.New("no space left on device")
}

func (f *brokenFile) Close() error { return nil }

// TestLogFileFails: a full disk is told once, and the log goes on when there is
// space again, the record after the cut-off one whole.
func TestLogFileFails(t *testing.T) {
	file, screen := &brokenFile{}, &text{}
	f := &logFile{to: file, complain: screen}
	l := zerolog.New(f)
	l.Info().Str("event", "lost").Send()
	l.Info().Str("event", "lost too").Send()
	file.mended = true
	l.Info().Str("event", "kept").Send()
	l.Info().Str("event", "kept too").Send()
	if said := screen.String(); strings.Count(said, "\n") != 1 || !strings.Contains(said, "no space left") {
		t.Errorf("the screen says %q", said)
	}
	for _, want := range []string{`{"level":"info","event":"kept"}`, `{"level":"info","event":"kept too"}`} {
		if !strings.Contains(file.String(), "\n"+want+"\n") {
			t.Errorf("no line %s in %q", want, file.String())
		}
	}
}

// TestLogAppends: a log goes on where it ended.
func TestLogAppends(t *testing.T) {
	path := filepath.Join(t.TempDir(), "log")
	for range 2 {
		j, err := newJournal(path, os.Stderr, false)
		if err != nil {
			t.Fatal(err)
		}
		j.keep(zerolog.InfoLevel, "start").Send()
		j.close()
	}
	if n := len(records(t, path)); n != 2 {
		t.Errorf("%d records, want 2", n)
	}
}

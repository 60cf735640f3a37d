//go:build unix

package midiin

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"tautwire/engine"
)

// patience is how long a test waits for what must come at once.
const patience = 10 * time.Second

// listener runs a source into a merger and keeps what came.
type listener struct {
	*Merger
	t       *testing.T
	mu      sync.Mutex
	changed *sync.Cond
	events  []engine.Event
	records []Record
	stop    context.CancelFunc
	done    chan error
}

func listen(t *testing.T, start func(report func(Record)) Source) *listener {
	t.Helper()
	l := &listener{t: t, done: make(chan error, 1)}
	l.changed = sync.NewCond(&l.mu)
	l.Merger = NewMerger(func(e engine.Event) bool {
		l.mu.Lock()
		defer l.mu.Unlock()
		l.events = append(l.events, e)
		l.changed.Broadcast()
		return true
	}, nil, engine.Now)
	source := start(func(r Record) {
		l.mu.Lock()
		defer l.mu.Unlock()
		l.records = append(l.records, r)
		l.changed.Broadcast()
	})
	ctx, cancel := context.WithCancel(t.Context())
	l.stop = cancel
	go func() { l.done <- source.Run(ctx, l.Merger) }()
	t.Cleanup(cancel)
	return l
}

// until waits for a condition on what came.
func (l *listener) until(what string, ok func() bool) {
	l.t.Helper()
	late := time.AfterFunc(patience, func() {
		l.mu.Lock()
		defer l.mu.Unlock()
		l.changed.Broadcast()
	})
	defer late.Stop()
	deadline := time.Now().Add(patience)
	l.mu.Lock()
	defer l.mu.Unlock()
	for !ok() {
		if time.Now().After(deadline) {
			l.t.Fatalf("waited in vain for %s; events\n%s\nrecords %+v", what, list(l.events), l.records)
		}
		l.changed.Wait()
	}
}

// hear waits for n events in all and gives the last.
func (l *listener) hear(n int) (last engine.Event) {
	l.t.Helper()
	l.until(fmt.Sprintf("%d events", n), func() bool { return len(l.events) >= n })
	l.mu.Lock()
	defer l.mu.Unlock()
	if len(l.events) > n {
		l.t.Fatalf("%d events, want %d:\n%s", len(l.events), n, list(l.events))
	}
	return l.events[n-1]
}

func (l *listener) told(c Change, times int) {
	l.t.Helper()
	l.until(fmt.Sprintf("record %s, %d times", c, times), func() bool {
		n := 0
		for _, r := range l.records {
			if r.Change == c {
				n++
			}
		}
		return n >= times
	})
}

// end stops the source and checks that it ends at once, without an error.
func (l *listener) end() {
	l.t.Helper()
	l.stop()
	select {
	case err := <-l.done:
		if err != nil {
			l.t.Errorf("run: %v", err)
		}
	case <-time.After(patience):
		l.t.Fatal("does not stop")
	}
}

func is(t *testing.T, e engine.Event, kind engine.Kind, key uint8) {
	t.Helper()
	if e.Kind != kind || e.Key != key {
		t.Errorf("got %+v, want kind %d of key %d", e, kind, key)
	}
}

func TestStreamFIFO(t *testing.T) {
	path := filepath.Join(t.TempDir(), "keys")
	l := listen(t, func(report func(Record)) Source {
		return NewStream(path, func(r Record) {
			if r.Change == Lost {
				alwaysRead(t, path)
			}
			report(r)
		})
	})
	l.told(Waiting, 1)
	if err := unix.Mkfifo(path, 0o600); err != nil {
		t.Fatal(err)
	}
	n := 0
	for round := range 3 {
		w, err := os.OpenFile(path, os.O_WRONLY, 0)
		if err != nil {
			t.Fatal(err)
		}
		before := engine.Now()
		w.Write([]byte{0x90, 0x3C, 0x40})
		e := l.hear(n + 1)
		is(t, e, engine.NoteOn, 60)
		if now := engine.Now(); e.Time < before || e.Time > now {
			t.Errorf("round %d: time %d is not between %d and %d", round, e.Time, before, now)
		}
		// Half a message, and the writer goes: the note ends, the half is forgotten.
		w.Write([]byte{0x90, 0x40})
		w.Close()
		is(t, l.hear(n+2), engine.NoteOff, 60)
		n += 2
	}
	l.told(Lost, 3)
	l.told(Plugged, 4)
	// Writers that follow each other closely always find a reader, and lose nothing.
	for i := range 100 {
		fd, err := unix.Open(path, unix.O_WRONLY|unix.O_NONBLOCK, 0)
		if err != nil {
			t.Fatalf("writer %d: %v", i, err)
		}
		unix.Write(fd, []byte{0x90, byte(i), 1, byte(i), 0})
		unix.Close(fd)
		if i%2 == 0 {
			l.hear(n + 2*i + 2)
		}
	}
	is(t, l.hear(n+200), engine.NoteOff, 99)
	l.end()
}

// alwaysRead fails if a writer that came now would find nobody who reads.
func alwaysRead(t *testing.T, path string) {
	fd, err := unix.Open(path, unix.O_WRONLY|unix.O_NONBLOCK, 0)
	if err != nil {
		t.Errorf("between two writers: %v", err)
		return
	}
	unix.Close(fd)
}

// Stopping in mid-note ends the note, and leaves no descriptor and no goroutine.
func TestStreamStops(t *testing.T) {
	path := filepath.Join(t.TempDir(), "keys")
	if err := unix.Mkfifo(path, 0o600); err != nil {
		t.Fatal(err)
	}
	round := func() {
		l := listen(t, func(report func(Record)) Source { return NewStream(path, report) })
		w, err := os.OpenFile(path, os.O_WRONLY, 0)
		if err != nil {
			t.Fatal(err)
		}
		w.Write([]byte{0x90, 0x3C, 0x40})
		l.hear(1)
		l.end()
		is(t, l.hear(2), engine.NoteOff, 60)
		w.Close()
	}
	round()
	files, goroutines := openFiles(t), runtime.NumGoroutine()
	for range 20 {
		round()
	}
	deadline := time.Now().Add(patience)
	for runtime.NumGoroutine() > goroutines && time.Now().Before(deadline) {
		runtime.Gosched()
	}
	if f, g := openFiles(t), runtime.NumGoroutine(); f > files || g > goroutines {
		t.Errorf("%d files and %d goroutines are open, there were %d and %d", f, g, files, goroutines)
	}
}

func openFiles(t *testing.T) int {
	t.Helper()
	list, err := os.ReadDir("/dev/fd")
	if err != nil {
		t.Fatal(err)
	}
	return len(list)
}

func TestStreamWrongPath(t *testing.T) {
	dir := t.TempDir()
	file := filepath.Join(dir, "watch.mid")
	if err := os.WriteFile(file, []byte("MThd"), 0o600); err != nil {
		t.Fatal(err)
	}
	for _, path := range []string{dir, file} {
		err := NewStream(path, nil).Run(t.Context(), newStage().Merger)
		if err == nil || !strings.HasPrefix(err.Error(), path+" is not a byte stream") {
			t.Errorf("%s: %v", path, err)
		}
	}
}

// Something that ends as soon as it is opened is tried at growing intervals.
func TestStreamEndsAtOnce(t *testing.T) {
	begin := time.Now()
	l := listen(t, func(report func(Record)) Source { return NewStream("/dev/null", report) })
	l.told(Lost, 3)
	if took := time.Since(begin); took < firstRetry+2*firstRetry {
		t.Errorf("opened three times within %v: without a pause", took)
	}
	l.end()
}

func TestStreamName(t *testing.T) {
	if got := NewStream("/dev/snd/midiC1D0", nil).Name(); got != "/dev/snd/midiC1D0" {
		t.Errorf("name %q", got)
	}
}

package midiin

import (
	"context"
	"encoding/binary"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"tautwire/engine"
)

// fileOf makes a standard MIDI file of hexadecimal tracks, without their lengths.
func fileOf(t testing.TB, format, division uint16, tracks ...string) []byte {
	t.Helper()
	b := []byte("MThd\x00\x00\x00\x06")
	b = binary.BigEndian.AppendUint16(b, format)
	b = binary.BigEndian.AppendUint16(b, uint16(len(tracks)))
	b = binary.BigEndian.AppendUint16(b, division)
	for _, track := range tracks {
		body := unhex(t, track)
		b = append(b, "MTrk"...)
		b = binary.BigEndian.AppendUint32(b, uint32(len(body)))
		b = append(b, body...)
	}
	return b
}

const ms = int64(time.Millisecond)

// Source: Standard MIDI Files 1.0 (RP-001).
func TestParseSMF(t *testing.T) {
	c4 := func(at int64) engine.Event { return on(at, engine.NoteOn, 60, 64) }
	off := func(at int64) engine.Event { return on(at, engine.NoteOff, 60, 64) }
	tests := []struct {
		name     string
		format   uint16
		division uint16
		tracks   []string
		want     []engine.Event
		end      time.Duration
	}{
		{"120 beats a minute where nothing is said", 0, 96, []string{"60 90 3C 40 60 3C 00 00 FF 2F 00"},
			[]engine.Event{c4(500 * ms), off(1000 * ms)}, time.Second},
		{"long delta", 0, 96, []string{"83 00 90 3C 40 00 80 3C 40 60 FF 2F 00"},
			[]engine.Event{c4(2000 * ms), off(2000 * ms)}, 2500 * time.Millisecond},
		{"tempo map", 0, 96, []string{"00 FF 51 03 0F 42 40 60 90 3C 40 00 FF 51 03 03 D0 90 60 80 3C 40 00 FF 2F 00"},
			[]engine.Event{c4(1000 * ms), off(1250 * ms)}, 1250 * time.Millisecond},
		{"tempo of the first track is all tracks'", 1, 96,
			[]string{"60 FF 51 03 0F 42 40 00 FF 2F 00", "60 90 3C 40 60 80 3C 40 00 FF 2F 00"},
			[]engine.Event{c4(500 * ms), off(1500 * ms)}, 1500 * time.Millisecond},
		{"tracks merged in time", 1, 96,
			[]string{"60 90 3C 40 81 40 80 3C 40 00 FF 2F 00", "81 40 91 3E 40 00 81 3E 40 00 FF 2F 00"},
			[]engine.Event{c4(500 * ms), {Time: 1000 * ms, Kind: engine.NoteOn, Channel: 1, Key: 62, Value: 64},
				{Time: 1000 * ms, Kind: engine.NoteOff, Channel: 1, Key: 62, Value: 64}, off(1500 * ms)}, 1500 * time.Millisecond},
		{"SMPTE 25 frames of 40: ms, and tempo says nothing", 0, 0xE728, []string{"00 FF 51 03 0F 42 40 64 90 3C 40 64 80 3C 40 00 FF 2F 00"},
			[]engine.Event{c4(100 * ms), off(200 * ms)}, 200 * time.Millisecond},
		{"SMPTE 24", 0, 0xE802, []string{"30 90 3C 40 00 80 3C 40 00 FF 2F 00"}, []engine.Event{c4(1000 * ms), off(1000 * ms)}, time.Second},
		{"SMPTE 30", 0, 0xE202, []string{"3C 90 3C 40 00 80 3C 40 00 FF 2F 00"}, []engine.Event{c4(1000 * ms), off(1000 * ms)}, time.Second},
		{"SMPTE 29.97", 0, 0xE302, []string{"3C 90 3C 40 00 80 3C 40 00 FF 2F 00"}, []engine.Event{c4(1001 * ms), off(1001 * ms)}, 1001 * time.Millisecond},
		{"hanging note and pedal end with the file", 0, 96, []string{"00 90 3C 40 00 B0 40 7F 60 FF 2F 00"},
			[]engine.Event{c4(0), on(0, engine.Control, 64, 127), off(500 * ms), on(500*ms, engine.Control, 64, 0)}, 500 * time.Millisecond},
		{"exclusive, whole", 0, 96, []string{"00 F0 07 7F 7F 04 04 00 41 F7 00 FF 2F 00"}, shifts(0, 1), 0},
		{"exclusive, in packets: the time of the first", 1, 96,
			[]string{"00 F0 03 7F 7F 04 60 F7 04 04 00 41 F7 00 FF 2F 00", "30 90 3C 40 30 80 3C 40 00 FF 2F 00"},
			append(shifts(0, 1), c4(250*ms), off(500*ms)), 500 * time.Millisecond},
		{"escape", 0, 96, []string{"00 F7 04 F8 90 3C 40 00 F7 03 80 3C 40 00 FF 2F 00"}, []engine.Event{c4(0), off(0)}, 0},
		{"escaped meta and sensing are none", 0, 96, []string{"00 F7 06 FF 51 03 00 00 01 00 F7 01 FE 60 90 3C 40 00 80 3C 40 00 FF 2F 00"},
			[]engine.Event{c4(500 * ms), off(500 * ms)}, 500 * time.Millisecond},
		{"texts and unknown metas", 0, 96, []string{"00 FF 03 03 41 42 43 00 FF 60 01 00 60 90 3C 40 00 80 3C 40 00 FF 2F 00"},
			[]engine.Event{c4(500 * ms), off(500 * ms)}, 500 * time.Millisecond},
		{"bytes after the end", 0, 96, []string{"00 90 3C 40 00 80 3C 40 00 FF 2F 00 12 34"}, []engine.Event{c4(0), off(0)}, 0},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			p, err := ParseSMF("watch.mid", fileOf(t, tt.format, tt.division, tt.tracks...))
			if err != nil {
				t.Fatal(err)
			}
			expect(t, p.Events, tt.want...)
			if p.End != tt.end {
				t.Errorf("ends at %v, want %v", p.End, tt.end)
			}
		})
	}
}

func shifts(t int64, by float32) (events []engine.Event) {
	for i := range uint8(16) {
		events = append(events, engine.Event{Time: t, Kind: engine.Shift, Channel: i, Value: by})
	}
	return events
}

// A file's sensing byte must not start a watch on the reader's own clock.
func TestEscaped(t *testing.T) {
	if got := escaped([]byte{0xFE, 0x90, 0xF8, 0x3C, 0x40, 0xFF}); string(got) != "\x90\x3C\x40" {
		t.Errorf("kept % X", got)
	}
}

// Nothing is rounded on the way: at 7 ticks to a beat a tick is no whole number of ns.
func TestParseSMFAddsNoError(t *testing.T) {
	track := strings.Repeat("01 90 3C 40 ", 7*1000) + "00 FF 2F 00"
	p, err := ParseSMF("watch.mid", fileOf(t, 0, 7, track))
	if err != nil {
		t.Fatal(err)
	}
	if want := 500 * time.Second; p.End != want {
		t.Errorf("ends at %v, want %v", p.End, want)
	}
}

// A chunk of another kind and a longer header are passed over.
func TestParseSMFForeignChunks(t *testing.T) {
	plain := fileOf(t, 0, 96, "60 90 3C 40 00 80 3C 40 00 FF 2F 00")
	odd := slices.Concat([]byte("MThd\x00\x00\x00\x08"), plain[8:14], []byte{1, 2}, []byte("XFIH\x00\x00\x00\x03abc"), plain[14:], []byte("tail"))
	want, err := ParseSMF("plain.mid", plain)
	if err != nil {
		t.Fatal(err)
	}
	got, err := ParseSMF("odd.mid", odd)
	if err != nil {
		t.Fatal(err)
	}
	expect(t, got.Events, want.Events...)
}

func TestParseSMFErrors(t *testing.T) {
	long := fileOf(t, 0, 96, "00 FF 2F 00")
	binary.BigEndian.PutUint32(long[4:], 0xFFFFFFFF)
	fat := fileOf(t, 0, 96, "00 FF 2F 00")
	binary.BigEndian.PutUint32(fat[18:], 0xFFFFFFF0)
	few := fileOf(t, 1, 96, "00 FF 2F 00")
	few[11] = 3
	tests := []struct {
		name string
		data []byte
		want string
	}{
		{"empty", nil, "does not start with a whole MThd"},
		{"text", []byte("once upon a midnight dreary"), "does not start with a whole MThd"},
		{"RIFF", []byte("RIFF\x00\x00\x00\x00RMIDdata"), "is a RIFF file"},
		{"type 2", fileOf(t, 2, 96, "00 FF 2F 00"), "is of type 2: save it as type 0 or 1"},
		{"no ticks", fileOf(t, 0, 0, "00 FF 2F 00"), "0 ticks to a quarter"},
		{"no ticks to a frame", fileOf(t, 0, 0xE700, "00 FF 2F 00"), "0 ticks to a frame"},
		{"odd frames", fileOf(t, 0, 0xF028, "00 FF 2F 00"), "16 frames a second"},
		{"no tracks", fileOf(t, 0, 96), "has no track"},
		{"header of 4 GiB", long, "track 1 of 1: is missing"},
		{"track of 4 GiB", fat, "says 4294967280 bytes, and 4 are left"},
		{"fewer tracks than said", few, "track 2 of 3: is missing"},
		{"no end of track", fileOf(t, 0, 96, "00 90 3C 40"), "has no End of Track"},
		{"event of 256 MiB", fileOf(t, 0, 96, "00 F0 FF FF FF 7F 00"), "has an event of 268435455 bytes where 1 are left"},
		{"meta of 256 MiB", fileOf(t, 0, 96, "00 FF 01 FF FF FF 7F 00"), "has an event of 268435455 bytes"},
		{"endless number", fileOf(t, 0, 96, "FF FF FF FF FF FF"), "more than four bytes"},
		{"cut number", fileOf(t, 0, 96, "FF"), "ends inside a number"},
		{"data without status", fileOf(t, 0, 96, "00 3C 40 00 FF 2F 00"), "data byte 3C without a status"},
		{"running status across a meta", fileOf(t, 0, 96, "00 90 3C 40 00 FF 01 00 00 3C 00 00 FF 2F 00"), "data byte 3C without a status"},
		{"status inside a message", fileOf(t, 0, 96, "00 90 3C 90 00 FF 2F 00"), "byte 25: has status 90 inside a message"},
		{"real-time status", fileOf(t, 0, 96, "00 F8 00 FF 2F 00"), "has status F8, which no file may have"},
		{"song position", fileOf(t, 0, 96, "00 F2 00 00 00 FF 2F 00"), "has status F2"},
		{"tempo of 0", fileOf(t, 0, 96, "00 FF 51 03 00 00 00 00 FF 2F 00"), "has a tempo of 0 us"},
		{"too long", fileOf(t, 0, 1, "00 FF 51 03 FF FF FF FF FF FF 7F 90 3C 40 00 FF 2F 00"), "lasts longer than 24 hours"},
		{"far too long, SMPTE", fileOf(t, 0, 0xE8FF, strings.Repeat("FF FF FF 7F 90 3C 40 ", 200)+"00 FF 2F 00"), "lasts longer than 24 hours"},
		{"too many events", fileOf(t, 0, 96, strings.Repeat("00C000", maxFileEvents)+"00FF2F00"), "more than 1048576 events"},
		{"too many tempos", fileOf(t, 0, 96, strings.Repeat("00FF510307A120", maxFileTempos+1)+"00FF2F00"), "more than 16384 changes of tempo"},
		{"too large", make([]byte, maxFileSize+1), "is larger than 16 MiB"},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			_, err := ParseSMF("watch.mid", tt.data)
			if err == nil {
				t.Fatal("no error")
			}
			if s := err.Error(); !strings.HasPrefix(s, "performance watch.mid: ") || !strings.Contains(s, tt.want) || strings.Contains(s, "\n") {
				t.Errorf("error %q, want %q in it", s, tt.want)
			}
		})
	}
}

// A file that is cut off anywhere is an error, never a shorter performance.
func TestParseSMFTruncated(t *testing.T) {
	demo, err := DemoSMF()
	if err != nil {
		t.Fatal(err)
	}
	for _, data := range [][]byte{demo, fileOf(t, 1, 96, "00 FF 03 03 41 42 43 00 F0 07 7F 7F 04 04 00 41 F7 00 FF 2F 00", "00 90 3C 40 60 3C 00 00 FF 2F 00")} {
		for n := range data {
			if _, err := ParseSMF("watch.mid", data[:n]); err == nil {
				t.Fatalf("cut off at byte %d of %d: no error", n, len(data))
			}
		}
	}
}

func TestReadSMF(t *testing.T) {
	path := filepath.Join(t.TempDir(), "watch.mid")
	if _, err := ReadSMF(path); !errors.Is(err, os.ErrNotExist) || !strings.Contains(err.Error(), path) {
		t.Errorf("missing file: %v", err)
	}
	if err := os.WriteFile(path, fileOf(t, 0, 96, "60 90 3C 40 00 80 3C 40 00 FF 2F 00"), 0o600); err != nil {
		t.Fatal(err)
	}
	p, err := ReadSMF(path)
	if err != nil || p.Name != "watch.mid" || len(p.Events) != 2 {
		t.Errorf("%+v, %v", p, err)
	}
	if _, err := ReadSMF(t.TempDir()); err == nil {
		t.Error("a directory is no error")
	}
}

func FuzzSMF(f *testing.F) {
	f.Add(fileOf(f, 0, 96, "00 90 3C 40 60 3C 00 00 FF 2F 00"))
	f.Add(fileOf(f, 1, 96, "60 FF 51 03 0F 42 40 00 FF 2F 00", "00 F0 03 7F 7F 04 60 F7 04 04 00 41 F7 00 FF 2F 00"))
	f.Add(fileOf(f, 0, 0xE728, "00 F7 04 F8 90 3C 40 00 FF 2F 00"))
	f.Fuzz(func(t *testing.T, data []byte) {
		p, err := ParseSMF("watch.mid", data)
		if err != nil {
			if strings.Contains(err.Error(), "the reader gave up") {
				t.Errorf("what was vetted could not be read: %v", err)
			}
			return
		}
		down := map[[2]uint8]bool{}
		last := int64(0)
		for _, e := range p.Events {
			if e.Time < last || e.Time > int64(p.End) {
				t.Fatalf("event at %d after one at %d, end at %d", e.Time, last, p.End)
			}
			last = e.Time
			switch k := [2]uint8{e.Channel, e.Key}; e.Kind {
			case engine.NoteOn:
				down[k] = true
			case engine.NoteOff:
				delete(down, k)
			case engine.AllNotesOff, engine.AllSoundOff:
				clear(down)
			}
		}
		if len(down) > 0 {
			t.Errorf("keys hang: %v", down)
		}
	})
}

// Live, events come when they are due, and say so to the ns.
func TestPlay(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		begin := time.Now()
		now := func() int64 { return 1000 + int64(time.Since(begin)) }
		var got []engine.Event
		var at []int64
		m := NewMerger(func(e engine.Event) bool {
			got, at = append(got, e), append(at, now())
			return true
		}, nil, now)
		p := &Performance{Events: []engine.Event{on(0, engine.NoteOn, 60, 64), on(7*ms+1, engine.NoteOff, 60, 64), on(9*ms, engine.NoteOn, 62, 64)}, End: 20 * time.Millisecond}
		if err := Play(t.Context(), p, m.Open("demo")); err != nil {
			t.Fatal(err)
		}
		expect(t, got, on(1000, engine.NoteOn, 60, 64), on(1000+7*ms+1, engine.NoteOff, 60, 64), on(1000+9*ms, engine.NoteOn, 62, 64),
			on(1000+20*ms, engine.NoteOff, 62, 64))
		for i, e := range got {
			if at[i] < e.Time {
				t.Errorf("event %d came at %d, before it was due at %d", i, at[i], e.Time)
			}
		}
	})
}

func TestPlayStops(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		s := newStage()
		ctx, cancel := context.WithTimeout(t.Context(), 5*time.Millisecond)
		defer cancel()
		begin := time.Now()
		s.now = func() int64 { return int64(time.Since(begin)) }
		p := &Performance{Events: []engine.Event{on(0, engine.NoteOn, 60, 64), on(int64(time.Hour), engine.NoteOff, 60, 64)}, End: time.Hour}
		if err := Play(ctx, p, s.Open("demo")); !errors.Is(err, context.DeadlineExceeded) {
			t.Errorf("error %v", err)
		}
		expect(t, s.take(), on(0, engine.NoteOn, 60, 64), on(5*ms, engine.NoteOff, 60, 64))
	})
}

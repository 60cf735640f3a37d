package midiin

import (
	"slices"
	"sync"
	"testing"
	"testing/synctest"
	"time"

	"tautwire/engine"
)

// stage is a merger whose events are kept and whose clock the test sets.
type stage struct {
	*Merger
	events []engine.Event
	clock  int64
	full   bool // the engine refuses
}

func newStage(channels ...int) *stage {
	s := &stage{}
	s.Merger = NewMerger(func(e engine.Event) bool {
		s.events = append(s.events, e)
		return !s.full
	}, channels, func() int64 { return s.clock })
	return s
}

// take gives the events since the last take.
func (s *stage) take() (events []engine.Event) {
	events, s.events = s.events, nil
	return events
}

func expect(t *testing.T, got []engine.Event, want ...engine.Event) {
	t.Helper()
	if !slices.Equal(got, want) {
		t.Errorf("got\n%s\nwant\n%s", list(got), list(want))
	}
}

// A source that goes away lets go what it holds, at once.
func TestMergerClose(t *testing.T) {
	s := newStage()
	p := s.Open("bells")
	p.Write(unhex(t, "90 3C 40 3E 40 3C 00 B0 40 7F 42 40 01 20 D0 30 E0 00 60 91 30 40"), 10)
	s.take()
	s.clock = 500
	p.Close()
	expect(t, s.take(),
		on(500, engine.NoteOff, 62, 64), on(500, engine.Control, 64, 0), on(500, engine.Control, 66, 0),
		on(500, engine.Control, 1, 0), on(500, engine.ChannelPressure, 0, 0), on(500, engine.Bend, 0, 0),
		engine.Event{Time: 500, Kind: engine.NoteOff, Channel: 1, Key: 48, Value: 64})
	p.Close()
	p.Release()
	p.Write(unhex(t, "90 3C 40"), 600)
	p.Event(on(600, engine.NoteOn, 60, 1))
	expect(t, s.take())
	if len(s.ports) != 0 {
		t.Errorf("%d ports left", len(s.ports))
	}
}

// What was let go, silenced or reset before is not released again.
func TestMergerReleasesOnlyWhatIsHeld(t *testing.T) {
	for _, in := range []string{
		"", "90 3C 40 80 3C 40", "B0 40 7F 40 00", "90 3C 40 B0 7B 00", "90 3C 40 B0 78 00", "B0 40 7F 01 10 E0 00 60 B0 79 00", "B0 07 20 0A 10 4A 30 C0 05",
	} {
		s := newStage()
		p := s.Open("bells")
		p.Write(unhex(t, in), 0)
		s.take()
		p.Release()
		if got := s.take(); len(got) != 0 {
			t.Errorf("%q: released\n%s", in, list(got))
		}
	}
}

// What two sources hold is held until both have let go.
func TestMergerTwoSources(t *testing.T) {
	s := newStage()
	a, b := s.Open("bells"), s.Open("stays")
	a.Write(unhex(t, "90 3C 40 3E 40 B0 40 60"), 1)
	b.Write(unhex(t, "90 3C 50 B0 40 20"), 2)
	expect(t, s.take(), on(1, engine.NoteOn, 60, 64), on(1, engine.NoteOn, 62, 64), on(1, engine.Control, 64, 96),
		on(2, engine.NoteOn, 60, 80), on(2, engine.Control, 64, 96))
	s.clock = 9
	a.Close()
	expect(t, s.take(), on(9, engine.NoteOff, 62, 64), on(9, engine.Control, 64, 32))
	b.Write(unhex(t, "80 3C 40 B0 40 00"), 10)
	expect(t, s.take(), on(10, engine.NoteOff, 60, 64), on(10, engine.Control, 64, 0))

	// A finger that lifts while another presses the same key leaves it down.
	a = s.Open("bells")
	a.Write(unhex(t, "90 3C 40"), 11)
	b.Write(unhex(t, "90 3C 40 3C 00"), 12)
	a.Write(unhex(t, "90 3C 00"), 13)
	expect(t, s.take(), on(11, engine.NoteOn, 60, 64), on(12, engine.NoteOn, 60, 64), on(13, engine.NoteOff, 60, 64))

	// All Notes Off means everybody's.
	a.Write(unhex(t, "90 3C 40"), 14)
	b.Write(unhex(t, "B0 7B 00"), 15)
	s.take()
	a.Close()
	expect(t, s.take())
}

// A loss of one source leaves the others' bytes as they were.
func TestMergerReleaseForgetsHalfMessages(t *testing.T) {
	s := newStage()
	p := s.Open("bells")
	p.Write(unhex(t, "90 3C"), 0)
	p.Release()
	p.Write(unhex(t, "40 90 3E 40"), 0)
	expect(t, s.take(), on(0, engine.NoteOn, 62, 64))
	if c := s.Counts(); c.Dropped != 3 {
		t.Errorf("dropped %d bytes, want 3", c.Dropped)
	}
}

func TestMergerTimesStayInOrder(t *testing.T) {
	s := newStage()
	p := s.Open("bells")
	p.Write(unhex(t, "90 3C 40"), 1000)
	p.Write(unhex(t, "90 3D 40"), 900)
	p.WriteSpaced(unhex(t, "90 3E 40 3F 40"), 2000, 100)
	p.WriteSpaced(unhex(t, "90 40 40"), 2050, 100)
	p.Event(on(1, engine.NoteOn, 65, 1))
	var times []int64
	for _, e := range s.take() {
		times = append(times, e.Time)
	}
	// The spaced ones: five bytes that end at 2000, the notes begin with the first and the fourth; the
	// last would begin at 1850, before the byte before it had come.
	if want := []int64{1000, 1000, 1600, 1900, 2000, 2050}; !slices.Equal(times, want) {
		t.Errorf("times %v, want %v", times, want)
	}
}

func TestMergerChannelsAndCounts(t *testing.T) {
	s := newStage(2, 16)
	p := s.Open("bells")
	p.Write(unhex(t, "90 3C 40 91 3C 40 9F 3C 40 F8 3C F0 43 90 3C 40"), 0)
	s.full = true
	p.Write(unhex(t, "91 3E 40"), 0)
	want := Counts{Events: 2, Refused: 1, Filtered: 2, Messages: 7, Dropped: 0, Cut: 1}
	// F8 keeps running status of 9F; its data byte is cut by F0.
	want.Dropped = 1
	if got := s.Counts(); got != want {
		t.Errorf("counts %+v, want %+v", got, want)
	}
	s.take()
	p.Close()
	for _, e := range s.take() {
		if e.Channel != 1 && e.Channel != 15 {
			t.Errorf("released on channel %d, which is not listened to", e.Channel+1)
		}
	}
}

// Active Sensing: once it was sent, silence is a loss; a source that never sent it may be silent.
func TestMergerActiveSensing(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		start := time.Now()
		now := func() int64 { return int64(time.Since(start)) }
		var mu sync.Mutex
		var events []engine.Event
		m := NewMerger(func(e engine.Event) bool {
			mu.Lock()
			defer mu.Unlock()
			events = append(events, e)
			return true
		}, nil, now)
		count := func() int {
			synctest.Wait()
			mu.Lock()
			defer mu.Unlock()
			return len(events)
		}
		quiet, sensed := m.Open("stays"), m.Open("bells")
		quiet.Write([]byte{0x90, 0x30, 0x40}, now())
		sensed.Write([]byte{0x90, 0x3C, 0x40, 0xFE}, now())
		for range 10 {
			time.Sleep(300 * time.Millisecond)
			sensed.Write([]byte{0xFE}, now())
		}
		if n := count(); n != 2 {
			t.Fatalf("%d events while the source was there, want 2", n)
		}
		time.Sleep(sensingTimeout - 1)
		if n := count(); n != 2 {
			t.Fatalf("%d events just before the limit, want 2", n)
		}
		time.Sleep(1)
		if n := count(); n != 3 || events[2].Kind != engine.NoteOff || events[2].Key != 60 {
			t.Fatalf("after the limit: %s", list(events))
		}
		// It is back, without sensing: silence is allowed again.
		sensed.Write([]byte{0x90, 0x3E, 0x40}, now())
		time.Sleep(time.Minute)
		if n := count(); n != 4 {
			t.Fatalf("%d events, want 4", n)
		}
		quiet.Close()
		sensed.Close()
	})
}

// Sources that hammer at once: the producer is one, and every key is let go in the end.
func TestMergerConcurrent(t *testing.T) {
	var inside, events int
	sounding := map[uint8]bool{}
	m := NewMerger(func(e engine.Event) bool {
		inside++
		if inside != 1 {
			t.Error("send was called twice at once")
		}
		events++
		switch e.Kind {
		case engine.NoteOn:
			sounding[e.Key] = true
		case engine.NoteOff:
			delete(sounding, e.Key)
		}
		inside--
		return true
	}, nil, engine.Now)
	var wait sync.WaitGroup
	for i := range byte(8) {
		wait.Go(func() {
			for round := range byte(50) {
				p := m.Open("bells")
				for key := range byte(20) {
					p.Write([]byte{0x90, 40 + key + i, 1 + round, 0xFE}, engine.Now())
					if key%3 == 0 {
						p.Write([]byte{40 + key + i, 0}, engine.Now())
					}
				}
				if round%2 == 0 {
					p.Release()
				}
				p.Close()
				m.Counts()
			}
		})
	}
	wait.Wait()
	if len(sounding) > 0 {
		t.Errorf("keys hang: %v", sounding)
	}
	if c := m.Counts(); c.Events != uint64(events) || events < 8*50*20 {
		t.Errorf("%d events counted, %d sent", c.Events, events)
	}
}

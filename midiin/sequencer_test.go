package midiin

import (
	"errors"
	"slices"
	"testing"

	"tautwire/engine"
)

// fakeSequencer has ports and notes who was subscribed.
type fakeSequencer struct {
	list       []seqPort
	subscribed []address
	refuse     error
}

func (f *fakeSequencer) ports() []seqPort { return f.list }

func (f *fakeSequencer) port(a address) (seqPort, bool) {
	for _, p := range f.list {
		if p.address == a {
			return p, true
		}
	}
	return seqPort{}, false
}

func (f *fakeSequencer) subscribe(a address) error {
	if f.refuse != nil {
		return f.refuse
	}
	f.subscribed = append(f.subscribed, a)
	return nil
}

const ourClient = 128

func keyboardPorts() []seqPort {
	return []seqPort{
		{address{0, 0}, "System", "Timer", true},
		{address{0, 1}, "System", "Announce", true},
		{address{14, 0}, "Midi Through", "Midi Through Port-0", true},
		{address{20, 0}, "Stage keyboard", "Stage keyboard MIDI 1", true},
		{address{24, 0}, "Lantern pads", "out", true},
		{address{24, 1}, "Lantern pads", "lights", false},
		{address{ourClient, 0}, "tautwire", "in", true},
	}
}

func board(s *stage, f *fakeSequencer, inputs ...string) (*switchboard, *[]Record) {
	var records []Record
	b := newSwitchboard(f, ourClient, s.Merger, SequencerOptions{Inputs: inputs, Report: func(r Record) { records = append(records, r) }}, s.now)
	return b, &records
}

func TestSwitchboardStart(t *testing.T) {
	tests := []struct {
		name   string
		inputs []string
		want   []address
	}{
		{"every keyboard, not the system's, through, what cannot be read, or ours", nil, []address{{20, 0}, {24, 0}}},
		{"part of a name, small or capital", []string{"STAGE key"}, []address{{20, 0}}},
		{"of a client's and a port's name", []string{"pads out"}, []address{{24, 0}}},
		{"address", []string{"24:0"}, []address{{24, 0}}},
		{"through, when named", []string{"through", "lantern"}, []address{{14, 0}, {24, 0}}},
		{"never the system, never what cannot be read", []string{"system", "0:1", "lights"}, nil},
		{"nobody", []string{"harp"}, nil},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			f := &fakeSequencer{list: keyboardPorts()}
			b, records := board(newStage(), f, tt.inputs...)
			b.start()
			if !slices.Equal(f.subscribed, tt.want) {
				t.Errorf("subscribed %v, want %v", f.subscribed, tt.want)
			}
			if len(*records) != len(tt.want) {
				t.Errorf("records %+v", *records)
			}
		})
	}
}

// A keyboard is plugged in after the start, pulled out in mid-chord, and plugged in again.
func TestSwitchboardHotplug(t *testing.T) {
	s, f := newStage(), &fakeSequencer{}
	b, records := board(s, f)
	b.start()
	keyboard := keyboardPorts()[3]
	for round, exit := range []func(int64){
		func(t int64) { b.gone(keyboard.address, t) },
		func(t int64) { b.clientGone(20, t) },
		func(t int64) { b.gone(keyboard.address, t); b.clientGone(20, t); b.gone(keyboard.address, t) },
	} {
		*records = nil
		f.list = []seqPort{keyboard}
		s.clock = 1500
		b.came(keyboard.address, 1000)
		b.subscribed(keyboard.address, 1000) // the announcement of our own doing
		b.came(keyboard.address, 1400)       // a change of it
		b.bytes(keyboard.address, []byte{0x90, 60, 64}, 1600)
		b.bytes(keyboard.address, []byte{0x90, 64, 64}, 1600)
		f.list = nil
		s.clock = 2300
		exit(2000)
		expect(t, s.take(), on(1600, engine.NoteOn, 60, 64), on(1600, engine.NoteOn, 64, 64),
			on(2300, engine.NoteOff, 60, 64), on(2300, engine.NoteOff, 64, 64))
		want := []Record{{Change: Plugged, Name: "Stage keyboard MIDI 1", Took: 500}, {Change: Lost, Name: "Stage keyboard MIDI 1", Took: 300}}
		if !slices.Equal(*records, want) {
			t.Errorf("round %d: records %+v, want %+v", round, *records, want)
		}
		if len(f.subscribed) != round+1 || len(b.lines) != 0 {
			t.Errorf("round %d: subscribed %v, %d lines left", round, f.subscribed, len(b.lines))
		}
	}
}

// A port that is gone before we looked, one that refuses, one not wanted.
func TestSwitchboardDoesNotConnect(t *testing.T) {
	s, f := newStage(), &fakeSequencer{}
	b, records := board(s, f, "stage")
	b.came(address{20, 0}, 0)
	f.list = keyboardPorts()
	b.came(address{24, 0}, 0)
	b.came(address{ourClient, 0}, 0)
	if len(f.subscribed)+len(*records) != 0 {
		t.Errorf("subscribed %v, records %+v", f.subscribed, *records)
	}
	f.refuse = errors.New("not permitted")
	b.came(address{20, 0}, 0)
	if len(*records) != 1 || (*records)[0].Change != Waiting || (*records)[0].Err == nil {
		t.Errorf("records %+v", *records)
	}
	f.refuse = nil
	b.came(address{20, 0}, 0)
	if len(f.subscribed) != 1 {
		t.Error("a port that changed was not tried again")
	}
}

// Programs connect themselves, or send without a connection; both are heard, and released.
func TestSwitchboardOtherPrograms(t *testing.T) {
	s, f := newStage(), &fakeSequencer{list: keyboardPorts()}
	b, records := board(s, f, "harp")
	b.start()
	b.subscribed(address{24, 0}, 0)
	b.subscribed(address{0, 1}, 0) // our own listening to announcements
	b.bytes(address{24, 0}, []byte{0x90, 60, 64}, 1)
	b.bytes(address{130, 3}, []byte{0x91, 62, 64}, 2)
	s.take()
	s.clock = 3
	b.gone(address{24, 0}, 0) // disconnected
	expect(t, s.take(), on(3, engine.NoteOff, 60, 64))
	b.clientGone(130, 0)
	expect(t, s.take(), engine.Event{Time: 3, Kind: engine.NoteOff, Channel: 1, Key: 62, Value: 64})
	if len(*records) != 2 || (*records)[0].Name != "Lantern pads out" {
		t.Errorf("records %+v: want those of the connected port alone", *records)
	}
}

// An exclusive message comes in several events; an overrun and the end release everything.
func TestSwitchboardBytes(t *testing.T) {
	s, f := newStage(), &fakeSequencer{list: keyboardPorts()}
	b, _ := board(s, f)
	b.start()
	a := address{20, 0}
	b.bytes(a, unhex(t, "F0 7F 7F 04"), 5)
	b.bytes(address{24, 0}, unhex(t, "90 3C 40"), 6)
	b.bytes(a, unhex(t, "04 00 41 F7"), 7)
	expect(t, s.take(), append([]engine.Event{on(6, engine.NoteOn, 60, 64)}, shifts(5, 1)...)...)
	s.clock = 8
	b.overrun()
	expect(t, s.take(), on(8, engine.NoteOff, 60, 64))
	b.bytes(a, unhex(t, "90 3E 40"), 9)
	s.take()
	s.clock = 10
	b.stop()
	expect(t, s.take(), on(10, engine.NoteOff, 62, 64))
	if len(s.ports) != 0 {
		t.Errorf("%d ports left", len(s.ports))
	}
}

func TestStamp(t *testing.T) {
	const s = int64(1e9)
	tests := []struct{ stamped, queue, now, want int64 }{
		{100, 100, 5000, 5000},
		{100, 350, 5000, 4750},
		{400, 350, 5000, 5000},     // of the future
		{0, s + 1, 9 * s, 9 * s},   // too old to be
		{0, s, 9 * s, 8 * s},       // just not
		{7 * s, 7*s + 9, s, s - 9}, // clocks that began apart
	}
	for _, tt := range tests {
		if got := stamp(tt.stamped, tt.queue, tt.now); got != tt.want {
			t.Errorf("stamp(%d, %d, %d) = %d, want %d", tt.stamped, tt.queue, tt.now, got, tt.want)
		}
	}
}

// Without a sequencer the error says what to do; with one, opening and closing works.
func TestOpenSequencer(t *testing.T) {
	s, err := OpenSequencer(SequencerOptions{})
	if errors.Is(err, ErrNoSequencer) {
		return
	}
	if err != nil {
		t.Fatal(err)
	}
	s.Ports()
	if err := s.Close(); err != nil {
		t.Error(err)
	}
}

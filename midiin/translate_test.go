package midiin

import (
	"fmt"
	"math"
	"slices"
	"testing"

	"tautwire/engine"
)

// translate decodes and translates hexadecimal bytes; times are byte numbers.
func translate(t testing.TB, in string) []engine.Event {
	t.Helper()
	var got []engine.Event
	var d Decoder
	tr := NewTranslator(NewChannels())
	for i, c := range unhex(t, in) {
		d.Byte(c, int64(i), func(m Message) {
			tr.Message(m, func(e engine.Event) { got = append(got, e) })
		})
	}
	return got
}

// on is an event of channel 1.
func on(time int64, kind engine.Kind, key uint8, value float32) engine.Event {
	return engine.Event{Time: time, Kind: kind, Key: key, Value: value}
}

func TestTranslate(t *testing.T) {
	const (
		halfUp  = 4096.0 / 8192 // of the bend range
		fullUp  = 8191.0 / 8192
		fineTop = 8191.0 / 8192 // semitones
	)
	tests := []struct {
		name, in string
		want     []engine.Event
	}{
		// MIDI 1.0 Detailed Specification 4.2, Channel Voice Messages.
		{"note on", "90 3C 40", []engine.Event{on(0, engine.NoteOn, 60, 64)}},
		{"note off", "80 3C 21", []engine.Event{on(0, engine.NoteOff, 60, 33)}},
		{"velocity 0 releases, at 64", "90 3C 00", []engine.Event{on(0, engine.NoteOff, 60, 64)}},
		{"channel 16", "9F 3C 40", []engine.Event{{Kind: engine.NoteOn, Channel: 15, Key: 60, Value: 64}}},
		{"key pressure", "A0 3C 21", []engine.Event{on(0, engine.KeyPressure, 60, 33)}},
		{"channel pressure", "D0 21", []engine.Event{on(0, engine.ChannelPressure, 0, 33)}},
		{"bend centre, bottom, half, top", "E0 00 40 00 00 00 60 7F 7F", []engine.Event{
			on(0, engine.Bend, 0, 0), on(3, engine.Bend, 0, -2), on(5, engine.Bend, 0, 2*halfUp), on(7, engine.Bend, 0, 2*fullUp)}},

		// Control Change, table III.
		{"modulation, volume, pan, expression, damper", "B0 01 21 07 22 0A 23 0B 24 40 7F", []engine.Event{
			on(0, engine.Control, 1, 33), on(3, engine.Control, 7, 34), on(5, engine.Control, 10, 35),
			on(7, engine.Control, 11, 36), on(9, engine.Control, 64, 127)}},
		{"half pedal, sostenuto, soft, brightness", "B0 40 20 42 7F 43 10 4A 50", []engine.Event{
			on(0, engine.Control, 64, 32), on(3, engine.Control, 66, 127), on(5, engine.Control, 67, 16), on(7, engine.Control, 74, 80)}},
		{"14 bits: LSB refines, MSB starts anew", "B0 07 40 27 40 07 41 2A 7F", []engine.Event{
			on(0, engine.Control, 7, 64), on(3, engine.Control, 7, 64.5), on(5, engine.Control, 7, 65), on(7, engine.Control, 10, 64+127.0/128)}},
		{"14 bits never pass 127", "B0 01 7F 21 7F", []engine.Event{on(0, engine.Control, 1, 127), on(3, engine.Control, 1, 127)}},
		{"LSB of what was never set", "B0 21 40 2B 00", []engine.Event{on(0, engine.Control, 1, 0.5), on(3, engine.Control, 11, 127)}},

		{"program", "C0 05", []engine.Event{on(0, engine.Program, 0, 5)}},
		{"bank and program count on", "B0 00 00 20 01 C0 05", []engine.Event{on(5, engine.Program, 0, 133)}},
		{"bank MSB", "B0 00 79 20 00 C0 00", []engine.Event{on(5, engine.Program, 0, 121*16384)}},

		// Registered parameters, table IIIa.
		{"bend range 12", "B0 65 00 64 00 06 0C E0 00 60", []engine.Event{on(7, engine.Bend, 0, 12*halfUp)}},
		{"bend range with cents", "B0 65 00 64 00 06 0C 26 32 E0 00 00", []engine.Event{on(9, engine.Bend, 0, -12.5)}},
		{"range under a held bend", "E0 00 60 B0 65 00 64 00 06 0C", []engine.Event{
			on(0, engine.Bend, 0, 2*halfUp), on(8, engine.Bend, 0, 12*halfUp)}},
		{"range that stays, bend that is centred: nothing", "E0 00 60 B0 65 00 64 00 06 02 E0 00 40 B0 06 0C", []engine.Event{
			on(0, engine.Bend, 0, 2*halfUp), on(10, engine.Bend, 0, 0)}},
		{"RPN LSB first", "B0 64 00 65 00 06 0C E0 00 60", []engine.Event{on(7, engine.Bend, 0, 12*halfUp)}},
		{"null parameter", "B0 65 00 64 00 65 7F 64 7F 06 0C 26 00 60 00 61 00 E0 00 60", []engine.Event{on(17, engine.Bend, 0, 2*halfUp)}},
		{"nothing selected at start", "B0 06 0C E0 00 60", []engine.Event{on(3, engine.Bend, 0, 2*halfUp)}},
		{"NRPN deselects", "B0 65 00 64 00 63 00 62 00 06 0C E0 00 60", []engine.Event{on(11, engine.Bend, 0, 2*halfUp)}},
		{"NRPN of the same numbers does not select", "B0 63 00 62 00 06 0C E0 00 60", []engine.Event{on(7, engine.Bend, 0, 2*halfUp)}},
		{"half an RPN after an NRPN is none", "B0 65 00 64 00 62 00 64 00 06 0C E0 00 60", []engine.Event{on(11, engine.Bend, 0, 2*halfUp)}},
		{"unknown RPN", "B0 65 00 64 7E 06 0C E0 00 60", []engine.Event{on(7, engine.Bend, 0, 2*halfUp)}},
		{"increment and decrement: a cent", "B0 65 00 64 00 06 01 26 63 60 00 E0 00 00 B0 61 00", []engine.Event{
			on(11, engine.Bend, 0, -2), on(14, engine.Bend, 0, -1.99)}},
		{"decrement carries to 11 semitones and 99 cents", "B0 65 00 64 00 06 0C 61 00 E0 00 00", []engine.Event{on(9, engine.Bend, 0, -11.99)}},
		{"decrement stops at 0", "B0 65 00 64 00 06 00 61 00 E0 00 00", []engine.Event{on(9, engine.Bend, 0, 0)}},

		{"fine tuning", "B0 65 00 64 01 06 40 06 00 06 7F 26 7F", []engine.Event{
			on(5, engine.Shift, 0, 0), on(7, engine.Shift, 0, -1), on(9, engine.Shift, 0, 63.0/64), on(11, engine.Shift, 0, fineTop)}},
		{"fine tuning by a step", "B0 65 00 64 01 60 00 61 00 61 00", []engine.Event{
			on(5, engine.Shift, 0, 1.0/8192), on(7, engine.Shift, 0, 0), on(9, engine.Shift, 0, -1.0/8192)}},
		{"coarse tuning adds", "B0 65 00 64 01 06 60 64 02 06 34 61 00", []engine.Event{
			on(5, engine.Shift, 0, 0.5), on(9, engine.Shift, 0, -11.5), on(11, engine.Shift, 0, -12.5)}},

		// Channel Mode Messages, table IV.
		{"all sound off", "B0 78 00", []engine.Event{on(0, engine.AllSoundOff, 0, 0)}},
		{"reset all controllers", "B0 79 00", []engine.Event{on(0, engine.ResetControllers, 0, 0)}},
		{"local control asks nothing", "B0 7A 00", nil},
		{"all notes off, omni off, omni on", "B0 7B 00 7C 00 7D 00", []engine.Event{
			on(0, engine.AllNotesOff, 0, 0), on(3, engine.AllNotesOff, 0, 0), on(5, engine.AllNotesOff, 0, 0)}},
		{"mono and poly let go, then say so", "B0 7E 01 7F 00", []engine.Event{
			on(0, engine.AllNotesOff, 0, 0), on(0, engine.Control, 126, 1), on(3, engine.AllNotesOff, 0, 0), on(3, engine.Control, 127, 0)}},

		// RP-015: the RPN goes null, the bend to its centre, and the range stays.
		{"reset deselects", "B0 65 00 64 00 79 00 06 0C E0 00 60", []engine.Event{
			on(5, engine.ResetControllers, 0, 0), on(9, engine.Bend, 0, 2*halfUp)}},
		{"reset keeps the range", "B0 65 00 64 00 06 0C 79 00 E0 00 60", []engine.Event{
			on(7, engine.ResetControllers, 0, 0), on(9, engine.Bend, 0, 12*halfUp)}},
		{"reset centres the wheel for later ranges", "E0 00 60 B0 79 00 65 00 64 00 06 0C", []engine.Event{
			on(0, engine.Bend, 0, 2*halfUp), on(3, engine.ResetControllers, 0, 0)}},

		// CA-031, High Resolution Velocity Prefix.
		{"prefix refines the next note, once", "B0 58 40 90 3C 40 3C 41", []engine.Event{
			on(3, engine.NoteOn, 60, 64.5), on(6, engine.NoteOn, 60, 65)}},
		{"prefix refines a release", "B0 58 40 80 3C 10", []engine.Event{on(3, engine.NoteOff, 60, 16.5)}},
		{"prefix never makes velocity 0 a strike, and is used up", "B0 58 40 90 3C 00 3C 40", []engine.Event{
			on(3, engine.NoteOff, 60, 64), on(6, engine.NoteOn, 60, 64)}},
		{"prefix is its channel's", "B0 58 40 91 3C 40 90 3C 40", []engine.Event{
			{Time: 3, Kind: engine.NoteOn, Channel: 1, Key: 60, Value: 64}, on(6, engine.NoteOn, 60, 64.5)}},

		// System messages that ask nothing.
		{"clock, start, stop, time code, song, sensing, reset", "F8 FA FB FC F1 12 F2 01 02 F3 04 F6 FE FF", nil},
		{"exclusive of others", "F0 43 12 00 F7 F0 F7 F0 7E 7F 06 01 F7", nil},
		{"tuning for another device, program, of wrong length", "F0 7F 05 08 02 00 01 3C 3C 00 00 F7 F0 7F 7F 08 02 05 01 3C 3C 00 00 F7 F0 7F 7F 08 02 00 02 3C 3C 00 00 F7", nil},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			if got := translate(t, tt.in); !slices.Equal(got, tt.want) {
				t.Errorf("got\n%s\nwant\n%s", list(got), list(tt.want))
			}
		})
	}
}

func list(events []engine.Event) (s string) {
	for _, e := range events {
		s += fmt.Sprintf("%+v\n", e)
	}
	return s
}

// Universal messages speak to all channels: here, to each of the sixteen alike.
func TestTranslateUniversal(t *testing.T) {
	tests := []struct {
		name, in string
		want     engine.Event
	}{
		// MIDI 1.0, Master Volume: ll mm. At start the channels' volume is 100 (RP-024).
		{"master volume, half", "F0 7F 7F 04 01 00 40 F7", on(0, engine.Control, 7, 100*8192.0/16383)},
		{"master volume, full, to us", "F0 7F 00 04 01 7F 7F F7", on(0, engine.Control, 7, 100)},
		// CA-025, Master Fine and Coarse Tuning.
		{"master fine tuning", "F0 7F 7F 04 03 00 20 F7", on(0, engine.Shift, 0, -0.5)},
		{"master coarse tuning", "F0 7F 7F 04 04 00 4C F7", on(0, engine.Shift, 0, 12)},
		// MIDI Tuning Standard, Single Note Tuning Change.
		{"single note tuning", "F0 7F 7F 08 02 00 01 3C 3D 40 00 F7", on(0, engine.Tune, 60, 61.5)},
		{"single note tuning, no change beside it", "F0 7F 7F 08 02 00 02 3B 7F 7F 7F 3C 3C 00 01 F7", on(0, engine.Tune, 60, 60+1.0/16384)},
		{"without its F7, of right length", "F0 7F 7F 04 04 00 41 F6", on(0, engine.Shift, 0, 1)},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			got := translate(t, tt.in)
			if len(got) != 16 {
				t.Fatalf("%d events, want 16", len(got))
			}
			for i, e := range got {
				want := tt.want
				want.Channel = uint8(i)
				if e != want {
					t.Errorf("got %+v, want %+v", e, want)
				}
			}
		})
	}
}

// The master volume stays when a channel's volume changes.
func TestMasterVolumeScalesLaterVolumes(t *testing.T) {
	got := translate(t, "F0 7F 7F 04 01 00 40 F7 B0 07 7F")
	want := float32(127 * 8192.0 / 16383)
	if last := got[len(got)-1]; math.Abs(float64(last.Value-want)) > 1e-5 {
		t.Errorf("volume %v, want %v", last.Value, want)
	}
}

// Tuning words of midi-tuning.csv and the standard's text: 7F 7F 7F is no change.
func TestTuningWord(t *testing.T) {
	tests := []struct {
		word string
		want float64
		ok   bool
	}{
		{"00 00 00", 0, true}, {"3C 00 00", 60, true}, {"45 00 00", 69, true}, {"00 00 01", 1.0 / 16384, true},
		{"3C 40 00", 60.5, true}, {"7F 7F 7E", 127 + 16382.0/16384, true}, {"7F 7F 7F", 0, false},
	}
	for _, tt := range tests {
		if got, ok := tuningWord(unhex(t, tt.word)); got != tt.want || ok != tt.ok {
			t.Errorf("%s: %v, %v; want %v, %v", tt.word, got, ok, tt.want, tt.ok)
		}
	}
}

// Two sources select parameters of one channel without cutting into each other.
func TestSelectionIsTheSources(t *testing.T) {
	channels := NewChannels()
	var got []engine.Event
	play := func(tr *Translator, in string) {
		var d Decoder
		d.Write(unhex(t, in), 0, func(m Message) {
			tr.Message(m, func(e engine.Event) { got = append(got, e) })
		})
	}
	a, b := NewTranslator(channels), NewTranslator(channels)
	play(a, "B0 65 00 64 00 58 40")
	play(b, "B0 65 7F 64 7F 58 10")
	play(a, "B0 06 0C 90 3C 40")
	play(b, "E0 00 00")
	want := []engine.Event{on(0, engine.NoteOn, 60, 64.5), on(0, engine.Bend, 0, -12)}
	if !slices.Equal(got, want) {
		t.Errorf("got\n%s\nwant\n%s", list(got), list(want))
	}
}

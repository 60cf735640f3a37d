package midiin

import "tautwire/engine"

// Universal System Exclusive messages: F0, class, device, two numbers that say
// which, the message's own bytes, F7 (MIDI 1.0 Detailed Specification 4.2, table VII).
const (
	universalRealTime = 0x7F
	// device is ours, beside 7F, which calls all.
	device    = 0x00
	deviceAll = 0x7F

	subDeviceControl = 0x04
	masterVolume     = 0x01
	masterFine       = 0x03 // CA-025
	masterCoarse     = 0x04

	subTuning        = 0x08
	singleNoteChange = 0x02
)

// exclusive answers the universal messages that it knows, and only if their
// length is right: another status byte may have cut them off.
func (t *Translator) exclusive(m Message, emit func(engine.Event)) {
	b := m.Message[1:]
	if n := len(b); n > 0 && b[n-1] == statusEndOfSysEx {
		b = b[:n-1]
	}
	if len(b) < 4 || b[0] != universalRealTime || b[1] != device && b[1] != deviceAll {
		return
	}
	e := engine.Event{Time: m.Time}
	body := b[4:]
	switch [2]byte{b[2], b[3]} {
	case [2]byte{subDeviceControl, masterVolume}:
		if len(body) == 2 {
			t.channels.masterVolume = float64(int(body[1])<<7|int(body[0])) / 16383
			t.channels.volumes(e, emit)
		}
	case [2]byte{subDeviceControl, masterFine}:
		if len(body) == 2 {
			t.channels.masterFine = fineSemitones(int(body[1])<<7 | int(body[0]))
			t.channels.shifts(e, emit)
		}
	case [2]byte{subDeviceControl, masterCoarse}:
		if len(body) == 2 {
			t.channels.masterCoarse = float64(body[1]) - 64
			t.channels.shifts(e, emit)
		}
	case [2]byte{subTuning, singleNoteChange}:
		retune(e, body, emit)
	}
}

func (c *Channels) volumes(e engine.Event, emit func(engine.Event)) {
	e.Kind, e.Key = engine.Control, volume
	for i := range uint8(16) {
		e.Channel, e.Value = i, c.scaled(i, volume)
		emit(e)
	}
}

func (c *Channels) shifts(e engine.Event, emit func(engine.Event)) {
	for i := range uint8(16) {
		e.Channel = i
		c.shift(e, emit)
	}
}

// retune answers the real-time Single Note Tuning Change: tuning program, count,
// then count times a key and its tuning word. Every channel is on tuning program 0.
func retune(e engine.Event, body []byte, emit func(engine.Event)) {
	if len(body) < 2 || body[0] != 0 || len(body) != 2+4*int(body[1]) {
		return
	}
	e.Kind = engine.Tune
	for word := body[2:]; len(word) > 0; word = word[4:] {
		pitch, change := tuningWord(word[1:4])
		if !change {
			continue
		}
		e.Key, e.Value = word[0], float32(pitch)
		for i := range uint8(16) {
			e.Channel = i
			emit(e)
		}
	}
}

// Package midiin turns what players and programs send into engine events: bytes
// to messages (Decoder), messages to events (Translator), many sources to one
// stream (Merger). The sources are the ALSA sequencer, byte streams and
// standard MIDI files.
package midiin

import "gitlab.com/gomidi/midi/v2"

// MaxSysEx is the longest System Exclusive message that is kept, in bytes,
// both ends included. The longest that the instrument answers to, a tuning bulk
// dump, has 408; a longer message than this is a dump for another device.
const MaxSysEx = 4096

// Status bytes that the decoder must know by name (MIDI 1.0 Detailed
// Specification 4.2, tables I to VI).
const (
	statusSysEx       = 0xF0
	statusSongPointer = 0xF2
	statusTuneRequest = 0xF6
	statusEndOfSysEx  = 0xF7
	statusClock       = 0xF8 // the first of the real-time messages
	statusUndefinedF9 = 0xF9
	statusUndefinedFD = 0xFD
	statusSensing     = 0xFE
)

// Message is one complete MIDI message.
type Message struct {
	// Time is when its first byte arrived, ns; under running status its first
	// data byte, as no status byte came.
	Time int64
	// Message has the status byte first, also where running status left it out.
	// A System Exclusive message ends with F7, unless another status byte ended
	// it: whoever reads it checks its length. The bytes are only good until the
	// call that gave them returns.
	midi.Message
}

// Decoder takes a byte stream apart as the MIDI 1.0 Detailed Specification 4.2
// says. Its zero value is ready. It is not safe for concurrent use.
//
// Real-time bytes pass at once and disturb nothing. A System Common message or
// an undefined one ends running status. A System Exclusive message ends with
// F7 or with any other status byte that is not real-time. What belongs to no
// message is dropped and counted.
type Decoder struct {
	// Dropped counts bytes that belonged to no message.
	Dropped uint64
	// Cut counts System Exclusive messages that no F7 ended.
	Cut uint64

	message  []byte
	realTime [1]byte
	time     int64
	want     int  // length of the message, status byte included
	status   byte // running status, 0 is none
	implied  bool // the message's status byte is a running one
	excess   int  // bytes of a System Exclusive message beyond MaxSysEx
}

// Write takes bytes that all arrived at t, ns, and calls emit for each message that they
// complete.
func (d *Decoder) Write(p []byte, t int64, emit func(Message)) {
	for _, b := range p {
		d.Byte(b, t, emit)
	}
}

// Byte takes one byte that arrived at t, ns, and calls emit if it completes a
// message. It may call it twice: a status byte can end a System Exclusive message
// and be one itself.
func (d *Decoder) Byte(b byte, t int64, emit func(Message)) {
	switch {
	case b >= statusClock:
		d.immediate(b, t, emit)
	case b >= 0x80:
		d.statusByte(b, t, emit)
	default:
		d.dataByte(b, t, emit)
	}
}

// Reset forgets a message that has begun and running status, as when a cable
// was pulled. The counts stay.
func (d *Decoder) Reset() {
	d.drop()
	d.status = 0
}

func (d *Decoder) immediate(b byte, t int64, emit func(Message)) {
	if b == statusUndefinedF9 || b == statusUndefinedFD {
		d.Dropped++
		return
	}
	d.realTime[0] = b
	emit(Message{t, d.realTime[:]})
}

func (d *Decoder) statusByte(b byte, t int64, emit func(Message)) {
	if d.inSysEx() {
		d.endSysEx(b, emit)
		if b == statusEndOfSysEx {
			return
		}
	}
	d.drop()
	d.status = 0
	if b < statusSysEx {
		d.status = b
	}
	switch d.want = messageLength(b); d.want {
	case 0:
		d.Dropped++
	case 1:
		d.message = append(d.message, b)
		d.time = t
		d.complete(emit)
	default:
		d.message = append(d.message, b)
		d.time, d.implied = t, false
	}
}

func (d *Decoder) dataByte(b byte, t int64, emit func(Message)) {
	if d.inSysEx() && len(d.message) >= MaxSysEx-1 {
		d.excess++
		return
	}
	if len(d.message) == 0 {
		if d.status == 0 {
			d.Dropped++
			return
		}
		d.message = append(d.message, d.status)
		d.want = messageLength(d.status)
		d.time, d.implied = t, true
	}
	d.message = append(d.message, b)
	if len(d.message) == d.want {
		d.complete(emit)
	}
}

func (d *Decoder) inSysEx() bool {
	return len(d.message) > 0 && d.message[0] == statusSysEx
}

func (d *Decoder) endSysEx(b byte, emit func(Message)) {
	ended := b == statusEndOfSysEx
	if ended {
		d.message = append(d.message, b)
	} else {
		d.Cut++
	}
	if d.excess > 0 {
		d.drop()
		return
	}
	d.complete(emit)
}

func (d *Decoder) complete(emit func(Message)) {
	emit(Message{d.time, d.message})
	d.message = d.message[:0]
}

// drop gives up the message that has begun, if any.
func (d *Decoder) drop() {
	n := len(d.message) + d.excess
	if n > 0 && d.implied {
		n--
	}
	d.Dropped += uint64(n)
	d.message, d.excess, d.implied = d.message[:0], 0, false
}

// messageLength is how many bytes the message of a status byte has, itself
// included: -1 for System Exclusive, 0 if the status byte says nothing.
func messageLength(status byte) int {
	switch {
	case status < 0xC0, status >= 0xE0 && status < statusSysEx, status == statusSongPointer:
		return 3
	case status < 0xE0, status == 0xF1, status == 0xF3:
		return 2
	case status == statusSysEx:
		return -1
	case status == statusTuneRequest:
		return 1
	}
	return 0
}

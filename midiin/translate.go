package midiin

import "tautwire/engine"

// Controller numbers of MIDI 1.0 that mean more here than a value to pass on.
const (
	bankMSB        = 0
	modulation     = 1
	dataEntryMSB   = 6
	volume         = 7
	pan            = 10
	expression     = 11
	firstLSB       = 32
	dataEntryLSB   = 38
	lastLSB        = 63
	damper         = 64
	sostenuto      = 66
	soft           = 67
	velocityPrefix = 88
	dataIncrement  = 96
	dataDecrement  = 97
	nrpnLSB        = 98
	nrpnMSB        = 99
	rpnLSB         = 100
	rpnMSB         = 101
	allSoundOff    = 120
	resetAll       = 121
	allNotesOff    = 123
	omniOff        = 124
	omniOn         = 125
	monoOn         = 126
	polyOn         = 127
)

const (
	bendCentre = 8192
	// defaultReleaseVelocity is what a release without one has: that of a Note On
	// with velocity 0 (MIDI 1.0 Detailed Specification 4.2, Note Off).
	defaultReleaseVelocity = 64
	// nullParameter is RPN 127/127: data entry goes nowhere.
	nullParameter = 127<<7 | 127
)

// Channels is what the instrument's sixteen channels remember of the messages
// they were sent, whichever source sent them. NewChannels makes one as it is at power-up.
type Channels struct {
	channel [16]channel
	// masterVolume is 0 to 1; masterFine and masterCoarse are semitones.
	masterVolume, masterFine, masterCoarse float64
}

type channel struct {
	coarse [firstLSB]uint8 // last value of controllers 0 to 31
	value  [firstLSB]float32
	bank   [2]uint8 // bank select, MSB and LSB

	bend      int     // 0 to 16383
	bendSent  float32 // semitones
	bendRange [2]int  // of the bend wheel: semitones and cents

	fineTuning   int // 0 to 16383, 8192 is none: a semitone either way
	coarseTuning int // semitones from -64 to 63
}

// NewChannels gives channels at power-up: volume 100, expression 127, pan
// centred, bends of 2 semitones (General MIDI 2, RP-024).
func NewChannels() *Channels {
	c := &Channels{masterVolume: 1}
	for i := range c.channel {
		ch := &c.channel[i]
		ch.bend, ch.fineTuning, ch.bendRange = bendCentre, bendCentre, [2]int{2, 0}
		ch.set(volume, 100)
		ch.set(pan, 64)
		ch.set(expression, 127)
	}
	return c
}

func (c *channel) set(controller, v uint8) {
	c.coarse[controller] = v
	c.value[controller] = float32(v)
}

// Translator turns one source's messages into engine events. What is selected by
// several messages (a parameter number, a velocity prefix) is this source's own, so that two
// sources do not cut into each other; what it sets is the channels'.
//
// System messages that ask nothing of an instrument (clock, start, stop, time code,
// song select, exclusive messages for others) give no event.
type Translator struct {
	channels *Channels
	selected [16]selection
}

// selection is what a source has announced for its next messages on a channel.
type selection struct {
	// registered says that parameter, MSB*128 + LSB, is an RPN; an NRPN deselects it.
	registered bool
	parameter  int
	// finer is the lower 7 bits of the next velocity.
	finer uint8
}

// NewTranslator gives a translator for one source that plays channels c.
func NewTranslator(c *Channels) *Translator {
	t := &Translator{channels: c}
	for i := range t.selected {
		t.selected[i].parameter = nullParameter
	}
	return t
}

// Reset forgets what the source had announced, as when it is gone.
func (t *Translator) Reset() {
	for i := range t.selected {
		t.selected[i] = selection{parameter: nullParameter}
	}
}

// Message calls emit for each event that m asks for. The message must be
// complete, as a Decoder gives it.
func (t *Translator) Message(m Message, emit func(engine.Event)) {
	if m.Message[0] == statusSysEx {
		t.exclusive(m, emit)
		return
	}
	if m.Message[0] > statusSysEx {
		return
	}
	n := m.Message[0] & 15
	ch, sel := &t.channels.channel[n], &t.selected[n]
	e := engine.Event{Time: m.Time, Channel: n, Key: m.Message[1]}
	var data2 uint8
	if len(m.Message) > 2 {
		data2 = m.Message[2]
	}
	switch m.Message[0] & 0xF0 {
	case 0x80:
		e.Kind, e.Value = engine.NoteOff, sel.velocity(data2)
	case 0x90:
		e.Kind, e.Value = engine.NoteOn, sel.velocity(data2)
		if data2 == 0 {
			e.Kind, e.Value = engine.NoteOff, defaultReleaseVelocity
		}
	case 0xA0:
		e.Kind, e.Value = engine.KeyPressure, float32(data2)
	case 0xB0:
		t.controller(e, data2, emit)
		return
	case 0xC0:
		// Bank Select and Program Change are one number that counts patches.
		bank := int(ch.bank[0])<<7 | int(ch.bank[1])
		e.Kind, e.Value, e.Key = engine.Program, float32(bank<<7|int(e.Key)), 0
	case 0xD0:
		e.Kind, e.Value, e.Key = engine.ChannelPressure, float32(e.Key), 0
	case 0xE0:
		ch.bend = int(data2)<<7 | int(e.Key)
		ch.bendSent = ch.semitones()
		e.Kind, e.Value, e.Key = engine.Bend, ch.bendSent, 0
	}
	emit(e)
}

// semitones is where the bend wheel stands.
func (c *channel) semitones() float32 {
	cents := c.bendRange[0]*100 + c.bendRange[1]
	return float32(float64(c.bend-bendCentre) / bendCentre * float64(cents) / 100)
}

// velocity joins a velocity with the prefix that came before it, which serves
// once: CA-031, High Resolution Velocity Prefix. The step of the prefix is 1/128; 127 stays the
// hardest, with or without prefix.
func (s *selection) velocity(v uint8) float32 {
	finer := s.finer
	s.finer = 0
	return fraction(v, finer)
}

// fraction is a 14-bit value on the scale of its upper 7 bits.
func fraction(msb, lsb uint8) float32 {
	return min(float32(msb)+float32(lsb)/128, 127)
}

func (t *Translator) controller(e engine.Event, v uint8, emit func(engine.Event)) {
	ch, sel := &t.channels.channel[e.Channel], &t.selected[e.Channel]
	pass := func(kind engine.Kind, key uint8, value float32) {
		e.Kind, e.Key, e.Value = kind, key, value
		emit(e)
	}
	switch c := e.Key; {
	case c == bankMSB:
		ch.bank[0] = v
	case c == bankMSB+firstLSB:
		ch.bank[1] = v
	case c == dataEntryMSB:
		t.dataEntry(e, func(msb, lsb int) (int, int) { return int(v), 0 }, emit)
	case c == dataEntryLSB:
		t.dataEntry(e, func(msb, lsb int) (int, int) { return msb, int(v) }, emit)
	case c == dataIncrement:
		t.step(e, 1, emit)
	case c == dataDecrement:
		t.step(e, -1, emit)
	case c == nrpnLSB, c == nrpnMSB:
		sel.registered, sel.parameter = false, nullParameter
	case c == rpnLSB:
		sel.registered, sel.parameter = true, sel.parameter&^127|int(v)
	case c == rpnMSB:
		sel.registered, sel.parameter = true, sel.parameter&127|int(v)<<7
	case c == velocityPrefix:
		sel.finer = v
	case c < firstLSB:
		// A new MSB sets its LSB to 0 (MIDI 1.0, Control Change).
		ch.set(c, v)
		pass(engine.Control, c, t.channels.scaled(e.Channel, c))
	case c <= lastLSB:
		c -= firstLSB
		ch.value[c] = fraction(ch.coarse[c], v)
		pass(engine.Control, c, t.channels.scaled(e.Channel, c))
	case c < allSoundOff:
		pass(engine.Control, c, float32(v))
	case c == allSoundOff:
		pass(engine.AllSoundOff, 0, 0)
	case c == resetAll:
		*sel = selection{parameter: nullParameter}
		ch.bend, ch.bendSent = bendCentre, 0
		ch.set(modulation, 0)
		ch.set(expression, 127)
		pass(engine.ResetControllers, 0, 0)
	case c == allNotesOff, c == omniOff, c == omniOn:
		pass(engine.AllNotesOff, 0, 0)
	case c == monoOn, c == polyOn:
		// Both let all notes go; the engine hears of the mode as of a controller.
		pass(engine.AllNotesOff, 0, 0)
		pass(engine.Control, c, float32(v))
	}
}

// scaled is a controller's value as the engine is to hear it: volume is
// multiplied by the master volume. The law of both is 40 log10 of the value, so that the
// product of the values is the sum of the levels.
func (c *Channels) scaled(channel, controller uint8) float32 {
	v := c.channel[channel].value[controller]
	if controller == volume {
		v *= float32(c.masterVolume)
	}
	return v
}

// The registered parameters that are answered to (MIDI 1.0, table IIIa).
const (
	rpnBendRange    = 0
	rpnFineTuning   = 1
	rpnCoarseTuning = 2
)

// dataEntry sets the selected parameter to what change makes of its MSB and LSB.
func (t *Translator) dataEntry(e engine.Event, change func(msb, lsb int) (int, int), emit func(engine.Event)) {
	sel := &t.selected[e.Channel]
	if !sel.registered {
		return
	}
	ch := &t.channels.channel[e.Channel]
	switch sel.parameter {
	case rpnBendRange:
		ch.bendRange[0], ch.bendRange[1] = change(ch.bendRange[0], ch.bendRange[1])
		t.bendAgain(e, emit)
	case rpnFineTuning:
		msb, lsb := change(ch.fineTuning>>7, ch.fineTuning&127)
		ch.fineTuning = msb<<7 | lsb
		t.channels.shift(e, emit)
	case rpnCoarseTuning:
		// The MSB alone counts, 64 is none.
		msb, _ := change(ch.coarseTuning+64, 0)
		ch.coarseTuning = msb - 64
		t.channels.shift(e, emit)
	}
}

// step answers data increment and decrement. Of a parameter with two bytes they move the lower
// one, with carry: a cent of bend range, a step of fine tuning; coarse tuning moves by a
// semitone (RP-018, Response to Data Increment and Decrement Controllers, from memory).
func (t *Translator) step(e engine.Event, by int, emit func(engine.Event)) {
	low := 128
	switch t.selected[e.Channel].parameter {
	case rpnBendRange:
		low = 100
	case rpnCoarseTuning:
		low = 1
	}
	t.dataEntry(e, func(msb, lsb int) (int, int) {
		v := min(max(msb*low+lsb+by, 0), 128*low-1)
		return v / low, v % low
	}, emit)
}

// bendAgain says where the wheel stands now, if a change of range has moved the pitch.
func (t *Translator) bendAgain(e engine.Event, emit func(engine.Event)) {
	ch := &t.channels.channel[e.Channel]
	if ch.semitones() == ch.bendSent {
		return
	}
	ch.bendSent = ch.semitones()
	e.Kind, e.Key, e.Value = engine.Bend, 0, ch.bendSent
	emit(e)
}

// shift says how far the channel's tuning has been moved, in semitones.
func (c *Channels) shift(e engine.Event, emit func(engine.Event)) {
	ch := &c.channel[e.Channel]
	e.Kind, e.Key = engine.Shift, 0
	e.Value = float32(float64(ch.coarseTuning) + fineSemitones(ch.fineTuning) + c.masterCoarse + c.masterFine)
	emit(e)
}

// fineSemitones is the 14-bit fine tuning in semitones: 8192 steps to one.
func fineSemitones(v int) float64 { return float64(v-bendCentre) / 8192 }

// tuningWord is the key number with fraction of the MIDI Tuning Standard's three
// bytes: semitone xx and (yy*128 + zz)/16384 of one. 7F 7F 7F is no change.
func tuningWord(b []byte) (semitones float64, change bool) {
	if b[0] == 127 && b[1] == 127 && b[2] == 127 {
		return 0, false
	}
	return float64(b[0]) + float64(int(b[1])<<7|int(b[2]))/16384, true
}

package engine

// Kind says what an Event asks of the engine.
type Kind uint8

// The kinds of event. Releases, pedals and silences are the kinds that a full
// queue still takes (see Queue).
const (
	// NoteOn strikes Key; Value is the velocity, above 0 to 127.
	NoteOn Kind = iota + 1
	// NoteOff lets Key go; Value is the release velocity, 0 to 127.
	NoteOff
	// Control sets the controller numbered Key to Value, 0 to 127. Numbers are
	// those of MIDI 1.0; Value has a fraction where 14 bits came.
	Control
	// Bend moves every string of the channel by Value semitones.
	Bend
	// KeyPressure presses Key by Value, 0 to 127.
	KeyPressure
	// ChannelPressure presses every key of the channel by Value, 0 to 127.
	ChannelPressure
	// Program asks for the Value-th patch of the set, counted from 0.
	Program
	// Tune sets the tuning of Key to Value, semitones above key 0 in equal
	// temperament on the patch's A4; a negative Value restores the patch's own.
	Tune
	// Shift moves the tuning of the whole channel by Value semitones (fine and
	// coarse tuning), beside and apart from Bend.
	Shift
	// AllSoundOff silences the channel within 5 ms.
	AllSoundOff
	// AllNotesOff lets every key of the channel go; the damper still holds.
	AllNotesOff
	// ResetControllers answers RP-015, Response to Reset All Controllers.
	ResetControllers
)

// Event is one thing that happened, in the order in which it happened.
type Event struct {
	// Time is when the event's first byte arrived, in nanoseconds of the
	// monotonic clock (see Now), or from the performance's start when offline.
	Time int64
	// Value is the event's amount; its meaning is the Kind's.
	Value float32
	Kind  Kind
	// Channel counts from 0 to 15.
	Channel uint8
	// Key is a key number, or a controller number for Control.
	Key uint8
}

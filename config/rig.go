package config

// Rig is what belongs to the box and not to the sound: what a rig file holds,
// checked.
type Rig struct {
	// Path is the file it was read from; "" is no file.
	Path  string
	Audio Audio
	MIDI  MIDI
	// Set is what is played, in the order of Program Change; at least one.
	// A patch that stands twice is the same pointer twice.
	Set []*Patch
}

// Audio is the sound's way out.
type Audio struct {
	Device  string  // part of a device's name; "" is the system's default, "null" has no sound
	Rate    int     // frames a second, 8000 to 192000
	Period  int     // frames, 16 to 4096
	Timing  string  // "steady" or "eager"
	Strings int     // how many may sound at once, 8 to 512
	Level   float64 // dB, the output's at the start, -60 to 0
}

// MIDI is who plays.
type MIDI struct {
	Inputs   []string // parts of port names, or paths of byte streams; empty is every keyboard
	Channels []int    // 1 to 16, each once; empty is all
}

// PlainRig is the rig that stands where no rig file does, with one patch.
func PlainRig(p *Patch) *Rig {
	return &Rig{Audio: plainAudio(), Set: []*Patch{p}}
}

func plainAudio() Audio {
	return Audio{Rate: 48000, Period: 64, Timing: "steady", Strings: 128, Level: -6}
}

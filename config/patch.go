// Package config reads patch and rig files: TOML to checked values. It has the
// built-in patches, too. PatchKeys and RigKeys say what each key is
// and what a player hears; Problems is what is told of a file that is wrong.
package config

// Span is a number of a zone: its value at the zone's lowest key and at its
// highest one, even steps between. A plain number has both ends alike.
type Span struct{ Low, High float64 }

// Patch is one sound: what a patch file holds, checked.
type Patch struct {
	// Path is the file it was read from, or the built-in patch's name.
	Path string
	// Title is what a player calls it.
	Title string
	// Level is the patch's loudness, dB, -60 to +12.
	Level     float64
	Tuning    Tuning
	Zones     []Zone // in the order of their keys, none overlapping
	Resonance Resonance
	Body      Body
	Controls  Controls
}

// Tuning is the pitch of every key.
type Tuning struct {
	A4    float64     // Hz, 380 to 480
	Cents [12]float64 // from equal temperament, C first, -100 to +100
}

// Zone is a range of keys that share their strings' character.
type Zone struct {
	Low, High int // inclusive MIDI keys

	Decay         Span // s: T60 of the fundamental, 0.05 to 120
	Brightness    Span // 0 dark to 1 bright
	Release       Span // s: T60 after the key is let go, 0.01 to 30
	Level         Span // dB, -60 to +12
	Pan           Span // -1 left to +1 right
	Inharmonicity Span // B of f_n = n f0' sqrt(1 + B n^2), 0 to 0.002
	Tension       Span // cents sharp at the start of the hardest stroke, 0 to 100

	Excitation Excitation
	Second     Second
	Course     Course
}

// Excitation is how a zone's strings are set going.
type Excitation struct {
	Kind     string  // "noise", "tone", "pluck", "strike" or "sample"
	Position Span    // part of the string's length from the bridge, 0 to 0.5
	Hardness Span    // 0 soft to 1 hard
	Length   Span    // ms of a noise or tone burst, 0 to 500; 0 is one period
	Touch    Span    // 0 to 1: how much a hard stroke is brighter than a soft one
	Wave     string  // of "tone": "sine", "triangle" or "saw"
	Ratio    Span    // of "tone": its frequency over the fundamental, 0.25 to 32
	Sample   *Sample // of "sample"
}

// Sample is a mono recording that a patch names: an excitation or a body's
// impulse response.
type Sample struct {
	Path string
	Rate int       // Hz
	Data []float32 // full scale is 1; several channels are averaged
}

// Second is the string's second plane of vibration.
type Second struct {
	Mix   Span // part of the stroke that goes into it, 0 (none) to 1 (all)
	Cents Span // its pitch from the first's, -20 to +20
	Decay Span // its T60 over the first's, 0.1 to 10
}

// Course is several strings under one key.
type Course struct {
	Strings Span // 1 to 3, rounded
	Cents   Span // from the lowest of them to the highest, 0 to 50
}

// Resonance is the sympathy of undamped strings.
type Resonance struct {
	Level float64 // dB, -60 to 0; off when On is false
	On    bool
}

// Body is what the bridge drives: modes or an impulse response.
type Body struct {
	Mix     float64 // 0 string alone to 1 body alone
	Modes   []Mode
	Impulse *Sample
}

// Mode is one resonance of a body.
type Mode struct {
	Frequency float64 // Hz, 20 to 20000
	T60       float64 // s, 0.005 to 5
	Level     float64 // dB, -60 to +24
}

// Controls are the controllers that a patch listens to beside the common ones.
type Controls struct {
	Mute int // palm mute, a controller number; -1 is none
	Node int // touches the string at a node, a controller number; -1 is none
	// NodeAt is the part of the string at which Node touches: 2 its middle, 3 a third, to 8.
	NodeAt int
}

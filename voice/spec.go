package voice

// Kind is a way to set a string going.
type Kind uint8

// The kinds of excitation, described in excite.go.
const (
	Noise Kind = iota
	Tone
	Pluck
	Strike
	Sample
)

// Wave is the form of a Tone.
type Wave uint8

// The waves of a Tone, all band-limited.
const (
	Sine Wave = iota
	Triangle
	Saw
)

// Excitation is how a string is set going.
type Excitation struct {
	Kind       Kind
	Position   float64 // part of the length from the bridge, 0 to 0.5; 0 leaves every partial in
	Hardness   float64 // 0 soft to 1 hard
	Length     float64 // s of a Noise or Tone; 0 is one period
	Touch      float64 // 0 to 1: how much a hard stroke is brighter than a soft one
	Wave       Wave
	Ratio      float64   // of a Tone: its frequency over the fundamental
	Sample     []float32 // of a Sample, at SampleRate
	SampleRate float64   // Hz
}

// Spec is what one key's strings are to be, in physical units. Its zero value
// with a Frequency and a Decay is a plain string.
type Spec struct {
	Frequency     float64 // Hz, of the fundamental at rest
	Decay         float64 // s: T60 of the fundamental, 0.05 to 120
	Brightness    float64 // 0 dark to 1 bright
	Release       float64 // s: T60 under the damper
	Inharmonicity float64 // B, 0 to 0.002
	Tension       float64 // cents sharp at the start of the hardest stroke

	SecondMix   float64 // part of the stroke in the second polarization, 0 to 1
	SecondCents float64 // its pitch from the first's
	SecondDecay float64 // its T60 over the first's; 0 is taken as 1

	Strings     int     // of the course, 1 to 3; 0 is taken as 1
	CourseCents float64 // from the course's lowest string to its highest

	Excitation Excitation
}

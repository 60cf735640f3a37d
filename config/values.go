package config

import "math"

// Values are the numbers of a zone for one of its keys: every Span resolved.
// Units are those of Zone and its parts.
type Values struct {
	Decay         float64 // s
	Brightness    float64 // 0 to 1
	Release       float64 // s
	Level         float64 // dB
	Pan           float64 // -1 to +1
	Inharmonicity float64 // B
	Tension       float64 // cents

	Kind     string  // as Excitation.Kind
	Position float64 // part of the length from the bridge
	Hardness float64 // 0 to 1
	Length   float64 // ms
	Touch    float64 // 0 to 1
	Wave     string  // as Excitation.Wave
	Ratio    float64 // of the fundamental
	Sample   *Sample // of "sample", else nil

	SecondMix   float64 // 0 to 1
	SecondCents float64 // cents
	SecondDecay float64 // of the first's T60

	Strings     int     // 1 to 3
	CourseCents float64 // cents
}

// At gives the zone's numbers for one key. A pair goes from its low value at
// the zone's lowest key to its high value at the highest in even steps, by
// difference or, for the seconds of decay and release, by ratio. A key outside
// the zone gets the values of the end nearer to it.
func (z Zone) At(key int) Values {
	t := 0.0
	if z.High > z.Low {
		t = float64(key-z.Low) / float64(z.High-z.Low)
	}
	t = min(max(t, 0), 1)
	return Values{
		Decay:         z.Decay.geometric(t),
		Brightness:    z.Brightness.linear(t),
		Release:       z.Release.geometric(t),
		Level:         z.Level.linear(t),
		Pan:           z.Pan.linear(t),
		Inharmonicity: z.Inharmonicity.linear(t),
		Tension:       z.Tension.linear(t),
		Kind:          z.Excitation.Kind,
		Position:      z.Excitation.Position.linear(t),
		Hardness:      z.Excitation.Hardness.linear(t),
		Length:        z.Excitation.Length.linear(t),
		Touch:         z.Excitation.Touch.linear(t),
		Wave:          z.Excitation.Wave,
		Ratio:         z.Excitation.Ratio.linear(t),
		Sample:        z.Excitation.Sample,
		SecondMix:     z.Second.Mix.linear(t),
		SecondCents:   z.Second.Cents.linear(t),
		SecondDecay:   z.Second.Decay.linear(t),
		Strings:       int(math.Round(z.Course.Strings.linear(t))),
		CourseCents:   z.Course.Cents.linear(t),
	}
}

// linear is the value at t, 0 to 1, in even differences; exact at both ends.
func (s Span) linear(t float64) float64 {
	return s.held(s.Low + t*(s.High-s.Low))
}

// geometric is the value at t, 0 to 1, in even ratios; exact at both ends.
// Both ends are above 0.
func (s Span) geometric(t float64) float64 {
	switch t {
	case 0:
		return s.Low
	case 1:
		return s.High
	}
	return s.held(s.Low * math.Pow(s.High/s.Low, t))
}

// held keeps rounding from leaving the pair.
func (s Span) held(v float64) float64 {
	return min(max(v, min(s.Low, s.High)), max(s.Low, s.High))
}

// Zone gives the zone that a key belongs to; ok is false where the patch has
// none and the key is silent.
func (p *Patch) Zone(key int) (z Zone, ok bool) {
	for _, z := range p.Zones {
		if key >= z.Low && key <= z.High {
			return z, true
		}
	}
	return Zone{}, false
}

package engine

import (
	"fmt"
	"math"
	"runtime"

	"tautwire/config"
	"tautwire/voice"
)

// Compiled is a patch made ready for one sample rate: all that the callback
// needs of it. It never changes, and any number of engines may share it.
type Compiled struct {
	title    string
	rate     int
	maker    *voice.Maker
	keys     [128]compiledKey
	controls config.Controls
	body     *compiledBody // nil is the string alone
	// resonance is the amplitude of sympathy; 0 is none.
	resonance float32
}

// compiledKey is one key's strings. A key outside all zones has no design, and
// is silent.
type compiledKey struct {
	design *voice.Design
	single *voice.Design // what sounds along in sympathy
	pitch  float64       // semitones above key 0 in equal temperament on the patch's A4
	gain   float32       // of zone and patch
	pan    float64       // -0.5 to +0.5, added to the channel's place
	// coupling is the part of the bridge's motion that drives the key's string in
	// sympathy.
	coupling float32
}

const (
	minRate = 8000   // Hz
	maxRate = 384000 // Hz
)

// Compiler compiles patches for one sample rate, with tables that all of them share. It may be used from several
// goroutines.
type Compiler struct {
	rate  int
	maker *voice.Maker
}

// NewCompiler prepares for a sample rate in Hz.
//
// # Errors
//
// A rate outside 8000 to 384000 Hz.
func NewCompiler(rate int) (*Compiler, error) {
	if rate < minRate || rate > maxRate {
		return nil, fmt.Errorf("sample rate %d Hz; allowed %d to %d", rate, minRate, maxRate)
	}
	return &Compiler{rate: rate, maker: voice.NewMaker(float64(rate))}, nil
}

// Compile computes one patch for a sample rate in Hz. Who compiles several makes a Compiler.
//
// # Errors
//
// Those of NewCompiler and of Compiler.Compile.
func Compile(p *config.Patch, rate int) (*Compiled, error) {
	compiler, err := NewCompiler(rate)
	if err != nil {
		return nil, fmt.Errorf("patch %s: %w", p.Path, err)
	}
	return compiler.Compile(p)
}

// Compile computes p. It takes some 0.3 ms a key on one thread, and lets others run after each, so that an audio
// callback finds its processor.
//
// # Errors
//
// A zone with an unknown excitation or wave (config.LoadPatch gives none such).
func (by *Compiler) Compile(p *config.Patch) (*Compiled, error) {
	c := &Compiled{
		title:    p.Title,
		rate:     by.rate,
		maker:    by.maker,
		controls: p.Controls,
		body:     compileBody(p.Body, by.rate),
	}
	if p.Resonance.On {
		c.resonance = float32(amplitude(p.Resonance.Level))
	}
	for key := range c.keys {
		c.keys[key].pitch = float64(key) + p.Tuning.Cents[key%12]/100
	}
	for i := range p.Zones {
		z := &p.Zones[i]
		var recorded []float32
		if s := z.Excitation.Sample; s != nil {
			recorded = resample(s.Data, s.Rate, by.rate) // once for all the zone's keys
		}
		for key := max(z.Low, 0); key <= min(z.High, 127); key++ {
			if err := c.keys[key].compile(p, z.At(key), recorded, c.maker); err != nil {
				return nil, fmt.Errorf("patch %s: zone %d: %w", p.Path, i+1, err)
			}
			c.keys[key].coupling *= c.resonance
			runtime.Gosched()
		}
	}
	return c, nil
}

// Title is what a player calls the patch.
func (c *Compiled) Title() string { return c.title }

// Rate is the sample rate in Hz that the patch was compiled for.
func (c *Compiled) Rate() int { return c.rate }

func (k *compiledKey) compile(p *config.Patch, v config.Values, recorded []float32, maker *voice.Maker) error {
	frequency := p.Tuning.A4 * math.Exp2((k.pitch-69)/12)
	spec, err := specOf(v, frequency)
	if err != nil {
		return err
	}
	spec.Excitation.Sample, spec.Excitation.SampleRate = recorded, maker.Rate()
	k.design = maker.Design(spec)
	k.single = k.design.Single()
	k.gain = float32(amplitude(p.Level + v.Level))
	k.pan = v.Pan / 2
	// One trip round the loop loses this part of the amplitude. Driven in tune for
	// long, a string builds up to its drive over that loss, so that scaled by it
	// all keys answer alike, whatever their decay.
	k.coupling = float32(-math.Expm1(-3 * math.Ln10 / (frequency * v.Decay)))
	return nil
}

func specOf(v config.Values, frequency float64) (voice.Spec, error) {
	kind, err := kindOf(v.Kind)
	if err != nil {
		return voice.Spec{}, err
	}
	wave, err := waveOf(v.Wave)
	if err != nil {
		return voice.Spec{}, err
	}
	spec := voice.Spec{
		Frequency:     frequency,
		Decay:         v.Decay,
		Brightness:    v.Brightness,
		Release:       v.Release,
		Inharmonicity: v.Inharmonicity,
		Tension:       v.Tension,
		SecondMix:     v.SecondMix,
		SecondCents:   v.SecondCents,
		SecondDecay:   v.SecondDecay,
		Strings:       v.Strings,
		CourseCents:   v.CourseCents,
		Excitation: voice.Excitation{
			Kind:     kind,
			Position: v.Position,
			Hardness: v.Hardness,
			Length:   v.Length / 1000,
			Touch:    v.Touch,
			Wave:     wave,
			Ratio:    v.Ratio,
		},
	}
	return spec, nil
}

func kindOf(name string) (voice.Kind, error) {
	switch name {
	case "noise":
		return voice.Noise, nil
	case "tone":
		return voice.Tone, nil
	case "pluck":
		return voice.Pluck, nil
	case "strike":
		return voice.Strike, nil
	case "sample":
		return voice.Sample, nil
	}
	return 0, fmt.Errorf("excitation %q; allowed noise, tone, pluck, strike, sample", name)
}

func waveOf(name string) (voice.Wave, error) {
	switch name {
	case "", "sine":
		return voice.Sine, nil
	case "triangle":
		return voice.Triangle, nil
	case "saw":
		return voice.Saw, nil
	}
	return 0, fmt.Errorf("wave %q; allowed sine, triangle, saw", name)
}

// amplitude is the factor of a level in dB.
func amplitude(db float64) float64 { return math.Pow(10, db/20) }

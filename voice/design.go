package voice

import "math"

// Maker compiles strings for one sample rate. It holds the tables that all
// strings of the rate share and may be used from several goroutines.
type Maker struct {
	rate   float64
	ip     *interpolator
	curves *curves
}

// NewMaker prepares to make strings for a sample rate in Hz.
func NewMaker(rate float64) *Maker {
	return &Maker{rate: rate, ip: newInterpolator(), curves: newCurves()}
}

// Rate is the sample rate in Hz.
func (m *Maker) Rate() float64 { return m.rate }

// Design is a Spec compiled for a rate: its filters over all pitches and its
// excitation. It never changes afterwards, so any number of voices may share it.
type Design struct {
	maker   *Maker
	pitch   float64 // Hz
	modes   [2]*mode
	strings []strand
	release float64 // 1/T60 (1/s) that the damper adds
	tension float64 // cents
	hardest float64 // energy of the hardest stroke, at its start
	shape   shape
}

// strand is one loop of a design: a string of the course in one polarization.
type strand struct {
	mode  int
	cents float64 // from the design's pitch
	mix   float32 // of the stroke and of the output
}

// A muting palm leaves a string this T60 (s), and this much less brightness.
const (
	muted  = 0.15
	duller = 0.35
)

// Design compiles spec; it takes about a millisecond.
//
// The level of each kind of excitation is measured on the finished string, so
// that the hardest stroke peaks at -12 dBFS whatever the key.
func (m *Maker) Design(spec Spec) *Design {
	d := &Design{
		maker:   m,
		pitch:   min(spec.Frequency, topPitch*m.rate),
		tension: spec.Tension,
		release: max(0, 1/spec.Release-1/spec.Decay),
	}
	if spec.Release <= 0 {
		d.release = 0
	}
	d.modes[0] = m.mode(spec, spec.Decay)
	if spec.SecondMix > 0 {
		ratio := spec.SecondDecay
		if ratio == 0 {
			ratio = 1
		}
		d.modes[1] = m.mode(spec, spec.Decay*ratio)
	}
	d.strings = strands(spec)
	d.shape = newShape(spec.Excitation, d.pitch, m.curves)
	d.calibrate()
	return d
}

// mode compiles one polarization of a spec, with a decay (s) of its own.
func (m *Maker) mode(spec Spec, decay float64) *mode {
	open := newLaw(decay, spec.Brightness)
	dull := newLaw(min(decay, muted), max(0, spec.Brightness-duller))
	return newMode(open, dull, spec.Frequency, spec.Inharmonicity, m.rate)
}

// strands lays out the loops of a spec, both planes of each string of the course.
func strands(spec Spec) []strand {
	n := min(max(spec.Strings, 1), 3)
	mix := min(max(spec.SecondMix, 0), 1)
	var out []strand
	for i := range n {
		cents := 0.0
		if n > 1 {
			cents = spec.CourseCents * (float64(i)/float64(n-1) - 0.5)
		}
		if mix < 1 {
			out = append(out, strand{mode: 0, cents: cents, mix: float32((1 - mix) / float64(n))})
		}
		if mix > 0 {
			out = append(out, strand{mode: 1, cents: cents + spec.SecondCents, mix: float32(mix / float64(n))})
		}
	}
	return out
}

// calibrate strikes the design on a voice of its own and sets its gain by the
// peak. The gain of noise is set for each burst, see rehearse.
func (d *Design) calibrate() {
	period := 1 / d.pitch
	slot := int(2.1*d.maker.rate*period) + 16*Grid + 2*taps // room for strings tuned lower
	v := newVoice(d.maker, len(d.strings)*slot)
	out := make([]float32, int(d.maker.rate*(min(d.shape.length, 1)+3*period)))
	switch {
	case d.shape.kind != Noise:
		peak, energy := v.try(d, out, 127, 1)
		if peak == 0 {
			d.shape.gain = 0 // an empty sample: a string that nothing moves
			return
		}
		d.shape.gain = fullLevel / peak
		d.hardest = energy * d.shape.gain * d.shape.gain
	case d.shape.length <= 1.001*period:
		_, d.hardest = v.try(d, out, 127, 1)
	default:
		d.shape.variants = d.vary(v, out)
		_, d.hardest = v.try(d, out, 127, 1)
	}
}

// vary plays some long bursts and sets their gains.
func (d *Design) vary(v *Voice, out []float32) []variant {
	made := make([]variant, variants)
	for i := range made {
		made[i].seed = mix64(uint64(i) + 1)
		d.shape.variants = []variant{{seed: made[i].seed, gains: [...]float64{1, 1, 1}}}
		for j, velocity := range variantVelocities {
			hard := velocity / 127
			peak, _ := v.try(d, out, velocity, 0)
			made[i].gains[j] = fullLevel * hard * hard / peak
		}
	}
	return made
}

// try strikes a design on an empty voice and finds the peak and the highest energy.
func (v *Voice) try(d *Design, out []float32, velocity float64, seed uint64) (peak, energy float64) {
	v.Reset()
	v.Strike(d, velocity, seed)
	for at := 0; at < len(out); at += Grid {
		v.Render(out[at:min(at+Grid, len(out))], nil)
		energy = max(energy, v.energy)
	}
	for _, y := range out {
		peak = max(peak, math.Abs(float64(y)))
	}
	return peak, energy
}

// Single is the design reduced to one string in one plane, without tension, for
// where many strings sound along.
func (d *Design) Single() *Design {
	one := *d
	one.strings = []strand{{mode: d.strings[0].mode, mix: 1}}
	one.tension = 0
	return &one
}

// octaves is an interval in cents as a factor.
func octaves(cents float64) float64 { return math.Exp2(cents / 1200) }

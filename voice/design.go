package voice

import (
	"math"
	"sync"

	"tautwire/voice/lanes"
)

// Maker compiles strings for one sample rate. It holds the tables that all
// strings of the rate share and may be used from several goroutines.
type Maker struct {
	rate   float64
	ip     *interpolator
	curves *curves
	rows   *lanes.Rows
	desks  sync.Pool // of *desk

	smooth, smoothLong *smoothing
}

// desk is what is written on while a string is compiled, kept for the next.
type desk struct {
	fit       lossFit
	rehearsal rehearsal
}

// NewMaker prepares to make strings for a sample rate in Hz.
func NewMaker(rate float64) *Maker {
	ip := newInterpolator()
	return &Maker{
		rate: rate, ip: ip, curves: newCurves(), rows: newRows(ip),
		desks:  sync.Pool{New: func() any { return new(desk) }},
		smooth: newSmoothing(rate, 1), smoothLong: newSmoothing(rate, longSteps),
	}
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
	hardest float64 // energy of the hardest stroke, at its start, where there is tension
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

// Design compiles spec; it takes some 0.3 ms.
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
	desk := m.desks.Get().(*desk)
	defer m.desks.Put(desk)
	d.modes[0] = desk.fit.modeOf(spec, spec.Decay, m.rate, &mode{})
	if spec.SecondMix > 0 {
		ratio := spec.SecondDecay
		if ratio == 0 {
			ratio = 1
		}
		d.modes[1] = desk.fit.modeOf(spec, spec.Decay*ratio, m.rate, d.modes[0])
	}
	d.strings = strands(spec)
	d.modes[d.strings[0].mode].settleAt(d.pitch) // of a single string
	for _, s := range d.strings {
		if s.cents != 0 {
			d.modes[s.mode].settleAt(d.pitch * octaves(s.cents))
		}
	}
	d.shape = newShape(spec.Excitation, d.pitch, m.curves)
	d.calibrate(&desk.rehearsal)
	return d
}

// modeOf compiles one polarization of a spec, with a decay (s) of its own, beside another that is
// compiled already, or empty.
func (q *lossFit) modeOf(spec Spec, decay, rate float64, like *mode) *mode {
	open := newLaw(decay, spec.Brightness)
	dull := newLaw(min(decay, muted), max(0, spec.Brightness-duller))
	return q.mode(like, open, dull, spec.Frequency, spec.Inharmonicity, rate)
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

// Package voice is the sound of one key: its strings, from the stroke to silence.
//
// A Maker compiles a Spec, physical units and all, into a Design; a Voice
// strikes it and renders it. The package is pure arithmetic: no clock, no lock, no I/O, and no
// allocation once a Voice is made.
//
// The string is the digital waveguide of Karplus and Strong, "Digital
// Synthesis of Plucked-String and Drum Timbres", Computer Music Journal 7(2), 1983, as
// extended by Jaffe and Smith in the same issue and by Välimäki, Huopaniemi,
// Karjalainen, Jánosy, "Physical Modeling of Plucked String Instruments with Application to
// Real-Time Sound Synthesis", JAES 44(5), 1996.
package voice

import "math"

// maxLoops is a course of three strings in two polarizations each.
const maxLoops = 6

// strokes is how many excitations of a string may overlap.
const strokes = 2

// Voice is the strings of one key, sounding. It is used from one goroutine.
type Voice struct {
	maker *Maker
	line  []float32

	design  *Design
	loops   [maxLoops]loop
	strokes [maxLoops][strokes]stroke
	fresh   bool // strung, and not yet rendered

	phase int // frames of the present control step that are done

	cents, strain float64 // from the design's pitch: asked for, and by tension
	palm          float64 // 0 to 1
	dark          float64 // 0 to 1
	energy        float64
	power         float64 // summed over the present control step
	leak          float64 // of the energy, a control step

	fading bool
	fade   float32

	e, y [Grid]float32
}

// NewVoice allocates a voice and all the memory that it will ever need: one
// string sounds down to lowest (Hz), several share the same lines.
func (m *Maker) NewVoice(lowest float64) *Voice {
	return newVoice(m, int(2*m.rate/lowest)+16*Grid)
}

func newVoice(m *Maker, frames int) *Voice {
	return &Voice{maker: m, line: make([]float32, frames)}
}

// Fit puts a design's strings on the voice, at rest and undamped, with no stroke.
func (v *Voice) Fit(d *Design) {
	v.design = d
	slot := len(v.line) / len(d.strings)
	for i, s := range d.strings {
		v.loops[i].tune(d.modes[s.mode], v.maker.ip, v.line[i*slot:(i+1)*slot], d.pitch*octaves(s.cents))
		for j := range v.strokes[i] {
			v.strokes[i][j] = stroke{}
		}
	}
	v.leak = leak(d.pitch, v.maker.rate)
	v.fresh, v.phase, v.energy, v.power, v.fading, v.fade = true, 0, 0, 0, false, 1
	v.cents, v.strain, v.palm, v.dark = 0, 0, 0, 0
}

// Strike sets the strings going with a velocity above 0 to 127. A voice that
// still sounds with the same design rings on, undamped, and the stroke adds to its
// vibration; otherwise it is strung anew. The seed picks the noise of a burst.
func (v *Voice) Strike(d *Design, velocity float64, seed uint64) {
	if v.design != d || v.Silent() {
		v.Fit(d)
	}
	v.Damp(0)
	seed = mix64(seed)
	gain := 0.0
	if n := uint64(len(d.shape.variants)); n > 0 {
		t := &d.shape.variants[seed%n]
		seed, gain = t.seed, t.gain(velocity)
	}
	for i := range d.strings {
		l := &v.loops[i]
		s := &v.strokes[i][0]
		if other := &v.strokes[i][1]; !s.over() && (other.over() || other.frame > s.frame) {
			s = other
		}
		s.start(&d.shape, v.maker.ip, l.glide.aim, l.meanKeeps(), v.maker.rate, velocity, strandSeed(seed, i))
		if gain > 0 {
			s.gain *= float32(gain)
		}
	}
}

// leak is the part of a voice's energy that a control step takes, at a pitch (Hz).
func leak(pitch, rate float64) float64 {
	const hear = 0.02 // s
	return min(1, Grid/(rate*max(hear, 2/pitch)))
}

// Tune moves the strings to a pitch, cents from the design's own. A sounding
// string glides there without a click; a string not yet heard is simply tuned. What the
// line or the rate cannot hold is clamped, and sounds true at the clamp.
func (v *Voice) Tune(cents float64) {
	if v.design == nil {
		return
	}
	v.cents = cents
	v.retune()
}

// retune gives each string its pitch, with the tension of the present energy.
func (v *Voice) retune() {
	cents := v.cents + v.strain
	for i, s := range v.design.strings {
		l := &v.loops[i]
		f0 := l.hold(v.design.pitch * octaves(cents+s.cents))
		if v.fresh && f0 != l.glide.aim {
			damped := l.damped
			l.tune(l.mode, l.ip, l.line, f0)
			l.damped = damped
			for j := range v.strokes[i] {
				if st := &v.strokes[i][j]; st.shape != nil {
					st.echo = st.shape.position * v.maker.rate / f0
				}
			}
		}
		l.glide.aim = f0
	}
}

// Damp lays the damper on: 0 lets ring, 1 makes T60 the design's release, more
// is faster in proportion. It takes hold over some 5 ms.
func (v *Voice) Damp(amount float64) {
	if v.design == nil {
		return
	}
	for i := range v.design.strings {
		v.loops[i].damped.aim = amount * v.design.release
	}
}

// Mute lays the palm on the strings by the bridge, 0 to 1: short and dull.
func (v *Voice) Mute(amount float64) {
	v.palm = min(1, max(0, amount))
	v.dullen()
}

// Darken takes the treble from the strings, 0 to 1, and leaves the fundamental its decay.
func (v *Voice) Darken(amount float64) {
	v.dark = min(1, max(0, amount))
	v.dullen()
}

// dullen moves the strings' law towards the muted one's.
func (v *Voice) dullen() {
	if v.design == nil {
		return
	}
	for i := range v.design.strings {
		g := &v.loops[i].glide
		g.palmAim, g.darkAim = v.palm, max(v.palm, v.dark)
	}
}

// Touch lays a finger on the strings at 1/node of their length, node 2 to 8,
// 0 to 1 firm: only the partials that rest there ring on, each at its decay.
func (v *Voice) Touch(node int, amount float64) {
	const firmest = 0.15 // of a partial in the middle of its swing, taken twice a trip
	if v.design == nil {
		return
	}
	for i := range v.design.strings {
		d := &v.loops[i].damped
		d.node, d.fingerAim = max(node, 2), min(1, max(0, amount))*firmest
	}
}

// Fade brings the voice to silence over 2 ms, for another note to take it.
func (v *Voice) Fade() { v.fading = true }

// Reset takes the strings off: the voice is silent at once.
func (v *Voice) Reset() { v.design, v.energy = nil, 0 }

// Energy is the mean square of what the voice lately put out.
func (v *Voice) Energy() float64 { return v.energy }

// Render writes len(out) frames, mono. drive, nil or as long, is a force on
// the bridge that the strings feel. What a call renders does not depend on how the
// stream is cut into calls.
func (v *Voice) Render(out, drive []float32) {
	if v.design == nil {
		clear(out)
		return
	}
	v.fresh = false
	for len(out) > 0 {
		if v.phase == 0 {
			v.control()
		}
		n := min(len(out), Grid-v.phase)
		var d []float32
		if drive != nil {
			d, drive = drive[:n], drive[n:]
		}
		v.chunk(out[:n], d)
		out = out[n:]
		v.phase = (v.phase + n) % Grid
	}
}

// control prepares the next Grid frames.
func (v *Voice) control() {
	v.energy += (v.power/Grid - v.energy) * v.leak
	v.power = 0
	if d := v.design; d.tension > 0 && d.hardest > 0 {
		v.tighten(d.tension * min(1, v.energy/d.hardest))
	}
	for i := range v.design.strings {
		l := &v.loops[i]
		l.control()
		for j := range v.strokes[i] {
			if s := &v.strokes[i][j]; !s.over() {
				s.follow(l.glide.pitch)
			}
		}
	}
}

// tighten follows the strings' tension, cents sharp, in steps too small to hear, so
// that a string that has almost settled need not move at every step.
func (v *Voice) tighten(cents float64) {
	const step = 0.02 // cents
	if math.Abs(cents-v.strain) < step && (cents > step || v.strain == 0) {
		return
	}
	v.strain = cents
	if cents <= step {
		v.strain = 0
	}
	v.retune()
}

// chunk renders frames that lie within one control step.
func (v *Voice) chunk(out, drive []float32) {
	for i, s := range v.design.strings {
		y := out
		if i > 0 {
			y = v.y[:len(out)]
		}
		v.loops[i].render(y, v.force(i, len(out), drive))
		switch {
		case i > 0:
			for k, x := range y {
				out[k] += float32(s.mix * x)
			}
		case s.mix != 1:
			for k, x := range y {
				out[k] = s.mix * x
			}
		}
	}
	if v.fading {
		v.fadeOut(out)
	}
	for _, x := range out {
		v.power += float64(x * x)
	}
}

// force is what drives loop i over n frames, or nil when nothing does.
func (v *Voice) force(i, n int, drive []float32) []float32 {
	if drive == nil && v.strokes[i][0].over() && v.strokes[i][1].over() {
		return nil
	}
	e := v.e[:n]
	clear(e)
	copy(e, drive)
	for j := range v.strokes[i] {
		v.strokes[i][j].render(e)
	}
	return e
}

func (v *Voice) fadeOut(out []float32) {
	const fadeTime = 0.002 // s
	step := float32(1 / (fadeTime * v.maker.rate))
	for i := range out {
		v.fade = max(0, v.fade-step)
		out[i] *= ease(v.fade)
	}
}

// ease makes a straight way from 0 to 1 one without corners: the least polynomial whose first
// four derivatives are 0 at both ends. A straight fade of 2 ms clicks at -62 dB by
// the test of measure.Click, this one at -125 dB.
func ease(x float32) float32 {
	x2 := float32(x * x)
	p := 126 + float32(x*(-420+float32(x*(540+float32(x*(-315+float32(70*x)))))))
	return float32(float32(float32(x2*x2)*x) * p)
}

// Silent says that the strings are below -120 dBFS with no stroke under way:
// the voice may be used for another key.
func (v *Voice) Silent() bool {
	if v.design == nil || v.fading && v.fade <= 0 {
		return true
	}
	for i := range v.design.strings {
		if !v.loops[i].atRest() {
			return false
		}
		for j := range v.strokes[i] {
			if !v.strokes[i][j].over() {
				return false
			}
		}
	}
	return true
}

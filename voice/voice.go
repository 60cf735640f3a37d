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

import (
	"math"

	"tautwire/voice/lanes"
)

// maxLoops is a course of three strings in two polarizations each.
const maxLoops = 6

// strokes is how many excitations of a string may overlap.
const strokes = 2

// Gain is a voice's amplitude on its way to the mix.
type Gain struct{ Left, Right float32 }

// gains move from one to the other over a control step.
type gains struct{ from, to Gain }

// Voice is the strings of one key, sounding. It is used from one goroutine, and so is its Pool.
type Voice struct {
	pool        *Pool
	start, size int // of the pool's line

	design *Design
	loops  [maxLoops]loop
	strung int64 // when, by the pool's clock

	cents, strain float64 // from the design's pitch: asked for, and by tension
	palm          float64 // 0 to 1
	dark          float64 // 0 to 1

	gains  gains
	fading bool
	faded  int64 // since when, by the pool's clock
}

// NewVoice allocates a voice in a pool of its own; see Pool.
func (m *Maker) NewVoice(lowest float64) *Voice { return newVoice(m, linesFor(lowest, m.rate)) }

func newVoice(m *Maker, frames int) *Voice {
	p := newPool(m, 1, frames)
	p.lone = true
	return p.Voice(0)
}

// Fit puts a design's strings on the voice, at rest and undamped, with no stroke.
func (v *Voice) Fit(d *Design) {
	v.Reset()
	if v.pool.lone {
		v.pool.now = Grid // its steps begin with it
	}
	v.design = d
	v.pool.live = append(v.pool.live, v)
	v.strung, v.fading = v.pool.clock(), false
	v.cents, v.strain, v.palm, v.dark = 0, 0, 0, 0
	v.gains = gains{}
	if d.tension > 0 {
		v.pool.tense++
	}
	leak := leak(d.pitch, v.pool.maker.rate)
	slot := v.size / len(d.strings)
	for i, s := range d.strings {
		v.loops[i] = loop{
			mode: d.modes[s.mode], voice: v, pool: v.pool, mix: s.mix, pitch: d.pitch * octaves(s.cents),
			start: v.start + i*slot + lanes.History + lanes.Front, size: slot - ringRoom,
		}
		l := &v.loops[i]
		l.place = cellsInOctave * math.Log2(l.pitch/l.mode.lowest)
		l.tune(l.pitch)
		l.bank.leak[l.lane] = leak
	}
}

// Reset takes the strings off: the voice is silent at once.
func (v *Voice) Reset() {
	if v.design == nil {
		return
	}
	for i := range v.design.strings {
		v.loops[i].unhouse()
	}
	if v.design.tension > 0 {
		v.pool.tense--
	}
	v.design = nil
	live := v.pool.live
	last := len(live) - 1
	for i, other := range live {
		if other == v {
			live[i] = live[last]
			v.pool.live = live[:last]
			return
		}
	}
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
		l.bank.catchUp(v.pool, v.pool.now)
		l.bank.struck.set(l.lane)
		s := &l.strokes[0]
		if other := &l.strokes[1]; !s.over() && (other.over() || other.frame > s.frame) {
			s = other
		}
		s.start(&d.shape, v.pool.maker.ip, l.glide.aim, l.meanKeeps(), v.pool.maker.rate, velocity, strandSeed(seed, i))
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
	for i := range v.design.strings {
		l := &v.loops[i]
		if cents == l.asked {
			continue
		}
		l.asked = cents
		l.wake()
		if v.unheard() {
			l.cents = cents
			l.tune(l.pitch * octaves(cents))
			for j := range l.strokes {
				if st := &l.strokes[j]; st.shape != nil {
					st.echo = st.shape.position * v.pool.maker.rate / l.glide.aim
				}
			}
		}
	}
}

// unheard says that the voice has been strung and nothing of it rendered yet.
func (v *Voice) unheard() bool { return v.strung == v.pool.clock() }

// Damp lays the damper on: 0 lets ring, 1 makes T60 the design's release, more
// is faster in proportion. It takes hold over some 5 ms.
func (v *Voice) Damp(amount float64) {
	if v.design == nil {
		return
	}
	for i := range v.design.strings {
		l := &v.loops[i]
		l.damped.aim = amount * v.design.release
		l.wake()
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
		l := &v.loops[i]
		l.glide.palmAim, l.glide.darkAim = v.palm, max(v.palm, v.dark)
		l.wake()
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
		l := &v.loops[i]
		l.damped.node, l.damped.fingerAim = max(node, 2), min(1, max(0, amount))*firmest
		l.wake()
	}
}

// Fade brings the voice to silence over 2 ms, for another note to take it.
func (v *Voice) Fade() {
	if v.design == nil || v.fading {
		return
	}
	for i := range v.design.strings {
		l := &v.loops[i]
		l.bank.catchUp(v.pool, v.pool.now)
		l.bank.fading.set(l.lane)
	}
	v.fading, v.faded = true, v.pool.clock()
}

// fadeAt is the factor of a fading voice at a frame of the step.
func (v *Voice) fadeAt(frame int) float32 {
	return ease(v.fadeLeft(v.pool.steps*Grid + int64(frame) + 1))
}

// fadeLeft is how much of the fade is to come, 1 to 0, by the pool's clock.
func (v *Voice) fadeLeft(clock int64) float32 {
	const fadeTime = 0.002 // s
	gone := max(0, clock-v.faded)
	return max(0, 1-float32(float64(gone)/(fadeTime*v.pool.maker.rate)))
}

// Mix sets the gains at which the voice goes to its pool's mix: from one to another over the control step
// that is about to begin, or, from within one, both the same, at once.
func (v *Voice) Mix(from, to Gain) {
	if v.design == nil || v.gains == (gains{from, to}) {
		return
	}
	v.gains = gains{from, to}
	for i := range v.design.strings {
		l := &v.loops[i]
		b, lane := &l.bank.Bank, l.lane
		b.Left[lane], b.Right[lane] = l.mix*from.Left, l.mix*from.Right
		b.DLeft[lane], b.DRight[lane] = l.mix*(to.Left-from.Left)/Grid, l.mix*(to.Right-from.Right)/Grid
	}
}

// Push adds a force on the bridge, which all the strings feel, from a frame of the present
// control step on. It comes before that frame is rendered.
func (v *Voice) Push(frame int, force []float32) {
	if v.design == nil {
		return
	}
	for i := range v.design.strings {
		l := &v.loops[i]
		l.bank.push(l.lane, frame, force)
	}
}

// BridgeGain is what the bridge feels of both sides of the mix.
const BridgeGain = math.Sqrt2 / 2

// Bridge adds to out what the voice gives to the mix from a frame of the step on, as the bridge feels it.
func (v *Voice) Bridge(out []float32, at int) {
	if v.design == nil {
		return
	}
	from, to := v.gains.from, v.gains.to
	gain := float32((from.Left + from.Right) * BridgeGain)
	slope := (float32((to.Left+to.Right)*BridgeGain) - gain) / Grid
	for i := range v.design.strings {
		l := &v.loops[i]
		heard, lane := l.bank.Out[at:], l.lane&(lanes.Width-1)
		if slope == 0 {
			g := gain * l.mix
			for k := range out {
				out[k] += float32(g * heard[k][lane])
			}
			continue
		}
		for k := range out {
			g := gain + float32(slope*float32(at+k+1))
			out[k] += float32(float32(l.mix*heard[k][lane]) * g)
		}
	}
}

// heard writes what the voice sounds from a frame of the step on, before the mix.
func (v *Voice) heard(out []float32, at int) {
	clear(out)
	for i := range v.design.strings {
		l := &v.loops[i]
		for k := range out {
			out[k] += float32(l.mix * l.bank.Out[at+k][l.lane])
		}
	}
}

// Energy is the mean square of what the voice lately put out.
func (v *Voice) Energy() float64 {
	if v.design == nil {
		return 0
	}
	sum := 0.0
	for i := range v.design.strings {
		l := &v.loops[i]
		sum += float64(float64(l.mix) * l.bank.energy[l.lane])
	}
	if v.fading {
		left := float64(v.fadeLeft(v.pool.clock()))
		sum *= left * left
	}
	return sum
}

// Render writes len(out) frames, mono, of a voice that is alone in its pool. drive, nil or as long, is a force on
// the bridge that the strings feel. What a call renders does not depend on how the
// stream is cut into calls.
func (v *Voice) Render(out, drive []float32) {
	p := v.pool
	if v.design == nil {
		clear(out)
		return
	}
	for len(out) > 0 {
		if p.now == Grid {
			p.Step()
		}
		from, n := p.now, min(len(out), Grid-p.now)
		if drive != nil {
			v.Push(from, drive[:n])
			drive = drive[n:]
		}
		p.Advance(from + n)
		v.heard(out[:n], from)
		out = out[n:]
	}
}

// tighten follows the strings' tension by their energy, in steps too small to hear, so
// that a string that has almost settled need not move at every step.
func (v *Voice) tighten() {
	d := v.design
	if d.tension <= 0 || d.hardest <= 0 {
		return
	}
	cents := d.tension * min(1, v.Energy()/d.hardest)
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
	if v.design == nil || v.fading && v.fadeLeft(v.pool.clock()) <= 0 {
		return true
	}
	for i := range v.design.strings {
		if !v.loops[i].atRest() {
			return false
		}
		if l := &v.loops[i]; l.bank.struck.has(l.lane) && !(l.strokes[0].over() && l.strokes[1].over()) {
			return false
		}
	}
	return true
}

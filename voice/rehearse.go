package voice

import (
	"math"
	"math/cmplx"
)

// How loud a stroke comes out depends on the string, and of noise on chance, the more so
// the fewer samples a period has. So a design is played when it is made: once, or with noise
// as several bursts, each with a gain of its own, of which every stroke takes one.

// variants is how many bursts of noise a design knows, few those of a burst
// that is so long that the string has to be played along.
const variants, few = 8, 4

// variant is a burst of noise's seed with the logarithms of the gains that give it its
// peak, at some velocities.
type variant struct {
	seed  uint64
	gains [len(variantVelocities)]float64
}

// variantVelocities are where a variant's gain is known; between them it is interpolated.
var variantVelocities = [...]float64{8, 64, 127}

// gain is a variant's at a velocity.
func (t *variant) gain(velocity float64) float64 {
	i := 0
	if velocity > variantVelocities[1] {
		i = 1
	}
	low, high := variantVelocities[i], variantVelocities[i+1]
	return math.Exp(t.gains[i] + (t.gains[i+1]-t.gains[i])*(velocity-low)/(high-low))
}

// strandSeed gives each string and plane a noise of its own: shared, they would cancel.
func strandSeed(seed uint64, strand int) uint64 { return seed + uint64(strand)*0xd1342543de82ef95 }

// calibrate sets the gain by the peak, so that the hardest stroke is fullLevel loud, and
// finds the energy of that stroke, which tension asks for.
func (d *Design) calibrate() {
	hardest := variantVelocities[len(variantVelocities)-1:]
	tense := d.tension > 0
	gain, seed := 1.0, uint64(0)
	if d.shape.kind == Noise {
		d.vary()
		v := &d.shape.variants[0]
		gain, seed = v.gain(hardest[0]), v.seed
		if !tense {
			return
		}
	}
	r := newRehearsal(d, tense)
	peak := r.play(hardest, seed)[0]
	if peak == 0 {
		d.shape.gain = 0 // an empty sample: a string that nothing moves
		return
	}
	if d.shape.kind != Noise {
		d.shape.gain = fullLevel / peak
		gain = d.shape.gain
	}
	if tense {
		d.hardest = r.energy() * gain * gain
	}
}

// vary makes bursts of noise and finds their gains.
func (d *Design) vary() {
	r := newRehearsal(d, false)
	velocities, count := variantVelocities[:], variants
	if d.shape.touch == 0 {
		velocities = velocities[len(velocities)-1:] // all others are alike
	}
	if r.rings {
		count = few
	}
	d.shape.variants = make([]variant, count)
	for i := range d.shape.variants {
		v := &d.shape.variants[i]
		v.seed = mix64(uint64(i) + 1)
		peaks := r.play(velocities, v.seed)
		for j := range v.gains {
			v.gains[j] = math.Log(fullLevel / peaks[min(j, len(velocities)-1)])
		}
	}
}

// rehearsal plays strokes on a design, without a voice.
type rehearsal struct {
	d      *Design
	rate   float64 // Hz
	parts  []strand
	rings  bool // the force lasts until it meets its own return, and so the strings sound along
	joined bool // the parts go the same way for as long as the force lasts
	before int  // frames of silence at the front of sound
	sound  [len(variantVelocities)][]float32
	alone  []float32 // of one part
	c      [2]coefficients
	mean   [2]float64
}

// newRehearsal prepares for the force of a stroke and, where it meets its own return or is asked for, what
// the string does meanwhile and for some periods more.
func newRehearsal(d *Design, along bool) *rehearsal {
	const longest = 1.0 // s
	const alike = 0.1   // periods that parts may drift apart meanwhile
	const fewSamples = 300
	sh, m := &d.shape, d.maker
	r := &rehearsal{d: d, rate: m.rate, parts: d.strings}
	period := 1 / d.pitch
	lasts := min(sh.length, longest) + sh.position*period
	r.rings = lasts > period || along
	low, high := 0.0, 0.0
	for _, s := range d.strings {
		low, high = min(low, s.cents), max(high, s.cents)
	}
	r.joined = !r.rings || (octaves(high-low)-1)*lasts < alike*period
	if r.joined && sh.kind != Noise {
		r.parts = []strand{{mode: d.strings[0].mode, mix: 1}}
	}
	if sh.kind == Noise && !r.rings && lasts*noiseRate > fewSamples {
		r.rate = noiseRate // the noise's own, which needs the least work; with few samples the peak depends on where they are
	}
	frames := int(lasts*r.rate) + 3*taps
	if along {
		frames = int((min(sh.length, longest) + 3*period) * r.rate)
	}
	for i, mode := range d.modes {
		if mode != nil {
			mode.at(d.pitch, touch{}, &r.c[i])
			r.mean[i] = r.c[i].meanKeeps(d.pitch / r.rate)
			longest := r.c[i]
			if low < 0 {
				mode.at(d.pitch*octaves(low), touch{}, &longest)
			}
			r.before = max(r.before, int(longest.delay)+2*taps)
		}
	}
	for i := range r.sound {
		r.sound[i] = make([]float32, r.before+frames)
	}
	if !r.joined {
		r.alone = make([]float32, r.before+frames)
	}
	return r
}

// play makes strokes of some velocities and one noise sound, each with a gain of one, and returns their peaks.
func (r *rehearsal) play(velocities []float64, seed uint64) (peaks [len(variantVelocities)]float64) {
	sounds := r.sound[:len(velocities)]
	for _, sound := range sounds {
		clear(sound)
	}
	for i, part := range r.parts {
		if r.joined {
			r.force(sounds, velocities, part, strandSeed(seed, i))
			continue
		}
		for j, sound := range sounds {
			clear(r.alone)
			r.force([][]float32{r.alone}, velocities[j:j+1], part, strandSeed(seed, i))
			r.ring(r.alone, part)
			for k, y := range r.alone {
				sound[k] += y
			}
		}
	}
	for i, sound := range sounds {
		if r.joined && r.rings {
			r.ring(sound, r.parts[0])
		}
		peak := float32(0)
		for _, y := range sound[r.before:] {
			peak = max(peak, y, -y)
		}
		peaks[i] = float64(peak)
	}
	return peaks
}

// force adds the force on a strand to a sound for each velocity.
func (r *rehearsal) force(sounds [][]float32, velocities []float64, part strand, seed uint64) {
	var strokes [len(variantVelocities)]stroke
	var gains [len(variantVelocities)]float32
	f0 := r.d.pitch * octaves(part.cents)
	for i, velocity := range velocities {
		s, hard := &strokes[i], velocity/127
		s.start(&r.d.shape, r.d.maker.ip, f0, r.mean[part.mode], r.rate, velocity, seed)
		gains[i] = part.mix * s.gain / float32(hard*hard)
	}
	var room, filtered [Grid]float64
	for at := r.before; at < len(sounds[0]); at += Grid {
		force := room[:min(Grid, len(sounds[0])-at)]
		strokes[0].force(force)
		for i, sound := range sounds {
			x := filtered[:len(force)]
			copy(x, force)
			strokes[i].filter(x)
			for k, v := range x {
				sound[at+k] += gains[i] * float32(v)
			}
		}
	}
}

// ring has a force make a string of the design sound, in place.
func (r *rehearsal) ring(x []float32, part strand) {
	c, m := r.c[part.mode], r.d.modes[part.mode]
	f0 := min(r.d.pitch*octaves(part.cents), topPitch*m.rate)
	if part.cents != 0 {
		m.at(f0, touch{}, &c)
	}
	h, length := c.stillTaps(r.d.maker.ip, len(m.sections), 2*math.Pi*f0/m.rate)
	var mirrored [taps]float32
	for i, k := range h {
		mirrored[taps-1-i] = float32(k)
	}
	k, zero, pole := c.loss.shelf.filter()
	var v, v1, v2, shelved float64
	var in, out [maxSections][2]float64 // of the sections, one and two frames ago
	for n := r.before; n < len(x); n++ {
		v1, v2 = v, v1
		v = float64(onward(x[n-length-(taps-1-center):], &mirrored)) - float64(c.loss.c2*v2) - float64(c.loss.c1*v1)
		y := v
		if len(m.sections) > 0 {
			shelved = float64(k*(v-float64(zero*v1))) + float64(pole*shelved)
			y = shelved
			for i := range m.sections {
				a1, a2 := c.sections[i][0], c.sections[i][1]
				next := float64(a2*(y-out[i][1])) + in[i][1] + float64(a1*(in[i][0]-out[i][0]))
				in[i][1], in[i][0] = in[i][0], y
				out[i][1], out[i][0] = out[i][0], next
				y = next
			}
		}
		x[n] += float32(y)
	}
}

// stillTaps are the taps of a read that stands at w (radians per sample), with all gains in
// them, and the whole part of the delay. The loop has some sections.
func (c *coefficients) stillTaps(ip *interpolator, sections int, w float64) (h [taps]float64, length int) {
	length = max(int(c.delay), shortest)
	ip.at(min(1, c.delay-float64(length)), &h)
	for i := range h {
		h[i] *= c.gain
	}
	if c.direct > 0 {
		var direct [taps]float64
		directTaps(cmplx.Rect(c.shrink, w), func(z complex128) complex128 { return c.rest(z, sections) }, &direct)
		for i := range h {
			h[i] += c.direct * (direct[i] - h[i])
		}
	}
	return h, length
}

// energy is the highest that a voice comes to count as its energy during the sound that has
// been played at the hardest velocity alone.
func (r *rehearsal) energy() float64 {
	leak := leak(r.d.pitch, r.rate)
	energy, most, power := 0.0, 0.0, 0.0
	for i, y := range r.sound[0][r.before:] {
		power += float64(y * y)
		if i%Grid == Grid-1 {
			energy += (power/Grid - energy) * leak
			most, power = max(most, energy), 0
		}
	}
	return most
}

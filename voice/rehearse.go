package voice

import (
	"math"
	"math/cmplx"
	"slices"
)

// How loud a stroke comes out depends on the string, and of noise on chance, the more so
// the fewer samples a period has. So a design is played when it is made: once, or with noise
// as several bursts, each with a gain of its own, of which every stroke takes one.

const (
	// fewest and most are how many bursts of noise a design knows.
	fewest, most = 3, 8
	// effort is how long (s) all of them may be together, of all strings.
	effort = 0.25
)

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
func (d *Design) calibrate(r *rehearsal) {
	hardest := variantVelocities[len(variantVelocities)-1:]
	tense := d.tension > 0
	gain, seed := 1.0, uint64(0)
	if d.shape.kind == Noise {
		d.vary(r)
		v := &d.shape.variants[0]
		gain, seed = v.gain(hardest[0]), v.seed
		if !tense {
			return
		}
	}
	r.begin(d, 1, tense)
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
func (d *Design) vary(r *rehearsal) {
	velocities := variantVelocities[:]
	if d.shape.touch == 0 {
		velocities = velocities[len(velocities)-1:] // all others are alike
	}
	r.begin(d, len(velocities), false)
	d.shape.variants = make([]variant, min(max(int(effort/(r.lasts*float64(len(r.parts)))), fewest), most))
	for i := range d.shape.variants {
		v := &d.shape.variants[i]
		v.seed = mix64(uint64(i) + 1)
		peaks := r.play(velocities, v.seed)
		for j := range v.gains {
			v.gains[j] = math.Log(fullLevel / peaks[min(j, len(velocities)-1)])
		}
	}
}

// rehearsal plays strokes on a design, without a voice. It is used again for one design
// after the other.
type rehearsal struct {
	d      *Design
	rate   float64 // Hz
	lasts  float64 // s: the force
	parts  []strand
	rings  bool // the force lasts until it meets its own return, and so the strings sound along
	joined bool // the parts go the same way for as long as the force lasts
	before int  // frames of silence at the front of sound
	sound  [len(variantVelocities)][]float32
	alone  []float32 // of one part
	c      [2]coefficients
	mean   [2]float64
}

// begin prepares to play strokes of up to count velocities for as long as their force lasts. Where it
// meets its own return, the string goes along; where that is asked for, for some
// periods more.
func (r *rehearsal) begin(d *Design, count int, along bool) {
	const longest = 1.0 // s
	const alike = 0.1   // periods that parts may drift apart meanwhile
	const fewSamples = 300
	sh, m := &d.shape, d.maker
	r.d, r.rate, r.parts, r.before = d, m.rate, d.strings, 0
	period := 1 / d.pitch
	r.lasts = min(sh.length, longest) + sh.position*period
	many := sh.kind == Noise && r.lasts*noiseRate > fewSamples // the return of its end changes its peak little
	// a stiff string's partials come back at different times, and may meet at a higher peak
	along = along || len(d.modes[0].sections) > 0 && sh.kind != Noise
	r.rings = along || sh.length > 1.001*period || r.lasts > period && !many
	low, high := 0.0, 0.0
	for _, s := range d.strings {
		low, high = min(low, s.cents), max(high, s.cents)
	}
	r.joined = !r.rings || (octaves(high-low)-1)*r.lasts < alike*period
	if r.joined && sh.kind != Noise {
		r.parts = []strand{{mode: d.strings[0].mode, mix: 1}}
	}
	if many && !r.rings {
		r.rate = noiseRate // its own, which needs the least work; with few samples the peak depends on where they are
	}
	frames := int(r.lasts*r.rate) + 3*taps
	switch {
	case along:
		frames = int((min(sh.length, longest) + 3*period) * r.rate)
	case r.rings:
		frames += int(period * r.rate)
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
	for i := range count {
		r.sound[i] = slices.Grow(r.sound[i][:0], r.before+frames)[:r.before+frames]
	}
	if !r.joined {
		r.alone = slices.Grow(r.alone[:0], r.before+frames)[:r.before+frames]
	}
}

// play makes strokes of some velocities and one noise sound, each with a gain of one, and returns their peaks.
func (r *rehearsal) play(velocities []float64, seed uint64) (peaks [len(variantVelocities)]float64) {
	sounds := r.sound[:len(velocities)]
	for _, sound := range sounds {
		clear(sound)
	}
	if r.joined {
		r.force(sounds, velocities, r.parts, seed)
	} else {
		for i, part := range r.parts {
			for j, sound := range sounds {
				clear(r.alone)
				r.force([][]float32{r.alone}, velocities[j:j+1], r.parts[i:i+1], strandSeed(seed, i))
				r.ring(r.alone, part)
				for k, y := range r.alone {
					sound[k] += y
				}
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

// force adds the force on strands that go the same way to a sound for each velocity.
func (r *rehearsal) force(sounds [][]float32, velocities []float64, parts []strand, seed uint64) {
	var sources [maxLoops]stroke
	var filters [len(variantVelocities)]stroke // one for all parts: they differ in cents alone
	var gains [len(variantVelocities)]float32
	start := func(s *stroke, part strand, velocity float64, seed uint64) {
		s.start(&r.d.shape, r.d.maker.ip, r.d.pitch*octaves(part.cents), r.mean[part.mode], r.rate, velocity, seed)
	}
	for i, part := range parts {
		start(&sources[i], part, velocities[0], strandSeed(seed, i))
	}
	for i, velocity := range velocities {
		start(&filters[i], parts[0], velocity, seed)
		hard := velocity / 127
		gains[i] = filters[i].gain / float32(hard*hard)
	}
	var one, sum, filtered [Grid]float64
	for at := r.before; at < len(sounds[0]); at += Grid {
		n := min(Grid, len(sounds[0])-at)
		clear(sum[:n])
		for i, part := range parts {
			if s := &sources[i]; float64(s.frame)-s.echo > s.spent {
				continue
			}
			sources[i].force(one[:n])
			for k, v := range one[:n] {
				sum[k] += float64(part.mix) * v
			}
		}
		for i, sound := range sounds {
			x := filtered[:n]
			copy(x, sum[:n])
			filters[i].filter(x)
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
	energy, highest, power := 0.0, 0.0, 0.0
	for i, y := range r.sound[0][r.before:] {
		power += float64(y * y)
		if i%Grid == Grid-1 {
			energy += (power/Grid - energy) * leak
			highest, power = max(highest, energy), 0
		}
	}
	return highest
}

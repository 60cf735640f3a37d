package voice

import (
	"math"
	"math/cmplx"
)

// mode is one polarization of a key's string, compiled: everything about its
// loop as a function of the pitch, so that it can be bent without a new fit.
type mode struct {
	rate     float64
	law      law
	sections []section
	// losses are the loss filters at pitches a step apart, the first at lowest;
	// dulls are those of the string under a muting palm
	losses, dulls []loss
	dullDecay     float64 // s: T60 under the palm
	lowest        float64 // Hz
	shelfCorner   float64 // over the fundamental; 0 is no shelf
}

// lossStep is the distance between two loss filters of a mode, in octaves.
const lossStep = 1.0 / 6

// topPitch is the highest fundamental as a part of the rate. A string bent
// beyond it sounds there.
const topPitch = 0.4

// newMode compiles a string of fundamental f0 (Hz) and stiffness b, with the
// laws of the open string and of the muted one.
func newMode(open, dull law, f0, b, rate float64) *mode {
	m := &mode{rate: rate, law: open, dullDecay: dull.decay}
	f0 = min(f0, topPitch*rate)
	hard := m.fitAlone(open, f0)
	if b > 0 {
		m.sections = fitDispersion(f0, b, rate, hard.lag)
		m.placeShelf(open, f0, hard)
	}
	const bottom = 1.0 // Hz
	below := math.Floor(math.Log2(f0/bottom) / lossStep)
	m.lowest = f0 * math.Exp2(-below*lossStep)
	above := math.Ceil(math.Log2(topPitch*rate/f0) / lossStep)
	steps := int(below+above) + 1
	m.losses, m.dulls = make([]loss, steps), make([]loss, steps)
	soft := m.fitAlone(dull, f0)
	fill := func(i int, likeOpen, likeDull loss) {
		f := min(m.lowest*math.Exp2(float64(i)*lossStep), topPitch*rate)
		m.losses[i], m.dulls[i] = m.fit(open, f, likeOpen), m.fit(dull, f, likeDull)
	}
	middle := int(below)
	fill(middle, hard, soft)
	for i := middle + 1; i < steps; i++ {
		fill(i, m.losses[i-1], m.dulls[i-1])
	}
	for i := middle - 1; i >= 0; i-- {
		fill(i, m.losses[i+1], m.dulls[i+1])
	}
	return m
}

// fitAlone fits the loss filter as if every packet took one period.
func (m *mode) fitAlone(l law, f0 float64) loss {
	t, _ := fitLoss(f0, m.rate, func(f float64) float64 { return l.nepers(f, f0, 1/f0) })
	return loss{twoPole: t}
}

// fit fits the loss filter at a pitch, with the time that a packet takes by
// the sections and by a filter like it: the first fit, or that of a pitch near by.
func (m *mode) fit(l law, f0 float64, like loss) loss {
	t0 := math.Tan(math.Pi * f0 / m.rate)
	line := m.lineFor(f0, like)
	trip := m.trip(f0, t0, line, like)
	out, _ := m.fitBoth(l, f0, t0, m.shelfCorner, line/m.rate, trip)
	return out
}

// fitBoth fits a shelf at a corner, a multiple of the fundamental, and two poles
// to what it leaves.
func (m *mode) fitBoth(l law, f0, t0, corner, shortest float64, trip func(f float64) float64) (out loss, worst float64) {
	out.shelf = m.fitShelf(l, f0, t0, corner, shortest, trip)
	out.twoPole, worst = fitLoss(f0, m.rate, func(f float64) float64 {
		return max(1e-9, l.nepers(f, f0, trip(f))-out.shelf.nepers(math.Tan(math.Pi*f/m.rate)))
	})
	return out, worst
}

// placeShelf finds the corner that serves a stiff string best, or none.
func (m *mode) placeShelf(l law, f0 float64, like loss) {
	t0, line := math.Tan(math.Pi*f0/m.rate), m.lineFor(f0, like)
	trip := m.trip(f0, t0, line, like)
	_, least := m.fitBoth(l, f0, t0, 0, line/m.rate, trip)
	for c := 1.5; c < 60; c *= 1.2 {
		if _, worst := m.fitBoth(l, f0, t0, c, line/m.rate, trip); worst < least {
			least, m.shelfCorner = worst, c
		}
	}
}

// trip gives the time (s) that a packet at f needs, the loop's group delay.
func (m *mode) trip(f0, t0, line float64, like loss) func(f float64) float64 {
	return func(f float64) float64 {
		w := 2 * math.Pi * f / m.rate
		v := math.Tan(w / 2)
		sum := line + like.groupDelay(w) + like.shelf.groupDelay(v)
		for _, s := range m.sections {
			sum += s.groupDelay(v/t0, t0)
		}
		return max(sum, 1) / m.rate
	}
}

// lineFor is about what the line has to hold (samples) beside all else.
func (m *mode) lineFor(f0 float64, l loss) float64 {
	w := 2 * math.Pi * f0 / m.rate
	sum := m.rate/f0 - l.lag(w)/w
	for _, s := range m.sections {
		sum -= s.lag(1) / w
	}
	return sum
}

// fitShelf fits the shelf of a stiff string, whose quickest packet takes
// shortest (s), at a corner that is a multiple of the fundamental; 0 is no shelf.
func (m *mode) fitShelf(l law, f0, t0, corner, shortest float64, trip func(f float64) float64) shelf {
	const points = 24
	top := min(4000, 0.4*m.rate, 200*f0)
	if corner == 0 {
		return shelf{}
	}
	if top < 2*f0 {
		return shelf{corner: corner * t0} // nothing to serve, yet it goes on with its neighbours
	}
	var v, extra, whole [points]float64
	for i := range points {
		f := f0 * math.Pow(top/f0, float64(i)/(points-1))
		v[i] = math.Tan(math.Pi * f / m.rate)
		t := trip(f)
		whole[i] = l.nepers(f, f0, t)
		extra[i] = whole[i] * max(0, 1-shortest/t)
	}
	return fitShelf(corner*t0, v[:], extra[:], whole[:])
}

// loss is all that takes energy from a trip, but for the gain.
type loss struct {
	twoPole
	shelf shelf
}

// response is the filter's at z, with a gain of one.
func (l loss) response(z complex128) complex128 {
	return l.shelf.response(z) / l.denominator(z)
}

// mix goes a part of the way to another filter; stable where both are.
func (l loss) mix(to loss, part float64) loss {
	toward := func(a, b float64) float64 { return a + part*(b-a) }
	return loss{
		twoPole: twoPole{toward(l.c1, to.c1), toward(l.c2, to.c2)},
		shelf:   shelf{toward(l.shelf.drop, to.shelf.drop), toward(l.shelf.corner, to.shelf.corner)},
	}
}

// lag is the phase (radians, positive) by which the filter delays w.
func (t twoPole) lag(w float64) float64 { return cmplx.Phase(t.denominator(unit(w))) }

// denominator is 1 + c1/z + c2/z^2.
func (t twoPole) denominator(z complex128) complex128 {
	r := 1 / z
	return 1 + complex(t.c1, 0)*r + complex(t.c2, 0)*r*r
}

// groupDelay is the filter's, in samples at w.
func (t twoPole) groupDelay(w float64) float64 {
	r := 1 / unit(w)
	num := complex(t.c1, 0)*r + complex(2*t.c2, 0)*r*r
	return -real(num / t.denominator(unit(w)))
}

func unit(w float64) complex128 { return cmplx.Rect(1, w) }

// touch is how far a string has the muted one's decay and its darkness, 0 to 1 each.
type touch struct{ palm, dark float64 }

// coefficients are a loop at one pitch.
type coefficients struct {
	delay    float64 // samples that the line's read takes
	gain     float64 // of the read
	loss     loss
	sections [maxSections][2]float64 // a1, a2
	shrink   float64                 // what the fundamental keeps of itself in a frame
	direct   float64                 // 0 to 1: how far the read is a direct one, see directTaps
}

// at solves the loop for a fundamental f0 (Hz), under a touch: the delay from the phase and
// the gain from the magnitude, both at the damped frequency
// z = exp((-3 ln 10/T60 + i w0)/rate), where the loop must be exactly one.
func (m *mode) at(f0 float64, t touch, c *coefficients) {
	f0 = min(max(f0, m.lowest), topPitch*m.rate)
	c.loss = m.lossAt(m.losses, f0)
	slowness := 1 / m.law.decay
	if t.dark > 0 {
		c.loss = c.loss.mix(m.lossAt(m.dulls, f0), t.dark)
	}
	slowness += t.palm * (1/m.dullDecay - slowness)
	w := 2 * math.Pi * f0 / m.rate
	sigma := decayNepers * slowness / m.rate
	// a string that is gone within a period has no frequency to be exact at, and the
	// filters answer nonsense so far inside the unit circle
	const most = 1.5 // nepers a period
	c.shrink = math.Exp(-min(sigma, most*w/(2*math.Pi)))
	z := cmplx.Rect(c.shrink, w)
	lag := -cmplx.Phase(c.loss.response(z))
	if len(m.sections) > 0 {
		t0 := math.Tan(w / 2)
		for i, s := range m.sections {
			c.sections[i] = s.digital(t0)
			lag += s.lag(1)
		}
	}
	rest := c.rest(z, len(m.sections))
	// the exact phase at z, on the turn that the lag near it tells
	turns := math.Round((lag + cmplx.Phase(rest)) / (2 * math.Pi))
	c.delay = (2*math.Pi*(1-turns) + cmplx.Phase(rest)) / w
	c.gain = math.Exp(-sigma*c.delay) / cmplx.Abs(rest)
	c.gain = min(c.gain, ceiling*c.loss.lowest())
	c.direct = min(1, max(0, directFrom-c.delay))
}

// lossAt is a table's loss filter at a pitch, by cubic interpolation: linear
// between filters a step apart, a vibrato would cost the treble some of its decay.
func (m *mode) lossAt(table []loss, f0 float64) loss {
	x := math.Log2(f0/m.lowest) / lossStep
	i := min(max(int(x), 0), len(table)-2)
	t := min(1, max(0, x-float64(i)))
	if i == 0 || i == len(table)-2 {
		return table[i].mix(table[i+1], t)
	}
	var out loss
	for j, k := range cubic(t) {
		l := &table[i-1+j]
		out.c1 += k * l.c1
		out.c2 += k * l.c2
		out.shelf.drop += k * l.shelf.drop
		out.shelf.corner += k * l.shelf.corner
	}
	if !out.stable() {
		return table[i].mix(table[i+1], t)
	}
	return out
}

// stable says that all poles lie inside the unit circle.
func (l loss) stable() bool {
	return l.twoPole.stable() && l.shelf.corner >= 0 && l.shelf.drop >= 0 && l.shelf.drop < 1
}

// stable says that the poles lie inside the unit circle, by more than rounding.
func (t twoPole) stable() bool {
	const margin = 1e-12
	return t.c2 < 1-margin && math.Abs(t.c1) < 1+t.c2-margin
}

// lowest is the least magnitude of the denominator over all frequencies: a gain
// up to it keeps a loop below one. Its square is a parabola in 1 - cos w.
func (t twoPole) lowest() float64 {
	a0 := (1 + t.c1 + t.c2) * (1 + t.c1 + t.c2)
	a1, a2 := -2*t.c1*(1+t.c2)-8*t.c2, 4*t.c2
	least := min(a0, a0+2*a1+4*a2)
	if x := -a1 / (2 * a2); a2 > 0 && x > 0 && x < 2 {
		least = min(least, a0+a1*x/2)
	}
	return math.Sqrt(max(0, least))
}

// rest is the response at z of the loss filter and the first n sections.
func (c *coefficients) rest(z complex128, n int) complex128 {
	out := c.loss.response(z)
	r := 1 / z
	for _, a := range c.sections[:n] {
		a1, a2 := complex(a[0], 0), complex(a[1], 0)
		out *= (a2 + a1*r + r*r) / (1 + a1*r + a2*r*r)
	}
	return out
}

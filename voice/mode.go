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
	losses, dulls []twoPole
	dullDecay     float64 // s: T60 under the palm
	lowest        float64 // Hz
}

// lossStep is the distance between two loss filters of a mode, in octaves. In between
// the coefficients are mixed, which keeps the loop below one.
const lossStep = 1.0 / 6

// topPitch is the highest fundamental as a part of the rate. A string bent
// beyond it sounds there.
const topPitch = 0.4

// newMode compiles a string of fundamental f0 (Hz) and stiffness b, with the
// laws of the open string and of the muted one.
func newMode(open, dull law, f0, b, rate float64) *mode {
	m := &mode{rate: rate, law: open, dullDecay: dull.decay}
	f0 = min(f0, topPitch*rate)
	loss := m.fitAlone(open, f0)
	if b > 0 {
		m.sections = fitDispersion(f0, b, rate, loss.lag)
	}
	const bottom = 1.0 // Hz
	below := math.Floor(math.Log2(f0/bottom) / lossStep)
	m.lowest = f0 * math.Exp2(-below*lossStep)
	above := math.Ceil(math.Log2(topPitch*rate/f0) / lossStep)
	steps := int(below+above) + 1
	m.losses, m.dulls = make([]twoPole, steps), make([]twoPole, steps)
	soft := m.fitAlone(dull, f0)
	fill := func(i int, open2, dull2 twoPole) {
		f := min(m.lowest*math.Exp2(float64(i)*lossStep), topPitch*rate)
		m.losses[i], m.dulls[i] = m.fit(open, f, open2), m.fit(dull, f, dull2)
	}
	middle := int(below)
	fill(middle, loss, soft)
	for i := middle + 1; i < steps; i++ {
		fill(i, m.losses[i-1], m.dulls[i-1])
	}
	for i := middle - 1; i >= 0; i-- {
		fill(i, m.losses[i+1], m.dulls[i+1])
	}
	return m
}

// fitAlone fits the loss filter as if every packet took one period.
func (m *mode) fitAlone(l law, f0 float64) twoPole {
	return fitLoss(l, f0, m.rate, func(float64) float64 { return 1 / f0 })
}

// fit fits the loss filter at a pitch, with the time that a packet takes by
// the sections and by a filter like it: the first fit, or that of a pitch near by.
func (m *mode) fit(l law, f0 float64, loss twoPole) twoPole {
	period := 1 / f0
	w0 := 2 * math.Pi * f0 / m.rate
	t0 := math.Tan(w0 / 2)
	line := m.rate*period - loss.lag(w0)/w0
	for _, s := range m.sections {
		line -= s.lag(1) / w0
	}
	return fitLoss(l, f0, m.rate, func(f float64) float64 {
		w := 2 * math.Pi * f / m.rate
		trip := line + loss.groupDelay(w)
		v := math.Tan(w/2) / t0
		for _, s := range m.sections {
			trip += s.groupDelay(v, t0)
		}
		return max(trip, 1) / m.rate
	})
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
	loss     twoPole
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
	c.shrink = math.Exp(-sigma)
	z := cmplx.Rect(c.shrink, w)
	lag := -cmplx.Phase(1 / c.loss.denominator(z))
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
	c.gain = min(c.gain, ceiling*(1+c.loss.c1+c.loss.c2))
	c.direct = min(1, max(0, directFrom-c.delay))
}

// lossAt mixes the two loss filters of a table that are next to a pitch.
func (m *mode) lossAt(table []twoPole, f0 float64) twoPole {
	x := math.Log2(f0/m.lowest) / lossStep
	i := min(max(int(x), 0), len(table)-2)
	return table[i].mix(table[i+1], min(1, max(0, x-float64(i))))
}

// mix goes a part of the way to another filter; stable where both are.
func (t twoPole) mix(to twoPole, part float64) twoPole {
	return twoPole{t.c1 + part*(to.c1-t.c1), t.c2 + part*(to.c2-t.c2)}
}

// rest is the response at z of the loss filter and the first n sections.
func (c *coefficients) rest(z complex128, n int) complex128 {
	out := 1 / c.loss.denominator(z)
	r := 1 / z
	for _, a := range c.sections[:n] {
		a1, a2 := complex(a[0], 0), complex(a[1], 0)
		out *= (a2 + a1*r + r*r) / (1 + a1*r + a2*r*r)
	}
	return out
}

package voice

import (
	"math"
	"math/cmplx"
)

// mode is one polarization of a key's string, compiled: everything about its
// loop as a function of the pitch, so that it can be bent without a new fit.
type mode struct {
	rate        float64
	law         law
	sections    []section
	open, dull  lossTable // dull is of the string under a muting palm
	dullDecay   float64   // s: T60 under the palm
	lowest      float64   // Hz: a string bent further down sounds there
	shelfCorner float64   // over the fundamental; 0 is no shelf
	homes       []home
}

// home is a loop solved in advance, at a pitch (Hz) that strings are set going at.
type home struct {
	pitch float64
	coefficients
}

// lossTable is the loss filters at pitches a step apart.
type lossTable struct {
	lowest float64 // Hz, of the first
	step   float64 // octaves
	at     []loss
}

const (
	// openStep and dullStep are the distance between two loss filters, in steps of the axis.
	openStep = 2
	dullStep = 6
	// bendReach is how far down (octaves) from its key a string has loss filters of
	// its own: what a pitch wheel can do. Beyond, the last one serves, which a higher
	// string's can: it delays less.
	bendReach = 4
)

// topPitch is the highest fundamental as a part of the rate. A string bent
// beyond it sounds there.
const topPitch = 0.4

// newMode compiles a string of fundamental f0 (Hz) and stiffness b, with the
// laws of the open string and of the muted one.
func newMode(open, dull law, f0, b, rate float64) *mode {
	return new(lossFit).mode(&mode{}, open, dull, f0, b, rate)
}

// mode is newMode beside one that is compiled already and differs in nothing but
// its laws, or an empty one: so it need not look far.
func (q *lossFit) mode(like *mode, open, dull law, f0, b, rate float64) *mode {
	const bottom = 1.0 // Hz
	m := &mode{rate: rate, law: open, dullDecay: dull.decay, lowest: bottom}
	f0 = min(f0, topPitch*rate)
	below := 0 // octaves
	for below < bendReach && math.Ldexp(f0, -below-1) >= bottom {
		below++
	}
	q.axis.begin(math.Ldexp(f0, -below), rate)
	hard := q.alone(open, f0, below*axisSteps)
	if b > 0 {
		m.sections = fitDispersion(f0, b, rate, hard.lag, like.sections)
		m.shelfCorner = like.shelfCorner
		if len(like.sections) == 0 {
			m.placeShelf(q, open, f0, below*axisSteps, hard)
		}
	}
	soft := q.alone(dull, f0, below*axisSteps)
	m.open = m.tabulate(q, open, f0, hard, below, openStep)
	m.dull = m.tabulate(q, dull, f0, soft, below, dullStep)
	return m
}

// tabulate fits a law's filters at pitches some steps of the axis apart, from below
// octaves under f0 (Hz), where the axis begins, to the highest that can sound. like is
// about the filter at f0.
func (m *mode) tabulate(q *lossFit, l law, f0 float64, like loss, below, step int) lossTable {
	perOctave := axisSteps / step
	above := int(math.Ceil(math.Log2(topPitch*m.rate/f0) * float64(perOctave)))
	middle := below * perOctave
	t := lossTable{lowest: q.axis.at[0].f, step: 1 / float64(perOctave), at: make([]loss, middle+above+1)}
	fill := func(i int, like loss) {
		f := min(t.lowest*math.Exp2(float64(i)*t.step), topPitch*m.rate)
		m.prepare(q, l, f, i*step, like)
		t.at[i].shelf = q.shelf(m.shelfCorner)
		t.at[i].twoPole, _ = q.poles(t.at[i].shelf)
	}
	fill(middle, like)
	for i := middle + 1; i < len(t.at); i++ {
		fill(i, t.at[i-1])
	}
	for i := middle - 1; i >= 0; i-- {
		fill(i, t.at[i+1])
	}
	return t
}

// alone fits the loss filter of a fundamental f0 (Hz), place number from of the axis, as
// if every packet took one period.
func (q *lossFit) alone(l law, f0 float64, from int) loss {
	q.prepare(l, f0, from, func(place) float64 { return 1 / f0 })
	t, _ := q.poles(shelf{})
	return loss{twoPole: t}
}

// prepare sets out a fit at a pitch (Hz), with the time that a packet takes by
// the sections and by a filter like it: the first fit, or that of a pitch near by.
func (m *mode) prepare(q *lossFit, l law, f0 float64, from int, like loss) {
	t0 := math.Tan(math.Pi * f0 / m.rate)
	line := m.lineFor(f0, like)
	delay := like.twoPole.groupDelayer()
	q.shortest = line / m.rate
	q.prepare(l, f0, from, func(p place) float64 {
		sum := line + delay.at(p.x) + like.shelf.groupDelay(p.v)
		for _, s := range m.sections {
			sum += s.groupDelay(p.v/t0, t0)
		}
		return max(sum, 1) / m.rate
	})
}

// placeShelf finds the corner that serves a stiff string best, or none.
func (m *mode) placeShelf(q *lossFit, l law, f0 float64, from int, like loss) {
	m.prepare(q, l, f0, from, like)
	_, least := q.poles(q.shelf(0))
	for c := 1.5; c < 60; c *= 1.4 {
		if _, worst := q.poles(q.shelf(c)); worst < least {
			least, m.shelfCorner = worst, c
		}
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
	toward := func(a, b float64) float64 { return a + float64(part*(b-a)) }
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

// groupDelayer is a filter's group delay as a ratio of two parabolas in 1 - cos w.
type groupDelayer struct{ n0, n1, n2, d0, d1, d2 float64 }

func (t twoPole) groupDelayer() groupDelayer {
	one := 1 + t.c1 + t.c2
	return groupDelayer{
		n0: -(t.c1 + 2*t.c2) * one, n1: t.c1*(1+3*t.c2) + 8*t.c2, n2: -4 * t.c2,
		d0: one * one, d1: -2*t.c1*(1+t.c2) - 8*t.c2, d2: 4 * t.c2,
	}
}

// at is the group delay in samples at x = 1 - cos w.
func (g *groupDelayer) at(x float64) float64 {
	return (g.n0 + x*(g.n1+x*g.n2)) / (g.d0 + x*(g.d1+x*g.d2))
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

// clamp keeps a pitch (Hz) to those that are compiled.
func (m *mode) clamp(f0 float64) float64 { return min(max(f0, m.lowest), topPitch*m.rate) }

// at solves the loop for a fundamental f0 (Hz), under a touch: the delay from the phase and
// the gain from the magnitude, both at the damped frequency
// z = exp((-3 ln 10/T60 + i w0)/rate), where the loop must be exactly one.
func (m *mode) at(f0 float64, t touch, c *coefficients) {
	f0 = m.clamp(f0)
	if t == (touch{}) {
		for i := range m.homes {
			if h := &m.homes[i]; h.pitch == f0 {
				*c = h.coefficients
				return
			}
		}
	}
	c.loss = m.open.loss(f0)
	slowness := 1 / m.law.decay
	if t.dark > 0 {
		c.loss = c.loss.mix(m.dull.loss(f0), t.dark)
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

// settleAt solves the loop in advance for a fundamental f0 (Hz).
func (m *mode) settleAt(f0 float64) {
	h := home{pitch: m.clamp(f0)}
	m.at(f0, touch{}, &h.coefficients)
	m.homes = append(m.homes, h)
}

// loss is the filter at a pitch (Hz), by cubic interpolation: linear
// between filters a step apart, a vibrato would cost the treble some of its decay.
func (table *lossTable) loss(f0 float64) loss {
	if len(table.at) == 1 {
		return table.at[0]
	}
	x := math.Log2(f0/table.lowest) / table.step
	i := min(max(int(x), 0), len(table.at)-2)
	t := min(1, max(0, x-float64(i)))
	if i == 0 || i == len(table.at)-2 {
		return table.at[i].mix(table.at[i+1], t)
	}
	var out loss
	for j, k := range cubic(t) {
		l := &table.at[i-1+j]
		out.c1 += k * l.c1
		out.c2 += k * l.c2
		out.shelf.drop += k * l.shelf.drop
		out.shelf.corner += k * l.shelf.corner
	}
	if !out.stable() {
		return table.at[i].mix(table.at[i+1], t)
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
	a1, a2 := float64(-2*t.c1*(1+t.c2))-8*t.c2, 4*t.c2
	least := min(a0, a0+2*a1+4*a2)
	if x := -a1 / (2 * a2); a2 > 0 && x > 0 && x < 2 {
		least = min(least, a0+float64(a1*x/2))
	}
	return math.Sqrt(max(0, least))
}

// meanKeeps is what the line's mean value keeps of itself in a frame, at a pitch that is a
// part of the rate.
func (c *coefficients) meanKeeps(pitch float64) float64 {
	return math.Pow(c.gain*real(c.loss.response(1)), pitch)
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

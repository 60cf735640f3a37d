package voice

import (
	"math"
	"math/cmplx"

	"tautwire/voice/lanes"
)

const (
	// slew is how fast a string's delay may change, samples per sample.
	slew = 0.5
	// settled is how near (samples) a gliding delay comes before it stands still.
	settled = 1e-7
)

// glide is the way of a string's length and coefficients to where they are to be.
type glide struct {
	aim     float64 // the pitch that is asked for (Hz)
	palmAim float64 // how much of the muted string's decay it is to have, 0 to 1
	darkAim float64 // how much of its darkness
	touch   touch   // both, on their way there
	pitch   float64 // the pitch on its way there, at most slew away
	rough   bool    // the target is approximate
	swift   bool    // the way is one of short steps
	from    float64 // delay that feeds the smoothing (samples)
	slope   float64
	s       [3]float64 // the smoothed delay; the last is what is read
	speed   float64    // of the last, samples a frame
	target  coefficients
	stage   [3]coefficients
	direct  [3]float64 // the smoothed pitch (Hz) of a direct read
	short   bool       // the read is direct, wholly or in part
	cell    cell

	smooth *smoothing // over the frames of the present way
	path   path       // of the delay in them
	done   int        // of them
	fast   float64    // its greatest speed, samples a frame
	fresh  bool       // the lane is not on it yet
}

// longSteps is over how many control steps a string glides at once that does so slowly.
const longSteps = 4

const (
	slow = 0.03   // samples a frame: the fastest of long ways
	far  = 3.3e-4 // s of delay: the longest of them
)

// stride chooses over how many steps the string is to glide at once: a way of many
// steps costs less, but would be heard where the pitch slams. Short ways stay so until the string has
// come to rest, for a change between them is a change of its lag.
func (l *loop) stride() *smoothing {
	g, m := &l.glide, l.pool.maker
	ahead := float64((max(g.aim/g.pitch, g.pitch/g.aim)-1)*g.target.delay) + math.Abs(g.target.delay-g.s[2])
	touched := l.damped.touched() || g.touch != touch{g.palmAim, g.darkAim}
	g.swift = g.swift || touched || g.short || g.target.direct > 0 || ahead > far*m.rate || math.Abs(g.speed) > slow
	if g.swift || l.damped.rate != l.damped.aim {
		return m.smooth
	}
	return m.smoothLong
}

// coast leads a string on that is being bent slowly, towards what the cell around the
// pitch that is asked for approximates. It reports whether that will do.
func (l *loop) coast() bool {
	g, m := &l.glide, l.pool.maker
	if g.swift || g.short || g.touch != (touch{g.palmAim, g.darkAim}) || l.damped.rate != l.damped.aim || l.damped.touched() {
		return false
	}
	var c coefficients
	f0, ok := g.cell.approximate(l.mode, l.place+float64(l.asked*(cellsInOctave/1200.0)), g.touch, &c)
	ahead := math.Abs(c.delay-g.target.delay) + math.Abs(g.target.delay-g.s[2])
	if !ok || l.hold(f0) != f0 || ahead > far*m.rate || math.Abs(g.speed) > slow {
		return false
	}
	g.target, g.pitch, g.aim, g.rough, g.smooth = c, f0, f0, true, m.smoothLong
	l.followTarget()
	return true
}

// hold clamps a pitch to what the line and the rate can sound.
func (l *loop) hold(f0 float64) float64 {
	longest := float64(l.size-4*Grid) / lineTurns
	return l.mode.clamp(max(f0, l.mode.rate/longest))
}

// settle puts everything where the pitch asks for it, at once.
func (l *loop) settle() {
	g := &l.glide
	l.mode.at(g.pitch, g.touch, &g.target)
	g.from, g.slope, g.speed, g.rough, g.swift = g.target.delay, 0, 0, false, false
	g.smooth = l.pool.maker.smooth
	for i := range g.s {
		g.s[i], g.stage[i], g.direct[i] = g.target.delay, g.target, g.pitch
	}
	g.short = g.target.direct > 0
}

// glideStep moves the pitch towards its aim and says whether anything moves.
func (l *loop) glideStep() bool {
	g := &l.glide
	g.smooth = l.pool.maker.smooth
	if g.arrived() && l.motion != gliding && g.atRest() {
		return false
	}
	g.smooth = l.stride()
	if !g.arrived() || g.rough {
		g.touch.palm = toward(g.touch.palm, g.palmAim, 0.2, 1e-4)
		g.touch.dark = toward(g.touch.dark, g.darkAim, 0.2, 1e-4)
		// at most slew samples of delay a frame: |dD| = D dp/p
		most := 1 + slew*g.smooth.frames/max(g.target.delay, shortest)
		g.pitch = min(max(g.aim, g.pitch/most), g.pitch*most)
		l.mode.at(g.pitch, g.touch, &g.target)
		g.rough = false
	}
	l.followTarget()
	if g.short {
		in := g.pitch
		for i := range g.direct {
			g.direct[i] += float64((in - g.direct[i]) * g.smooth.step)
			in = g.direct[i]
		}
		if g.arrived() && math.Abs(g.direct[2]-g.pitch) < settled*g.pitch/100 {
			l.settle()
		}
		l.leaveDirect()
		return true
	}
	if g.target.direct > 0 && g.s[2] < directFrom-0.1 {
		l.enterDirect()
		return true
	}
	if g.arrived() && math.Abs(g.s[2]-g.target.delay) < settled && math.Abs(g.s[0]-g.target.delay) < settled {
		l.settle()
		return false
	}
	return true
}

// followTarget takes the smoothed coefficients a way on.
func (l *loop) followTarget() {
	g := &l.glide
	in := &g.target
	for i := range g.stage {
		g.stage[i].approach(in, g.smooth.step, l.sections)
		in = &g.stage[i]
	}
}

// arrived says that the target is what is asked for.
func (g *glide) arrived() bool { return g.pitch == g.aim && g.touch == touch{g.palmAim, g.darkAim} }

func (g *glide) atRest() bool {
	if g.short {
		return g.direct[2] == g.pitch
	}
	return g.s[2] == g.target.delay
}

// enterDirect goes on with a direct read from the pitch that the string has now.
func (l *loop) enterDirect() {
	g := &l.glide
	now := l.pitchOf(g.s[2])
	for i := range g.direct {
		g.direct[i] = now
	}
	g.short = true
}

// leaveDirect goes back to a fractional delay once the string is long enough.
func (l *loop) leaveDirect() {
	g := &l.glide
	if g.target.direct > 0 {
		return
	}
	var c coefficients
	l.mode.at(g.direct[2], g.touch, &c)
	if c.direct > 0 {
		return
	}
	g.short = false
	g.from = c.delay
	for i := range g.s {
		g.s[i] = c.delay
	}
}

// pitchOf finds the pitch (Hz) at which a loop has this delay, by halving: the
// delay falls as the pitch rises.
func (l *loop) pitchOf(delay float64) float64 {
	var c coefficients
	low, high := l.mode.lowest, topPitch*l.mode.rate
	for range 40 {
		f := math.Sqrt(low * high)
		if l.mode.at(f, l.glide.touch, &c); c.delay > delay {
			low = f
		} else {
			high = f
		}
	}
	return low
}

// approach moves coefficients a part of the way to others.
func (c *coefficients) approach(to *coefficients, part float64, sections int) {
	c.gain += float64((to.gain - c.gain) * part)
	c.loss = c.loss.mix(to.loss, part)
	for i := range sections {
		c.sections[i][0] += float64((to.sections[i][0] - c.sections[i][0]) * part)
		c.sections[i][1] += float64((to.sections[i][1] - c.sections[i][1]) * part)
	}
}

// safeGain is the gain, at most what keeps the loop below one on the way to it:
// between two pitches the filters are those of neither. A denominator mixed of two
// that are d apart is at most d^2/8|A| smaller than the mix of their magnitudes.
func (l *loop) safeGain() float64 {
	c := &l.glide.stage[2]
	low := c.loss.lowest()
	if low <= 0 {
		return 0
	}
	d := math.Abs(c.loss.c1-l.bank.C1[l.lane]) + math.Abs(c.loss.c2-l.bank.C2[l.lane])
	return min(c.gain, ceiling*max(0, low-float64(d*d)/(2*low)))
}

// directNow writes the taps of a direct read at the smoothed pitch, with all gains in them, mixed with
// those of a fractional delay where both can serve.
func (l *loop) directNow(out *[taps]float64) {
	g := &l.glide
	var c coefficients
	l.mode.at(g.direct[2], g.touch, &c)
	w := 2 * math.Pi * g.direct[2] / l.mode.rate
	z := cmplx.Rect(c.shrink, w)
	directTaps(z, func(z complex128) complex128 { return c.rest(z, l.sections) }, out)
	if c.direct < 1 {
		var h [taps]float64
		l.ip().at(min(1, c.delay-shortest), &h)
		for i := range out {
			out[i] = float64(c.direct*out[i]) + float64((1-c.direct)*c.gain*h[i])
		}
	}
	c.delay = g.stage[2].delay
	g.stage[2] = c
	k := l.damped.perTrip(g.pitch)
	for i := range out {
		out[i] *= k
	}
}

func (l *loop) ip() *interpolator { return l.pool.maker.ip }

// stand fixes every coefficient where it is.
func (l *loop) stand() {
	var h [taps]float64
	g, b, lane := &l.glide, &l.bank.Bank, l.lane
	l.level = 1
	if g.short {
		l.length = shortest
		l.directNow(&h) // which brings filters of its own
		l.takeFilters()
	} else {
		l.takeFilters()
		l.length = int(g.s[2])
		l.ip().at(g.s[2]-float64(l.length), &h)
		l.level = float32(l.safeGain() * l.damped.perTrip(g.pitch))
	}
	for i := range h {
		h[i] *= float64(l.level)
	}
	l.setTaps(&h)
	b.Level[lane], b.DLevel[lane] = 1, 0
	l.motion = still
	l.house()
}

// setTaps gives the loop taps that stand, for the whole part of its delay.
func (l *loop) setTaps(h *[taps]float64) {
	b, lane := &l.bank.Bank, l.lane
	var f [taps]float32
	for i := range f {
		f[i], b.DTap[i][lane] = float32(h[i]), 0
	}
	b.SetTaps(lane, &f)
	b.Back[lane] = int64(l.length + taps - 1 - center)
	l.glide.speed = 0
}

// unlevel takes the level of a still string out of its taps, so that it can move.
func (l *loop) unlevel() {
	g, b, lane := &l.glide, &l.bank.Bank, l.lane
	b.Level[lane] = l.levelNow()
	if l.motion == ramping {
		return
	}
	var h [taps]float64
	l.length = int(g.s[2])
	l.ip().at(g.s[2]-float64(l.length), &h)
	l.setTaps(&h)
}

// levelNow is the level of the read.
func (l *loop) levelNow() float32 {
	b, lane := &l.bank.Bank, l.lane
	switch {
	case l.motion == ramping || l.motion == gliding:
		return b.Level[lane]
	case l.motion == still && l.length != shortest:
		return l.level
	}
	var sum float32 // the taps of a delay add up to the read's gain
	for i := range b.Tap {
		sum += b.Tap[i][lane]
	}
	return sum
}

// takeFilters sets the loss and the sections to the smoothed coefficients.
func (l *loop) takeFilters() {
	c, b, lane := &l.glide.stage[2], &l.bank.Bank, l.lane
	b.C1[lane], b.C2[lane] = c.loss.c1, c.loss.c2
	b.DC1[lane], b.DC2[lane] = 0, 0
	b.Gain[lane], b.Zero[lane], b.Pole[lane] = c.loss.shelf.filter()
	b.DGain[lane], b.DZero[lane], b.DPole[lane] = 0, 0, 0
	for i := range l.sections {
		s := &b.Section[i]
		s.A1[lane], s.A2[lane] = c.sections[i][0], c.sections[i][1]
		s.DA1[lane], s.DA2[lane] = 0, 0
	}
}

// beginRamp moves the level and the filters, or the taps of a direct read, from where they are to where they
// are to be at the end of the step, the delay standing.
func (l *loop) beginRamp() {
	g, b, lane := &l.glide, &l.bank.Bank, l.lane
	if !g.short {
		l.unlevel()
		l.rampFilters(Grid)
		b.DLevel[lane] = (float32(l.safeGain()*l.damped.perTrip(g.pitch)) - b.Level[lane]) / Grid
		l.motion = ramping
		l.house()
		return
	}
	if l.motion == ramping || l.motion == gliding {
		l.relevel()
	}
	var h [taps]float64
	l.directNow(&h)
	if l.length != shortest {
		l.shiftTaps(shortest - l.length)
		l.length = shortest
		b.Back[lane] = int64(l.length + taps - 1 - center)
	}
	for i := range h {
		b.DTap[i][lane] = (float32(h[i]) - b.Tap[i][lane]) / Grid
	}
	b.Level[lane], b.DLevel[lane] = 1, 0
	l.rampFilters(Grid)
	l.motion = changing
	l.house()
}

// relevel puts the level of a moving string into its taps, as they are now.
func (l *loop) relevel() {
	b, lane := &l.bank.Bank, l.lane
	if l.motion == gliding {
		l.unlevel()
	}
	for i := range b.Tap {
		b.Tap[i][lane] *= b.Level[lane]
	}
}

// shiftTaps moves the taps by whole samples, so that they read the same
// samples from a line longer by n.
func (l *loop) shiftTaps(n int) {
	b, lane := &l.bank.Bank, l.lane
	var old [taps]float32
	for i := range old {
		old[i] = b.Tap[i][lane]
	}
	for i := range old {
		b.Tap[i][lane] = 0
		if j := i + n; j >= 0 && j < taps {
			b.Tap[i][lane] = old[j]
		}
	}
}

// rampFilters moves the filters to where they are to be in n frames.
func (l *loop) rampFilters(n float64) {
	c, b, lane := &l.glide.stage[2], &l.bank.Bank, l.lane
	b.DC1[lane], b.DC2[lane] = (c.loss.c1-b.C1[lane])/n, (c.loss.c2-b.C2[lane])/n
	if l.sections == 0 {
		return
	}
	gain, zero, pole := c.loss.shelf.filter()
	b.DGain[lane] = (gain - b.Gain[lane]) / n
	b.DZero[lane] = (zero - b.Zero[lane]) / n
	b.DPole[lane] = (pole - b.Pole[lane]) / n
	for i := range l.sections {
		s := &b.Section[i]
		s.DA1[lane] = (c.sections[i][0] - s.A1[lane]) / n
		s.DA2[lane] = (c.sections[i][1] - s.A2[lane]) / n
	}
}

// beginGlide lets the delay follow the pitch.
func (l *loop) beginGlide() {
	g, b, lane := &l.glide, &l.bank.Bank, l.lane
	b.Level[lane] = l.levelNow()
	n := g.smooth.frames
	level := float32(l.safeGain() * l.damped.perTrip(g.pitch))
	b.DLevel[lane] = (level - b.Level[lane]) / float32(n)
	aim := max(g.target.delay, shortest+0.5)
	// a touch moves the delay too, by the lag of its darker filter
	g.slope = min(slew, max(-slew, (aim-g.from)/n))
	before, speed := g.s[2], g.speed
	g.speed = g.smooth.follow(&g.s, g.from, g.slope)
	g.from += float64(n * g.slope)
	g.path = newPath(before, g.s[2], speed, g.speed, n)
	g.fast, g.done, g.fresh = g.path.fastest(n), 0, true
	l.rampFilters(n)
	l.motion = gliding
	l.house()
	f := &l.bank.Glide[l.lane].Finger
	f.Firm = float32(l.damped.finger)
	f.Side = int64(l.trip() / float64(max(2, l.damped.node)) * (1 << 32))
	l.widen()
}

// set puts a lane on the path, its taps standing for Block frames.
func (p *path) set(b *lanes.Bank, lane int) {
	k := float64(b.Block)
	g := &b.Glide[lane]
	g.On = true
	const one = 1 << 32
	g.Delay = int64((p[0] + p[1] + p[2] + p[3]) * one)
	g.D1 = int64((float64(p[1]*k) + float64(p[2]*(float64(k*k)+2*k)) + float64(p[3]*(float64(k*k*k)+float64(3*k*k)+3*k))) * one)
	g.D2 = int64((float64(2*p[2]*k*k) + float64(p[3]*(float64(6*k*k)+float64(6*k*k*k)))) * one)
	g.D3 = int64(float64(6*p[3]*k*k*k) * one)
	b.DOffset[lane] = float32(p[1] + float64(3*p[2]) + float64(7*p[3]))
	b.D2Offset[lane] = float32(float64(2*p[2]) + float64(12*p[3]))
	b.D3Offset[lane] = float32(6 * p[3])
}

package voice

import (
	"math"
	"math/cmplx"
)

const (
	// glideTime is each of the three one-poles (s) that smooth a string's length.
	glideTime = 0.003
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
	from    float64 // delay that feeds the smoothing (samples)
	slope   float64
	s       [3]float64 // the smoothed delay; the last is what is read
	pole    float64    // of a frame
	step    float64    // the same of a control step
	target  coefficients
	stage   [3]coefficients
	direct  [3]float64 // the smoothed pitch (Hz) of a direct read
	short   bool       // the read is direct, wholly or in part
}

// hold clamps a pitch to what the line and the rate can sound.
func (l *loop) hold(f0 float64) float64 {
	longest := float64(len(l.line))/2 - 4*Grid
	return min(max(f0, l.mode.rate/longest, l.mode.lowest), topPitch*l.mode.rate)
}

// settle puts everything where the pitch asks for it, at once.
func (l *loop) settle() {
	g := &l.glide
	l.mode.at(g.pitch, g.touch, &g.target)
	g.from, g.slope = g.target.delay, 0
	for i := range g.s {
		g.s[i], g.stage[i], g.direct[i] = g.target.delay, g.target, g.pitch
	}
	g.short = g.target.direct > 0
}

// glideStep moves the pitch towards its aim and says whether anything moves.
func (l *loop) glideStep() bool {
	g := &l.glide
	if g.arrived() && l.motion != gliding && g.atRest() {
		return false
	}
	if !g.arrived() {
		g.touch.palm = toward(g.touch.palm, g.palmAim, 0.2, 1e-4)
		g.touch.dark = toward(g.touch.dark, g.darkAim, 0.2, 1e-4)
		// at most slew samples of delay a frame: |dD| = D dp/p
		most := 1 + slew*Grid/max(g.target.delay, shortest)
		g.pitch = min(max(g.aim, g.pitch/most), g.pitch*most)
		l.mode.at(g.pitch, g.touch, &g.target)
	}
	for i := range g.stage {
		in := &g.target
		if i > 0 {
			in = &g.stage[i-1]
		}
		g.stage[i].approach(in, g.step, l.sections)
	}
	if g.short {
		in := g.pitch
		for i := range g.direct {
			g.direct[i] += (in - g.direct[i]) * g.step
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
	c.gain += (to.gain - c.gain) * part
	c.loss = c.loss.mix(to.loss, part)
	for i := range sections {
		c.sections[i][0] += (to.sections[i][0] - c.sections[i][0]) * part
		c.sections[i][1] += (to.sections[i][1] - c.sections[i][1]) * part
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
	d := math.Abs(c.loss.c1-l.c1) + math.Abs(c.loss.c2-l.c2)
	return min(c.gain, ceiling*max(0, low-d*d/(2*low)))
}

// tapsNow writes the read's taps for the smoothed coefficients, with all gains
// in them, and returns the whole part of the delay.
func (l *loop) tapsNow(out *[taps]float64) (length int) {
	g := &l.glide
	if !g.short {
		length = int(g.s[2])
		l.ip.at(g.s[2]-float64(length), out)
		gain := l.safeGain()
		for i := range out {
			out[i] *= gain
		}
	} else {
		length = shortest
		l.directNow(out)
	}
	l.damp(out)
	return length
}

// directNow writes the taps of a direct read at the smoothed pitch, mixed with
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
		l.ip.at(min(1, c.delay-shortest), &h)
		for i := range out {
			out[i] = c.direct*out[i] + (1-c.direct)*c.gain*h[i]
		}
	}
	c.delay = g.stage[2].delay
	g.stage[2] = c
}

// stand fixes every coefficient where it is.
func (l *loop) stand() {
	var h [taps]float64
	l.takeFilters()
	l.length = l.tapsNow(&h)
	l.takeFilters() // a direct read brings its own
	for i := range h {
		l.h[i], l.dh[i] = float32(h[i]), 0
	}
	l.motion = still
}

// freeze gives a gliding string the taps of where it is now.
func (l *loop) freeze() {
	var h [taps]float64
	delay := l.glide.s[2]
	l.length = int(delay)
	l.ip.at(delay-float64(l.length), &h)
	for i := range h {
		l.h[i] = l.gain * float32(h[i])
	}
}

// takeFilters sets the loss and the sections to the smoothed coefficients.
func (l *loop) takeFilters() {
	c := &l.glide.stage[2]
	l.c1, l.c2 = c.loss.c1, c.loss.c2
	l.shelf[0], l.shelf[1], l.shelf[2] = c.loss.shelf.filter()
	l.a = c.sections
}

// beginRamp moves the taps and filters from where they are to where they are
// to be at the end of the step, the line's length standing.
func (l *loop) beginRamp() {
	var h [taps]float64
	if l.motion == gliding {
		l.freeze()
	}
	before := l.length
	length := l.tapsNow(&h)
	if length != before {
		l.shiftTaps(length - before)
		l.length = length
	}
	for i := range h {
		l.dh[i] = (float32(h[i]) - l.h[i]) / Grid
	}
	l.rampFilters()
	l.motion = ramping
}

// shiftTaps moves the taps by whole samples, so that they read the same
// samples from a line longer by n.
func (l *loop) shiftTaps(n int) {
	old := l.h
	for i := range l.h {
		l.h[i] = 0
		if j := i + n; j >= 0 && j < taps {
			l.h[i] = old[j]
		}
	}
}

func (l *loop) rampFilters() {
	c := &l.glide.stage[2]
	l.dc1, l.dc2 = (c.loss.c1-l.c1)/Grid, (c.loss.c2-l.c2)/Grid
	k, zero, pole := c.loss.shelf.filter()
	l.dShelf = [3]float64{(k - l.shelf[0]) / Grid, (zero - l.shelf[1]) / Grid, (pole - l.shelf[2]) / Grid}
	for i := range l.sections {
		l.da[i][0] = (c.sections[i][0] - l.a[i][0]) / Grid
		l.da[i][1] = (c.sections[i][1] - l.a[i][1]) / Grid
	}
}

// beginGlide lets the length follow the pitch frame by frame.
func (l *loop) beginGlide() {
	g := &l.glide
	gain := float32(l.safeGain() * l.damped.perTrip(g.pitch))
	if l.motion != gliding {
		var sum float32
		for _, h := range l.h {
			sum += h
		}
		l.gain = sum // the taps of a delay add up to the read's gain
	}
	aim := max(g.target.delay, shortest+0.5)
	// a touch moves the delay too, by the lag of its darker filter
	g.slope = min(slew, max(-slew, (aim-g.from)/Grid))
	l.dg = (gain - l.gain) / Grid
	l.rampFilters()
	l.motion = gliding
}

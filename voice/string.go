package voice

import (
	"math"
	"math/cmplx"
)

// Grid is the number of frames between control steps. Chunks given to Render
// never cross a multiple of it, counted from the stream's start.
const Grid = 32

const (
	// silence is -120 dBFS: a string below it is at rest.
	silence = 1e-6
	// bias keeps subnormal numbers, which cost 15 to 40 ns each, out of the loop.
	bias = 1e-18
	// glideTime is each of the three one-poles (s) that smooth a string's length.
	glideTime = 0.003
	// slew is how fast a string's delay may change, samples per sample.
	slew = 0.5
	// settled is how near (samples) a gliding delay comes before it stands still.
	settled = 1e-7
)

// motion is how a string is computed over the present control step.
type motion uint8

const (
	still   motion = iota // every coefficient stands
	ramping               // the taps and the loss move, the line's length stands
	gliding               // the length moves
)

// loop is one polarization of one string: the delay line and the filters that
// a trip passes.
//
//	y[n] = e[n] + allpass(loss(sum over i of h_i y[n - length + center - i]))
//
// Each y is computed by itself, from samples older than it: there is no block,
// so the pitch is limited by the rate alone.
//
// The line is straight, not a ring: samples are appended, and when the slot is
// full its newest part, all that a trip can reach, moves to the front. So no
// index is ever wrapped.
type loop struct {
	mode *mode
	ip   *interpolator

	line []float32
	w    int // where the next sample goes
	room int // the part of line in use

	// as the present step has them
	motion   motion
	length   int // the whole part of the delay
	h, dh    [taps]float32
	c1, c2   float64 // in double precision: with dark strings 1 + c1 + c2 is small
	dc1, dc2 float64
	v1, v2   float64    // the loss filter's last two outputs
	shelf    [3]float64 // k, zero, pole
	dShelf   [3]float64
	s1       float64 // the shelf's last output
	sections int
	a        [maxSections][2]float64
	da       [maxSections][2]float64
	x, x1    [maxSections + 1]float64 // what went through between sections, one and two frames ago
	gain, dg float32                  // of a gliding read

	glide  glide
	damped damping

	loud  bool // the line has been above silence in this control step
	quiet int  // frames since the last step in which it was
}

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
	inReach bool       // the read is direct, wholly or in part
}

// damping is what fingers and felt take from a trip beside the law.
type damping struct {
	rate, aim float64 // 1/s: 1/T60 added to the law's
	node      int     // a finger at 1/node of the string
	finger    float64 // 0 to 0.25: how firmly
	fingerAim float64
}

// tune sets a string at rest on its pitch (Hz), on an empty line of slot.
func (l *loop) tune(m *mode, ip *interpolator, slot []float32, f0 float64) {
	*l = loop{mode: m, ip: ip, line: slot, sections: len(m.sections), quiet: math.MaxInt32}
	g := &l.glide
	g.pole = 1 - math.Exp(-1/(glideTime*m.rate))
	g.step = 1 - math.Exp(-Grid/(glideTime*m.rate))
	f0 = l.hold(f0)
	g.aim, g.pitch = f0, f0
	l.settle()
	l.room = l.need()
	l.w = l.keep()
	clear(l.line[:l.w])
	l.stand()
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
	g.inReach = g.target.direct > 0
}

// keep is how many past samples a trip can reach.
func (l *loop) keep() int {
	// A finger in the middle reads half a trip further back. It may come at any
	// time, and must find the same then however the stream has been cut.
	const reach = 1.5
	d := l.glide.s[2]
	return int(reach*d) + taps + 2*Grid
}

// need is how much of the slot to use: enough that the line is seldom moved,
// little enough that it stays in the cache.
func (l *loop) need() int { return min(len(l.line), max(1024, 4*l.keep())) }

// control prepares the next Grid frames.
func (l *loop) control() {
	l.listen()
	g := &l.glide
	moved := l.glideStep()
	softened := l.damped.step()
	switch {
	case moved && !g.inReach:
		l.beginGlide()
	case moved || softened:
		l.beginRamp()
	default:
		if l.motion != still {
			l.stand()
		}
	}
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
	if g.inReach {
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
	if g.inReach {
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
	g.inReach = true
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
	g.inReach = false
	g.from = c.delay
	for i := range g.s {
		g.s[i] = c.delay
	}
}

// pitchOf finds the pitch (Hz) at which a loop has this delay.
func (l *loop) pitchOf(delay float64) float64 {
	var c coefficients
	f := l.glide.pitch
	for range 20 {
		l.mode.at(f, l.glide.touch, &c)
		// dD/df = -rate/f^2, but for the filters' lag
		f = min(max(f+(c.delay-delay)*f*f/l.mode.rate, l.mode.lowest), topPitch*l.mode.rate)
	}
	return f
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
	d := math.Abs(c.loss.c1-l.c1) + math.Abs(c.loss.c2-l.c2)
	return min(c.gain, ceiling*max(0, low-d*d/(2*low)))
}

// step moves the damping towards its aim and says whether it moves.
func (d *damping) step() bool {
	const part = 0.2 // of the rest, each step: some 5 ms in all
	if d.rate == d.aim && d.finger == d.fingerAim {
		return false
	}
	d.rate = toward(d.rate, d.aim, part, 1e-4)
	d.finger = toward(d.finger, d.fingerAim, part, 1e-6)
	return true
}

func toward(x, aim, part, near float64) float64 {
	if x += (aim - x) * part; math.Abs(x-aim) < near {
		return aim
	}
	return x
}

// tapsNow writes the read's taps for the smoothed coefficients, with all gains
// in them, and returns the whole part of the delay.
func (l *loop) tapsNow(out *[taps]float64) (length int) {
	g := &l.glide
	if !g.inReach {
		length = int(g.s[2])
		l.ip.at(g.s[2]-float64(length), out)
		for i := range out {
			out[i] *= l.safeGain()
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
		l.ip.at(c.delay-shortest, &h)
		for i := range out {
			out[i] = c.direct*out[i] + (1-c.direct)*c.gain*h[i]
		}
	}
	c.delay = g.stage[2].delay
	g.stage[2] = c
}

// damp takes from the taps what a damper takes from a trip.
func (l *loop) damp(h *[taps]float64) {
	if l.damped.rate == 0 {
		return
	}
	k := l.damped.perTrip(l.glide.pitch)
	for i := range h {
		h[i] *= k
	}
}

// perTrip is the gain that the damping leaves to a trip at a pitch (Hz).
func (d *damping) perTrip(f0 float64) float64 { return math.Exp(-decayNepers * d.rate / f0) }

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
	g.slope = (aim - g.from) / Grid
	l.dg = (gain - l.gain) / Grid
	l.rampFilters()
	l.motion = gliding
}

// render appends len(out) frames: each is a trip's return plus e, the force, which
// may be nil.
func (l *loop) render(out, e []float32) {
	if l.w+len(out) > l.room {
		l.slide()
	}
	switch {
	case l.damped.finger > 0 && !l.glide.inReach:
		l.renderTouched(out, e)
	case l.motion == gliding:
		l.renderGliding(out, e)
	case l.motion == ramping:
		l.renderRamping(out, e)
	default:
		l.renderStill(out, e)
	}
}

// slide moves the part of the line that is still needed to its front.
func (l *loop) slide() {
	keep := min(l.keep(), l.w)
	copy(l.line, l.line[l.w-keep:l.w])
	l.w = keep
	l.room = l.need()
}

// listen keeps account, each control step, of how long the line has been silent.
func (l *loop) listen() {
	if l.loud {
		l.quiet = 0
	} else {
		l.quiet = min(l.quiet+Grid, math.MaxInt32/2)
	}
	l.loud = false
}

// meanKeeps is what the line's mean value keeps of itself in a frame.
func (l *loop) meanKeeps() float64 {
	c := &l.glide.target
	trip := c.gain * real(c.loss.response(1))
	return math.Pow(trip, l.glide.pitch/l.mode.rate)
}

// atRest says that the whole line is below silence.
func (l *loop) atRest() bool { return !l.loud && l.quiet > l.keep() }

// end takes a trip through the filters and adds the force at its end.
func (l *loop) end(x, e float32) float32 {
	v := float64(x) - float64(l.c2*l.v2) - float64(l.c1*l.v1)
	before := l.v1
	l.v2, l.v1 = l.v1, v
	if l.sections > 0 {
		l.s1 = float64(l.shelf[0]*(v-float64(l.shelf[1]*before))) + float64(l.shelf[2]*l.s1)
		v = l.disperse(l.s1)
	}
	return float32(v) + e
}

// disperse passes a sample through the allpass sections, in direct form I: one
// section's output is the next one's input, history and all.
func (l *loop) disperse(in float64) float64 {
	for i := range l.sections {
		a1, a2 := l.a[i][0], l.a[i][1]
		x, x1 := l.x[i], l.x1[i]
		y, y1 := l.x[i+1], l.x1[i+1]
		out := float64(a2*(in-y1)) + x1 + float64(a1*(x-y))
		l.x1[i], l.x[i] = x, in
		in = out
	}
	n := l.sections
	l.x1[n], l.x[n] = l.x[n], in
	return in
}

func (l *loop) renderStill(out, e []float32) {
	h := l.h
	first := l.w - l.length - (taps - 1 - center)
	src := l.line[first : first+len(out)+taps-1]
	dst := l.line[l.w : l.w+len(out)]
	l.w += len(out)
	if l.sections > 0 {
		for i := range dst {
			y := l.end(read(src[i:i+taps:i+taps], &h), at(e, i))
			dst[i], out[i] = y, y
		}
		l.note(out)
		return
	}
	c1, c2, v1, v2 := l.c1, l.c2, l.v1, l.v2
	for i := range dst {
		x := float64(read(src[i:i+taps:i+taps], &h)) - float64(c2*v2)
		v2, v1 = v1, x-float64(c1*v1)
		y := float32(v1)
		if e != nil {
			y += e[i]
		}
		dst[i], out[i] = y, y
	}
	l.v1, l.v2 = v1, v2
	l.note(out)
}

// note takes down whether anything of what was rendered is above silence.
func (l *loop) note(out []float32) {
	for _, y := range out {
		if y > silence || y < -silence {
			l.loud = true
			return
		}
	}
}

// at is a force that may be none at all.
func at(e []float32, i int) float32 {
	if e == nil {
		return 0
	}
	return e[i]
}

// read is the dot product of the taps, the newest first, with twelve samples, the oldest first.
func read(s []float32, h *[taps]float32) float32 {
	s = s[:taps]
	a := bias + float32(s[11]*h[0]) + float32(s[10]*h[1]) + float32(s[9]*h[2]) + float32(s[8]*h[3])
	b := float32(s[7]*h[4]) + float32(s[6]*h[5]) + float32(s[5]*h[6]) + float32(s[4]*h[7])
	c := float32(s[3]*h[8]) + float32(s[2]*h[9]) + float32(s[1]*h[10]) + float32(s[0]*h[11])
	return a + (b + c)
}

func (l *loop) renderRamping(out, e []float32) {
	for i := range out {
		l.moveFilters()
		for t := range l.h {
			l.h[t] += l.dh[t]
		}
		first := l.w - l.length - (taps - 1 - center)
		y := l.end(read(l.line[first:first+taps], &l.h), at(e, i))
		l.line[l.w] = y
		out[i] = y
		l.w++
	}
	l.note(out)
}

func (l *loop) moveFilters() {
	l.c1 += l.dc1
	l.c2 += l.dc2
	for i := range l.shelf {
		l.shelf[i] += l.dShelf[i]
	}
	for i := range l.sections {
		l.a[i][0] += l.da[i][0]
		l.a[i][1] += l.da[i][1]
	}
}

func (l *loop) renderGliding(out, e []float32) {
	for i := range out {
		l.moveFilters()
		l.gain += l.dg
		x := float32(l.gain * l.readAt(l.moveLength()))
		y := l.end(x, at(e, i))
		l.line[l.w] = y
		out[i] = y
		l.w++
	}
	l.note(out)
}

// moveLength moves the smoothed delay by a frame and returns it (samples).
func (l *loop) moveLength() float64 {
	g := &l.glide
	g.from += g.slope
	g.s[0] += float64((g.from - g.s[0]) * g.pole)
	g.s[1] += float64((g.s[0] - g.s[1]) * g.pole)
	g.s[2] += float64((g.s[1] - g.s[2]) * g.pole)
	return g.s[2]
}

// readAt reads the line at a delay (samples) from the table of taps.
func (l *loop) readAt(delay float64) float32 {
	length := int(delay)
	part := (delay - float64(length)) * rows
	row := int(part)
	t := float32(part - float64(row))
	a, b := &l.ip.table[row], &l.ip.table[row+1]
	var h [taps]float32
	for i := range h {
		h[i] = a[i] + float32(t*(b[i]-a[i]))
	}
	first := l.w - length - (taps - 1 - center)
	return read(l.line[first:first+taps], &h)
}

// renderTouched renders with a finger at 1/node of the string, which takes
// 2 finger (1 - cos(2 pi n/node)) of partial n on each trip, and nothing from
// the partials that rest there. It is a comb without delay, so the pitch stays.
func (l *loop) renderTouched(out, e []float32) {
	finger := float32(l.damped.finger)
	if l.motion != gliding {
		l.standGliding()
	}
	for i := range out {
		l.moveFilters()
		l.gain += l.dg
		d := l.moveLength()
		trip := l.mode.rate / l.glide.pitch
		side := trip / float64(l.damped.node)
		x := l.readAt(d)
		if d-side >= shortest && int(d+side)+taps < l.w {
			x = float32((1-2*finger)*x) + float32(finger*(l.readAt(d-side)+l.readAt(d+side)))
		}
		y := l.end(float32(l.gain*x), at(e, i))
		l.line[l.w] = y
		out[i] = y
		l.w++
	}
	l.note(out)
}

// standGliding makes a glide that does not move of a string that stands.
func (l *loop) standGliding() {
	g := &l.glide
	l.takeFilters()
	g.slope, l.dc1, l.dc2 = 0, 0, 0
	l.da, l.dShelf = [maxSections][2]float64{}, [3]float64{}
	g.from = g.s[2]
	for i := range g.s {
		g.s[i] = g.s[2]
	}
	l.gain, l.dg = float32(l.safeGain()*l.damped.perTrip(g.pitch)), 0
}

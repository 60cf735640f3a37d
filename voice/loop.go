package voice

import "math"

// Grid is the number of frames between control steps, at which all that moves
// slowly is computed anew. A voice counts them from when it was strung.
const Grid = 32

const (
	// silence is -120 dBFS: a string below it is at rest.
	silence = 1e-6
	// bias keeps subnormal numbers, which cost 15 to 40 ns each, out of the loop.
	bias = 1e-18
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
	case moved && !g.short:
		l.beginGlide()
	case moved || softened:
		l.beginRamp()
	default:
		if l.motion != still {
			l.stand()
		}
	}
}

// render appends len(out) frames: each is a trip's return plus e, the force, which
// may be nil.
func (l *loop) render(out, e []float32) {
	if l.w+len(out) > l.room {
		l.slide()
	}
	switch {
	case l.damped.finger > 0 && !l.glide.short:
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
func (l *loop) meanKeeps() float64 { return l.glide.target.meanKeeps(l.glide.pitch / l.mode.rate) }

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

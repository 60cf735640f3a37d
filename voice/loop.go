package voice

import (
	"math"
	"slices"

	"tautwire/voice/lanes"
)

// Grid is the number of frames of a control step, at whose start all that
// moves slowly is computed anew.
const Grid = lanes.Frames

// silence is -120 dBFS: a string below it is at rest.
const silence = 1e-6

// motion is how a loop is computed over the present control step.
type motion uint8

const (
	still    motion = iota // every coefficient stands
	ramping                // the level and the filters move, the delay stands
	changing               // the taps of a direct read move
	gliding                // the delay moves
)

// alone is the motion for a lane that is computed by itself.
func (m motion) alone() lanes.Motion {
	switch m {
	case still:
		return lanes.Still
	case gliding:
		return lanes.Gliding
	}
	return lanes.Moving
}

// loop is one polarization of one string: the delay line and the filters that
// a trip passes, in a lane of a bank.
//
//	y[n] = e[n] + allpass(loss(sum over i of h_i y[n - length + center - i]))
//
// Each y is computed by itself, from samples older than it: there is no block,
// so the pitch is limited by the rate alone.
//
// The line is a ring, as short as a trip allows, so that many strings stay in the cache. Its last
// samples are repeated before its first, and what is written past its end is moved to the front
// afterwards, so that no index is wrapped within some frames.
type loop struct {
	mode     *mode
	voice    *Voice
	pool     *Pool
	sections int
	mix      float32 // of the stroke and of the output

	pitch        float64 // Hz: the design's
	asked, cents float64 // from there: asked for, and already heard of
	place        float64 // of the pitch, in parts of an octave above the mode's lowest

	start, size int // the ring's first sample in the pool's line, and the most that it can hold
	bank        *bank
	lane        int

	motion motion
	length int     // the whole part of the delay
	level  float32 // of the read, while still: in the taps

	glide   glide
	damped  damping
	strokes [strokes]stroke

	controlled int64 // the control step that last led it on
}

// shortestLane is the whole delay (samples) from which a vector unit can
// compute a loop.
const shortestLane = center + lanes.Shortest

// tune sets a string at rest on its pitch (Hz), on an empty line.
func (l *loop) tune(f0 float64) {
	m := l.mode
	l.glide = glide{}
	f0 = l.hold(f0)
	l.glide.aim, l.glide.pitch = f0, f0
	l.sections = len(m.sections)
	l.settle()
	l.length = int(l.glide.s[2])
	l.house()
	l.bank.quiet[l.lane] = math.MaxInt32 / 2
	l.layOut()
	l.stand()
	l.wake() // what has been asked of the string is still to come
}

// house gives the loop a lane that can compute it.
func (l *loop) house() {
	g := &l.glide
	least := g.s[2]
	if l.motion == gliding {
		least = min(least, g.path[0]) - float64(g.fast*g.smooth.frames/8)
	}
	solo := g.short || l.damped.touched() || int(least) < shortestLane
	if l.bank != nil && l.bank.solo == solo && int(l.bank.Sections) == l.sections {
		return
	}
	from, lane := l.bank, l.lane
	l.pool.place(l, solo)
	if from != nil {
		l.bank.inherit(l.lane, from, lane)
		from.leave(l.pool, lane)
	}
}

// wake makes sure that the loop is led on at the next control step.
func (l *loop) wake() { l.bank.restless.set(l.lane) }

// unhouse makes the loop's lane idle.
func (l *loop) unhouse() {
	if l.bank != nil {
		l.bank.leave(l.pool, l.lane)
		l.bank = nil
	}
}

// keep is how many past samples a trip can reach.
func (l *loop) keep() int {
	// A finger in the middle reads half a trip further back. It may come at any
	// time, and must find the same then however the stream has been cut.
	return int(l.glide.s[2]+l.trip()/2) + taps + 2*Grid
}

// trip is about how long a trip takes as the delay is on its way, samples.
func (l *loop) trip() float64 {
	g := &l.glide
	return g.s[2] + max(0, l.mode.rate/g.pitch-g.target.delay)
}

// ringRoom is what a loop's part of the line holds beside its ring.
const ringRoom = lanes.History + lanes.Front + Grid + lanes.Spill

// layOut lays an empty ring for the present delay.
func (l *loop) layOut() {
	b, lane := l.bank, l.lane
	const least = 512 // or it would come round too often
	ring := min(max(l.keep(), least), l.size)
	b.At[lane], b.Ring[lane] = int64(l.start), int64(ring)
	b.Floor[lane], b.end[lane] = int64(l.start-lanes.Front), int64(l.start+ring)
	clear(l.pool.bench.Line[l.start-lanes.Front-lanes.History : l.start+ring])
}

// comeRound takes the loop back to the ring's front.
func (l *loop) comeRound() {
	b, lane, line := l.bank, l.lane, l.pool.bench.Line
	end, at := b.end[lane], b.At[lane]
	copy(line[l.start-lanes.Front:], line[end-lanes.Front:at])
	b.At[lane] -= b.Ring[lane]
}

// widen makes the ring longer where the delay is going to need it. What is in it is
// turned until the oldest comes first, and the loop goes on at its end.
func (l *loop) widen() {
	b, lane := l.bank, l.lane
	need := l.keep()
	if need <= int(b.Ring[lane]) {
		return
	}
	ring := l.pool.bench.Line[l.start : l.start+int(b.Ring[lane])]
	at := int(b.At[lane]) - l.start
	slices.Reverse(ring[:at])
	slices.Reverse(ring[at:])
	slices.Reverse(ring)
	b.At[lane] = b.end[lane]
	b.Ring[lane] = int64(min(2*need, l.size))
	b.end[lane] = int64(l.start) + b.Ring[lane]
}

// follow moves the strokes' echoes with the pitch.
func (l *loop) follow() {
	for j := range l.strokes {
		if s := &l.strokes[j]; !s.over() {
			s.follow(l.glide.pitch)
		}
	}
}

// control prepares the next Grid frames.
func (l *loop) control() {
	g := &l.glide
	if l.motion == gliding {
		if g.done += Grid; g.done < int(g.smooth.frames) {
			return
		}
	}
	if bent := l.cents != l.asked; bent && l.coast() {
		l.cents = l.asked
		l.beginGlide()
		return
	} else if bent || g.rough {
		l.cents = l.asked
		g.aim = l.hold(l.pitch * octaves(l.asked))
	}
	moved := l.glideStep()
	softened := l.damped.step()
	switch {
	case (moved || l.damped.touched()) && !g.short:
		l.beginGlide()
	case moved || softened:
		l.beginRamp()
	default:
		if l.motion != still {
			l.stand()
		}
		if !l.damped.touched() {
			l.bank.restless.clear(l.lane)
		}
	}
}

// meanKeeps is what the line's mean value keeps of itself in a frame.
func (l *loop) meanKeeps() float64 { return l.glide.target.meanKeeps(l.glide.pitch / l.mode.rate) }

// atRest says that the whole line is below silence.
func (l *loop) atRest() bool { return int(l.bank.quiet[l.lane]) > l.keep() }

package voice

import (
	"math"
	"math/bits"

	"tautwire/voice/lanes"
)

// bank is up to eight loops that are computed together, as far as they have been.
// What each control step needs of every loop lies here side by side.
type bank struct {
	lanes.Bank
	loops  [lanes.Width]*loop
	used   int                // lanes that are
	live   [lanes.Width]int64 // -1 where one is
	solo   bool               // lanes that no vector unit can compute are computed one by one
	motion lanes.Motion
	done   int // frames of the present step

	restless marks // something moves, or is going to
	struck   marks // a stroke may be under way
	fading   marks // the voice is

	energy [lanes.Width]float64 // mean square of what the loop lately put out
	leak   [lanes.Width]float64 // of the energy, a control step
	end    [lanes.Width]int64   // where each loop's ring ends
	quiet  [lanes.Width]int32   // frames since the last step in which the line was above silence

	force  lanes.Force
	forced bool // there is something in force
}

// marks are lanes, a bit each.
type marks uint8

func (m marks) has(lane int) bool { return m>>lane&1 != 0 }
func (m *marks) set(lane int)     { *m |= 1 << lane }
func (m *marks) clear(lane int)   { *m &^= 1 << lane }

// next takes the first lane from the marks; there must be one.
func (m *marks) next() (lane int) {
	lane = bits.TrailingZeros8(uint8(*m))
	*m &= *m - 1
	return lane
}

// idleAt is where in the pool's line idle lanes are.
const idleAt = lanes.History + taps - 1 + lanes.Shortest

func (b *bank) clear() {
	*b = bank{}
	for lane := range b.loops {
		b.Rest(lane, idleAt)
		b.end[lane] = math.MaxInt64
	}
}

// take gives a loop a free lane, from the present frame on.
func (b *bank) take(p *Pool, l *loop) {
	b.catchUp(p, p.now)
	b.done = p.now
	lane := 0
	for b.loops[lane] != nil {
		lane++
	}
	b.loops[lane], l.bank, l.lane = l, b, lane
	b.used++
	b.live[lane] = -1
	b.Hush(lane)
	l.glide.fresh = true
}

// leave makes a lane idle.
func (b *bank) leave(p *Pool, lane int) {
	b.catchUp(p, p.now)
	b.Rest(lane, idleAt)
	b.Hush(lane)
	b.loops[lane] = nil
	b.used--
	b.live[lane], b.end[lane] = 0, math.MaxInt64
	b.energy[lane] = 0
	for _, m := range []*marks{&b.restless, &b.struck, &b.fading} {
		m.clear(lane)
	}
}

// inherit takes over what another bank has of a loop.
func (b *bank) inherit(lane int, other *bank, from int) {
	b.Copy(lane, &other.Bank, from)
	b.energy[lane], b.leak[lane], b.quiet[lane] = other.energy[from], other.leak[from], other.quiet[from]
	b.end[lane] = other.end[from]
	to, had := []*marks{&b.restless, &b.struck, &b.fading}, []marks{other.restless, other.struck, other.fading}
	for i := range to {
		if had[i].has(from) {
			to[i].set(lane)
		}
	}
}

// listen takes account of what the loops put out in the last control step.
func (b *bank) listen() {
	for lane := range b.Power {
		power := b.Power[lane]
		b.Power[lane] = 0
		b.energy[lane] += float64((float64(power)/Grid - b.energy[lane]) * b.leak[lane])
		if power > silence*silence {
			b.quiet[lane] = 0
		} else if b.quiet[lane] < math.MaxInt32/2 {
			b.quiet[lane] += Grid
		}
	}
}

// control leads on the loops that move, and the strokes that are under way.
func (b *bank) control(p *Pool) {
	for m := b.restless; m != 0; {
		if l := b.loops[m.next()]; l.controlled != p.steps {
			l.controlled = p.steps
			l.control()
		}
	}
}

// begin prepares for a control step, once its loops are.
func (b *bank) begin() {
	b.done, b.motion = 0, lanes.Still
	for m := b.struck; m != 0; {
		b.loops[m.next()].follow()
	}
	fastest, shortest := 0.0, math.Inf(1)
	for m := b.restless; m != 0; {
		l := b.loops[m.next()]
		switch {
		case l.motion == gliding:
			b.motion = lanes.Gliding
			fastest = max(fastest, l.glide.fast)
			shortest = min(shortest, l.glide.s[2])
		case l.motion != still:
			b.motion = max(b.motion, lanes.Moving)
		}
	}
	if b.motion == lanes.Gliding {
		b.beginGlides(fastest, shortest)
	}
}

// beginGlides sets the gliding loops on their way, the taps to stand for
// as many frames as the fastest (samples a frame) and the shortest (samples) allow.
func (b *bank) beginGlides(fastest, shortest float64) {
	// how far the delay may be from the taps' own, samples
	near := 0.06
	if fastest < slow && shortest > 100 { // which makes few trips
		near = 0.1
	}
	before := b.Block
	b.Block = Grid
	for b.Block > 1 && fastest*float64(b.Block-1)/2 > near {
		b.Block /= 2
	}
	for m := b.restless; m != 0; {
		lane := m.next()
		l := b.loops[lane]
		if l.motion != gliding {
			continue
		}
		if g := &l.glide; g.fresh || b.Block != before {
			p := g.path.from(float64(g.done))
			p.set(&b.Bank, lane)
			g.fresh = false
		}
	}
}

// catchUp renders up to a frame of the present step.
func (b *bank) catchUp(p *Pool, until int) {
	from := b.done
	b.done = until
	if b.used == 0 || from >= until {
		return
	}
	n := until - from
	if b.struck != 0 {
		b.strike(p, from, until)
	}
	var force *lanes.Force
	if b.forced {
		force = &b.force
	}
	if b.solo {
		for lane, l := range b.loops {
			if l != nil {
				b.Solo(lane, &p.bench, force, l.motion.alone(), from, until)
			}
		}
	} else {
		p.kernel.Render(&b.Bank, &p.bench, force, b.motion, from, until)
	}
	for lane, live := range b.live {
		b.At[lane] += int64(n) & live
		if b.At[lane] >= b.end[lane] {
			b.loops[lane].comeRound()
		}
	}
	for m := b.fading; m != 0; {
		lane := m.next()
		v := b.loops[lane].voice
		for f := from; f < until; f++ {
			b.Out[f][lane] *= v.fadeAt(f)
		}
	}
	if b.forced {
		clear(b.force[from:until])
		b.forced = false
	}
}

// strike puts what is left of the loops' strokes into the force.
func (b *bank) strike(p *Pool, from, until int) {
	for m := b.struck; m != 0; {
		lane := m.next()
		l := b.loops[lane]
		e := p.e[:until-from]
		clear(e)
		for j := range l.strokes {
			l.strokes[j].render(e)
		}
		b.push(lane, from, e)
		if l.strokes[0].over() && l.strokes[1].over() {
			b.struck.clear(lane)
		}
	}
}

// push adds a force from a frame of the present step on.
func (b *bank) push(lane, from int, e []float32) {
	b.forced = true
	force := b.force[from : from+len(e)]
	for i, x := range e {
		force[i][lane] += x
	}
}

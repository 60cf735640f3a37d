package voice

import (
	"math"

	"tautwire/voice/lanes"
)

// bank is up to eight loops that are computed together, as far as they have been.
type bank struct {
	lanes.Bank
	loops  [lanes.Width]*loop
	used   int  // lanes that are
	solo   bool // lanes that no vector unit can compute are computed one by one
	motion lanes.Motion
	done   int // frames of the present step
	space  int // frames until a loop's part of the line is full

	force  lanes.Force
	forced bool // there is something in force
}

func (b *bank) clear() {
	*b = bank{}
	for lane := range b.loops {
		b.Rest(lane, lanes.History+taps-1+lanes.Shortest)
	}
}

// take gives a loop a free lane, from the present frame on.
func (b *bank) take(p *Pool, l *loop) {
	b.catchUp(p, p.now)
	for lane, other := range b.loops {
		if other == nil {
			b.loops[lane], l.bank, l.lane = l, b, lane
			b.used++
			b.space = 0
			b.Hush(lane)
			l.glide.fresh = true
			return
		}
	}
}

// leave makes a loop's lane idle.
func (b *bank) leave(p *Pool, l *loop) {
	b.catchUp(p, p.now)
	b.Rest(l.lane, lanes.History+taps-1+lanes.Shortest)
	b.Hush(l.lane)
	b.loops[l.lane] = nil
	b.used--
	l.bank = nil
}

// begin prepares for a control step, once its loops are.
func (b *bank) begin() {
	b.done, b.motion = 0, lanes.Still
	if b.used == 0 {
		return
	}
	fastest := 0.0
	for _, l := range b.loops {
		if l == nil {
			continue
		}
		switch {
		case l.motion == gliding:
			b.motion = lanes.Gliding
			fastest = max(fastest, l.glide.fast)
		case l.motion != still:
			b.motion = max(b.motion, lanes.Moving)
		}
	}
	if b.motion == lanes.Gliding {
		b.beginGlides(fastest)
	}
}

// beginGlides sets the gliding loops on their way, the taps to stand for
// as many frames as the fastest (samples a frame) allows.
func (b *bank) beginGlides(fastest float64) {
	const near = 0.06 // samples: how far the delay may be from the taps' own
	before := b.Block
	b.Block = Grid
	for b.Block > 1 && fastest*float64(b.Block-1)/2 > near {
		b.Block /= 2
	}
	for lane, l := range b.loops {
		if l == nil || l.motion != gliding {
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
	if b.space < n {
		b.makeRoom(n)
	}
	b.strike(p, from, until)
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
	for lane, l := range b.loops {
		if l != nil {
			b.At[lane] += int64(n)
			if l.voice.fading {
				for f := from; f < until; f++ {
					b.Out[f][lane] *= l.voice.fadeAt(f)
				}
			}
		}
	}
	b.space -= n
	if b.forced {
		clear(b.force[from:until])
		b.forced = false
	}
}

// makeRoom moves the lines that are almost full.
func (b *bank) makeRoom(n int) {
	b.space = math.MaxInt
	for _, l := range b.loops {
		if l != nil {
			b.space = min(b.space, l.slide(n))
		}
	}
}

// strike puts what is left of the loops' strokes into the force.
func (b *bank) strike(p *Pool, from, until int) {
	for lane, l := range b.loops {
		if l == nil || l.strokes[0].over() && l.strokes[1].over() {
			continue
		}
		e := p.e[:until-from]
		clear(e)
		for j := range l.strokes {
			l.strokes[j].render(e)
		}
		b.push(lane, from, e)
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

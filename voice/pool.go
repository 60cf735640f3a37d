package voice

import "tautwire/voice/lanes"

// Pool is a fixed number of voices that sound together. Their strings lie side by
// side in banks of eight, so that a vector unit computes them at once, and are mixed there.
//
// The stream is cut into control steps of Grid frames: at the start of each, Step leads
// all that moves slowly on; within it, Advance renders. What is asked of a voice takes effect
// at the frame that has been reached, whatever that is, and costs only its own bank a cut.
type Pool struct {
	maker  *Maker
	kernel lanes.Kernel
	bench  lanes.Bench // with the lines of all strings; before them, what idle lanes use
	voices []Voice
	live   []*Voice // that have a design
	banks  []bank
	top    int // banks from here on are empty
	mix    lanes.Mix
	now    int   // frames of the present step that are done
	mixed  int   // of them, those that are in the mix
	steps  int64 // begun so far
	tense  int   // live voices whose pitch follows their energy
	lone   bool  // there is one voice, which is its own clock

	e [Grid]float32 // a stroke's force
}

// idle is how much of the line idle lanes use.
const idle = lanes.History + taps + lanes.Shortest + Grid + lanes.Spill

// NewPool allocates voices and all the memory that they will ever need: one
// string sounds down to lowest (Hz), several share the same lines.
func (m *Maker) NewPool(voices int, lowest float64) *Pool {
	return newPool(m, voices, linesFor(lowest, m.rate))
}

// linesFor is how many frames the lines of a voice take that sounds down to lowest (Hz).
func linesFor(lowest, rate float64) int { return int(lineTurns*rate/lowest) + 16*Grid }

// lineTurns is how many periods of its lowest pitch a line must hold: what a trip can reach, and
// room to go on.
const lineTurns = 1.75

func newPool(m *Maker, voices, frames int) *Pool {
	loops := voices * maxLoops
	p := &Pool{
		maker:  m,
		kernel: lanes.Best(),
		bench:  lanes.Bench{Line: make([]float32, idle+voices*frames), Rows: m.rows},
		voices: make([]Voice, voices),
		live:   make([]*Voice, 0, voices),
		// each kind of bank may have one that is not full
		banks: make([]bank, loops/lanes.Width+2*(maxSections+1)+1),
	}
	p.now = Grid
	for i := range p.banks {
		p.banks[i].clear()
	}
	for i := range p.voices {
		v := &p.voices[i]
		v.pool, v.start, v.size = p, idle+i*frames, frames
	}
	return p
}

// Len is the number of voices.
func (p *Pool) Len() int { return len(p.voices) }

// Voice is the i-th voice.
func (p *Pool) Voice(i int) *Voice { return &p.voices[i] }

// Step begins the next control step. The one before must have been rendered whole.
func (p *Pool) Step() {
	p.now, p.mixed = 0, 0
	p.steps++
	p.mix.Clear(0, Grid)
	for p.top > 0 && p.banks[p.top-1].used == 0 {
		p.top--
	}
	for i := range p.banks[:p.top] {
		p.banks[i].listen()
	}
	if p.tense > 0 {
		for _, v := range p.live {
			v.tighten()
		}
	}
	for i := range p.banks[:p.top] {
		p.banks[i].control(p)
	}
	for i := range p.banks[:p.top] {
		p.banks[i].begin()
	}
}

// clock counts frames.
func (p *Pool) clock() int64 { return p.steps*Grid + int64(p.now) }

// Advance renders all voices up to a frame of the present step, and mixes them.
func (p *Pool) Advance(until int) {
	for i := range p.banks[:p.top] {
		p.banks[i].catchUp(p, until)
	}
	p.mixBanks(p.mixed, until)
	p.now, p.mixed = until, until
}

// mixBanks adds the banks in use to the mix, in their order, two at a time.
func (p *Pool) mixBanks(from, until int) {
	var first *lanes.Bank
	for i := range p.banks[:p.top] {
		b := &p.banks[i]
		switch {
		case b.used == 0:
		case first == nil:
			first = &b.Bank
		default:
			p.kernel.Mix(&p.mix, from, until, first, &b.Bank)
			first = nil
		}
	}
	if first != nil {
		p.kernel.Mix(&p.mix, from, until, first, nil)
	}
}

// Arrive tells, without rendering, that a frame of the present step has been reached.
func (p *Pool) Arrive(frame int) { p.now = frame }

// Sum adds up the voices' frames of the present step from a frame on, in stereo.
func (p *Pool) Sum(left, right []float32, from int) { p.mix.Sum(left, right, from) }

// Again mixes the frames of the present step anew that have been mixed since a
// frame: after a voice has been taken off whose numbers had run away.
func (p *Pool) Again(from int) {
	p.mix.Clear(from, p.mixed)
	for i := range p.banks[:p.top] {
		if b := &p.banks[i]; b.used > 0 {
			b.Rewind(p.mixed - from)
		}
	}
	p.mixBanks(from, p.mixed)
}

// place deals a loop a lane among its like.
func (p *Pool) place(l *loop, solo bool) {
	empty := -1
	for i := range p.banks {
		b := &p.banks[i]
		if b.used == 0 {
			if empty < 0 {
				empty = i
			}
			if i >= p.top {
				break
			}
			continue
		}
		if b.used < lanes.Width && b.solo == solo && int(b.Sections) == l.sections {
			b.take(p, l)
			return
		}
	}
	b := &p.banks[empty]
	b.solo, b.Sections = solo, int64(l.sections)
	b.take(p, l)
	p.top = max(p.top, empty+1)
}

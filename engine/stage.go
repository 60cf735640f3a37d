package engine

import "tautwire/voice"

// stage is a patch with what this engine keeps for it.
type stage struct {
	patch *Compiled
	body  *bodyState
}

// enter takes the patch that Swap left, unless the body before is still giving
// way to the last one's.
func (e *Engine) enter() {
	if e.change.leaving != nil || e.next.Load() == nil {
		return
	}
	before := e.stage
	e.stage = e.next.Swap(nil)
	if before.body != nil || e.stage.body != nil {
		e.change.change(before)
	}
}

// bodyChange lets one patch's body give way to the next one's, and silences it, in
// whole steps of the grid.
type bodyChange struct {
	leaving *stage  // whose body fades out; nil for none
	from    float32 // of the arriving body, at the start of the step and at its end
	to      float32
	arrive  float32 // per step

	state hushState
	gain  float32 // at the start of the step
	sink  float32 // its change in it
	rate  float32 // its change per step while hushing

	wasLeft, wasRight [voice.Grid]float32
}

type hushState uint8

const (
	open hushState = iota
	asked
	sinking
	rising
)

const (
	// bodyFade is how long a body takes to give way to the next, s.
	bodyFade = 0.05
	// hushFade is how long a body takes to fall silent, s.
	hushFade = 0.002
)

func (b *bodyChange) init(rate float64) {
	*b = bodyChange{
		to:     1,
		from:   1,
		arrive: float32(voice.Grid / (bodyFade * rate)),
		gain:   1,
		rate:   1 / float32(max(1, int(hushFade*rate/voice.Grid))),
	}
}

func (b *bodyChange) change(from *stage) {
	b.leaving = from
	b.from, b.to = 0, 0
}

// hush asks for silence.
func (b *bodyChange) hush() {
	if b.state == open || b.state == rising {
		b.state = asked
	}
}

// step moves both fades on. It returns true when the body has sunk to silence and is to be reset.
func (b *bodyChange) step() (sunk bool) {
	if b.leaving != nil {
		b.from = b.to
		b.to = min(1, b.to+b.arrive)
		if b.from == 1 {
			b.leaving = nil
		}
	}
	b.gain = min(max(b.gain+b.sink, 0), 1)
	switch {
	case b.state == asked:
		b.state, b.sink = sinking, -b.rate
	case b.state == sinking && b.gain < 1e-3:
		b.gain = 0
		b.state, b.sink = rising, b.rate
		b.leaving = nil
		return true
	case b.state == rising && b.gain > 1-1e-3:
		b.state, b.gain, b.sink = open, 1, 0
	}
	return false
}

func (b *bodyChange) process(body *bodyState, left, right, ramp []float32) {
	if b.leaving != nil {
		wasLeft, wasRight := b.wasLeft[:len(left)], b.wasRight[:len(left)]
		copy(wasLeft, left)
		copy(wasRight, right)
		b.leaving.body.process(wasLeft, wasRight)
		body.process(left, right)
		step := b.to - b.from
		for i := range left {
			new := ease(b.from + float32(step*ramp[i]))
			left[i] = wasLeft[i] + float32(new*(left[i]-wasLeft[i]))
			right[i] = wasRight[i] + float32(new*(right[i]-wasRight[i]))
		}
	} else {
		body.process(left, right)
	}
	if b.state == sinking || b.state == rising {
		scale(left, right, ramp, b.gain, b.sink)
	}
}

// scale takes both sides by a gain that is on its way, by step over the whole ramp.
func scale(left, right, ramp []float32, gain, step float32) {
	right, ramp = right[:len(left)], ramp[:len(left)]
	for i := range left {
		g := ease(gain + float32(step*ramp[i]))
		left[i] *= g
		right[i] *= g
	}
}

// ease makes a straight way from 0 to 1 one without corners, which would click: the least
// polynomial whose first four derivatives are 0 at both ends.
func ease(x float32) float32 {
	x2 := float32(x * x)
	p := 126 + float32(x*(-420+float32(x*(540+float32(x*(-315+float32(70*x)))))))
	return float32(float32(float32(x2*x2)*x) * p)
}

// master is the loudness of the whole, and the fade at the end.
type master struct {
	volume   glide
	quiet    bool
	fade     float32 // 1, falling to 0 once quiet
	perStep  float32
	from, to float32 // gain at the start of the step and at its end
	silent   int     // frames since the fade has ended
}

// quietFade is how long Quiet takes, s.
const quietFade = 0.3

func (m *master) init(rate float64) {
	*m = master{fade: 1, perStep: float32(voice.Grid / (quietFade * rate)), from: 1, to: 1}
	m.volume.jump(1)
}

func (m *master) step(volume float32, coefficient float64) {
	m.volume.target = float64(volume)
	m.volume.step(coefficient)
	if m.quiet {
		if m.to == 0 {
			m.silent += voice.Grid
		}
		m.fade = max(0, m.fade-m.perStep)
	}
	m.from = m.to
	m.to = float32(m.volume.value) * m.fade
}

// still reports whether the end has passed a delay of so many frames.
func (m *master) still(delay int) bool { return m.silent > delay+voice.Grid }

func (m *master) process(left, right, ramp []float32) {
	if m.from == 1 && m.to == 1 {
		return
	}
	right, ramp = right[:len(left)], ramp[:len(left)]
	step := m.to - m.from
	for i := range left {
		g := m.from + float32(step*ramp[i])
		left[i] *= g
		right[i] *= g
	}
}

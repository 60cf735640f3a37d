package voice

import "math"

// cellsInOctave is how finely a cell divides an octave: 50 cents. Between them
// coefficients are interpolated by a cubic, far closer than a pitch on its way is heard.
const cellsInOctave = 24

// cell holds a loop's coefficients at four pitches around its own, so that a string that is
// being bent need not solve them at every step. Nothing is solved ahead of need, and one place at
// a time, so that no step takes long.
type cell struct {
	first   int // of the four, in parts of an octave above the mode's lowest
	known   [4]bool
	touch   touch
	pitches [4]float64 // Hz
	nodes   [4]coefficients
}

// approximate finds the coefficients at a pitch, x parts of an octave above the mode's lowest, and
// the pitch (Hz), from the cell around it, and reports whether it could.
func (c *cell) approximate(m *mode, x float64, t touch, out *coefficients) (f0 float64, ok bool) {
	floor := math.Floor(x)
	c.moveTo(int(floor)-1, t)
	for i := range c.nodes {
		if !c.known[i] {
			c.pitches[i] = m.lowest * math.Exp2(float64(c.first+i)/cellsInOctave)
			m.at(c.pitches[i], t, &c.nodes[i])
			c.known[i] = true
			if c.known != [4]bool{true, true, true, true} {
				return 0, false
			}
		}
		if n := &c.nodes[i]; n.direct > 0 || m.clamp(c.pitches[i]) != c.pitches[i] {
			return 0, false
		}
	}
	*out = coefficients{}
	for i, k := range cubic(x - floor) {
		f0 += float64(k * c.pitches[i])
		out.add(k, &c.nodes[i], len(m.sections))
	}
	return f0, out.loss.stable()
}

// moveTo makes the cell one that begins at a place, and keeps what it knows of it.
func (c *cell) moveTo(first int, t touch) {
	by := first - c.first
	if t != c.touch || by < -3 || by > 3 {
		c.known = [4]bool{}
	}
	c.touch, c.first = t, first
	for ; by > 0; by-- {
		copy(c.nodes[:], c.nodes[1:])
		copy(c.known[:], c.known[1:])
		copy(c.pitches[:], c.pitches[1:])
		c.known[3] = false
	}
	for ; by < 0; by++ {
		copy(c.nodes[1:], c.nodes[:3])
		copy(c.known[1:], c.known[:3])
		copy(c.pitches[1:], c.pitches[:3])
		c.known[0] = false
	}
}

// cubic gives Lagrange's weights at t for the places -1, 0, 1 and 2.
func cubic(t float64) [4]float64 {
	return [4]float64{-t * (t - 1) * (t - 2) / 6, (t + 1) * (t - 1) * (t - 2) / 2, -(t + 1) * t * (t - 2) / 2, (t + 1) * t * (t - 1) / 6}
}

// add adds k times others, with n sections.
func (c *coefficients) add(k float64, to *coefficients, n int) {
	c.delay += float64(k * to.delay)
	c.gain += float64(k * to.gain)
	c.shrink += float64(k * to.shrink)
	c.loss.c1 += float64(k * to.loss.c1)
	c.loss.c2 += float64(k * to.loss.c2)
	c.loss.shelf.drop += float64(k * to.loss.shelf.drop)
	c.loss.shelf.corner += float64(k * to.loss.shelf.corner)
	for i := range n {
		c.sections[i][0] += float64(k * to.sections[i][0])
		c.sections[i][1] += float64(k * to.sections[i][1])
	}
}

package lanes

// Portable is the kernel for any processor, one lane at a time.
func Portable() Kernel {
	moving, gliding := each((*Bank).moving), each((*Bank).gliding)
	return Kernel{
		name:  "portable",
		plain: kinds{each((*Bank).plain), moving, gliding},
		stiff: forSections(each((*Bank).stiff), moving, gliding),
		turn:  turnLanes,
		mix:   mixLanes,
	}
}

// forSections is one kernel of each kind for all numbers of sections.
func forSections(still, moving, gliding run) (all [MaxSections + 1]kinds) {
	for i := range all {
		all[i] = kinds{still, moving, gliding}
	}
	return all
}

// mixLanes mixes two banks, of which the second may be nil.
func mixLanes(m *Mix, from, frames int, b, c *Bank) {
	b.mixInto(m, from, frames)
	if c != nil {
		c.mixInto(m, from, frames)
	}
}

func (b *Bank) mixInto(m *Mix, from, frames int) {
	outs := b.Out[from : from+frames]
	lefts, rights := m.Left[from:from+frames], m.Right[from:from+frames]
	for l := range Width {
		left, right, dl, dr := b.Left[l], b.Right[l], b.DLeft[l], b.DRight[l]
		for f := range outs {
			y := outs[f][l]
			left += dl
			right += dr
			lefts[f][l] += float32(y * left)
			rights[f][l] += float32(y * right)
		}
		b.Left[l], b.Right[l] = left, right
	}
}

// Solo renders frames of one lane alone, as Kernel.Render does of all. The taps of a
// lane that is Moving change by DTap, and it may read the frame before.
func (b *Bank) Solo(lane int, w *Bench, force *Force, motion Motion, from, until int) {
	if force == nil {
		force = &nothing
	}
	do := (*Bank).ramping
	switch {
	case motion == Still && b.Sections == 0:
		do = (*Bank).plain
	case motion == Still:
		do = (*Bank).stiff
	case motion == Gliding:
		do = (*Bank).gliding
	}
	for start := from; from < until; {
		end := until
		if motion == Gliding {
			end = min(until, (from/int(b.Block)+1)*int(b.Block))
			if from%int(b.Block) == 0 {
				b.take(lane, b.turn(lane, w.Rows))
			}
		}
		p := b.pass(lane, w, force, from-start, from, end-from)
		if motion == Gliding && b.Glide[lane].Finger.Firm > 0 {
			b.touched(p, w, b.At[lane]+int64(from-start))
		} else {
			do(b, p)
		}
		from = end
	}
}

// pass is one lane's way through some frames.
type pass struct {
	lane           int
	source, target []float32 // what is read, and where it goes
	force, out     []floats
}

func (b *Bank) pass(lane int, w *Bench, force *Force, ahead, from, frames int) pass {
	at := b.At[lane] + int64(ahead)
	first := b.oldest(lane, int64(ahead))
	return pass{
		lane:   lane,
		source: w.Line[first : first+int64(frames)+Taps-1],
		target: w.Line[at : at+int64(frames)],
		force:  force[from : from+frames],
		out:    b.Out[from : from+frames],
	}
}

func each(do func(*Bank, pass)) run {
	return func(b *Bank, w *Bench, force *Force, ahead, from, frames int) {
		for lane := range Width {
			do(b, b.pass(lane, w, force, ahead, from, frames))
		}
	}
}

// plain renders a still lane without stiffness: as read does, with the taps in registers.
func (b *Bank) plain(p pass) {
	l := p.lane & (Width - 1)
	h := b.taps(l)
	h0, h1, h2, h3, h4, h5 := h[0], h[1], h[2], h[3], h[4], h[5]
	h6, h7, h8, h9, h10, h11 := h[6], h[7], h[8], h[9], h[10], h[11]
	c1, c2, v1, v2, power := b.C1[l], b.C2[l], b.V1[l], b.V2[l], b.Power[l]
	n := len(p.target)
	source, target, force, out := p.source, p.target, p.force[:n], p.out[:n]
	for i := range target {
		s := (*[Taps]float32)(source)
		x := bias + float32(s[0]*h11) + float32(s[1]*h10) + float32(s[2]*h9) + float32(s[3]*h8)
		x = x + float32(s[4]*h7) + float32(s[5]*h6) + float32(s[6]*h5) + float32(s[7]*h4)
		x = x + float32(s[8]*h3) + float32(s[9]*h2) + float32(s[10]*h1) + float32(s[11]*h0)
		source = source[1:]
		v := float64(x) - float64(c2*v2)
		v2, v1 = v1, v-float64(c1*v1)
		y := float32(v1) + force[i][l]
		target[i] = y
		out[i][l] = y
		power += float32(y * y)
	}
	b.V1[l], b.V2[l], b.Power[l] = v1, v2, power
}

func (b *Bank) taps(lane int) (h [Taps]float32) {
	for i := range h {
		h[i] = b.Tap[i][lane]
	}
	return h
}

// read is the dot product of the taps, the newest sample's first, with samples, the oldest first.
func read(s []float32, h *[Taps]float32) float32 { return readOn(bias, s, h) }

// readOn adds the read to x.
func readOn(x float32, s []float32, h *[Taps]float32) float32 {
	s = s[:Taps]
	x = x + float32(s[0]*h[11]) + float32(s[1]*h[10]) + float32(s[2]*h[9]) + float32(s[3]*h[8])
	x = x + float32(s[4]*h[7]) + float32(s[5]*h[6]) + float32(s[6]*h[5]) + float32(s[7]*h[4])
	return x + float32(s[8]*h[3]) + float32(s[9]*h[2]) + float32(s[10]*h[1]) + float32(s[11]*h[0])
}

// stiff renders a still lane with shelf and sections.
func (b *Bank) stiff(p pass) {
	l := p.lane & (Width - 1)
	h := b.taps(l)
	for i := range p.target {
		p.end(b, i, b.disperse(l, b.lose(l, read(p.source[i:i+Taps:i+Taps], &h))))
	}
}

// moving renders a lane in which anything but the delay moves.
func (b *Bank) moving(p pass) {
	l := p.lane & (Width - 1)
	h := b.taps(l)
	for i := range p.target {
		b.move(l)
		p.end(b, i, b.lossy(l, read(p.source[i:i+Taps:i+Taps], &h)))
	}
}

// ramping renders a lane whose taps move as well.
func (b *Bank) ramping(p pass) {
	l := p.lane & (Width - 1)
	h := b.taps(l)
	for i := range p.target {
		for t := range h {
			h[t] += b.DTap[t][l]
		}
		b.move(l)
		p.end(b, i, b.lossy(l, read(p.source[i:i+Taps:i+Taps], &h)))
	}
	for t := range h {
		b.Tap[t][l] = h[t]
	}
}

// gliding renders a lane whose delay moves.
func (b *Bank) gliding(p pass) {
	l := p.lane & (Width - 1)
	h := b.taps(l)
	for i := range p.target {
		x := b.readGliding(l, p.source[i:i+Taps:i+Taps], &h)
		b.bend(l)
		b.move(l)
		p.end(b, i, b.lossy(l, x))
	}
}

// readGliding reads samples, the oldest first, at the lane's offset from its taps.
func (b *Bank) readGliding(l int, s []float32, h *[Taps]float32) float32 {
	x := float32(0)
	for t := CurveTaps - 1; t >= 0; t-- {
		x += float32(b.Curve[t][l] * s[Taps-1-firstCurve-t])
	}
	x *= b.Offset[l]
	for t := SlopeTaps - 1; t >= 0; t-- {
		x += float32(b.Slope[t][l] * s[Taps-1-firstSlope-t])
	}
	x *= b.Offset[l]
	return readOn(float32(x)+bias, s, h)
}

// bend takes a lane's delay a frame on.
func (b *Bank) bend(l int) {
	b.Offset[l] += b.DOffset[l]
	b.DOffset[l] += b.D2Offset[l]
	b.D2Offset[l] += b.D3Offset[l]
}

// lossy takes what was read through a moving lane's level and filters.
func (b *Bank) lossy(l int, x float32) float64 {
	v := b.lose(l, x*b.Level[l])
	if b.Sections > 0 {
		v = b.disperse(l, v)
	}
	return v
}

// move takes a lane's level and filters a frame on.
func (b *Bank) move(l int) {
	b.Level[l] += b.DLevel[l]
	b.C1[l] += b.DC1[l]
	b.C2[l] += b.DC2[l]
	if b.Sections == 0 {
		return
	}
	b.Gain[l] += b.DGain[l]
	b.Zero[l] += b.DZero[l]
	b.Pole[l] += b.DPole[l]
	for i := range b.Section[:b.Sections] {
		s := &b.Section[i]
		s.A1[l] += s.DA1[l]
		s.A2[l] += s.DA2[l]
	}
}

// lose takes what was read through the loss filter, and a stiff string's shelf.
func (b *Bank) lose(l int, x float32) float64 {
	before := b.V1[l]
	v := float64(x) - float64(b.C2[l]*b.V2[l]) - float64(b.C1[l]*before)
	b.V2[l], b.V1[l] = before, v
	if b.Sections == 0 {
		return v
	}
	v = float64(b.Gain[l]*(v-float64(b.Zero[l]*before))) + float64(b.Pole[l]*b.Node[0].X[l])
	return v
}

// disperse passes a sample through the allpass sections, in direct form I: one
// section's output is the next one's input, history and all.
func (b *Bank) disperse(l int, in float64) float64 {
	for i := range b.Section[:b.Sections] {
		s, left, right := &b.Section[i], &b.Node[i], &b.Node[i+1]
		x, x1, y, y1 := left.X[l], left.X1[l], right.X[l], right.X1[l]
		out := float64(s.A2[l]*(in-y1)) + (float64(s.A1[l]*(x-y)) + x1)
		left.X1[l], left.X[l] = x, in
		in = out
	}
	last := &b.Node[b.Sections]
	last.X1[l], last.X[l] = last.X[l], in
	return in
}

// end adds the force to frame i and writes it down.
func (p *pass) end(b *Bank, i int, v float64) {
	l := p.lane & (Width - 1)
	y := float32(v) + p.force[i][l]
	p.target[i] = y
	p.out[i][l] = y
	b.Power[l] += float32(y * y)
}

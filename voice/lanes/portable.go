package lanes

// Portable is the kernel for any processor, one lane at a time.
func Portable() Kernel {
	return Kernel{
		name:  "portable",
		plain: pair{each((*Bank).plain), each((*Bank).moving)},
		stiff: pair{each((*Bank).stiff), each((*Bank).moving)},
	}
}

// pass is one lane's way through some frames.
type pass struct {
	lane           int
	source, target []float32 // what is read, and where it goes
	force          []floats
	left, right    []floats
}

func each(do func(*Bank, *pass)) run {
	return func(b *Bank, m *Mix, line []float32, force *Force, from, frames int) {
		until := from + frames
		for lane, at := range b.At {
			first := at - b.Back[lane]
			do(b, &pass{
				lane:   lane,
				source: line[first : first+int64(frames)+Taps-1],
				target: line[at : at+int64(frames)],
				force:  force[from:until],
				left:   m.Left[from:until],
				right:  m.Right[from:until],
			})
		}
	}
}

// plain renders a still lane without stiffness.
func (b *Bank) plain(p *pass) {
	l := p.lane & (Width - 1)
	h := b.taps(l)
	c1, c2, v1, v2 := b.C1[l], b.C2[l], b.V1[l], b.V2[l]
	left, right, power := b.Left[l], b.Right[l], b.Power[l]
	n := len(p.target)
	source, target, force := p.source[:n+Taps-1], p.target, p.force[:n]
	lefts, rights := p.left[:n], p.right[:n]
	for i := range target {
		x := float64(read(source[i:i+Taps:i+Taps], &h)) - float64(c2*v2)
		v2, v1 = v1, x-float64(c1*v1)
		y := float32(v1) + force[i][l]
		target[i] = y
		lefts[i][l] += float32(y * left)
		rights[i][l] += float32(y * right)
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
func read(s []float32, h *[Taps]float32) float32 {
	s = s[:Taps]
	x := bias + float32(s[0]*h[11]) + float32(s[1]*h[10]) + float32(s[2]*h[9]) + float32(s[3]*h[8])
	x = x + float32(s[4]*h[7]) + float32(s[5]*h[6]) + float32(s[6]*h[5]) + float32(s[7]*h[4])
	return x + float32(s[8]*h[3]) + float32(s[9]*h[2]) + float32(s[10]*h[1]) + float32(s[11]*h[0])
}

// stiff renders a still lane with shelf and sections.
func (b *Bank) stiff(p *pass) {
	l := p.lane & (Width - 1)
	h := b.taps(l)
	for i := range p.target {
		p.end(b, i, b.disperse(l, b.lose(l, read(p.source[i:i+Taps:i+Taps], &h))))
	}
}

// moving renders a lane in which anything moves.
func (b *Bank) moving(p *pass) {
	l := p.lane & (Width - 1)
	h := b.taps(l)
	for i := range p.target {
		for t := range h {
			h[t] += b.DTap[t][l]
		}
		b.move(l)
		v := b.lose(l, read(p.source[i:i+Taps:i+Taps], &h))
		if b.Sections > 0 {
			v = b.disperse(l, v)
		}
		p.end(b, i, v)
	}
	for t := range h {
		b.Tap[t][l] = h[t]
	}
}

// move takes a lane's filters and gains a frame on.
func (b *Bank) move(l int) {
	b.C1[l] += b.DC1[l]
	b.C2[l] += b.DC2[l]
	b.Left[l] += b.DLeft[l]
	b.Right[l] += b.DRight[l]
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
	v = float64(b.Gain[l]*(v-float64(b.Zero[l]*before))) + float64(b.Pole[l]*b.Shelf[l])
	b.Shelf[l] = v
	return v
}

// disperse passes a sample through the allpass sections, in direct form I: one
// section's output is the next one's input, history and all.
func (b *Bank) disperse(l int, in float64) float64 {
	for i := range b.Section[:b.Sections] {
		s, left, right := &b.Section[i], &b.Node[i], &b.Node[i+1]
		x, x1, y, y1 := left.X[l], left.X1[l], right.X[l], right.X1[l]
		out := float64(s.A2[l]*(in-y1)) + x1 + float64(s.A1[l]*(x-y))
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
	p.left[i][l] += float32(y * b.Left[l])
	p.right[i][l] += float32(y * b.Right[l])
	b.Power[l] += float32(y * y)
}

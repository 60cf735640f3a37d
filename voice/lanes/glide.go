package lanes

import "math/bits"

const (
	// RowsInSample is how many rows of taps there are for a sample of delay.
	RowsInSample = 128
	rowBits      = 7

	SlopeTaps = 8 // taps of a row's slope, in the middle of the read
	CurveTaps = 6
	curveRoom = 8

	firstSlope = (Taps - SlopeTaps) / 2 // the newest sample's tap
	firstCurve = (Taps - CurveTaps) / 2

	// Newest is how many samples a read's newest sample lies after its delay.
	Newest = Taps/2 - 1
)

// Row is the taps of a read whose delay is in the middle of a part of a sample: their values,
// the newest sample's first, their derivatives by the delay, and half their second derivatives.
type Row struct {
	Tap   [Taps]float32
	Slope [SlopeTaps]float32
	Curve [curveRoom]float32 // the last two are 0
}

// Rows are the parts of a sample, from the least delay to the greatest.
type Rows [RowsInSample]Row

// Glide is a lane's delay at the first frame of a block, and its differences from block to
// block, in 2^-32 samples: whole numbers, so that no rounding adds up.
// On is false in a lane that does not glide.
type Glide struct {
	On                bool
	Delay, D1, D2, D3 int64

	center int64 // the delay for which the taps are
	Finger Finger
}

// Finger lies on a string at a part of its length: it mixes what is read with what is there Side,
// in 2^-32 samples, before and after, each taken Firm.
type Finger struct {
	Firm float32
	Side int64
}

// SetTaps gives a lane taps that stand.
func (b *Bank) SetTaps(lane int, h *[Taps]float32) {
	b.own[lane] = Row{Tap: *h}
	b.take(lane, &b.own[lane])
	b.Offset[lane], b.DOffset[lane], b.D2Offset[lane], b.D3Offset[lane] = 0, 0, 0, 0
	b.Glide[lane] = Glide{}
}

func (b *Bank) take(lane int, r *Row) {
	for i, h := range r.Tap {
		b.Tap[i][lane] = h
	}
	for i, h := range r.Slope {
		b.Slope[i][lane] = h
	}
	for i, h := range r.Curve {
		b.Curve[i][lane] = h
	}
}

// turnLanes gives each gliding lane the row of taps that is nearest to its delay in the
// middle of the block.
func turnLanes(b *Bank, w *Bench) {
	for lane := range b.Glide {
		if b.Glide[lane].On {
			b.take(lane, b.turn(lane, w.Rows))
		}
	}
}

// turn begins a block of a gliding lane, and returns the row of taps that it is to have.
func (b *Bank) turn(lane int, rows *Rows) *Row {
	const shift = 32 - rowBits
	g := &b.Glide[lane]
	middle := g.Delay + (g.D1-g.D1>>b.blockBits())>>1 // of the first and the last frame
	g.center = middle&^(1<<shift-1) + 1<<(shift-1)
	b.Offset[lane] = float32(int32(g.Delay-g.center)) / (1 << 32)
	b.Back[lane] = middle>>32 + Taps - 1 - Newest
	g.Delay += g.D1
	g.D1 += g.D2
	g.D2 += g.D3
	return &rows[uint32(middle)>>shift]
}

func (b *Bank) blockBits() int { return bits.TrailingZeros64(uint64(b.Block)) }

// touched renders a gliding lane with a finger on it.
func (b *Bank) touched(p pass, w *Bench, at int64) {
	l := p.lane & (Width - 1)
	g := &b.Glide[l]
	f := g.Finger
	h := b.taps(l)
	for i := range p.target {
		x := b.readGliding(l, p.source[i:i+Taps:i+Taps], &h)
		delay := g.center + int64(float64(b.Offset[l])*(1<<32))
		here := at + int64(i)
		before, after := delay-f.Side, delay+f.Side
		if before>>32 > Newest && after>>32+Taps < b.Ring[l] {
			sides := b.readAt(l, w, here, before) + b.readAt(l, w, here, after)
			x = float32((1-2*f.Firm)*x) + float32(f.Firm*sides)
		}
		b.bend(l)
		b.move(l)
		p.end(b, i, b.lossy(l, x))
	}
}

// readAt is what a lane's line holds a delay, in 2^-32 samples, before at.
func (b *Bank) readAt(lane int, w *Bench, at, delay int64) float32 {
	const shift = 32 - rowBits
	row := &w.Rows[uint32(delay)>>shift]
	center := delay&^(1<<shift-1) + 1<<(shift-1)
	offset := float32(int32(delay-center)) / (1 << 32)
	first := at - delay>>32 - (Taps - 1 - Newest)
	if first < b.Floor[lane] {
		first += b.Ring[lane]
	}
	s := w.Line[first : first+Taps]
	x := float32(0)
	for i, k := range row.Curve[:CurveTaps] {
		x += float32(k * s[Taps-1-firstCurve-i])
	}
	x *= offset
	for i, k := range row.Slope {
		x += float32(k * s[Taps-1-firstSlope-i])
	}
	x *= offset
	return readOn(x, s, &row.Tap)
}

package lanes

const (
	// RowsInSample is how many rows of taps there are for a sample of delay.
	RowsInSample = 64
	rowBits      = 6

	SlopeTaps = 8 // taps of a row's slope, in the middle of the read
	CurveTaps = 4

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
	Curve [CurveTaps]float32
}

// Rows are the parts of a sample, from the least delay to the greatest.
type Rows [RowsInSample]Row

// Glide is a lane's delay at the first frame of a block, and its differences from block to
// block, in 2^-32 samples: whole numbers, so that no rounding adds up.
// On is false in a lane that does not glide.
type Glide struct {
	On                bool
	Delay, D1, D2, D3 int64
}

// turn gives each gliding lane the row of taps that is nearest to its delay in the
// middle of the block.
func (b *Bank) turn(rows *Rows) {
	for lane := range b.Glide {
		b.turnLane(lane, rows)
	}
}

func (b *Bank) turnLane(lane int, rows *Rows) {
	const shift = 32 - rowBits
	g := &b.Glide[lane]
	if !g.On {
		return
	}
	middle := g.Delay + g.D1>>1
	center := middle&^(1<<shift-1) + 1<<(shift-1)
	b.Offset[lane] = float32(int32(g.Delay-center)) / (1 << 32)
	b.Back[lane] = middle>>32 + Taps - 1 - Newest
	row := &rows[uint32(middle)>>shift]
	for i, h := range row.Tap {
		b.Tap[i][lane] = h
	}
	for i, h := range row.Slope {
		b.Slope[i][lane] = h
	}
	for i, h := range row.Curve {
		b.Curve[i][lane] = h
	}
	g.Delay += g.D1
	g.D1 += g.D2
	g.D2 += g.D3
}

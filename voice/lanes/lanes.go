// Package lanes computes strings eight at a time: a bank holds one string in
// each lane of a vector, and a kernel takes all eight through the read of their
// delay lines, their filters and the mix.
//
// There is one meaning and there are several kernels: in Go for any machine
// (portable.go), and for the vector units of amd64 and arm64, which the program
// in the folder asm writes. All give the same bits: every product is rounded
// before it is added, and every sum has one order.
package lanes

const (
	Width  = 8  // strings in a bank
	Taps   = 12 // of the read
	Frames = 32 // most that a kernel renders at once

	// MaxSections is how many allpass sections a string may have.
	MaxSections = 4

	// Shortest is the least distance (samples) from the sample that is
	// computed back to the newest that its read needs: eight frames are read
	// before the first of them is written.
	Shortest = 8

	// History is how many samples before the oldest that a read needs must
	// exist in the line: they are loaded, and not used.
	History = 1
	// Front is how many samples before a ring's first are to be the same as before its end, so
	// that no read has to be cut in two.
	Front = 64
	// Spill is how many samples past the last one rendered a kernel may
	// overwrite in a line.
	Spill = 3

	// bias keeps subnormal numbers, which cost 15 to 40 ns each, out of the loop.
	bias = 1e-18
)

type (
	floats  [Width]float32
	doubles [Width]float64
)

// Bank is eight strings side by side, as one control step has them. A lane of
// zeros is silent. It holds no pointers; the kernels know its layout.
//
//	x = sum over i of Tap[i] line[at - Back + Taps-1 - i]
//	v = Level x - C2 v'' - C1 v'
//	v = shelf(v), then through the allpass sections, where there are any
//	y = line[at] = Out = v + force
//
// Still, Level is in the taps and not multiplied. Where lanes move, all that has a D-sister changes by it
// before each frame. Gliding, the taps are those of a delay near the lane's own, and
//
//	x = sum of Tap + Offset (sum of Slope + Offset sum of Curve)
//
// where Offset, which is a cubic in time, is how far the delay is from there.
type Bank struct {
	Tap                                 [Taps]floats // the newest sample's first
	Slope                               [SlopeTaps]floats
	Curve                               [curveRoom]floats
	Level, DLevel                       floats
	Offset, DOffset, D2Offset, D3Offset floats         // samples, and by differences of a frame
	Left, Right, DLeft, DRight          floats         // gains of the mix
	Out                                 [Frames]floats // y in each frame of the control step
	Power                               floats         // sum of the squares of y so far
	C1, C2, DC1, DC2                    doubles
	V1, V2                              doubles // the loss filter's last two outputs
	Gain, Zero, Pole                    doubles // of the shelf
	DGain, DZero, DPole                 doubles
	Section                             [MaxSections]Section
	Node                                [MaxSections + 1]Node
	At                                  [Width]int64 // where each lane's next sample goes in the line
	Back                                [Width]int64 // from there to the oldest sample that its read needs
	Floor                               [Width]int64 // where the line's oldest sample may be; a read from below it is Ring later
	Ring                                [Width]int64 // samples of the line until its place comes round
	Sections                            int64        // 0: no shelf either

	// What only Go code knows.
	Glide [Width]Glide
	Block int64        // frames for which a glide's taps stand: a power of two, up to Frames
	own   [Width]Row   // taps of lanes that do not glide
	DTap  [Taps]floats // of a lane that ramps by itself
}

// Section is a second-order allpass in each lane.
type Section struct{ A1, A2, DA1, DA2 doubles }

// Node is what passed between two sections one and two frames ago.
type Node struct{ X, X1 doubles }

// Mix is where banks add what they sound in a control step, lane by lane.
type Mix struct{ Left, Right [Frames]floats }

// Clear empties frames from to until.
func (m *Mix) Clear(from, until int) {
	clear(m.Left[from:until])
	clear(m.Right[from:until])
}

// Sum adds up the lanes of frames from a frame on.
func (m *Mix) Sum(left, right []float32, from int) {
	for i := range left {
		left[i] = m.Left[from+i].sum()
		right[i] = m.Right[from+i].sum()
	}
}

func (x *floats) sum() float32 {
	return ((x[0] + x[4]) + (x[2] + x[6])) + ((x[1] + x[5]) + (x[3] + x[7]))
}

// Bench is what kernels work with and on: the lines of all lanes, and the rows of
// gliding reads.
type Bench struct {
	Line []float32
	Rows *Rows

	window              [Frames + Taps + 4]floats
	offsets, filtered   [4]floats
	read                [8]floats // two groups of sums
	source, target, row [Width]uintptr
}

// Force is what drives each lane in each frame of a control step.
type Force [Frames]floats

// Motion is what a kernel has to follow.
type Motion uint8

const (
	Still   Motion = iota
	Moving         // filters, levels and gains
	Gliding        // the delay as well
)

// Kernel renders banks and mixes them.
type Kernel struct {
	name  string
	plain kinds
	stiff [MaxSections + 1]kinds  // by the number of sections
	turn  func(b *Bank, w *Bench) // begins a block of a glide
	mix   func(m *Mix, from, frames int, b, c *Bank)
}

// kinds is by Motion.
type kinds [Gliding + 1]run

// run computes frames of a step from its frame from on. The lanes are ahead of
// their At by so many frames.
type run func(b *Bank, w *Bench, force *Force, ahead, from, frames int)

// String names the processor that the kernel is for.
func (k Kernel) String() string { return k.name }

// Mix adds frames from to until of a control step of b, and of c, which may be nil, to m. In each
// frame, the gains first move on.
func (k Kernel) Mix(m *Mix, from, until int, b, c *Bank) {
	if from < 0 || until > Frames {
		panic("lanes: frames outside the control step")
	}
	if from < until {
		k.mix(m, from, until-from, b, c)
	}
}

// Render computes frames from to until of a control step, at most Frames, in
// all lanes of b. force may be nil. It leaves At as it is.
//
// It panics when a lane reaches outside the lines, or, on a vector unit, reads less than Shortest back.
func (k Kernel) Render(b *Bank, w *Bench, force *Force, motion Motion, from, until int) {
	if from < 0 || until > Frames {
		panic("lanes: frames outside the control step")
	}
	if force == nil {
		force = &nothing
	}
	do := k.plain[motion]
	if b.Sections > 0 {
		do = k.stiff[b.Sections][motion]
	}
	for start := from; from < until; {
		end := until
		if motion == Gliding {
			end = min(until, (from/int(b.Block)+1)*int(b.Block))
			if from%int(b.Block) == 0 {
				k.turn(b, w)
			}
		}
		do(b, w, force, from-start, from, end-from)
		from = end
	}
}

// oldest is the place of the oldest sample that a lane's read needs some frames from now.
func (b *Bank) oldest(lane int, ahead int64) int64 {
	at := b.At[lane] + ahead - b.Back[lane]
	if at < b.Floor[lane] {
		at += b.Ring[lane]
	}
	return at
}

// nothing is no force. It is never written.
var nothing Force

// Copy takes a lane of another bank to a lane of b, all but its line's place
// in the mix of the step.
func (b *Bank) Copy(to int, other *Bank, from int) {
	d, s := b.singles(), other.singles()
	for i := range d {
		d[i][to] = s[i][from]
	}
	dd, ss := b.doubles(), other.doubles()
	for i := range dd {
		dd[i][to] = ss[i][from]
	}
	b.At[to], b.Back[to], b.Floor[to], b.Ring[to] = other.At[from], other.Back[from], other.Floor[from], other.Ring[from]
	b.Glide[to], b.own[to] = other.Glide[from], other.own[from]
}

// Rest silences a lane, which reads and writes the line at the place given.
func (b *Bank) Rest(lane int, at int64) {
	for _, x := range b.singles() {
		x[lane] = 0
	}
	for _, x := range b.doubles() {
		x[lane] = 0
	}
	b.At[lane], b.Back[lane], b.Floor[lane], b.Ring[lane] = at, Taps-1+Shortest, 0, 0
	b.Glide[lane], b.own[lane] = Glide{}, Row{}
}

// Hush takes a lane's frames of the present step from what is to be mixed.
func (b *Bank) Hush(lane int) {
	for f := range b.Out {
		b.Out[f][lane] = 0
	}
}

// Rewind takes the gains of the mix some frames back.
func (b *Bank) Rewind(frames int) {
	for lane := range Width {
		b.Left[lane] -= float32(float32(frames) * b.DLeft[lane])
		b.Right[lane] -= float32(float32(frames) * b.DRight[lane])
	}
}

// plainSingles is how many floats a lane has beside its taps.
const plainSingles = 11

func (b *Bank) singles() (all [plainSingles + 2*Taps + SlopeTaps + curveRoom]*floats) {
	copy(all[:], []*floats{
		&b.Level, &b.DLevel, &b.Offset, &b.DOffset, &b.D2Offset, &b.D3Offset,
		&b.Left, &b.Right, &b.DLeft, &b.DRight, &b.Power,
	})
	rest := all[plainSingles:]
	for i := range b.Tap {
		rest[2*i], rest[2*i+1] = &b.Tap[i], &b.DTap[i]
	}
	rest = rest[2*Taps:]
	for i := range b.Slope {
		rest[i] = &b.Slope[i]
	}
	for i := range b.Curve {
		rest[SlopeTaps+i] = &b.Curve[i]
	}
	return all
}

// filterDoubles is how many doubles a lane has beside those of its sections.
const filterDoubles = 12

func (b *Bank) doubles() (all [filterDoubles + 4*MaxSections + 2*(MaxSections+1)]*doubles) {
	copy(all[:], []*doubles{
		&b.C1, &b.C2, &b.DC1, &b.DC2, &b.V1, &b.V2,
		&b.Gain, &b.Zero, &b.Pole, &b.DGain, &b.DZero, &b.DPole,
	})
	rest := all[filterDoubles:]
	for i := range b.Section {
		s := &b.Section[i]
		rest[4*i], rest[4*i+1], rest[4*i+2], rest[4*i+3] = &s.A1, &s.A2, &s.DA1, &s.DA2
	}
	rest = rest[4*MaxSections:]
	for i := range b.Node {
		rest[2*i], rest[2*i+1] = &b.Node[i].X, &b.Node[i].X1
	}
	return all
}

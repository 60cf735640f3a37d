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
	// computed back to the newest that its read needs: four frames are read
	// before the first of them is written.
	Shortest = 4

	// History is how many samples before the oldest that a read needs must
	// exist in the line: they are loaded, and not used.
	History = 1
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
//	v = Shelf(v), then through the allpass sections, where there are any
//	y = line[at] = v + force
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
	Curve                               [CurveTaps]floats
	Level, DLevel                       floats
	Offset, DOffset, D2Offset, D3Offset floats // samples, and by differences of a frame
	Left, Right, DLeft, DRight          floats // gains of the mix
	Power                               floats // sum of the squares of y so far
	C1, C2, DC1, DC2                    doubles
	V1, V2                              doubles // the loss filter's last two outputs
	Gain, Zero, Pole                    doubles // of the shelf
	DGain, DZero, DPole                 doubles
	Shelf                               doubles // its last output
	Section                             [MaxSections]Section
	Node                                [MaxSections + 1]Node
	At                                  [Width]int64 // where each lane's next sample goes in the line
	Back                                [Width]int64 // from there to the oldest sample that its read needs
	Sections                            int64        // 0: no shelf either

	// What only Go code knows.
	Glide [Width]Glide
	Block int64        // frames for which a glide's taps stand; divides Frames
	DTap  [Taps]floats // of a lane that ramps by itself
}

// Section is a second-order allpass in each lane.
type Section struct{ A1, A2, DA1, DA2 doubles }

// Node is what passed between two sections one and two frames ago.
type Node struct{ X, X1 doubles }

// Mix is where banks add what they sound, lane by lane, for the frames of one
// control step, and what kernels need beside.
type Mix struct {
	Left, Right    [Frames]floats
	Rows           *Rows // of gliding reads
	window         [Frames + Taps + 4]floats
	source, target [Width]uintptr
}

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

// Force is what drives each lane in each frame of a control step.
type Force [Frames]floats

// Motion is what a kernel has to follow.
type Motion uint8

const (
	Still   Motion = iota
	Moving         // filters, levels and gains
	Gliding        // the delay as well
)

// Kernel renders banks.
type Kernel struct {
	name         string
	plain, stiff kinds
}

// kinds is by Motion.
type kinds [Gliding + 1]run

// run computes frames of a step from its frame from on. The lanes are ahead of
// their At by so many frames.
type run func(b *Bank, m *Mix, line []float32, force *Force, ahead, from, frames int)

// String names the processor that the kernel is for.
func (k Kernel) String() string { return k.name }

// Render computes frames from to until of a control step, at most Frames, in
// all lanes of b, on the lines in line, and adds them to m. force may be nil.
// It leaves At as it is.
//
// It panics when a lane reaches outside line, or reads less than Shortest back.
func (k Kernel) Render(b *Bank, m *Mix, line []float32, force *Force, motion Motion, from, until int) {
	if from < 0 || until > Frames {
		panic("lanes: frames outside the control step")
	}
	if force == nil {
		force = &nothing
	}
	do := k.plain[motion]
	if b.Sections > 0 {
		do = k.stiff[motion]
	}
	for start := from; from < until; {
		end := until
		if motion == Gliding {
			end = min(until, (from/int(b.Block)+1)*int(b.Block))
			if from%int(b.Block) == 0 {
				b.turn(m.Rows)
			}
		}
		for i := range b.At {
			b.check(i, Taps-1+Shortest, int64(until-start)+Spill, line)
		}
		do(b, m, line, force, from-start, from, end-from)
		from = end
	}
}

func (b *Bank) check(lane int, least, ahead int64, line []float32) {
	at, back := b.At[lane], b.Back[lane]
	if back < least || at-back < History || at+ahead > int64(len(line)) {
		panic("lanes: a lane reaches outside its line")
	}
}

// nothing is no force. It is never written.
var nothing Force

// Copy takes a lane of another bank to a lane of b, all but its line's place
// in the mix of the step.
func (b *Bank) Copy(to int, other *Bank, from int) {
	for i := range b.Tap {
		b.Tap[i][to], b.DTap[i][to] = other.Tap[i][from], other.DTap[i][from]
	}
	for i := range b.Slope {
		b.Slope[i][to] = other.Slope[i][from]
	}
	for i := range b.Curve {
		b.Curve[i][to] = other.Curve[i][from]
	}
	d, s := b.singles(), other.singles()
	for i := range d {
		d[i][to] = s[i][from]
	}
	dd, ss := b.doubles(), other.doubles()
	for i := range dd {
		dd[i][to] = ss[i][from]
	}
	b.At[to], b.Back[to], b.Glide[to] = other.At[from], other.Back[from], other.Glide[from]
}

// Rest silences a lane, which reads and writes the line at the place given.
func (b *Bank) Rest(lane int, at int64) {
	var still Bank
	b.Copy(lane, &still, 0)
	b.At[lane], b.Back[lane] = at, Taps-1+Shortest
}

func (b *Bank) singles() [11]*floats {
	return [...]*floats{&b.Level, &b.DLevel, &b.Offset, &b.DOffset, &b.D2Offset, &b.D3Offset, &b.Left, &b.Right, &b.DLeft, &b.DRight, &b.Power}
}

// filterDoubles is how many doubles a lane has beside those of its sections.
const filterDoubles = 13

func (b *Bank) doubles() (all [filterDoubles + 4*MaxSections + 2*(MaxSections+1)]*doubles) {
	copy(all[:], []*doubles{
		&b.C1, &b.C2, &b.DC1, &b.DC2, &b.V1, &b.V2,
		&b.Gain, &b.Zero, &b.Pole, &b.DGain, &b.DZero, &b.DPole, &b.Shelf,
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

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
//	v = x - C2 v'' - C1 v'
//	v = Shelf(v), then through the allpass sections, where there are any
//	y = line[at] = v + force
//
// In a kernel that moves, all that has a D-sister changes by it before each frame.
type Bank struct {
	Tap, DTap              [Taps]floats // the newest sample's first
	Left, Right, Bridge    floats       // gains of the mix
	DLeft, DRight, DBridge floats
	Power                  floats // sum of the squares of y so far
	C1, C2, DC1, DC2       doubles
	V1, V2                 doubles // the loss filter's last two outputs
	Gain, Zero, Pole       doubles // of the shelf
	DGain, DZero, DPole    doubles
	Shelf                  doubles // its last output
	Section                [MaxSections]Section
	Node                   [MaxSections + 1]Node
	At                     [Width]int64 // where each lane's next sample goes in the line
	Back                   [Width]int64 // from there to the oldest sample that its read needs
	Sections               int64        // 0: no shelf either
	_                      [7]int64
}

// Section is a second-order allpass in each lane.
type Section struct{ A1, A2, DA1, DA2 doubles }

// Node is what passed between two sections one and two frames ago.
type Node struct{ X, X1 doubles }

// Mix is where banks add what they sound, lane by lane, for the frames of one
// control step, and what kernels need beside.
type Mix struct {
	Left, Right    [Frames]floats
	window         [Frames + Taps + 4]floats
	source, target [Width]uintptr
}

// Clear empties frames from to until.
func (m *Mix) Clear(from, until int) {
	clear(m.Left[from:until])
	clear(m.Right[from:until])
}

// Force is what drives each lane in each frame of a control step.
type Force [Frames]floats

// Kernel renders banks.
type Kernel struct {
	name         string
	plain, stiff pair
}

type pair struct{ still, moving run }

// run computes frames of a step from its frame from on.
type run func(b *Bank, m *Mix, line []float32, force *Force, from, frames int)

// String names the processor that the kernel is for.
func (k Kernel) String() string { return k.name }

// Render computes frames from to until of a control step, at most Frames, in
// all lanes of b, on the lines in line, and adds them to m. force may be nil.
// It leaves At as it is.
//
// It panics when a lane reaches outside line, or reads less than Shortest back.
func (k Kernel) Render(b *Bank, m *Mix, line []float32, force *Force, moving bool, from, until int) {
	if from >= until {
		return
	}
	if from < 0 || until > Frames {
		panic("lanes: frames outside the control step")
	}
	for i, at := range b.At {
		back := b.Back[i]
		if back < Taps-1+Shortest || at-back < History || at+int64(until-from)+Spill > int64(len(line)) {
			panic("lanes: a lane reaches outside its line")
		}
	}
	if force == nil {
		force = &nothing
	}
	kind := k.plain
	if b.Sections > 0 {
		kind = k.stiff
	}
	if moving {
		kind.moving(b, m, line, force, from, until-from)
	} else {
		kind.still(b, m, line, force, from, until-from)
	}
}

// nothing is no force. It is never written.
var nothing Force

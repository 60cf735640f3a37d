package engine

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/floats"
)

// Convolution without latency: the impulse response's first tick frames are a
// direct filter, what follows is cut into partitions that grow with their
// distance and are multiplied in the frequency domain.
//
// The method is that of Gardner, "Efficient Convolution without Input-Output
// Delay", JAES 43(3), 1995: a partition of n frames that starts 2n frames into
// the response leaves n frames of time for its own computation. Each level uses
// all of that time in even slices, one every tick frames of the stream, so no
// call does much more than another; and since slices are due at frames and not
// at calls, the output does not depend on how the stream is cut.
//
// Left and right go through one complex transform as left + i right, for the
// response is real.

const (
	// tick is the length of the direct filter and of the first level's
	// partitions, in frames, and the distance between slices of work.
	tick = 64
	// growth is how much longer a level's partitions are than the level's before.
	growth = 8
	// deepest is the partition length at which growth ends: longer ones save
	// nothing more on responses of 2 s and cost memory.
	deepest = tick * growth * growth
)

// impulse is an impulse response made ready to convolve with. It never changes.
type impulse struct {
	head   []float64 // its first tick values, the last one first
	levels []level
}

// level is the part of a response that is cut into partitions of one length.
type level struct {
	size  int // frames of a partition
	parts int // partitions
	// spectra holds the partitions' spectra in the order [row][partition][column]
	// of fourStep, scaled so that the inverse transform needs no scaling.
	spectra []complex128
	// until says, for each slice of work in turn, how many tasks are then done.
	until []int
}

// newImpulse makes h ready, h[0] being the response at once.
func newImpulse(h []float64) *impulse {
	c := &impulse{head: make([]float64, tick)}
	for i := range min(tick, len(h)) {
		c.head[tick-1-i] = h[i]
	}
	for start, size := tick, tick; start < len(h); size *= growth {
		end := len(h)
		if size < deepest {
			end = min(end, 2*size*growth)
		}
		c.levels = append(c.levels, newLevel(h[start:end], size))
		start = end
	}
	return c
}

func newLevel(h []float64, size int) level {
	parts := (len(h) + size - 1) / size
	f := newFourStep(2 * size)
	l := level{size: size, parts: parts, spectra: make([]complex128, parts*2*size)}
	scale := 1 / float64(2*size)
	padded := make([]complex128, 2*size)
	for p := range parts {
		clear(padded)
		for i, v := range h[p*size : min((p+1)*size, len(h))] {
			padded[i] = complex(v*scale, 0)
		}
		at := l.spectra[p*f.columns:]
		for j := range f.columns {
			f.forwardColumn(at, parts*f.columns, padded, 0, j)
		}
		for r := range f.rows {
			row := at[r*parts*f.columns:][:f.columns]
			f.row.Coefficients(row, row)
		}
	}
	l.until = deal(f, parts, size/tick)
	return l
}

// deal shares a block's tasks out among n slices of about even cost.
func deal(f *fourStep, parts, n int) []int {
	// A butterfly of the transforms here takes about as long as a
	// multiplication of two complex numbers that are added to a sum.
	column := float64(f.rows) * (math.Log2(float64(f.rows)) + 2)
	row := float64(f.columns) * (2*math.Log2(float64(f.columns)) + 3 + float64(parts))
	total := 2*float64(f.columns)*column + float64(f.rows)*row
	until := make([]int, n)
	done, task := 0.0, 0
	for i := range until {
		for due := total * float64(i+1) / float64(n); task < f.tasks() && (done < due || i == n-1); task++ {
			if task >= f.columns && task < f.columns+f.rows {
				done += row
			} else {
				done += column
			}
		}
		until[i] = task
	}
	return until
}

// convolver is one stereo stream's passage through an impulse.
type convolver struct {
	c     *impulse
	count int // frames taken
	// left and right hold the last tick frames twice over, so that they can
	// always be read in one piece.
	left, right []float64
	input       []complex128 // ring of past frames
	tail        []complex128 // what the levels add to the next tick frames
	levels      []levelState
}

type levelState struct {
	level
	f       *fourStep
	task    int          // the next one to do
	start   int          // frame at which the block being worked on starts
	slot    int          // of that block in spectra
	blocks  []complex128 // spectra of the last blocks, [row][slot][column]
	middle  []complex128 // between the two halves of the inverse transform
	pending []complex128 // result being worked on
	playing []complex128 // result being heard
}

func newConvolver(c *impulse) *convolver {
	v := &convolver{
		c:     c,
		left:  make([]float64, 2*tick),
		right: make([]float64, 2*tick),
		tail:  make([]complex128, tick),
	}
	for _, l := range c.levels {
		f := newFourStep(2 * l.size)
		v.levels = append(v.levels, levelState{
			level:   l,
			f:       f,
			task:    f.tasks(), // nothing to do before the first block
			blocks:  make([]complex128, l.parts*2*l.size),
			middle:  make([]complex128, 2*l.size),
			pending: make([]complex128, l.size),
			playing: make([]complex128, l.size),
		})
		// A level still reads its block of two sizes while it takes in the next.
		v.input = make([]complex128, 4*l.size)
	}
	return v
}

// reset forgets everything that was taken in.
func (v *convolver) reset() {
	v.count = 0
	clear(v.left)
	clear(v.right)
	clear(v.input)
	clear(v.tail)
	for i := range v.levels {
		l := &v.levels[i]
		l.task, l.slot = l.f.tasks(), 0
		clear(l.blocks)
		clear(l.pending)
		clear(l.playing)
	}
}

// process replaces left and right, which are equally long, by their convolution.
func (v *convolver) process(left, right []float32) {
	mask := len(v.input) - 1
	for i, x := range left {
		l, r := float64(x), float64(right[i])
		at := v.count % tick
		v.left[at], v.left[at+tick] = l, l
		v.right[at], v.right[at+tick] = r, r
		tail := v.tail[at]
		left[i] = float32(floats.Dot(v.left[at+1:at+1+tick], v.c.head) + real(tail))
		right[i] = float32(floats.Dot(v.right[at+1:at+1+tick], v.c.head) + imag(tail))
		if mask >= 0 {
			v.input[v.count&mask] = complex(l, r)
		}
		v.count++
		if at == tick-1 {
			v.work()
		}
	}
}

// work does every level's slice and gathers what the next tick frames need.
func (v *convolver) work() {
	clear(v.tail)
	for i := range v.levels {
		l := &v.levels[i]
		slice := v.count / tick % len(l.until)
		if len(l.until) == 1 {
			l.begin(v.count)
			l.run(v.input, l.until[0])
			l.publish()
		} else {
			if slice == 0 {
				l.publish()
				l.begin(v.count)
			}
			l.run(v.input, l.until[slice])
		}
		for k, y := range l.playing[slice*tick:][:tick] {
			v.tail[k] += y
		}
	}
}

// begin takes up the block that ends at frame end.
func (l *levelState) begin(end int) {
	l.task = 0
	l.start = end - 2*l.size
	l.slot = (l.slot + 1) % l.parts
}

func (l *levelState) publish() { l.pending, l.playing = l.playing, l.pending }

// run does the block's tasks up to the until-th.
func (l *levelState) run(input []complex128, until int) {
	columns, stride := l.f.columns, l.parts*l.f.columns
	for ; l.task < until; l.task++ {
		switch t := l.task; {
		case t < columns:
			l.f.forwardColumn(l.blocks[l.slot*columns:], stride, input, l.start, t)
		case t < columns+l.f.rows:
			l.multiplyRow(t - columns)
		default:
			l.f.inverseColumn(l.pending, l.middle, t-columns-l.f.rows)
		}
	}
}

// multiplyRow finishes one row of the block's spectrum, multiplies the row of
// every past block with that of its partition, and starts the way back.
func (l *levelState) multiplyRow(r int) {
	f, n := l.f, l.f.columns
	blocks := l.blocks[r*l.parts*n:][:l.parts*n]
	spectra := l.spectra[r*l.parts*n:][:l.parts*n]
	newest := blocks[l.slot*n:][:n]
	f.row.Coefficients(newest, newest)
	sum := l.middle[r*n:][:n]
	clear(sum)
	for p := range l.parts {
		slot := l.slot - p
		if slot < 0 {
			slot += l.parts
		}
		addProduct(sum, blocks[slot*n:][:n], spectra[p*n:][:n])
	}
	f.row.Sequence(sum, sum)
	for j, w := range f.twiddle[r*n:][:n] {
		sum[j] *= cmplx.Conj(w)
	}
}

func addProduct(sum, a, b []complex128) {
	a, b = a[:len(sum)], b[:len(sum)]
	for i := range sum {
		sum[i] += a[i] * b[i]
	}
}

// fourStep is a complex Fourier transform in rows and columns, which can be
// stopped and taken up between any two of them: Bailey, "FFTs in External or
// Hierarchical Memory", Journal of Supercomputing 4, 1990, without its last
// transposition, for a convolution does not mind the spectrum's order. Frame
// j + columns*i is in column j; bin k + rows*m is the m-th of row k.
type fourStep struct {
	rows, columns int
	column, row   *fourier.CmplxFFT
	twiddle       []complex128 // [row][column]
	buffer        []complex128 // of a column
}

// newFourStep makes a transform of n frames, a power of two.
func newFourStep(n int) *fourStep {
	rows := 1
	for 4*rows*rows <= n {
		rows *= 2
	}
	f := &fourStep{
		rows: rows, columns: n / rows,
		column:  fourier.NewCmplxFFT(rows),
		row:     fourier.NewCmplxFFT(n / rows),
		twiddle: make([]complex128, n),
		buffer:  make([]complex128, rows),
	}
	for k := range rows {
		for j := range f.columns {
			f.twiddle[k*f.columns+j] = cmplx.Rect(1, -2*math.Pi*float64(j*k)/float64(n))
		}
	}
	return f
}

// tasks is the number of steps there and back: columns, rows, columns.
func (f *fourStep) tasks() int { return 2*f.columns + f.rows }

// forwardColumn transforms column j of the ring src, read from frame start on,
// into dst, whose rows are stride apart.
func (f *fourStep) forwardColumn(dst []complex128, stride int, src []complex128, start, j int) {
	mask := len(src) - 1
	for i := range f.buffer {
		f.buffer[i] = src[(start+j+i*f.columns)&mask]
	}
	f.column.Coefficients(f.buffer, f.buffer)
	for k, v := range f.buffer {
		dst[k*stride+j] = v * f.twiddle[k*f.columns+j]
	}
}

// inverseColumn takes column j back to time. dst gets the later half, the one
// that overlap-save keeps.
func (f *fourStep) inverseColumn(dst, src []complex128, j int) {
	for k := range f.buffer {
		f.buffer[k] = src[k*f.columns+j]
	}
	f.column.Sequence(f.buffer, f.buffer)
	for i, v := range f.buffer[f.rows/2:] {
		dst[i*f.columns+j] = v
	}
}

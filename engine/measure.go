package engine

import (
	"math/bits"
	"sync/atomic"
)

// Flags are what an output knows of a period, one bit each.
type Flags uint32

const (
	// Underflow: the driver reports that sound was missing before this period.
	Underflow Flags = 1 << iota
	// Unheard: the period goes nowhere, as while a lost device is waited for.
	Unheard
	// Silenced: a panic made this period silent. The Player sets it.
	Silenced
)

// Cause says why sound was missing; see Player for how it is found.
type Cause uint8

const (
	// NoXrun: the period was in time.
	NoXrun Cause = iota
	// Late: the callback was woken late.
	Late
	// Slow: rendering outran the period.
	Slow
	// Device: the driver alone reports it.
	Device
)

// String returns the word of the log.
func (c Cause) String() string {
	switch c {
	case Late:
		return "late"
	case Slow:
		return "slow"
	case Device:
		return "device"
	}
	return ""
}

// MeasuredNotes is how many notes of one period have their latency measured. More
// are counted only: they are a chord within a millisecond or two, whose latencies
// differ by less than that.
const MeasuredNotes = 8

// Measure is what is known of one callback. Times are in ns.
type Measure struct {
	Start   int64 // when the callback began, by Now
	Gap     int64 // since the callback before began; 0 for the first of a stream
	Wake    int64 // how late it began by the filtered clock of the stream; negative if early
	Render  int64 // how long it took
	Frames  int32
	Strings int32 // that sound
	Events  int32 // that took effect
	Notes   int32 // that were struck, of which the first MeasuredNotes have a Latency
	Latency [MeasuredNotes]int64
	Flags   Flags
	Cause   Cause
}

// Note adds a note that was struck latency ns after its first byte had come. It is
// called by the engine's Report.
func (m *Measure) Note(latency int64) {
	if m.Notes < MeasuredNotes {
		m.Latency[m.Notes] = latency
	}
	m.Notes++
}

// Latencies returns those that are known, in ns.
func (m *Measure) Latencies() []int64 {
	return m.Latency[:min(m.Notes, MeasuredNotes)]
}

// Measures is the way of measures from the callback to the logger: a ring with one
// writer and one reader that never makes the writer wait. When the reader
// has fallen behind by the whole ring, new measures are dropped and counted.
//
// Head and tail stand on cache lines of their own, so that the reader's polling
// doesn't slow the callback.
type Measures struct {
	ring    []Measure
	_       [64]byte
	head    atomic.Uint64 // next to write
	_       [64]byte
	tail    atomic.Uint64 // next to read
	_       [64]byte
	dropped atomic.Uint64
}

// NewMeasures returns a ring for at least size measures, at least 1.
func NewMeasures(size int) *Measures {
	return &Measures{ring: make([]Measure, 1<<bits.Len(uint(max(size, 1)-1)))}
}

// Put adds a copy of m, or drops and counts it. For the one writer.
func (r *Measures) Put(m *Measure) bool {
	head := r.head.Load()
	if head-r.tail.Load() == uint64(len(r.ring)) {
		r.dropped.Add(1)
		return false
	}
	r.ring[head&uint64(len(r.ring)-1)] = *m
	r.head.Store(head + 1)
	return true
}

// Take moves the oldest measure to m, or returns false if there is none. For the one
// reader.
func (r *Measures) Take(m *Measure) bool {
	tail := r.tail.Load()
	if tail == r.head.Load() {
		return false
	}
	*m = r.ring[tail&uint64(len(r.ring)-1)]
	r.tail.Store(tail + 1)
	return true
}

// Dropped returns how many measures have been dropped. For any goroutine.
func (r *Measures) Dropped() uint64 { return r.dropped.Load() }

// Histogram counts times in buckets that are 1/32 of an octave or less apart, so that its
// quantiles are right within 3.2 %. The zero value is empty and ready.
type Histogram struct {
	buckets [(64 - histogramBits) << histogramBits]uint64
	n       uint64
	max     int64
}

const histogramBits = 5 // 32 buckets an octave

// Add counts t, in ns; what is negative counts as 0.
func (h *Histogram) Add(t int64) {
	t = max(t, 0)
	h.buckets[bucketOf(t)]++
	h.n++
	h.max = max(h.max, t)
}

// N returns how many times were counted.
func (h *Histogram) N() uint64 { return h.n }

// Max returns the longest time, exactly; 0 if there is none.
func (h *Histogram) Max() int64 { return h.max }

// Quantile returns the time (ns) that a part q of all times, 0 to 1, does not
// exceed: the top of its bucket, and never more than Max. It is 0 if there is none.
func (h *Histogram) Quantile(q float64) int64 {
	if h.n == 0 {
		return 0
	}
	// The nearest rank: the smallest count that is at least q of all.
	rank := uint64(q * float64(h.n))
	if float64(rank) < q*float64(h.n) || rank == 0 {
		rank++
	}
	var seen uint64
	for i, n := range h.buckets {
		seen += n
		if seen >= rank {
			return min(bucketTop(i), h.max)
		}
	}
	return h.max
}

// bucketOf: below 32 each number has its own bucket; above, the number's highest six
// bits say which.
func bucketOf(t int64) int {
	shift := max(bits.Len64(uint64(t))-histogramBits-1, 0)
	return shift<<histogramBits + int(t>>shift)
}

// bucketTop returns the largest number of bucket i.
func bucketTop(i int) int64 {
	shift := max(i>>histogramBits-1, 0)
	return int64(i-shift<<histogramBits+1)<<shift - 1
}

// Window gathers the measures of a stretch of time, as the log's window record
// shows them. The zero value is empty and ready. For one goroutine.
type Window struct {
	Render, Wake, Note Histogram // ns
	Callbacks          uint64
	Frames             uint64
	Events             uint64
	Notes              uint64
	Xruns              [Device + 1]uint64 // by Cause
	Strings            int32              // at most
	rendering          int64              // ns
}

// Add counts m. Periods that nobody hears are left out.
func (w *Window) Add(m *Measure) {
	if m.Flags&Unheard != 0 {
		return
	}
	w.Callbacks++
	w.Frames += uint64(m.Frames)
	w.Events += uint64(m.Events)
	w.Notes += uint64(m.Notes)
	w.Strings = max(w.Strings, m.Strings)
	w.Render.Add(m.Render)
	w.Wake.Add(m.Wake)
	w.rendering += m.Render
	for _, latency := range m.Latencies() {
		w.Note.Add(latency)
	}
	if m.Cause != NoXrun {
		w.Xruns[m.Cause]++
	}
}

// Missed returns the xruns of every cause.
func (w *Window) Missed() uint64 { return w.Xruns[Late] + w.Xruns[Slow] + w.Xruns[Device] }

// Load returns the part of the time that rendering took, at the given frames per second: 1 is all
// of it.
func (w *Window) Load(rate int) float64 {
	if w.Frames == 0 {
		return 0
	}
	return float64(w.rendering) * float64(rate) / (float64(w.Frames) * 1e9)
}

package engine

import (
	"math"
	"sync/atomic"
)

// meters are written by the callback and read by anyone.
type meters struct {
	left, right atomic.Uint32 // peaks since the last reading, bits of float32
	power       atomic.Uint64 // mean square over meterTime, bits of float64
	limited     atomic.Uint32 // least gain of the limiter since the last reading, bits of float32
	strings     atomic.Int32
	sympathetic atomic.Int32

	perFrame float64 // part of the way that the mean square goes in a frame
}

// meterTime is the time constant of the loudness, s.
const meterTime = 0.3

// Levels are what the meters say. Amplitudes are of full scale: 1 is 0 dBFS.
type Levels struct {
	Left, Right float64 // peaks since the last Levels
	RMS         float64 // of both sides over some 0.3 s
	Reduction   float64 // dB by which the limiter turned down at most since the last Levels, 0 or more
	Strings     int     // that sound now, those in sympathy not counted
	Sympathetic int     // that sound in sympathy
}

func (m *meters) init(rate float64) {
	m.perFrame = -math.Expm1(-1 / (rate * meterTime))
	m.limited.Store(math.Float32bits(1))
}

// see takes a rendered period and the limiter's least gain in it.
func (m *meters) see(out []float32, least uint64) {
	var left, right float32
	power := math.Float64frombits(m.power.Load())
	for i := 0; i+1 < len(out); i += 2 {
		l, r := out[i], out[i+1]
		left, right = max(left, abs(l)), max(right, abs(r))
		power += (float64(l*l+r*r)/2 - power) * m.perFrame
	}
	if power < 1e-20 {
		power = 0
	}
	m.power.Store(math.Float64bits(power))
	raise(&m.left, left)
	raise(&m.right, right)
	lower(&m.limited, float32(float64(least)/one))
}

// raise and lower try a few times only: a reader who comes in between takes what was
// there, and the next period writes again.
func raise(to *atomic.Uint32, x float32) {
	for range 4 {
		old := to.Load()
		if x <= math.Float32frombits(old) || to.CompareAndSwap(old, math.Float32bits(x)) {
			return
		}
	}
}

func lower(to *atomic.Uint32, x float32) {
	for range 4 {
		old := to.Load()
		if x >= math.Float32frombits(old) || to.CompareAndSwap(old, math.Float32bits(x)) {
			return
		}
	}
}

func (m *meters) levels() Levels {
	gain := math.Float32frombits(m.limited.Swap(math.Float32bits(1)))
	return Levels{
		Left:        float64(math.Float32frombits(m.left.Swap(0))),
		Right:       float64(math.Float32frombits(m.right.Swap(0))),
		RMS:         math.Sqrt(math.Float64frombits(m.power.Load())),
		Reduction:   max(0, -20*math.Log10(max(float64(gain), 1e-9))),
		Strings:     int(m.strings.Load()),
		Sympathetic: int(m.sympathetic.Load()),
	}
}

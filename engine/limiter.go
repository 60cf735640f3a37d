package engine

import "math"

// limiter keeps stereo peaks at -1 dBFS: what is quieter passes unchanged, later by
// the look-ahead; of what is louder both sides are turned down alike, ahead
// of the peak, over the look-ahead, and up again over limiterRelease.
//
//	need = the gain that brings the frame to -1 dBFS, 1 if it is below
//	low  = the least need of the frames within the look-ahead
//	held = low, or what release allows if that is less
//	gain = held, averaged twice over half the look-ahead
//
// Every value averaged for a frame is at most the frame's own need, so the peak
// never passes; two averages leave the gain without steps and corners. Gains are whole
// numbers, so that their sums are exact, gain 1 is exactly 1, and
// nothing depends on where a period ends.
type limiter struct {
	look    int // frames of delay
	ceiling float32
	delay   [][2]float32
	at      int

	// window holds the frames whose need is less than that of all later ones, in a
	// ring: the first is the least need of all (Lemire, "Streaming Maximum-Minimum
	// Filter Using No More than Three Comparisons per Element", Nordic Journal of
	// Computing 13(4), 2006).
	window      []need
	front, held int
	frame       int64

	level         uint64 // held
	release       uint64 // part of the way to 1 that a frame gives back, of one<<releaseBits
	first, second average
	muted         uint64 // frames that were not numbers
	least         uint64 // gain since the meter was read
}

type need struct {
	frame int64
	gain  uint64
}

const (
	one            = 1 << 30
	releaseBits    = 24
	limiterLook    = 0.0015 // s
	limiterRelease = 0.1    // s: time constant
	limiterCeiling = -1.0   // dBFS
)

func newLimiter(rate float64) *limiter {
	half := max(1, int(rate*limiterLook/2))
	l := &limiter{
		look:    2 * half,
		ceiling: float32(amplitude(limiterCeiling)),
		delay:   make([][2]float32, 2*half+1),
		window:  make([]need, 2*half+2),
		level:   one,
		release: uint64(-math.Expm1(-1/(rate*limiterRelease)) * (1 << releaseBits)),
		first:   newAverage(half),
		second:  newAverage(half + 2),
		least:   one,
	}
	return l
}

// process limits interleaved stereo in place.
func (l *limiter) process(out []float32) {
	for i := 0; i+1 < len(out); i += 2 {
		left, right := l.number(out[i]), l.number(out[i+1])
		gain := l.gain(needOf(max(abs(left), abs(right)), l.ceiling))

		l.delay[l.at] = [2]float32{left, right}
		l.at++
		if l.at == len(l.delay) {
			l.at = 0
		}
		late := l.delay[l.at]
		if gain == one {
			out[i], out[i+1] = late[0], late[1]
			continue
		}
		l.least = min(l.least, gain)
		factor := float64(gain) / one
		out[i], out[i+1] = turnDown(late[0], factor), turnDown(late[1], factor)
	}
}

// number lets silence stand for what is not a number.
func (l *limiter) number(x float32) float32 {
	if x-x != 0 { // infinite or not a number
		l.muted++
		return 0
	}
	return x
}

func needOf(peak, ceiling float32) uint64 {
	if peak <= ceiling {
		return one
	}
	return uint64(float64(ceiling) / float64(peak) * one)
}

func turnDown(x float32, factor float64) float32 {
	return min(max(float32(float64(x)*factor), -1), 1)
}

func (l *limiter) gain(g uint64) uint64 {
	low := l.lowest(g)
	if low < l.level {
		l.level = low
	} else if l.level < one {
		// The 1 added makes it arrive.
		l.level = min(low, l.level+(one-l.level)*l.release>>releaseBits+1)
	}
	return l.second.next(l.first.next(l.level))
}

// lowest is the least need of the last look+1 frames.
func (l *limiter) lowest(g uint64) uint64 {
	size := len(l.window)
	if l.held > 0 && l.window[l.front].frame < l.frame-int64(l.look) {
		l.front = (l.front + 1) % size
		l.held--
	}
	for l.held > 0 && l.window[(l.front+l.held-1)%size].gain >= g {
		l.held--
	}
	l.window[(l.front+l.held)%size] = need{frame: l.frame, gain: g}
	l.held++
	l.frame++
	return l.window[l.front].gain
}

// average is the mean of the last values, exact.
type average struct {
	line []uint64
	at   int
	sum  uint64
	rest uint64 // the sum when all are one
}

func newAverage(length int) average {
	a := average{line: make([]uint64, length), rest: uint64(length) * one}
	a.sum = a.rest
	for i := range a.line {
		a.line[i] = one
	}
	return a
}

func (a *average) next(x uint64) uint64 {
	a.sum += x - a.line[a.at]
	a.line[a.at] = x
	a.at++
	if a.at == len(a.line) {
		a.at = 0
	}
	if a.sum == a.rest {
		return one
	}
	return a.sum / uint64(len(a.line))
}

func abs(x float32) float32 { return max(x, -x) }

package measure

import (
	"fmt"
	"math"
	"math/cmplx"
)

// The window of a Track in periods of the spacing, its main lobe ending at the
// neighbours, and no shorter than trackShortest.
const (
	trackPeriods  = 6.5
	trackShortest = 0.02 // s
	trackHops     = 4    // points a window
)

// Track follows one place of the spectrum through time, whatever sounds there: one mode, or
// several that beat. It fits nothing, so it always has an answer: the one that an ear has,
// where Partial and Modes tell what stands behind it.
type Track struct {
	rate, near float64 // Hz
	start, hop float64 // s: the middle of the first window, and from point to point
	points     []complex128
}

// NewTrack follows the partial near a frequency (Hz) whose neighbours are about spacing
// (Hz) away; they are kept out by 150 dB.
//
// # Errors
//
// A frequency outside 0 to rate/2, a spacing that is not above 0, or fewer frames than a window
// has: 6.5 periods of spacing and 20 ms.
func NewTrack[S Sample](signal []S, rate, near, spacing float64) (Track, error) {
	if !(near > 0) || !(near < rate/2) || !(spacing > 0) {
		return Track{}, fmt.Errorf("measure: track near %g Hz, spacing %g Hz at rate %g Hz; need 0 < near < rate/2 and spacing above 0", near, spacing, rate)
	}
	length := int(math.Ceil(max(trackPeriods/spacing, trackShortest) * rate))
	if len(signal) < length {
		return Track{}, fmt.Errorf("measure: track near %g Hz needs %d frames; got %d", near, length, len(signal))
	}
	taps := kaiser(length, bandBeta)
	scale := 2 / sum(taps)
	for i := range taps {
		taps[i] *= scale
	}
	hop := max(1, length/trackHops)
	return Track{
		rate: rate, near: near,
		start: float64(length) / 2 / rate, hop: float64(hop) / rate,
		points: slide(heterodyne(signal, 2*math.Pi*near/rate), taps, hop),
	}, nil
}

// Level is how loud the partial is: a steady sine of full scale has 0 dB.
func (t Track) Level() Curve {
	var c Curve
	for i, z := range t.points {
		c.Time = append(c.Time, t.start+float64(i)*t.hop)
		c.DB = append(c.DB, dB(cmplx.Abs(z)))
	}
	return c
}

// Pitch is the mean frequency in Hz from one time to another (s), weighted by power, so that
// the loudest counts most. It is exact for a single mode, and NaN where there is no sound or
// no two points lie between the times. It is the estimator of Miller and Rochwarger, "A Covariance Approach to
// Spectral Moment Estimation", IEEE Trans. Information Theory 18(5), 1972.
func (t Track) Pitch(from, to float64) float64 {
	var turn complex128
	for i := range max(0, len(t.points)-1) {
		at := t.start + float64(i)*t.hop
		if at >= from && at+t.hop <= to {
			turn += cmplx.Conj(t.points[i]) * t.points[i+1]
		}
	}
	if turn == 0 {
		return math.NaN()
	}
	return t.near + cmplx.Phase(turn)/(2*math.Pi*t.hop)
}

// Fall is how long in s a level takes from its peak until it stays the given dB below. Where the
// curve ends before, it is drawn out straight by its later half from the peak on. It is NaN for silence
// and for what does not fall.
func (c Curve) Fall(depth float64) float64 {
	peak := -1
	for i, v := range c.DB {
		if !math.IsInf(v, -1) && (peak < 0 || v > c.DB[peak]) {
			peak = i
		}
	}
	if peak < 0 {
		return math.NaN()
	}
	floor := c.DB[peak] - depth
	last := len(c.DB) - 1
	for last > peak && c.DB[last] < floor {
		last--
	}
	if last == len(c.DB)-1 {
		return c.falling(peak, floor)
	}
	low, high := c.DB[last], c.DB[last+1]
	part := 1.0
	if !math.IsInf(high, -1) {
		part = (low - floor) / (low - high)
	}
	return c.Time[last] + part*(c.Time[last+1]-c.Time[last]) - c.Time[peak]
}

// falling draws the curve's later half out to the floor, by least squares.
func (c Curve) falling(peak int, floor float64) float64 {
	from := (peak + len(c.DB)) / 2
	n := float64(len(c.DB) - from)
	if n < 2 {
		return math.NaN()
	}
	t, v := sum(c.Time[from:])/n, sum(c.DB[from:])/n
	var tt, tv float64
	for i := from; i < len(c.DB); i++ {
		tt += (c.Time[i] - t) * (c.Time[i] - t)
		tv += (c.Time[i] - t) * (c.DB[i] - v)
	}
	if slope := tv / tt; slope < 0 {
		return t + (floor-v)/slope - c.Time[peak]
	}
	return math.NaN()
}

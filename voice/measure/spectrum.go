package measure

import (
	"fmt"
	"math"
	"math/bits"
	"math/cmplx"

	"gonum.org/v1/gonum/dsp/fourier"
)

// spectrumBeta makes side lobes below -120 dB with a main lobe of 9 bins.
const spectrumBeta = 14.0

// Spectrum is the level of a signal over frequency: a steady sine of full scale
// that lies on a bin has 0 dB there.
type Spectrum struct {
	Step float64   // Hz from bin to bin; the first is 0 Hz, the last rate/2
	DB   []float64 // -Inf where there is nothing at all
}

// NewSpectrum looks at the whole signal through a Kaiser window, and fills it up
// with silence to a power of two frames. An empty signal has an empty spectrum.
func NewSpectrum[S Sample](signal []S, rate float64) Spectrum {
	if len(signal) == 0 {
		return Spectrum{}
	}
	w := kaiser(len(signal), spectrumBeta)
	x := make([]float64, 1<<bits.Len(uint(len(signal)-1)))
	var gain float64
	for i, h := range w {
		x[i] = h * float64(signal[i])
		gain += h
	}
	s := Spectrum{Step: rate / float64(len(x))}
	for _, c := range fourier.NewFFT(len(x)).Coefficients(nil, x) {
		s.DB = append(s.DB, dB(2*cmplx.Abs(c)/gain))
	}
	s.DB[0] -= dB(2)
	if len(x) > 1 {
		s.DB[len(s.DB)-1] -= dB(2)
	}
	return s
}

// Peak is the highest bin from low to high Hz and its level, -Inf where there is none.
func (s Spectrum) Peak(low, high float64) (hz, level float64) {
	level = math.Inf(-1)
	for i, v := range s.DB {
		f := float64(i) * s.Step
		if f >= low && f <= high && v > level {
			hz, level = f, v
		}
	}
	return hz, level
}

// levelPeriods of the spacing are seen at once by Level, so that its window's
// main lobe ends before the neighbours (0.81 spacings away).
const levelPeriods = 8

// Level is how strong a signal is at one frequency near its start, in dB, while
// its neighbours, spacing Hz apart, are kept out by 150 dB if they are steady. It is an
// average over 8 periods of spacing, so also of what has decayed by then, and it
// never fails to find something: a null has a level too, where Partial has none.
//
// # Errors
//
// A frequency outside 0 to rate/2; fewer than 8 periods of spacing.
func Level[S Sample](signal []S, rate, hz, spacing float64) (float64, error) {
	if !(rate > 0) || !(hz > 0) || hz >= rate/2 || !(spacing > 0) {
		return 0, fmt.Errorf("measure: level at %g Hz, spacing %g Hz, rate %g Hz; need 0 < hz < rate/2 and spacing above 0", hz, spacing, rate)
	}
	n := int(math.Ceil(levelPeriods * rate / spacing))
	if n > len(signal) {
		return 0, fmt.Errorf("measure: level at %g Hz needs %d frames, %d periods of %g Hz; got %d", hz, n, levelPeriods, spacing, len(signal))
	}
	w := kaiser(n, bandBeta)
	var sum complex128
	var gain float64
	for i, y := range heterodyne(signal[:n], 2*math.Pi*hz/rate) {
		sum += y * complex(w[i], 0)
		gain += w[i]
	}
	return dB(2 * cmplx.Abs(sum) / gain), nil
}

// Null is how deep partial n of f0 Hz lies below its two neighbours' mean level, in
// dB, positive for a null. n is 2 or more.
//
// # Errors
//
// Those of Level.
func Null[S Sample](signal []S, rate, f0 float64, n int) (float64, error) {
	var level [3]float64
	for i := range level {
		var err error
		if level[i], err = Level(signal, rate, float64(n-1+i)*f0, f0); err != nil {
			return 0, err
		}
	}
	return (level[0]+level[2])/2 - level[1], nil
}

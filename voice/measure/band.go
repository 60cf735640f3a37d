package measure

import (
	"math"
	"math/cmplx"
)

// The shape of the band filter. Its window at beta 20 leaves less than -150 dB
// outside its main lobe, as deep as the rounding of float32 samples.
const (
	bandBeta   = 20.0
	bandPoints = 28 // points of the band in one window length: its main lobe is 13 bins wide
	preTaps    = 8  // taps of the first stage in its own hops
)

// band is a signal seen through a window that slides along it, around one
// frequency. Only windows that lie wholly inside the signal are taken, so each
// mode a exp(st) of the signal is a mode of the band too, with the same s and
// the amplitude a gain(s), exactly; nothing rings in or out.
type band struct {
	points []float64 // the middle of the band is moved to a quarter of the rate of points
	middle float64   // rad per frame
	hop    int       // frames from point to point
	stages []stage
}

type stage struct {
	taps []float64
	hop  int // frames of the signal between taps
}

// newBand filters signal around middle (rad per frame) with a window of the
// given length in frames. The band reaches 6.5/length to either side.
func newBand[S Sample](signal []S, middle float64, length int) band {
	b := band{middle: middle}
	y := heterodyne(signal, middle)
	spacing, hop := 1, max(1, length/bandPoints)
	if pre := length / (2 * bandPoints); pre > 1 {
		taps := kaiser(preTaps*pre+1, bandBeta)
		y = slide(y, taps, pre)
		b.stages = append(b.stages, stage{taps, 1})
		spacing, hop = pre, 2
	}
	taps := kaiser(max(1, length/spacing)+1, bandBeta)
	y = slide(y, taps, hop)
	b.stages = append(b.stages, stage{taps, spacing})
	b.hop = hop * spacing

	b.points = make([]float64, len(y))
	turn := complex(1, 0)
	for i, v := range y {
		b.points[i] = 2 * real(v*turn)
		turn *= 1i
	}
	return b
}

// gain is what the filter does to a mode's complex amplitude; s per frame.
func (b band) gain(s complex128) complex128 {
	s -= complex(0, b.middle)
	g := complex(1, 0)
	for _, st := range b.stages {
		var sum complex128
		for i, h := range st.taps {
			sum += complex(h, 0) * cmplx.Exp(s*complex(float64(i*st.hop), 0))
		}
		g *= sum
	}
	return g
}

// rate turns a pole of points into a mode's s per frame.
func (b band) rate(pole complex128) complex128 {
	return cmplx.Log(pole/1i)/complex(float64(b.hop), 0) + complex(0, b.middle)
}

// heterodyne moves the frequency w (rad per frame) to zero.
func heterodyne[S Sample](signal []S, w float64) []complex128 {
	const exact = 128 // frames between exact phases
	y := make([]complex128, len(signal))
	turn := cmplx.Exp(complex(0, -w))
	var p complex128
	for i, x := range signal {
		if i%exact == 0 {
			cycles := w / (2 * math.Pi) * float64(i)
			p = cmplx.Exp(complex(0, -2*math.Pi*(cycles-math.Floor(cycles))))
		}
		y[i] = complex(float64(x)*real(p), float64(x)*imag(p))
		p *= turn
	}
	return y
}

// slide is the sum of taps[k] x[n hop + k], for every n with all of its terms in x.
func slide(x []complex128, taps []float64, hop int) []complex128 {
	n := (len(x)-len(taps))/hop + 1
	if len(x) < len(taps) {
		return nil
	}
	y := make([]complex128, n)
	for i := range y {
		var re, im float64
		for k, v := range x[i*hop : i*hop+len(taps)] {
			re += taps[k] * real(v)
			im += taps[k] * imag(v)
		}
		y[i] = complex(re, im)
	}
	return y
}

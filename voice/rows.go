package voice

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"

	"tautwire/voice/lanes"
)

// newRows makes the reads of gliding strings: for the middle of each part of a
// sample the taps, their slope over the delay and half their curve, so that a read near by
// is three sums instead of new taps.
//
// The slope is fitted, like the taps themselves, over the band of interpolator, with more weight where
// a string is loud; the curve so that the three together neither add nor take
// energy, whatever the offset: a loop of them stays below one at all frequencies.
func newRows(ip *interpolator) *lanes.Rows {
	rows := &lanes.Rows{}
	for i := range rows {
		var h [taps]float64
		ip.at((float64(i)+0.5)/lanes.RowsInSample, &h)
		value := response(h[:])
		slope := fitSlope(value)
		curve := fitCurve(value, response(slope))
		for t := range h {
			rows[i].Tap[t] = float32(h[t])
		}
		for t, k := range slope {
			rows[i].Slope[t] = float32(k)
		}
		for t, k := range curve {
			rows[i].Curve[t] = float32(k)
		}
	}
	return rows
}

// rowPoints is at how many frequencies, evenly apart up to half the rate, rows are fitted.
const rowPoints = 160

func rowFrequency(point int) float64 { return math.Pi * (float64(point) + 0.5) / rowPoints }

// tapTurn is what the t-th of n taps in the middle of a read does to a frequency w.
func tapTurn(t, n int, w float64) complex128 { return unit(-w * float64(t-(n/2-1))) }

// response is that of taps in the middle of a read, at each point.
func response(h []float64) (r [rowPoints]complex128) {
	for p := range r {
		for t, k := range h {
			r[p] += complex(k, 0) * tapTurn(t, len(h), rowFrequency(p))
		}
	}
	return r
}

// fitSlope finds taps that make of a read its derivative by the delay; above the
// band they must only turn its phase.
func fitSlope(value [rowPoints]complex128) []float64 {
	const outside = 0.01 // weight
	var f rowFit
	for p, a := range value {
		w := rowFrequency(p)
		if w < bandEdge {
			f.add(w, a, complex(0, -w)*a*cmplx.Conj(a), 1/(w*w), lanes.SlopeTaps, true)
		} else {
			f.add(w, a, 0, outside, lanes.SlopeTaps, false)
		}
	}
	return f.solve(lanes.SlopeTaps)
}

// fitCurve finds taps that take back what the slope adds to a read's magnitude, and a little more.
func fitCurve(value, slope [rowPoints]complex128) []float64 {
	const (
		outside = 0.3  // weight
		more    = 0.01 // beyond the fit's own error
	)
	var f rowFit
	for p, a := range value {
		w := rowFrequency(p)
		back := complex(-norm(slope[p])/2*(1+more), 0)
		if w < bandEdge {
			f.add(w, a, back, math.Pow(w, -2.5), lanes.CurveTaps, true)
		} else {
			f.add(w, a, back, outside, lanes.CurveTaps, false)
		}
	}
	return f.solve(lanes.CurveTaps)
}

func norm(z complex128) float64 { return real(z)*real(z) + imag(z)*imag(z) }

// rowFit is a least-squares problem for the taps x of a response X, relative
// to that of a read a: a* X = y.
type rowFit struct {
	gram [lanes.SlopeTaps][lanes.SlopeTaps]float64
	rhs  [lanes.SlopeTaps]float64
}

// add adds the equation at w, or its real part alone.
func (f *rowFit) add(w float64, a, y complex128, weight float64, n int, whole bool) {
	var turned [lanes.SlopeTaps]complex128
	for t := range n {
		turned[t] = cmplx.Conj(a) * tapTurn(t, n, w)
	}
	weight *= weight
	for i := range n {
		for j := range n {
			f.gram[i][j] += weight * real(turned[i]) * real(turned[j])
			if whole {
				f.gram[i][j] += weight * imag(turned[i]) * imag(turned[j])
			}
		}
		f.rhs[i] += weight * real(turned[i]) * real(y)
		if whole {
			f.rhs[i] += weight * imag(turned[i]) * imag(y)
		}
	}
}

func (f *rowFit) solve(n int) []float64 {
	gram, rhs := mat.NewSymDense(n, nil), mat.NewVecDense(n, f.rhs[:n])
	for i := range n {
		for j := i; j < n; j++ {
			gram.SetSym(i, j, f.gram[i][j])
		}
	}
	var c mat.Cholesky
	var x mat.VecDense
	if !c.Factorize(gram) || c.SolveVecTo(&x, rhs) != nil {
		panic("voice: the fit of a gliding read has no solution") // it is a constant of this package
	}
	return x.RawVector().Data
}

package voice

import (
	"math"

	"gonum.org/v1/gonum/mat"

	"tautwire/voice/lanes"
)

// newRows makes the reads of gliding strings: for the middle of each part of a
// sample the taps, their slope and half their curve over the delay, so that a read near by
// is three sums instead of new taps.
//
// The slope and the curve are fitted like the taps themselves, see interpolator, with
// more weight on low frequencies, where a string is loud. At 2 kHz and 48 kHz they are within
// 2e-5 and 1e-2 of what they stand for.
func newRows(ip *interpolator) *lanes.Rows {
	rows := &lanes.Rows{}
	slope := newDerivative(1, lanes.SlopeTaps, 2)
	curve := newDerivative(2, lanes.CurveTaps, 3)
	for i := range rows {
		row, fraction := &rows[i], (float64(i)+0.5)/lanes.RowsInSample
		var h [taps]float64
		ip.at(fraction, &h)
		for t := range h {
			row.Tap[t] = float32(h[t])
		}
		for t, k := range slope.at(fraction) {
			row.Slope[t] = float32(k)
		}
		for t, k := range curve.at(fraction) {
			row.Curve[t] = float32(k / 2)
		}
	}
	return rows
}

// derivative fits taps that differentiate a read by its delay.
type derivative struct {
	order, taps int
	weight      float64 // power of 1/w
	qr          mat.QR
}

const derivativePoints = 120

func (d *derivative) w(point int) float64 {
	return bandEdge * (float64(point) + 0.5) / derivativePoints
}

func newDerivative(order, taps int, weight float64) *derivative {
	d := &derivative{order: order, taps: taps, weight: weight}
	a := mat.NewDense(2*derivativePoints, taps, nil)
	for p := range derivativePoints {
		k := math.Pow(d.w(p), -weight)
		for t := range taps {
			s, c := math.Sincos(d.w(p) * float64(t-(taps/2-1)))
			a.Set(2*p, t, k*c)
			a.Set(2*p+1, t, -k*s)
		}
	}
	d.qr.Factorize(a)
	return d
}

// at gives the taps at a fraction of a sample.
func (d *derivative) at(fraction float64) []float64 {
	y := mat.NewVecDense(2*derivativePoints, nil)
	for p := range derivativePoints {
		w := d.w(p)
		// the derivative of exp(-i w fraction), by the fraction
		k := math.Pow(w, float64(d.order)-d.weight)
		s, c := math.Sincos(w*fraction + float64(d.order)*math.Pi/2)
		y.SetVec(2*p, k*c)
		y.SetVec(2*p+1, -k*s)
	}
	var x mat.VecDense
	if err := d.qr.SolveVecTo(&x, false, y); err != nil {
		panic(err) // the matrix is a constant of this package
	}
	return x.RawVector().Data
}

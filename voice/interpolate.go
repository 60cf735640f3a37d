package voice

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

const (
	// taps is the length of the fractional-delay read. Twelve least-squares
	// taps keep their gain within 1e-6 of one up to bandEdge; an eight-tap
	// Lagrange read sags by 2.2e-3 at 8 kHz and 44.1 kHz, where a bright A4
	// that rings 6 s is to lose 3e-3 a trip.
	taps = 12
	// center is the tap that holds the whole delay; the others lie around it.
	center = taps/2 - 1
	// bandEdge is where the read's fit ends, in radians per sample:
	// 8.5 kHz at 44.1 kHz.
	bandEdge = 1.22
	// rows is how finely the table divides a sample for a gliding string. Taps
	// between rows are interpolated linearly, to 1e-7.
	rows = 4096
)

// interpolator reads a delay line between its samples, without state: nothing
// happens to a string's sound when the whole part of its delay changes.
//
// The taps minimize the squared error against a pure delay over 0 to bandEdge:
// Laakso, Välimäki, Karjalainen, Laine, "Splitting the Unit Delay", IEEE Signal
// Processing Magazine 13(1), 1996, section 3.3 (general least squares), as
// polynomials in the fraction: Farrow, "A Continuously Variable Digital Delay
// Element", ISCAS 1988. At a fraction of 0 and of 1 they are exactly one sample.
type interpolator struct {
	poly [taps][taps]float64 // of each tap, by the power of 2*fraction - 1
	// row i holds the taps at a fraction of i/rows, with one row past the end
	table [][taps]float32
}

func newInterpolator() *interpolator {
	ip := &interpolator{}
	nodes, fits := ip.fit()
	ip.interpolate(nodes, fits)
	ip.table = make([][taps]float32, rows+2)
	var h [taps]float64
	for i := range ip.table {
		ip.at(min(1, float64(i)/rows), &h)
		for t := range h {
			ip.table[i][t] = float32(h[t])
		}
	}
	return ip
}

// fit solves for the taps at as many fractions as there are taps.
func (ip *interpolator) fit() (nodes []float64, fits *mat.Dense) {
	const points = 200
	nodes = make([]float64, taps)
	for i := range nodes {
		nodes[i] = -math.Cos(math.Pi * float64(i) / (taps - 1)) // Chebyshev-Lobatto
	}
	a := mat.NewDense(2*points, taps, nil)
	b := mat.NewDense(2*points, taps, nil)
	for p := range points {
		w := bandEdge * float64(p) / (points - 1)
		for t := range taps {
			s, c := math.Sincos(w * float64(t-center))
			a.Set(2*p, t, c)
			a.Set(2*p+1, t, s)
			s, c = math.Sincos(w * (nodes[t] + 1) / 2)
			b.Set(2*p, t, c)
			b.Set(2*p+1, t, s)
		}
	}
	var qr mat.QR
	qr.Factorize(a)
	fits = mat.NewDense(taps, taps, nil)
	if err := qr.SolveTo(fits, false, b); err != nil {
		panic(err) // the matrix is a constant of this package
	}
	for t := range taps { // exactly one sample at both ends
		fits.Set(t, 0, one(t == center))
		fits.Set(t, taps-1, one(t == center+1))
	}
	return nodes, fits
}

func one(is bool) float64 {
	if is {
		return 1
	}
	return 0
}

// interpolate puts a polynomial through each tap's values at the nodes.
func (ip *interpolator) interpolate(nodes []float64, fits *mat.Dense) {
	v := mat.NewDense(taps, taps, nil)
	for i, x := range nodes {
		p := 1.0
		for j := range taps {
			v.Set(i, j, p)
			p *= x
		}
	}
	var c mat.Dense
	if err := c.Solve(v, fits.T()); err != nil {
		panic(err) // the matrix is a constant of this package
	}
	for t := range taps {
		for j := range taps {
			ip.poly[t][j] = c.At(j, t)
		}
	}
}

// at writes the taps for a fraction of a sample, 0 to 1; tap i is for a delay
// of i - center whole samples.
func (ip *interpolator) at(fraction float64, h *[taps]float64) {
	x := 2*fraction - 1
	for t := range h {
		p := &ip.poly[t]
		v := p[taps-1]
		for j := taps - 2; j >= 0; j-- {
			v = float64(v*x) + p[j]
		}
		h[t] = v
	}
}

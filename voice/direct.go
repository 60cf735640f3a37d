package voice

import (
	"math"
	"math/cmplx"
)

const (
	// shortest is the shortest line that the fractional-delay read can serve:
	// its newest tap is the frame before.
	shortest = center + 1
	// directFrom is the delay (samples) below which the read turns, by degrees
	// over one sample, into a direct one.
	directFrom = shortest + 1
)

// directTaps writes the read of a string too short for a fractional delay: 12
// taps on the last 12 frames, the smallest that make the loop exactly one at
// the damped frequency z, with the peak of its gain there. Everything else stays
// below, so one partial rings: all that the rate has room for. It has no state, so
// a string bends in and out of it without a click.
//
// The method: least norm under three linear conditions on the taps h, with
// L(z) = R(z) sum of h_i z^-(1+i): Re L = 1, Im L = 0, and d|L|/dw = 0. rest
// gives R, the rest of the loop.
func directTaps(z complex128, rest func(z complex128) complex128, h *[taps]float64) {
	const step = 1e-5
	turn := cmplx.Rect(1, step)
	r := rest(z)
	// d ln R/dw, by a central difference
	slope := (rest(z*turn) - rest(z/turn)) / complex(2*step, 0) / r
	var rows [3][taps]float64
	p := r / z
	for i := range taps {
		rows[0][i], rows[1][i] = real(p), imag(p)
		// dL/dw of this tap, where L is one: its own turning and that of R
		rows[2][i] = real(p * (complex(0, -float64(1+i)) + slope))
		p /= z
	}
	var gram [3][4]float64
	for i := range 3 {
		for j := range 3 {
			for t := range taps {
				gram[i][j] += rows[i][t] * rows[j][t]
			}
		}
	}
	gram[0][3] = 1
	x := solve3(gram)
	for t := range taps {
		h[t] = x[0]*rows[0][t] + x[1]*rows[1][t] + x[2]*rows[2][t]
	}
}

// solve3 solves three equations by elimination with pivots.
func solve3(m [3][4]float64) [3]float64 {
	for c := range 3 {
		best := c
		for r := c + 1; r < 3; r++ {
			if math.Abs(m[r][c]) > math.Abs(m[best][c]) {
				best = r
			}
		}
		m[c], m[best] = m[best], m[c]
		for r := c + 1; r < 3; r++ {
			k := m[r][c] / m[c][c]
			for j := c; j < 4; j++ {
				m[r][j] -= k * m[c][j]
			}
		}
	}
	var x [3]float64
	for r := 2; r >= 0; r-- {
		x[r] = m[r][3]
		for j := r + 1; j < 3; j++ {
			x[r] -= m[r][j] * x[j]
		}
		x[r] /= m[r][r]
	}
	return x
}

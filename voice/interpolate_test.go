package voice

import (
	"math"
	"math/cmplx"
	"testing"
)

// lagrange is the reference: the 8-tap interpolator of "Splitting the Unit
// Delay" (see interpolator), for a fraction f.
func lagrange(f float64) [8]float64 {
	var h [8]float64
	for i := range h {
		h[i] = 1
		for j := range h {
			if j != i {
				h[i] *= (f + 3 - float64(j)) / float64(i-j)
			}
		}
	}
	return h
}

func TestReadIsAPureDelay(t *testing.T) {
	ip := newInterpolator()
	const magnitude, delay = 1.2e-6, 3e-7 // up to bandEdge: of one, samples
	var h [taps]float64
	for f := 0.0; f <= 1; f += 1.0 / 64 {
		ip.at(f, &h)
		for w := 0.002; w <= math.Pi; w += 0.002 {
			var g complex128
			for i, c := range h {
				g += complex(c, 0) * unit(-w*float64(i-center))
			}
			g *= unit(w * f)
			if cmplx.Abs(g) > 1+7e-7 {
				t.Fatalf("fraction %.3f, w %.3f: gain %.9f above one", f, w, cmplx.Abs(g))
			}
			if w > bandEdge {
				continue
			}
			if e := math.Abs(cmplx.Abs(g) - 1); e > magnitude {
				t.Fatalf("fraction %.3f, w %.3f: gain off by %.2e", f, w, e)
			}
			if e := math.Abs(cmplx.Phase(g)) / w; e > delay {
				t.Fatalf("fraction %.3f, w %.3f: delay off by %.2e", f, w, e)
			}
		}
	}
}

func TestReadAgreesWithLagrangeBelow(t *testing.T) {
	ip := newInterpolator()
	var h [taps]float64
	for f := 0.0; f <= 1; f += 0.1 {
		ip.at(f, &h)
		ref := lagrange(f)
		for w := 0.0; w < 0.3; w += 0.01 {
			var a, b complex128
			for i, c := range h {
				a += complex(c, 0) * unit(-w*float64(i-center))
			}
			for i, c := range ref {
				b += complex(c, 0) * unit(-w*float64(i-3))
			}
			if cmplx.Abs(a-b) > 2e-6 {
				t.Fatalf("fraction %.1f, w %.2f: %v, by Lagrange %v", f, w, a, b)
			}
		}
	}
}

func TestReadIsExactAtWholeSamples(t *testing.T) {
	ip := newInterpolator()
	var h [taps]float64
	for end := range 2 {
		ip.at(float64(end), &h)
		for i, c := range h {
			if want := one(i == center+end); math.Abs(c-want) > 1e-12 {
				t.Errorf("fraction %d, tap %d: %g, want %g", end, i, c, want)
			}
		}
	}
}

func TestTableFollowsPolynomials(t *testing.T) {
	ip := newInterpolator()
	var h [taps]float64
	for f := 0.0; f < 1; f += 0.000317 {
		ip.at(f, &h)
		row, part := int(f*rows), float32(f*rows-math.Floor(f*rows))
		for i := range h {
			a, b := ip.table[row][i], ip.table[row+1][i]
			if got := a + part*(b-a); math.Abs(float64(got)-h[i]) > 2e-7 {
				t.Fatalf("fraction %.6f, tap %d: %.9f, want %.9f", f, i, got, h[i])
			}
		}
	}
}

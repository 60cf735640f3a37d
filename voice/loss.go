package voice

import (
	"math"
	"math/cmplx"
)

// law is how fast a string's partials die: internal friction and air take
// s(f) = s0 + s1 f^2, whatever the pitch.
type law struct {
	decay  float64 // s: T60 of the fundamental
	corner float64 // Hz: partials here ring half as long as a very low one would
}

// newLaw gives the law of a patch's decay (s) and brightness (0 to 1).
func newLaw(decay, brightness float64) law {
	return law{decay: decay, corner: 250 * math.Pow(80, brightness)}
}

// t60 is the T60 (s) at f of a string whose fundamental is f0 (Hz).
func (l law) t60(f, f0 float64) float64 {
	a, b := f0/l.corner, f/l.corner
	return l.decay * (1 + a*a) / (1 + b*b)
}

// nepers is what a partial at f loses on a trip of the given time (s).
func (l law) nepers(f, f0, trip float64) float64 {
	return decayNepers * trip / l.t60(f, f0)
}

// decayNepers is 60 dB as a natural logarithm of amplitude.
const decayNepers = 3 * math.Ln10

// ceiling is the largest gain that a trip round a loop may have at any frequency:
// below one by more than the read's ripple and the rounding of its taps.
const ceiling = 1 - 2e-6

// lossPoints is how many frequencies, evenly apart in pitch, a loss filter is
// fitted at.
const lossPoints = 28

// twoPole is the filter b/(1 + c1/z + c2/z^2) that stands in a loop for the
// law; b is solved with the tuning, see mode.at.
type twoPole struct{ c1, c2 float64 }

// fitLoss fits a filter to the law for a fundamental f0 (Hz) at a rate (Hz).
// trip gives the time (s) that a packet at f needs for a trip, the loop's group
// delay.
//
// The method: the inverse power response of two poles is a parabola in
// x = 1 - cos w. It is put through the law at f0 exactly; the two coefficients
// that are left are the least squares of the relative error of T60, weighted
// by what a listener would notice, over all parabolas that rise with x and
// whose gain nowhere exceeds the law's at zero. These are convex bounds, so the filter
// follows the pitch without jumps, and the loop is below one at every frequency.
func fitLoss(l law, f0, rate float64, trip func(f float64) float64) twoPole {
	xOf := func(f float64) float64 { return 1 - math.Cos(2*math.Pi*f/rate) }
	x0, n0 := xOf(f0), l.nepers(f0, f0, trip(f0))
	p0 := math.Exp(2 * n0)
	least := math.Exp(2 * math.Max(l.nepers(0, f0, trip(f0)), -math.Log(ceiling)))
	room := math.Max(0, p0-least) // how far the parabola may fall from f0 to zero

	top := min(9000, 0.45*rate)
	for top > 2*f0 && l.nepers(top, f0, trip(top)) > 0.4 { // 3.5 dB a trip: gone at once
		top *= 0.97
	}
	top = min(max(top, 2.5*f0), 0.48*rate)
	var q normal
	f, apart := f0, math.Pow(top/f0, 1.0/lossPoints)
	for range lossPoints {
		f *= apart
		n := l.nepers(f, f0, trip(f))
		target := math.Exp(2 * n)
		x := xOf(f)
		weight := 1 / (2 * n * tolerance(f) * (1 + math.Pow(n/0.25, 4)))
		scale := weight / target
		q.add(scale*(x-x0), scale*(x*x-x0*x0), scale*(target-p0))
	}
	p1, p2 := q.solve(x0, x0*x0, room)
	return factor(p0-p1*x0-p2*x0*x0, p1, p2)
}

// tolerance is the relative error of T60 that is asked for at f: 3 % below
// 3 kHz, 10 % at 8 kHz.
func tolerance(f float64) float64 {
	return 0.03 + 0.07*min(1, max(0, (f-3000)/3000))
}

// factor finds the stable two poles whose inverse power response is
// proportional to p0 + p1 x + p2 x^2, with p1, p2 >= 0. A root x of the parabola is a pair of
// poles z, 1/z with z + 1/z = 2(1 - x).
func factor(p0, p1, p2 float64) twoPole {
	// y^2 + p1 y + p0 p2 = 0 has the roots y = p2 x: no trouble when p2 is 0
	disc := p1*p1 - 4*p0*p2
	if disc >= 0 {
		big := -(p1 + math.Sqrt(disc)) / 2
		if big == 0 {
			return twoPole{}
		}
		near := pole(p0 / big)
		if p2 == 0 {
			return twoPole{c1: -near}
		}
		far := pole(big / p2)
		return twoPole{c1: -(near + far), c2: near * far}
	}
	re, im := -p1/(2*p2), math.Sqrt(-disc)/(2*p2)
	z := complexPole(complex(re, im))
	return twoPole{c1: -2 * real(z), c2: real(z)*real(z) + imag(z)*imag(z)}
}

// pole solves z + 1/z = 2(1 - x) for a negative x and |z| < 1.
func pole(x float64) float64 {
	h := 1 - x
	return 1 / (h + math.Sqrt(h*h-1))
}

func complexPole(x complex128) complex128 {
	h := 1 - x
	z := h + cmplx.Sqrt(h*h-1)
	if cmplx.Abs(z) < 1 {
		return z
	}
	return 1 / z
}

// normal is a weighted least-squares problem in two unknowns.
type normal struct{ aa, ab, bb, ay, by float64 }

func (q *normal) add(a, b, y float64) {
	q.aa += a * a
	q.ab += a * b
	q.bb += b * b
	q.ay += a * y
	q.by += b * y
}

func (q *normal) cost(u, v float64) float64 {
	return q.aa*u*u + 2*q.ab*u*v + q.bb*v*v - 2*q.ay*u - 2*q.by*v
}

// solve finds u, v >= 0 with g u + h v <= room of the least cost: the free
// optimum where it is allowed, else the best point of the three edges.
func (q *normal) solve(g, h, room float64) (u, v float64) {
	if det := q.aa*q.bb - q.ab*q.ab; det > 1e-12*q.aa*q.bb {
		u, v = (q.ay*q.bb-q.by*q.ab)/det, (q.by*q.aa-q.ay*q.ab)/det
		if u >= 0 && v >= 0 && g*u+h*v <= room {
			return u, v
		}
	}
	edges := [3][4]float64{ // from (u, v) to (u, v)
		{0, 0, room / g, 0},
		{0, 0, 0, room / h},
		{room / g, 0, 0, room / h},
	}
	best := math.Inf(1)
	for _, e := range edges {
		du, dv := e[2]-e[0], e[3]-e[1]
		curve := q.aa*du*du + 2*q.ab*du*dv + q.bb*dv*dv
		t := 0.0
		if curve > 0 {
			slope := (q.aa*e[0]+q.ab*e[1]-q.ay)*du + (q.ab*e[0]+q.bb*e[1]-q.by)*dv
			t = min(1, max(0, -slope/curve))
		}
		eu, ev := e[0]+t*du, e[1]+t*dv
		if c := q.cost(eu, ev); c < best {
			best, u, v = c, eu, ev
		}
	}
	return u, v
}

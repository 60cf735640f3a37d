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
	const most = 50 // beyond it, nothing is left to tell apart
	return min(most, decayNepers*trip/l.t60(f, f0))
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

// fitLoss fits a filter to what the partials of a fundamental f0 (Hz) are to
// lose on a trip, nepers(f), at a rate (Hz).
//
// The method: the inverse power response of two poles is a parabola in
// x = 1 - cos w. It is put through the loss at f0 exactly; the two coefficients
// that are left make the relative error of T60 small, weighted
// by what a listener would notice, over all parabolas that open upwards and
// whose gain nowhere exceeds the largest that is asked for. These are convex bounds, so the
// filter follows the pitch without jumps, and the loop is below one at every frequency.
//
// It also returns the largest error, over the tolerance.
func fitLoss(f0, rate float64, nepers func(f float64) float64) (t twoPole, worst float64) {
	xOf := func(f float64) float64 { return 1 - math.Cos(2*math.Pi*f/rate) }
	x0 := xOf(f0)
	const gone = 3 // nepers more than the fundamental: what dies as fast is gone with the stroke
	own := nepers(f0)
	p0 := math.Exp(2 * own)
	lightest := nepers(0)

	top := min(9000, 0.45*rate)
	for top > 2*f0 && nepers(top) > 0.4 { // 3.5 dB a trip: gone at once
		top *= 0.97
	}
	top = min(max(top, 2.5*f0), 0.48*rate)
	var at [lossPoints]equation
	f, apart := f0, math.Pow(top/f0, 1.0/lossPoints)
	for i := range at {
		f *= apart
		n := min(nepers(f), own+gone)
		lightest = min(lightest, n)
		target := math.Exp(2 * n)
		x := xOf(f)
		weight := 1 / (2 * n * tolerance(f) * (1 + math.Pow(n/0.25, 4)))
		scale := weight / target
		at[i] = equation{scale * (x - x0), scale * (x*x - x0*x0), scale * (target - p0)}
	}
	least := math.Exp(2 * math.Max(lightest, -math.Log(ceiling)))
	room := math.Max(0, p0-least) // how far the parabola may fall from f0
	bounds := make([]half, 1, 1+lossBounds)
	bounds[0] = half{0, -1, 0} // p2 >= 0
	for i := range lossBounds {
		x := 2 * math.Pow(float64(i)/(lossBounds-1), 4) // closer together near zero
		bounds = append(bounds, half{x0 - x, x0*x0 - x*x, room})
	}
	p1, p2, worst := even(at[:], bounds)
	p1, p2 = lift(p0, x0, p1, p2, least)
	return factor(p0-p1*x0-p2*x0*x0, p1, p2), worst
}

// lossBounds is at how many places the parabola is held above its least value.
const lossBounds = 8

// tolerance is the relative error of T60 that is asked for at f: 3 % below
// 3 kHz, 10 % at 8 kHz.
func tolerance(f float64) float64 {
	return 0.03 + 0.07*min(1, max(0, (f-3000)/3000))
}

// factor finds the stable two poles whose inverse power response is
// proportional to p0 + p1 x + p2 x^2, p2 >= 0, which must be positive over 0 to 2. A
// root x of the parabola is a pair of poles z, 1/z with z + 1/z = 2(1 - x).
func factor(p0, p1, p2 float64) twoPole {
	// y^2 + p1 y + p0 p2 = 0 has the roots y = p2 x: no trouble when p2 is 0
	disc := p1*p1 - 4*p0*p2
	if disc >= 0 {
		big := -(p1 + math.Copysign(math.Sqrt(disc), p1)) / 2
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

// pole solves z + 1/z = 2(1 - x) for |z| < 1, x below 0 or above 2.
func pole(x float64) float64 {
	h := 1 - x
	return 1 / (h + math.Copysign(math.Sqrt(h*h-1), h))
}

func complexPole(x complex128) complex128 {
	h := 1 - x
	z := h + cmplx.Sqrt(h*h-1)
	if cmplx.Abs(z) < 1 {
		return z
	}
	return 1 / z
}

// lift brings the parabola through (x0, p0) above its least value between the
// bounds too, by going back towards the level one, which is.
func lift(p0, x0, p1, p2, least float64) (float64, float64) {
	above := func(s float64) bool {
		low := p0 - s*(p1*x0+p2*x0*x0)
		low = min(low, low+2*s*p1+4*s*p2)
		if v := -p1 / (2 * p2); p2 > 0 && v > 0 && v < 2 {
			low = min(low, p0-s*p2*(v-x0)*(v-x0))
		}
		return low >= least*(1-1e-12)
	}
	if above(1) {
		return p1, p2
	}
	low, high := 0.0, 1.0
	for range 40 {
		if mid := (low + high) / 2; above(mid) {
			low = mid
		} else {
			high = mid
		}
	}
	return low * p1, low * p2
}

// equation is a u + b v = y, weighted.
type equation struct{ a, b, y float64 }

// even solves equations so that no error stands out: least squares, then again
// with more weight where the error was large (Lawson's way to the least
// maximum, in a few steps).
func even(at []equation, bounds []half) (u, v, worst float64) {
	const rounds, floor = 4, 0.15
	var buffer [lossPoints]float64
	weight := buffer[:len(at)]
	for i := range weight {
		weight[i] = 1
	}
	for range rounds {
		var q normal
		for i, e := range at {
			w := weight[i]
			q.add(w*e.a, w*e.b, w*e.y)
		}
		u, v = q.solve(bounds)
		worst = 0
		for _, e := range at {
			worst = max(worst, math.Abs(e.a*u+e.b*v-e.y))
		}
		if worst == 0 {
			return u, v, 0
		}
		for i, e := range at {
			weight[i] *= math.Sqrt(floor + math.Abs(e.a*u+e.b*v-e.y)/worst)
		}
	}
	return u, v, worst
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

// half is the half plane g u + h v <= room.
type half struct{ g, h, room float64 }

func (b half) holds(u, v float64) bool {
	return b.g*u+b.h*v <= b.room+1e-12*(math.Abs(b.g*u)+math.Abs(b.h*v))
}

// solve finds the point of the least cost where all bounds hold: the free
// optimum, else the best of those on a bound or on two. The origin is within all bounds.
func (q *normal) solve(bounds []half) (u, v float64) {
	best := q.cost(0, 0)
	try := func(tu, tv float64) bool {
		for _, b := range bounds {
			if !b.holds(tu, tv) {
				return false
			}
		}
		if c := q.cost(tu, tv); c < best {
			best, u, v = c, tu, tv
		}
		return true
	}
	if det := q.aa*q.bb - q.ab*q.ab; det > 1e-12*q.aa*q.bb {
		if try((q.ay*q.bb-q.by*q.ab)/det, (q.by*q.aa-q.ay*q.ab)/det) {
			return u, v
		}
	}
	for i, b := range bounds {
		if n := b.g*b.g + b.h*b.h; n > 0 {
			// along the bound, from its point nearest the origin
			pu, pv := b.g*b.room/n, b.h*b.room/n
			du, dv := -b.h, b.g
			if curve := q.aa*du*du + 2*q.ab*du*dv + q.bb*dv*dv; curve > 0 {
				slope := (q.aa*pu+q.ab*pv-q.ay)*du + (q.ab*pu+q.bb*pv-q.by)*dv
				try(pu-slope/curve*du, pv-slope/curve*dv)
			}
		}
		for _, c := range bounds[:i] {
			if det := b.g*c.h - b.h*c.g; det != 0 {
				try((b.room*c.h-b.h*c.room)/det, (b.g*c.room-b.room*c.g)/det)
			}
		}
	}
	return u, v
}

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

// decayNepers is 60 dB as a natural logarithm of amplitude.
const decayNepers = 3 * math.Ln10

// ceiling is the largest gain that a trip round a loop may have at any frequency:
// below one by more than the read's ripple and the rounding of its taps.
const ceiling = 1 - 2e-6

// twoPole is the filter b/(1 + c1/z + c2/z^2) that stands in a loop for the
// law; b is solved with the tuning, see mode.at.
type twoPole struct{ c1, c2 float64 }

// axis is frequencies evenly apart in pitch up to almost half the rate, with what
// a fit needs to know of each. All fits of a mode share it.
type axis struct {
	rate float64 // Hz
	at   []place
}

// place is one frequency of an axis.
type place struct {
	f         float64 // Hz
	x         float64 // 1 - cos w
	v         float64 // tan(w/2)
	tolerance float64
}

// axisSteps is how many places an octave of an axis has.
const axisSteps = 6

// begin lays the axis from lowest (Hz) upwards.
func (a *axis) begin(lowest, rate float64) {
	const top = 0.48 // of the rate
	a.rate = rate
	steps := max(0, int(math.Log2(top*rate/lowest)*axisSteps)) + 1
	a.at = a.at[:0]
	var octave [axisSteps]float64
	for i := range octave {
		octave[i] = math.Exp2(float64(i) / axisSteps)
	}
	for i := range steps {
		a.at = append(a.at, placeOf(math.Ldexp(lowest*octave[i%axisSteps], i/axisSteps), rate))
	}
}

func placeOf(f, rate float64) place {
	s, c := math.Sincos(math.Pi * f / rate)
	return place{f, 2 * s * s, s / c, tolerance(f)}
}

// tolerance is the relative error of T60 that is asked for at f: 3 % below
// 3 kHz, 10 % at 8 kHz.
func tolerance(f float64) float64 {
	return 0.03 + 0.07*min(1, max(0, (f-3000)/3000))
}

// lossPoints is at how many places at most a loss filter is fitted.
const lossPoints = 40

// lossFit is a loss filter to be: what a string of one pitch is to lose on a trip. It is used
// again for one filter after the other.
type lossFit struct {
	axis     axis
	f0, rate float64 // Hz
	own      float64 // nepers that the fundamental is to lose on a trip
	below    float64 // nepers at zero frequency
	first    place   // of the fundamental
	shortest float64 // s: the quickest packet's trip
	points   int     // above the fundamental
	at       [lossPoints]place
	trip     [lossPoints]float64 // s
	whole    [lossPoints]float64 // nepers
	weight   [lossPoints]float64 // 0 to 1: how much a place counts
}

// prepare sets out what a law takes from a fundamental f0 (Hz) and from the places of the
// axis above it, from its place number from on. trip gives the time (s) that a packet needs.
func (q *lossFit) prepare(l law, f0 float64, from int, trip func(p place) float64) {
	a := &q.axis
	q.f0, q.rate, q.first = f0, a.rate, placeOf(f0, a.rate)
	scale := decayNepers / (l.decay * (1 + f0*f0/(l.corner*l.corner)))
	nepers := func(f, trip float64) float64 {
		const most = 50 // beyond it, nothing is left to tell apart
		return min(most, scale*trip*(1+f*f/(l.corner*l.corner)))
	}
	q.below = nepers(0, trip(place{}))
	q.own = nepers(f0, trip(q.first))

	top := min(9000, 0.45*q.rate)
	const enough = 3 // octaves for each place of the axis that one step takes
	skip := max(1, int(math.Log2(top/f0)/enough+0.5))
	const gone = 0.4 // 3.5 dB a trip: gone at once
	q.points = 0
	for i := from; i < len(a.at) && q.points < lossPoints; i += skip {
		p := a.at[i]
		if p.f <= f0 {
			continue
		}
		t := trip(p)
		n := nepers(p.f, t)
		// the last places count by degrees, so that the filter follows the pitch without jumps
		weight := min(1, max(0, (gone-n)/(gone/4))) * min(1, max(0, axisSteps*(1.5*top/p.f-1.5)))
		if p.f <= 2.6*f0 {
			weight = 1
		}
		if weight == 0 {
			return
		}
		k := q.points
		q.at[k], q.trip[k], q.whole[k], q.weight[k] = p, t, n, weight
		q.points++
	}
}

// poles fits two poles to what a shelf leaves of the loss.
//
// The method: the inverse power response of two poles is a parabola in
// x = 1 - cos w. It is put through the loss at f0 exactly; the two coefficients
// that are left make the relative error of T60 small, weighted
// by what a listener would notice, over all parabolas that open upwards and
// whose gain nowhere exceeds the largest that is asked for. These are convex bounds, so the
// filter follows the pitch without jumps, and the loop is below one at every frequency.
//
// It also returns the largest error, over the tolerance.
func (q *lossFit) poles(s shelf) (t twoPole, worst float64) {
	const gone = 3 // nepers more than the fundamental: what dies as fast is gone with the stroke
	left := func(n, v float64) float64 { return max(1e-9, n-s.nepers(v)) }
	x0, own := q.first.x, left(q.own, q.first.v)
	p0 := math.Exp(2 * own)
	lightest := left(q.below, 0)
	var at [lossPoints]equation
	for i := range q.points {
		p := &q.at[i]
		n := min(left(q.whole[i], p.v), own+gone)
		lightest = min(lightest, n)
		target := math.Exp(2 * n)
		steep := n / 0.25
		steep *= steep
		scale := q.weight[i] / (2 * n * p.tolerance * (1 + steep*steep) * target)
		at[i] = equation{scale * (p.x - x0), scale * (p.x*p.x - x0*x0), scale * (target - p0)}
	}
	least := math.Exp(2 * max(lightest, -math.Log(ceiling)))
	room := max(0, p0-least) // how far the parabola may fall from f0
	var bounds [1 + lossBounds]half
	bounds[0] = half{0, -1, 0} // p2 >= 0
	for i := range lossBounds {
		x := float64(i) / (lossBounds - 1)
		x = 2 * x * x * x * x // closer together near zero
		bounds[1+i] = half{x0 - x, x0*x0 - x*x, room}
	}
	p1, p2, worst := even(at[:q.points], bounds[:])
	p1, p2 = lift(p0, x0, p1, p2, least)
	t = factor(p0-p1*x0-p2*x0*x0, p1, p2)
	for !t.stable() { // of what is gone within a trip, rounding may leave a pole at one
		const inward = 1 - 1e-5
		t = twoPole{t.c1 * inward, t.c2 * inward * inward}
	}
	return t, worst
}

// lossBounds is at how many places the parabola is held above its least value.
const lossBounds = 8

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

// half is the half plane g u + h v <= room.
type half struct{ g, h, room float64 }

func (b half) holds(u, v float64) bool {
	return b.g*u+b.h*v <= b.room+1e-12*(math.Abs(b.g*u)+math.Abs(b.h*v))
}

// solve finds the point of the least cost where all bounds hold. The origin is within all of them.
//
// The method: bound by bound. One that the best point so far breaks has the
// best of all on its line, between where the bounds before it cut the line: Seidel,
// "Small-Dimensional Linear Programming and Convex Hulls Made Easy", Discrete and
// Computational Geometry 6, 1991, which holds for any convex cost.
func (q *normal) solve(bounds []half) (u, v float64) {
	if det := q.aa*q.bb - q.ab*q.ab; det > 1e-12*q.aa*q.bb {
		u, v = (q.ay*q.bb-q.by*q.ab)/det, (q.by*q.aa-q.ay*q.ab)/det
	} else if q.aa > 0 {
		u = q.ay / q.aa // one column tells all
	}
	for i, b := range bounds {
		if !b.holds(u, v) {
			u, v = q.along(b, bounds[:i])
		}
	}
	return u, v
}

// along finds the point of the least cost on the edge of one bound, within others.
func (q *normal) along(b half, others []half) (u, v float64) {
	n := b.g*b.g + b.h*b.h
	if n == 0 {
		return 0, 0
	}
	pu, pv := b.g*b.room/n, b.h*b.room/n // the edge's point nearest the origin
	du, dv := -b.h, b.g
	low, high := math.Inf(-1), math.Inf(1)
	for _, o := range others {
		rate, room := o.g*du+o.h*dv, o.room-(o.g*pu+o.h*pv)
		switch {
		case rate > 0:
			high = min(high, room/rate)
		case rate < 0:
			low = max(low, room/rate)
		}
	}
	s := 0.0
	if curve := q.aa*du*du + 2*q.ab*du*dv + q.bb*dv*dv; curve > 0 {
		s = -((q.aa*pu+q.ab*pv-q.ay)*du + (q.ab*pu+q.bb*pv-q.by)*dv) / curve
	}
	s = max(low, min(high, s))
	return pu + s*du, pv + s*dv
}

package voice

import "math"

// shelf is what the loop of a stiff string has beside its two poles: a gain of
// 1 - drop at zero frequency and one at half the rate, half way at a corner. Packets of the
// lower partials take longer for a trip than those of the upper ones, so they must lose
// more; without it T60 is up to 30 % off at B = 1e-3. The zero value does nothing.
type shelf struct {
	drop   float64
	corner float64 // tan(w/2) there
}

// filter gives k, zero and pole of k (1 - zero/z)/(1 - pole/z), by the bilinear transform.
func (s shelf) filter() (k, zero, pole float64) {
	if s.drop == 0 {
		return 1, 0, 0
	}
	t, at := s.corner, float64((1-s.drop)*s.corner)
	return (1 + at) / (1 + t), (1 - at) / (1 + at), (1 - t) / (1 + t)
}

// response is the shelf's at z.
func (s shelf) response(z complex128) complex128 {
	if s.drop == 0 {
		return 1
	}
	k, zero, pole := s.filter()
	return complex(k, 0) * (z - complex(zero, 0)) / (z - complex(pole, 0))
}

// nepers is what the shelf takes at v = tan(w/2).
func (s shelf) nepers(v float64) float64 {
	if s.drop == 0 {
		return 0
	}
	a := 1 - s.drop
	return -0.5 * math.Log((v*v+a*a*s.corner*s.corner)/(v*v+s.corner*s.corner))
}

// groupDelay is the shelf's, in samples at v = tan(w/2).
func (s shelf) groupDelay(v float64) float64 {
	if s.drop == 0 {
		return 0
	}
	// the phase is atan(v/(a t)) - atan(v/t)
	at, t := (1-s.drop)*s.corner, s.corner
	return -(at/(at*at+v*v) - t/(t*t+v*v)) * (1 + v*v) / 2
}

// shelf fits the drop of a shelf to what partials are to lose more than
// those that take the shortest trip, at a corner that is a multiple of the fundamental;
// 0 is no shelf.
//
// The method: for small losses the shelf's are drop/(1 + (v/corner)^2), linear
// in the drop; least squares, relative to the whole loss.
func (q *lossFit) shelf(corner float64) shelf {
	if corner == 0 {
		return shelf{}
	}
	corner *= q.first.v
	top := min(4000, 0.4*q.rate, 200*q.f0)
	var num, den float64
	for i := range q.points {
		p := &q.at[i]
		if p.f > top {
			break
		}
		r := p.v / corner
		shape := 1 / (1 + r*r)
		w := 1 / (q.whole[i] * q.whole[i])
		num += w * q.whole[i] * max(0, 1-q.shortest/q.trip[i]) * shape
		den += w * shape * shape
	}
	if den == 0 {
		return shelf{corner: corner} // nothing to serve, yet it goes on with its neighbours
	}
	const deepest = 7 // nepers, 60 dB: with more, nothing is left within a trip
	return shelf{drop: 1 - math.Exp(-min(deepest, max(0, num/den))), corner: corner}
}

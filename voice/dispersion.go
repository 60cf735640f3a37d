package voice

import (
	"math"
	"slices"
)

// maxSections is how many allpass sections a stiff string may have.
const maxSections = 4

// section is one second-order allpass of a stiff string's loop, as the analog
// prototype (s^2 - p s + q)/(s^2 + p s + q) with s in units of the fundamental, so that it moves
// with the pitch. p, q > 0: always stable.
type section struct{ p, q float64 }

// digital gives a1, a2 of (a2 + a1/z + 1/z^2)/(1 + a1/z + a2/z^2) by the
// bilinear transform, t0 = tan(w0/2) for a fundamental w0 (radians per sample).
func (s section) digital(t0 float64) [2]float64 {
	p, q := s.p*t0, s.q*t0*t0
	d := 1 + p + q
	return [2]float64{2 * (q - 1) / d, (1 - p + q) / d}
}

// lag is the phase (radians, positive) by which the section delays w, for
// v = tan(w/2)/t0.
func (s section) lag(v float64) float64 { return 2 * math.Atan2(s.p*v, s.q-v*v) }

// groupDelay is the section's group delay in samples at w = 2 atan(v t0).
func (s section) groupDelay(v, t0 float64) float64 {
	// d(lag)/dv = 2 p (q + v^2)/((q - v^2)^2 + p^2 v^2); dv/dw = (1 + t^2)/(2 t0), t = v t0
	den := (s.q-v*v)*(s.q-v*v) + s.p*s.p*v*v
	t := v * t0
	return 2 * s.p * (s.q + v*v) / den * (1 + t*t) / (2 * t0)
}

// seeds are where the fit starts at B = 1e-3, for 1 to 4 sections; they come
// from a search over keys and rates.
var seeds = [maxSections + 1][]section{
	1: {{5.35, 12.6}},
	2: {{5.40, 10.5}, {5.31, 47.3}},
	3: {{5.71, 10.4}, {5.70, 32.2}, {6.61, 97.5}},
	4: {{6.27, 11.6}, {6.34, 27.2}, {6.86, 66.9}, {8.35, 152}},
}

// StiffPartial is the frequency of partial n of a stiff string whose first
// partial sounds at f1: f_n = n f0' sqrt(1 + B n^2), f0' = f1/sqrt(1 + B). Fletcher, Blackham,
// Stratton, "Quality of Piano Tones", JASA 34(6), 1962.
func StiffPartial(n int, f1, b float64) float64 {
	k := float64(n)
	return f1 * k * math.Sqrt((1+b*k*k)/(1+b))
}

// fitDispersion fits allpass sections that put the first partials of a string
// of fundamental f0 (Hz) and stiffness b where StiffPartial has them, as many as 16 below
// 10 kHz. lossLag is the loss filter's phase lag (radians) at w. It takes as few sections as
// come near enough, or those that come nearest. like is none, or the sections of
// a string that differs in nothing but its losses.
//
// The method: Levenberg and Marquardt on the phase condition at the partials;
// after Rauhala and Välimäki, "Tunable Dispersion Filter Design for Piano
// Synthesis", IEEE Signal Processing Letters 13(5), 2006, and Abel and Smith, "Robust Design of
// Very High-Order Allpass Dispersion Filters", DAFx 2006, whose sections all
// follow one curve; here each is free.
func fitDispersion(f0, b, rate float64, lossLag func(w float64) float64, like []section) []section {
	var fit dispersionFit
	if b <= 0 || !fit.prepare(f0, b, rate, lossLag) {
		return nil
	}
	best, bestWorst := []section(nil), fit.worst(nil)
	try := func(start []section) {
		const spare = 3 // samples of the period that the sections must leave
		s := fit.run(start)
		if fit.delay(s) < taps/2+spare {
			return
		}
		if w := fit.worst(s); w < bestWorst {
			best, bestWorst = s, w
		}
	}
	if len(like) > 0 {
		if try(like); best != nil {
			return best
		}
	}
	for k := 1; k <= maxSections && bestWorst > enough; k++ {
		try(scaled(seeds[k], b))
		if bestWorst > enough && fit.partials < fitPartials {
			try(fit.neutral(k))
		}
	}
	return best
}

// enough is how near (cents) to its place every partial is to be.
const enough = 0.1

func scaled(s []section, b float64) []section {
	out := make([]section, len(s))
	for i, x := range s {
		out[i] = section{x.p * math.Pow(b/1e-3, -0.47), x.q * math.Pow(b/1e-3, -0.85)}
	}
	return out
}

// fitPartials is how many partials the sections are fitted to.
const fitPartials = 16

// dispersionFit is the partials of a stiff string, the first at 0.
type dispersionFit struct {
	t0       float64
	partials int
	w, v     [fitPartials]float64 // radians per sample; tan(w/2)/t0
	loss     [fitPartials]float64 // the loss filter's lag, radians
	turns    [fitPartials]float64 // the phase at which a partial is in its place
	cents    [fitPartials]float64 // that a radian of phase moves it
}

// prepare tells whether there is anything to fit.
func (d *dispersionFit) prepare(f0, b, rate float64, lossLag func(w float64) float64) bool {
	d.t0 = math.Tan(math.Pi * f0 / rate)
	for i := range fitPartials {
		f := StiffPartial(i+1, f0, b)
		if i > 0 && f > min(10000, 0.45*rate) {
			break
		}
		d.w[i] = 2 * math.Pi * f / rate
		d.v[i] = math.Tan(d.w[i]/2) / d.t0
		d.loss[i] = lossLag(d.w[i])
		n := float64(i + 1)
		d.turns[i] = 2 * math.Pi * n
		const cents = 1200 / math.Ln2
		d.cents[i] = cents / d.turns[i] * (1 + 2*b*n*n) / (1 + b*n*n)
		d.partials = i + 1
	}
	return d.partials > 1
}

// neutral starts k sections for high keys and small b: together almost a delay.
func (d *dispersionFit) neutral(k int) []section {
	out := make([]section, k)
	for i := range out {
		g := 1 + 0.2*(float64(i)-float64(k-1)/2)
		out[i] = section{2 * g / d.t0, g * g / (d.t0 * d.t0)}
	}
	return out
}

// lag is the phase (radians) by which sections and the loss filter delay partial i.
func (d *dispersionFit) lag(s []section, i int) float64 {
	sum, v := 0.5*d.loss[i], d.v[i]
	for ; len(s) > 1; s = s[2:] {
		// each lags by at most half a turn, so that one arc tangent tells of two
		a, b := complex(s[0].q-v*v, s[0].p*v), complex(s[1].q-v*v, s[1].p*v)
		both := a * b
		angle := math.Atan2(imag(both), real(both))
		if angle < 0 {
			angle += 2 * math.Pi
		}
		sum += angle
	}
	if len(s) > 0 {
		sum += math.Atan2(s[0].p*v, s[0].q-v*v)
	}
	return 2 * sum
}

// delay is what is left to the line (samples) when the first partial is in tune.
func (d *dispersionFit) delay(s []section) float64 {
	return (d.turns[0] - d.lag(s, 0)) / d.w[0]
}

// residuals are how far the partials above the first are from their places, in cents. It returns the sum of their squares.
func (d *dispersionFit) residuals(s []section, r *[fitPartials]float64) (cost float64) {
	delay := d.delay(s)
	for i := 1; i < d.partials; i++ {
		r[i] = d.cents[i] * (d.lag(s, i) + delay*d.w[i] - d.turns[i])
		cost += r[i] * r[i]
	}
	return cost
}

func (d *dispersionFit) worst(s []section) (worst float64) {
	var r [fitPartials]float64
	d.residuals(s, &r)
	for _, x := range r {
		worst = max(worst, math.Abs(x))
	}
	return worst
}

// unknowns is how many numbers a fit may have to find.
const unknowns = 2 * maxSections

// slopes are the derivatives of all residuals by the logarithms of p and q of each section.
func (d *dispersionFit) slopes(s []section, tamed *[maxSections]bool, j *[fitPartials][unknowns]float64) {
	var first [unknowns]float64
	for i := range d.partials {
		v := d.v[i]
		for k, x := range s {
			re, im := x.q-v*v, x.p*v
			turn := 2 / (re*re + im*im)
			byP, byQ := turn*v*re*x.p, -turn*im*x.q
			if tamed[k] {
				t := x.q * d.t0 * d.t0 // p goes as 1 + q t0^2
				byP, byQ = 0, byQ+byP*t/(1+t)
			}
			j[i][2*k], j[i][2*k+1] = byP, byQ
		}
		if i == 0 {
			first = j[0]
		}
		part := d.w[i] / d.w[0]
		for c := range 2 * len(s) {
			j[i][c] = d.cents[i] * (j[i][c] - part*first[c])
		}
	}
}

// run improves sections for at most steps steps.
func (d *dispersionFit) run(start []section) []section {
	const steps = 40
	widest := math.Log(100 / d.t0) // a section beyond does nothing at any frequency
	n := 2 * len(start)
	var room, other [maxSections]section
	var tamed, tamedNext [maxSections]bool
	at := func(u *[unknowns]float64, s []section, tamed *[maxSections]bool) {
		for i := range s {
			free := section{math.Exp(min(u[2*i], widest)), math.Exp(min(u[2*i+1], 2*widest))}
			s[i] = tame(free, d.t0)
			tamed[i] = s[i] != free
		}
	}
	var u, trial, step [unknowns]float64
	for i, s := range start {
		u[2*i], u[2*i+1] = math.Log(s.p), math.Log(s.q)
	}
	s, next := room[:n/2], other[:n/2]
	at(&u, s, &tamed)
	var r, r2 [fitPartials]float64
	cost, damping := d.residuals(s, &r), 1e-2
	for range steps {
		var j [fitPartials][unknowns]float64
		d.slopes(s, &tamed, &j)
		var square [unknowns][unknowns]float64
		var g [unknowns]float64
		for i := 1; i < d.partials; i++ {
			for a := range n {
				for b := range a + 1 {
					square[a][b] += j[i][a] * j[i][b]
				}
				g[a] += j[i][a] * r[i]
			}
		}
		improved := false
		for range 8 {
			damped := square
			for c := range n {
				damped[c][c] = square[c][c]*(1+damping) + 1e-12
			}
			if solve(&damped, &g, &step, n) {
				for c := range n {
					trial[c] = u[c] - step[c]
				}
				at(&trial, next, &tamedNext)
				if less := d.residuals(next, &r2); less < cost {
					improved = cost-less > 1e-9*cost
					cost, damping = less, damping/5
					u, r = trial, r2
					s, next, tamed = next, s, tamedNext
					break
				}
			}
			damping *= 4
		}
		if !improved || cost < enough*enough/4 {
			break
		}
	}
	return slices.Clone(s)
}

// solve finds x in m x = g, m positive definite, its lower half given, by
// Cholesky's way; it tells whether m is.
func solve(m *[unknowns][unknowns]float64, g, x *[unknowns]float64, n int) bool {
	for i := range n {
		for j := range i + 1 {
			sum := m[i][j]
			for k := range j {
				sum -= m[i][k] * m[j][k]
			}
			switch {
			case j < i:
				m[i][j] = sum / m[j][j]
			case sum <= 0:
				return false
			default:
				m[i][i] = math.Sqrt(sum)
			}
		}
	}
	for i := range n {
		sum := g[i]
		for k := range i {
			sum -= m[i][k] * x[k]
		}
		x[i] = sum / m[i][i]
	}
	for i := n - 1; i >= 0; i-- {
		sum := x[i]
		for k := i + 1; k < n; k++ {
			sum -= m[k][i] * x[k]
		}
		x[i] = sum / m[i][i]
	}
	return true
}

// tame keeps a section's poles within a radius of 0.996, where float32 lines
// still hold the pitch.
func tame(s section, t0 float64) section {
	const radius = 0.996
	a := s.digital(t0)
	if a[1] > radius*radius {
		// (1 - p + q)/(1 + p + q) = r^2 at this p
		r := radius * radius
		q := s.q * t0 * t0
		s.p = (1 - r) * (1 + q) / (1 + r) / t0
	}
	return s
}

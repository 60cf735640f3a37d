package voice

import (
	"math"

	"gonum.org/v1/gonum/mat"
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
// reach a tenth of a cent, or those that come nearest.
//
// The method: Levenberg and Marquardt on the phase condition at the partials;
// after Rauhala and Välimäki, "Tunable Dispersion Filter Design for Piano
// Synthesis", IEEE Signal Processing Letters 13(5), 2006, and Abel and Smith, "Robust Design of
// Very High-Order Allpass Dispersion Filters", DAFx 2006, whose sections all
// follow one curve; here each is free.
func fitDispersion(f0, b, rate float64, lossLag func(w float64) float64) []section {
	if b <= 0 {
		return nil
	}
	var partials []float64
	for n := 1; n <= 16; n++ {
		f := StiffPartial(n, f0, b)
		if n > 1 && f > min(10000, 0.45*rate) {
			break
		}
		partials = append(partials, 2*math.Pi*f/rate)
	}
	if len(partials) < 2 {
		return nil
	}
	fit := dispersionFit{b: b, w: partials, t0: math.Tan(partials[0] / 2)}
	fit.loss = make([]float64, len(partials))
	for i, w := range partials {
		fit.loss[i] = lossLag(w)
	}
	const enough, spare = 0.1, 3 // cents; samples of the period that the sections must leave
	best, bestWorst := []section(nil), fit.worst(nil)
	for k := 1; k <= maxSections && bestWorst > enough; k++ {
		for _, start := range [2][]section{scaled(seeds[k], b), fit.neutral(k)} {
			s := fit.run(start)
			if fit.delay(s) < taps/2+spare {
				continue
			}
			if w := fit.worst(s); w < bestWorst {
				best, bestWorst = s, w
			}
		}
	}
	return best
}

func scaled(s []section, b float64) []section {
	out := make([]section, len(s))
	for i, x := range s {
		out[i] = section{x.p * math.Pow(b/1e-3, -0.47), x.q * math.Pow(b/1e-3, -0.85)}
	}
	return out
}

type dispersionFit struct {
	b, t0   float64
	w, loss []float64 // of each partial: radians per sample, the loss filter's lag
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

func (d *dispersionFit) lag(s []section, i int) float64 {
	v := math.Tan(d.w[i]/2) / d.t0
	sum := d.loss[i]
	for _, x := range s {
		sum += x.lag(v)
	}
	return sum
}

// delay is what is left to the line (samples) when the first partial is in tune.
func (d *dispersionFit) delay(s []section) float64 {
	return (2*math.Pi - d.lag(s, 0)) / d.w[0]
}

// residual is how far partial i+1 is from its place, in cents.
func (d *dispersionFit) residual(s []section, delay float64, i int) float64 {
	n := float64(i + 1)
	stretch := (1 + 2*d.b*n*n) / (1 + d.b*n*n)
	const cents = 1200 / math.Ln2
	return cents / (2 * math.Pi * n) * stretch * (d.lag(s, i) + delay*d.w[i] - 2*math.Pi*n)
}

func (d *dispersionFit) worst(s []section) float64 {
	delay, worst := d.delay(s), 0.0
	for i := 1; i < len(d.w); i++ {
		worst = max(worst, math.Abs(d.residual(s, delay, i)))
	}
	return worst
}

// run improves sections for at most steps steps.
func (d *dispersionFit) run(start []section) []section {
	const steps = 40
	rows, cols := len(d.w)-1, 2*len(start)
	at := func(u []float64) []section {
		s := make([]section, cols/2)
		for i := range s {
			s[i] = section{math.Exp(u[2*i]), math.Exp(u[2*i+1])}
			s[i] = tame(s[i], d.t0)
		}
		return s
	}
	residuals := func(u []float64, r []float64) float64 {
		s := at(u)
		delay, sum := d.delay(s), 0.0
		for i := range r {
			r[i] = d.residual(s, delay, i+1)
			sum += r[i] * r[i]
		}
		return sum
	}
	u := make([]float64, cols)
	for i, s := range start {
		u[2*i], u[2*i+1] = math.Log(s.p), math.Log(s.q)
	}
	r, r2, trial := make([]float64, rows), make([]float64, rows), make([]float64, cols)
	jacobian, step := mat.NewDense(rows, cols, nil), mat.NewVecDense(cols, nil)
	cost, damping := residuals(u, r), 1e-2
	for range steps {
		for c := range cols {
			const h = 1e-6
			copy(trial, u)
			trial[c] += h
			residuals(trial, r2)
			for i := range rows {
				jacobian.Set(i, c, (r2[i]-r[i])/h)
			}
		}
		var jj mat.SymDense
		jj.SymOuterK(1, jacobian.T())
		var g mat.VecDense
		g.MulVec(jacobian.T(), mat.NewVecDense(rows, r))
		improved := false
		for range 8 {
			damped := mat.NewSymDense(cols, nil)
			damped.CopySym(&jj)
			for c := range cols {
				damped.SetSym(c, c, jj.At(c, c)*(1+damping)+1e-12)
			}
			var chol mat.Cholesky
			if chol.Factorize(damped) && chol.SolveVecTo(step, &g) == nil {
				for c := range cols {
					trial[c] = u[c] - step.AtVec(c)
				}
				if next := residuals(trial, r2); next < cost {
					improved = cost-next > 1e-9*cost
					cost, damping = next, damping/5
					copy(u, trial)
					copy(r, r2)
					break
				}
			}
			damping *= 4
		}
		if !improved || cost < 1e-4 {
			break
		}
	}
	return at(u)
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

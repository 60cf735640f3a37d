package voice

import "math"

// fullLevel is the peak of a note struck with velocity 127, -12 dBFS: room for
// a chord before a limiter has to act.
const fullLevel = 0.25

// noiseRate is the rate (Hz) at which noise is made, whatever the output's
// rate, so that one stroke has the same partials at every rate.
const noiseRate = 48000

// shape is an Excitation compiled for one key.
type shape struct {
	kind     Kind
	position float64 // part of the string's length
	length   float64 // s until the source has nothing more to give
	width    float64 // s: standard deviation of a plucked corner, or a hammer's contact
	open     float64 // Hz: the low-pass of the hardest stroke; 0 is none
	touch    float64
	cycle    []float32 // one period of a tone, with its first sample again at the end
	pitch    float64   // Hz of a tone
	sample   []float32
	rate     float64   // Hz of the sample
	gain     float64   // makes the hardest stroke fullLevel loud
	variants []variant // of a long burst of noise
}

// newShape compiles an excitation for a fundamental f0 (Hz).
func newShape(x Excitation, f0 float64) shape {
	s := shape{kind: x.Kind, position: min(max(x.Position, 0), 0.5), touch: x.Touch, gain: 1}
	period := 1 / f0
	switch x.Kind {
	case Pluck:
		s.width = least(0.0009*math.Pow(0.018, x.Hardness), 0.12*period)
		s.length = 10 * s.width
	case Strike:
		s.width = least(0.005*math.Pow(0.05, x.Hardness), 0.9*period)
		s.length = 2 * s.width
	case Tone:
		s.length = orPeriod(x.Length, period)
		s.pitch = f0 * max(x.Ratio, 0.01)
		s.cycle = newCycle(x.Wave, s.pitch)
		s.open = openness(x.Hardness, f0)
	case Sample:
		s.sample, s.rate = x.Sample, x.SampleRate
		s.length = float64(len(x.Sample)) / max(1, x.SampleRate)
		s.open = openness(x.Hardness, f0)
	default:
		s.length = orPeriod(x.Length, period)
		s.open = openness(x.Hardness, f0)
	}
	return s
}

func orPeriod(length, period float64) float64 {
	if length <= 0 {
		return period
	}
	return length
}

// least is a minimum without a corner.
func least(a, b float64) float64 { return 1 / math.Sqrt(1/(a*a)+1/(b*b)) }

// openness is the low-pass (Hz) of a burst: from felt to plectrum.
func openness(hardness, f0 float64) float64 {
	return max(500*math.Pow(44, hardness), 1.5*f0)
}

// newCycle is a period of a wave with no partial above 18 kHz when it sounds
// at pitch (Hz).
func newCycle(w Wave, pitch float64) []float32 {
	const size = 2048
	highest := min(max(int(18000/pitch), 1), size/8)
	out := make([]float32, size+1)
	for i := range out {
		phase := 2 * math.Pi * float64(i) / size
		var v float64
		switch w {
		case Triangle:
			for n, sign := 1, 1.0; n <= highest; n, sign = n+2, -sign {
				v += sign * 8 / (math.Pi * math.Pi) * math.Sin(float64(n)*phase) / float64(n*n)
			}
		case Saw:
			for n := 1; n <= highest; n++ {
				v += 2 / math.Pi * math.Sin(float64(n)*phase) / float64(n)
			}
		default:
			v = math.Sin(phase)
		}
		out[i] = float32(v)
	}
	return out
}

// stroke is one excitation under way on one loop: the source's force at the
// point of the stroke, and its echo from the bridge a part of the period
// later, which takes out the partials that rest there.
type stroke struct {
	shape *shape
	ip    *interpolator
	rate  float64
	frame int
	last  int // the frame at which it is over
	gain  float32
	width float64 // s, as the velocity has it
	echo  float64 // delay of the echo, samples
	dEcho float64

	now, back noiseCursor

	low       bool
	b, c1, c2 float64 // low-pass that opens with the velocity
	y1, y2    float64
	steady    highPass // leaves nothing of the force on the mean of what is heard
	fading    highPass // nor on the mean that rings on in the line
}

// highPass is (1 - zero/z)/(1 - pole/z), scaled to one at half the rate.
type highPass struct{ zero, pole, x, y float64 }

func (h *highPass) next(x float64) float64 {
	h.y = float64(h.pole*h.y) + float64((1+h.pole)/(1+h.zero)*(x-float64(h.zero*h.x)))
	h.x = x
	return h.y
}

// start begins a stroke of a velocity (above 0 to 127) on a string at f0 (Hz),
// whose mean keeps the part mean of itself in a frame.
func (s *stroke) start(sh *shape, ip *interpolator, f0, mean, rate, velocity float64, seed uint64) {
	*s = stroke{shape: sh, ip: ip, rate: rate}
	hard := min(1, max(0, velocity/127))
	s.gain = float32(sh.gain * hard * hard) // 40 log10(v/127) dB: General MIDI 2
	s.width = sh.width
	if sh.kind == Strike {
		s.width *= math.Pow(max(hard, 0.01), -0.25*sh.touch)
	}
	s.echo = sh.position * rate / f0
	s.now = noiseCursor{seed: seed, length: sh.length * noiseRate}
	s.back = s.now
	s.openLow(f0, hard)
	const below = 0.2 // of the fundamental
	pole := math.Exp(-2 * math.Pi * below * f0 / rate)
	s.steady, s.fading = highPass{zero: 1, pole: pole}, highPass{zero: mean, pole: pole}
	tail := 15 / (1 - pole)
	s.last = int((sh.length+2*(s.width-sh.width))*rate + s.echo + tail + taps*s.rate/min(s.rate, noiseRate) + 1)
}

// openLow sets the low-pass that opens with the velocity: Jaffe and Smith's
// dynamics filter (Computer Music Journal 7(2), 1983), with the fundamental's
// level kept. One analog pole, as two digital ones that match its power at
// three frequencies, so that it is the same at every rate.
func (s *stroke) openLow(f0, hard float64) {
	const octaves = 5 // from the hardest stroke to the softest, at full touch
	const lightest = 20000
	corner := s.shape.open
	if corner == 0 {
		corner = lightest
	}
	corner = max(corner*math.Exp2(-octaves*s.shape.touch*(1-hard)), f0)
	if corner > 0.95*lightest {
		return
	}
	xOf := func(f float64) float64 { return 1 - math.Cos(2*math.Pi*f/s.rate) }
	fb := min(12000, 0.4*s.rate)
	fa := min(corner, 5000, fb/2)
	xa, xb := xOf(fa), xOf(fb)
	ya, yb := fa*fa/(corner*corner), fb*fb/(corner*corner)
	p2 := max(0, (yb/xb-ya/xa)/(xb-xa))
	p1 := ya/xa - p2*xa
	if p1 < 0 {
		p1, p2 = ya/xa, 0
	}
	t := factor(1, p1, p2)
	s.low, s.c1, s.c2 = true, t.c1, t.c2
	s.b = (1 + t.c1 + t.c2) * math.Sqrt(1+f0*f0/(corner*corner))
}

// follow moves the echo with the string's pitch (Hz) over the next Grid frames.
func (s *stroke) follow(f0 float64) {
	s.dEcho = (s.shape.position*s.rate/f0 - s.echo) / Grid
}

func (s *stroke) over() bool { return s.shape == nil || s.frame >= s.last }

// render adds len(e) frames of force to e.
func (s *stroke) render(e []float32) {
	if s.over() {
		return
	}
	// not beyond its end, or how the stream is cut would be heard
	for i := range e[:min(len(e), s.last-s.frame)] {
		e[i] += float32(s.gain * float32(s.next()))
	}
}

func (s *stroke) next() float64 {
	t := float64(s.frame)
	x := s.source(t, &s.now)
	if s.shape.position > 0 {
		x -= s.source(t-s.echo, &s.back)
	}
	s.frame++
	s.echo += s.dEcho
	if s.low {
		y := float64(s.b*x) - float64(s.c1*s.y1) - float64(s.c2*s.y2)
		s.y2, s.y1 = s.y1, y
		x = y
	}
	return s.fading.next(s.steady.next(x))
}

// source is the force t frames after the stroke; t need not be whole. What is
// read between samples starts half a read's length later, so that nothing of it is cut off.
func (s *stroke) source(t float64, cursor *noiseCursor) float64 {
	sec := t / s.rate
	sh := s.shape
	switch sh.kind {
	case Noise:
		return cursor.at(sec*noiseRate-taps/2, s.ip)
	case Sample:
		return s.recorded(sec*sh.rate - taps/2)
	}
	if sec < 0 {
		return 0
	}
	switch sh.kind {
	case Pluck:
		x := (sec - 5*s.width) / s.width
		if sh.position == 0 {
			return math.Exp(-0.5 * x * x) // no point to displace: the corner alone
		}
		return corner(x)
	case Strike:
		if sec >= 2*s.width {
			return 0
		}
		return 0.5 - 0.5*math.Cos(math.Pi*sec/s.width)
	default:
		if sec >= sh.length {
			return 0
		}
		return (1 - sec/sh.length) * sh.wave(sec) * swell(sec/min(toneOnset, sh.length/4))
	}
}

// corner is a step as a finger of Gaussian width leaves it: what is left when
// the static force on a displaced string is let go.
func corner(x float64) float64 {
	switch {
	case x < -5:
		return 0
	case x > 6:
		return 1
	}
	return 0.5 * math.Erfc(-x/math.Sqrt2)
}

// toneOnset is how long a tone takes to begin, s: without it, the kink would
// reach beyond half the rate and sound different at each rate.
const toneOnset = 0.0004

// swell rises smoothly from 0 to 1 as x does.
func swell(x float64) float64 {
	if x >= 1 {
		return 1
	}
	return 0.5 - 0.5*math.Cos(math.Pi*x)
}

// wave is a tone's value, a time (s) after its start.
func (s *shape) wave(sec float64) float64 {
	turns := sec * s.pitch
	p := (turns - math.Floor(turns)) * float64(len(s.cycle)-1)
	i := min(int(p), len(s.cycle)-2)
	a, b := float64(s.cycle[i]), float64(s.cycle[i+1])
	return a + (p-float64(i))*(b-a)
}

// recorded is the sample at a place between its frames.
func (s *stroke) recorded(place float64) float64 {
	whole := int(math.Floor(place))
	h := &s.ip.table[int((place-float64(whole))*rows)]
	sum := float32(0)
	for i, k := range h {
		// a delay reads back, a place reads on: the taps are mirrored
		if j := whole + i - center; j >= 0 && j < len(s.shape.sample) {
			sum += float32(k * s.shape.sample[j])
		}
	}
	return float64(sum)
}

// noiseCursor reads a fading burst of white noise at places that grow, though not by
// whole steps. Sample k of a seed's noise is a hash of the two, so any place can be
// read at any time: the echo needs no memory of what went before.
type noiseCursor struct {
	seed   uint64
	length float64 // samples
	whole  int
	filled bool
	window [taps]float32
}

// sample is sample k of the burst, which fades linearly.
func (c *noiseCursor) sample(k int) float32 {
	if k < 0 || float64(k) >= c.length {
		return 0
	}
	return white(c.seed, k) * float32(1-float64(k)/c.length)
}

func (c *noiseCursor) at(place float64, ip *interpolator) float64 {
	floor := math.Floor(place)
	whole := int(floor)
	if place == floor {
		return float64(c.sample(whole))
	}
	switch {
	case c.filled && whole == c.whole:
	case c.filled && whole == c.whole+1:
		copy(c.window[:], c.window[1:])
		c.window[taps-1] = c.sample(whole + taps - 1 - center)
	default:
		for i := range c.window {
			c.window[i] = c.sample(whole + i - center)
		}
	}
	c.whole, c.filled = whole, true
	h := &ip.table[int((place-floor)*rows)]
	sum := float32(0)
	for i, k := range h {
		sum += float32(k * c.window[i])
	}
	return float64(sum)
}

// white is sample k of a seed's noise, even over -1 to 1: the finalizer of
// Steele, Lea, Flood, "Fast Splittable Pseudorandom Number Generators", OOPSLA 2014.
func white(seed uint64, k int) float32 {
	return float32(int64(mix64(seed+uint64(k)*0x9e3779b97f4a7c15))>>40) / (1 << 23)
}

func mix64(z uint64) uint64 {
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

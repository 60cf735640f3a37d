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
	width    float64 // s: standard deviation of a plucked corner, or half a hammer's contact
	curve    *curve  // of a pluck or a strike
	open     float64 // Hz: the low-pass of the hardest stroke; 0 is none
	touch    float64
	cycle    []float32 // one period of a tone, with its first sample again at the end
	pitch    float64   // Hz of a tone
	sample   []float32
	rate     float64   // Hz of the sample
	gain     float64   // makes the hardest stroke fullLevel loud
	variants []variant // of noise
}

// newShape compiles an excitation for a fundamental f0 (Hz).
func newShape(x Excitation, f0 float64, all *curves) shape {
	s := shape{kind: x.Kind, position: min(max(x.Position, 0), 0.5), touch: x.Touch, gain: 1}
	period := 1 / f0
	switch x.Kind {
	case Pluck:
		s.width = least(0.0009*math.Pow(0.018, x.Hardness), 0.12*period)
		s.length = cornerWidths * s.width
		s.curve = &all.corner
		if s.position == 0 {
			s.curve = &all.bump // no point to displace: the corner alone
		}
	case Strike:
		s.width = least(0.005*math.Pow(0.05, x.Hardness), 0.9*period)
		s.length = 2 * s.width
		s.curve = &all.push
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

// curve is a force from its begin to its end, evenly divided; afterwards it stays as it
// ends. Read between its points in straight lines, it is true to 1e-6.
type curve [2048 + 1]float32

func (c *curve) at(place float64) float64 {
	if place < 0 {
		return 0
	}
	i := int(place)
	if i >= len(c)-1 {
		return float64(c[len(c)-1])
	}
	a, b := float64(c[i]), float64(c[i+1])
	return a + float64((place-float64(i))*(b-a))
}

// curves are the forces that have one form for all strings.
type curves struct {
	corner curve // a step as a finger of Gaussian width leaves it: what is left when the static force on a displaced string is let go
	bump   curve // its derivative
	push   curve // a hammer's
}

// cornerBegin and cornerWidths are where a Gaussian corner begins and how long it is, in
// standard deviations.
const cornerBegin, cornerWidths = -5, 11

func newCurves() *curves {
	c := &curves{}
	const last = len(c.corner) - 1
	for i := range c.corner {
		part := float64(i) / float64(last)
		x := cornerBegin + cornerWidths*part
		c.corner[i] = float32(0.5 * math.Erfc(-x/math.Sqrt2))
		c.bump[i] = float32(math.Exp(-0.5 * x * x))
		c.push[i] = float32(0.5 - 0.5*math.Cos(2*math.Pi*part))
	}
	// in the end exactly nothing is left of a force and its echo
	c.corner[last], c.bump[last], c.push[last] = 1, 0, 0
	return c
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
	speed float64 // what the source moves on in a frame, in its own measure
	spent float64 // frames after which the source has nothing more to give
	echo  float64 // delay of the echo, samples
	dEcho float64

	now, back noiseCursor

	low       bool
	b, c1, c2 float64 // low-pass that opens with the velocity
	y1, y2    float64
	steady    highPass // leaves nothing of the force on the mean of what is heard
	fading    highPass // nor on the mean that rings on in the line
	tail      bool     // only the high-passes have something left
}

// highPass is (1 - zero/z)/(1 - pole/z), scaled to one at half the rate.
type highPass struct{ zero, pole, scale, x, y float64 }

func newHighPass(zero, pole float64) highPass {
	return highPass{zero: zero, pole: pole, scale: (1 + pole) / (1 + zero)}
}

// start begins a stroke of a velocity (above 0 to 127) on a string at f0 (Hz),
// whose mean keeps the part mean of itself in a frame.
func (s *stroke) start(sh *shape, ip *interpolator, f0, mean, rate, velocity float64, seed uint64) {
	*s = stroke{shape: sh, ip: ip, rate: rate}
	hard := min(1, max(0, velocity/127))
	s.gain = float32(sh.gain * hard * hard) // 40 log10(v/127) dB: General MIDI 2
	s.echo = sh.position * rate / f0
	length := sh.length
	reach := 0.0 // frames that reading between samples takes
	switch sh.kind {
	case Noise:
		s.speed = noiseRate / rate
		s.now = noiseCursor{seed: seed, length: length * noiseRate, fall: 1 / (length * noiseRate)}
		s.back = s.now
		reach = taps / s.speed
	case Sample:
		s.speed = sh.rate / rate
		reach = taps / s.speed
	case Tone:
		s.speed = 1 / rate
	default:
		if sh.kind == Strike && sh.touch > 0 {
			length *= math.Pow(max(hard, 0.01), -0.25*sh.touch)
		}
		s.speed = float64(len(sh.curve)-1) / (length * rate)
	}
	s.spent = length*rate + reach
	s.openLow(f0, hard)
	const below = 0.2 // of the fundamental
	pole := math.Exp(-2 * math.Pi * below * f0 / rate)
	s.steady, s.fading = newHighPass(1, pole), newHighPass(mean, pole)
	s.last = int(s.spent + s.echo + 15/(1-pole) + 1)
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
	const nothing = 1e-9 // of the force, -180 dB
	if !s.tail && float64(s.frame)-s.echo > s.spent && math.Abs(s.y1)+math.Abs(s.y2) < nothing {
		s.tail = true
	}
}

func (s *stroke) over() bool { return s.shape == nil || s.frame >= s.last }

// render adds len(e) frames of force to e.
func (s *stroke) render(e []float32) {
	if s.over() {
		return
	}
	e = e[:min(len(e), s.last-s.frame)] // not beyond its end, or how the stream is cut would be heard
	if s.tail {
		s.fade(e)
		return
	}
	var room [Grid]float64
	for len(e) > 0 {
		x := room[:min(len(e), Grid)]
		s.force(x)
		s.soften(x)
		s.center(x)
		for i, v := range x {
			e[i] += float32(s.gain * float32(v))
		}
		e = e[len(x):]
	}
}

// fade is render once nothing comes in to the high-passes any more.
func (s *stroke) fade(e []float32) {
	pole, y, z := s.steady.pole, s.steady.y, s.fading.y
	feed := s.fading.scale * (pole - s.fading.zero)
	for i := range e {
		z = float64(pole*z) + float64(feed*y)
		y *= pole
		e[i] += float32(s.gain * float32(z))
	}
	s.steady.y, s.fading.y = y, z
	s.frame += len(e)
}

// force writes the next frames of the source's force, less its echo. What is
// read between samples starts half a read's length later, so that nothing of it is cut off.
func (s *stroke) force(x []float64) {
	switch s.shape.kind {
	case Noise:
		for i := range x {
			x[i] = s.now.at(float64(float64(s.frame+i)*s.speed)-taps/2, s.ip)
		}
	case Sample:
		for i := range x {
			x[i] = s.recorded(float64(float64(s.frame+i)*s.speed) - taps/2)
		}
	case Tone:
		for i := range x {
			x[i] = s.shape.tone(float64(s.frame+i) * s.speed)
		}
	default:
		for i := range x {
			x[i] = s.shape.curve.at(float64(s.frame+i) * s.speed)
		}
	}
	if s.shape.position > 0 {
		s.subtractEcho(x)
	}
	s.frame += len(x)
}

// subtractEcho takes the source's echo from the force of the same frames.
func (s *stroke) subtractEcho(x []float64) {
	t, echo := float64(s.frame), s.echo
	switch s.shape.kind {
	case Noise:
		for i := range x {
			x[i] -= s.back.at(float64((t+float64(i)-echo)*s.speed)-taps/2, s.ip)
			echo += s.dEcho
		}
	case Sample:
		for i := range x {
			x[i] -= s.recorded(float64((t+float64(i)-echo)*s.speed) - taps/2)
			echo += s.dEcho
		}
	case Tone:
		for i := range x {
			x[i] -= s.shape.tone((t + float64(i) - echo) * s.speed)
			echo += s.dEcho
		}
	default:
		for i := range x {
			x[i] -= s.shape.curve.at((t + float64(i) - echo) * s.speed)
			echo += s.dEcho
		}
	}
	s.echo = echo
}

// soften passes frames through the low-pass.
func (s *stroke) soften(x []float64) {
	if !s.low {
		return
	}
	b, c1, c2, y1, y2 := s.b, s.c1, s.c2, s.y1, s.y2
	for i, v := range x {
		y1, y2 = float64(b*v)-float64(c2*y2)-float64(c1*y1), y1
		x[i] = y1
	}
	s.y1, s.y2 = y1, y2
}

// center passes frames through the high-passes.
func (s *stroke) center(x []float64) {
	a, b := s.steady, s.fading
	for i, v := range x {
		a.y = float64(a.pole*a.y) + float64(a.scale*(v-float64(a.zero*a.x)))
		a.x = v
		b.y = float64(b.pole*b.y) + float64(b.scale*(a.y-float64(b.zero*b.x)))
		b.x = a.y
		x[i] = b.y
	}
	s.steady, s.fading = a, b
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

// tone is a fading tone's value, a time (s) after its start.
func (s *shape) tone(sec float64) float64 {
	if sec < 0 || sec >= s.length {
		return 0
	}
	turns := sec * s.pitch
	p := (turns - math.Floor(turns)) * float64(len(s.cycle)-1)
	i := min(int(p), len(s.cycle)-2)
	a, b := float64(s.cycle[i]), float64(s.cycle[i+1])
	v := (1 - sec/s.length) * (a + float64((p-float64(i))*(b-a)))
	if onset := min(toneOnset, s.length/4); sec < onset {
		v *= swell(sec / onset)
	}
	return v
}

// recorded is the sample at a place between its frames.
func (s *stroke) recorded(place float64) float64 {
	floor := math.Floor(place)
	whole, sample := int(floor), s.shape.sample
	if place == floor {
		if whole < 0 || whole >= len(sample) {
			return 0
		}
		return float64(sample[whole])
	}
	h := &s.ip.table[int((place-floor)*rows)]
	from := whole - center
	if from >= 0 && from+taps <= len(sample) {
		return float64(onward(sample[from:from+taps], h))
	}
	sum := float32(0)
	for i, k := range h {
		if j := from + i; j >= 0 && j < len(sample) {
			sum += float32(k * sample[j])
		}
	}
	return float64(sum)
}

// onward is the dot product of the taps with samples, both in order: a delay reads back, a
// place reads on, and so the taps are mirrored.
func onward(s []float32, h *[taps]float32) float32 {
	s = s[:taps]
	a := float32(s[0]*h[0]) + float32(s[1]*h[1]) + float32(s[2]*h[2]) + float32(s[3]*h[3])
	b := float32(s[4]*h[4]) + float32(s[5]*h[5]) + float32(s[6]*h[6]) + float32(s[7]*h[7])
	c := float32(s[8]*h[8]) + float32(s[9]*h[9]) + float32(s[10]*h[10]) + float32(s[11]*h[11])
	return a + (b + c)
}

// noiseCursor reads a fading burst of white noise at places that grow, though not by
// whole steps. Sample k of a seed's noise is a hash of the two, so any place can be
// read at any time: the echo needs no memory of what went before.
type noiseCursor struct {
	seed   uint64
	length float64 // samples
	fall   float64 // 1/length
	whole  int
	filled bool
	begin  int // of the window
	recent [2*taps + 4]float32
}

// sample is sample k of the burst, which fades linearly.
func (c *noiseCursor) sample(k int) float32 {
	x := float64(k)
	if k < 0 || x >= c.length {
		return 0
	}
	return white(c.seed, k) * float32(1-float64(x*c.fall))
}

func (c *noiseCursor) at(place float64, ip *interpolator) float64 {
	floor := math.Floor(place)
	whole := int(floor)
	if place == floor {
		return float64(c.sample(whole))
	}
	if !c.filled || whole != c.whole {
		c.move(whole)
	}
	return float64(onward(c.recent[c.begin:], &ip.table[int((place-floor)*rows)]))
}

// move has the window lie around a whole place, from where it lay before.
func (c *noiseCursor) move(whole int) {
	if c.filled && whole == c.whole+1 {
		if c.begin++; c.begin+taps > len(c.recent) {
			copy(c.recent[:], c.recent[c.begin:])
			c.begin = 0
		}
		c.recent[c.begin+taps-1] = c.sample(whole + taps - 1 - center)
	} else {
		c.begin = 0
		for i := range taps {
			c.recent[i] = c.sample(whole + i - center)
		}
	}
	c.whole, c.filled = whole, true
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

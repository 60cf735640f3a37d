package voice

import (
	"math"
	"sync"

	"gonum.org/v1/gonum/dsp/fourier"
)

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
	cycle    *curve  // one period of a tone
	pitch    float64 // Hz of a tone
	fall     float64 // 1/length of a tone
	onset    float64 // s that it takes to begin
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
		s.fall, s.onset = 1/s.length, min(toneOnset, s.length/4)
		s.cycle = all.cycles.of(x.Wave, s.pitch)
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

// cycles are the periods of waves, made when they are asked for. Its zero value is ready; it
// may be used from several goroutines.
type cycles struct {
	mu   sync.Mutex
	made map[cycleOf]*curve
	fft  *fourier.FFT
}

// cycleOf is a wave cut off at a partial.
type cycleOf struct {
	wave    Wave
	highest int
}

// of is a period of a wave with no partial above 18 kHz when it sounds
// at pitch (Hz).
func (c *cycles) of(w Wave, pitch float64) *curve {
	key := cycleOf{w, min(max(int(18000/pitch), 1), curvePoints/8)}
	if w == Sine {
		key.highest = 1
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.made == nil {
		c.made, c.fft = map[cycleOf]*curve{}, fourier.NewFFT(curvePoints)
	}
	if done := c.made[key]; done != nil {
		return done
	}
	partials := make([]complex128, curvePoints/2+1)
	for n := 1; n <= key.highest; n++ {
		partials[n] = complex(0, -key.wave.partial(n)/2)
	}
	out := &curve{}
	for i, v := range c.fft.Sequence(nil, partials) {
		out[i] = float32(v)
	}
	out[curvePoints] = out[0]
	c.made[key] = out
	return out
}

// partial is the amplitude of a wave's partial n, a sine.
func (w Wave) partial(n int) float64 {
	k := float64(n)
	switch {
	case w == Saw:
		return 2 / math.Pi / k
	case w == Triangle && n%4 == 1:
		return 8 / (math.Pi * math.Pi) / (k * k)
	case w == Triangle && n%4 == 3:
		return -8 / (math.Pi * math.Pi) / (k * k)
	}
	return one(w == Sine && n == 1)
}

// curve is a force from its begin to its end, evenly divided; afterwards it stays as it
// ends. Read between its points in straight lines, it is true to 1e-6.
const curvePoints = 2048

type curve [curvePoints + 1]float32

func (c *curve) at(place float64) float64 {
	if place < 0 {
		return 0
	}
	i := int(place)
	k := uint(i)
	if k >= curvePoints {
		return float64(c[curvePoints])
	}
	a, b := float64(c[k]), float64(c[k+1])
	return a + float64((float64(place)-float64(i))*(b-a))
}

// curves are the forces that have one form for all strings.
type curves struct {
	// corner is a step as a finger of Gaussian width leaves it: what is left when
	// the static force on a displaced string is let go
	corner curve
	bump   curve // its derivative
	push   curve // a hammer's
	cycles cycles
}

// cornerBegin and cornerWidths are where a Gaussian corner begins and how long it is, in
// standard deviations.
const cornerBegin, cornerWidths = -5, 11

func newCurves() *curves {
	c := &curves{}
	const last = curvePoints
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

	// Two high-passes (1 - zero/z)/(1 - pole/z): of the zeros one, at one, leaves nothing of the
	// force on the mean of what is heard, and one nothing on the mean that rings on in the line.
	pole, zero float64
	x, u, v    float64 // the last that came in, that went on to the second, that came out
	tail       bool    // only the high-passes have something left
}

// start begins a stroke of a velocity (above 0 to 127) on a string at f0 (Hz),
// whose mean keeps the part mean of itself in a frame.
func (s *stroke) start(sh *shape, ip *interpolator, f0, mean, rate, velocity float64, seed uint64) {
	*s = stroke{shape: sh, ip: ip, rate: rate}
	hard := min(1, max(0, velocity/127))
	s.echo = sh.position * rate / f0
	length := sh.length
	reach := 0.0 // frames that reading between samples takes
	switch sh.kind {
	case Noise:
		s.speed = noiseRate / rate
		for _, c := range [2]*noiseCursor{&s.now, &s.back} {
			c.seed, c.length, c.fall = seed, length*noiseRate, 1/(length*noiseRate)
		}
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
		s.speed = curvePoints / (length * rate)
	}
	s.spent = float64(length*rate) + reach
	s.openLow(f0, hard)
	const below = 0.2 // of the fundamental
	pole := math.Exp(-2 * math.Pi * below * f0 / rate)
	s.pole, s.zero = pole, mean
	level := (1 + pole) * (1 + pole) / (2 * (1 + mean)) // of the high-passes: one at half the rate
	s.gain = float32(sh.gain * level * hard * hard)     // 40 log10(v/127) dB: General MIDI 2
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
	p1 := ya/xa - float64(p2*xa)
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
	s.tail = s.tail || float64(s.frame)-s.echo > s.spent && math.Abs(s.y1)+math.Abs(s.y2) < nothing
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
		s.filter(x)
		for i, v := range x {
			e[i] += float32(s.gain * float32(v))
		}
		e = e[len(x):]
	}
}

// fade is render once nothing comes in to the high-passes any more.
func (s *stroke) fade(e []float32) {
	pole, u, v := s.pole, s.u, s.v
	feed := pole - s.zero
	for i := range e {
		v = float64(pole*v) + float64(feed*u)
		u *= pole
		e[i] += float32(s.gain * float32(v))
	}
	s.u, s.v = u, v
	s.frame += len(e)
}

// force writes the next frames of the source's force, less its echo.
func (s *stroke) force(x []float64) {
	s.source(x, 0, 0, &s.now)
	if s.shape.position > 0 {
		var room [Grid]float64
		back := room[:len(x)]
		s.echo = s.source(back, s.echo, s.dEcho, &s.back)
		for i := range x {
			x[i] -= back[i]
		}
	}
	s.frame += len(x)
}

// source writes the next frames of the force as it was some frames ago, a delay that
// grows by drift with each; it returns the delay after them. What is
// read between samples starts half a read's length later, so that nothing of it is cut off.
func (s *stroke) source(x []float64, delay, drift float64, cursor *noiseCursor) float64 {
	sh := s.shape
	burst := sh.kind == Noise || sh.kind == Sample
	if burst && s.speed == 1 && drift == 0 {
		s.inStep(x, delay, cursor)
		return delay
	}
	// one loop for each, or asking for the kind would cost as much as the source
	at, speed := float64(s.frame), s.speed
	switch sh.kind {
	case Noise:
		for i := range x {
			x[i] = cursor.at(float64((at-delay)*speed)-taps/2, s.ip)
			at, delay = at+1, delay+drift
		}
	case Sample:
		for i := range x {
			x[i] = sh.recorded(float64((at-delay)*speed)-taps/2, s.ip)
			at, delay = at+1, delay+drift
		}
	case Tone:
		for i := range x {
			x[i] = sh.tone((at - delay) * speed)
			at, delay = at+1, delay+drift
		}
	default:
		for i := range x {
			x[i] = sh.curve.at((at - delay) * speed)
			at, delay = at+1, delay+drift
		}
	}
	return delay
}

// inStep is source for samples that are as far apart as the frames.
func (s *stroke) inStep(x []float64, delay float64, cursor *noiseCursor) {
	floor := math.Floor(-delay)
	part := -delay - floor
	from := s.frame + int(floor) - taps/2
	if part > 0 {
		from -= center
	}
	var near []float32 // those that the read needs
	switch count := len(x) + taps - 1; {
	case s.shape.kind == Noise:
		near = cursor.window(from, count)
	case from >= 0 && from+count <= len(s.shape.sample):
		near = s.shape.sample[from : from+count]
	default:
		var room [Grid + taps - 1]float32
		near = room[:count]
		for i := range near {
			if j := from + i; j >= 0 && j < len(s.shape.sample) {
				near[i] = s.shape.sample[j]
			}
		}
	}
	if part == 0 {
		for i := range x {
			x[i] = float64(near[i])
		}
		return
	}
	h := s.ip.table[int(part*rows)]
	for i := range x {
		x[i] = float64(onward(near[i:i+taps], &h))
	}
}

// filter passes frames through the low-pass and the high-passes.
func (s *stroke) filter(f []float64) {
	b, c1, c2, y1, y2 := s.b, s.c1, s.c2, s.y1, s.y2
	pole, zero, x, u, v := s.pole, s.zero, s.x, s.u, s.v
	low := s.low
	for i, in := range f {
		if low {
			in = float64(b*in) - float64(c2*y2) - float64(c1*y1)
			y1, y2 = in, y1
		}
		was := u
		u = float64(pole*u) + (in - x)
		x = in
		v = float64(pole*v) + (u - float64(zero*was))
		f[i] = v
	}
	s.y1, s.y2 = y1, y2
	s.x, s.u, s.v = x, u, v
}

// toneOnset is how long a tone takes to begin, s: without it, the kink would
// reach beyond half the rate and sound different at each rate.
const toneOnset = 0.0004

// swell rises smoothly from 0 to 1 as x does.
func swell(x float64) float64 {
	if x >= 1 {
		return 1
	}
	return 0.5 - float64(0.5*math.Cos(math.Pi*x))
}

// tone is a fading tone's value, a time (s) after its start.
func (s *shape) tone(sec float64) float64 {
	if sec < 0 || sec >= s.length {
		return 0
	}
	p := float64(sec * s.pitch * curvePoints)
	i := int(p)
	k := uint(i) % curvePoints
	a, b := float64(s.cycle[k]), float64(s.cycle[k+1])
	v := (1 - float64(sec*s.fall)) * (a + float64((p-float64(i))*(b-a)))
	if sec < s.onset {
		v *= swell(sec / s.onset)
	}
	return v
}

// recorded is the sample at a place between its frames.
func (s *shape) recorded(place float64, ip *interpolator) float64 {
	floor := math.Floor(place)
	from := int(floor) - center
	h := &ip.table[int((place-floor)*rows)]
	if from >= 0 && from+taps <= len(s.sample) {
		return float64(onward(s.sample[from:from+taps], h))
	}
	sum := float32(0)
	for i, k := range h {
		if j := from + i; j >= 0 && j < len(s.sample) {
			sum += float32(k * s.sample[j])
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
	// recent holds count samples, from number first on
	recent       [Grid + 2*taps]float32
	first, count int
}

// make writes samples of the burst, which fades linearly, from number k on.
func (c *noiseCursor) make(out []float32, k int) {
	state, x, length, fall := c.seed+uint64(k)*golden, float64(k), c.length, c.fall
	for i := range out {
		out[i] = 0
		if x >= 0 && x < length {
			out[i] = uniform(mix64(state)) * float32(1-float64(x*fall))
		}
		state, x = state+golden, x+1
	}
}

// at reads between the samples.
func (c *noiseCursor) at(place float64, ip *interpolator) float64 {
	floor := math.Floor(place)
	near := c.window(int(floor)-center, taps)
	return float64(onward(near, &ip.table[int((place-floor)*rows)]))
}

// window gives n samples, at most Grid + taps, from number from on. Those that it gave last are not
// made again.
func (c *noiseCursor) window(from, n int) []float32 {
	at := from - c.first
	switch {
	case at < 0 || at > c.count:
		c.first, c.count, at = from, 0, 0
	case at+n > len(c.recent):
		c.first, c.count, at = from, copy(c.recent[:], c.recent[at:c.count]), 0
	}
	if c.count < at+n {
		c.make(c.recent[c.count:at+n], c.first+c.count)
		c.count = at + n
	}
	return c.recent[at : at+n]
}

// golden is the step of a generator of noise, and mix64 its finalizer: Steele, Lea,
// Flood, "Fast Splittable Pseudorandom Number Generators", OOPSLA 2014.
const golden = 0x9e3779b97f4a7c15

// uniform is a number from -1 to 1 of the upper bits of z.
func uniform(z uint64) float32 { return float32(int64(z)>>40) / (1 << 23) }

func mix64(z uint64) uint64 {
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

package engine

import (
	"math"
	"math/cmplx"
	"slices"

	"gonum.org/v1/gonum/dsp/fourier"

	"tautwire/config"
)

const (
	// bodyTop is the part of the rate up to which a mode is built; above it
	// there is nothing to hear.
	bodyTop = 0.49
	// longestImpulse is how much of an impulse response is used, s. It ends in
	// a fade of impulseFade, s.
	longestImpulse = 2.0
	impulseFade    = 0.02
	// evenLow and evenHigh bound the spectrum for which a body is made as loud
	// as the string alone, Hz: from a low string's second partial to where
	// plucked strings have next to nothing left.
	evenLow, evenHigh = 80.0, 8000.0
	// evenTilt is how that spectrum's power in an octave falls with frequency,
	// as a power of it: 0.75 dB an octave, between pink noise, which is like the
	// brightest strings, and the 1/n partials of ideal plucks.
	evenTilt = 0.25
	// modeLow is the lowest frequency of a mode, Hz.
	modeLow = 20.0
	// loudestPeak is the most by which any frequency leaves a body louder than
	// it came in. A body of a mode or two, silent elsewhere, would need more to
	// be as loud as the string; it is then the softer.
	loudestPeak = 24.0 // dB
	// modeSilence is the vibration of a mode, over full scale, below which it is
	// stopped, long before its numbers become subnormal.
	modeSilence = 1e-15
)

// compiledBody is what a patch's strings are heard through, at one rate, its
// mix with the string alone included. It never changes; each stream through it
// has a bodyState of its own. nil is the string alone.
//
// The mix is even in loudness: a spectrum like that of strings (see evenTilt)
// leaves with the power with which it came, whatever the mix. The body's own
// sound is first brought to the string's power and then both together are, since
// they are not independent. So the levels of modes, and of an impulse response,
// matter only between themselves.
type compiledBody struct {
	direct  float64 // gain of the string alone
	modes   []resonator
	impulse *impulse // has direct in it
}

// compileBody makes b for rate, Hz. When b has an impulse response its modes
// are left out.
func compileBody(b config.Body, rate int) *compiledBody {
	if b.Mix <= 0 {
		return nil
	}
	if b.Impulse != nil {
		return compileImpulse(b, rate)
	}
	return compileModes(b, float64(rate))
}

func compileModes(b config.Body, rate float64) *compiledBody {
	var modes []resonator
	for _, m := range b.Modes {
		if m.Frequency < bodyTop*rate {
			modes = append(modes, newResonator(m, rate))
		}
	}
	frequencies := modeGrid(b.Modes, bodyTop*rate)
	responses := make([]complex128, len(frequencies))
	for i, f := range frequencies {
		for _, m := range modes {
			responses[i] += m.response(2 * math.Pi * f / rate)
		}
	}
	direct, wet, ok := evenMix(b.Mix, frequencies, responses)
	if !ok {
		return nil
	}
	for i := range modes {
		modes[i].gain *= wet
	}
	return &compiledBody{direct: direct, modes: modes}
}

func compileImpulse(b config.Body, rate int) *compiledBody {
	data := resample(b.Impulse.Data, b.Impulse.Rate, rate)
	h := make([]float64, min(len(data), int(longestImpulse*float64(rate))))
	for i := range h {
		h[i] = float64(data[i])
	}
	if len(h) < len(data) {
		fade := h[len(h)-int(impulseFade*float64(rate)):]
		for i := range fade {
			fade[i] *= 0.5 + 0.5*math.Cos(math.Pi*float64(i+1)/float64(len(fade)))
		}
	}
	frequencies, responses := spectrum(h, float64(rate))
	direct, wet, ok := evenMix(b.Mix, frequencies, responses)
	if !ok {
		return nil
	}
	for i := range h {
		h[i] *= wet
	}
	h[0] += direct
	return &compiledBody{impulse: newImpulse(h)}
}

// evenMix gives the gains of the string alone and of a body that answers
// frequencies, Hz and rising, with responses; ok is false when the body is
// silent.
func evenMix(mix float64, frequencies []float64, responses []complex128) (direct, wet float64, ok bool) {
	var power, common, peak, span float64
	for i := 1; i < len(responses); i++ {
		a, b := responses[i-1], responses[i]
		peak = max(peak, cmplx.Abs(b))
		if frequencies[i-1] < evenLow || frequencies[i] > evenHigh {
			continue
		}
		octaves := math.Log2(frequencies[i] / frequencies[i-1])
		width := octaves * math.Pow(frequencies[i], -evenTilt)
		power += width * (norm(a) + norm(b)) / 2
		common += width * (real(a) + real(b)) / 2
		span += width
	}
	if !(power > 0) {
		return 0, 0, false
	}
	power, common = power/span, common/span
	direct, wet = 1-mix, mix/math.Sqrt(power)
	together := direct*direct + wet*wet*power + 2*direct*wet*common
	// A body may cancel the string: the peak then sets a bound in place of infinity.
	scale := 1 / math.Sqrt(max(0, together))
	scale = min(scale, math.Pow(10, loudestPeak/20)/(direct+wet*peak))
	return scale * direct, scale * wet, true
}

func norm(z complex128) float64 { return real(z)*real(z) + imag(z)*imag(z) }

// modeGrid gives frequencies from modeLow to high that show every mode's peak.
func modeGrid(modes []config.Mode, high float64) []float64 {
	const octave = 24 // steps of the even part
	var grid []float64
	for i := 0; modeLow*math.Exp2(float64(i)/octave) < high; i++ {
		grid = append(grid, modeLow*math.Exp2(float64(i)/octave))
	}
	for _, m := range modes {
		// A mode is half as strong where the angular frequency is off by its
		// decay rate, ln(1000)/T60.
		half := math.Log(1000) / (2 * math.Pi * m.T60)
		grid = append(grid, m.Frequency)
		for d := half / 8; d < m.Frequency/20; d *= 1.5 {
			grid = append(grid, m.Frequency-d, m.Frequency+d)
		}
	}
	grid = slices.DeleteFunc(grid, func(f float64) bool { return f < modeLow || f > high })
	slices.Sort(grid)
	return slices.Compact(grid)
}

// spectrum gives what h, at rate, answers to the frequencies above zero.
func spectrum(h []float64, rate float64) (frequencies []float64, responses []complex128) {
	n := 1 << 15
	for n < len(h) {
		n *= 2
	}
	padded := make([]float64, n)
	copy(padded, h)
	responses = fourier.NewFFT(n).Coefficients(nil, padded)[1:]
	frequencies = make([]float64, len(responses))
	for i := range frequencies {
		frequencies[i] = float64(i+1) * rate / float64(n)
	}
	return frequencies, responses
}

// resonator is one mode. Its poles are the mode's own by impulse invariance, so
// it rings with the exact frequency and T60; its zeros are at 0 Hz and at half
// the rate, as a body's mobility has none there, which make its gain at its
// peak exact too: Smith and Angell, "A Constant-Gain Digital Resonator Tuned by
// a Single Coefficient", Computer Music Journal 6(4), 1982. The poles are within
// the unit circle for every T60, so it is always stable.
type resonator struct {
	gain   float64
	a1, a2 float64 // y[n] = gain (x[n] - x[n-2]) + a1 y[n-1] - a2 y[n-2]
}

func newResonator(m config.Mode, rate float64) resonator {
	r := math.Pow(10, -3/(m.T60*rate))
	return resonator{
		gain: math.Pow(10, m.Level/20) * (1 - r*r) / 2,
		a1:   2 * r * math.Cos(2*math.Pi*m.Frequency/rate),
		a2:   r * r,
	}
}

// response is the resonator's answer at w, radians a frame.
func (m resonator) response(w float64) complex128 {
	z := cmplx.Rect(1, -w)
	return complex(m.gain, 0) * (1 - z*z) / (1 - complex(m.a1, 0)*z + complex(m.a2, 0)*z*z)
}

// bodyState is one stereo stream's passage through a compiledBody. Its methods
// may be called on nil, which is the string alone.
type bodyState struct {
	c            *compiledBody
	convolver    *convolver
	last, before frame     // what came in one and two frames ago
	rings        []ringing // of each mode
	count        int       // frames since the modes were last looked at
}

type frame struct{ left, right float64 }

// ringing is a resonator's last two values.
type ringing struct{ last, before frame }

// newBodyState makes a stream at rest; c may be nil. It allocates everything
// that the stream will need.
func newBodyState(c *compiledBody) *bodyState {
	if c == nil {
		return nil
	}
	s := &bodyState{c: c, rings: make([]ringing, len(c.modes))}
	if c.impulse != nil {
		s.convolver = newConvolver(c.impulse)
	}
	return s
}

// reset brings the stream to rest.
func (s *bodyState) reset() {
	if s == nil {
		return
	}
	if s.convolver != nil {
		s.convolver.reset()
	}
	s.last, s.before = frame{}, frame{}
	clear(s.rings)
	s.count = 0
}

// process replaces left and right, which are equally long, by how they sound
// through the body, without delay. How a stream is cut into calls makes no
// difference to a bit.
func (s *bodyState) process(left, right []float32) {
	if s == nil {
		return
	}
	if s.convolver != nil {
		s.convolver.process(left, right)
		return
	}
	right = right[:len(left)]
	for i := range left {
		in := frame{float64(left[i]), float64(right[i])}
		out := s.ring(in)
		left[i], right[i] = float32(out.left), float32(out.right)
	}
}

// ring takes in one frame of a body of modes.
func (s *bodyState) ring(in frame) frame {
	if s.count++; s.count == tick {
		s.count = 0
		s.settle()
	}
	dl, dr := in.left-s.before.left, in.right-s.before.right
	s.before, s.last = s.last, in
	out := frame{s.c.direct * in.left, s.c.direct * in.right}
	rings := s.rings[:len(s.c.modes)]
	for k := range s.c.modes {
		m, r := &s.c.modes[k], &rings[k]
		l := float64(m.gain*dl) + float64(m.a1*r.last.left) - float64(m.a2*r.before.left)
		right := float64(m.gain*dr) + float64(m.a1*r.last.right) - float64(m.a2*r.before.right)
		r.before, r.last = r.last, frame{l, right}
		out.left += l
		out.right += right
	}
	return out
}

// settle stops the modes that have died away, on each side by itself, for one
// may long be silent while the other sounds.
func (s *bodyState) settle() {
	for k := range s.rings {
		r := &s.rings[k]
		if max(math.Abs(r.last.left), math.Abs(r.before.left)) < modeSilence {
			r.last.left, r.before.left = 0, 0
		}
		if max(math.Abs(r.last.right), math.Abs(r.before.right)) < modeSilence {
			r.last.right, r.before.right = 0, 0
		}
	}
}

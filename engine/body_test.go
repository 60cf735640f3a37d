package engine

import (
	"fmt"
	"math"
	"math/cmplx"
	"slices"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"
	"gonum.org/v1/gonum/floats"

	"tautwire/config"
)

// lampRoom is a body of a dozen modes for tests, of no instrument.
var lampRoom = []config.Mode{
	{Frequency: 98, T60: 0.32, Level: 0}, {Frequency: 117, T60: 0.2, Level: -6}, {Frequency: 204, T60: 0.25, Level: 2},
	{Frequency: 276, T60: 0.15, Level: -4}, {Frequency: 391, T60: 0.12, Level: -3}, {Frequency: 512, T60: 0.1, Level: -5},
	{Frequency: 701, T60: 0.08, Level: -7}, {Frequency: 985, T60: 0.06, Level: -8}, {Frequency: 1430, T60: 0.05, Level: -8},
	{Frequency: 2100, T60: 0.04, Level: -9}, {Frequency: 3300, T60: 0.03, Level: -10}, {Frequency: 5200, T60: 0.02, Level: -12},
}

// stairwell is an impulse response of noise, dying by 60 dB in its length.
func stairwell(seconds float64, rate int) *config.Sample {
	s := &config.Sample{Path: "stairwell.wav", Rate: rate}
	for _, v := range noiseResponse(int(seconds*float64(rate)), 21) {
		s.Data = append(s.Data, float32(v*0.1))
	}
	return s
}

// testBodies are of every kind, by name.
func testBodies(mix float64) map[string]config.Body {
	return map[string]config.Body{
		"modes":      {Mix: mix, Modes: lampRoom},
		"long modes": {Mix: mix, Modes: []config.Mode{{Frequency: 150, T60: 5}, {Frequency: 440, T60: 3, Level: 6}, {Frequency: 2000, T60: 1}}},
		"impulse":    {Mix: mix, Impulse: stairwell(0.4, 44100)},
		"short":      {Mix: mix, Impulse: &config.Sample{Rate: 48000, Data: []float32{0.5, -0.3, 0.2}}},
	}
}

var bodyRates = []int{44100, 48000, 96000}

// TestModeRingsTrue takes the ringing of a body of one mode apart: of two
// values and the two before, its frequency and decay (Prony's method).
func TestModeRingsTrue(t *testing.T) {
	for _, rate := range bodyRates {
		for _, m := range []config.Mode{
			{Frequency: 20, T60: 5}, {Frequency: 20, T60: 0.05}, {Frequency: 98, T60: 0.3, Level: 6}, {Frequency: 440, T60: 0.005},
			{Frequency: 1000, T60: 0.1, Level: -60}, {Frequency: 5000, T60: 5, Level: 24}, {Frequency: 20000, T60: 0.05},
		} {
			r := newResonator(m, float64(rate))
			s := newBodyState(&compiledBody{modes: []resonator{r}})
			y := make([]float64, 64)
			for i := range y {
				in := frame{}
				if i == 0 {
					in.left = 1
				}
				y[i] = s.ring(in).left
			}
			// From the third frame on, y[n] = 2 ρ cos(θ) y[n-1] - ρ² y[n-2].
			a, b, c, d := y[40], y[41], y[42], y[43]
			a2 := (c*c - b*d) / (b*b - a*c)
			a1 := (c + a2*a) / b
			rho := math.Sqrt(a2)
			frequency := math.Acos(a1/(2*rho)) * float64(rate) / (2 * math.Pi)
			t60 := -3 / (math.Log10(rho) * float64(rate))
			if math.Abs(frequency/m.Frequency-1) > 1e-4 || math.Abs(t60/m.T60-1) > 1e-3 {
				t.Errorf("rate %d, mode %v Hz, T60 %v s: rings at %.5f Hz, T60 %.6f s", rate, m.Frequency, m.T60, frequency, t60)
			}

			half := 1.1 / m.T60
			peak := 0.0
			for f := m.Frequency - half; f < m.Frequency+half; f += half / 2000 {
				if f > 0 && f < float64(rate)/2 {
					peak = max(peak, cmplx.Abs(r.response(2*math.Pi*f/float64(rate))))
				}
			}
			if level := 20 * math.Log10(peak); math.Abs(level-m.Level) > 0.01 {
				t.Errorf("rate %d, mode %v Hz, T60 %v s: peak at %.4f dB; want %v dB", rate, m.Frequency, m.T60, level, m.Level)
			}
		}
	}
}

// What process does is what response says, so what is true of the one is of the other.
func TestModesAnswerAsComputed(t *testing.T) {
	const rate, n = 48000, 1 << 17
	c := compileBody(config.Body{Mix: 0.7, Modes: lampRoom}, rate)
	left, right := make([]float32, n), make([]float32, n)
	left[0], right[0] = 1, 1
	newBodyState(c).process(left, right)
	if !slices.Equal(left, right) {
		t.Error("left and right answer the same differently")
	}
	bins := fourier.NewFFT(n).Coefficients(nil, widen(left))
	for i := 1; i < n/2; i += 37 {
		want := complex(c.direct, 0)
		for _, m := range c.modes {
			want += m.response(2 * math.Pi * float64(i) / n)
		}
		if d := cmplx.Abs(bins[i] - want); d > 1e-4*cmplx.Abs(want)+1e-4 {
			t.Fatalf("at %.1f Hz: %v; want %v", float64(i)*rate/n, bins[i], want)
		}
	}
}

func widen(x []float32) []float64 {
	y := make([]float64, len(x))
	for i, v := range x {
		y[i] = float64(v)
	}
	return y
}

func TestBodyIsTheSameHoweverCut(t *testing.T) {
	for name, b := range testBodies(0.6) {
		c := compileBody(b, 48000)
		wantLeft, wantRight := noiseFrames(30000, 8)
		newBodyState(c).process(wantLeft, wantRight)
		s := newBodyState(c)
		for _, call := range cuts {
			left, right := noiseFrames(30000, 8)
			s.reset()
			processInCalls(s.process, left, right, call)
			if !slices.Equal(left, wantLeft) || !slices.Equal(right, wantRight) {
				t.Errorf("%s, calls of %d frames: not the bits of one call", name, call)
			}
		}
	}
}

// A pluck's partials fall by 6 dB an octave, pink noise has equal power in
// octaves: with either, no mix is louder or softer than the string alone by
// more than 2 dB, on the mean over two octaves and a half of keys.
func TestMixIsEvenInLoudness(t *testing.T) {
	const rate, n = 48000, 1 << 15
	spectra := map[string]map[int]float64{"pink": {}, "plucks": {}} // power in each bin
	for i := 1; i < n/2; i++ {
		if f := float64(i) * rate / n; f >= 80 && f <= 8000 {
			spectra["pink"][i] = 1 / f
		}
	}
	for key := 40; key <= 70; key++ {
		f0 := 440 * math.Exp2(float64(key-69)/12)
		for k := 1; float64(k)*f0 < 10000; k++ {
			spectra["plucks"][int(math.Round(float64(k)*f0*n/rate))] += 1 / float64(k*k)
		}
	}
	for _, mix := range []float64{0.05, 0.25, 0.5, 0.75, 1} {
		for name, b := range testBodies(mix) {
			if name == "long modes" {
				continue // silent but at three frequencies: as loud as the keys that meet them
			}
			left, right := make([]float32, n), make([]float32, n)
			left[0] = 1
			newBodyState(compileBody(b, rate)).process(left, right)
			bins := fourier.NewFFT(n).Coefficients(nil, widen(left))
			for kind, powers := range spectra {
				in, out := 0.0, 0.0
				for i, p := range powers {
					in += p
					out += p * norm(bins[i])
				}
				level := 10 * math.Log10(out/in)
				t.Logf("%s, mix %v, %s: %+.2f dB", name, mix, kind, level)
				if math.Abs(level) > 2 {
					t.Errorf("%s, mix %v, %s: %+.2f dB; want within 2 dB", name, mix, kind, level)
				}
			}
		}
	}
}

func TestBodyAtItsEdges(t *testing.T) {
	mode := []config.Mode{{Frequency: 20000, T60: 0.1}}
	for name, c := range map[string]*compiledBody{
		"no mix":          compileBody(config.Body{Modes: lampRoom}, 48000),
		"nothing":         compileBody(config.Body{Mix: 0.5}, 48000),
		"silent impulse":  compileBody(config.Body{Mix: 0.5, Impulse: &config.Sample{Rate: 48000, Data: make([]float32, 100)}}, 48000),
		"empty impulse":   compileBody(config.Body{Mix: 0.5, Impulse: &config.Sample{Rate: 44100}}, 48000),
		"above half rate": compileBody(config.Body{Mix: 0.5, Modes: mode}, 22050),
	} {
		left, right := noiseFrames(100, 1)
		wantLeft, wantRight := noiseFrames(100, 1)
		s := newBodyState(c)
		s.reset()
		s.process(left, right)
		if !slices.Equal(left, wantLeft) || !slices.Equal(right, wantRight) {
			t.Errorf("%s: not the string alone", name)
		}
	}
}

// An impulse response that is too long ends at 2 s, and without a click.
func TestLongImpulseFades(t *testing.T) {
	const rate, end = 8000, 16000
	steady := &config.Sample{Rate: rate, Data: make([]float32, 3*rate)}
	for i := range steady.Data {
		steady.Data[i] = 1
	}
	left, right := make([]float32, end+rate), make([]float32, end+rate)
	left[0] = 1
	newBodyState(compileBody(config.Body{Mix: 1, Impulse: steady}, rate)).process(left, right)
	full := math.Abs(float64(left[rate]))
	for i, v := range left[1:] {
		if step := math.Abs(float64(v - left[i])); step > 0.02*full {
			t.Fatalf("frame %d: a step of %.3f of the whole; want at most 0.02", i+1, step/full)
		}
		if i+1 >= end && math.Abs(float64(v)) > 1e-9 {
			t.Fatalf("frame %d: %v; want silence", i+1, v)
		}
	}
}

// A body's own loudness does not move the balance that mix sets.
func TestMixIsOfEqualParts(t *testing.T) {
	const mix = 0.3
	soft, loud := config.Body{Mix: mix, Modes: lampRoom}, config.Body{Mix: mix}
	for _, m := range lampRoom {
		m.Level += 12
		loud.Modes = append(loud.Modes, m)
	}
	a, b := compileBody(soft, 48000), compileBody(loud, 48000)
	if math.Abs(a.direct/b.direct-1) > 1e-9 {
		t.Errorf("12 dB more in every mode: the string alone goes from %v to %v; want no change", a.direct, b.direct)
	}
	for i := range a.modes {
		if math.Abs(a.modes[i].gain/b.modes[i].gain-1) > 1e-9 {
			t.Errorf("12 dB more in every mode: mode %d goes from %v to %v; want no change", i, a.modes[i].gain, b.modes[i].gain)
		}
	}
}

// However long and hard it is driven, at the frequency of a mode too, a body
// stays below its loudest peak (its start may overshoot by a little), and
// afterwards each side comes to rest by itself without a subnormal number.
func TestBodyIsStable(t *testing.T) {
	const rate = 8000
	tiny := float32(math.Ldexp(1, -126))
	all := testBodies(1)
	all["opposed"] = config.Body{Mix: 0.5, Impulse: &config.Sample{Rate: rate, Data: []float32{-1}}}
	for name, b := range all {
		s := newBodyState(compileBody(b, rate))
		left, right := make([]float32, rate), make([]float32, rate)
		for second := range 40 {
			driven := [2]bool{second < 6, second < 3}
			for i := range left {
				left[i], right[i] = 0, 0
				x := float32(math.Sin(2 * math.Pi * 440 * float64(i) / rate))
				if driven[0] {
					left[i] = x
				}
				if driven[1] {
					right[i] = -x
				}
			}
			s.process(left, right)
			for i, v := range slices.Concat(left, right) {
				v = float32(math.Abs(float64(v)))
				if !(v < 1.5*16) {
					t.Fatalf("%s, second %d, frame %d: %v", name, second, i, v)
				}
				if v != 0 && v < tiny {
					t.Fatalf("%s, second %d, frame %d: %v is subnormal", name, second, i, v)
				}
			}
		}
		if floats.Norm(widen(left), 1) != 0 || floats.Norm(widen(right), 1) != 0 {
			t.Errorf("%s: does not come to rest", name)
		}
	}
}

func TestBodyAllocatesNothing(t *testing.T) {
	for name, b := range testBodies(0.5) {
		s := newBodyState(compileBody(b, 48000))
		left, right := noiseFrames(1024, 8)
		if n := testing.AllocsPerRun(8, func() { s.process(left, right) }); n != 0 {
			t.Errorf("%s: %v allocations; want none", name, n)
		}
	}
}

// BenchmarkBody gives ns per stereo frame in calls of 64 frames, beside a body
// of no modes as the control.
func BenchmarkBody(b *testing.B) {
	const period = 64
	for _, n := range []int{0, 12, 48} {
		b.Run(fmt.Sprintf("modes/%d", n), func(b *testing.B) {
			c := &compiledBody{direct: 0.5}
			for i := range n {
				m := lampRoom[i%len(lampRoom)]
				c.modes = append(c.modes, newResonator(m, 48000))
			}
			s := newBodyState(c)
			source, other := noiseFrames(period, 8)
			left, right := make([]float32, period), make([]float32, period)
			for b.Loop() {
				copy(left, source)
				copy(right, other)
				s.process(left, right)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*period), "ns/frame")
		})
	}
}

// BenchmarkCompileBody gives ms to compile each kind at 96 kHz.
func BenchmarkCompileBody(b *testing.B) {
	for name, body := range map[string]config.Body{
		"modes": {Mix: 0.5, Modes: lampRoom}, "impulse": {Mix: 0.5, Impulse: stairwell(2, 44100)},
	} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				newBodyState(compileBody(body, 96000))
			}
			b.ReportMetric(b.Elapsed().Seconds()*1e3/float64(b.N), "ms/body")
		})
	}
}

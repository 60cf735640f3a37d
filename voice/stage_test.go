package voice

import (
	"flag"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"tautwire/voice/lanes"
	"tautwire/voice/measure"
)

// rates are those at which every bound is held.
var rates = []float64{44100, 48000, 96000}

// stride is how many cases of a long sweep lie between those that are tried: with -short, as on a
// processor that is emulated, each test tries some of each kind.
var stride = 1

func TestMain(m *testing.M) {
	flag.Parse()
	if testing.Short() {
		rates, stride = rates[:1], 12
	}
	os.Exit(m.Run())
}

// few are the first of every stride cases.
func few[T any](cases []T) []T { return cases[:(len(cases)+stride-1)/stride] }

// stage is a maker and a voice for a rate.
type stage struct {
	rate  float64
	maker *Maker
	voice *Voice
}

func newStage(rate float64) *stage {
	m := NewMaker(rate)
	return &stage{rate, m, m.NewVoice(1.5)}
}

// note renders a stroke of velocity 127 for some seconds.
func (s *stage) note(d *Design, seconds float64) []float32 {
	s.voice.Reset()
	s.voice.Strike(d, 127, 7)
	return s.more(seconds)
}

func (s *stage) more(seconds float64) []float32 {
	out := make([]float32, int(seconds*s.rate))
	s.voice.Render(out, nil)
	return out
}

// hz is a key's pitch in equal temperament on A4 = 440 Hz, ISO 16:1975.
func hz(key int) float64 { return 440 * math.Exp2(float64(key-69)/12) }

// plain is a string with nothing but a decay and a brightness.
func plain(f0, decay, brightness float64) Spec {
	return Spec{Frequency: f0, Decay: decay, Brightness: brightness, Release: 0.2,
		Excitation: Excitation{Kind: Pluck, Position: 0.13, Hardness: 0.7}}
}

// refined switches on every refinement that must leave the bounds as they are, at random.
func refined(r *rand.Rand, f0 float64) Spec {
	between := func(a, b float64) float64 { return a + r.Float64()*(b-a) }
	return Spec{
		Frequency: f0, Decay: 0.3 * math.Pow(100, r.Float64()), Brightness: r.Float64(), Release: 0.2,
		SecondMix: between(0.1, 0.6), SecondCents: between(-3, 3), SecondDecay: between(0.5, 2),
		Strings: 1 + r.IntN(3), CourseCents: between(2, 20),
		Excitation: Excitation{Kind: Kind(r.IntN(4)), Position: between(0.03, 0.5), Hardness: r.Float64(),
			Touch: r.Float64(), Wave: Wave(r.IntN(3)), Ratio: 1},
	}
}

// strandOf is a spec reduced to one of its strands, tuned and damped as it is there.
func strandOf(spec Spec, s strand) Spec {
	spec.Frequency *= octaves(s.cents)
	if s.mode == 1 && spec.SecondDecay > 0 {
		spec.Decay *= spec.SecondDecay
	}
	spec.SecondMix, spec.Strings = 0, 1
	return spec
}

// partial measures the partial near f of a signal, or fails.
func partial(t *testing.T, signal []float32, rate, f, spacing float64) measure.Mode {
	t.Helper()
	m, err := measure.Partial(signal, rate, f, spacing)
	if err != nil {
		t.Fatalf("partial at %.1f Hz: %v", f, err)
	}
	return m
}

// response is the gain of a whole trip at w, with the very taps and
// coefficients that the loop computes with, and its group delay in samples.
func (l *loop) response(w float64) (gain complex128, trip float64) {
	b, lane := &l.bank.Bank, l.lane
	offset := float64(b.Offset[lane])
	if l.motion == gliding { // that of the last frame
		offset -= float64(b.DOffset[lane] - (b.D2Offset[lane] - b.D3Offset[lane]))
	}
	tap := func(i int) float64 {
		h := float64(b.Tap[i][lane])
		if j := i - (taps-lanes.SlopeTaps)/2; j >= 0 && j < lanes.SlopeTaps {
			h += offset * float64(b.Slope[j][lane])
		}
		if j := i - (taps-lanes.CurveTaps)/2; j >= 0 && j < lanes.CurveTaps {
			h += offset * offset * float64(b.Curve[j][lane])
		}
		return h * float64(b.Level[lane])
	}
	at := func(w float64) complex128 {
		var sum complex128
		newest := int(b.Back[lane]) - (taps - 1)
		for i := range taps {
			sum += complex(tap(i), 0) * unit(-w*float64(newest+i))
		}
		c := coefficients{loss: loss{twoPole: twoPole{b.C1[lane], b.C2[lane]}}}
		for i := range l.sections {
			c.sections[i] = [2]float64{b.Section[i].A1[lane], b.Section[i].A2[lane]}
		}
		z := unit(w)
		shelf := complex128(1)
		if l.sections > 0 {
			shelf = complex(b.Gain[lane], 0) * (z - complex(b.Zero[lane], 0)) / (z - complex(b.Pole[lane], 0))
		}
		return sum * shelf * c.rest(z, l.sections)
	}
	const step = 1e-6
	gain = at(w)
	turn := at(w+step) / at(w-step)
	return gain, -math.Atan2(imag(turn), real(turn)) / (2 * step)
}

package voice

import (
	"fmt"
	"math"
	"testing"

	"tautwire/voice/measure"
)

// pure is a string that moves in its fundamental alone: whatever its bend,
// nothing of its own lies above 5 kHz where a click would be. It is driven by a sine that
// swells and fades for 0.4 s.
func pure(f0 float64) Spec {
	const rate = 48000
	s := plain(f0, 8, 0.2)
	push := make([]float32, int(0.4*rate))
	for i := range push {
		swell := math.Pow(math.Sin(math.Pi*float64(i)/float64(len(push))), 6)
		push[i] = float32(swell * math.Sin(2*math.Pi*f0*float64(i)/rate))
	}
	s.Excitation = Excitation{Kind: Sample, Sample: push, SampleRate: rate, Position: 0.23, Hardness: 1}
	return s
}

// dark is the click test's own excitation: a corner too round to reach 5 kHz.
func dark(f0 float64) Spec {
	s := plain(f0, 4, 0.3)
	s.Excitation = Excitation{Kind: Pluck, Position: 0.23, Hardness: 0}
	return s
}

// bend moves a sounding voice to cents over some seconds, told every Grid frames
// in between, or once and at once when they are 0.
func (s *stage) bend(out []float32, to, seconds float64) []float32 {
	from, steps := s.voice.cents, int(seconds*s.rate/Grid)
	for i := 1; i <= steps; i++ {
		s.voice.Tune(from + (to-from)*float64(i)/float64(steps))
		s.voice.Render(out[:Grid], nil)
		out = out[Grid:]
	}
	s.voice.Tune(to)
	return out
}

// bent renders a note that is bent half a second after its stroke.
func (s *stage) bent(spec Spec, cents, seconds, length float64) []float32 {
	s.voice.Reset()
	s.voice.Strike(s.maker.Design(spec), 127, 7)
	out := make([]float32, int(length*s.rate))
	half := int(s.rate/2) / Grid * Grid
	s.voice.Render(out[:half], nil)
	s.voice.Render(s.bend(out[half:], cents, seconds), nil)
	return out
}

func TestBendsDoNotClick(t *testing.T) {
	const bound = -100.0 // dB
	cases := []struct {
		key            int
		cents, seconds float64
		spec           func(float64) Spec
	}{
		{28, 200, 0.1, dark}, {28, -200, 0.1, dark}, {40, 200, 0.1, dark}, {64, 200, 0.1, dark}, {76, -200, 0.1, dark},
		{28, 200, 0, dark}, {52, -1200, 0, dark}, {28, 1200, 0, dark},
		{28, 4800, 0, pure}, {28, 4800, 0.3, pure}, {28, -4800, 0, pure}, {40, 4300, 0.1, pure}, {60, 2400, 0, pure},
		{76, 1200, 0.1, pure}, {88, 200, 0, pure}, {88, -4800, 0.2, pure}, {100, 200, 0.1, pure}, {100, -4800, 0, pure},
	}
	worst := math.Inf(-1)
	for _, rate := range rates {
		s := newStage(rate)
		for _, c := range cases {
			out := s.bent(c.spec(hz(c.key)), c.cents, c.seconds, 2.5)
			// a slam takes as long as its slew
			click, err := measure.Click(out, rate, 0.5, 0.5+max(c.seconds, 0.5))
			if err != nil {
				t.Fatal(err)
			}
			if worst = max(worst, click); click > bound {
				t.Errorf("rate %g, key %d by %+.0f cents in %g s: click at %.1f dB", rate, c.key, c.cents, c.seconds, click)
			}
		}
	}
	t.Logf("worst click %.1f dB", worst)
}

// TestTheClickTestBites cuts a note's line by one sample, as a naive delay would.
func TestTheClickTestBites(t *testing.T) {
	s := newStage(48000)
	out := s.note(s.maker.Design(dark(hz(28))), 1.5)
	copy(out[30000:], out[30001:])
	if click, err := measure.Click(out, 48000, 0.5, 0.7); err != nil || click < -99 {
		t.Errorf("a sample's jump measures %.1f dB, %v", click, err)
	}
}

func TestHeldBendsAreInTune(t *testing.T) {
	const bound = 0.01 // cents
	for _, rate := range rates {
		s := newStage(rate)
		for _, key := range few([]int{60, 21, 33, 48, 75, 90, 108}) {
			for _, cents := range []float64{-4800, -2400, -1234.5, -200, -50, -3, 7, 63, 100, 777, 2400, 4800} {
				s.voice.Reset()
				s.voice.Strike(s.maker.Design(plain(hz(key), 5, 0.6)), 127, 7)
				s.more(0.1)
				s.voice.Tune(cents)
				s.more(1.6)
				target := s.voice.loops[0].hold(hz(key) * octaves(cents))
				if cents > 0 && target < 0.9*min(hz(key)*octaves(cents), topPitch*rate) {
					t.Fatalf("key %d by %+.0f cents is held at %.1f Hz", key, cents, target)
				}
				length := max(0.5, 12/target)
				m := partial(t, s.more(length), rate, target, target)
				if c := measure.Cents(m.Frequency, target); math.Abs(c) > bound {
					t.Errorf("rate %g, key %d by %+.1f cents: %+.5f cents out at %.2f Hz", rate, key, cents, c, target)
				}
				if e := m.T60/5 - 1; math.Abs(e) > 0.05 {
					t.Errorf("rate %g, key %d by %+.1f cents: T60 %.3f s, want 5 s", rate, key, cents, m.T60)
				}
			}
		}
	}
}

func TestBendComesHome(t *testing.T) {
	s := newStage(48000)
	for _, key := range []int{28, 60, 96, 118, 124} {
		s.voice.Reset()
		s.voice.Strike(s.maker.Design(plain(hz(key), 8, 0.6)), 127, 7)
		s.more(0.1)
		for _, cents := range []float64{-4800, 4800, -1200, 0} {
			s.voice.Tune(cents)
			s.more(0.4)
		}
		s.more(1)
		if s.voice.loops[0].motion != still {
			t.Errorf("key %d has not come to rest", key)
		}
		m := partial(t, s.more(0.5), 48000, hz(key), hz(key))
		if c := measure.Cents(m.Frequency, hz(key)); math.Abs(c) > pitchBound(key) {
			t.Errorf("key %d: %+.5f cents after the bends", key, c)
		}
	}
}

// TestLongVibratoKeepsTheDecay lets a vibrato swell and fade, as a hand does. One that
// starts at full speed warps the time within a trip for good, which moves level between
// neighbouring partials; that is not decay.
func TestLongVibratoKeepsTheDecay(t *testing.T) {
	const bound, seconds = 0.05, 4.0 // dB
	for _, rate := range rates {
		s := newStage(rate)
		for _, key := range []int{28, 52, 76, 100} {
			d := s.maker.Design(plain(hz(key), 20, 0.7))
			level := func(depth float64) map[int]float64 {
				s.voice.Reset()
				s.voice.Strike(d, 127, 7)
				s.more(0.2)
				frame := make([]float32, Grid)
				for i := range int(seconds * rate / Grid) {
					at := float64(i) * Grid / rate
					swell := math.Sin(math.Pi / 2 * min(1, 2*at, 2*(seconds-at)))
					s.voice.Tune(depth * swell * swell * math.Sin(2*math.Pi*5.5*at))
					s.voice.Render(frame, nil)
				}
				s.voice.Tune(0)
				s.more(0.5)
				after := s.more(0.5)
				levels := map[int]float64{}
				for _, n := range []int{1, int(3000 / hz(key))} {
					if n > 0 {
						levels[n] = partial(t, after, rate, float64(n)*hz(key), hz(key)).Level
					}
				}
				return levels
			}
			plainLevels := level(0)
			for n, with := range level(50) {
				if e := with - plainLevels[n]; math.Abs(e) > bound {
					t.Errorf("rate %g, key %d, partial %d: %+.4f dB by %g s of vibrato", rate, key, n, e, seconds)
				}
			}
		}
	}
}

// TestOddBends bends, mutes and touches at once, over every regime of the read, and looks for
// sense alone: finite, bounded, and silent in the end.
func TestOddBends(t *testing.T) {
	for _, rate := range []float64{8000, 44100, 192000} {
		s := newStage(rate)
		for key := 0; key < 128; key += 9 * stride {
			spec := plain(hz(key), 0.5, 0.9)
			spec.Inharmonicity = 5e-4
			s.voice.Reset()
			s.voice.Strike(s.maker.Design(spec), 127, 3)
			for i := range 60 {
				switch i % 6 {
				case 0:
					s.voice.Tune(float64((i*7919)%9600) - 4800)
				case 1:
					s.voice.Mute(float64(i%3) / 2)
				case 2:
					s.voice.Touch(2+i%7, float64(i%2))
				case 3:
					s.voice.Darken(float64(i%3) / 2)
				case 4:
					s.voice.Strike(s.voice.design, 90, uint64(i))
				case 5:
					s.voice.Damp(float64(i % 3))
				}
				for _, y := range s.more(0.011 + 0.001*float64(i%5)) {
					if a := math.Abs(float64(y)); !(a < 4) {
						t.Fatalf("rate %g, key %d, step %d: %g", rate, key, i, y)
					}
				}
			}
		}
	}
}

func ExampleVoice_Tune() {
	m := NewMaker(48000)
	v := m.NewVoice(1.5)
	d := m.Design(Spec{Frequency: 220, Decay: 4, Brightness: 0.5, Excitation: Excitation{Kind: Pluck, Position: 0.13, Hardness: 0.5}})
	v.Strike(d, 100, 1)
	out := make([]float32, 48000)
	v.Render(out[:24000], nil)
	v.Tune(200) // a whole tone up, gliding
	v.Render(out[24000:], nil)
	pitch, err := measure.Partial(out[36000:], 48000, 220*math.Exp2(2.0/12), 220)
	fmt.Printf("%.3f Hz %v\n", pitch.Frequency, err)
	// Output: 246.942 Hz <nil>
}

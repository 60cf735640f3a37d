package voice

import (
	"math"
	"math/rand/v2"
	"testing"

	"tautwire/voice/measure"
)

// everything is a string with all that a string can have.
func everything(f0 float64) Spec {
	s := plain(f0, 3, 0.6)
	s.Inharmonicity, s.Tension = 2e-4, 20
	s.SecondMix, s.SecondCents, s.SecondDecay = 0.3, 1.5, 2
	s.Strings, s.CourseCents = 2, 6
	return s
}

// act does something to a sounding voice.
func act(v *Voice, r *rand.Rand) {
	switch r.IntN(8) {
	case 0:
		v.Strike(v.design, 1+126*r.Float64(), r.Uint64())
	case 1:
		v.Tune(400*r.Float64() - 200)
	case 2:
		v.Tune(9600*r.Float64() - 4800)
	case 3:
		v.Damp(2 * r.Float64())
	case 4:
		v.Mute(r.Float64())
	case 5:
		v.Touch(2+r.IntN(7), float64(r.IntN(2)))
	case 6:
		v.Darken(r.Float64())
	case 7:
		v.Damp(0)
	}
}

// TestCutsAreNotHeard renders one performance in pieces of many sizes: the bits are the same.
func TestCutsAreNotHeard(t *testing.T) {
	const frames, acts = 9000, 24
	for _, kind := range []Kind{Noise, Pluck, Strike, Tone} {
		for _, key := range []int{30, 60, 100, 124} {
			s := newStage(44100)
			spec := everything(hz(key))
			spec.Excitation.Kind = kind
			d := s.maker.Design(spec)
			perform := func(size func() int) []float32 {
				r := rand.New(rand.NewPCG(uint64(key), 5))
				s.voice.Reset()
				s.voice.Strike(d, 100, 11)
				out, drive := make([]float32, frames), make([]float32, frames)
				for i := range drive {
					drive[i] = 1e-3 * float32(math.Sin(float64(i)*0.07))
				}
				for a := range acts {
					end := frames * (a + 1) / acts
					for at := frames * a / acts; at < end; {
						n := min(size(), end-at)
						s.voice.Render(out[at:at+n], drive[at:at+n])
						at += n
					}
					act(s.voice, r)
				}
				return out
			}
			want := perform(func() int { return frames })
			random := rand.New(rand.NewPCG(1, 1))
			for _, size := range []func() int{
				func() int { return 1 }, func() int { return 7 }, func() int { return 64 }, func() int { return 128 },
				func() int { return 1024 }, func() int { return 1 + random.IntN(200) },
			} {
				for i, y := range perform(size) {
					if y != want[i] {
						t.Fatalf("kind %d, key %d: frame %d is %g or %g, by how it is cut", kind, key, i, y, want[i])
					}
				}
			}
		}
	}
}

func TestRenderAllocatesNothing(t *testing.T) {
	s := newStage(48000)
	d := s.maker.Design(everything(hz(50)))
	r := rand.New(rand.NewPCG(4, 4))
	out := make([]float32, 64)
	s.voice.Strike(d, 100, 1)
	if n := testing.AllocsPerRun(300, func() {
		act(s.voice, r)
		s.voice.Render(out, nil)
	}); n != 0 {
		t.Errorf("%g allocations", n)
	}
}

func TestDamperMakesTheRelease(t *testing.T) {
	for _, rate := range rates {
		s := newStage(rate)
		for _, release := range []float64{0.08, 0.3, 2} {
			for _, key := range []int{33, 60, 88} {
				spec := plain(hz(key), 8, 0.8)
				spec.Release = release
				s.note(s.maker.Design(spec), 0.3)
				s.voice.Damp(1)
				s.more(0.05)
				m := partial(t, s.more(max(0.2, release)), rate, hz(key), hz(key))
				if e := m.T60/release - 1; math.Abs(e) > 0.02 {
					t.Errorf("rate %g, key %d: T60 %.4f s under the damper, want %g s", rate, key, m.T60, release)
				}
				if c := measure.Cents(m.Frequency, hz(key)); math.Abs(c) > 2 {
					t.Errorf("rate %g, key %d: %+.2f cents under the damper", rate, key, c)
				}
				s.voice.Damp(0)
				s.more(0.05)
				if m = partial(t, s.more(0.5), rate, hz(key), hz(key)); math.Abs(m.T60/8-1) > 0.02 {
					t.Errorf("rate %g, key %d: T60 %.3f s with the damper off again, want 8 s", rate, key, m.T60)
				}
			}
		}
	}
}

func TestHalfPedalIsBetween(t *testing.T) {
	s := newStage(48000)
	d := s.maker.Design(plain(hz(60), 8, 0.5))
	last := 9.0
	for _, amount := range []float64{0, 0.02, 0.1, 0.5, 1} {
		s.note(d, 0.2)
		s.voice.Damp(amount)
		s.more(0.05)
		m := partial(t, s.more(0.3), 48000, hz(60), hz(60))
		if m.T60 >= last {
			t.Errorf("T60 %.3f s at %g, %.3f s at less", m.T60, amount, last)
		}
		last = m.T60
	}
}

func TestPalmMutes(t *testing.T) {
	s := newStage(48000)
	d := s.maker.Design(plain(hz(45), 8, 0.8))
	open := centroid(s.note(d, 0.5)[4800:], 48000, hz(45))
	s.voice.Reset()
	s.voice.Fit(d)
	s.voice.Mute(1)
	s.voice.Strike(d, 127, 7)
	s.voice.Mute(1)
	note := s.more(0.5)
	m := partial(t, note[4800:], 48000, hz(45), hz(45))
	if math.Abs(m.T60/muted-1) > 0.05 {
		t.Errorf("T60 %.3f s under the palm, want %g s", m.T60, muted)
	}
	if c := measure.Cents(m.Frequency, hz(45)); math.Abs(c) > 2 {
		t.Errorf("%+.2f cents under the palm", c)
	}
	if dull := centroid(note[4800:], 48000, hz(45)); dull > 0.7*open {
		t.Errorf("centroid %.0f Hz under the palm, %.0f Hz open", dull, open)
	}
}

func TestTouchLeavesTheNodesPartials(t *testing.T) {
	s := newStage(48000)
	d := s.maker.Design(plain(hz(45), 8, 0.9))
	for _, node := range []int{2, 3, 4, 5} {
		before := s.note(d, 0.4)
		s.voice.Touch(node, 1)
		s.more(0.4)
		after := s.more(0.4)
		for n := 1; n <= 8; n++ {
			a, err := measure.Level(before, 48000, float64(n)*hz(45), hz(45))
			if err != nil {
				t.Fatal(err)
			}
			b, err := measure.Level(after, 48000, float64(n)*hz(45), hz(45))
			if err != nil {
				t.Fatal(err)
			}
			rests := n%node == 0
			if rests && a-b > 12 {
				t.Errorf("touched at 1/%d: partial %d lost %.1f dB", node, n, a-b)
			}
			if !rests && a-b < 30 {
				t.Errorf("touched at 1/%d: partial %d lost only %.1f dB", node, n, a-b)
			}
			if rests {
				m := partial(t, after, 48000, float64(n)*hz(45), hz(45))
				if c := measure.Cents(m.Frequency, float64(n)*hz(45)); math.Abs(c) > 0.5 {
					t.Errorf("touched at 1/%d: partial %d %+.2f cents out", node, n, c)
				}
			}
		}
	}
}

// TestTensionStartsSharpAndSettles follows Tolonen, Välimäki, Karjalainen, "Modeling of
// Tension Modulation Nonlinearity in Plucked Strings", IEEE Trans. Speech and Audio 8(3), 2000: the pitch
// falls with the energy, twice as fast as the amplitude.
func TestTensionStartsSharpAndSettles(t *testing.T) {
	s := newStage(48000)
	spec := plain(hz(45), 3, 0.6)
	spec.Tension = 30
	d := s.maker.Design(spec)
	pitch := func(velocity, at float64) float64 {
		s.voice.Reset()
		s.voice.Strike(d, velocity, 7)
		s.more(at)
		return measure.Cents(partial(t, s.more(0.08), 48000, hz(45), hz(45)).Frequency, hz(45))
	}
	if c := pitch(127, 0.05); c < 10 || c > 31 {
		t.Errorf("a hard stroke starts %.1f cents sharp; 30 are asked for", c)
	}
	if c := pitch(40, 0.05); c > 1.5 {
		t.Errorf("a soft stroke starts %.1f cents sharp", c)
	}
	if c := pitch(127, 2.5); math.Abs(c) > 0.1 {
		t.Errorf("%.3f cents sharp after 2.5 s", c)
	}
}

func TestRestrikeAdds(t *testing.T) {
	s := newStage(48000)
	d := s.maker.Design(plain(hz(45), 8, 0.3))
	first := measure.RMS(s.note(d, 1)[24000:])
	s.voice.Strike(d, 40, 9) // a soft stroke on a loud string
	if after := measure.RMS(s.more(0.5)); after < first-6 {
		t.Errorf("%.1f dB before a soft stroke, %.1f after: the vibration did not go on", first, after)
	}
}

func TestFadeEndsWithoutClick(t *testing.T) {
	s := newStage(48000)
	note := s.note(s.maker.Design(dark(hz(45))), 0.6)
	s.voice.Fade()
	tail := s.more(1)
	for i, y := range tail[101:] {
		if y != 0 {
			t.Fatalf("%g, %d frames after the fade", y, i)
		}
	}
	if !s.voice.Silent() {
		t.Error("not silent after the fade")
	}
	note = append(note, tail...)
	click, err := measure.Click(note[:48000], 48000, 0.6, 0.605)
	if err != nil {
		t.Fatal(err)
	}
	// over the note's 50 ms RMS before, for after it there is no note
	if click > -40 {
		t.Errorf("fade of 2 ms clicks at %.1f dB", click)
	}
}

func TestStringsComeToRest(t *testing.T) {
	for _, rate := range rates {
		s := newStage(rate)
		for _, key := range []int{0, 21, 60, 108, 127} {
			s.voice.Reset()
			s.voice.Strike(s.maker.Design(plain(hz(key), 0.3, 0.5)), 127, 7)
			ended := 0.0
			for !s.voice.Silent() {
				if ended += 0.05; ended > 3 {
					t.Fatalf("rate %g, key %d still sounds after %g s", rate, key, ended)
				}
				s.more(0.05)
			}
			if ended < 0.3 {
				t.Errorf("rate %g, key %d: silent after %g s", rate, key, ended)
			}
		}
	}
}

// TestDriveSounds: a string that is driven in tune answers, out of tune it does not.
func TestDriveSounds(t *testing.T) {
	s := newStage(48000)
	d := s.maker.Design(plain(hz(57), 5, 0.5))
	answer := func(f float64) float64 {
		s.voice.Reset()
		s.voice.Fit(d)
		drive, out := make([]float32, 48000), make([]float32, 48000)
		for i := range drive {
			drive[i] = 1e-3 * float32(math.Sin(2*math.Pi*f*float64(i)/48000))
		}
		s.voice.Render(out, drive)
		return measure.RMS(out[24000:])
	}
	if in, out := answer(hz(57)), answer(hz(57)*octaves(300)); in < out+30 {
		t.Errorf("driven in tune %.1f dB, 3 semitones off %.1f dB", in, out)
	}
}

package voice

import (
	"math"
	"testing"

	"tautwire/voice/measure"
)

// kinds are all excitations, with something to play.
func kinds() map[string]Excitation {
	click := make([]float32, 400)
	for i := range click {
		click[i] = float32(math.Exp(-float64(i)/60) * math.Sin(float64(i)*0.4))
	}
	all := map[string]Excitation{
		"noise":  {Kind: Noise, Hardness: 0.9, Touch: 0.4},
		"burst":  {Kind: Noise, Hardness: 0.9, Length: 0.03},
		"tone":   {Kind: Tone, Wave: Saw, Ratio: 3, Hardness: 0.9},
		"pluck":  {Kind: Pluck, Hardness: 0.7, Touch: 0.4},
		"strike": {Kind: Strike, Hardness: 0.8, Touch: 0.4},
		"sample": {Kind: Sample, Sample: click, SampleRate: 44100, Hardness: 1},
	}
	if testing.Short() {
		for _, name := range []string{"burst", "tone", "strike", "sample"} {
			delete(all, name)
		}
	}
	return all
}

func TestPositionNulls(t *testing.T) {
	const bound = 30.0 // dB
	for _, rate := range rates {
		s := newStage(rate)
		for name, x := range kinds() {
			for n := 2; n <= 7; n++ {
				x.Position = 1 / float64(n)
				spec := plain(hz(45), 8, 0.9)
				spec.Excitation = x
				d := s.maker.Design(spec)
				var power [3]float64 // of the partial and its neighbours, over strokes
				for seed := range uint64(6) {
					s.voice.Reset()
					s.voice.Strike(d, 127, seed)
					note := s.more(1.2)[int(0.3*rate):]
					for i := range power {
						level, err := measure.Level(note, rate, float64(n-1+i)*hz(45), hz(45))
						if err != nil {
							t.Fatal(err)
						}
						power[i] += math.Pow(10, level/10)
					}
				}
				depth := 5*math.Log10(power[0]*power[2]) - 10*math.Log10(power[1])
				if depth < bound {
					t.Errorf("rate %g, %s at 1/%d: partial %d is only %.1f dB down", rate, name, n, n, depth)
				}
			}
		}
	}
}

// TestPlanesDoNotShareNoise: with one noise in both, a string struck at a node and split
// in halves would lose partials to cancellation that the position does not account for.
func TestPlanesDoNotShareNoise(t *testing.T) {
	s := newStage(48000)
	spec := plain(hz(45), 4, 0.8)
	spec.SecondMix = 0.5
	spec.Excitation = Excitation{Kind: Noise, Hardness: 1}
	s.note(s.maker.Design(spec), 0.1)
	v := s.voice
	same := 0
	for i := range 500 {
		if lately(&v.loops[0], i) == lately(&v.loops[1], i) {
			same++
		}
	}
	if same > 50 {
		t.Errorf("%d of 500 samples are the same in both planes", same)
	}
}

func TestLevelIsEven(t *testing.T) {
	const bound = 3.0 // dB
	for _, rate := range rates {
		s := newStage(rate)
		for name, x := range kinds() {
			for _, velocity := range []float64{40, 127} {
				x.Position = 0.13
				low, high := math.Inf(1), math.Inf(-1)
				for key := 28; key <= 100; key += 3 * stride {
					spec := plain(hz(key), 4, 0.5)
					spec.Excitation = x
					d := s.maker.Design(spec)
					for seed := range uint64(2) {
						s.voice.Reset()
						s.voice.Strike(d, velocity, seed)
						peak := measure.Peak(s.more(0.3))
						low, high = min(low, peak), max(high, peak)
					}
				}
				if high-low > bound {
					t.Errorf("rate %g, %s, velocity %g: peaks from %.1f to %.1f dB", rate, name, velocity, low, high)
				}
			}
		}
	}
}

func TestNoDC(t *testing.T) {
	const bound = -80.0 // dBFS
	for _, rate := range rates {
		s := newStage(rate)
		for name, x := range kinds() {
			for _, position := range []float64{0, 0.13, 0.5} {
				for _, key := range []int{21, 60, 100} {
					x.Position = position
					spec := plain(hz(key), 30, 0.1)
					spec.Excitation = x
					note := s.note(s.maker.Design(spec), 2)
					if mean := 20 * math.Log10(math.Abs(wholeMean(note))); mean > bound {
						t.Errorf("rate %g, %s at %g, key %d: mean %.1f dBFS from the stroke on", rate, name, position, key, mean)
					}
					if mean := 20 * math.Log10(math.Abs(windowedMean(note[len(note)/2:]))); mean > bound {
						t.Errorf("rate %g, %s at %g, key %d: mean %.1f dBFS", rate, name, position, key, mean)
					}
				}
			}
		}
	}
}

// wholeMean is a note's mean from the stroke on, fading over its second half so that the
// cut at its end does not count.
func wholeMean(x []float32) float64 {
	sum := 0.0
	for i, y := range x {
		w := 1.0
		if at := 2*float64(i)/float64(len(x)) - 1; at > 0 {
			w = 0.5 + 0.5*math.Cos(math.Pi*at)
		}
		sum += w * float64(y)
	}
	return sum / float64(len(x))
}

// windowedMean is a signal's mean under a Hann window, so that a period that is
// not whole at the end does not count.
func windowedMean(x []float32) float64 {
	sum := 0.0
	for i, y := range x {
		s := math.Sin(math.Pi * (float64(i) + 0.5) / float64(len(x)))
		sum += 2 * s * s * float64(y)
	}
	return sum / float64(len(x))
}

// TestRatesSoundAlike compares the partials of one stroke at 44.1 and at 96 kHz.
func TestRatesSoundAlike(t *testing.T) {
	const bound = 1.5 // dB
	low, high := newStage(44100), newStage(96000)
	for name, x := range kinds() {
		for _, key := range few([]int{57, 33, 81, 100}) {
			for _, velocity := range []float64{50, 127} {
				x.Position = 0.11
				f0 := hz(key)
				spec := plain(f0, 6, 0.8)
				spec.Excitation = x
				level := func(s *stage) []float64 {
					s.voice.Reset()
					s.voice.Strike(s.maker.Design(spec), velocity, 7)
					s.more(0.1)
					note := s.more(max(0.4, 20/f0))
					var out []float64
					for n := 1; float64(n)*f0 < 10000; n++ {
						l, err := measure.Level(note, s.rate, float64(n)*f0, f0)
						if err != nil {
							t.Fatal(err)
						}
						out = append(out, l)
					}
					return out
				}
				a, b := level(low), level(high)
				loudest := math.Inf(-1)
				for _, l := range a {
					loudest = max(loudest, l)
				}
				for i := range a {
					if math.Abs(math.Sin(math.Pi*x.Position*float64(i+1))) < 0.15 {
						continue // a null is no level
					}
					if a[i] > loudest-50 && math.Abs(a[i]-b[i]) > bound {
						t.Errorf("%s, key %d, velocity %g: partial %d has %.1f dB at 44.1 kHz, %.1f at 96", name, key, velocity, i+1, a[i], b[i])
					}
				}
			}
		}
	}
}

// TestVelocityCurve: General MIDI 2 (RP-024) has 40 log10(v/127) dB.
func TestVelocityCurve(t *testing.T) {
	s := newStage(48000)
	for name, x := range kinds() {
		x.Position = 0.13
		x.Touch = 0
		spec := plain(hz(52), 4, 0.5)
		spec.Excitation = x
		d := s.maker.Design(spec)
		full := measure.Peak(s.note(d, 0.2))
		for _, v := range []float64{1, 20, 64, 100} {
			s.voice.Reset()
			s.voice.Strike(d, v, 7)
			got := measure.Peak(s.more(0.2)) - full
			if want := 40 * math.Log10(v/127); math.Abs(got-want) > 0.2 {
				t.Errorf("%s, velocity %g: %.2f dB below the hardest, want %.2f", name, v, got, want)
			}
		}
	}
}

// centroid is the mean frequency of a note, weighted by power, in Hz.
func centroid(note []float32, rate, f0 float64) float64 {
	var sum, all float64
	for n := 1; float64(n)*f0 < 12000; n++ {
		l, err := measure.Level(note, rate, float64(n)*f0, f0)
		if err != nil {
			panic(err)
		}
		p := math.Pow(10, l/10)
		sum += p * float64(n) * f0
		all += p
	}
	return sum / all
}

func TestTouchAndHardnessBrighten(t *testing.T) {
	s := newStage(48000)
	bright := func(x Excitation, velocity float64) float64 {
		x.Position = 0.13
		spec := plain(hz(45), 6, 0.9)
		spec.Excitation = x
		s.voice.Reset()
		s.voice.Strike(s.maker.Design(spec), velocity, 7)
		return centroid(s.more(0.5), 48000, hz(45))
	}
	for name, x := range kinds() {
		x.Touch = 1
		if soft, hard := bright(x, 30), bright(x, 127); hard < 1.05*soft {
			t.Errorf("%s at full touch: centroid %.0f Hz soft, %.0f Hz hard", name, soft, hard)
		}
		x.Touch = 0
		if soft, hard := bright(x, 30), bright(x, 127); math.Abs(hard/soft-1) > 0.01 {
			t.Errorf("%s without touch: centroid %.0f Hz soft, %.0f Hz hard", name, soft, hard)
		}
		last := 0.0
		for _, h := range []float64{0, 0.3, 0.6, 1} {
			x.Hardness = h
			c := bright(x, 127)
			if c < last*1.005 {
				t.Errorf("%s: centroid %.0f Hz at hardness %g, %.0f Hz softer", name, c, h, last)
			}
			last = c
		}
	}
}

func TestStrokesAreNewYetTheSame(t *testing.T) {
	s := newStage(48000)
	spec := plain(hz(60), 2, 0.5)
	spec.Excitation = Excitation{Kind: Noise, Hardness: 1, Position: 0.13}
	d := s.maker.Design(spec)
	take := func(seed uint64) []float32 {
		s.voice.Reset()
		s.voice.Strike(d, 100, seed)
		return s.more(0.1)
	}
	a, b, again := take(1), take(2), take(1)
	different := false
	for i := range a {
		if a[i] != again[i] {
			t.Fatalf("frame %d: one seed gave %g and %g", i, a[i], again[i])
		}
		different = different || a[i] != b[i]
	}
	if !different {
		t.Error("two seeds gave the same noise")
	}
}

func TestCyclesAreBandLimited(t *testing.T) {
	for _, w := range []Wave{Triangle, Saw} {
		c := new(cycles).of(w, 6000)
		// three partials at most: fitted by a sum of sines, nothing is left
		for i := range c {
			phase := 2 * math.Pi * float64(i) / float64(len(c)-1)
			var want float64
			switch w {
			case Triangle:
				want = 8 / (math.Pi * math.Pi) * (math.Sin(phase) - math.Sin(3*phase)/9)
			case Saw:
				want = 2 / math.Pi * (math.Sin(phase) + math.Sin(2*phase)/2 + math.Sin(3*phase)/3)
			}
			if math.Abs(float64(c[i])-want) > 1e-6 {
				t.Fatalf("wave %d at %d: %g, want %g", w, i, c[i], want)
			}
		}
	}
}

// lately is what a loop sounded some frames ago.
func lately(l *loop, frames int) float32 {
	at := l.bank.At[l.lane] - 1 - int64(frames)
	if at < l.bank.Floor[l.lane] {
		at += l.bank.Ring[l.lane]
	}
	return l.pool.bench.Line[at]
}

package voice

import (
	"encoding/csv"
	"math"
	"math/rand/v2"
	"os"
	"strconv"
	"testing"

	"tautwire/voice/measure"
)

// The bounds of this file are on rendered notes, measured by a matrix pencil (see
// measure.Partial) whose own error is below 0.0005 cent.

// pitchBound is how far a key may be out of tune, in cents. 0.006 is the MIDI
// Tuning Standard's own step: 100/16384.
func pitchBound(key int) float64 {
	if key < 21 || key > 108 {
		return 0.1
	}
	return 0.006
}

func TestEveryThirdKeyInTuneAndTime(t *testing.T) {
	const decay = 3.0
	for _, rate := range rates {
		s := newStage(rate)
		worst, slack := 0.0, 0.0
		for key := 0; key <= 127; key += 3 * stride {
			note := s.note(s.maker.Design(plain(hz(key), decay, 0.6)), 2)
			first := partial(t, note[:len(note)/4], rate, hz(key), hz(key))
			last := partial(t, note[len(note)*3/4:], rate, hz(key), hz(key))
			for _, m := range []measure.Mode{first, last} {
				e := math.Abs(measure.Cents(m.Frequency, hz(key)))
				if e > pitchBound(key) {
					t.Errorf("rate %g, key %d: %+.5f cents", rate, key, measure.Cents(m.Frequency, hz(key)))
				}
				if key >= 21 && key <= 108 {
					worst = max(worst, e)
				}
			}
			whole := partial(t, note, rate, hz(key), hz(key))
			if key >= 21 && key <= 108 {
				e := math.Abs(whole.T60/decay - 1)
				if slack = max(slack, e); e > 0.01 {
					t.Errorf("rate %g, key %d: T60 %.4f s, want %.1f s", rate, key, whole.T60, decay)
				}
			}
		}
		t.Logf("rate %g: keys 21 to 108 within %.5f cent, T60 within %.3f %%", rate, worst, 100*slack)
	}
}

func TestShortAndLongDecays(t *testing.T) {
	for _, rate := range rates {
		s := newStage(rate)
		for _, want := range []struct{ decay, bound float64 }{{0.3, 0.01}, {30, 0.01}, {60, 0.05}, {120, 0.05}} {
			for _, key := range []int{21, 45, 69, 90, 108} {
				note := s.note(s.maker.Design(plain(hz(key), want.decay, 0.7)), 2)
				if want.decay < 1 {
					note = note[:int(0.4*rate)]
				}
				m := partial(t, note, rate, hz(key), hz(key))
				if e := m.T60/want.decay - 1; math.Abs(e) > want.bound {
					t.Errorf("rate %g, key %d: T60 %.3f s, want %g s", rate, key, m.T60, want.decay)
				}
				if c := measure.Cents(m.Frequency, hz(key)); math.Abs(c) > pitchBound(key) {
					t.Errorf("rate %g, key %d, decay %g: %+.5f cents", rate, key, want.decay, c)
				}
			}
		}
	}
}

// TestRefinedPatchesKeepPitchAndDecay draws patches at random, with courses and second
// planes, and holds every one of their strings to the bounds of a plain one.
func TestRefinedPatchesKeepPitchAndDecay(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 3))
	for _, rate := range rates {
		s := newStage(rate)
		for range max(1, 14/stride) {
			key := 21 + r.IntN(88)
			spec := refined(r, hz(key))
			for _, strand := range strands(spec) {
				one := strandOf(spec, strand)
				f0 := one.Frequency
				note := s.note(s.maker.Design(one), min(2, max(0.5, one.Decay)))
				m := partial(t, note, rate, f0, f0)
				if c := measure.Cents(m.Frequency, f0); math.Abs(c) > pitchBound(key) {
					t.Errorf("rate %g, key %d, %+v: %+.5f cents", rate, key, one, c)
				}
				bound := 0.01
				if one.Decay > 30 {
					bound = 0.05
				}
				if e := m.T60/one.Decay - 1; math.Abs(e) > bound {
					t.Errorf("rate %g, key %d, %+v: T60 %.4f s, want %.4f s", rate, key, one, m.T60, one.Decay)
				}
			}
		}
	}
}

// TestSplitStringHasBothModes measures the two planes of one string as it sounds.
func TestSplitStringHasBothModes(t *testing.T) {
	for _, rate := range rates {
		s := newStage(rate)
		spec := plain(hz(57), 2, 0.6)
		spec.SecondMix, spec.SecondCents, spec.SecondDecay = 0.4, 4, 2.5
		note := s.note(s.maker.Design(spec), 6)
		modes, err := measure.Modes(note, rate, hz(57), 20, 2)
		if err != nil {
			t.Fatal(err)
		}
		for i, want := range []measure.Mode{{Frequency: hz(57), T60: 2}, {Frequency: hz(57) * octaves(4), T60: 5}} {
			if c := measure.Cents(modes[i].Frequency, want.Frequency); math.Abs(c) > 0.006 {
				t.Errorf("rate %g, mode %d: %+.4f cents", rate, i, c)
			}
			if e := modes[i].T60/want.T60 - 1; math.Abs(e) > 0.01 {
				t.Errorf("rate %g, mode %d: T60 %.4f s, want %g s", rate, i, modes[i].T60, want.T60)
			}
		}
	}
}

func TestStiffStringsKeepTheirPartials(t *testing.T) {
	const fundamental = 0.05 // cents
	for _, rate := range rates {
		s := newStage(rate)
		for _, b := range []float64{3e-5, 3e-4, 1e-3} {
			worst := [2]float64{}
			for key := 21; key <= 108; key += 9 * stride {
				f1 := hz(key)
				spec := plain(f1, 4, 0.8)
				spec.Inharmonicity = b
				d := s.maker.Design(spec)
				note := s.note(d, 1.5)
				bound, part := 3.0, 1
				if key >= 33 && key <= 84 {
					bound, part = 1, 0
				}
				for n := 1; n <= 16; n++ {
					f := StiffPartial(n, f1, b)
					if f > 10000 {
						break
					}
					if 60/f1/d.modes[0].law.t60(f, f1) > 2 {
						continue
					}
					m := partial(t, note, rate, f, f1)
					c := math.Abs(measure.Cents(m.Frequency, f))
					if n == 1 && c > fundamental {
						t.Errorf("rate %g, B %g, key %d: fundamental %.4f cents out", rate, b, key, c)
					}
					if c > bound {
						t.Errorf("rate %g, B %g, key %d: partial %d %.2f cents out", rate, b, key, n, c)
					}
					worst[part] = max(worst[part], c)
				}
			}
			t.Logf("rate %g, B %g: partials within %.2f cents, %.2f outside keys 33 to 84", rate, b, worst[0], worst[1])
		}
	}
}

// published reads a table of published values, whose head names its source.
func published(t *testing.T, name string, want int) [][]string {
	t.Helper()
	file, err := os.Open("../testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	defer file.Close()
	read := csv.NewReader(file)
	read.Comment = '#'
	rows, err := read.ReadAll()
	if err != nil || len(rows) != want+1 {
		t.Fatalf("%s: %d rows, %v; want a head and %d", name, len(rows), err, want)
	}
	return rows[1:]
}

// TestMeasuredPianoStrings renders strings of the stiffness that was measured on two piano
// strings and compares their partials with the measured ones. The source is in
// the head of the table; its rows are themselves up to 0.42 cent off the law.
func TestMeasuredPianoStrings(t *testing.T) {
	for _, row := range published(t, "piano-strings.csv", 2) {
		var f [9]float64 // partials 1 to 8, then B
		for i := range f {
			var err error
			if f[i], err = strconv.ParseFloat(row[1+i], 64); err != nil {
				t.Fatal(err)
			}
		}
		b := f[8]
		for _, rate := range rates {
			s := newStage(rate)
			spec := plain(f[0], 8, 0.8)
			spec.Inharmonicity = b
			note := s.note(s.maker.Design(spec), 1.5)
			for n := 1; n <= 8; n++ {
				m := partial(t, note, rate, f[n-1], f[0])
				if c := measure.Cents(m.Frequency, f[n-1]); math.Abs(c) > 1 {
					t.Errorf("%s at rate %g: partial %d is %+.2f cents from the measured %g Hz", row[0], rate, n, c, f[n-1])
				}
			}
		}
	}
}

// TestTuningTable checks hz and the rendered pitch of the table's keys against the MIDI
// Tuning Standard's values.
func TestTuningTable(t *testing.T) {
	for _, row := range published(t, "midi-tuning.csv", 6) {
		key, _ := strconv.Atoi(row[0])
		want, err := strconv.ParseFloat(row[2], 64)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(hz(key)-want) > 0.5e-4+1e-9 {
			t.Errorf("key %d: %.5f Hz, the standard says %.4f", key, hz(key), want)
		}
		s := newStage(44100)
		m := partial(t, s.note(s.maker.Design(plain(hz(key), 3, 0.6)), 2), 44100, want, want)
		if c := measure.Cents(m.Frequency, hz(key)); math.Abs(c) > pitchBound(key) {
			t.Errorf("key %d: %+.5f cents", key, c)
		}
	}
}

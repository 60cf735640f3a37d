package voice

import (
	"math"
	"sync"
	"testing"

	"tautwire/voice/measure"
)

// TestMakerIsShared makes and plays strings from several goroutines at once.
func TestMakerIsShared(t *testing.T) {
	m := NewMaker(48000)
	shared := m.Design(plain(hz(60), 2, 0.5))
	var all sync.WaitGroup
	for i := range 4 {
		all.Go(func() {
			own := m.Design(everything(hz(40 + 7*i)))
			v := m.NewVoice(8)
			out := make([]float32, 4800)
			for _, d := range []*Design{shared, own} {
				v.Reset()
				v.Strike(d, 100, uint64(i))
				v.Render(out, nil)
				if measure.Peak(out) < -40 {
					t.Errorf("goroutine %d: peak %.1f dB", i, measure.Peak(out))
				}
			}
		})
	}
	all.Wait()
}

// TestCornersOfTheSpec compiles and plays every extreme of a patch's ranges.
func TestCornersOfTheSpec(t *testing.T) {
	for _, rate := range []float64{8000, 48000, 192000} {
		s := newStage(rate)
		for i := 0; i < 256; i += 2*stride - 1 {
			bit := func(n int, a, b float64) float64 {
				if i>>n&1 == 0 {
					return a
				}
				return b
			}
			spec := Spec{
				Frequency: hz([]int{0, 60, 127}[i%3]), Decay: bit(0, 0.05, 120), Brightness: bit(1, 0, 1), Release: bit(2, 0.01, 30),
				Inharmonicity: bit(3, 0, 2e-3), Tension: bit(4, 0, 100),
				SecondMix: bit(5, 0, 1), SecondCents: bit(6, -20, 20), SecondDecay: bit(7, 0.1, 10),
				Strings: 1 + i%3, CourseCents: 50,
				Excitation: Excitation{Kind: Kind(i % 5), Position: bit(1, 0, 0.5), Hardness: bit(2, 0, 1), Length: bit(3, 0, 0.5),
					Touch: bit(4, 0, 1), Wave: Wave(i % 3), Ratio: bit(5, 0.25, 32)},
			}
			note := s.note(s.maker.Design(spec), 0.05)
			for _, y := range note {
				if a := math.Abs(float64(y)); !(a < 2) { // full level is 0.25
					t.Fatalf("rate %g, %+v: %g", rate, spec, y)
				}
			}
		}
	}
}

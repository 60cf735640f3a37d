package measure

import (
	"math"
	"testing"
)

func near(t *testing.T, what string, got, want, within float64) {
	t.Helper()
	if !(math.Abs(got-want) <= within) && got != want {
		t.Errorf("%s: got %g, want %g within %g", what, got, want, within)
	}
}

func sine(rate, hz, amplitude, seconds float64) []float64 {
	x := make([]float64, int(math.Round(seconds*rate)))
	add(x, rate, hz, math.Inf(1), amplitude, -math.Pi/2)
	return x
}

func TestLevels(t *testing.T) {
	tone := sine(48000, 1000, 0.5, 1)
	near(t, "peak of a sine", Peak(tone), -6.0206, 1e-4)
	near(t, "RMS of a sine", RMS(tone), -9.0309, 1e-4)
	near(t, "peak of its lower half", Peak([]float32{0.1, -0.5}), -6.0206, 1e-4)
	near(t, "RMS of a square wave", RMS([]float32{1, -1, 1, -1}), 0, 1e-12)
	for i := range tone {
		tone[i] -= 1e-4
	}
	near(t, "mean of a sine and -80 dB", Mean(tone), -80, 1e-3)
	for _, level := range []float64{Peak([]float32{}), RMS([]float32{0}), Mean([]float32{1, -1})} {
		near(t, "silence", level, math.Inf(-1), 0)
	}
}

func TestSplit(t *testing.T) {
	s := Split([]float32{1, 2, 3, 4, 5}, 2)
	if len(s) != 2 || len(s[0]) != 2 || len(s[1]) != 2 || s[0][1] != 3 || s[1][1] != 4 {
		t.Errorf("five samples of two channels came apart as %v", s)
	}
}

func TestCents(t *testing.T) {
	near(t, "an octave up", Cents(880, 440), 1200, 1e-12)
	near(t, "an octave down", Cents(220, 440), -1200, 1e-12)
	near(t, "a pure fifth", Cents(3, 2), 701.955, 1e-3)
	near(t, "there and back", Cents(Shift(440, 12.34), 440), 12.34, 1e-9)
}

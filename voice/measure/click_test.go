package measure

import (
	"math"
	"testing"
)

// A step of height d has the energy d^2 cot(w/2)/(2 pi) above the frequency w (rad
// per frame), by Parseval's theorem over 1/|1 - exp(-jw)|^2. It must be
// found wherever it stands, and only there.
func TestClickFindsStep(t *testing.T) {
	for _, rate := range []float64{44100, 48000, 96000} {
		for _, height := range []float64{1e-1, 1e-5} {
			const amplitude = 0.3
			energy := height * height / math.Tan(math.Pi*clickCutoff/rate) / (2 * math.Pi)
			want := 10 * math.Log10(energy/(0.010*rate)/(amplitude*amplitude/2))
			for _, at := range []float64{0.51, 0.78} {
				got, err := Click(stepped(rate, amplitude, height, at), rate, 0.5, 0.6)
				if err != nil {
					t.Fatal(err)
				}
				within := 0.08
				if height > 0.01 {
					within = 1.2 // the note's own 50 ms hold the step too
				}
				near(t, "a step in the motion", got, want, within)
			}
		}
		if got, err := Click(stepped(rate, 0.3, 0.1, 0.9), rate, 0.5, 0.6); err != nil || got > -150 {
			t.Errorf("a step 0.3 s after the motion counts as %g dB (%v)", got, err)
		}
	}
}

func stepped(rate, amplitude, height, at float64) []float64 {
	x := sine(rate, 100, amplitude, 1)
	for i := int(at * rate); i < len(x); i++ {
		x[i] += height
	}
	return x
}

// A tone that glides smoothly is no click, in float64 or float32.
func TestClickPassesGlide(t *testing.T) {
	const rate = 48000
	x := make([]float64, rate)
	var phase float64
	for i := range x {
		s := math.Min(1, math.Max(0, (float64(i)/rate-0.4)/0.1))
		phase += 2 * math.Pi * Shift(200, 200*s*s*s*(10-15*s+6*s*s)) / rate
		x[i] = 0.5 * math.Sin(phase)
	}
	smooth, err := Click(x, rate, 0.4, 0.5)
	if err != nil {
		t.Fatal(err)
	}
	rounded, err := Click(round(x), rate, 0.4, 0.5)
	if err != nil {
		t.Fatal(err)
	}
	if smooth > -170 || rounded > -140 {
		t.Errorf("a smooth glide has a click of %.0f dB, rounded to float32 %.0f dB", smooth, rounded)
	}
	t.Logf("smooth glide: %.0f dB, rounded to float32 %.0f dB", smooth, rounded)
}

// What passes and what does not: the cutoff stands at 5 kHz.
func TestClickCutoff(t *testing.T) {
	for _, rate := range []float64{44100, 48000, 96000} {
		for _, c := range []struct{ hz, want, within float64 }{{6000, -60, 0.03}, {5000, -66.02, 0.06}} {
			x := sine(rate, 100, 0.5, 1)
			add(x, rate, c.hz, math.Inf(1), 0.0005, 0)
			got, err := Click(x, rate, 0.4, 0.5)
			if err != nil {
				t.Fatal(err)
			}
			near(t, "a steady tone", got, c.want, c.within)
		}
		x := sine(rate, 100, 0.5, 1)
		add(x, rate, 4000, math.Inf(1), 0.0005, 0)
		if got, err := Click(x, rate, 0.4, 0.5); err != nil || got > -150 {
			t.Errorf("a tone at 4 kHz counts as %g dB at %g Hz (%v)", got, rate, err)
		}
	}
}

func TestClickRefuses(t *testing.T) {
	x := sine(48000, 100, 0.5, 1)
	for _, c := range []struct{ rate, from, to float64 }{{8000, 0.4, 0.5}, {48000, 0.5, 0.4}, {48000, 0, 0.1}, {48000, 0.5, 0.9}, {48000, 0.5, math.NaN()}} {
		if got, err := Click(x, c.rate, c.from, c.to); err == nil {
			t.Errorf("%+v: %g dB", c, got)
		}
	}
}

package measure

import (
	"math"
	"math/cmplx"
	"testing"
)

// A sine of 997 Hz and full scale in one channel is -3.01 LKFS: Recommendation
// ITU-R BS.1770-4, Annex 1.
func TestLoudnessOfFullScale(t *testing.T) {
	for _, rate := range []float64{32000, 44100, 48000, 88200, 96000, 192000} {
		tone := sine(rate, 997, 1, 3)
		one, err := Loudness(rate, tone, make([]float64, len(tone)))
		if err != nil {
			t.Fatal(err)
		}
		near(t, "one channel", one, -3.01, 0.01)
		both, err := Loudness(rate, tone, tone)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "both channels", both, 0, 0.01)
	}
}

// Test cases 1 to 5 of EBU Tech 3341, section 2.8 (from memory): stereo sines of
// 1000 Hz, seconds at a peak level in dBFS, each -23 LUFS but for the second.
func TestLoudnessGates(t *testing.T) {
	const rate = 48000
	type part struct{ seconds, level float64 }
	for i, c := range []struct {
		parts []part
		want  float64
	}{
		{[]part{{20, -23}}, -23},
		{[]part{{20, -33}}, -33},
		{[]part{{10, -36}, {60, -23}, {10, -36}}, -23},
		{[]part{{10, -72}, {10, -36}, {60, -23}, {10, -36}, {10, -72}}, -23},
		{[]part{{20, -26}, {20.1, -20}, {20, -26}}, -23},
	} {
		var x []float64
		for _, p := range c.parts {
			x = append(x, sine(rate, 1000, math.Pow(10, p.level/20), p.seconds)...)
		}
		got, err := Loudness(rate, x, x)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("case %d: %.3f LUFS", i+1, got)
		near(t, "EBU Tech 3341", got, c.want, 0.1)
	}
}

// K weighting at other rates is that of the tables at 48 kHz.
func TestKWeightingAtOtherRates(t *testing.T) {
	gain := func(rate, hz float64) float64 {
		z := cmplx.Rect(1, -2*math.Pi*hz/rate)
		g := complex(1, 0)
		head, low := kWeighting(rate)
		for _, q := range []biquad{head, low} {
			g *= (complex(q.b[0], 0) + z*(complex(q.b[1], 0)+z*complex(q.b[2], 0))) / (complex(q.a[0], 0) + z*(complex(q.a[1], 0)+z*complex(q.a[2], 0)))
		}
		return dB(cmplx.Abs(g))
	}
	for _, rate := range []float64{44100, 88200, 96000, 192000} {
		for _, hz := range []float64{10, 38, 100, 400, 997, 1700, 3000, 6000, 12000} {
			near(t, "K weighting", gain(rate, hz), gain(48000, hz), 0.04)
		}
	}
	near(t, "high shelf", gain(48000, 15000), 4, 0.1)
}

func TestLoudnessEnds(t *testing.T) {
	tone := sine(48000, 997, 1, 0.39)
	for _, x := range [][]float64{tone, make([]float64, 48000), {}} {
		got, err := Loudness(48000, x)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "too short or silent", got, math.Inf(-1), 0)
	}
	if _, err := Loudness[float64](48000); err == nil {
		t.Error("no channels have a loudness")
	}
	if _, err := Loudness(48000, tone, tone[1:]); err == nil {
		t.Error("channels of two lengths have a loudness")
	}
	if _, err := Loudness(0, tone); err == nil {
		t.Error("a signal without a rate has a loudness")
	}
}

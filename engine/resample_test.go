package engine

import (
	"math"
	"slices"
	"testing"
)

// ratePairs are rates that sounds have and that engines run at.
var ratePairs = []struct{ from, to int }{
	{44100, 48000}, {48000, 44100}, {44100, 96000}, {96000, 44100},
	{48000, 96000}, {96000, 48000}, {22050, 48000}, {192000, 48000}, {44101, 47999},
}

func sine(n int, frequency float64, rate int) []float32 {
	out := make([]float32, n)
	for i := range out {
		out[i] = float32(math.Sin(2 * math.Pi * frequency * float64(i) / float64(rate)))
	}
	return out
}

// rms is the root mean square of x without its ends, where the sound starts
// and stops.
func rms(x []float32) float64 {
	const end = 1000
	sum := 0.0
	for _, v := range x[end : len(x)-end] {
		sum += float64(v) * float64(v)
	}
	return math.Sqrt(sum / float64(len(x)-2*end))
}

func TestResampledSineIsTheSineAtTheOtherRate(t *testing.T) {
	parts := []float64{0.001, 0.01, 0.1, 0.2, 0.3, 0.4, 0.44, 0.45}
	if testing.Short() {
		parts = []float64{0.01, 0.3, 0.45}
	}
	for _, r := range ratePairs {
		worst, worstLevel := math.Inf(-1), 0.0
		for _, part := range parts {
			f := part * float64(min(r.from, r.to))
			got := resample(sine(r.from/4, f, r.from), r.from, r.to)
			want := sine(len(got), f, r.to)
			gain := rms(got) / rms(want)
			level := 20 * math.Log10(gain)
			if math.Abs(level) > math.Abs(worstLevel) {
				worstLevel = level
			}
			for i := range got {
				want[i] -= got[i] / float32(gain)
			}
			worst = max(worst, 20*math.Log10(rms(want)/math.Sqrt(0.5)))
		}
		t.Logf("%d to %d: level within %.5f dB, all else below %.1f dB", r.from, r.to, worstLevel, worst)
		if math.Abs(worstLevel) > 0.1 {
			t.Errorf("%d to %d: level of a sine changes by %.4f dB; want within 0.1 dB", r.from, r.to, worstLevel)
		}
		if worst > -90 {
			t.Errorf("%d to %d: beside the sine are %.1f dB; want below -90 dB", r.from, r.to, worst)
		}
	}
}

func TestResamplingDownKeepsAliasesOut(t *testing.T) {
	for _, r := range ratePairs {
		if r.from < r.to {
			continue
		}
		for _, part := range []float64{0.5, 0.51, 0.55, 0.7, 0.9, 1.3, 1.9} {
			f := part * float64(r.to)
			if f >= float64(r.from)/2 {
				continue
			}
			got := resample(sine(r.from/4, f, r.from), r.from, r.to)
			if level := 20 * math.Log10(rms(got)/math.Sqrt(0.5)); level > -90 {
				t.Errorf("%d to %d: %.0f Hz leaves %.1f dB; want below -90 dB", r.from, r.to, f, level)
			}
		}
	}
}

func TestResamplingKeepsDuration(t *testing.T) {
	for _, r := range ratePairs {
		for _, n := range []int{1, 2, 100, 12345} {
			got := len(resample(make([]float32, n), r.from, r.to))
			if want := int(math.Ceil(float64(n) * float64(r.to) / float64(r.from))); got != want {
				t.Errorf("%d frames at %d: %d frames at %d; want %d", n, r.from, got, r.to, want)
			}
		}
	}
	data := []float32{1, 2, 3}
	if got := resample(data, 48000, 48000); !slices.Equal(got, data) {
		t.Errorf("at its own rate: %v; want %v", got, data)
	}
	if got := resample(nil, 44100, 48000); len(got) != 0 {
		t.Errorf("nothing: %v; want nothing", got)
	}
}

// BenchmarkResample gives ns per frame that comes out.
func BenchmarkResample(b *testing.B) {
	data := sine(44100, 440, 44100)
	frames := 0
	for b.Loop() {
		frames += len(resample(data, 44100, 96000))
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(frames), "ns/frame")
}

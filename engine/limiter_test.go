package engine

import (
	"math"
	"math/rand/v2"
	"testing"
)

// limited passes mono through a new limiter, on both sides.
func limited(mono []float32) (out []float32, l *limiter) {
	l = newLimiter(testRate)
	out = make([]float32, 2*len(mono))
	for i, x := range mono {
		out[2*i], out[2*i+1] = x, -x
	}
	l.process(out)
	return out, l
}

// tone is a sine of a peak in dBFS.
func tone(db, frequency float64, frames int) []float32 {
	x := make([]float32, frames)
	for i := range x {
		x[i] = float32(amplitude(db) * math.Sin(2*math.Pi*frequency*float64(i)/testRate))
	}
	return x
}

func TestLimiterNeverPassesFullScale(t *testing.T) {
	random := rand.New(rand.NewPCG(1, 1))
	noise := make([]float32, testRate)
	for i := range noise {
		noise[i] = float32(random.NormFloat64())
	}
	impulses := make([]float32, testRate)
	for i := range impulses {
		if random.IntN(50) == 0 {
			impulses[i] = float32(math.Exp(random.Float64()*20 - 5))
		}
	}
	extremes := tone(0, 100, 4000)
	extremes[100], extremes[200], extremes[300] = math.MaxFloat32, -math.MaxFloat32, 1e30
	tests := map[string][]float32{
		"sine at 0 dBFS":    tone(0, 997, testRate),
		"sine at +40 dBFS":  tone(40, 997, testRate),
		"low sine at +6":    tone(6, 20, testRate),
		"full-scale noise":  noise,
		"impulses":          impulses,
		"largest of floats": extremes,
	}
	for name, x := range tests {
		out, l := limited(x)
		ceiling := amplitude(limiterCeiling)
		if p := peak(out); p > ceiling*1.0000002 {
			t.Errorf("%s: peak %.8f, want at most %.8f", name, p, ceiling)
		}
		if l.least == one {
			t.Errorf("%s: the limiter had nothing to do", name)
		}
	}
}

func TestLimiterIsTransparentBelowItsCeiling(t *testing.T) {
	x := tone(-1.0001, 997, testRate)
	out, l := limited(x)
	for i := range x {
		want := float32(0)
		if i >= l.look {
			want = x[i-l.look]
		}
		if out[2*i] != want || out[2*i+1] != -want {
			t.Fatalf("frame %d is %g, %g; want %g", i, out[2*i], out[2*i+1], want)
		}
	}
}

func TestLimiterReturnsToExactlyOne(t *testing.T) {
	x := append(tone(20, 997, 4800), tone(-6, 997, 3*testRate)...)
	out, l := limited(x)
	for i := len(x) - 100; i < len(x); i++ {
		if out[2*i] != x[i-l.look] {
			t.Fatalf("frame %d is %g, want %g: the gain has not come back", i, out[2*i], x[i-l.look])
		}
	}
}

// TestLimiterGainIsSmooth finds the gain from what a constant became, and bounds its corners. A gain
// that jumped at a peak of +12 dB would change by 0.78 in one frame; without the second average
// its slope would change by 0.02.
func TestLimiterGainIsSmooth(t *testing.T) {
	x := make([]float32, testRate)
	for i := range x {
		x[i] = 0.5
	}
	for i := 1000; i < 1200; i++ {
		x[i] = 4
	}
	out, l := limited(x)
	gain := func(i int) float64 { return float64(out[2*i]) / float64(x[i-l.look]) }
	worst := 0.0
	for i := l.look + 2; i < len(x); i++ {
		worst = max(worst, math.Abs(gain(i)-2*gain(i-1)+gain(i-2)))
	}
	t.Logf("sharpest corner of the gain: %.2g a frame", worst)
	if worst > 0.002 {
		t.Errorf("the slope of the gain changes by %g in a frame, want at most 0.002", worst)
	}
}

func TestLimiterSilencesWhatIsNoNumber(t *testing.T) {
	x := tone(-6, 997, 4800)
	x[100], x[200], x[300] = float32(math.NaN()), float32(math.Inf(1)), float32(math.Inf(-1))
	out, l := limited(x)
	if l.muted != 6 {
		t.Errorf("%d values counted, want 6", l.muted)
	}
	for i := l.look; i < len(x); i++ {
		want := x[i-l.look]
		if want-want != 0 {
			want = 0
		}
		if out[2*i] != want {
			t.Fatalf("frame %d is %g, want %g", i, out[2*i], want)
		}
	}
}

func TestLimiterLooksAhead(t *testing.T) {
	for _, rate := range []float64{8000, 44100, 48000, 96000, 192000} {
		l := newLimiter(rate)
		if ms := float64(l.look) / rate * 1000; ms < 1 || ms > 2 {
			t.Errorf("%g Hz: looks %.2f ms ahead, want 1 to 2", rate, ms)
		}
	}
}

// BenchmarkLimiter reports ns a frame of a busy limiter, beside the same frames copied.
func BenchmarkLimiter(b *testing.B) {
	mono := tone(6, 997, 4800)
	src, out := make([]float32, 2*len(mono)), make([]float32, 2*len(mono))
	for i, x := range mono {
		src[2*i], src[2*i+1] = x, x
	}
	b.Run("control", func(b *testing.B) {
		for b.Loop() {
			copy(out, src)
		}
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(mono)), "ns/frame")
	})
	b.Run("limiter", func(b *testing.B) {
		l := newLimiter(testRate)
		for b.Loop() {
			copy(out, src)
			l.process(out)
		}
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(mono)), "ns/frame")
	})
}

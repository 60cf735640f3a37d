package measure

import (
	"fmt"
	"math"
	"testing"
)

// note is a string of 20 partials, rounded to float32, whose decays follow the
// law of internal friction: T60 (1 + c)/(1 + c n^2) for partial n.
func note(rate, f0, t60, curve, seconds float64) []float32 {
	sum := make([]float64, int(seconds*rate))
	for n := 1.0; n <= 20 && n*f0 < 0.49*rate; n++ {
		decay := t60 * (1 + curve) / (1 + curve*n*n)
		add(sum, rate, n*f0, decay, 0.3/n, 1.1*n*n)
	}
	return round(sum)
}

func add(sum []float64, rate, hz, t60, amplitude, phase float64) {
	for i := range sum {
		t := float64(i) / rate
		_, turn := math.Modf(hz * t)
		sum[i] += amplitude * math.Exp(-math.Log(1000)*t/t60) * math.Cos(2*math.Pi*turn+phase)
	}
}

func round(x []float64) []float32 {
	y := make([]float32, len(x))
	for i, v := range x {
		y[i] = float32(v)
	}
	return y
}

func TestPartialFindsFundamental(t *testing.T) {
	var worstCent, worstT60, worstDB float64
	for _, rate := range []float64{44100, 48000, 96000} {
		for _, f0 := range []float64{8.1758, 27.5, 110.3, 440, 1318.51, 4186.009, 12543.85} {
			for _, t60 := range []float64{0.3, 1, 6, 30, 120} {
				for _, curve := range []float64{0, 0.02} {
					if rate == 96000 && curve == 0 {
						continue
					}
					seconds := math.Min(2, math.Max(t60, 4.1/f0))
					m, err := Partial(note(rate, f0, t60, curve, seconds), rate, f0*1.001, f0)
					if err != nil {
						t.Errorf("%g Hz, T60 %g s at %g Hz: %v", f0, t60, rate, err)
						continue
					}
					cent, part, dB := math.Abs(Cents(m.Frequency, f0)), math.Abs(m.T60/t60-1), math.Abs(m.Level-20*math.Log10(0.3))
					worstCent, worstT60, worstDB = math.Max(worstCent, cent), math.Max(worstT60, part), math.Max(worstDB, dB)
					if cent > 0.0005 || part > 0.0005 || dB > 0.001 {
						t.Errorf("%g Hz, T60 %g s, curve %g at %g Hz: off by %.2g cent, %.2g %% of T60, %.2g dB (residual %.0f dB, sigma %.2g)", f0, t60, curve, rate, cent, 100*part, dB, m.Residual, Cents(1+m.Sigma/f0, 1))
					}
				}
			}
		}
	}
	t.Logf("worst: %.2g cent, %.2g %% of T60, %.2g dB", worstCent, 100*worstT60, worstDB)
}

func TestPartialFindsUpperPartials(t *testing.T) {
	const rate, f0, t60, curve = 48000, 110.0, 4, 0.05
	x := note(rate, f0, t60, curve, 4)
	for n := 1.0; n <= 20; n++ {
		want := t60 * (1 + curve) / (1 + curve*n*n)
		m, err := Partial(x, rate, n*f0+2, f0)
		if err != nil {
			t.Fatal(err)
		}
		cent, part := math.Abs(Cents(m.Frequency, n*f0)), math.Abs(m.T60/want-1)
		if cent > 0.0005 || part > 0.0005 {
			t.Errorf("partial %g: off by %.2g cent, %.2g %% of T60 %.2g (residual %.0f dB)", n, cent, 100*part, want, m.Residual)
		}
	}
}

func TestPartialHalfSeconds(t *testing.T) {
	const rate = 48000
	for _, f0 := range []float64{27.5, 261.6, 4186} {
		x := note(rate, f0, 5, 0.01, 4)
		for from := 0; from < len(x); from += rate / 2 {
			t.Run(fmt.Sprintf("%g Hz from %d", f0, from), func(t *testing.T) {
				m, err := Partial(x[from:from+rate/2], rate, f0, f0)
				if err != nil {
					t.Fatal(err)
				}
				if c := math.Abs(Cents(m.Frequency, f0)); c > 0.0005 || math.Abs(m.T60/5-1) > 0.0005 {
					t.Errorf("off by %.2g cent, T60 %g (residual %.0f dB)", c, m.T60, m.Residual)
				}
			})
		}
	}
}

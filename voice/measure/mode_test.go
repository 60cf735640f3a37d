package measure

import (
	"cmp"
	"fmt"
	"math"
	"math/cmplx"
	"math/rand/v2"
	"slices"
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

// add adds a damped cosine whose amplitude and phase are those of its first frame.
func add(sum []float64, rate, hz, t60, amplitude, phase float64) {
	const exact = 64 // frames between phases that are computed anew
	step := complex(-math.Log(1000)/(t60*rate), 2*math.Pi*hz/rate)
	turn := cmplx.Exp(step)
	var v complex128
	for i := range sum {
		if i%exact == 0 {
			_, cycles := math.Modf(hz / rate * float64(i))
			v = cmplx.Rect(amplitude*math.Exp(real(step)*float64(i)), 2*math.Pi*cycles+phase)
		}
		sum[i] += real(v)
		v *= turn
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
		for _, from := range []int{0, rate / 2, 2 * rate, len(x) - rate/2} {
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

func TestPartialThatDiesEarly(t *testing.T) {
	const rate = 48000
	for _, t60 := range []float64{0.05, 0.1, 0.3} {
		for _, hz := range []float64{2000, 5000, 11000} {
			for _, floor := range []float64{0, 1e-7} { // silence, or noise at -145 dB
				const f0 = 200.0
				x := make([]float64, 10*rate)
				add(x, rate, hz, t60, 0.2, 1)
				add(x, rate, hz-f0, 1.3*t60, 0.25, 2)
				add(x, rate, hz+f0, 0.8*t60, 0.15, 3)
				add(x, rate, f0, 6, 0.5, 0)
				noise := rand.New(rand.NewPCG(1, 2))
				for i := range x {
					x[i] += floor * noise.NormFloat64()
				}
				m, err := Partial(round(x), rate, hz*1.001, f0)
				if err != nil {
					t.Fatal(err)
				}
				cent, part := math.Abs(Cents(m.Frequency, hz)), math.Abs(m.T60/t60-1)
				if cent > 0.0005 || part > 0.0005 {
					t.Errorf("T60 %g s at %g Hz over noise of %g: off by %.2g cent, %.2g %% (residual %.0f dB)", t60, hz, floor, cent, 100*part, m.Residual)
				}
			}
		}
	}
}

// A low note of an excitation by noise has thousands of partials, all of them
// strong at first.
func TestPartialAmongHundreds(t *testing.T) {
	const rate = 48000
	for _, c := range []struct{ f0, t60 float64 }{{8.1758, 0.3}, {8.1758, 6}, {27.5, 0.3}, {27.5, 120}} {
		x := make([]float64, int(math.Max(1, math.Min(2, c.t60))*rate))
		noise := rand.New(rand.NewPCG(3, 4))
		for n := 1.0; n*c.f0 < 10000 && n < 400; n++ {
			add(x, rate, n*c.f0, c.t60*(1+math.Pow(c.f0/1000, 2))/(1+math.Pow(n*c.f0/1000, 2)), 0.02*math.Abs(noise.NormFloat64())+0.005, 6*noise.Float64())
		}
		m, err := Partial(round(x), rate, c.f0*1.002, c.f0)
		if err != nil {
			t.Fatal(err)
		}
		cent, part := math.Abs(Cents(m.Frequency, c.f0)), math.Abs(m.T60/c.t60-1)
		if cent > 0.0005 || part > 0.0005 {
			t.Errorf("%g Hz, T60 %g s: off by %.2g cent, %.2g %% (residual %.0f dB)", c.f0, c.t60, cent, 100*part, m.Residual)
		}
	}
}

func TestModesToldApart(t *testing.T) {
	const rate = 48000
	for _, c := range []struct {
		name    string
		f0      float64
		cents   []float64
		t60     []float64
		seconds float64
	}{
		{"two planes of a string", 220, []float64{0, 0.7}, []float64{1.5, 7}, 6},
		{"the same pitch, two decays", 110, []float64{0, 0}, []float64{1, 8}, 4},
		{"a course of three", 440, []float64{-1.5, 0.2, 1.5}, []float64{6, 6, 5.5}, 6},
		{"a wide course, high", 2093, []float64{-10, 10}, []float64{2, 2.2}, 3},
		{"a course of two in two planes", 147, []float64{-2, -1.2, 2, 3.1}, []float64{2, 8, 2.2, 7}, 8},
	} {
		x := make([]float64, int(c.seconds*rate))
		for n := 1.0; n <= 6; n++ {
			for k, cents := range c.cents {
				add(x, rate, n*Shift(c.f0, cents), c.t60[k]/(1+0.02*n*n)*1.02, 0.2/n/float64(k+1), n*n+float64(k))
			}
		}
		modes, err := Modes(round(x), rate, c.f0, c.f0/4, len(c.cents))
		if err != nil {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		slices.SortStableFunc(modes, func(a, b Mode) int {
			if math.Abs(Cents(a.Frequency, b.Frequency)) < 0.01 {
				return cmp.Compare(a.T60, b.T60)
			}
			return 0
		})
		for k, m := range modes {
			cent, part := math.Abs(Cents(m.Frequency, c.f0)-c.cents[k]), math.Abs(m.T60/c.t60[k]-1)
			level := math.Abs(m.Level - 20*math.Log10(0.2/float64(k+1)))
			if cent > 0.001 || part > 0.001 || level > 0.02 {
				t.Errorf("%s, mode %d: off by %.2g cent, %.2g %%, %.2g dB (residual %.0f dB)", c.name, k, cent, 100*part, level, m.Residual)
			}
		}
	}
}

func TestPartialRefuses(t *testing.T) {
	tone := note(48000, 440, 1, 0, 0.5)
	broken := slices.Clone(tone)
	broken[100] = float32(math.NaN())
	for _, c := range []struct {
		name          string
		signal        []float32
		rate, hz, gap float64
	}{
		{"no rate", tone, 0, 440, 440},
		{"above half the rate", tone, 48000, 24000, 440},
		{"no spacing", tone, 48000, 440, 0},
		{"too short", tone[:200], 48000, 440, 440},
		{"not a number", broken, 48000, 440, 440},
		{"silence", make([]float32, 48000), 48000, 440, 440},
	} {
		if m, err := Partial(c.signal, c.rate, c.hz, c.gap); err == nil {
			t.Errorf("%s: found %+v", c.name, m)
		}
	}
}

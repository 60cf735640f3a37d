package measure

import (
	"math"
	"testing"
)

func TestSpectrum(t *testing.T) {
	const rate = 48000
	x := sine(rate, 1500, 0.1, 32768.0/rate) // 1024 whole periods, a bin
	add(x, rate, 6000, math.Inf(1), 1e-5, 0)
	for i := range x {
		x[i] += 0.01
	}
	s := NewSpectrum(x, rate)
	near(t, "bins", float64(len(s.DB)), 32768/2+1, 0)
	near(t, "step", s.Step, rate/32768.0, 1e-12)
	hz, level := s.Peak(1000, 2000)
	near(t, "frequency", hz, 1500, s.Step/2)
	near(t, "level", level, -20, 1e-3)
	_, level = s.Peak(5900, 6100)
	near(t, "level of a tone 80 dB weaker", level, -100, 0.01)
	near(t, "mean", s.DB[0], -40, 1e-3)
	if hz, level = s.Peak(2000, 5900); level > -135 {
		t.Errorf("%.1f dB at %g Hz, where nothing is", level, hz)
	}
	if empty := NewSpectrum([]float32{}, rate); len(empty.DB) != 0 {
		t.Error("an empty signal has a spectrum")
	}
}

func TestLevelAndNull(t *testing.T) {
	const rate, f0 = 44100, 123.4
	for _, depth := range []float64{20, 50, 120} {
		x := make([]float64, rate)
		for n := 1.0; n <= 20; n++ {
			amplitude := 0.1
			if n == 5 {
				amplitude *= math.Pow(10, -depth/20)
			}
			add(x, rate, n*f0, math.Inf(1), amplitude, n*n)
		}
		level, err := Level(x, rate, 4*f0, f0)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "level", level, -20, 1e-4)
		null, err := Null(x, rate, f0, 5)
		if err != nil {
			t.Fatal(err)
		}
		within := 0.01
		if depth > 100 {
			within = 0.3 // the neighbours' leak, 150 dB down
		}
		near(t, "null", null, depth, within)
	}
	if _, err := Level(make([]float32, 100), rate, 440, 440); err == nil {
		t.Error("100 frames have a level at 440 Hz")
	}
	if _, err := Null(make([]float32, rate), rate, 5000, 4); err == nil {
		t.Error("a null whose upper neighbour lies above half the rate")
	}
}

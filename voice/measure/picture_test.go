package measure

import (
	"math"
	"testing"
)

func TestDecay(t *testing.T) {
	const rate = 48000
	x := make([]float64, 2*rate)
	add(x, rate, 1000, 1.5, 1, 0)
	c := Decay(x, rate, 0.05)
	near(t, "points", float64(c.Len()), 40, 0)
	for i := range c.Len() {
		at, level := c.XY(i)
		near(t, "time", at, 0.025+0.05*float64(i), 1e-9)
		near(t, "level", level, -3.01-60*at/1.5, 0.05)
	}
	_, level := Decay(make([]float32, 10), rate, 0).XY(0)
	near(t, "silence, drawn", level, -200, 0)
}

func TestSpectrogram(t *testing.T) {
	const rate = 48000
	x := append(sine(rate, 1000, 0.1, 0.5), sine(rate, 3000, 0.01, 0.5)...)
	g := Spectrogram(x, rate, 0.05, 0.025, 5000)
	columns, rows := g.Dims()
	near(t, "columns", float64(columns), 39, 0)
	near(t, "highest row", g.Y(rows-1), 5000, g.Y(1))
	for c := range columns {
		at := g.X(c)
		if math.Abs(at-0.5) < 0.026 {
			continue // both tones are in sight
		}
		loudest, level := 0, math.Inf(-1)
		for r := range rows {
			if g.Z(c, r) > level {
				loudest, level = r, g.Z(c, r)
			}
		}
		hz, want := 1000.0, -20.0
		if at > 0.5 {
			hz, want = 3000, -40
		}
		near(t, "frequency", g.Y(loudest), hz, g.Y(1))
		near(t, "level", level, want, 0.2)
	}
}

package measure

import (
	"math"
	"testing"
)

// The fundamental of a string of 20 partials, also where the signal ends long before it has
// fallen by 60 dB.
func TestTrackFollowsOneMode(t *testing.T) {
	const rate = 48000
	for _, c := range []struct{ hz, t60, seconds float64 }{
		{27.5, 6, 8}, {27.5, 20, 5}, {261.63, 0.3, 1}, {261.63, 4, 5}, {261.63, 30, 6}, {4186, 0.5, 1}, {12000, 0.2, 1},
	} {
		x := note(rate, c.hz, c.t60, 1e-3, c.seconds)
		tr, err := NewTrack(x, rate, c.hz*1.001, c.hz)
		if err != nil {
			t.Fatal(err)
		}
		fell := tr.Level().Fall(60)
		near(t, "T60", fell/c.t60, 1, 1e-3)
		half := min(c.seconds, c.t60) / 2
		near(t, "pitch of the first half", Cents(tr.Pitch(0, half), c.hz), 0, 1e-3)
		near(t, "pitch of the second half", Cents(tr.Pitch(half, 2*half), c.hz), 0, 1e-3)
	}
}

// Two modes that beat: the pitch lies between them by their power, and the fall is that
// of the one that rings longer, from the peak of both.
func TestTrackHearsTwoModes(t *testing.T) {
	const rate, seconds = 48000.0, 4.0
	x := make([]float64, int(rate*seconds))
	add(x, rate, 440, math.Inf(1), 0.2, 0)
	add(x, rate, 442, math.Inf(1), 0.1, 0)
	tr, err := NewTrack(x, rate, 440, 440)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "pitch by power", tr.Pitch(0.5, 3.5), 440+2*0.2, 0.02)

	x = make([]float64, int(rate*seconds))
	add(x, rate, 440, 0.5, 0.09, 0)
	add(x, rate, 440, 2, 0.01, 0)
	if tr, err = NewTrack(x, rate, 440, 440); err != nil {
		t.Fatal(err)
	}
	near(t, "two decays", tr.Level().Fall(60), 2*(60-20)/60.0, 0.08)
}

func TestFallOfCurves(t *testing.T) {
	inf := math.Inf(-1)
	for _, c := range []struct {
		what string
		db   []float64
		want float64
	}{
		{"a peak inside", []float64{-20, 0, -30, -60, -90}, 2},
		{"a beat's null", []float64{0, -90, -30, -60, -90}, 3},
		{"between points", []float64{0, -40, -80}, 1.5},
		{"into silence", []float64{0, -10, inf, inf}, 2},
		{"drawn out", []float64{0, -5, -10, -15, -20}, 12},
		{"rising", []float64{-30, -20, -10}, math.NaN()},
		{"level", []float64{-10, -10, -10, -10}, math.NaN()},
		{"silence", []float64{inf, inf}, math.NaN()},
		{"nothing", nil, math.NaN()},
	} {
		curve := Curve{DB: c.db}
		for i := range c.db {
			curve.Time = append(curve.Time, float64(i))
		}
		if got := curve.Fall(60); !(math.Abs(got-c.want) < 1e-9) && !(math.IsNaN(got) && math.IsNaN(c.want)) {
			t.Errorf("%s: falls in %g s, want %g", c.what, got, c.want)
		}
	}
}

func TestTrackRefuses(t *testing.T) {
	x := sine(48000, 440, 0.5, 0.1)
	for _, c := range []struct{ near, spacing float64 }{{0, 440}, {24000, 440}, {440, 0}, {440, math.NaN()}, {440, 60}} {
		if _, err := NewTrack(x, 48000, c.near, c.spacing); err == nil {
			t.Errorf("%+v is tracked", c)
		}
	}
	tr, err := NewTrack(make([]float32, 48000), 48000, 440, 440)
	if err != nil {
		t.Fatal(err)
	}
	if hz := tr.Pitch(0, 1); !math.IsNaN(hz) {
		t.Errorf("silence has the pitch %g Hz", hz)
	}
}

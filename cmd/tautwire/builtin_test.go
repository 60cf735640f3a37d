package main

import (
	"math"
	"testing"

	"tautwire/config"
	"tautwire/engine"
	"tautwire/midiin"
	"tautwire/voice/measure"
)

// TestBuiltinsAreEven plays the first part of the demo with every built-in patch, and
// compares their loudness by ITU-R BS.1770, with levels and the limiter's part.
func TestBuiltinsAreEven(t *testing.T) {
	const rate, seconds, period = 48000, 24, 1024
	const spread = 2.0 // LU
	quietest, loudest := math.Inf(1), math.Inf(-1)
	for _, name := range config.Builtins() {
		patch, err := config.LoadPatch(name)
		if err != nil {
			t.Fatal(err)
		}
		compiled, err := engine.Compile(patch, rate)
		if err != nil {
			t.Fatal(err)
		}
		e := engine.New(compiled, engine.Options{Rate: rate, Period: period, Timing: engine.Offline})
		demo, err := midiin.Demo()
		if err != nil {
			t.Fatal(err)
		}
		events := demo.Events
		out := make([]float32, 0, 2*rate*seconds)
		part := make([]float32, 2*period)
		for len(out) < cap(out) {
			end := int64(len(out)/2+period) * 1e9 / rate
			for len(events) > 0 && events[0].Time < end {
				e.Send(events[0])
				events = events[1:]
			}
			e.Render(part)
			out = append(out, part[:min(len(part), cap(out)-len(out))]...)
		}
		sides := measure.Split(out, 2)
		loudness, err := measure.Loudness(rate, sides...)
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		quietest, loudest = min(quietest, loudness), max(loudest, loudness)
		t.Logf("%-15s %6.1f LUFS, peak %.1f dBFS", name, loudness, max(measure.Peak(sides[0]), measure.Peak(sides[1])))
		for i, side := range sides {
			if peak := measure.Peak(side); peak > 0 {
				t.Errorf("%s: side %d peaks at %.2f dBFS", name, i, peak)
			}
			if mean := measure.Mean(side); mean > -80 {
				t.Errorf("%s: side %d has a mean of %.1f dBFS", name, i, mean)
			}
		}
	}
	if loudest-quietest > spread {
		t.Errorf("loudness from %.1f to %.1f LUFS; %g LU apart at most", quietest, loudest, spread)
	}
}

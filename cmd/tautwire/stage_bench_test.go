package main

import (
	"math"
	"path/filepath"
	"testing"
	"time"
)

// harbour is a patch with all that a string may have.
const harbour = `title = "Harbour wall"
[resonance]
level = -12.0
[body]
mix = 0.4
builtin = "hull"
[[zone]]
keys = "0-127"
decay = 60.0
inharmonicity = 3e-4
[zone.second]
mix = 0.3
cents = 1.0
decay = 0.8
`

// BenchmarkStageInJack reports the 99.9th percentile of the render time, as a part of the period, of 128 strings with
// everything, the pedal down, at 48 kHz and 64 frames, in a graph with an idle client: the best of some
// windows of the log, for the machine may be shared.
func BenchmarkStageInJack(b *testing.B) {
	const period, rate = 64, 48000
	server := startJack(b, rate, period)
	idle := server.probe(b, 60, "deaf")
	keys := newKeyboard(b)
	log := filepath.Join(b.TempDir(), "log")
	daemon := start(b, server.env(), tautwire(), "play", "--device", "jack", "--midi", keys.path,
		"--patch", writeFile(b, "harbour.toml", harbour), "--log", log)
	daemon.says(b, keys.path+" plays", 20*time.Second)
	keys.write(b, 0xb0, 64, 127)
	for key := range byte(128) {
		keys.on(b, key, 80)
	}
	time.Sleep(25 * time.Second) // some windows of the log
	idle.stop(b)
	daemon.stops(b)
	best, load := math.Inf(1), 0.0
	for _, r := range records(b, log) {
		if r["event"] != "window" || r["strings"].(float64) < 100 {
			continue
		}
		if us := r["render_us"].(map[string]any)["p999"].(float64); us < best {
			best, load = us, r["load"].(float64)
		}
	}
	if math.IsInf(best, 1) {
		b.Fatal("no window of the log has 100 strings")
	}
	b.ReportMetric(best/(period*1e6/rate)*100, "%period")
	b.ReportMetric(100*load, "%load")
	b.ReportMetric(0, "ns/op")
}

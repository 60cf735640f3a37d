package main

import (
	"path/filepath"
	"slices"
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
// everything, the pedal down, at 48 kHz and 64 frames, in a graph with an idle client: in the median of the
// whole windows of the log, for the machine may be shared, and in the best. Beside it stand the load, the median
// render time, and how many dropouts the idle client saw.
func BenchmarkStageInJack(b *testing.B) {
	const period, rate, held = 64, 48000, 128
	server := startJack(b, rate, period)
	idle := server.probe(b, 60, "deaf")
	keys := newKeyboard(b)
	log := filepath.Join(b.TempDir(), "log")
	daemon := start(b, server.env(), tautwire(), "play", "--device", "jack", "--midi", keys.path,
		"--patch", writeFile(b, "harbour.toml", harbour), "--log", log)
	daemon.says(b, keys.path+" plays", 20*time.Second)
	keys.write(b, 0xb0, 64, 127)
	for key := range byte(held) {
		keys.on(b, key, 80)
	}
	whole := func(r map[string]any) bool {
		return r["event"] == "window" && r["seconds"].(float64) >= windowLength.Seconds() && r["strings"].(float64) == held
	}
	var windows []map[string]any
	waitFor(b, 50*time.Second, "three windows of the log", func() bool {
		windows = slices.DeleteFunc(records(b, log), func(r map[string]any) bool { return !whole(r) })
		return len(windows) >= 3
	}, daemon)
	seen := idle.stop(b)
	daemon.stops(b)

	of := func(what string) (x []float64) {
		for _, r := range windows {
			x = append(x, r["render_us"].(map[string]any)[what].(float64)/(period*1e6/rate)*100)
		}
		return slices.Sorted(slices.Values(x))
	}
	late, middle := of("p999"), of("p50")
	load := 0.0
	for _, r := range windows {
		load += 100 * r["load"].(float64) / float64(len(windows))
	}
	b.ReportMetric(late[len(late)/2], "%period")
	b.ReportMetric(late[0], "%period-best")
	b.ReportMetric(middle[len(middle)/2], "%period-median")
	b.ReportMetric(load, "%load")
	b.ReportMetric(float64(len(seen.xruns)), "idle-dropouts")
	b.ReportMetric(0, "ns/op")
}

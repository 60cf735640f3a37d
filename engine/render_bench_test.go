package engine

import (
	"math"
	"syscall"
	"testing"

	"tautwire/config"
	"tautwire/voice"
)

// BenchmarkHeldKeys renders 64 held keys in periods of 64 frames at 48 kHz and reports
// ns per string-sample: of the whole engine, of the strings alone, and of a control that only
// copies and mixes as many samples. Load is the part of real time that the engine takes.
func BenchmarkHeldKeys(b *testing.B) {
	const keys, period = 64, 64
	patch := stays()
	patch.Zones[0].Decay = constant(60)
	full := singing()
	full.Zones = patch.Zones
	report := func(b *testing.B) {
		ns := float64(b.Elapsed().Nanoseconds()) / float64(b.N*keys*period)
		b.ReportMetric(ns, "ns/string-sample")
		b.ReportMetric(ns*keys*testRate/1e9*100, "%load")
		b.ReportMetric(0, "ns/op")
	}
	b.Run("control", func(b *testing.B) {
		var src [keys][period]float32
		var left, right [period]float32
		for b.Loop() {
			for k := range src {
				for i, y := range src[k] {
					left[i] += float32(y * 0.5)
					right[i] += float32(y * 0.5)
				}
			}
		}
		report(b)
	})
	b.Run("strings alone", func(b *testing.B) {
		c := compiled(b, patch, testRate)
		pool := c.maker.NewPool(keys, lowestPlayed)
		for key := range keys {
			pool.Voice(key).Strike(c.keys[30+key].design, 100, uint64(key))
		}
		for b.Loop() {
			for range period / voice.Grid {
				pool.Step()
				pool.Advance(voice.Grid)
			}
		}
		report(b)
	})
	for _, run := range []struct {
		name  string
		patch *config.Patch
		pedal float32
	}{{"engine", patch, 0}, {"engine with body, sympathy and pedal", full, 127}} {
		b.Run(run.name, func(b *testing.B) {
			e := offline(b, run.patch, keys)
			e.Send(at(0, Control, controlDamper, run.pedal))
			for key := range keys {
				e.Send(at(0, NoteOn, 30+key, 100))
			}
			out := make([]float32, 2*period)
			for range testRate / 4 / period {
				e.Render(out)
			}
			for b.Loop() {
				e.Render(out)
			}
			report(b)
			if n := e.Counts().Strings; n != keys {
				b.Fatalf("%d strings sound, want %d", n, keys)
			}
		})
	}
}

// BenchmarkCompile reports ms for all 128 keys, on the clock and of processors: of a plain patch, of one with
// each refinement of the string that a fit needs, and of each built-in one. The control is a
// million exponentials.
func BenchmarkCompile(b *testing.B) {
	measure := func(b *testing.B, f func()) {
		busy := func() float64 {
			var u syscall.Rusage
			syscall.Getrusage(syscall.RUSAGE_SELF, &u)
			return float64(u.Utime.Nano()+u.Stime.Nano()) / 1e6
		}
		before := busy()
		for b.Loop() {
			f()
		}
		b.ReportMetric((busy()-before)/float64(b.N), "cpu-ms/patch")
		b.ReportMetric(b.Elapsed().Seconds()*1e3/float64(b.N), "ms/patch")
		b.ReportMetric(0, "ns/op")
	}
	b.Run("control", func(b *testing.B) {
		sum := 0.0
		measure(b, func() {
			for i := range 1000000 {
				sum += math.Exp(-float64(i))
			}
		})
	})
	full := stays()
	z := &full.Zones[0]
	z.Inharmonicity = constant(3e-4)
	z.Second = config.Second{Mix: constant(0.3), Cents: constant(0.5), Decay: constant(1.5)}
	z.Course = config.Course{Strings: constant(2), Cents: constant(3)}
	patches := []*config.Patch{stays(), full}
	patches[1].Path = "stiff, two planes, courses"
	for _, name := range config.Builtins() {
		p, err := config.LoadPatch(name)
		if err != nil {
			b.Fatal(err)
		}
		patches = append(patches, p)
	}
	for _, p := range patches {
		b.Run(p.Path, func(b *testing.B) {
			compiler, err := NewCompiler(testRate)
			if err != nil {
				b.Fatal(err)
			}
			measure(b, func() {
				if _, err := compiler.Compile(p); err != nil {
					b.Fatal(err)
				}
			})
		})
	}
}

// BenchmarkHush reports what silencing a body of the longest impulse response costs the callback at once.
func BenchmarkHush(b *testing.B) {
	p := stays()
	p.Body = config.Body{Mix: 0.5, Impulse: &config.Sample{Rate: testRate, Data: make([]float32, 2*testRate)}}
	p.Body.Impulse.Data[0] = 1
	e := offline(b, p, 1)
	for b.Loop() {
		e.stage.body.reset()
	}
}

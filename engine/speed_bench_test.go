package engine

import (
	"fmt"
	"testing"

	"tautwire/config"
)

// crowd is how many strings a full stage sounds.
const crowd = 128

// fullStage is a patch with all that a string may have: two polarizations, stiffness, sympathy and a body.
func fullStage() *config.Patch {
	p := singing()
	z := &p.Zones[0]
	z.Decay = constant(60)
	z.Inharmonicity = constant(3e-4)
	z.Second = config.Second{Mix: constant(0.3), Cents: constant(1), Decay: constant(0.8)}
	return p
}

// hold strikes n strings, on keys of as many channels as it takes, with the pedal down,
// and lets a second pass.
func hold(b *testing.B, p *config.Patch, n, period int) (*Engine, []float32) {
	e := offline(b, p, n)
	const keys = 80
	for i := range n {
		channel := uint8(i / keys)
		if i%keys == 0 {
			pedal := at(0, Control, controlDamper, 127)
			pedal.Channel = channel
			e.Send(pedal)
		}
		note := at(0, NoteOn, 24+i%keys, 100)
		note.Channel = channel
		e.Send(note)
	}
	out := make([]float32, 2*period)
	for range testRate / period {
		e.Render(out)
	}
	if got := e.Counts().Strings; got != n {
		b.Fatalf("%d strings sound, want %d", got, n)
	}
	return e, out
}

func loadOf(b *testing.B, frames int) float64 {
	return float64(b.Elapsed().Nanoseconds()) / float64(b.N*frames) * testRate / 1e9 * 100
}

// BenchmarkStage reports what a full stage takes of one core at 48 kHz in periods of 64 frames,
// and how many strings of the kind one core could sound.
func BenchmarkStage(b *testing.B) {
	const period = 64
	e, out := hold(b, fullStage(), crowd, period)
	for b.Loop() {
		e.Render(out)
	}
	load := loadOf(b, period)
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*crowd*2*period), "ns/string-sample")
	b.ReportMetric(100/load*crowd, "strings/core")
	b.ReportMetric(load, "%load")
	b.ReportMetric(0, "ns/op")
}

// BenchmarkSilence reports what an engine takes in which nothing sounds, from the start and after a stage
// has died away.
func BenchmarkSilence(b *testing.B) {
	const period = 64
	out := make([]float32, 2*period)
	run := func(name string, e *Engine) {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				e.Render(out)
			}
			if n := e.Counts().Strings; n != 0 {
				b.Fatalf("%d strings sound", n)
			}
			b.ReportMetric(loadOf(b, period), "%load")
			b.ReportMetric(0, "ns/op")
		})
	}
	run("never played", offline(b, fullStage(), crowd))
	p := fullStage()
	p.Zones[0].Decay = constant(0.2)
	e := offline(b, p, crowd)
	for i := range 64 {
		e.Send(at(0, NoteOn, 30+i, 100))
	}
	for range 4 * testRate / period {
		e.Render(out)
	}
	run("died away", e)
}

// BenchmarkPeriods reports what 64 strings cost a frame, by the period.
func BenchmarkPeriods(b *testing.B) {
	p := stays()
	p.Zones[0].Decay = constant(60)
	for _, period := range []int{64, 63, 441} {
		b.Run(fmt.Sprint(period), func(b *testing.B) {
			e, out := hold(b, p, 64, period)
			for b.Loop() {
				e.Render(out)
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*period), "ns/frame")
			b.ReportMetric(0, "ns/op")
		})
	}
}

// BenchmarkBurst reports the part of a period of 64 frames that it takes to strike 128 keys in one, each at a frame of its own
// as far as there are, and to render it.
func BenchmarkBurst(b *testing.B) {
	const period = 64
	c := compiled(b, fullStage(), testRate)
	e := New(c, Options{Rate: testRate, Timing: Offline, Voices: crowd})
	out := make([]float32, 2*period)
	frame := int64(0)
	for b.Loop() {
		b.StopTimer()
		e.Reset()
		for i := range crowd {
			ev := at(frame+int64(i/2), NoteOn, i, 100)
			e.Send(ev)
		}
		b.StartTimer()
		e.Render(out)
		frame += period
	}
	b.ReportMetric(loadOf(b, period), "%period")
	b.ReportMetric(0, "ns/op")
}

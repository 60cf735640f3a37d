package voice

import (
	"fmt"
	"math"
	"testing"

	"tautwire/voice/lanes"
)

const (
	benchStrings = 128
	benchPeriod  = 64
)

// bed is a pool of sounding voices of a spec, on keys evenly spread.
func bed(m *Maker, spec Spec, voices int) *Pool { return bedOn(m, spec, voices, 28, 64) }

// bedOn is a bed on some keys from a lowest on.
func bedOn(m *Maker, spec Spec, voices, lowest, keys int) *Pool {
	p := m.NewPool(voices, 8)
	designs := map[int]*Design{}
	for i := range voices {
		key := lowest + i%keys
		if designs[key] == nil {
			spec.Frequency = hz(key)
			designs[key] = m.Design(spec)
		}
		v := p.Voice(i)
		v.Strike(designs[key], 127, uint64(i))
		v.Mix(Gain{0.5, 0.4}, Gain{0.5, 0.4})
	}
	for range 48000 / Grid {
		p.Step()
		p.Advance(Grid)
	}
	return p
}

// measure reports ns per string-sample of a pool in periods of 64 frames; loops is how many
// delay loops a voice has, each of which counts as a string. act comes before each control step.
func (p *Pool) measure(b *testing.B, loops int, act func(p *Pool, step int)) {
	var left, right [Grid]float32
	step := 0
	for b.Loop() {
		for range benchPeriod / Grid {
			if act != nil {
				act(p, step)
			}
			step++
			p.Step()
			p.Advance(Grid)
			p.Sum(left[:], right[:], 0)
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*len(p.voices)*loops*benchPeriod), "ns/string-sample")
	b.ReportMetric(0, "ns/op")
}

// lasting is a plain string that rings on for as long as a benchmark runs.
func lasting() Spec { return plain(0, 120, 0.8) }

// full is a course of two in two polarizations, with four sections of stiffness.
func full() Spec {
	s := lasting()
	s.Inharmonicity, s.SecondMix, s.SecondCents, s.Strings, s.CourseCents = 6e-4, 0.3, 1, 2, 4
	return s
}

// BenchmarkPlainString reports ns per string-sample of 128 still strings without refinements.
func BenchmarkPlainString(b *testing.B) {
	bed(NewMaker(48000), lasting(), benchStrings).measure(b, 1, nil)
}

// BenchmarkPortableString is BenchmarkPlainString in Go alone.
func BenchmarkPortableString(b *testing.B) {
	p := bed(NewMaker(48000), lasting(), benchStrings)
	p.kernel = lanes.Portable()
	p.measure(b, 1, nil)
}

// BenchmarkLowStrings is 512 plain strings whose lines are long, the lowest octave of a piano.
func BenchmarkLowStrings(b *testing.B) {
	bedOn(NewMaker(48000), lasting(), 512, 21, 12).measure(b, 1, nil)
}

// BenchmarkDyingString is BenchmarkPlainString of strings that have long fallen silent, and would compute
// with subnormal numbers by now.
func BenchmarkDyingString(b *testing.B) {
	spec := lasting()
	spec.Decay = 0.05
	bed(NewMaker(48000), spec, benchStrings).measure(b, 1, nil)
}

// BenchmarkBendingString is BenchmarkPlainString with a vibrato of 50 cents on every string.
func BenchmarkBendingString(b *testing.B) {
	bed(NewMaker(48000), lasting(), benchStrings).measure(b, 1, func(p *Pool, step int) {
		cents := 50 * math.Sin(2*math.Pi*5.5*Grid/48000*float64(step))
		for i := range p.voices {
			p.voices[i].Tune(cents)
		}
	})
}

// BenchmarkFullString reports ns per string-sample of 128 voices of four loops each.
func BenchmarkFullString(b *testing.B) {
	bed(NewMaker(48000), full(), benchStrings).measure(b, 4, nil)
}

// BenchmarkStrings reports what a plain string costs by their number.
func BenchmarkStrings(b *testing.B) {
	m := NewMaker(48000)
	for _, n := range []int{1, 8, 32, 64, 128, 256, 512} {
		b.Run(fmt.Sprint(n), func(b *testing.B) { bed(m, lasting(), n).measure(b, 1, nil) })
	}
}

// BenchmarkDesign reports what compiling one key takes.
func BenchmarkDesign(b *testing.B) {
	m := NewMaker(48000)
	full := everything(hz(45))
	for b.Loop() {
		m.Design(full)
	}
}

// BenchmarkStrike reports what setting a string going costs, for each kind: one that
// sounds already, and one that has to be strung anew.
func BenchmarkStrike(b *testing.B) {
	m := NewMaker(48000)
	v := m.NewVoice(8)
	for name, x := range kinds() {
		spec := plain(hz(60), 4, 0.5)
		x.Position = 0.13
		spec.Excitation = x
		d := m.Design(spec)
		b.Run(name+"/again", func(b *testing.B) {
			for b.Loop() {
				v.Strike(d, 100, uint64(b.N))
			}
		})
		b.Run(name+"/anew", func(b *testing.B) {
			for b.Loop() {
				v.Reset()
				v.Strike(d, 100, uint64(b.N))
			}
		})
	}
}

// BenchmarkStroke reports ns per sample of the force of one stroke, for each kind: while its
// source gives, and of the tail afterwards.
func BenchmarkStroke(b *testing.B) {
	const rate, f0 = 48000, 80.0
	m := NewMaker(rate)
	var e [Grid]float32
	for name, x := range kinds() {
		x.Position, x.SampleRate = 0.13, rate
		sh := newShape(x, f0, m.curves)
		var fresh stroke
		fresh.start(&sh, m.ip, f0, 0.999, rate, 100, 7)
		spent := fresh
		for float64(spent.frame)-spent.echo < spent.spent+200 {
			spent.follow(f0)
			spent.render(e[:])
		}
		for _, part := range []struct {
			name  string
			begin stroke
			last  int
		}{{"source", fresh, int(fresh.spent)}, {"tail", spent, spent.last}} {
			b.Run(name+"/"+part.name, func(b *testing.B) {
				s := part.begin
				for b.Loop() {
					if s.frame+Grid > part.last {
						s = part.begin
					}
					s.follow(f0)
					s.render(e[:])
				}
				b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/Grid, "ns/sample")
				b.ReportMetric(0, "ns/op")
			})
		}
	}
}

// BenchmarkMaker reports what the tables of a rate take.
func BenchmarkMaker(b *testing.B) {
	for b.Loop() {
		NewMaker(48000)
	}
}

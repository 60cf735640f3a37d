package voice

import "testing"

// bare is the control: the same read and loss as a still string's, and nothing else.
type bare struct {
	line [1 << 14]float32
	w    int
	h    [taps]float32
	c, v float32
}

func (b *bare) render(out []float32, length int) {
	if b.w+len(out) > len(b.line) {
		copy(b.line[:], b.line[b.w-1024:b.w])
		b.w = 1024
	}
	src := b.line[b.w-length-taps+1+center:]
	dst := b.line[b.w : b.w+len(out)]
	for i := range out {
		s := src[i : i+taps]
		x := float32(0)
		for t := range b.h {
			x += b.h[t] * s[taps-1-t]
		}
		b.v = x - b.c*b.v
		dst[i], out[i] = b.v, b.v
	}
	b.w += len(out)
}

// BenchmarkString reports ns per string-sample: of the control in the same
// run, of a still string, of one that glides, and of what each refinement costs.
func BenchmarkString(b *testing.B) {
	const voices, frames = 64, 64
	m := NewMaker(48000)
	out := make([]float32, frames)
	perSample := func(b *testing.B) {
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/voices/frames, "ns/string-sample")
	}
	b.Run("control", func(b *testing.B) {
		all := make([]bare, voices)
		for i := range all {
			all[i].h[center], all[i].c, all[i].w, all[i].line[900] = 0.99, -0.1, 1024, 1
		}
		for b.Loop() {
			for i := range all {
				all[i].render(out[:Grid], 60+2*i)
				all[i].render(out[Grid:], 60+2*i)
			}
		}
		perSample(b)
	})
	stiff, split := plain(0, 30, 0.8), plain(0, 30, 0.8)
	stiff.Inharmonicity, split.SecondMix = 3e-4, 0.3
	for _, c := range []struct {
		name string
		spec Spec
		tune func(v *Voice, step int)
	}{
		{"still", plain(0, 30, 0.8), nil},
		{"vibrato", plain(0, 30, 0.8), func(v *Voice, step int) { v.Tune(float64(step%64) - 32) }},
		{"stiff", stiff, nil},
		{"two planes", split, nil},
	} {
		b.Run(c.name, func(b *testing.B) {
			all := make([]*Voice, voices)
			for i := range all {
				spec := c.spec
				spec.Frequency = hz(36 + i*3/4)
				all[i] = m.NewVoice(8)
				all[i].Strike(m.Design(spec), 127, uint64(i))
				all[i].Render(make([]float32, 48000), nil)
			}
			step := 0
			for b.Loop() {
				for _, v := range all {
					if c.tune != nil {
						c.tune(v, step)
					}
					v.Render(out, nil)
				}
				step++
			}
			perSample(b)
		})
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

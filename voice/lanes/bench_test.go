package lanes

import "testing"

// BenchmarkKernel reports ns per string-sample of each kernel on banks of 128
// strings in all, in control steps of 32 frames.
func BenchmarkKernel(b *testing.B) {
	const banks = 128 / Width
	for _, k := range []Kernel{Best(), Portable()} {
		for _, c := range []struct {
			name     string
			sections int
			motion   Motion
		}{{"plain", 0, Still}, {"plain moving", 0, Moving}, {"plain gliding", 0, Gliding},
			{"four sections", 4, Still}, {"four sections moving", 4, Moving}, {"four sections gliding", 4, Gliding}} {
			b.Run(k.String()+"/"+c.name, func(b *testing.B) {
				var all [banks]*Bank
				var lines [banks][]float32
				for i := range all {
					all[i], lines[i], _ = scene(uint64(i), c.sections)
					all[i].DLevel, all[i].DC1, all[i].DC2 = floats{}, doubles{}, doubles{}
					for s := range all[i].Section {
						all[i].Section[s].DA1, all[i].Section[s].DA2 = doubles{}, doubles{}
					}
					for l := range all[i].At {
						g := &all[i].Glide[l]
						g.D1, g.D2, g.D3 = 0, 0, 0
						all[i].Back[l] = int64(30 + 40*l)
					}
				}
				m, w := &Mix{}, &Bench{Rows: rows()}
				for b.Loop() {
					m.Clear(0, Frames)
					for i := range all {
						w.Line = lines[i]
						k.Render(all[i], w, nil, c.motion, 0, Frames)
						if i%2 == 1 {
							k.Mix(m, 0, Frames, all[i-1], all[i])
						}
					}
				}
				b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N*banks*Width*Frames), "ns/string-sample")
				b.ReportMetric(0, "ns/op")
			})
		}
	}
}

package voice

import "math"

// Grid is the number of frames between control steps. Chunks given to Render
// never cross a multiple of it, counted from the stream's start.
const Grid = 32

// Design is a Spec compiled for a rate; it never changes afterwards.
type Design struct {
	spec Spec
	rate float64
}

// NewDesign compiles spec for a sample rate in Hz.
func NewDesign(spec Spec, rate float64) *Design { return &Design{spec: spec, rate: rate} }

// Voice is one sounding key.
type Voice struct {
	line         []float32
	w, m         int
	gain, damp   float32
	energy       float64
	quiet, burst int
	rnd          uint64
	rate         float64
	level        float32
	d            *Design
	fade         float32
	fading       bool
}

// NewVoice allocates a voice for a sample rate in Hz.
func NewVoice(rate float64) *Voice {
	return &Voice{line: make([]float32, 1<<16), rate: rate, quiet: 1 << 30, fade: 1}
}

func (v *Voice) Strike(d *Design, velocity float64, seed uint64) {
	v.d = d
	v.m = int(math.Round(v.rate / d.spec.Frequency))
	v.gain = float32(math.Pow(10, -3/(d.spec.Frequency*d.spec.Decay)))
	v.burst, v.rnd, v.quiet, v.fading, v.fade, v.damp = v.m, seed|1, 0, false, 1, 1
	v.level = float32(math.Pow(velocity/127, 2))
}
func (v *Voice) Tune(cents float64) {}
func (v *Voice) Damp(amount float64) {
	x := (1/v.d.spec.Release - 1/v.d.spec.Decay) * amount
	v.damp = float32(math.Pow(10, -3*x/v.d.spec.Frequency))
}
func (v *Voice) Mute(amount float64)            {}
func (v *Voice) Touch(node int, amount float64) {}
func (v *Voice) Brighten(amount float64)        {}
func (v *Voice) Fade()                          { v.fading = true }
func (v *Voice) Energy() float64                { return v.energy }
func (v *Voice) Silent() bool                   { return v.quiet > v.m+Grid }
func (v *Voice) Reset() {
	clear(v.line)
	v.quiet, v.energy = 1<<30, 0
}
func (v *Voice) Render(out, drive []float32) {
	const mask = 1<<16 - 1
	for i := range out {
		y := v.gain * v.damp * 0.5 * (v.line[(v.w-v.m)&mask] + v.line[(v.w-v.m-1)&mask])
		if v.burst > 0 {
			v.burst--
			v.rnd = v.rnd*6364136223846793005 + 1442695040888963407
			y += v.level * (float32(v.rnd>>40)/(1<<23) - 1) * 0.5
		}
		if drive != nil {
			y += drive[i]
		}
		v.line[v.w&mask] = y
		v.w++
		if y > 1e-6 || y < -1e-6 {
			v.quiet = 0
		} else {
			v.quiet++
		}
		if v.fading {
			v.fade = max(0, v.fade-1/float32(0.002*v.rate))
			y *= v.fade
			if v.fade == 0 {
				v.quiet = 1 << 30
			}
		}
		v.energy += (float64(y*y) - v.energy) * 1e-4
		out[i] = y
	}
}

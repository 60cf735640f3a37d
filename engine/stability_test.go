package engine

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"tautwire/config"
)

// soakSeconds is how much audio the soak renders; the short form is for the race detector.
const (
	soakSeconds      = 620
	soakShortSeconds = 12
	soakPiece        = 4 // s with one patch
)

// within draws a span whose ends lie anywhere in a range, often at its corners.
func within(r *rand.Rand, low, high float64) config.Span {
	one := func() float64 {
		switch r.IntN(4) {
		case 0:
			return low
		case 1:
			return high
		}
		return low + r.Float64()*(high-low)
	}
	return config.Span{Low: one(), High: one()}
}

// seconds is within, even over the ratio, for times.
func seconds(r *rand.Rand, low, high float64) config.Span {
	s := within(r, math.Log(low), math.Log(high))
	return config.Span{Low: math.Exp(s.Low), High: math.Exp(s.High)}
}

// anyPatch draws a patch from the whole of what a file may hold.
func anyPatch(r *rand.Rand) *config.Patch {
	p := &config.Patch{Path: "drawn", Title: "drawn", Level: within(r, -60, 12).Low}
	p.Tuning.A4 = within(r, 380, 480).Low
	for i := range p.Tuning.Cents {
		p.Tuning.Cents[i] = within(r, -100, 100).Low
	}
	p.Controls = config.Controls{Mute: 20, Node: 21, NodeAt: 2 + r.IntN(7)}
	if r.IntN(2) == 0 {
		p.Resonance = config.Resonance{On: true, Level: within(r, -60, 0).Low}
	}
	if r.IntN(2) == 0 {
		p.Body.Mix = r.Float64()
		for range 1 + r.IntN(8) {
			p.Body.Modes = append(p.Body.Modes, config.Mode{
				Frequency: seconds(r, 20, 20000).Low, T60: seconds(r, 0.005, 5).Low, Level: within(r, -60, 24).Low})
		}
	}
	recorded := &config.Sample{Path: "drawn.wav", Rate: 44100, Data: make([]float32, 2000)}
	for i := range recorded.Data {
		recorded.Data[i] = r.Float32()*2 - 1
	}
	kinds := []string{"noise", "tone", "pluck", "strike", "sample"}
	waves := []string{"sine", "triangle", "saw"}
	// few keys, for compiling a key takes longer than playing it
	low := r.IntN(100)
	z := config.Zone{
		Low: low, High: low + 7,
		Decay: seconds(r, 0.05, 120), Brightness: within(r, 0, 1), Release: seconds(r, 0.01, 30),
		Level: within(r, -60, 12), Pan: within(r, -1, 1), Inharmonicity: within(r, 0, 0.002), Tension: within(r, 0, 100),
		Excitation: config.Excitation{
			Kind: kinds[r.IntN(len(kinds))], Position: within(r, 0, 0.5), Hardness: within(r, 0, 1), Length: within(r, 0, 500),
			Touch: within(r, 0, 1), Wave: waves[r.IntN(len(waves))], Ratio: within(r, 0.25, 32),
		},
		Second: config.Second{Mix: within(r, 0, 1), Cents: within(r, -20, 20), Decay: within(r, 0.1, 10)},
		Course: config.Course{Strings: config.Span{Low: float64(1 + r.IntN(3)), High: float64(1 + r.IntN(3))}, Cents: within(r, 0, 50)},
	}
	if z.Excitation.Kind == "sample" {
		z.Excitation.Sample = recorded
	}
	p.Zones = []config.Zone{z}
	return p
}

// anyEvent draws an event, most of them on the keys that sound.
func anyEvent(r *rand.Rand, low int, at int64) Event {
	value := []float32{0, 1, 64, 127, float32(r.IntN(128))}[r.IntN(5)]
	ev := Event{Time: at, Kind: NoteOn, Channel: uint8(r.IntN(2)), Key: uint8(min(127, low+r.IntN(8))), Value: max(1, value)}
	switch r.IntN(10) {
	case 0, 1:
		ev.Kind = NoteOff
	case 2:
		ev.Kind, ev.Value = Bend, float32(96*r.Float64()-48)
	case 3:
		controllers := []uint8{1, 7, 10, 11, 20, 21, 64, 66, 67, 74}
		ev.Kind, ev.Key, ev.Value = Control, controllers[r.IntN(len(controllers))], value
	case 4:
		ev.Kind, ev.Value = Kind(1+r.IntN(int(ResetControllers))), value
	case 5:
		ev.Kind, ev.Value = Shift, float32(48*r.Float64()-24)
	}
	return ev
}

// TestSoak plays random events on random patches, every value and every kind of both, for more than ten
// minutes of sound: no number that is none, nothing past full scale, no string that ran away, and
// silence in the end when nobody plays.
func TestSoak(t *testing.T) {
	total := soakSeconds
	if testing.Short() {
		total = soakShortSeconds
	}
	rates := []int{44100, 48000, 96000, 22050}
	for seed := range uint64(total / soakPiece) {
		rate := rates[seed%uint64(len(rates))]
		t.Run(fmt.Sprintf("seed %d", seed), func(t *testing.T) { soak(t, seed, rate) })
	}
}

func soak(t *testing.T, seed uint64, rate int) {
	r := rand.New(rand.NewPCG(seed, 77))
	patch := anyPatch(r)
	compiled, err := Compile(patch, rate)
	if err != nil {
		t.Fatal(err)
	}
	e := New(compiled, Options{Rate: rate, Timing: Offline, Voices: 12})
	out := make([]float32, 2*1024)
	frame := 0
	// play renders some seconds and returns the energy of each tenth.
	play := func(length float64, events bool) (tenths []float64) {
		end, sum, tenth := frame+int(length*float64(rate)), 0.0, frame
		for frame < end {
			n := min(1+r.IntN(1024), end-frame)
			if events && r.IntN(3) == 0 {
				e.Send(anyEvent(r, patch.Zones[0].Low, int64(float64(frame+r.IntN(n))*1e9/float64(rate))))
			}
			e.Render(out[:2*n])
			for i, y := range out[:2*n] {
				if !(y >= -1 && y <= 1) {
					t.Fatalf("rate %d, frame %d: %g\npatch %+v", rate, frame+i/2, y, patch)
				}
				sum += float64(y) * float64(y)
			}
			frame += n
			if frame-tenth >= rate/10 {
				tenths = append(tenths, sum)
				sum, tenth = 0, frame
			}
		}
		return tenths
	}
	play(soakPiece-1.2, true)
	for channel := range uint8(16) {
		e.Send(Event{Time: int64(float64(frame) * 1e9 / float64(rate)), Kind: ResetControllers, Channel: channel})
		e.Send(Event{Time: int64(float64(frame) * 1e9 / float64(rate)), Kind: AllNotesOff, Channel: channel})
	}
	after := play(1, false)
	if cured := e.Counts().Cured; cured != 0 {
		t.Fatalf("rate %d: %d strings ran away\npatch %+v", rate, cured, patch)
	}
	// with nobody playing, the second half is not louder than the first, but for what strings
	// a few cents apart beat (they add in amplitude, six of them at most)
	first, second := 0.0, 0.0
	for i, x := range after {
		if i < len(after)/2 {
			first += x
		} else {
			second += x
		}
	}
	const beating = 36
	if second > beating*first+1e-9 {
		t.Errorf("rate %d: energy grew from %g to %g with nobody playing\npatch %+v", rate, first, second, patch)
	}
	for channel := range uint8(16) {
		e.Send(Event{Time: int64(float64(frame) * 1e9 / float64(rate)), Kind: AllSoundOff, Channel: channel})
	}
	for _, x := range play(0.2, false)[1:] {
		if x > 1e-9 {
			t.Errorf("rate %d: energy %g after all sound off\npatch %+v", rate, x, patch)
		}
	}
}

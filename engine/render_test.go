package engine

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"tautwire/config"
)

const testRate = 48000

// constant is a Span of one value.
func constant(x float64) config.Span { return config.Span{Low: x, High: x} }

// stays is a patch of the lighthouse's stays, over all keys.
func stays() *config.Patch {
	return &config.Patch{
		Path:   "stays",
		Title:  "Lantern stays",
		Tuning: config.Tuning{A4: 440},
		Zones: []config.Zone{{
			High:       127,
			Decay:      config.Span{Low: 8, High: 1},
			Brightness: constant(0.6),
			Release:    constant(0.15),
			Level:      constant(-12),
			Pan:        config.Span{Low: -0.6, High: 0.6},
			Excitation: config.Excitation{Kind: "noise", Position: constant(0.13), Hardness: constant(0.5), Wave: "sine"},
			Second:     config.Second{Decay: constant(1)},
			Course:     config.Course{Strings: constant(1)},
		}},
		Controls: config.Controls{Mute: 20, Node: 21, NodeAt: 2},
	}
}

// singing is stays with sympathy and a body of modes.
func singing() *config.Patch {
	p := stays()
	p.Resonance = config.Resonance{On: true, Level: -6}
	p.Body = config.Body{Mix: 0.5, Modes: []config.Mode{
		{Frequency: 110, T60: 0.3}, {Frequency: 230, T60: 0.2, Level: -3}, {Frequency: 900, T60: 0.05},
	}}
	return p
}

func compiled(t testing.TB, p *config.Patch, rate int) *Compiled {
	t.Helper()
	c, err := Compile(p, rate)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// at makes an event of channel 0 at a frame of an offline engine at testRate.
func at(frame int64, kind Kind, key int, value float32) Event {
	return Event{Time: frameTime(frame, testRate), Kind: kind, Key: uint8(key), Value: value}
}

// frameTime is the time in ns that is told as frame.
func frameTime(frame int64, rate int64) int64 {
	return frame/rate*1e9 + int64(math.Round(float64(frame%rate)*1e9/float64(rate)))
}

// play renders frames in periods that next gives, and sends each event before the period in which
// it is due.
func play(e *Engine, events []Event, frames int, next func() int) []float32 {
	out := make([]float32, 2*frames)
	for done := 0; done < frames; {
		n := min(next(), frames-done)
		for len(events) > 0 && e.due(events[0], int64(n)) < e.frame+int64(n) {
			e.Send(events[0])
			events = events[1:]
		}
		e.Render(out[2*done : 2*(done+n)])
		done += n
	}
	return out
}

func every(n int) func() int { return func() int { return n } }

func offline(t testing.TB, p *config.Patch, voices int) *Engine {
	return New(compiled(t, p, testRate), Options{Rate: testRate, Timing: Offline, Voices: voices})
}

// randomEvents is a performance of all kinds of events, in order of time.
func randomEvents(seed uint64, n int, frames int64) []Event {
	random := rand.New(rand.NewPCG(seed, 1))
	controls := []uint8{1, 7, 10, 11, 20, 21, 64, 64, 64, 66, 67, 74, 120, 121, 123}
	events := make([]Event, n)
	for i := range events {
		e := Event{
			Time:    random.Int64N(frameTime(frames, testRate)),
			Channel: uint8(random.IntN(3)),
			Key:     uint8(24 + random.IntN(60)),
			Value:   float32(random.IntN(128)),
		}
		switch k := random.IntN(100); {
		case k < 45:
			e.Kind = NoteOn
		case k < 65:
			e.Kind = NoteOff
		case k < 82:
			e.Kind, e.Key = Control, controls[random.IntN(len(controls))]
		case k < 88:
			e.Kind, e.Value = Bend, e.Value/32-2
		case k < 90:
			e.Kind = KeyPressure
		case k < 92:
			e.Kind = ChannelPressure
		case k < 94:
			e.Kind, e.Value = Tune, float32(e.Key)+e.Value/127-0.5
		case k < 96:
			e.Kind, e.Value = Shift, e.Value/64-1
		default:
			e.Kind = []Kind{AllSoundOff, AllNotesOff, ResetControllers, Program}[random.IntN(4)]
		}
		events[i] = e
	}
	slices.SortStableFunc(events, func(a, b Event) int { return int(a.Time - b.Time) })
	return events
}

func TestSameBitsWhateverThePeriod(t *testing.T) {
	const frames = testRate / 2
	patch := compiled(t, singing(), testRate)
	fresh := func() *Engine { return New(patch, Options{Rate: testRate, Timing: Offline, Voices: 12}) }
	seeds := uint64(3)
	if testing.Short() {
		seeds = 1
	}
	for seed := uint64(1); seed <= seeds; seed++ {
		events := randomEvents(seed, 250, frames)
		want := play(fresh(), events, frames, every(64))
		if peak(want) < 0.01 {
			t.Fatalf("seed %d: the performance is silent, peak %g", seed, peak(want))
		}
		random := rand.New(rand.NewPCG(seed, 2))
		for name, next := range map[string]func() int{
			"1": every(1), "7": every(7), "128": every(128), "1024": every(1024),
			"mixed": func() int { return 1 + random.IntN(300) },
		} {
			got := play(fresh(), events, frames, next)
			for i := range want {
				if math.Float32bits(got[i]) != math.Float32bits(want[i]) {
					t.Errorf("seed %d, period %s: frame %d is %g, in periods of 64 it is %g", seed, name, i/2, got[i], want[i])
					break
				}
			}
		}
	}
}

func peak(x []float32) float64 {
	p := float32(0)
	for _, v := range x {
		p = max(p, abs(v))
	}
	return float64(p)
}

func TestRenderAllocatesNothing(t *testing.T) {
	for _, timing := range []Timing{Steady, Eager, Offline} {
		e := New(compiled(t, singing(), testRate), Options{Rate: testRate, Period: 64, Timing: timing, Voices: 24})
		out := make([]float32, 128)
		events := randomEvents(7, 4000, testRate)
		period, now := 0, int64(1e12)
		allocs := testing.AllocsPerRun(500, func() {
			for range 6 {
				ev := events[period%len(events)]
				ev.Time = now
				if timing == Offline {
					ev.Time = frameTime(int64(period/6)*64+3, testRate)
				}
				e.Send(ev)
				period++
			}
			if timing != Offline {
				now += 64_000_000_000 / testRate
				e.Wake(now)
			}
			e.Render(out)
			var m Measure
			e.Report(&m)
		})
		if allocs != 0 {
			t.Errorf("timing %d: %g allocations a period", timing, allocs)
		}
		if c := e.Counts(); c.Notes < 500 || c.Stolen == 0 {
			t.Errorf("timing %d: the engine was not busy: %+v", timing, c)
		}
	}
}

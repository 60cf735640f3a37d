package engine

import (
	"math"
	"runtime"
	"sync"
	"testing"
	"time"

	"tautwire/voice/measure"
)

// TestSteadyTimingIsOnePeriodToTheFrame sends notes at uneven times while callbacks wake with jitter,
// and finds in the sound where each begins.
func TestSteadyTimingIsOnePeriodToTheFrame(t *testing.T) {
	const period, periods = 64, 1500
	const frame = 1e9 / float64(testRate)
	e := New(compiledGut(t), Options{Rate: testRate, Period: period, Timing: Steady, Voices: 8})
	jitter := []int64{0, 90_000, -60_000, 130_000, 20_000, -110_000}
	start := int64(7e12)
	var worst int64
	for i := range int64(periods) {
		wake := start + int64(float64(i*period)*frame) + jitter[i%int64(len(jitter))]
		// A note whose first byte came at some frame of the period before.
		due := i*period - 17 - i%40
		if i > 700 && i%10 == 0 {
			e.Send(Event{Kind: NoteOn, Key: uint8(30 + i/10%40), Value: 90, Time: start + int64(float64(due)*frame)})
		}
		e.Wake(wake)
		e.Render(make([]float32, 2*period))
		for _, struck := range e.report.struck[:e.report.notes] {
			off := e.report.start + struck.frame - (due + period)
			worst = max(worst, off, -off)
		}
		if e.report.notes > 0 {
			var m Measure
			e.Report(&m)
			want := int64(float64(period+e.Delay()) * frame)
			if d := m.Latency[0] - want; m.Notes != 1 || d > 50_000 || d < -50_000 {
				t.Fatalf("%d notes, latency %d ns, want %d within 50 us", m.Notes, m.Latency[0], want)
			}
		}
	}
	if e.Counts().Notes < 70 {
		t.Fatalf("only %d notes sounded", e.Counts().Notes)
	}
	t.Logf("worst distance from a constant latency of %d frames: %d frames", period, worst)
	if worst > 2 {
		t.Errorf("a note came %d frames off, want at most 2", worst)
	}
	if late := e.Counts().Late; late > 0 {
		t.Errorf("%d events were late", late)
	}
}

func TestEagerTimingIsTheNextPeriod(t *testing.T) {
	e := New(compiledGut(t), Options{Rate: testRate, Period: 64, Timing: Eager, Voices: 8})
	out := make([]float32, 128)
	e.Wake(1e9)
	e.Render(out)
	e.Send(Event{Kind: NoteOn, Key: 50, Value: 100, Time: 1e9 + 5e8})
	e.Wake(1e9 + 1333333)
	e.Render(out)
	if e.report.notes != 1 || e.report.struck[0].frame != 0 {
		t.Errorf("%d notes at frame %d of the period, want 1 at 0", e.report.notes, e.report.struck[0].frame)
	}
}

func TestSwapIsForNotesToCome(t *testing.T) {
	before, after := compiledGut(t), compiled(t, wooden(), testRate)
	e := New(before, Options{Rate: testRate, Timing: Offline, Voices: 8})
	out := play(e, []Event{at(2400, NoteOn, 40, 127)}, 36000, every(64))
	old := e.channels[0].string[40]
	e.Swap(after)
	out = append(out, play(e, []Event{at(36500, NoteOn, 52, 1)}, 4000, every(64))...)
	if s := &e.strings.slots[old]; s.design != before.keys[40].design || s.orphan {
		t.Error("the sounding string did not stay as it was")
	}
	if s := &e.strings.slots[e.channels[0].string[52]]; s.design != after.keys[52].design {
		t.Error("the new note is not the new patch's")
	}
	out = append(out, play(e, []Event{at(40100, NoteOn, 40, 1)}, 24000, every(64))...)
	if s := &e.strings.slots[old]; s.design != nil && !s.orphan {
		t.Error("the old string still counts as its key's")
	}
	// Only the fade of the body is heard, from plain to modes.
	click, err := measure.Click(floored(leftOf(out)), testRate, 36000.0/testRate, 36000.0/testRate+0.06)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("click of a swap %.1f dB", click)
	if click > -100 {
		t.Errorf("the swap clicks at %.1f dB, want at most -100", click)
	}
}

func TestSwapRefusesAnotherRate(t *testing.T) {
	e := offline(t, gut(), 1)
	defer func() {
		if recover() == nil {
			t.Error("a patch for 44100 Hz was taken by an engine for 48000 Hz")
		}
	}()
	e.Swap(compiled(t, gut(), 44100))
}

func TestQuietFadesWithinASecond(t *testing.T) {
	e := offline(t, singing(), 8)
	play(e, []Event{at(0, NoteOn, 40, 127), at(0, Control, 64, 127)}, 9600, every(64))
	if e.Faded() {
		t.Fatal("faded before it was asked to")
	}
	e.Quiet()
	out := make([]float32, 128)
	frames := 0
	for !e.Faded() && frames < testRate {
		e.Render(out)
		frames += 64
	}
	t.Logf("silent after %d ms", frames*1000/testRate)
	if frames >= testRate/2 {
		t.Errorf("not faded after %d frames, want less than half a second", frames)
	}
	e.Render(out)
	if p := peak(out); p != 0 {
		t.Errorf("peak %g after the fade", p)
	}
}

// TestUndampedStringsSoundAlong plays one short note and listens to what an octave above it, held without
// being heard, makes of it.
func TestUndampedStringsSoundAlong(t *testing.T) {
	p := gut()
	p.Zones[0].Release = constant(0.05)
	p.Resonance.On = true
	p.Resonance.Level = 0
	level := func(events ...Event) float64 {
		e := offline(t, p, 8)
		out := play(e, append(events, at(200, NoteOn, 40, 127), at(24000, NoteOff, 40, 64)), 60000, every(64))
		return 20 * math.Log10(max(rms(out[2*48000:]), 1e-20))
	}
	e := offline(t, p, 8)
	loud := play(e, []Event{at(200, NoteOn, 40, 127)}, 24000, every(64))
	played := 20 * math.Log10(rms(loud))
	mute := level()
	octave := level(at(0, NoteOn, 52, 0.001))
	pedal := level(at(0, Control, 64, 127), at(23999, Control, 64, 127))
	t.Logf("the note %.1f dB; half a second after it: all damped %.1f, octave held %.1f, pedal down %.1f", played, mute, octave, pedal)
	if mute > played-80 {
		t.Errorf("damped strings sound at %.1f dB", mute)
	}
	if octave < played-60 || octave > played {
		t.Errorf("the held octave sounds at %.1f dB beside a note of %.1f", octave, played)
	}
	alone := func(on bool) float64 {
		p := *p
		p.Resonance.On = on
		return rms(play(offline(t, &p, 8), []Event{at(200, NoteOn, 40, 127)}, 24000, every(64)))
	}
	if with, without := alone(true), alone(false); math.Abs(with/without-1) > 1e-3 {
		t.Errorf("a string drives itself: RMS %g alone, %g without resonance", with, without)
	}
	p.Resonance.Level = -20
	if soft := level(at(0, NoteOn, 52, 0.001)); math.Abs(octave-20-soft) > 0.5 {
		t.Errorf("20 dB less resonance made %.1f dB of %.1f", soft, octave)
	}
	p.Resonance.On = false
	if off := level(at(0, NoteOn, 52, 0.001)); off > played-75 {
		t.Errorf("without resonance the octave sounds at %.1f dB", off)
	}
}

func TestSympathyRetiresWhenNothingMoves(t *testing.T) {
	p := gut()
	p.Zones[0].Decay = constant(0.3)
	p.Resonance.On = true
	e := offline(t, p, 8)
	play(e, []Event{at(0, Control, 64, 127), at(0, NoteOn, 40, 127)}, 4800, every(64))
	if n := e.Levels().Sympathetic; n < 20 {
		t.Fatalf("%d strings sound along under the pedal, want most of 45", n)
	}
	play(e, nil, 3*testRate, every(64))
	if l := e.Levels(); l.Sympathetic != 0 || l.Strings != 0 {
		t.Errorf("after three seconds %d strings and %d in sympathy are still computed", l.Strings, l.Sympathetic)
	}
}

func TestMetersReadWhatWasRendered(t *testing.T) {
	e := offline(t, gut(), 8)
	out := play(e, []Event{at(0, NoteOn, 40, 127), at(0, NoteOn, 47, 127)}, 48000, every(64))
	l := e.Levels()
	if l.Left != peak(out) || l.Strings != 2 || l.Reduction != 0 {
		t.Errorf("levels %+v, want a peak of %g and 2 strings", l, peak(out))
	}
	if again := e.Levels(); again.Left != 0 {
		t.Errorf("the peak stays at %g after it was read", again.Left)
	}
	e.SetVolume(12)
	for i := range 20 {
		e.Send(Event{Kind: NoteOn, Key: uint8(40 + i), Value: 127, Time: frameTime(e.frame, testRate)})
	}
	e.Render(make([]float32, 9600))
	if l := e.Levels(); l.Reduction <= 0 || l.Left > 1 {
		t.Errorf("levels of 20 loud strings: %+v; want the limiter at work", l)
	}
}

func TestProgramsAreHandedOn(t *testing.T) {
	e := offline(t, gut(), 1)
	if p, n := e.Program(); p != -1 || n != 0 {
		t.Errorf("program %d asked for %d times before any was", p, n)
	}
	play(e, []Event{at(0, Program, 0, 3), at(0, Program, 0, 5)}, 64, every(64))
	if p, n := e.Program(); p != 5 || n != 2 {
		t.Errorf("program %d asked for %d times, want 5, twice", p, n)
	}
}

// TestResetAfterAPanic leaves an engine half way and expects it to play after Reset.
func TestResetAfterAPanic(t *testing.T) {
	e := offline(t, singing(), 4)
	play(e, randomEvents(3, 200, 9600), 9600, every(64))
	e.strings.live = append(e.strings.live, 0)
	e.schedule.count = 5
	e.Reset()
	if p := peak(play(e, nil, 4800, every(64))); p != 0 {
		t.Errorf("peak %g after Reset", p)
	}
	if p := peak(play(e, []Event{at(e.frame, NoteOn, 60, 127)}, 4800, every(64))); p < 0.001 {
		t.Errorf("peak %g of a note after Reset", p)
	}
}

// TestEverySideAtOnce is for the race detector: MIDI, patches, readers and the callback. At the end
// all keys are let go, and no string may hang.
func TestEverySideAtOnce(t *testing.T) {
	small := singing()
	small.Zones[0].Low, small.Zones[0].High = 40, 64
	small.Zones[0].Decay = constant(0.2)
	patches := []*Compiled{compiled(t, small, testRate), nil}
	small.Body.Mix, small.Resonance.On = 0, false
	patches[1] = compiled(t, small, testRate)
	e := New(patches[0], Options{Rate: testRate, Period: 64, Timing: Steady, Voices: 10})
	var sides sync.WaitGroup
	done := make(chan struct{})
	sides.Add(3)
	go func() {
		defer sides.Done()
		for _, ev := range randomEvents(11, 20000, testRate) {
			ev.Time = Now()
			e.Send(ev)
			if ev.Key%16 == 0 {
				runtime.Gosched()
			}
		}
		for ch := range uint8(16) {
			e.Send(Event{Kind: ResetControllers, Channel: ch, Time: Now()})
			e.Send(Event{Kind: AllNotesOff, Channel: ch, Time: Now()})
		}
		close(done)
	}()
	go func() {
		defer sides.Done()
		for i := 0; ; i++ {
			select {
			case <-done:
				return
			default:
				e.Swap(patches[i%2])
				e.SetVolume(float64(-i % 7))
				time.Sleep(100 * time.Microsecond)
			}
		}
	}()
	go func() {
		defer sides.Done()
		for {
			select {
			case <-done:
				return
			default:
				e.Levels()
				e.Counts()
				e.Faded()
				e.Program()
				runtime.Gosched()
			}
		}
	}()
	out := make([]float32, 128)
	render := func() {
		e.Wake(Now())
		e.Render(out)
		var m Measure
		e.Report(&m)
		for _, x := range out {
			if !(x >= -1 && x <= 1) {
				t.Errorf("a sample of %g", x)
			}
		}
	}
	for sending := true; sending; {
		select {
		case <-done:
			sending = false
		default:
			render()
		}
	}
	sides.Wait()
	for range 3 * testRate / 64 {
		render()
	}
	c := e.Counts()
	t.Logf("%+v", c)
	if c.Notes == 0 || c.Stolen == 0 {
		t.Error("the engine was not busy")
	}
	if c.Strings != 0 {
		t.Errorf("%d strings hang", c.Strings)
	}
}

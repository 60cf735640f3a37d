package engine

import (
	"math"
	"testing"

	"tautwire/config"
	"tautwire/voice"
	"tautwire/voice/measure"
)

// gut is a dark patch: nothing of its own above 5 kHz, so that clicks show.
func gut() *config.Patch {
	p := stays()
	z := &p.Zones[0]
	z.Low, z.High = 28, 72
	z.Pan = constant(0)
	z.Decay, z.Brightness, z.Level = constant(6), constant(0), constant(0)
	z.Excitation.Kind, z.Excitation.Hardness = "pluck", constant(0)
	return p
}

// wooden is gut with all of sympathy, and a body of modes.
func wooden() *config.Patch {
	p := gut()
	p.Body = singing().Body
	p.Resonance = config.Resonance{On: true}
	return p
}

// leftOf is the left side of interleaved stereo.
func leftOf(out []float32) []float32 { return measure.Split(out, 2)[0] }

// floored adds a quiet low tone, for in silence measure.Click would be a quotient of nothing.
func floored(x []float32) []float32 {
	for i := range x {
		x[i] += float32(1e-4 * math.Sin(2*math.Pi*50*float64(i)/testRate))
	}
	return x
}

// TestStolenStringFadesWithoutClick has one string, and lets the softest note take it from a
// loud one. The control cuts the same note hard.
func TestStolenStringFadesWithoutClick(t *testing.T) {
	const struck, stolen, frames = 2400, 36000, 60000
	events := []Event{at(struck, NoteOn, 40, 127), at(stolen, NoteOn, 52, 0.05)}
	e := offline(t, gut(), 1)
	out := leftOf(play(e, events, frames, every(64)))
	if c := e.Counts(); c.Stolen != 1 {
		t.Fatalf("%d strings were stolen, want 1", c.Stolen)
	}
	from := float64(stolen+e.Delay()) / testRate
	cut := append([]float32(nil), out...)
	clear(cut[stolen+e.Delay():])
	if r := rms(out[stolen+480:]); r > 1e-4 {
		t.Errorf("the stolen string still sounds, RMS %g", r)
	}
	click, err := measure.Click(floored(out), testRate, from, from+0.002)
	if err != nil {
		t.Fatal(err)
	}
	hard, err := measure.Click(floored(cut), testRate, from, from+0.002)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("click of a stolen string %.1f dB, of a hard cut %.1f dB", click, hard)
	if click > -100 {
		t.Errorf("click %.1f dB, want at most -100", click)
	}
	if hard < -60 {
		t.Errorf("the control, a hard cut, clicks at %.1f dB only", hard)
	}
}

func TestTheWeakestReleasedStringGivesWay(t *testing.T) {
	// Key 40 is the weakest, and held; of the released 45 and 50 the latter is weaker.
	events := []Event{
		at(0, NoteOn, 40, 10), at(1, NoteOn, 45, 127), at(2, NoteOn, 50, 60),
		at(9000, NoteOff, 45, 0), at(9000, NoteOff, 50, 0), at(9600, NoteOn, 55, 100),
	}
	p := gut()
	p.Zones[0].Release = constant(5)
	e := offline(t, p, 3)
	play(e, events, 9700, every(64))
	c := &e.channels[0]
	if c.string[50] != none {
		t.Error("the weakest released string was kept")
	}
	for _, key := range []int{40, 45, 55} {
		if c.string[key] == none {
			t.Errorf("key %d lost its string", key)
		}
	}
}

func TestRestrikeIsTheSameString(t *testing.T) {
	e := offline(t, gut(), 8)
	play(e, []Event{at(0, NoteOn, 40, 100), at(500, NoteOff, 40, 0), at(700, NoteOn, 40, 100), at(800, NoteOn, 40, 50)}, 1000, every(64))
	if n := len(e.strings.live); n != 1 {
		t.Errorf("%d strings sound after one key was struck three times, want 1", n)
	}
}

func TestKeysOutsideAllZonesAreSilent(t *testing.T) {
	e := offline(t, gut(), 8)
	out := play(e, []Event{at(0, NoteOn, 27, 127), at(0, NoteOn, 73, 127)}, 4800, every(64))
	if p := peak(out); p != 0 {
		t.Errorf("peak %g, want silence", p)
	}
	if c := e.Counts(); c.Notes != 2 {
		t.Errorf("%d notes counted, want 2", c.Notes)
	}
}

// TestDampersAndPedals follows a note's level some time after its key was let go.
func TestDampersAndPedals(t *testing.T) {
	const off, look = 9600, 28800
	pedal := func(frame int64, number int, value float32) Event { return at(frame, Control, number, value) }
	note := []Event{at(100, NoteOn, 50, 100)}
	release := at(off, NoteOff, 50, 64)
	tests := []struct {
		name       string
		events     []Event
		rings      bool
		above, dbs float64 // bounds of the level, dB of the held note's
	}{
		{name: "held", events: note, above: -0.1, dbs: 0.1},
		{name: "let go", events: []Event{note[0], release}, above: -400, dbs: -60},
		{name: "note on with velocity 0", events: []Event{note[0], at(off, NoteOn, 50, 0)}, above: -400, dbs: -60},
		{name: "let go slowly", events: []Event{note[0], at(off, NoteOff, 50, 1)}, above: -50, dbs: -20},
		{name: "damper down", events: []Event{note[0], pedal(9000, 64, 127), release}, above: -0.1, dbs: 0.1},
		{name: "half pedal", events: []Event{note[0], pedal(9000, 64, 80), release}, above: -40, dbs: -10},
		{name: "damper let up", events: []Event{note[0], pedal(9000, 64, 127), release, pedal(9700, 64, 0)}, above: -400, dbs: -60},
		{name: "sostenuto", events: []Event{note[0], pedal(9000, 66, 127), release}, above: -0.1, dbs: 0.1},
		{name: "sostenuto too early", events: []Event{pedal(0, 66, 127), note[0], release}, above: -400, dbs: -60},
		{name: "sostenuto let up", events: []Event{note[0], pedal(9000, 66, 127), release, pedal(9700, 66, 0)}, above: -400, dbs: -60},
		{name: "all notes off", events: []Event{note[0], at(off, AllNotesOff, 0, 0)}, above: -400, dbs: -60},
		{name: "all notes off, damper down", events: []Event{note[0], pedal(9000, 64, 127), at(off, AllNotesOff, 0, 0)}, above: -0.1, dbs: 0.1},
		{name: "reset under the damper", events: []Event{note[0], pedal(9000, 64, 127), release, at(9700, ResetControllers, 0, 0)}, above: -400, dbs: -60},
		{name: "controller 123", events: []Event{note[0], pedal(off, 123, 0)}, above: -400, dbs: -60},
		{name: "controller 120", events: []Event{note[0], pedal(off, 120, 0)}, above: -400, dbs: -300},
		{name: "soft while it sounds", events: []Event{note[0], pedal(9000, 67, 127)}, above: -0.1, dbs: 0.1},
	}
	p := gut()
	p.Zones[0].Release = constant(0.3)
	patch := compiled(t, p, testRate)
	level := func(events []Event) float64 {
		e := New(patch, Options{Rate: testRate, Timing: Offline, Voices: 4})
		out := play(e, events, look+4800, every(64))
		return 20 * math.Log10(max(rms(out[2*look:]), 1e-20))
	}
	held := level(note)
	for _, test := range tests {
		if got := level(test.events) - held; got < test.above || got > test.dbs {
			t.Errorf("%s: %.2f dB, want %g to %g", test.name, got, test.above, test.dbs)
		}
	}
}

func TestAllSoundOffWithin5msWithoutClick(t *testing.T) {
	const struck, off, frames = 2400, 36000, 60000
	for name, p := range map[string]*config.Patch{"strings": gut(), "strings, body and sympathy": wooden()} {
		e := offline(t, p, 8)
		events := []Event{at(struck, NoteOn, 40, 120), at(struck, NoteOn, 47, 100), at(struck, Control, 64, 127), at(off+5, AllSoundOff, 0, 0)}
		out := leftOf(play(e, events, frames, every(64)))
		if p := peak(out[off+5+testRate*5/1000:]); p > 1e-6 {
			t.Errorf("%s: 5 ms after, the peak is %g", name, p)
		}
		from := float64(off) / testRate
		click, err := measure.Click(floored(out), testRate, from, from+0.005)
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%s: click %.1f dB; %+v", name, click, e.Levels())
		if click > -100 {
			t.Errorf("%s: click %.1f dB, want at most -100", name, click)
		}
	}
}

// TestPanFollowsRP036 has the table of RP-036, Default Pan Formula, by its own formula: 20 log10 of
// cos and sin of pi/2 * max(0, v-1)/126.
func TestPanFollowsRP036(t *testing.T) {
	pan := newPanTable()
	for v := range 128 {
		left, right := pan.gains(panPlace(float32(v)))
		angle := math.Pi / 2 * math.Max(0, float64(v)-1) / 126
		if math.Abs(float64(left)-math.Cos(angle)) > 1e-6 || math.Abs(float64(right)-math.Sin(angle)) > 1e-6 {
			t.Errorf("pan %d: %.7f and %.7f, want %.7f and %.7f", v, left, right, math.Cos(angle), math.Sin(angle))
		}
	}
	if left, right := pan.gains(panPlace(127)); left != 0 || right != 1 {
		t.Errorf("pan 127: %g and %g, want 0 and 1", left, right)
	}
}

func TestLevelsOfControllers(t *testing.T) {
	level := func(events ...Event) (left, right float64) {
		e := New(compiledGut(t), Options{Rate: testRate, Timing: Offline, Voices: 4})
		sides := measure.Split(play(e, append(events, at(4800, NoteOn, 50, 100)), 14400, every(64)), 2)
		return rms(sides[0]), rms(sides[1])
	}
	whole, _ := level()
	tests := []struct {
		name        string
		events      []Event
		left, right float64 // dB
	}{
		{"volume 127", []Event{at(0, Control, 7, 127)}, 40 * math.Log10(127.0/100), 40 * math.Log10(127.0/100)},
		{"volume 50", []Event{at(0, Control, 7, 50)}, 40 * math.Log10(0.5), 40 * math.Log10(0.5)},
		{"expression 64", []Event{at(0, Control, 11, 64)}, 40 * math.Log10(64.0/127), 40 * math.Log10(64.0/127)},
		{"pan 1", []Event{at(0, Control, 10, 1)}, 20 * math.Log10(math.Sqrt2), -200},
		{"pan 127", []Event{at(0, Control, 10, 127)}, -200, 20 * math.Log10(math.Sqrt2)},
		{"reset keeps volume and pan", []Event{at(0, Control, 7, 50), at(0, Control, 10, 1), at(1, ResetControllers, 0, 0)}, 40*math.Log10(0.5) + 20*math.Log10(math.Sqrt2), -200},
		{"reset brings expression back", []Event{at(0, Control, 11, 1), at(1, ResetControllers, 0, 0)}, 0, 0},
	}
	for _, test := range tests {
		left, right := level(test.events...)
		check := func(side string, got, want float64) {
			db := 20 * math.Log10(max(got/whole, 1e-10))
			if math.Abs(db-want) > 0.05 {
				t.Errorf("%s: %s %.2f dB, want %.2f", test.name, side, db, want)
			}
		}
		check("left", left, test.left)
		check("right", right, test.right)
	}
}

func compiledGut(t testing.TB) *Compiled { return compiled(t, gut(), testRate) }

// TestRunawayStringIsCured puts numbers that are none into a sounding string.
func TestRunawayStringIsCured(t *testing.T) {
	t.Run("strings", func(t *testing.T) { cures(t, stays()) })
	t.Run("body and sympathy", func(t *testing.T) { cures(t, singing()) })
}

func cures(t *testing.T, p *config.Patch) {
	// A key of 14 frames a period, so that the poison comes out before the next step of the grid.
	const swift = 105
	for _, poison := range []float32{float32(math.NaN()), float32(math.Inf(1)), 1e30} {
		e := offline(t, p, 8)
		out := play(e, []Event{at(0, NoteOn, swift, 100), at(0, NoteOn, 60, 100), at(0, Control, 64, 127)}, 5000, every(64))
		bad := e.channels[0].string[swift]
		e.strings.slots[bad].voice.Push(e.place()%voice.Grid, []float32{poison})
		after := play(e, nil, 20000, every(64))
		for i := e.Delay(); i < e.Delay()+64; i++ {
			if after[2*i] == 0 {
				t.Fatalf("%g: the other string is missing %d frames after", poison, i)
			}
		}
		out = append(out, after...)
		for i, x := range out {
			if !(x >= -1 && x <= 1) {
				t.Fatalf("%g: sample %d is %g", poison, i, x)
			}
		}
		if e.Counts().Cured == 0 {
			t.Errorf("%g: nothing was counted as cured", poison)
		}
		if e.channels[0].string[swift] != none {
			t.Errorf("%g: the string is still there", poison)
		}
		if r := rms(out[len(out)-8000:]); r < 1e-5 {
			t.Errorf("%g: the other string has fallen silent, RMS %g", poison, r)
		}
		more := play(e, []Event{at(25100, NoteOn, swift, 100)}, 4800, every(64))
		if r := rms(more); r < 1e-3 {
			t.Errorf("%g: the key no longer plays, RMS %g", poison, r)
		}
	}
}

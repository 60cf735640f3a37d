package main

import (
	"io"
	"maps"
	"math"
	"slices"
	"strings"
	"testing"
)

const rate = 48000

// show builds a take as a good daemon leaves it, piece by piece.
type show struct{ *take }

// play adds seconds of a few partials of each key, falling by decay dB a second
// from level, in dB of full scale.
func (s show) play(seconds, level, decay float64, keys ...float64) {
	n := int(seconds * rate)
	piece := make([]float32, n)
	for _, key := range keys {
		f0 := 440 * math.Exp2((key-69)/12)
		for i := range piece {
			t := float64(i) / rate
			amplitude := math.Pow(10, (level-decay*t)/20)
			for h := 1.0; h <= 4; h++ {
				piece[i] += float32(amplitude / h * math.Sin(2*math.Pi*h*f0*t))
			}
		}
	}
	s.sound = append(s.sound, piece...)
}

func (s show) mark(name string) { s.marks[name] = len(s.sound) }

func (s show) hear(mark string, keys ...float64) {
	s.mark(mark)
	s.play(0.6, -20, 6, keys...)
	s.mark(mark + "-end")
}

// goodShow is what guest/scenarios leaves when all is well. change gives the
// keys that really sound, by mark; a key below 0 is silence.
func goodShow(change map[string][]float64) show {
	s := show{&take{rate: rate, marks: map[string]int{}, logs: map[string][]logRecord{}, told: map[string]string{"none": "tautwire: no device\n"}}}
	s.facts = map[string]string{
		"tune-exit": "0", "survived": "yes",
		"stage-exit": "0", "stage-seconds": "0.42",
		"stream-exit": "0", "stream-seconds": "0.4",
		"none-exit": "1",
	}
	s.logs["stage"] = []logRecord{
		{Event: "start"},
		{Event: "port", What: "lost"},
		{Event: "device", What: "lost"},
		{Event: "device", What: "regained"},
	}
	hear := func(mark string, keys ...float64) {
		if other, ok := change[mark]; ok {
			keys = other
		}
		s.hear(mark, keys...)
	}
	hear("key-30", 48)
	hear("key-3C", 60)
	hear("key-45", 69)
	hear("key-54", 84)
	hear("chord", 48, 55, 64)
	hear("held", 52, 59, 68)
	s.play(1.5, -24, 300, 52, 59, 68)
	s.mark("pulled")
	hear("again", 72)
	hear("tune", 75)
	hear("regained", 65)
	hear("last", 54)
	s.play(0.4, -24, 200, 54)
	s.mark("ended")
	hear("stream", 74)
	return s
}

// failures are the names of the scenarios that fail.
func failures(s show) (names []string) {
	for _, scenario := range scenarios() {
		if _, err := scenario.judge(s.take); err != nil {
			names = append(names, scenario.name)
		}
	}
	return names
}

func TestGoodShowPasses(t *testing.T) {
	var out strings.Builder
	if failed := judge(&out, goodShow(nil).take); failed != 0 || !strings.HasSuffix(out.String(), "\n8 passed, 0 failed\n") {
		t.Errorf("%d scenarios of a good show failed:\n%s", failed, out.String())
	}
}

func TestWrongSoundFails(t *testing.T) {
	const first, held, again, tune, gained, last, stream = 0, 1, 2, 3, 4, 5, 6
	places := map[string]int{
		"key-30": first, "key-3C": first, "key-45": first, "key-54": first, "chord": first,
		"held": held, "again": again, "tune": tune, "regained": gained, "last": last, "stream": stream,
	}
	right := map[string][]float64{
		"key-30": {48}, "key-3C": {60}, "key-45": {69}, "key-54": {84}, "chord": {48, 55, 64},
		"held": {52, 59, 68}, "again": {72}, "tune": {75}, "regained": {65}, "last": {54}, "stream": {74},
	}
	for _, mark := range slices.Sorted(maps.Keys(places)) {
		keys := right[mark]
		wrong := map[string][]float64{
			"silent":              {},
			"a semitone sharp":    {keys[0] + 1},
			"a fifth of a tone":   {keys[0] - 0.4},
			"12 cents flat":       {keys[0] - 0.12},
			"a note of the chord": keys[:len(keys)-1],
		}
		if len(keys) == 1 {
			wrong["an octave low"] = []float64{keys[0] - 12}
		}
		for name, sounding := range wrong {
			hurt := scenarios()[places[mark]]
			if found, err := hurt.judge(goodShow(map[string][]float64{mark: sounding}).take); err == nil {
				t.Errorf("%s %s: %q passed: %s", mark, name, hurt.name, found)
			}
		}
	}
}

func TestWrongFactsFail(t *testing.T) {
	for _, c := range []struct {
		name  string
		spoil func(s show)
		fails string
	}{
		{"the port's loss is not in the log", func(s show) { s.logs["stage"] = slices.Delete(s.logs["stage"], 1, 2) }, "mid-chord"},
		{"the device's loss is not in the log", func(s show) { s.logs["stage"] = slices.Delete(s.logs["stage"], 2, 3) }, "interface pulled out"},
		{"the device's return is not in the log", func(s show) { s.logs["stage"] = s.logs["stage"][:3] }, "interface pulled out"},
		{"the daemon dies with the device", func(s show) { delete(s.facts, "survived") }, "interface pulled out"},
		{"aplaymidi finds no port", func(s show) { s.facts["tune-exit"] = "1" }, "another program"},
		{"the daemon had to be killed", func(s show) { s.facts["stage-exit"] = "137" }, "SIGTERM"},
		{"the daemon took long to end", func(s show) { s.facts["stage-seconds"] = "2.1" }, "SIGTERM"},
		{"the second daemon crashed", func(s show) { s.facts["stream-exit"] = "2" }, "byte stream"},
		{"without a device it succeeds", func(s show) { s.facts["none-exit"] = "0" }, "no sound device"},
		{"without a device it says nothing", func(s show) { s.told["none"] = "" }, "no sound device"},
		{"the sound stops with the keyboard", func(s show) { s.marks["pulled"] = s.marks["held-end"] }, "mid-chord"},
		{"the guest stopped before the stream", func(s show) { delete(s.marks, "stream") }, "byte stream"},
		{"the notes hang", func(s show) {
			rest := s.sound[s.marks["held-end"]:s.marks["pulled"]]
			ringing := show{&take{rate: rate}}
			ringing.play(float64(len(rest))/rate, -24, 6, 52, 59, 68)
			copy(rest, ringing.sound)
		}, "mid-chord"},
		{"one note hangs", func(s show) {
			rest := s.sound[s.marks["held-end"]:s.marks["pulled"]]
			ringing := show{&take{rate: rate}}
			ringing.play(float64(len(rest))/rate, -24, 6, 59)
			copy(rest, ringing.sound)
		}, "mid-chord"},
		{"the last note is cut off", func(s show) {
			end := s.sound[s.marks["last-end"]:s.marks["ended"]]
			ringing := show{&take{rate: rate}}
			ringing.play(float64(len(end))/rate, -24, 6, 54)
			copy(end, ringing.sound)
		}, "SIGTERM"},
	} {
		s := goodShow(nil)
		c.spoil(s)
		got := failures(s)
		if len(got) != 1 || !strings.Contains(got[0], c.fails) {
			t.Errorf("%s: %q failed; only the one of %q should", c.name, got, c.fails)
		}
	}
}

func TestNothingLeftBehindFailsAll(t *testing.T) {
	missing, err := readTake(t.TempDir())
	if err == nil || !strings.Contains(err.Error(), "interface.wav") || !strings.Contains(err.Error(), "record") {
		t.Errorf("an empty folder: %v; the error should name both files", err)
	}
	if failed := judge(io.Discard, missing); failed != len(scenarios()) {
		t.Errorf("an empty folder: %d of %d scenarios failed", failed, len(scenarios()))
	}
}

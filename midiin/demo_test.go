package midiin

import (
	"bytes"
	"flag"
	"os"
	"strings"
	"testing"
	"time"

	"tautwire/engine"
)

//go:generate go test -run TestNightWatchFile -write .
var writeFile = flag.Bool("write", false, "write the demo performance to testdata")

// The file that the README renders is the score.
func TestNightWatchFile(t *testing.T) {
	const path = "../testdata/night-watch.mid"
	want, err := DemoSMF()
	if err != nil {
		t.Fatal(err)
	}
	if *writeFile {
		if err := os.WriteFile(path, want, 0o644); err != nil {
			t.Fatal(err)
		}
	}
	got, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(got, want) {
		t.Errorf("%s is not the score of demo.go: run `go generate ./midiin`", path)
	}
}

// The demo shows what it is there to show.
func TestDemo(t *testing.T) {
	p, err := Demo()
	if err != nil {
		t.Fatal(err)
	}
	if p.End.Round(time.Millisecond) != time.Minute { // a tempo is whole us to a beat
		t.Errorf("lasts %v, want a minute", p.End)
	}
	if p.Name != DemoTitle {
		t.Errorf("is called %q", p.Name)
	}
	var low, high uint8 = 127, 0
	var soft, hard float32 = 127, 0
	down := map[[2]uint8]bool{}
	together, most, restrikes, half := 0, 0, 0, false
	last := map[uint8]int64{}
	kinds := map[engine.Kind]int{}
	controls := map[uint8]int{}
	var bent float32
	for _, e := range p.Events {
		kinds[e.Kind]++
		k := [2]uint8{e.Channel, e.Key}
		switch e.Kind {
		case engine.NoteOn:
			if down[k] {
				t.Errorf("at %d ns, key %d of channel %d is struck while it is down", e.Time, e.Key, e.Channel)
			}
			if before, ok := last[e.Key]; ok && e.Time-before < int64(time.Second) {
				restrikes++
			}
			last[e.Key] = e.Time
			down[k] = true
			low, high = min(low, e.Key), max(high, e.Key)
			soft, hard = min(soft, e.Value), max(hard, e.Value)
		case engine.NoteOff:
			delete(down, k)
		case engine.Control:
			controls[e.Key]++
			half = half || e.Key == damper && e.Value > 20 && e.Value < 107
		case engine.Bend:
			bent = max(bent, e.Value)
		}
		together = len(down)
		most = max(most, together)
	}
	if len(down) > 0 {
		t.Errorf("keys left down: %v", down)
	}
	if low != 21 || high != 108 {
		t.Errorf("keys %d to %d, want a piano's, 21 to 108", low, high)
	}
	if soft > 30 || hard < 115 {
		t.Errorf("velocities %v to %v: want softer and harder ones", soft, hard)
	}
	if most < 6 || restrikes < 30 || !half || bent < 11.9 {
		t.Errorf("keys together %d, restrikes %d, half-pedal %v, bends to %v", most, restrikes, half, bent)
	}
	for _, c := range []uint8{modulation, expression, damper, 67} {
		if controls[c] == 0 {
			t.Errorf("controller %d is not shown", c)
		}
	}
}

// Every voice ends with the last bar.
func TestDemoVoicesEndTogether(t *testing.T) {
	data, err := DemoSMF()
	if err != nil {
		t.Fatal(err)
	}
	_, clock, err := vet(data)
	if err != nil {
		t.Fatal(err)
	}
	if clock.den != ticksPerBeat {
		t.Errorf("division %d, want %d", clock.den, ticksPerBeat)
	}
	for voice, ticks := range voiceLengths(t) {
		if ticks != 19*4*ticksPerBeat {
			t.Errorf("%s has %v beats, want 76", voice, float64(ticks)/ticksPerBeat)
		}
	}
}

func TestScoreErrors(t *testing.T) {
	for _, score := range []string{
		"tempo slow", "bells 17 C4:1", "bells 1 H4:1", "bells 1 C4:1/7", "bells 1 C4:0", "bells 1 C99",
		"bells 1 @200", "bells 1 mod=x", "bells 1 mod>5:q", "bells 1 wah=3", "bells 1 C4:1xq", "bells 1 %x", "bells 1 C",
	} {
		if _, err := engrave("", score); err == nil {
			t.Errorf("%q: no error", score)
		}
	}
}

func voiceLengths(t *testing.T) map[string]int {
	t.Helper()
	lengths := map[string]int{}
	voices := map[string]*scoreVoice{}
	for line := range strings.Lines(nightWatch) {
		words := strings.Fields(line)
		if len(words) < 2 || words[0] == "tempo" {
			continue
		}
		if voices[words[0]] == nil {
			voices[words[0]] = newScoreVoice(0)
		}
		for _, w := range words[2:] {
			if err := voices[words[0]].word(w); err != nil {
				t.Fatal(err)
			}
		}
		lengths[words[0]] = voices[words[0]].now
	}
	return lengths
}

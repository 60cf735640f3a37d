package midiin

import (
	"bytes"
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"

	"gitlab.com/gomidi/midi/v2"
	"gitlab.com/gomidi/midi/v2/smf"
)

// DemoTitle is the demo performance's.
const DemoTitle = "Night watch at Ravenness"

// nightWatch is the demo's score, a minute long: 19 bars of four beats. The stays are the
// low strings, the lantern turns in the middle, the bells are the wires outside; on a channel of its own the
// foghorn answers from over the water. At bar 11 the weather comes in; at 15 it has gone by.
//
// A line is a voice, its channel, and what it plays in a bar, or in several:
//
//	D2+A2:3/2    strikes keys together and goes on a beat and a half later
//	A5           the same, as long as the note before
//	C6:1/4x6     six times
//	-:2          rests two beats
//	@70          velocity from here on
//	%50          keys are let go after half of their length
//	damper=127   sets damper, soft, mod or expression at once
//	mod>60:3     moves it there in three beats, while the music goes on
//	bend>-2:1    the wheel, in semitones; range=12 sets its range
const nightWatch = `
tempo 76

pedal 1    damper=127 -:16
pedal 1    damper=0 -:1/4 damper=127 -:15/4
pedal 1    damper=0 -:1/4 damper=127 -:15/4
pedal 1    damper=0 -:1/4 damper=127 -:15/4
pedal 1    damper=0 -:1/4 damper=127 -:15/4
pedal 1    damper=0 -:1/4 damper=127 -:15/4
pedal 1    damper=0 -:1/4 damper=127 -:15/4
pedal 1    damper=0 -:16
pedal 1    damper=127 -:4
pedal 1    damper=0 -:1/4 damper=127 -:15/4
pedal 1    damper=0 -:1/4 damper=127 -:15/4
pedal 1    damper=0 -:1/4 soft=127 damper=127 -:15/4
pedal 1    damper=64 -:2 damper>0:2 -:2 soft=0

stays 1    @60 D2:4
stays 1    D2+A2:4
stays 1    Bb1+F2:4
stays 1    @72 A1+E2:4
stays 1    @70 D2+A2:2 @58 D3:2
stays 1    @70 Bb1+F2:2 @58 Bb2:2
stays 1    @74 F1+C2:2 @60 F2:2
stays 1    @74 C2+G2:2 @60 E2:2
stays 1    @78 G1+D2:2 @64 G2:2
stays 1    @84 A1+E2:2 A1+E2:1x2
stays 1    @96 %60 D1+D2:1 D2:1/2x2 D1+D2:1 A1
stays 1    @102 Bb0+Bb1:1 Bb1:1/2x2 Bb0+Bb1:1 F1
stays 1    @110 G1:1/2x4 A1:1/2x4
stays 1    @120 %100 A0:4
stays 1    @60 D2+A2:4
stays 1    @54 Bb1+F2:4
stays 1    @48 G1+D2:4
stays 1    @44 A1+E2:4
stays 1    @36 D1+D2:4

lantern 1  -:16
lantern 1  @56 D3:1/2 A3 E4 F4 A4 F4 E4 A3
lantern 1  F3 Bb3 D4 F4 A4 F4 D4 Bb3
lantern 1  F3 C4 G4 A4 C5 A4 G4 C4
lantern 1  E3 G3 D4 E4 G4 E4 D4 G3
lantern 1  @66 G3 D4 F4 Bb4 D5 Bb4 F4 D4
lantern 1  @74 A3 E4 G4 C#5 E5:1/4 C#5 A4 G4 E4 C#4 A3 E3
lantern 1  @88 %80 D4+F4+A4:1 -:1/2 D4+F4+A4 E4+G4+Bb4:1 F4+A4+C5
lantern 1  @96 F4+Bb4+D5:1 -:1/2 F4+Bb4+D5 F4+A4+C5:1 D4+F4+Bb4
lantern 1  @104 G4+Bb4+D5:1/2x4 A4+C#5+E5:1/2x4
lantern 1  @118 %100 A3+E4+A4+C#5:4
lantern 1  @50 D3:1/2 A3 E4 F4 A4 F4 E4 A3
lantern 1  @46 F3 Bb3 D4 F4 A4 F4 D4 Bb3
lantern 1  @42 G3 Bb3 D4 F4 Bb4 F4 D4 Bb3
lantern 1  @38 A3:1 C#4 E4 A4
lantern 1  @30 D3+A3+E4+F4:4

bells 1    -:2 @52 A5:1 D6
bells 1    -:3 @46 E6:1
bells 1    -:2 @52 F5:1/2 A5 D6:1
bells 1    -:1 @58 C#6:1/4x6 E6:3/2
bells 1    -:4
bells 1    -:2 @62 D6:3/2 C6:1/2
bells 1    A5:3 G5:1
bells 1    @66 E5:2 G5:1 C6
bells 1    @72 Bb5:3/2 A5:1/2 G5:1 D6
bells 1    @80 C#6:1 E6 A6:1/4x8
bells 1    @92 %70 D6:1/2 F6 E6 D6 A6:1 A5
bells 1    @98 D6:1/2 F6 Bb6 A6 F6:1 D6
bells 1    @104 G6:1/4x8 A6:1/4x8
bells 1    @112 %100 C#7:1/2 E7 A7 C8 -:2
bells 1    -:2 @48 A5:1 F6
bells 1    -:3 @44 D6:1
bells 1    -:2 @40 D6:1/2 F6 Bb6:1
bells 1    -:2 @36 E6:2
bells 1    -:2 @28 D7:2

foghorn 2  -:1 expression=100 @76 bend=-2 bend>0:1 A2:3
foghorn 2  -:4
foghorn 2  -:1 @80 bend=-2 bend>0:1 mod>60:3 F3:3
foghorn 2  mod=0 -:12
foghorn 2  @78 A4:2 mod>70:2 C5:2
foghorn 2  mod=0 G4:1 bend>2:1/2 G4:2 bend>0:1/2 -:1
foghorn 2  bend=0 @84 D5:3/2 mod>80:2 F5:5/2
foghorn 2  mod=0 @92 E5:2 range=12 bend>12:2 A4:2
foghorn 2  bend=0 range=2 -:12
foghorn 2  @100 expression=127 expression>40:4 A1:4
foghorn 2  expression=100 -:4
foghorn 2  -:1 @60 bend=-2 bend>0:1 F3:3
foghorn 2  -:4
foghorn 2  -:1 @52 bend=-2 bend>0:1 mod>50:3 A2:3
foghorn 2  mod=0 -:4
`

// Demo gives the demo performance.
func Demo() (*Performance, error) {
	data, err := DemoSMF()
	if err != nil {
		return nil, err
	}
	return ParseSMF(DemoTitle, data)
}

// DemoSMF gives the demo performance as a standard MIDI file of type 1, a track a voice.
func DemoSMF() ([]byte, error) { return engrave(DemoTitle, nightWatch) }

const (
	ticksPerBeat = 480
	// glideStep is how often a glide moves, in ticks: some 16 ms at the demo's tempo.
	glideStep = 10
)

// engrave makes a standard MIDI file of a score, whose form nightWatch tells.
func engrave(title, score string) ([]byte, error) {
	file := smf.NewSMF1()
	file.TimeFormat = smf.MetricTicks(ticksPerBeat)
	var head smf.Track
	head.Add(0, smf.MetaTrackSequenceName(title))
	var order []string
	voices := map[string]*scoreVoice{}
	for i, line := range strings.Split(score, "\n") {
		words := strings.Fields(line)
		if len(words) < 2 {
			continue
		}
		if words[0] == "tempo" {
			bpm, err := strconv.ParseFloat(words[1], 64)
			if err != nil || bpm <= 0 {
				return nil, fmt.Errorf("score line %d: tempo %q: a number of beats a minute is wanted", i+1, words[1])
			}
			head.Add(0, smf.MetaTempo(bpm))
			continue
		}
		voice := voices[words[0]]
		if voice == nil {
			channel, err := strconv.Atoi(words[1])
			if err != nil || channel < 1 || channel > 16 {
				return nil, fmt.Errorf("score line %d: channel %q: 1 to 16 is wanted", i+1, words[1])
			}
			voice = newScoreVoice(uint8(channel - 1))
			voices[words[0]] = voice
			order = append(order, words[0])
		}
		for _, word := range words[2:] {
			if err := voice.word(word); err != nil {
				return nil, fmt.Errorf("score line %d: %q: %w", i+1, word, err)
			}
		}
	}
	head.Close(0)
	if err := file.Add(head); err != nil {
		return nil, err
	}
	for _, name := range order {
		if err := file.Add(voices[name].track(name)); err != nil {
			return nil, err
		}
	}
	var out bytes.Buffer
	if _, err := file.WriteTo(&out); err != nil {
		return nil, err
	}
	return out.Bytes(), nil
}

// scoreVoice is one voice while its score is read.
type scoreVoice struct {
	channel  uint8
	now      int // ticks
	length   int // of the last note, ticks
	velocity uint8
	held     int // percent of a note's length for which its key is held
	bendable float64
	moved    map[string]float64 // where each controller stands
	events   []scoreEvent
}

type scoreEvent struct {
	tick    int
	release bool // goes before what else is at its tick
	message midi.Message
}

func newScoreVoice(channel uint8) *scoreVoice {
	return &scoreVoice{channel: channel, length: ticksPerBeat, velocity: 64, held: 100, bendable: 2, moved: map[string]float64{}}
}

func (v *scoreVoice) word(word string) error {
	if value, ok := strings.CutPrefix(word, "@"); ok {
		n, err := strconv.ParseUint(value, 10, 7)
		v.velocity = uint8(n)
		return err
	}
	if value, ok := strings.CutPrefix(word, "%"); ok {
		n, err := strconv.ParseUint(value, 10, 7)
		v.held = int(n)
		return err
	}
	if name, value, ok := strings.Cut(word, "="); ok {
		to, err := strconv.ParseFloat(value, 64)
		if err != nil {
			return err
		}
		return v.move(name, to, 0)
	}
	if name, value, ok := strings.Cut(word, ">"); ok {
		amount, length, _ := strings.Cut(value, ":")
		to, err := strconv.ParseFloat(amount, 64)
		if err != nil {
			return err
		}
		ticks, err := beats(length)
		if err != nil {
			return err
		}
		return v.move(name, to, ticks)
	}
	return v.note(word)
}

// note strikes keys, or rests.
func (v *scoreVoice) note(word string) error {
	keys, length, timed := strings.Cut(word, ":")
	length, times, repeated := strings.Cut(length, "x")
	if timed {
		ticks, err := beats(length)
		if err != nil {
			return err
		}
		v.length = ticks
	}
	count := 1
	if repeated {
		n, err := strconv.Atoi(times)
		if err != nil {
			return err
		}
		count = n
	}
	for range count {
		if keys != "-" {
			for _, name := range strings.Split(keys, "+") {
				key, err := keyNumber(name)
				if err != nil {
					return err
				}
				v.add(v.now, midi.NoteOn(v.channel, key, v.velocity))
				v.events = append(v.events, scoreEvent{v.now + v.length*v.held/100, true, midi.NoteOff(v.channel, key)})
			}
		}
		v.now += v.length
	}
	return nil
}

func (v *scoreVoice) add(tick int, m midi.Message) {
	v.events = append(v.events, scoreEvent{tick: tick, message: m})
}

// move brings a controller, or the wheel, to a value within some ticks, in even steps.
func (v *scoreVoice) move(name string, to float64, ticks int) error {
	numbers := map[string]uint8{"damper": damper, "soft": soft, "mod": modulation, "expression": expression}
	if name == "range" {
		v.bendable = to
		for _, c := range [][2]uint8{{rpnMSB, 0}, {rpnLSB, rpnBendRange}, {dataEntryMSB, uint8(to)}, {rpnMSB, 127}, {rpnLSB, 127}} {
			v.add(v.now, midi.ControlChange(v.channel, c[0], c[1]))
		}
		return nil
	}
	number, known := numbers[name]
	if !known && name != "bend" {
		return fmt.Errorf("%q is none of damper, soft, mod, expression, bend and range", name)
	}
	from, last := v.moved[name], -1
	for tick := min(glideStep, ticks); ; tick = min(tick+glideStep, ticks) {
		part := 1.0
		if ticks > 0 {
			part = float64(tick) / float64(ticks)
		}
		at := from + (to-from)*part
		value := int(math.Round(at))
		if name == "bend" {
			value = min(int(math.Round(at/v.bendable*8192)), 8191)
		}
		if value != last {
			if name == "bend" {
				v.add(v.now+tick, midi.Pitchbend(v.channel, int16(value)))
			} else {
				v.add(v.now+tick, midi.ControlChange(v.channel, number, uint8(value)))
			}
		}
		if last = value; tick == ticks {
			break
		}
	}
	v.moved[name] = to
	return nil
}

func (v *scoreVoice) track(name string) smf.Track {
	sort.SliceStable(v.events, func(i, j int) bool {
		a, b := v.events[i], v.events[j]
		return a.tick < b.tick || a.tick == b.tick && a.release && !b.release
	})
	var track smf.Track
	track.Add(0, smf.MetaTrackSequenceName(name))
	tick := 0
	for _, e := range v.events {
		track.Add(uint32(e.tick-tick), e.message)
		tick = e.tick
	}
	track.Close(uint32(v.now - tick))
	return track
}

// beats reads a length, 2 or 3/2, as ticks.
func beats(s string) (ticks int, err error) {
	over, under, fraction := strings.Cut(s, "/")
	n, err := strconv.Atoi(over)
	if err != nil {
		return 0, err
	}
	d := 1
	if fraction {
		if d, err = strconv.Atoi(under); err != nil {
			return 0, err
		}
	}
	if n <= 0 || d <= 0 || n*ticksPerBeat%d != 0 {
		return 0, fmt.Errorf("a beat has %d ticks: %s is no whole number of them", ticksPerBeat, s)
	}
	return n * ticksPerBeat / d, nil
}

// keyNumber reads a key's name: C4 is 60, C#4 and Db4 are 61.
func keyNumber(name string) (uint8, error) {
	if len(name) < 2 {
		return 0, fmt.Errorf("%q is no key: C4, C#4 or Db4 is wanted", name)
	}
	step := strings.IndexByte("C D EF G A B", name[0])
	rest := name[1:]
	if after, ok := strings.CutPrefix(rest, "#"); ok {
		rest, step = after, step+1
	} else if after, ok := strings.CutPrefix(rest, "b"); ok {
		rest, step = after, step-1
	}
	octave, err := strconv.Atoi(rest)
	key := 12*(octave+1) + step
	if err != nil || key < 0 || key > 127 || !strings.Contains("CDEFGAB", name[:1]) {
		return 0, fmt.Errorf("%q is no key: C4, C#4 or Db4 is wanted", name)
	}
	return uint8(key), nil
}

package config

import (
	"reflect"
	"testing"
)

// every is a patch with every key of the form that has a body of modes.
const every = "\ufefftitle = \"Long stays\"\r\n" + `
level = -3
tuning = { a4 = 415.3, cents = [1, -2, 3, -4, 5, -6, 7, -8, 9, -10, 11, -12.5] }

[[zone]]
keys = "C5-C6"
[zone.excitation]
kind = "sample"
file = "stereo-s16.wav"

[[zone]]
keys = "C2-B3"
decay = [9.0, 4.5]
brightness = 0.25
release = [0.5, 0.25]
level = [3, -3]
pan = [-1, 1]
inharmonicity = 0.0005
tension = 12
excitation.kind = "tone"
excitation.position = 0.25
excitation.hardness = 1
excitation.length = [100, 20]
excitation.touch = 0
excitation.wave = "saw"
excitation.ratio = 2.5
second = { mix = 0.5, cents = -1.5, decay = 2 }
course = { strings = [2, 3], cents = 7 }

[resonance]
level = -12

[body]
mix = 1
modes = [
  [100, 0.5, -3],   # the air
  [210.5, 0.25, 0], # the top
]

[controls]
mute = 20
node = 21
node_at = 3
`

func TestEveryKeyIsRead(t *testing.T) {
	got, err := ParsePatch("testdata/every.toml", []byte(every))
	if err != nil {
		t.Fatal(err)
	}
	sample, err := LoadSample("testdata/stereo-s16.wav")
	if err != nil {
		t.Fatal(err)
	}
	want := &Patch{
		Path:   "testdata/every.toml",
		Title:  "Long stays",
		Level:  -3,
		Tuning: Tuning{A4: 415.3, Cents: [12]float64{1, -2, 3, -4, 5, -6, 7, -8, 9, -10, 11, -12.5}},
		Zones: []Zone{{
			Low: 36, High: 59,
			Decay: Span{9, 4.5}, Brightness: both(0.25), Release: Span{0.5, 0.25}, Level: Span{3, -3}, Pan: Span{-1, 1},
			Inharmonicity: both(0.0005), Tension: both(12),
			Excitation: Excitation{Kind: "tone", Position: both(0.25), Hardness: both(1), Length: Span{100, 20}, Wave: "saw", Ratio: both(2.5)},
			Second:     Second{Mix: both(0.5), Cents: both(-1.5), Decay: both(2)},
			Course:     Course{Strings: Span{2, 3}, Cents: both(7)},
		}, {
			Low: 72, High: 84,
			Decay: both(4), Brightness: both(0.5), Release: both(0.15),
			Excitation: Excitation{Kind: "sample", Position: both(0.13), Hardness: both(0.5), Touch: both(0.5), Wave: "sine", Ratio: both(1), Sample: sample},
			Second:     Second{Decay: both(1)},
			Course:     Course{Strings: both(1)},
		}},
		Resonance: Resonance{Level: -12, On: true},
		Body:      Body{Mix: 1, Modes: []Mode{{100, 0.5, -3}, {210.5, 0.25, 0}}},
		Controls:  Controls{Mute: 20, Node: 21, NodeAt: 3},
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("got\n%+v\nwant\n%+v", got, want)
	}
	checkPatch(t, got)
}

func TestBodyOfAnImpulse(t *testing.T) {
	p, err := ParsePatch("testdata/stays.toml", []byte(zoned+"[body]\nimpulse = \"stereo-f32.wav\"\n"))
	if err != nil {
		t.Fatal(err)
	}
	if p.Body.Impulse == nil || p.Body.Impulse.Path != "testdata/stereo-f32.wav" || p.Body.Mix != 0.5 {
		t.Errorf("the body is %+v", p.Body)
	}
}

func TestOfTwoBadPlacesBothHaveTheirLines(t *testing.T) {
	// The lines of statements that a text can hide: strings over lines, inline
	// tables, dotted keys, arrays of tables written inline.
	for text, want := range map[string]string{
		"title = \"\"\"\n[[zone]]\nkeys = 1\n\"\"\"\n[[zone]]\nkeys = \"C4\"\nlevel = 99":                    "stays.toml:1: title: found \"[[zone]]?keys = 1?\"; allowed is a line of plain letters; write the patch's name, or leave the key out\nstays.toml:7: zone.level: found 99; allowed is -60 to 12 dB, or a pair of such; write 12 dB or less",
		"# one\n\nzone = [\n {keys = \"C4\"},\n {keys = \"C5\", level = 99},\n]":                             "stays.toml:3: zone.level: found 99; allowed is -60 to 12 dB, or a pair of such; write 12 dB or less",
		"tuning.a4 = 1\n[[zone]]\nkeys = \"C4\"\n\nexcitation.position = 7\n[[ zone ]] # two\nkeys = \"C4\"": "stays.toml:1: tuning.a4: found 1; allowed is 380 to 480 Hz; write 380 Hz or more\nstays.toml:5: zone.excitation.position: found 7; allowed is 0 to 0.5, or a pair of such; write 0.5 or less\nstays.toml:7: zone.keys: found C4; allowed is keys that no other zone has; take C4 out of this zone or of the one at line 3",
	} {
		_, err := ParsePatch("stays.toml", []byte(text))
		if err == nil || err.Error() != want {
			t.Errorf("%s\ngot\n%v\nwant\n%s", text, err, want)
		}
	}
}

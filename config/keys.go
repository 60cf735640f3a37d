package config

import (
	"fmt"
	"strconv"
	"strings"
)

// Form is the shape that a key's value has in a file.
type Form uint8

// The forms of a value.
const (
	Number  Form = iota + 1 // a number
	Whole                   // a whole number
	Pair                    // a number or a pair [lowest key's, highest key's]
	Wholes                  // a list of whole numbers
	Numbers                 // a list of twelve numbers
	Modes                   // a list of triples [Hz, s, dB]
	Text                    // a text
	Texts                   // a list of texts
	Choice                  // one of some words
	Table                   // a [table]
	Array                   // [[tables]] of one name, as many as wanted
)

// Key is what a file may say and what comes of it.
type Key struct {
	// Name is the full name with dots, "zone.excitation.position".
	Name string
	Form Form
	// Low and High bound the numbers of a value, both allowed.
	Low, High float64
	// Unit of the numbers; "" where they have none.
	Unit string
	// Words are those of a Choice.
	Words []string
	// Default is what stands for a key that is left out; "" where there is none.
	Default string
	// Hears is what the key does and what a player hears at either end.
	Hears string
}

// PatchKeys is every table and key of a patch file, in the order in which the
// built-in patches write them. The numbers hold for the whole instrument:
// readers check against them, errors quote them.
func PatchKeys() []Key {
	return []Key{
		{Name: "title", Form: Text, Default: "the file's name", Hears: "what the patch is called in lists and logs; up to 80 letters"},
		{Name: "level", Form: Number, Low: -60, High: 12, Unit: "dB", Default: "0", Hears: "loudness of the whole patch: -60 is all but silent, +12 leans on the limiter"},

		{Name: "tuning", Form: Table, Hears: "the pitch of the keys"},
		{Name: "tuning.a4", Form: Number, Low: 380, High: 480, Unit: "Hz", Default: "440", Hears: "pitch of A4: 380 is more than a whole tone flat, 480 a tone and a half sharp"},
		{Name: "tuning.cents", Form: Numbers, Low: -100, High: 100, Unit: "cents", Default: "twelve zeros", Hears: "each note of the octave from equal temperament, C first: -100 is a semitone flat, +100 a semitone sharp"},

		{Name: "zone", Form: Array, Hears: "a range of keys that share their strings' character"},
		{Name: "zone.keys", Form: Text, Hears: `which keys: "C2-B3", "36-59" or "A4"; C4 is key 60; keys in no zone are silent`},
		{Name: "zone.decay", Form: Pair, Low: 0.05, High: 120, Unit: "s", Default: "4", Hears: "time in which a held note falls by 60 dB: 0.05 is a tap, 120 rings for minutes"},
		{Name: "zone.brightness", Form: Pair, Low: 0, High: 1, Default: "0.5", Hears: "how long high partials ring: 0 goes dull at once like gut, 1 stays brilliant like thin wire"},
		{Name: "zone.release", Form: Pair, Low: 0.01, High: 30, Unit: "s", Default: "0.15", Hears: "time in which a key that is let go falls by 60 dB: 0.01 stops dead, 30 hardly damps"},
		{Name: "zone.level", Form: Pair, Low: -60, High: 12, Unit: "dB", Default: "0", Hears: "loudness of these keys beside the others: -60 is all but silent, +12 four times the force"},
		{Name: "zone.pan", Form: Pair, Low: -1, High: 1, Default: "0", Hears: "place between the loudspeakers: -1 is the left one, +1 the right one"},
		{Name: "zone.inharmonicity", Form: Pair, Low: 0, High: 0.002, Default: "0", Hears: "stiffness, B of f_n = n f0' sqrt(1 + B n^2): 0 is a limp string, 0.0003 a piano's middle, 0.002 a bar's clang"},
		{Name: "zone.tension", Form: Pair, Low: 0, High: 100, Unit: "cents", Default: "0", Hears: "how sharp the hardest stroke begins before it settles: 0 is steady, 100 begins a semitone high and twangs"},

		{Name: "zone.excitation", Form: Table, Hears: "how the strings are set going"},
		{Name: "zone.excitation.kind", Form: Choice, Words: []string{"noise", "tone", "pluck", "strike", "sample"}, Default: `"pluck"`, Hears: "noise is a burst, one of a few at each stroke; tone colours the attack with a pitch; pluck lets go a pulled string; strike is a hammer; sample is a recording of yours"},
		{Name: "zone.excitation.position", Form: Pair, Low: 0, High: 0.5, Default: "0.13", Hears: "where on the string, from the bridge: 0 leaves every partial in, 0.05 is thin and nasal, 0.5 the hollow middle"},
		{Name: "zone.excitation.hardness", Form: Pair, Low: 0, High: 1, Default: "0.5", Hears: "0 is soft felt or flesh, 1 a hard pick or bare wood"},
		{Name: "zone.excitation.length", Form: Pair, Low: 0, High: 500, Unit: "ms", Default: "0", Hears: "of a noise or a tone: 0 is one period of the string, a clean attack; 500 breathes and scrapes"},
		{Name: "zone.excitation.touch", Form: Pair, Low: 0, High: 1, Default: "0.5", Hears: "0 is as bright played softly as hard, 1 goes from dull to glaring under the hand"},
		{Name: "zone.excitation.wave", Form: Choice, Words: []string{"sine", "triangle", "saw"}, Default: `"sine"`, Hears: "of a tone: sine is pure, triangle reedy, saw rough"},
		{Name: "zone.excitation.ratio", Form: Pair, Low: 0.25, High: 32, Default: "1", Hears: "of a tone: its frequency over the string's; 0.25 thumps two octaves below, 32 ticks five above"},
		{Name: "zone.excitation.file", Form: Text, Hears: "of a sample: a WAV file of up to 10 s, found from the patch's folder"},

		{Name: "zone.second", Form: Table, Hears: "the string's second plane of vibration"},
		{Name: "zone.second.mix", Form: Pair, Low: 0, High: 1, Default: "0", Hears: "part of the stroke that goes into it: 0 is none, 0.5 beats most, 1 all"},
		{Name: "zone.second.cents", Form: Pair, Low: -20, High: 20, Unit: "cents", Default: "0", Hears: "its pitch from the first plane's: near 0 is a slow swell, 20 either way a fast shimmer"},
		{Name: "zone.second.decay", Form: Pair, Low: 0.1, High: 10, Default: "1", Hears: "its decay over the first plane's: 0.1 is gone after the attack, 10 leaves a long quiet tail"},

		{Name: "zone.course", Form: Table, Hears: "several strings under one key"},
		{Name: "zone.course.strings", Form: Pair, Low: 1, High: 3, Default: "1", Hears: "how many: 1 is plain, 2 a lute's or a mandolin's course, 3 a piano's"},
		{Name: "zone.course.cents", Form: Pair, Low: 0, High: 50, Unit: "cents", Default: "0", Hears: "from the lowest string of a course to the highest: 0 is one louder string, 5 lively, 50 out of tune"},

		{Name: "resonance", Form: Table, Hears: "undamped strings ring along with the others; left out, they do not"},
		{Name: "resonance.level", Form: Number, Low: -60, High: 0, Unit: "dB", Default: "-24", Hears: "how strongly: -60 is hardly there, 0 a hall of strings"},

		{Name: "body", Form: Table, Hears: "what the bridge drives; left out, the bare strings are heard"},
		{Name: "body.mix", Form: Number, Low: 0, High: 1, Default: "0.5", Hears: "0 is the strings alone, 1 the body alone"},
		{Name: "body.modes", Form: Modes, Hears: "up to 64 resonances [Hz, s, dB]: frequency 20 to 20000, T60 0.005 to 5, level -60 to 24"},
		{Name: "body.impulse", Form: Text, Hears: "a WAV file of up to 10 s with the body's response to a knock, found from the patch's folder"},
		{Name: "body.builtin", Form: Choice, Words: BodyNames(), Hears: "a body that comes with the program"},

		{Name: "controls", Form: Table, Hears: "controllers that this patch listens to beside the common ones"},
		{Name: "controls.mute", Form: Whole, Low: 2, High: 119, Default: "none", Hears: "the controller that lays the palm on the strings: 0 rings, 127 is choked"},
		{Name: "controls.node", Form: Whole, Low: 2, High: 119, Default: "none", Hears: "the controller that touches the string at a node: 0 is off, 127 leaves only the harmonic"},
		{Name: "controls.node_at", Form: Whole, Low: 2, High: 8, Default: "2", Hears: "the part at which it is touched: 2 is the middle and sounds the octave, 3 a third and sounds the twelfth, 8 is three octaves up"},
	}
}

// RigKeys is every table and key of a rig file.
func RigKeys() []Key {
	return []Key{
		{Name: "audio", Form: Table, Hears: "the sound's way out"},
		{Name: "audio.device", Form: Text, Default: `""`, Hears: `part of a device's name; "" is the system's default, "null" has no sound`},
		{Name: "audio.rate", Form: Whole, Low: 8000, High: 192000, Unit: "Hz", Default: "48000", Hears: "frames a second: 8000 is a telephone, 48000 suits every stage, 192000 costs four times the work"},
		{Name: "audio.period", Form: Whole, Low: 16, High: 4096, Unit: "frames", Default: "64", Hears: "frames rendered at once: 16 answers fastest and drops out first, 4096 is safe and late"},
		{Name: "audio.timing", Form: Choice, Words: []string{"steady", "eager"}, Default: `"steady"`, Hears: "steady has every note equally late by one period, eager has each as soon as can be"},
		{Name: "audio.strings", Form: Whole, Low: 8, High: 512, Default: "128", Hears: "how many strings may sound at once: with 8 old notes are cut soon, 512 asks much of the processor"},
		{Name: "audio.level", Form: Number, Low: -60, High: 0, Unit: "dB", Default: "-6", Hears: "the output's level at the start, for the sake of ears: -60 is all but silent, 0 everything the device gives"},

		{Name: "midi", Form: Table, Hears: "who plays"},
		{Name: "midi.inputs", Form: Texts, Default: "[]", Hears: "parts of port names, or paths of byte streams; [] is every keyboard"},
		{Name: "midi.channels", Form: Wholes, Low: 1, High: 16, Default: "[]", Hears: "the channels listened to; [] is all"},

		{Name: "set", Form: Array, Hears: "what is played in which order; Program Change n takes the n-th"},
		{Name: "set.patch", Form: Text, Hears: "a patch file's name, found from the rig's folder, or a built-in patch's"},
	}
}

// Allowed says in a few words what a value may be.
func (k Key) Allowed() string {
	switch k.Form {
	case Number:
		return k.span()
	case Whole:
		return "a whole number, " + k.span()
	case Pair:
		return k.span() + ", or a pair of such"
	case Wholes:
		return "a list of whole numbers, " + k.span()
	case Numbers:
		return "a list of twelve numbers, " + k.span()
	case Modes:
		return "a list of triples [Hz, s, dB]"
	case Text:
		return "a text"
	case Texts:
		return "a list of texts"
	case Choice:
		return words(k.Words)
	case Table:
		return "a table"
	default:
		return "a list of tables"
	}
}

// span is the range with its unit: "0.05 to 120 s".
func (k Key) span() string {
	text := plain(k.Low) + " to " + plain(k.High)
	if k.Unit != "" {
		text += " " + k.Unit
	}
	return text
}

// last is the name without its tables.
func (k Key) last() string { return k.Name[strings.LastIndexByte(k.Name, '.')+1:] }

// table is the name of the table that the key stands in, "" at the top.
func (k Key) table() string { return k.Name[:max(0, strings.LastIndexByte(k.Name, '.'))] }

// heading is a table's name as a file writes it.
func (k Key) heading() string {
	if k.Form == Array {
		return "[[" + k.Name + "]]"
	}
	return "[" + k.Name + "]"
}

// plain writes a number as a player would.
func plain(v float64) string {
	return strings.TrimPrefix(strconv.FormatFloat(v, 'g', -1, 64), "+")
}

// words lists quoted words with "or" before the last.
func words(list []string) string {
	quoted := make([]string, len(list))
	for i, w := range list {
		quoted[i] = `"` + w + `"`
	}
	return or(quoted)
}

// or joins some words with commas, and "or" before the last.
func or(list []string) string {
	if len(list) < 2 {
		return strings.Join(list, "")
	}
	n := len(list) - 1
	return fmt.Sprintf("%s or %s", strings.Join(list[:n], ", "), list[n])
}

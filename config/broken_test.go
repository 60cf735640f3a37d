package config

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/go-audio/audio"
	"github.com/go-audio/wav"
)

// broken is a text with the problems that it has, exactly.
type broken struct {
	name, text string
	want       []string
}

// zoned is a sound zone to put a broken part below.
const zoned = "[[zone]]\nkeys = \"C2-C6\"\n"

func brokenPatches() []broken {
	return []broken{
		{
			"empty",
			"",
			[]string{
				`stays.toml: is empty; a patch needs at least one [[zone]] with keys`,
			},
		},
		{
			"only comments",
			"# nothing\n\n",
			[]string{
				`stays.toml: is empty; a patch needs at least one [[zone]] with keys`,
			},
		},
		{
			"not UTF-8",
			"title = \"Stays\"\nlevel = \"\xff\"",
			[]string{
				`stays.toml:2: not UTF-8 text; save the file as UTF-8 in your editor`,
			},
		},
		{
			"UTF-16",
			"t\x00i\x00t\x00l\x00e\x00",
			[]string{
				`stays.toml:1: not UTF-8 text; save the file as UTF-8 in your editor`,
			},
		},
		{
			"a null byte",
			"title = \"\x00\"",
			[]string{
				`stays.toml:1: title: holds a character that no keyboard types; delete the line and write it again`,
			},
		},
		{
			"no zone",
			`title = "Stays"
`,
			[]string{
				`stays.toml: zone: there is none, so every key is silent; write [[zone]] and below it keys = "C2-C6"`,
			},
		},
		{
			"an empty list of zones",
			`zone = []
`,
			[]string{
				`stays.toml: zone: there is none, so every key is silent; write [[zone]] and below it keys = "C2-C6"`,
			},
		},
		{
			"a bracket too few",
			`[[zone]
keys = "C4"
`,
			[]string{
				`stays.toml:1: expected end of table array name delimiter ']', but got the line's end instead; close the heading with as many brackets as it opens with`,
			},
		},
		{
			"a heading not closed",
			`title = "Stays"
[tuning
`,
			[]string{
				`stays.toml:2: expected '.' or ']' to end table name, but got the line's end instead; close the heading with as many brackets as it opens with`,
			},
		},
		{
			"text without quotes",
			`title = Stays
`,
			[]string{
				`stays.toml:1: title: expected value but found "Stays" instead; write key = value, with "quotes" round text and a point in numbers`,
			},
		},
		{
			"a text not closed",
			`title = "Stays
`,
			[]string{
				`stays.toml:1: title: the text has no end on its line; close it with a quote`,
			},
		},
		{
			"a comma for a point",
			`level = 3,5
`,
			[]string{
				`stays.toml:1: expected a top-level item to end with a newline, comment, or EOF, but got ',' instead; write key = value, with "quotes" round text and a point in numbers`,
			},
		},
		{
			"a colon",
			`level: 3
`,
			[]string{
				`stays.toml:1: expected '.' or '=', but got ':' instead; write key = value, with "quotes" round text and a point in numbers`,
			},
		},
		{
			"a point without a digit before",
			`level = .5
`,
			[]string{
				`stays.toml:1: level: floats must start with a digit, not '.'; write key = value, with "quotes" round text and a point in numbers`,
			},
		},
		{
			"no value",
			`title =
`,
			[]string{
				`stays.toml:1: title: expected value but found the line's end instead; write key = value, with "quotes" round text and a point in numbers`,
			},
		},
		{
			"words without a key",
			`the stays of the tower
`,
			[]string{
				`stays.toml:1: expected '.' or '=', but got 's' instead; write key = value, with "quotes" round text and a point in numbers`,
			},
		},
		{
			"C's comment",
			`// the stays
`,
			[]string{
				`stays.toml:1: expected '.' or '=', but got '/' instead; write key = value, with "quotes" round text and a point in numbers`,
			},
		},
		{
			"a key twice",
			`[[zone]]
keys = "C4"
decay = 3
decay = 4
`,
			[]string{
				`stays.toml:4: zone.decay: stands here a second time; keep one of them`,
			},
		},
		{
			"a table twice",
			`[tuning]
a4 = 440

[tuning]
a4 = 442
`,
			[]string{
				`stays.toml:4: tuning: stands here a second time; keep one of them`,
			},
		},
		{
			"one zone in single brackets",
			`[[zone]]
keys = "C4"
[zone]
keys = "C5"
`,
			[]string{
				`stays.toml:3: zone: stands here a second time; keep one of them`,
			},
		},
		{
			"zones in single brackets, then double",
			`[zone]
keys = "C4"
[[zone]]
keys = "C5"
`,
			[]string{
				`stays.toml:3: zone: is one table above and a list of tables here; write all its headings alike, with one pair of brackets or two`,
			},
		},
		{
			"a zone in single brackets",
			`[zone]
keys = "C4"
`,
			[]string{
				`stays.toml:1: zone: found a table; allowed is a list of tables; write [[zone]] on a line of its own, and its keys below`,
			},
		},
		{
			"zone as a number",
			`zone = 3
`,
			[]string{
				`stays.toml:1: zone: found 3; allowed is a list of tables; write [[zone]] on a line of its own, and its keys below`,
			},
		},
		{
			"zones as numbers",
			`zone = [1, 2]
`,
			[]string{
				`stays.toml:1: zone: found [1, 2]; allowed is a list of tables; write [[zone]] on a line of its own, and its keys below`,
			},
		},
		{
			"a misspelt key",
			`titel = "Stays"
[[zone]]
keys = "C4"
`,
			[]string{
				`stays.toml:1: titel: no such key; did you mean "title"?`,
			},
		},
		{
			"a misspelt key of a zone",
			zoned + `deccay = 3
`,
			[]string{
				`stays.toml:3: zone.deccay: no such key; did you mean "decay"?`,
			},
		},
		{
			"letters swapped",
			zoned + `pna = 0.5
`,
			[]string{
				`stays.toml:3: zone.pna: no such key; did you mean "pan"?`,
			},
		},
		{
			"a key in capitals",
			zoned + `Decay = 3
`,
			[]string{
				`stays.toml:3: zone.Decay: no such key; did you mean "decay"?`,
			},
		},
		{
			"a key of another table",
			zoned + `position = 0.2
`,
			[]string{
				`stays.toml:3: zone.position: no such key; it belongs below [zone.excitation]`,
			},
		},
		{
			"a zone's key at the top",
			`decay = 3
[[zone]]
keys = "C4"
`,
			[]string{
				`stays.toml:1: decay: no such key; it belongs below [[zone]] or below [zone.second]`,
			},
		},
		{
			"a key of no kind",
			zoned + `colour = "red"
`,
			[]string{
				`stays.toml:3: zone.colour: no such key; here may stand keys, decay, brightness, release, level, pan, inharmonicity, tension, excitation, second or course`,
			},
		},
		{
			"a misspelt table",
			zoned + `[zone.exitation]
kind = "noise"
`,
			[]string{
				`stays.toml:3: zone.exitation: no such key; did you mean [zone.excitation]?`,
			},
		},
		{
			"a table of no kind",
			zoned + `[reverb]
mix = 1
`,
			[]string{
				`stays.toml:3: reverb: no such key; here may stand title, level, tuning, zone, resonance, body or controls`,
			},
		},
		{
			"a quoted key",
			zoned + `"de cay" = 3
`,
			[]string{
				`stays.toml:3: zone."de cay": no such key; did you mean "decay"?`,
			},
		},
		{
			"a key that would break the line",
			"\"two\\nlines\" = 1\n" + zoned,
			[]string{
				`stays.toml:1: "two\nlines": no such key; here may stand title, level, tuning, zone, resonance, body or controls`,
			},
		},
		{
			"a title that is a number",
			`title = 7
[[zone]]
keys = "C4"
`,
			[]string{
				`stays.toml:1: title: found 7; allowed is a text; write it in quotes`,
			},
		},
		{
			"a title of nothing",
			`title = ""
[[zone]]
keys = "C4"
`,
			[]string{
				`stays.toml:1: title: found ""; allowed is a line of plain letters; write the patch's name, or leave the key out`,
			},
		},
		{
			"a title of two lines",
			"title = \"two\\nlines\"\n" + zoned,
			[]string{
				`stays.toml:1: title: found "two?lines"; allowed is a line of plain letters; write the patch's name, or leave the key out`,
			},
		},
		{
			"a title too long",
			"title = \"" + strings.Repeat("o", 81) + "\"\n" + zoned,
			[]string{
				`stays.toml:1: title: found "oooooooooooooooooooooooooooooooooooooooooooooooooooooooooooo..."; allowed is up to 80 letters; shorten it`,
			},
		},
		{
			"level too high",
			`level = 12.5
[[zone]]
keys = "C4"
`,
			[]string{
				`stays.toml:1: level: found 12.5; allowed is -60 to 12 dB; write 12 dB or less`,
			},
		},
		{
			"level as text",
			`level = "loud"
[[zone]]
keys = "C4"
`,
			[]string{
				`stays.toml:1: level: found "loud"; allowed is -60 to 12 dB; write a number without quotes`,
			},
		},
		{
			"level as a pair",
			`level = [0, 1]
[[zone]]
keys = "C4"
`,
			[]string{
				`stays.toml:1: level: found [0, 1]; allowed is -60 to 12 dB; write a number without quotes`,
			},
		},
		{
			"level as a table",
			zoned + `[zone.level]
low = 3
`,
			[]string{
				`stays.toml:3: zone.level: found a table; allowed is -60 to 12 dB, or a pair of such; write a number without quotes, or [lowest key's, highest key's]`,
			},
		},
		{
			"a date",
			zoned + `decay = 2020-01-01
`,
			[]string{
				`stays.toml:3: zone.decay: found a date; allowed is 0.05 to 120 s, or a pair of such; write a number without quotes, or [lowest key's, highest key's]`,
			},
		},
		{
			"true",
			zoned + `decay = true
`,
			[]string{
				`stays.toml:3: zone.decay: found true; allowed is 0.05 to 120 s, or a pair of such; write a number without quotes, or [lowest key's, highest key's]`,
			},
		},
		{
			"tuning too low",
			zoned + `[tuning]
a4 = 220
`,
			[]string{
				`stays.toml:4: tuning.a4: found 220; allowed is 380 to 480 Hz; write 380 Hz or more`,
			},
		},
		{
			"eleven cents",
			zoned + `[tuning]
cents = [0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0]
`,
			[]string{
				`stays.toml:4: tuning.cents: found 11 numbers; allowed is a list of twelve numbers, -100 to 100 cents; write twelve, C's first`,
			},
		},
		{
			"no cents",
			zoned + `[tuning]
cents = []
`,
			[]string{
				`stays.toml:4: tuning.cents: found 0 numbers; allowed is a list of twelve numbers, -100 to 100 cents; write twelve, C's first`,
			},
		},
		{
			"cents out of range",
			zoned + `[tuning]
cents = [0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 101]
`,
			[]string{
				`stays.toml:4: tuning.cents: found 101; allowed is a list of twelve numbers, -100 to 100 cents; write 100 cents or less`,
			},
		},
		{
			"cents as text",
			zoned + `[tuning]
cents = ["C", 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0]
`,
			[]string{
				`stays.toml:4: tuning.cents: found ["C", 0, 0, 0, 0, 0, ...]; allowed is a list of twelve numbers, -100 to 100 cents; write twelve numbers, C's first`,
			},
		},
		{
			"keys missing",
			`[[zone]]
decay = 3
`,
			[]string{
				`stays.toml:1: zone: keys is missing; write which keys the zone has, as in keys = "C2-B3"`,
			},
		},
		{
			"keys empty",
			`[[zone]]
keys = ""
`,
			[]string{
				`stays.toml:2: zone.keys: found ""; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; no key is named`,
			},
		},
		{
			"keys as a number",
			`[[zone]]
keys = 60
`,
			[]string{
				`stays.toml:2: zone.keys: found 60; allowed is a text; write it in quotes`,
			},
		},
		{
			"keys backwards",
			`[[zone]]
keys = "B3-C2"
`,
			[]string{
				`stays.toml:2: zone.keys: found "B3-C2"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; C2 lies below B3`,
			},
		},
		{
			"no such note",
			`[[zone]]
keys = "H2"
`,
			[]string{
				`stays.toml:2: zone.keys: found "H2"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; "H2" is not a key`,
			},
		},
		{
			"no octave",
			`[[zone]]
keys = "C-B3"
`,
			[]string{
				`stays.toml:2: zone.keys: found "C-B3"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; "C-B3" has no octave`,
			},
		},
		{
			"no second key",
			`[[zone]]
keys = "C2-"
`,
			[]string{
				`stays.toml:2: zone.keys: found "C2-"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; a key is missing`,
			},
		},
		{
			"three keys",
			`[[zone]]
keys = "C2-C3-C4"
`,
			[]string{
				`stays.toml:2: zone.keys: found "C2-C3-C4"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; "C3-C4" is not a key`,
			},
		},
		{
			"keys with words",
			`[[zone]]
keys = "C2 to C3"
`,
			[]string{
				`stays.toml:2: zone.keys: found "C2 to C3"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; "to C3" follows the first key`,
			},
		},
		{
			"a key above the last",
			`[[zone]]
keys = "C2-G#9"
`,
			[]string{
				`stays.toml:2: zone.keys: found "C2-G#9"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; G#9 lies outside C-1 to G9 (0 to 127)`,
			},
		},
		{
			"a key number above the last",
			`[[zone]]
keys = "0-128"
`,
			[]string{
				`stays.toml:2: zone.keys: found "0-128"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; 128 lies outside C-1 to G9 (0 to 127)`,
			},
		},
		{
			"a key below the first",
			`[[zone]]
keys = "B-2"
`,
			[]string{
				`stays.toml:2: zone.keys: found "B-2"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; B-2 lies outside C-1 to G9 (0 to 127)`,
			},
		},
		{
			"a long number",
			`[[zone]]
keys = "99999999999999999999"
`,
			[]string{
				`stays.toml:2: zone.keys: found "99999999999999999999"; allowed is one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"; 99999999999999999999 lies outside C-1 to G9 (0 to 127)`,
			},
		},
		{
			"zones overlap",
			`[[zone]]
keys = "C2-B3"

[[zone]]
keys = "A3-C5"
`,
			[]string{
				`stays.toml:5: zone.keys: found A3-C5; allowed is keys that no other zone has; take A3-B3 out of this zone or of the one at line 2`,
			},
		},
		{
			"a zone inside another",
			`[[zone]]
keys = "60"
[[zone]]
keys = "0-127"
`,
			[]string{
				`stays.toml:4: zone.keys: found C-1-G9; allowed is keys that no other zone has; take C4 out of this zone or of the one at line 2`,
			},
		},
		{
			"the same zone twice",
			`[[zone]]
keys = "C4"
[[zone]]
keys = "60"
`,
			[]string{
				`stays.toml:4: zone.keys: found C4; allowed is keys that no other zone has; take C4 out of this zone or of the one at line 2`,
			},
		},
		{
			"decay of nothing",
			zoned + `decay = 0
`,
			[]string{
				`stays.toml:3: zone.decay: found 0; allowed is 0.05 to 120 s, or a pair of such; write 0.05 s or more`,
			},
		},
		{
			"decay beyond the range",
			zoned + `decay = 120.001
`,
			[]string{
				`stays.toml:3: zone.decay: found 120.001; allowed is 0.05 to 120 s, or a pair of such; write 120 s or less`,
			},
		},
		{
			"a pair with one bad end",
			zoned + `decay = [9, 400]
`,
			[]string{
				`stays.toml:3: zone.decay: found [9, 400]; allowed is 0.05 to 120 s, or a pair of such; write 120 s or less`,
			},
		},
		{
			"a list of three",
			zoned + `decay = [9, 4.5, 2]
`,
			[]string{
				`stays.toml:3: zone.decay: found [9, 4.5, 2]; allowed is 0.05 to 120 s, or a pair of such; write a number without quotes, or [lowest key's, highest key's]`,
			},
		},
		{
			"a list of one",
			zoned + `decay = [9]
`,
			[]string{
				`stays.toml:3: zone.decay: found [9]; allowed is 0.05 to 120 s, or a pair of such; write a number without quotes, or [lowest key's, highest key's]`,
			},
		},
		{
			"a pair of texts",
			zoned + `decay = ["9", "4"]
`,
			[]string{
				`stays.toml:3: zone.decay: found ["9", "4"]; allowed is 0.05 to 120 s, or a pair of such; write a number without quotes, or [lowest key's, highest key's]`,
			},
		},
		{
			"not a number",
			zoned + `brightness = nan
`,
			[]string{
				`stays.toml:3: zone.brightness: found nan; allowed is 0 to 1, or a pair of such; write a plain number`,
			},
		},
		{
			"infinity",
			zoned + `release = inf
`,
			[]string{
				`stays.toml:3: zone.release: found inf; allowed is 0.01 to 30 s, or a pair of such; write a plain number`,
			},
		},
		{
			"minus infinity in a pair",
			zoned + `level = [-inf, 0]
`,
			[]string{
				`stays.toml:3: zone.level: found [-inf, 0]; allowed is -60 to 12 dB, or a pair of such; write a plain number`,
			},
		},
		{
			"a number too large for any",
			zoned + `decay = 99999999999999999999
`,
			[]string{
				`stays.toml:3: zone.decay: found 99999999999999999999, which is too large for any key; write a smaller number`,
			},
		},
		{
			"pan too far",
			zoned + `pan = -1.5
`,
			[]string{
				`stays.toml:3: zone.pan: found -1.5; allowed is -1 to 1, or a pair of such; write -1 or more`,
			},
		},
		{
			"inharmonicity too high",
			zoned + `inharmonicity = 0.01
`,
			[]string{
				`stays.toml:3: zone.inharmonicity: found 0.01; allowed is 0 to 0.002, or a pair of such; write 0.002 or less`,
			},
		},
		{
			"tension below nothing",
			zoned + `tension = -1
`,
			[]string{
				`stays.toml:3: zone.tension: found -1; allowed is 0 to 100 cents, or a pair of such; write 0 cents or more`,
			},
		},
		{
			"a value of several lines",
			zoned + `decay = [
  9,

  # too long
  400,
]
release = 0
`,
			[]string{
				`stays.toml:3: zone.decay: found [9, 400]; allowed is 0.05 to 120 s, or a pair of such; write 120 s or less`,
				`stays.toml:9: zone.release: found 0; allowed is 0.01 to 30 s, or a pair of such; write 0.01 s or more`,
			},
		},
		{
			"excitation as a text",
			zoned + `excitation = "noise"
`,
			[]string{
				`stays.toml:3: zone.excitation: found "noise"; allowed is a table; write [zone.excitation] on a line of its own, and its keys below`,
			},
		},
		{
			"excitation inline",
			zoned + `excitation = { kind = "noise", position = 0.6 }
`,
			[]string{
				`stays.toml:3: zone.excitation.position: found 0.6; allowed is 0 to 0.5, or a pair of such; write 0.5 or less`,
			},
		},
		{
			"a misspelt kind",
			zoned + `[zone.excitation]
kind = "plukc"
`,
			[]string{
				`stays.toml:4: zone.excitation.kind: found "plukc"; allowed is "noise", "tone", "pluck", "strike" or "sample"; did you mean "pluck"?`,
			},
		},
		{
			"a kind of no kind",
			zoned + `[zone.excitation]
kind = "bowed"
`,
			[]string{
				`stays.toml:4: zone.excitation.kind: found "bowed"; allowed is "noise", "tone", "pluck", "strike" or "sample"; write one of them`,
			},
		},
		{
			"a kind that is a number",
			zoned + `[zone.excitation]
kind = 1
`,
			[]string{
				`stays.toml:4: zone.excitation.kind: found 1; allowed is "noise", "tone", "pluck", "strike" or "sample"; write one of them in quotes`,
			},
		},
		{
			"position beyond the middle",
			zoned + `[zone.excitation]
position = 0.51
`,
			[]string{
				`stays.toml:4: zone.excitation.position: found 0.51; allowed is 0 to 0.5, or a pair of such; write 0.5 or less`,
			},
		},
		{
			"a burst too long",
			zoned + `[zone.excitation]
kind = "noise"
length = 501
`,
			[]string{
				`stays.toml:5: zone.excitation.length: found 501; allowed is 0 to 500 ms, or a pair of such; write 500 ms or less`,
			},
		},
		{
			"a wave without a tone",
			zoned + `[zone.excitation]
kind = "noise"
wave = "saw"
`,
			[]string{
				`stays.toml:5: zone.excitation.wave: does nothing with kind = "noise"; write kind = "tone", or take the line out`,
			},
		},
		{
			"a ratio without a tone",
			zoned + `[zone.excitation]
ratio = 3
`,
			[]string{
				`stays.toml:4: zone.excitation.ratio: does nothing with kind = "pluck"; write kind = "tone", or take the line out`,
			},
		},
		{
			"a misspelt wave",
			zoned + `[zone.excitation]
kind = "tone"
wave = "sinus"
`,
			[]string{
				`stays.toml:5: zone.excitation.wave: found "sinus"; allowed is "sine", "triangle" or "saw"; did you mean "sine"?`,
			},
		},
		{
			"a ratio too low",
			zoned + `[zone.excitation]
kind = "tone"
ratio = 0.1
`,
			[]string{
				`stays.toml:5: zone.excitation.ratio: found 0.1; allowed is 0.25 to 32, or a pair of such; write 0.25 or more`,
			},
		},
		{
			"a sample without a file",
			zoned + `[zone.excitation]
kind = "sample"
`,
			[]string{
				`stays.toml:4: zone.excitation.kind: "sample" needs a recording; write file = "name.wav" below it`,
			},
		},
		{
			"a file without a sample",
			zoned + `[zone.excitation]
file = "good.wav"
`,
			[]string{
				`stays.toml:4: zone.excitation.file: does nothing with kind = "pluck"; write kind = "sample", or take the line out`,
			},
		},
		{
			"a file that is not there",
			zoned + `[zone.excitation]
kind = "sample"
file = "lost.wav"
`,
			[]string{
				`stays.toml:5: zone.excitation.file: found "lost.wav"; cannot be read: no such file or directory; check the name and the permissions`,
			},
		},
		{
			"a file without a name",
			zoned + `[zone.excitation]
kind = "sample"
file = ""
`,
			[]string{
				`stays.toml:5: zone.excitation.file: found ""; allowed is a WAV file's name; write one, or take the line out`,
			},
		},
		{
			"a file that is a folder",
			zoned + `[zone.excitation]
kind = "sample"
file = "folder"
`,
			[]string{
				`stays.toml:5: zone.excitation.file: found "folder"; is a folder; name a file in it`,
			},
		},
		{
			"a file that is no recording",
			zoned + `[zone.excitation]
kind = "sample"
file = "text.wav"
`,
			[]string{
				`stays.toml:5: zone.excitation.file: found "text.wav"; is not a WAV file, or a broken one; save it again as WAV`,
			},
		},
		{
			"a recording of silence",
			zoned + `[zone.excitation]
kind = "sample"
file = "silent.wav"
`,
			[]string{
				`stays.toml:5: zone.excitation.file: found "silent.wav"; is silent; record it again`,
			},
		},
		{
			"a recording of nothing",
			zoned + `[zone.excitation]
kind = "sample"
file = "empty.wav"
`,
			[]string{
				`stays.toml:5: zone.excitation.file: found "empty.wav"; holds no sound; record it again`,
			},
		},
		{
			"a recording too long",
			zoned + `[zone.excitation]
kind = "sample"
file = "long.wav"
`,
			[]string{
				`stays.toml:5: zone.excitation.file: found "long.wav"; lasts too long; allowed is up to 10 s; cut it`,
			},
		},
		{
			"a recording at a strange rate",
			zoned + `[zone.excitation]
kind = "sample"
file = "slow.wav"
`,
			[]string{
				`stays.toml:5: zone.excitation.file: found "slow.wav"; has a rate of 3999 Hz; allowed is 4000 to 384000 Hz; convert it`,
			},
		},
		{
			"second out of range",
			zoned + `[zone.second]
mix = 2
cents = 21
decay = 0
`,
			[]string{
				`stays.toml:4: zone.second.mix: found 2; allowed is 0 to 1, or a pair of such; write 1 or less`,
				`stays.toml:5: zone.second.cents: found 21; allowed is -20 to 20 cents, or a pair of such; write 20 cents or less`,
				`stays.toml:6: zone.second.decay: found 0; allowed is 0.1 to 10, or a pair of such; write 0.1 or more`,
			},
		},
		{
			"no strings",
			zoned + `[zone.course]
strings = 0
`,
			[]string{
				`stays.toml:4: zone.course.strings: found 0; allowed is 1 to 3, or a pair of such; write 1 or more`,
			},
		},
		{
			"four strings",
			zoned + `[zone.course]
strings = [1, 4]
cents = 51
`,
			[]string{
				`stays.toml:4: zone.course.strings: found [1, 4]; allowed is 1 to 3, or a pair of such; write 3 or less`,
				`stays.toml:5: zone.course.cents: found 51; allowed is 0 to 50 cents, or a pair of such; write 50 cents or less`,
			},
		},
		{
			"resonance too strong",
			zoned + `[resonance]
level = 1
`,
			[]string{
				`stays.toml:4: resonance.level: found 1; allowed is -60 to 0 dB; write 0 dB or less`,
			},
		},
		{
			"resonance as a number",
			zoned + `resonance = -20
`,
			[]string{
				`stays.toml:3: zone.resonance: no such key; it is a table of its own: [resonance]`,
			},
		},
		{
			"a body of nothing",
			zoned + `[body]
mix = 0.5
`,
			[]string{
				`stays.toml:3: body: says nothing of what resonates; write builtin = "guitar", "hull" or "lantern", or modes or impulse`,
			},
		},
		{
			"two bodies",
			zoned + `[body]
builtin = "guitar"
impulse = "good.wav"
`,
			[]string{
				`stays.toml:4: body.builtin: stands beside impulse; a body has one of modes, impulse and builtin: keep one`,
			},
		},
		{
			"a body of no name",
			zoned + `[body]
builtin = "gitar"
`,
			[]string{
				`stays.toml:4: body.builtin: found "gitar"; allowed is "guitar", "hull" or "lantern"; did you mean "guitar"?`,
			},
		},
		{
			"a lost impulse",
			zoned + `[body]
impulse = "lost.wav"
`,
			[]string{
				`stays.toml:4: body.impulse: found "lost.wav"; cannot be read: no such file or directory; check the name and the permissions`,
			},
		},
		{
			"no modes",
			zoned + `[body]
modes = []
`,
			[]string{
				`stays.toml:4: body.modes: found 0 modes; allowed is 1 to 64; write the strongest`,
			},
		},
		{
			"a mode of two numbers",
			zoned + `[body]
modes = [[100, 0.4]]
`,
			[]string{
				`stays.toml:4: body.modes: found [100, 0.4]; allowed is a list of triples [Hz, s, dB]; write them as [[100, 0.4, 0], [200, 0.3, -3]]`,
			},
		},
		{
			"a mode too low",
			zoned + `[body]
modes = [[100, 0.4, 0], [10, 0.4, 0]]
`,
			[]string{
				`stays.toml:4: body.modes: found 10 in mode 2; allowed is 20 to 20000 Hz; change it, or take the mode out`,
			},
		},
		{
			"a mode without a number",
			zoned + `[body]
modes = [[100, 0.4, "loud"]]
`,
			[]string{
				`stays.toml:4: body.modes: found [100, 0.4, "loud"]; allowed is a list of triples [Hz, s, dB]; write them as [[100, 0.4, 0], [200, 0.3, -3]]`,
			},
		},
		{
			"a mode that never ends",
			zoned + `[body]
modes = [[100, inf, 0]]
`,
			[]string{
				`stays.toml:4: body.modes: found inf in mode 1; allowed is 0.005 to 5 s; change it, or take the mode out`,
			},
		},
		{
			"too many modes",
			zoned + "[body]\nmodes = [" + strings.Repeat("[100, 1, 0],", 65) + "]\n",
			[]string{
				`stays.toml:4: body.modes: found 65 modes; allowed is 1 to 64; write the strongest`,
			},
		},
		{
			"a controller that is taken",
			zoned + `[controls]
mute = 64
`,
			[]string{
				`stays.toml:4: controls.mute: found 64; allowed is a controller that is free, as 20 to 31; this one is the damper pedal`,
			},
		},
		{
			"a controller that is no controller",
			zoned + `[controls]
node = 120
`,
			[]string{
				`stays.toml:4: controls.node: found 120; allowed is a whole number, 2 to 119; write 119 or less`,
			},
		},
		{
			"one controller for two things",
			zoned + `[controls]
mute = 20
node = 20
`,
			[]string{
				`stays.toml:5: controls.node: found 20; allowed is a controller of its own; mute has this one; give each another`,
			},
		},
		{
			"half a controller",
			zoned + `[controls]
mute = 20.5
`,
			[]string{
				`stays.toml:4: controls.mute: found 20.5; allowed is a whole number, 2 to 119; write a whole number without quotes`,
			},
		},
		{
			"a node at the end",
			zoned + `[controls]
node_at = 1
`,
			[]string{
				`stays.toml:4: controls.node_at: found 1; allowed is a whole number, 2 to 8; write 2 or more`,
			},
		},
		{
			"many problems, in order",
			`titel = "Stays"
level = 13

[[zone]]
keys = "C2-B3"
decay = 0

[zone.excitation]
kind = "noise"
hardnes = 1

[[zone]]
keys = "C4-B5"
decay = 999

[zone.excitation]
hardness = 2

[body]
`,
			[]string{
				`stays.toml:1: titel: no such key; did you mean "title"?`,
				`stays.toml:2: level: found 13; allowed is -60 to 12 dB; write 12 dB or less`,
				`stays.toml:6: zone.decay: found 0; allowed is 0.05 to 120 s, or a pair of such; write 0.05 s or more`,
				`stays.toml:10: zone.excitation.hardnes: no such key; did you mean "hardness"?`,
				`stays.toml:14: zone.decay: found 999; allowed is 0.05 to 120 s, or a pair of such; write 120 s or less`,
				`stays.toml:17: zone.excitation.hardness: found 2; allowed is 0 to 1, or a pair of such; write 1 or less`,
				`stays.toml:19: body: says nothing of what resonates; write builtin = "guitar", "hull" or "lantern", or modes or impulse`,
			},
		},
	}
}

func brokenRigs() []broken {
	return []broken{
		{
			"empty",
			"",
			[]string{
				`box.toml: is empty; a rig needs something like [[set]] and below it patch = "lamp-room"`,
			},
		},
		{
			"not UTF-8",
			"\n\n[audio]\ndevice = \"\xc3\x28\"",
			[]string{
				`box.toml:4: not UTF-8 text; save the file as UTF-8 in your editor`,
			},
		},
		{
			"broken",
			`[audio
rate = 48000
`,
			[]string{
				`box.toml:1: expected '.' or ']' to end table name, but got the line's end instead; close the heading with as many brackets as it opens with`,
			},
		},
		{
			"a table twice",
			`[audio]
[midi]
[audio]
`,
			[]string{
				`box.toml:3: audio: stands here a second time; keep one of them`,
			},
		},
		{
			"a patch, not a rig",
			`[[zone]]
keys = "C4"
`,
			[]string{
				`box.toml:1: zone: no such key; this one is no rig's; name a rig file here, or take the table out`,
			},
		},
		{
			"a misspelt table",
			`[aduio]
rate = 48000
`,
			[]string{
				`box.toml:1: aduio: no such key; did you mean [audio]?`,
			},
		},
		{
			"a misspelt key",
			`[audio]
peroid = 64
`,
			[]string{
				`box.toml:2: audio.peroid: no such key; did you mean "period"?`,
			},
		},
		{
			"a key at the top",
			`rate = 48000
`,
			[]string{
				`box.toml:1: rate: no such key; it belongs below [audio]`,
			},
		},
		{
			"audio as a text",
			`audio = "null"
`,
			[]string{
				`box.toml:1: audio: found "null"; allowed is a table; write [audio] on a line of its own, and its keys below`,
			},
		},
		{
			"a device that is a number",
			`[audio]
device = 1
`,
			[]string{
				`box.toml:2: audio.device: found 1; allowed is a text; write it in quotes`,
			},
		},
		{
			"rate too low",
			`[audio]
rate = 7999
`,
			[]string{
				`box.toml:2: audio.rate: found 7999; allowed is a whole number, 8000 to 192000 Hz; write 8000 Hz or more`,
			},
		},
		{
			"rate too high",
			`[audio]
rate = 192001
`,
			[]string{
				`box.toml:2: audio.rate: found 192001; allowed is a whole number, 8000 to 192000 Hz; write 192000 Hz or less`,
			},
		},
		{
			"rate in kHz",
			`[audio]
rate = 44.1
`,
			[]string{
				`box.toml:2: audio.rate: found 44.1; allowed is a whole number, 8000 to 192000 Hz; write a whole number without quotes`,
			},
		},
		{
			"rate as text",
			`[audio]
rate = "48000"
`,
			[]string{
				`box.toml:2: audio.rate: found "48000"; allowed is a whole number, 8000 to 192000 Hz; write a whole number without quotes`,
			},
		},
		{
			"period too short",
			`[audio]
period = 8
`,
			[]string{
				`box.toml:2: audio.period: found 8; allowed is a whole number, 16 to 4096 frames; write 16 frames or more`,
			},
		},
		{
			"period too long",
			`[audio]
period = 8192
`,
			[]string{
				`box.toml:2: audio.period: found 8192; allowed is a whole number, 16 to 4096 frames; write 4096 frames or less`,
			},
		},
		{
			"a misspelt timing",
			`[audio]
timing = "stedy"
`,
			[]string{
				`box.toml:2: audio.timing: found "stedy"; allowed is "steady" or "eager"; did you mean "steady"?`,
			},
		},
		{
			"strings too few",
			`[audio]
strings = 7
`,
			[]string{
				`box.toml:2: audio.strings: found 7; allowed is a whole number, 8 to 512; write 8 or more`,
			},
		},
		{
			"strings too many",
			`[audio]
strings = 513
`,
			[]string{
				`box.toml:2: audio.strings: found 513; allowed is a whole number, 8 to 512; write 512 or less`,
			},
		},
		{
			"level too high",
			`[audio]
level = 3
`,
			[]string{
				`box.toml:2: audio.level: found 3; allowed is -60 to 0 dB; write 0 dB or less`,
			},
		},
		{
			"level not a number",
			`[audio]
level = nan
`,
			[]string{
				`box.toml:2: audio.level: found nan; allowed is -60 to 0 dB; write a plain number`,
			},
		},
		{
			"inputs as a text",
			`[midi]
inputs = "Keys"
`,
			[]string{
				`box.toml:2: midi.inputs: found "Keys"; allowed is a list of texts; write them as ["one", "two"]`,
			},
		},
		{
			"an input of nothing",
			`[midi]
inputs = ["Keys", ""]
`,
			[]string{
				`box.toml:2: midi.inputs: found ""; allowed is parts of port names, or paths; write [] for every keyboard`,
			},
		},
		{
			"inputs as numbers",
			`[midi]
inputs = [1]
`,
			[]string{
				`box.toml:2: midi.inputs: found [1]; allowed is a list of texts; write them as ["one", "two"]`,
			},
		},
		{
			"too many inputs",
			"[midi]\ninputs = [" + strings.Repeat("\"a\",", 65) + "]\n",
			[]string{
				`box.toml:2: midi.inputs: found 65 of them; allowed is up to 64; write [] for every keyboard`,
			},
		},
		{
			"channel 0",
			`[midi]
channels = [0]
`,
			[]string{
				`box.toml:2: midi.channels: found 0; allowed is a list of whole numbers, 1 to 16; write 1 or more`,
			},
		},
		{
			"channel 17",
			`[midi]
channels = [1, 17]
`,
			[]string{
				`box.toml:2: midi.channels: found 17; allowed is a list of whole numbers, 1 to 16; write 16 or less`,
			},
		},
		{
			"a channel twice",
			`[midi]
channels = [1, 2, 1]
`,
			[]string{
				`box.toml:2: midi.channels: found 1 twice; allowed is each channel once; take one out`,
			},
		},
		{
			"half a channel",
			`[midi]
channels = [1.5]
`,
			[]string{
				`box.toml:2: midi.channels: found [1.5]; allowed is a list of whole numbers, 1 to 16; write them as [1, 2]`,
			},
		},
		{
			"a channel without a list",
			`[midi]
channels = 1
`,
			[]string{
				`box.toml:2: midi.channels: found 1; allowed is a list of whole numbers, 1 to 16; write them as [1, 2]`,
			},
		},
		{
			"a set in single brackets",
			`[set]
patch = "good"
`,
			[]string{
				`box.toml:1: set: found a table; allowed is a list of tables; write [[set]] on a line of its own, and its keys below`,
			},
		},
		{
			"a set without a patch",
			`[[set]]
`,
			[]string{
				`box.toml:1: set: patch is missing; write patch = "name.toml"`,
			},
		},
		{
			"a patch without a name",
			`[[set]]
patch = ""
`,
			[]string{
				`box.toml:2: set.patch: found ""; allowed is a patch's name; write one, or take the [[set]] out`,
			},
		},
		{
			"a patch that is a list",
			`[[set]]
patch = ["good"]
`,
			[]string{
				`box.toml:2: set.patch: found ["good"]; allowed is a text; write it in quotes`,
			},
		},
		{
			"a lost patch",
			`[[set]]
patch = "good"

[[set]]
patch = "lost.toml"
`,
			[]string{
				`box.toml:5: set.patch: found "lost.toml"; no such patch here, in /nowhere/tautwire, in /etc/tautwire or built in; built in are bell-buoy, drying-net, foghorn-wire, gale-harp, keepers-gut, lamp-room, lantern-course, storm-stays`,
			},
		},
		{
			"a misspelt built-in patch",
			`[[set]]
patch = "lamproom"
`,
			[]string{
				`box.toml:2: set.patch: found "lamproom"; no such patch here, in /nowhere/tautwire, in /etc/tautwire or built in; did you mean "lamp-room"?`,
			},
		},
		{
			"a lost patch from the root",
			`[[set]]
patch = "/nowhere/x.toml"
`,
			[]string{
				`box.toml:2: set.patch: found "/nowhere/x.toml"; no such patch; check the path`,
			},
		},
		{
			"a patch that is a folder",
			`[[set]]
patch = "folder"
`,
			[]string{
				`box.toml:2: set.patch: found "folder"; is a folder; name a patch file in it`,
			},
		},
		{
			"a bad patch, met twice",
			`[[set]]
patch = "bad.toml"
[[set]]
patch = "bad"
[[set]]
path = "good"
`,
			[]string{
				`box.toml:5: set: patch is missing; write patch = "name.toml"`,
				`box.toml:6: set.path: no such key; did you mean "patch"?`,
				`bad.toml:3: zone.decay: found 1000; allowed is 0.05 to 120 s, or a pair of such; write 120 s or less`,
			},
		},
		{
			"a patch that is no TOML",
			`[[set]]
patch = "worse.toml"
`,
			[]string{
				`worse.toml:1: expected end of table array name delimiter ']', but got the line's end instead; close the heading with as many brackets as it opens with`,
			},
		},
		{
			"a patch too large",
			`[[set]]
patch = "many.toml"
`,
			[]string{
				`many.toml: is larger than 256 kB; check that it is the right one`,
			},
		},
		{
			"too long a set",
			strings.Repeat("[[set]]\npatch = \"good\"\n", 1025),
			[]string{
				`box.toml:1: set: found 1025 of them; allowed is up to 1024; split the rig`,
			},
		},
	}
}

func TestBrokenPatches(t *testing.T) {
	stage(t)
	for _, b := range brokenPatches() {
		t.Run(b.name, func(t *testing.T) {
			p, err := ParsePatch("stays.toml", []byte(b.text))
			if p != nil {
				t.Error("a patch came with the problems")
			}
			expect(t, err, b.want)
		})
	}
}

func TestBrokenRigs(t *testing.T) {
	stage(t)
	for _, b := range brokenRigs() {
		t.Run(b.name, func(t *testing.T) {
			r, err := ParseRig("box.toml", []byte(b.text))
			if r != nil {
				t.Error("a rig came with the problems")
			}
			expect(t, err, b.want)
		})
	}
}

// expect compares an error with the lines that it is to have.
func expect(t *testing.T, err error, want []string) {
	t.Helper()
	var got []string
	if err != nil {
		got = strings.Split(err.Error(), "\n")
	}
	if len(want) == 0 {
		t.Error("no problem is expected; write what is")
	}
	if g, w := strings.Join(got, "\n"), strings.Join(want, "\n"); g != w {
		t.Errorf("got\n%s\nwant\n%s", g, w)
	}
}

// stage makes a folder with the recordings and patches that the broken files
// name, and goes there. Nothing is found in the user's own folder.
func stage(t *testing.T) {
	t.Helper()
	dir := t.TempDir()
	t.Chdir(dir)
	t.Setenv("XDG_CONFIG_HOME", "/nowhere")
	writeWAV(t, "good.wav", 48000, 1, []int{0, 1000, -1000, 0})
	writeWAV(t, "silent.wav", 48000, 1, make([]int, 8))
	writeWAV(t, "empty.wav", 48000, 1, nil)
	writeWAV(t, "long.wav", 4000, 1, append(make([]int, 10*4000), 1))
	writeWAV(t, "slow.wav", 3999, 1, []int{0, 1000})
	for name, text := range map[string]string{
		"text.wav":      "this is no recording, whatever its name says",
		"good.toml":     zoned,
		"bad.toml":      zoned + "decay = 1000\n",
		"worse.toml":    "[[zone]\n",
		"many.toml":     strings.Repeat("#", largestFile+1),
		"folder/x.toml": zoned,
	} {
		if err := os.MkdirAll(filepath.Dir(name), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(name, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
}

// writeWAV writes 16-bit samples.
func writeWAV(t *testing.T, name string, rate, channels int, samples []int) {
	t.Helper()
	f, err := os.Create(name)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	const pcm = 1
	e := wav.NewEncoder(f, rate, 16, channels, pcm)
	buffer := &audio.IntBuffer{Data: samples, Format: &audio.Format{SampleRate: rate, NumChannels: channels}, SourceBitDepth: 16}
	if err := e.Write(buffer); err != nil {
		t.Fatal(err)
	}
	if err := e.Close(); err != nil {
		t.Fatal(err)
	}
}

package config

import (
	"fmt"
	"maps"
	"path/filepath"
	"slices"
	"strings"
)

// Bounds of a patch that are no single number's range.
const (
	longestTitle = 80 // letters
	mostModes    = 64
)

// LoadPatch finds a patch by name (see Find), reads it and checks it whole.
//
// # Errors
//
// Problems, with every one that the file has, each a line that says where it
// is, what was found, what is allowed and what to do. The patch is then nil.
func LoadPatch(name string) (*Patch, error) {
	place, err := Find(name)
	if err != nil {
		return nil, err
	}
	return place.patch()
}

// patch reads and checks the patch at a place.
func (p Place) patch() (*Patch, error) {
	text, err := p.read()
	if err != nil {
		return nil, err
	}
	return ParsePatch(p.Path, text)
}

// ParsePatch checks the text of a patch file. The path stands in errors, and
// WAV files that the patch names are found from its folder.
//
// # Errors
//
// As LoadPatch.
func ParsePatch(path string, text []byte) (*Patch, error) {
	s := &source{path: path, kind: "patch", keys: PatchKeys(), strange: RigKeys()}
	top, ok := s.parse(text)
	if !ok {
		return nil, s.problems.err()
	}
	p := &Patch{
		Path:  path,
		Title: strings.TrimSuffix(filepath.Base(path), extension),
	}
	if len(top.values) == 0 {
		s.note(0, "", "is empty; a patch needs at least one [[zone]] with keys")
		return nil, s.problems.err()
	}
	top.known()
	top.title(&p.Title)
	top.number("level", &p.Level)
	p.Tuning = top.tuning()
	p.Zones = top.zones()
	p.Resonance = top.resonance()
	p.Body = top.body()
	p.Controls = top.controls()
	if len(s.problems) > 0 {
		return nil, s.problems.sorted(path)
	}
	return p, nil
}

func (t table) title(to *string) {
	title := *to
	if !t.text("title", &title) {
		return
	}
	switch {
	case title == "" || oneLine(title) != title:
		t.bad("title", quote(title), "a line of plain letters", "write the patch's name, or leave the key out")
	case len([]rune(title)) > longestTitle:
		t.bad("title", quote(title), fmt.Sprintf("up to %d letters", longestTitle), "shorten it")
	default:
		*to = title
	}
}

func (t table) tuning() Tuning {
	tuning := Tuning{A4: 440}
	sub, _ := t.sub("tuning")
	sub.known()
	sub.number("a4", &tuning.A4)
	cents, ok := sub.list("cents")
	if ok && len(cents) != len(tuning.Cents) {
		k, _ := sub.key("tuning.cents")
		sub.bad("cents", fmt.Sprintf("%d numbers", len(cents)), k.Allowed(), "write twelve, C's first")
	}
	copy(tuning.Cents[:], cents)
	return tuning
}

// zones reads every zone and puts them in the order of their keys.
func (t table) zones() []Zone {
	subs := t.subs("zone")
	if len(subs) == 0 {
		if v, ok := t.values["zone"]; !ok || isEmptyList(v) {
			t.note(0, "zone", "there is none, so every key is silent; write [[zone]] and below it keys = \"C2-C6\"")
		}
		return nil
	}
	var zones []Zone
	lines := map[int]int{} // of a zone's lowest key
	for _, sub := range subs {
		z, ok := sub.zone()
		if !ok {
			continue
		}
		for _, other := range zones {
			if z.Low <= other.High && other.Low <= z.High {
				shared := KeysName(max(z.Low, other.Low), min(z.High, other.High))
				sub.bad("keys", KeysName(z.Low, z.High), "keys that no other zone has",
					fmt.Sprintf("take %s out of this zone or of the one at line %d", shared, lines[other.Low]))
				ok = false
				break
			}
		}
		if ok {
			zones = append(zones, z)
			lines[z.Low] = sub.line("keys")
		}
	}
	slices.SortFunc(zones, func(a, b Zone) int { return a.Low - b.Low })
	return zones
}

// zone reads one zone; ok is false when its keys are unknown.
func (t table) zone() (z Zone, ok bool) {
	t.known()
	z = Zone{
		Decay:      both(4),
		Brightness: both(0.5),
		Release:    both(0.15),
	}
	var keys string
	if !t.has("keys") {
		t.say("", `keys is missing; write which keys the zone has, as in keys = "C2-B3"`)
	} else if ok = t.text("keys", &keys); ok {
		var err error
		if z.Low, z.High, err = parseKeys(keys); err != nil {
			t.bad("keys", quote(keys), `one key or two with a hyphen between, as "C2-B3", "36-59" or "A4"`, err.Error())
			ok = false
		}
	}
	t.span("decay", &z.Decay)
	t.span("brightness", &z.Brightness)
	t.span("release", &z.Release)
	t.span("level", &z.Level)
	t.span("pan", &z.Pan)
	t.span("inharmonicity", &z.Inharmonicity)
	t.span("tension", &z.Tension)
	z.Excitation = t.excitation()
	z.Second = t.second()
	z.Course = t.course()
	return z, ok
}

func (t table) excitation() Excitation {
	e := Excitation{
		Kind:     "pluck",
		Position: both(0.13),
		Hardness: both(0.5),
		Touch:    both(0.5),
		Wave:     "sine",
		Ratio:    both(1),
	}
	sub, _ := t.sub("excitation")
	sub.known()
	known := !sub.has("kind")
	known = sub.text("kind", &e.Kind) || known
	sub.span("position", &e.Position)
	sub.span("hardness", &e.Hardness)
	sub.span("length", &e.Length)
	sub.span("touch", &e.Touch)
	sub.text("wave", &e.Wave)
	sub.span("ratio", &e.Ratio)
	e.Sample = sub.sample("file")
	if !known {
		return e
	}
	for _, only := range []struct {
		name string
		kind string
	}{{"wave", "tone"}, {"ratio", "tone"}, {"file", "sample"}} {
		if sub.has(only.name) && e.Kind != only.kind {
			sub.say(only.name, fmt.Sprintf("does nothing with kind = %q; write kind = %q, or take the line out", e.Kind, only.kind))
		}
	}
	if e.Kind == "sample" && !sub.has("file") {
		sub.say("kind", `"sample" needs a recording; write file = "name.wav" below it`)
	}
	return e
}

func (t table) second() Second {
	second := Second{Decay: both(1)}
	sub, _ := t.sub("second")
	sub.known()
	sub.span("mix", &second.Mix)
	sub.span("cents", &second.Cents)
	sub.span("decay", &second.Decay)
	return second
}

func (t table) course() Course {
	course := Course{Strings: both(1)}
	sub, _ := t.sub("course")
	sub.known()
	sub.span("strings", &course.Strings)
	sub.span("cents", &course.Cents)
	return course
}

func (t table) resonance() Resonance {
	sub, ok := t.sub("resonance")
	resonance := Resonance{On: ok, Level: -24}
	sub.known()
	sub.number("level", &resonance.Level)
	return resonance
}

func (t table) body() Body {
	sub, ok := t.sub("body")
	if !ok {
		return Body{}
	}
	sub.known()
	body := Body{Mix: 0.5}
	sub.number("mix", &body.Mix)
	var given []string
	for _, name := range []string{"modes", "impulse", "builtin"} {
		if sub.has(name) {
			given = append(given, name)
		}
	}
	if len(given) == 0 {
		sub.say("", "says nothing of what resonates; write builtin = "+words(BodyNames())+", or modes or impulse")
	}
	if len(given) > 1 {
		sub.say(given[1], "stands beside "+given[0]+"; a body has one of modes, impulse and builtin: keep one")
	}
	body.Modes = sub.modes()
	body.Impulse = sub.sample("impulse")
	var builtin string
	if sub.text("builtin", &builtin) {
		body.Modes = bodies()[builtin]
	}
	return body
}

// modes reads body.modes.
func (t table) modes() []Mode {
	v, k, ok := t.value("modes")
	if !ok {
		return nil
	}
	list, ok := v.([]any)
	if !ok {
		t.wrong(k, v)
		return nil
	}
	if len(list) == 0 || len(list) > mostModes {
		t.bad("modes", fmt.Sprintf("%d modes", len(list)), fmt.Sprintf("1 to %d", mostModes), "write the strongest")
		return nil
	}
	modes := make([]Mode, len(list))
	for i, one := range list {
		modes[i], ok = t.mode(k, one, i+1)
		if !ok {
			return nil
		}
	}
	return modes
}

// mode reads the n-th triple of body.modes.
func (t table) mode(k Key, v any, n int) (Mode, bool) {
	triple, ok := v.([]any)
	if !ok || len(triple) != 3 {
		t.wrong(k, v)
		return Mode{}, false
	}
	var numbers [3]float64
	for i, part := range []Key{
		{Low: 20, High: 20000, Unit: "Hz"},
		{Low: 0.005, High: 5, Unit: "s"},
		{Low: -60, High: 24, Unit: "dB"},
	} {
		number, ok := numeric(triple[i])
		if !ok {
			t.wrong(k, v)
			return Mode{}, false
		}
		if !(number >= part.Low && number <= part.High) {
			t.bad("modes", fmt.Sprintf("%s in mode %d", describe(triple[i]), n), part.span(), "change it, or take the mode out")
			return Mode{}, false
		}
		numbers[i] = number
	}
	return Mode{Frequency: numbers[0], T60: numbers[1], Level: numbers[2]}, true
}

func (t table) controls() Controls {
	controls := Controls{Mute: -1, Node: -1, NodeAt: 2}
	sub, _ := t.sub("controls")
	sub.known()
	sub.controller("mute", &controls.Mute)
	sub.controller("node", &controls.Node)
	sub.whole("node_at", &controls.NodeAt)
	if controls.Mute >= 0 && controls.Mute == controls.Node {
		sub.bad("node", fmt.Sprint(controls.Node), "a controller of its own", "mute has this one; give each another")
	}
	return controls
}

// controller reads a controller number that the common ones leave free.
func (t table) controller(name string, to *int) {
	number := *to
	if !t.whole(name, &number) {
		return
	}
	if use, ok := takenControllers()[number]; ok {
		t.bad(name, fmt.Sprint(number), "a controller that is free, as 20 to 31", "this one is "+use)
		return
	}
	*to = number
}

// takenControllers are the controllers from 2 on that the instrument answers
// to in every patch, with what they do (MIDI 1.0 and General MIDI 2).
func takenControllers() map[int]string {
	taken := map[int]string{
		6: "data entry", 7: "volume", 10: "pan", 11: "expression", 32: "bank select",
		64: "the damper pedal", 66: "the sostenuto pedal", 67: "the soft pedal",
		71: "loss", 72: "release", 73: "attack", 74: "brightness",
		88: "the velocity prefix", 96: "data increment", 97: "data decrement",
	}
	for number := 98; number <= 101; number++ {
		taken[number] = "a parameter number"
	}
	for _, coarse := range slices.Sorted(maps.Keys(taken)) {
		if coarse < 32 {
			taken[coarse+32] = "the fine part of " + taken[coarse]
		}
	}
	taken[33] = "the fine part of modulation"
	return taken
}

// both is a Span with both ends alike.
func both(v float64) Span { return Span{v, v} }

// emptyList tells whether a key's value is a list of nothing.
func (t table) emptyList(name string) bool { return isEmptyList(t.values[name]) }

func isEmptyList(v any) bool {
	list, ok := v.([]any)
	return ok && len(list) == 0
}

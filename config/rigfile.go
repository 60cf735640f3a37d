package config

import (
	"errors"
	"fmt"
	"path/filepath"
	"slices"
	"strings"
)

// mostInputs and longestSet keep a rig to what a player can mean.
const (
	mostInputs = 64
	longestSet = 1024 // eight banks of programs
)

// LoadRig finds a rig file by name (see Find; no rig is built in), reads it,
// and reads and checks the patches of its set. They are looked for from the
// rig's folder, then as Find does. A rig without a set has DefaultPatch.
//
// # Errors
//
// Problems, with every one that the rig and its patches have. The rig is then
// nil.
func LoadRig(name string) (*Rig, error) {
	place, err := searchFor("rig").find(name)
	if err != nil {
		return nil, err
	}
	text, err := place.read()
	if err != nil {
		return nil, err
	}
	return ParseRig(place.Path, text)
}

// ParseRig checks the text of a rig file. The path stands in errors; patches
// are found from its folder.
//
// # Errors
//
// As LoadRig.
func ParseRig(path string, text []byte) (*Rig, error) {
	s := &source{path: path, kind: "rig", keys: RigKeys(), strange: PatchKeys()}
	top, ok := s.parse(text)
	if !ok {
		return nil, s.problems.err()
	}
	r := &Rig{Path: path}
	if len(top.values) == 0 {
		s.note(0, "", `is empty; a rig needs something like [[set]] and below it patch = "`+DefaultPatch+`"`)
		return nil, s.problems.err()
	}
	top.known()
	r.Audio = top.audio()
	r.MIDI = top.midi()
	r.Set = top.set()
	if len(s.problems) > 0 {
		return nil, s.problems.sorted(path)
	}
	return r, nil
}

func (t table) audio() Audio {
	audio := plainAudio()
	sub, _ := t.sub("audio")
	sub.known()
	sub.text("device", &audio.Device)
	sub.whole("rate", &audio.Rate)
	sub.whole("period", &audio.Period)
	sub.text("timing", &audio.Timing)
	sub.whole("strings", &audio.Strings)
	sub.number("level", &audio.Level)
	return audio
}

func (t table) midi() MIDI {
	var midi MIDI
	sub, _ := t.sub("midi")
	sub.known()
	midi.Inputs = sub.texts("inputs")
	if len(midi.Inputs) > mostInputs {
		sub.bad("inputs", fmt.Sprintf("%d of them", len(midi.Inputs)), fmt.Sprintf("up to %d", mostInputs), "write [] for every keyboard")
	}
	for _, input := range midi.Inputs {
		if strings.TrimSpace(input) == "" {
			sub.bad("inputs", quote(input), "parts of port names, or paths", "write [] for every keyboard")
		}
	}
	channels, _ := sub.list("channels")
	for _, n := range channels {
		channel := int(n)
		if slices.Contains(midi.Channels, channel) {
			sub.bad("channels", fmt.Sprintf("%d twice", channel), "each channel once", "take one out")
			continue
		}
		midi.Channels = append(midi.Channels, channel)
	}
	return midi
}

// set reads the patches of the set. A patch with problems is left out.
func (t table) set() []*Patch {
	subs := t.subs("set")
	if len(subs) > longestSet {
		t.bad("set", fmt.Sprintf("%d of them", len(subs)), fmt.Sprintf("up to %d", longestSet), "split the rig")
		return nil
	}
	search := searchFor("patch")
	search.first = filepath.Dir(t.path)
	loaded := map[Place]*Patch{}
	var set []*Patch
	for _, sub := range subs {
		sub.known()
		var name string
		if !sub.has("patch") {
			sub.say("", `patch is missing; write patch = "name.toml"`)
		}
		if !sub.text("patch", &name) {
			continue
		}
		if strings.TrimSpace(name) == "" {
			sub.bad("patch", quote(name), "a patch's name", "write one, or take the [[set]] out")
			continue
		}
		place, err := search.find(name)
		if err != nil {
			sub.say("patch", describeLost(err))
			continue
		}
		p, met := loaded[place]
		if !met {
			p, err = place.patch()
			t.adopt(sub.line("patch"), err)
			loaded[place] = p
		}
		if p != nil {
			set = append(set, p)
		}
	}
	if len(subs) == 0 && (!t.has("set") || t.emptyList("set")) {
		p, err := Place{Path: DefaultPatch, Builtin: true}.patch()
		t.adopt(0, err)
		set = append(set, p)
	}
	return set
}

// adopt keeps another file's problems.
func (t table) adopt(line int, err error) {
	var problems Problems
	switch {
	case err == nil:
	case errors.As(err, &problems):
		t.problems = append(t.problems, problems...)
	default:
		t.note(line, "set.patch", err.Error())
	}
}

// describeLost is what was wrong with a name, without the file that it would
// have been.
func describeLost(err error) string {
	var p *Problem
	if errors.As(err, &p) {
		return "found " + quote(p.Path) + "; " + p.Text
	}
	return err.Error()
}

package config

import (
	"bytes"
	"errors"
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"
	"unicode"
)

// spans gives a patch's numbers by the names of their keys.
func spans(p *Patch) map[string][]Span {
	all := map[string][]Span{}
	add := func(name string, s Span) { all[name] = append(all[name], s) }
	add("level", both(p.Level))
	add("tuning.a4", both(p.Tuning.A4))
	for _, cents := range p.Tuning.Cents {
		add("tuning.cents", both(cents))
	}
	for _, z := range p.Zones {
		add("zone.decay", z.Decay)
		add("zone.brightness", z.Brightness)
		add("zone.release", z.Release)
		add("zone.level", z.Level)
		add("zone.pan", z.Pan)
		add("zone.inharmonicity", z.Inharmonicity)
		add("zone.tension", z.Tension)
		add("zone.excitation.position", z.Excitation.Position)
		add("zone.excitation.hardness", z.Excitation.Hardness)
		add("zone.excitation.length", z.Excitation.Length)
		add("zone.excitation.touch", z.Excitation.Touch)
		add("zone.excitation.ratio", z.Excitation.Ratio)
		add("zone.second.mix", z.Second.Mix)
		add("zone.second.cents", z.Second.Cents)
		add("zone.second.decay", z.Second.Decay)
		add("zone.course.strings", z.Course.Strings)
		add("zone.course.cents", z.Course.Cents)
	}
	add("resonance.level", both(p.Resonance.Level))
	add("body.mix", both(p.Body.Mix))
	for _, c := range []struct {
		name string
		n    int
	}{{"controls.mute", p.Controls.Mute}, {"controls.node", p.Controls.Node}, {"controls.node_at", p.Controls.NodeAt}} {
		if c.n >= 0 {
			add(c.name, both(float64(c.n)))
		}
	}
	return all
}

// checkPatch holds that an accepted patch is within every bound.
func checkPatch(t *testing.T, p *Patch) {
	t.Helper()
	all := spans(p)
	for _, k := range PatchKeys() {
		for _, s := range all[k.Name] {
			if !(s.Low >= k.Low && s.Low <= k.High && s.High >= k.Low && s.High <= k.High) {
				t.Errorf("%s is %v, allowed is %s", k.Name, s, k.Allowed())
			}
		}
	}
	if p.Title == "" || len([]rune(p.Title)) > longestTitle || strings.ContainsFunc(p.Title, unicode.IsControl) {
		t.Errorf("the title is %q", p.Title)
	}
	if len(p.Zones) == 0 {
		t.Error("there is no zone")
	}
	next := 0
	for _, z := range p.Zones {
		if z.Low < next || z.High < z.Low || z.High > lastKey {
			t.Errorf("zone %d-%d follows one that ends at %d", z.Low, z.High, next-1)
		}
		next = z.High + 1
		for key := z.Low; key <= z.High; key++ {
			checkValues(t, z, key)
		}
		kinds := []string{"noise", "tone", "pluck", "strike", "sample"}
		if !slices.Contains(kinds, z.Excitation.Kind) || !slices.Contains([]string{"sine", "triangle", "saw"}, z.Excitation.Wave) {
			t.Errorf("the excitation is %q with %q", z.Excitation.Kind, z.Excitation.Wave)
		}
		if (z.Excitation.Kind == "sample") != (z.Excitation.Sample != nil) {
			t.Errorf("kind %q comes with the recording %v", z.Excitation.Kind, z.Excitation.Sample)
		}
		if z.Excitation.Sample != nil {
			checkSample(t, z.Excitation.Sample)
		}
	}
	if p.Body.Impulse != nil {
		checkSample(t, p.Body.Impulse)
	}
	if p.Body.Impulse != nil && p.Body.Modes != nil || len(p.Body.Modes) > mostModes {
		t.Errorf("the body has %d modes and the impulse %v", len(p.Body.Modes), p.Body.Impulse)
	}
	for _, m := range p.Body.Modes {
		if !(m.Frequency >= 20 && m.Frequency <= 20000 && m.T60 >= 0.005 && m.T60 <= 5 && m.Level >= -60 && m.Level <= 24) {
			t.Errorf("a mode is %v", m)
		}
	}
	if c := p.Controls; c.Mute >= 0 && c.Mute == c.Node || takenControllers()[c.Mute] != "" || takenControllers()[c.Node] != "" {
		t.Errorf("the controls are %v", c)
	}
}

// checkValues holds that what a key is given lies between its zone's ends.
func checkValues(t *testing.T, z Zone, key int) {
	t.Helper()
	v := z.At(key)
	for _, c := range []struct {
		name string
		v    float64
		in   Span
	}{
		{"decay", v.Decay, z.Decay}, {"brightness", v.Brightness, z.Brightness}, {"release", v.Release, z.Release},
		{"level", v.Level, z.Level}, {"pan", v.Pan, z.Pan}, {"inharmonicity", v.Inharmonicity, z.Inharmonicity},
		{"tension", v.Tension, z.Tension}, {"position", v.Position, z.Excitation.Position},
		{"hardness", v.Hardness, z.Excitation.Hardness}, {"length", v.Length, z.Excitation.Length},
		{"touch", v.Touch, z.Excitation.Touch}, {"ratio", v.Ratio, z.Excitation.Ratio},
		{"second mix", v.SecondMix, z.Second.Mix}, {"second cents", v.SecondCents, z.Second.Cents},
		{"second decay", v.SecondDecay, z.Second.Decay}, {"course cents", v.CourseCents, z.Course.Cents},
	} {
		if !(c.v >= min(c.in.Low, c.in.High) && c.v <= max(c.in.Low, c.in.High)) {
			t.Errorf("%s at key %d is %v, outside %v", c.name, key, c.v, c.in)
		}
	}
	if v.Strings < 1 || v.Strings > 3 {
		t.Errorf("key %d has %d strings", key, v.Strings)
	}
}

// checkProblems holds that an error is lines that a player can use: each names
// its file, a line that the file has, and keeps to one line.
func checkProblems(t *testing.T, err error, path string, text []byte) {
	t.Helper()
	var problems Problems
	if !errors.As(err, &problems) || len(problems) == 0 {
		t.Fatalf("%v is no list of problems", err)
	}
	last := 0
	for _, p := range problems {
		line := p.Error()
		if strings.ContainsFunc(line, func(r rune) bool { return !unicode.IsPrint(r) }) {
			t.Errorf("%q does not print as one line", line)
		}
		const longest = 1000
		if len(line) > longest {
			t.Errorf("a message has %d letters: %s", len(line), line)
		}
		if p.Path != path {
			continue
		}
		if p.Line < last || p.Line > bytes.Count(text, []byte("\n"))+1 {
			t.Errorf("line %d after line %d: %s", p.Line, last, line)
		}
		last = p.Line
	}
}

// FuzzPatch holds that any bytes are a patch within its bounds or problems that
// can be read, the same each time.
func FuzzPatch(f *testing.F) {
	for _, name := range Builtins() {
		text, err := Builtin(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(text)
	}
	const path = "testdata/stays.toml"
	f.Fuzz(func(t *testing.T, text []byte) {
		if len(text) > largestFile {
			return
		}
		p, err := ParsePatch(path, text)
		if err == nil {
			checkPatch(t, p)
			return
		}
		if p != nil {
			t.Error("a patch came with the problems")
		}
		checkProblems(t, err, path, text)
		if _, again := ParsePatch(path, text); again == nil || again.Error() != err.Error() {
			t.Errorf("first\n%v\nthen\n%v", err, again)
		}
	})
}

// FuzzRig is FuzzPatch for rigs.
func FuzzRig(f *testing.F) {
	const path = "testdata/box.toml"
	f.Fuzz(func(t *testing.T, text []byte) {
		if len(text) > largestFile {
			return
		}
		r, err := ParseRig(path, text)
		if err == nil {
			checkRig(t, r)
			return
		}
		if r != nil {
			t.Error("a rig came with the problems")
		}
		checkProblems(t, err, path, text)
	})
}

// checkRig holds that an accepted rig is within every bound.
func checkRig(t *testing.T, r *Rig) {
	t.Helper()
	numbers := map[string]float64{
		"audio.rate": float64(r.Audio.Rate), "audio.period": float64(r.Audio.Period),
		"audio.strings": float64(r.Audio.Strings), "audio.level": r.Audio.Level,
	}
	for _, k := range RigKeys() {
		if k.Form != Number && k.Form != Whole {
			continue
		}
		v, ok := numbers[k.Name]
		if !ok || !(v >= k.Low && v <= k.High) {
			t.Errorf("%s is %v, allowed is %s", k.Name, v, k.Allowed())
		}
	}
	if r.Audio.Timing != "steady" && r.Audio.Timing != "eager" {
		t.Errorf("the timing is %q", r.Audio.Timing)
	}
	var met [17]bool
	for _, c := range r.MIDI.Channels {
		if c < 1 || c > 16 || met[c] {
			t.Fatalf("the channels are %v", r.MIDI.Channels)
		}
		met[c] = true
	}
	if len(r.Set) == 0 {
		t.Error("the set has no patch")
	}
	for _, p := range r.Set {
		checkPatch(t, p)
	}
}

func TestDefaultsAreAsDocumented(t *testing.T) {
	p, err := ParsePatch("stays.toml", []byte(zoned+"[resonance]\n[body]\nbuiltin = \"hull\"\n"))
	if err != nil {
		t.Fatal(err)
	}
	all := spans(p)
	for _, k := range PatchKeys() {
		if k.Form != Number && k.Form != Pair && k.Form != Whole {
			continue
		}
		if k.Default == "none" {
			if len(all[k.Name]) != 0 {
				t.Errorf("%s is %v, documented as none", k.Name, all[k.Name])
			}
			continue
		}
		want, err := strconv.ParseFloat(k.Default, 64)
		if err != nil || len(all[k.Name]) != 1 || all[k.Name][0] != both(want) {
			t.Errorf("%s is %v, documented as %s", k.Name, all[k.Name], k.Default)
		}
	}
	if e := p.Zones[0].Excitation; e.Kind != "pluck" || e.Wave != "sine" {
		t.Errorf("the excitation is %+v", e)
	}
	if p.Title != "stays" {
		t.Errorf("the title is %q, not the file's name", p.Title)
	}
}

// Each number's ends are allowed, and what lies next to them is not.
func TestRangesIncludeTheirEnds(t *testing.T) {
	for _, k := range PatchKeys() {
		if k.Form != Number && k.Form != Pair && k.Form != Whole || k.Name == "body.mix" {
			continue
		}
		step := 1e-9 * max(1, math.Abs(k.High))
		if k.Form == Whole {
			step = 1
		}
		for _, c := range []struct {
			v  float64
			ok bool
		}{{k.Low, true}, {k.High, true}, {k.Low - step, false}, {k.High + step, false}} {
			p, err := ParsePatch("stays.toml", []byte(textWith(k, c.v)))
			if (err == nil) != c.ok {
				t.Errorf("%s = %v: %v", k.Name, c.v, err)
			}
			if err == nil && spans(p)[k.Name][0] != both(c.v) {
				t.Errorf("%s = %v is read as %v", k.Name, c.v, spans(p)[k.Name])
			}
		}
	}
}

// textWith is a patch that sets one key.
func textWith(k Key, v float64) string {
	number := strconv.FormatFloat(v, 'f', -1, 64)
	line := k.last() + " = " + number + "\n"
	switch {
	case k.table() == "":
		return line + zoned
	case k.table() == "zone":
		return zoned + line
	case k.Name == "zone.excitation.ratio":
		line = "kind = \"tone\"\n" + line
	}
	return zoned + "[" + k.table() + "]\n" + line
}

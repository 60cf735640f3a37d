package config

import (
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

func TestFindSearchesInOrder(t *testing.T) {
	here, user := t.TempDir(), t.TempDir()
	t.Chdir(here)
	t.Setenv("XDG_CONFIG_HOME", user)
	put := func(path string) {
		t.Helper()
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(zoned), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	find := func(name string, want Place) {
		t.Helper()
		if got, err := Find(name); err != nil || got != want {
			t.Errorf("Find(%q) = %v, %v; want %v", name, got, err, want)
		}
	}
	builtin := Place{Path: "lamp-room", Builtin: true}
	find("lamp-room", builtin)
	find("lamp-room.toml", builtin)

	inUser := filepath.Join(user, "tautwire", "lamp-room.toml")
	put(inUser)
	find("lamp-room", Place{Path: inUser})
	find("lamp-room.toml", Place{Path: inUser})

	put("lamp-room.toml")
	find("lamp-room", Place{Path: "lamp-room.toml"})
	put("sounds/stays.toml")
	find("sounds/stays", Place{Path: filepath.Join("sounds", "stays.toml")})
	find(filepath.Join(here, "sounds/stays"), Place{Path: filepath.Join(here, "sounds", "stays.toml")})

	if err := os.MkdirAll("storm-stays", 0o755); err != nil {
		t.Fatal(err)
	}
	find("storm-stays", Place{Path: "storm-stays", Builtin: true}) // a folder is passed over
}

func TestFindUsesHomeWhereNothingIsSet(t *testing.T) {
	home := t.TempDir()
	t.Chdir(t.TempDir())
	t.Setenv("XDG_CONFIG_HOME", "")
	t.Setenv("HOME", home)
	want := filepath.Join(home, ".config", "tautwire", "stays.toml")
	if err := os.MkdirAll(filepath.Dir(want), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(want, []byte(zoned), 0o644); err != nil {
		t.Fatal(err)
	}
	if got, err := Find("stays"); err != nil || got.Path != want {
		t.Errorf("found %v, %v; want %s", got, err, want)
	}
}

func TestLoadingWhatIsNoFile(t *testing.T) {
	stage(t)
	for name, want := range map[string]string{
		"lost":       "lost: no such patch here, in /nowhere/tautwire, in /etc/tautwire or built in; built in are " + strings.Join(Builtins(), ", "),
		"storm-stay": `storm-stay: no such patch here, in /nowhere/tautwire, in /etc/tautwire or built in; did you mean "storm-stays"?`,
		"":           "(no name): patch has no name; write a file's name",
		"folder":     "folder: is a folder; name a patch file in it",
		"/dev/null":  "/dev/null: is no ordinary file; name a patch file in it",
		"many.toml":  "many.toml: is larger than 256 kB; check that it is the right one",
		"bad":        "bad.toml:3: zone.decay: found 1000; allowed is 0.05 to 120 s, or a pair of such; write 120 s or less",
	} {
		p, err := LoadPatch(name)
		var problems Problems
		if p != nil || !errors.As(err, &problems) || err.Error() != want {
			t.Errorf("LoadPatch(%q): got\n%v\nwant\n%s", name, err, want)
		}
	}
	for name, want := range map[string]string{
		"lost":      "lost: no such rig here, in /nowhere/tautwire or in /etc/tautwire; check the name",
		"lamp-room": "lamp-room: no such rig here, in /nowhere/tautwire or in /etc/tautwire; check the name",
		"good.toml": "good.toml:1: zone: no such key; this one is no rig's; name a rig file here, or take the table out",
	} {
		r, err := LoadRig(name)
		if r != nil || err == nil || err.Error() != want {
			t.Errorf("LoadRig(%q): got\n%v\nwant\n%s", name, err, want)
		}
	}
}

func TestBuiltinPatches(t *testing.T) {
	t.Chdir(t.TempDir())
	t.Setenv("XDG_CONFIG_HOME", "/nowhere")
	names := Builtins()
	if len(names) != 8 || !slices.Contains(names, DefaultPatch) {
		t.Errorf("built in are %v", names)
	}
	titles := map[string]bool{}
	for _, name := range names {
		p, err := LoadPatch(name)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		checkPatch(t, p)
		if p.Path != name || titles[p.Title] {
			t.Errorf("%s has the path %q and the title %q", name, p.Path, p.Title)
		}
		titles[p.Title] = true
		for key := 0; key <= lastKey; key++ {
			if _, ok := p.Zone(key); !ok {
				t.Errorf("%s is silent at %s", name, KeyName(key))
			}
		}
		text, err := Builtin(name)
		if err != nil || !strings.HasPrefix(string(text), "# ") {
			t.Errorf("%s does not begin by saying what it is", name)
		}
	}
}

func TestRigFindsItsPatches(t *testing.T) {
	stage(t)
	if err := os.WriteFile("folder/box.toml", []byte(`[audio]
device = "USB"
rate = 96000
period = 128
timing = "eager"
strings = 64
level = -20.5

[midi]
inputs = ["Keys", "/dev/ttyAMA0"]
channels = [10, 1]

[[set]]
patch = "x.toml"    # beside the rig, not here
[[set]]
patch = "lamp-room"
[[set]]
patch = "x"
`), 0o644); err != nil {
		t.Fatal(err)
	}
	r, err := LoadRig("folder/box")
	if err != nil {
		t.Fatal(err)
	}
	checkRig(t, r)
	if want := (Audio{"USB", 96000, 128, "eager", 64, -20.5}); r.Audio != want {
		t.Errorf("audio is %+v", r.Audio)
	}
	if !slices.Equal(r.MIDI.Inputs, []string{"Keys", "/dev/ttyAMA0"}) || !slices.Equal(r.MIDI.Channels, []int{10, 1}) {
		t.Errorf("MIDI is %+v", r.MIDI)
	}
	if len(r.Set) != 3 || r.Set[0].Path != filepath.Join("folder", "x.toml") || r.Set[1].Path != "lamp-room" || r.Set[2] != r.Set[0] {
		t.Errorf("the set is %v", r.Set)
	}
}

func TestRigWithoutASetHasTheDefaultPatch(t *testing.T) {
	for _, text := range []string{"[audio]\n", "set = []\n"} {
		r, err := ParseRig("box.toml", []byte(text))
		if err != nil {
			t.Fatal(err)
		}
		checkRig(t, r)
		if len(r.Set) != 1 || r.Set[0].Path != DefaultPatch || r.Audio != plainAudio() {
			t.Errorf("%q gives %+v", text, r)
		}
	}
}

package main

import (
	"strings"
	"testing"

	"tautwire/config"
)

// TestCheckBuiltins: every built-in patch is told, with each of its zones, and the
// text that --text prints is a patch that says the same.
func TestCheckBuiltins(t *testing.T) {
	for _, name := range config.Builtins() {
		code, held, err := runHere(t, "check", name)
		if code != 0 || err != "" || !strings.HasPrefix(held, name+": a patch, ") {
			t.Fatalf("check %s: exit code %d, %q, %q", name, code, err, held)
		}
		patch, _ := config.LoadPatch(name)
		for _, z := range patch.Zones {
			if !strings.Contains(held, "\n  "+config.KeysName(z.Low, z.High)+" ") {
				t.Errorf("check %s does not tell of zone %s:\n%s", name, config.KeysName(z.Low, z.High), held)
			}
		}
		_, copied, _ := runHere(t, "check", "--text", name)
		if file := writeFile(t, name+".toml", copied); strings.Contains(copied, "file =") {
			continue // its recordings stand elsewhere
		} else if _, again, _ := runHere(t, "check", file); strings.ReplaceAll(again, file, name) != held {
			t.Errorf("the text of %s says something else:\n%s\n%s", name, held, again)
		}
	}
}

func TestCheckRig(t *testing.T) {
	rig := writeFile(t, "rig.toml", `[audio]
device = "net loft"
period = 128
[midi]
inputs = ["lamp keys"]
channels = [1, 10]
[[set]]
patch = "lamp-room"
[[set]]
patch = "bell-buoy"
`)
	code, held, err := runHere(t, "check", rig)
	if code != 0 || err != "" {
		t.Fatalf("exit code %d, %q", code, err)
	}
	for _, want := range []string{": a rig", `"net loft", 48000 Hz, periods of 128 frames (2.67 ms), steady`,
		"lamp keys, channels 1, 10", "Program Change 1: Lamp room", "Program Change 2: "} {
		if !strings.Contains(held, want) {
			t.Errorf("lacks %q:\n%s", want, held)
		}
	}
}

// TestCheckSpan: every number has its unit, and a pair both its ends.
func TestCheckSpan(t *testing.T) {
	patch := writeFile(t, "p.toml", `level = -3
[tuning]
cents = [0, 4, 0, 0, 0, 0, 0, 0, 0, 0, 0, -2.5]
[[zone]]
keys = "C2-B3"
decay = [9.0, 4.5]
pan = [-0.25, 0]
[zone.course]
strings = 2
cents = 4
`)
	code, held, err := runHere(t, "check", patch)
	if code != 0 || err != "" {
		t.Fatalf("exit code %d, %q", code, err)
	}
	for _, want := range []string{"level -3 dB, A4 = 440 Hz, tuned C to B by 0 4 0", "-2.5 cents", "decay 9 to 4.5 s",
		"pan -0.25 to 0", "courses of 2 strings, 4 cents wide", "silent keys: C-1-B1, C4-G9"} {
		if !strings.Contains(held, want) {
			t.Errorf("lacks %q:\n%s", want, held)
		}
	}
}

// TestDevices lists the null output in any case.
func TestDevices(t *testing.T) {
	code, out, err := runHere(t, "devices")
	if code != 0 || err != "" || !strings.Contains(out, "\n  null ") || !strings.Contains(out, "MIDI inputs") {
		t.Errorf("exit code %d, %q, %q", code, err, out)
	}
	code, out, err = runHere(t, "devices", "--check")
	if out != "" || (code == 0) != (err == "") || code != 0 && !strings.Contains(err, "no audio output found") {
		t.Errorf("--check: exit code %d, %q, %q", code, err, out)
	}
}

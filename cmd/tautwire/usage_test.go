package main

import (
	"bytes"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// runHere carries out a command line in this process.
func runHere(t testing.TB, args ...string) (code int, out, err string) {
	t.Helper()
	var o, e bytes.Buffer
	code = run(t.Context(), args, streams{out: &o, err: &e})
	return code, o.String(), e.String()
}

func TestUsage(t *testing.T) {
	dir := t.TempDir()
	file := func(name, text string) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
		return path
	}
	good := file("good.toml", "title = \"Spare lamp\"\n[[zone]]\nkeys = \"0-127\"\n")
	bad := file("bad.toml", "[[zone]]\nkeys = \"C2-B3\"\ndecoy = 1\npan = 3\n")
	text := file("notes.txt", "not a performance")
	nowhere := filepath.Join(dir, "no-such-file")
	wav := filepath.Join(dir, "out.wav")
	t.Setenv("XDG_CONFIG_HOME", dir)

	tests := []struct {
		line string
		code int
		says string // part of standard error, one line of it
	}{
		{"", 2, "tautwire help"},
		{"ply", 2, "did you mean `tautwire play`?"},
		{"sing", 2, "there are play, render, check, devices, report"},
		{"--loud", 2, "stands before a command"},
		{"play --devise null", 2, "did you mean --device?"},
		{"play --rate", 2, "--rate needs its HZ"},
		{"play --rate fast", 2, `found "fast"; a whole number from 8000 to 192000`},
		{"play --rate=1", 2, `found "1"; a whole number`},
		{"play --period 8", 2, "a whole number from 16 to 4096"},
		{"play --period 1e3", 2, "a whole number from 16 to 4096"},
		{"play --timing soon", 2, "one of steady, eager"},
		{"play extra", 2, `"extra"`},
		{"play --midi=", 2, "a name or a path"},
		{"play --device null --midi " + text, 1, "is no stream of bytes"},
		{"play --device null --patch " + nowhere, 1, "no such patch"},
		{"play --device null --patch " + bad, 1, "more; `tautwire check " + bad + "` lists them"},
		{"play --device null --rig " + nowhere, 1, "no such rig"},
		{"play --device no-device-has-this-name", 1, "tautwire devices"},
		{"play --device null --log " + dir + "/none/x.log", 1, "the log can't be written"},
		{"render", 2, "--demo"},
		{"render " + text, 2, "--out"},
		{"render " + text + " --out " + wav, 1, text},
		{"render " + nowhere + " --out " + wav, 1, "no such file"},
		{"render a.mid b.mid --out " + wav, 2, "one performance"},
		{"render --key H9 --out " + wav, 2, "key"},
		{"render --key A4 --demo --out " + wav, 2, "one of"},
		{"render --key A4 --tail -1 --out " + wav, 2, "a number from 0"},
		{"render --key A4 --bits 16 --out " + wav, 2, "one of float, 24"},
		{"render --key A4 --out " + dir + "/none/x.wav", 1, "none/x.wav"},
		{"render --key A4 --patch " + bad + " --out " + wav, 1, bad},
		{"check", 2, "name at least one"},
		{"check " + bad, 1, bad + ":3"},
		{"check " + bad, 1, bad + ":4"},
		{"check " + good + " " + nowhere, 1, nowhere},
		{"devices extra", 2, `"extra"`},
		{"report", 2, "one log file"},
		{"report " + nowhere, 1, "--log FILE"},
		{"report " + text, 1, "holds no record"},
		{"report " + dir, 1, dir},
		{"help nothing", 2, "unknown command"},
	}
	for _, test := range tests {
		code, out, err := runHere(t, strings.Fields(test.line)...)
		if code != test.code || !strings.Contains(err, test.says) {
			t.Errorf("tautwire %s: exit code %d, %q; want %d and %q", test.line, code, err, test.code, test.says)
		}
		lines := strings.Count(err, "\n")
		if !strings.HasSuffix(err, "\n") || lines != 1 && !strings.HasPrefix(test.line, "check") {
			t.Errorf("tautwire %s: %d lines on standard error, want one: %q", test.line, lines, err)
		}
		if test.code == 2 && out != "" {
			t.Errorf("tautwire %s: wrote %q to standard output", test.line, out)
		}
	}
}

func TestHelp(t *testing.T) {
	for _, line := range []string{"help", "--help", "-h"} {
		code, out, err := runHere(t, line)
		if code != 0 || err != "" {
			t.Errorf("tautwire %s: exit code %d, %q", line, code, err)
		}
		for _, c := range commands() {
			if !strings.Contains(out, "  "+c.name) {
				t.Errorf("tautwire %s does not name %s", line, c.name)
			}
		}
	}
	for _, c := range commands() {
		o := newOptions()
		c.prepare(o)
		_, want, _ := runHere(t, "help", c.name)
		for _, form := range [][]string{{c.name, "--help"}, {c.name, "-help"}, {c.name, "-h"}} {
			code, out, err := runHere(t, form...)
			if code != 0 || err != "" || out != want {
				t.Errorf("tautwire %v: exit code %d, %q, %q", form, code, out, err)
			}
		}
		if !strings.HasPrefix(want, "Usage: tautwire "+c.name) {
			t.Errorf("help of %s begins with %q", c.name, want)
		}
		for line := range strings.Lines(want) {
			if len([]rune(line)) > 121 {
				t.Errorf("help of %s has a line of %d letters: %s", c.name, len(line), line)
			}
		}
		if code, out, _ := runHere(t, c.name, "--version"); code != 0 || !strings.HasPrefix(out, "tautwire "+version) {
			t.Errorf("tautwire %s --version: exit code %d, %q", c.name, code, out)
		}
	}
	if code, out, _ := runHere(t, "--version"); code != 0 || strings.Count(out, "\n") != 1 || !strings.Contains(out, version) {
		t.Errorf("--version: exit code %d, %q", code, out)
	}
}

// TestOptionOrder: options may stand before or after what they belong to, with
// one dash or two, their values after a space or an equals sign.
func TestOptionOrder(t *testing.T) {
	for _, words := range [][]string{
		{"--rate", "44100", "--loud", "a", "b"},
		{"a", "-rate=44100", "b", "-loud"},
		{"-loud=true", "a", "--rate=44100", "--", "b"},
	} {
		o := newOptions()
		rate := o.whole("rate", 8000, 192000, "`HZ`")
		loud := o.Bool("loud", false, "")
		rest, err := o.read(words)
		if err != nil || *rate != 44100 || !*loud || strings.Join(rest, " ") != "a b" {
			t.Errorf("%q: rate %d, loud %v, rest %q, error %v", words, *rate, *loud, rest, err)
		}
	}
}

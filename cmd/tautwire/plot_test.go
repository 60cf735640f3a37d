package main

import (
	"bytes"
	"encoding/xml"
	"errors"
	"image/png"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"tautwire/config"
	"tautwire/voice/measure"
)

// plottedPatch has a plain zone and a zone of courses in two planes, with silent keys between, few keys
// each.
const plottedPatch = `title = "Spare stays"
[tuning]
a4 = 432
cents = [0, 0, 0, 0, 10, 0, 0, 0, 0, 0, 0, 0]
[[zone]]
keys = "C4-E4"
decay = [2.0, 0.5]
brightness = 0.3
[zone.excitation]
kind = "pluck"
position = 0.2
[[zone]]
keys = "A5-C6"
decay = 1.0
brightness = 0.6
[zone.excitation]
kind = "strike"
[zone.course]
strings = 2
cents = 6
[zone.second]
mix = 0.5
cents = 2
decay = 2.0
`

func sounded(t *testing.T, text string) (*config.Patch, []keySound) {
	t.Helper()
	patch, err := config.LoadPatch(writeFile(t, "plotted.toml", text))
	if err != nil {
		t.Fatal(err)
	}
	keys, err := soundKeys(t.Context(), streams{err: io.Discard}, patch)
	if err != nil {
		t.Fatal(err)
	}
	return patch, keys
}

// TestPlotMeasures: what the pictures show is what the patch asks for, with the bounds that a string
// is held to.
func TestPlotMeasures(t *testing.T) {
	_, keys := sounded(t, plottedPatch)
	var played []int
	for _, k := range keys {
		played = append(played, k.key)
		t.Logf("%s: %.6g s, %.6g cents, %.0f and %.0f Hz", config.KeyName(k.key), k.decay, k.settled, k.bright, k.brightLater)
	}
	if want := []int{60, 63, 64, 81, 84}; !slices.Equal(played, want) {
		t.Fatalf("played keys %v, want %v", played, want)
	}
	for _, c := range []struct {
		at      int
		pitch   float64 // Hz
		decay   float64 // s
		settled []float64
	}{
		{0, 432 * math.Exp2(-9.0/12), 2, []float64{0}},
		{1, 432 * math.Exp2(-6.0/12), 2 * math.Pow(0.25, 3.0/4), []float64{0}},
		{2, 432 * math.Exp2(-4.9/12), 0.5, []float64{0}},
		// of equal parts the longer one has 3 dB less to begin with
		{3, 864, 2 * (60 - 3.01) / 60, []float64{-3, -1, 3, 5}},
		{4, 864 * math.Exp2(3.0/12), 2 * (60 - 3.01) / 60, []float64{-3, -1, 3, 5}},
	} {
		k := keys[c.at]
		name := config.KeyName(k.key)
		if math.Abs(measure.Cents(k.pitch, c.pitch)) > 1e-9 {
			t.Errorf("%s is asked for at %g Hz, want %g", name, k.pitch, c.pitch)
		}
		if !(math.Abs(k.decay/c.decay-1) < 0.015) {
			t.Errorf("%s falls by 60 dB in %g s, want %g", name, k.decay, c.decay)
		}
		if len(k.settled) != len(c.settled) {
			t.Errorf("%s has strings at %g cents, want %g", name, k.settled, c.settled)
			continue
		}
		for i, cents := range c.settled {
			if !(math.Abs(k.settled[i]-cents) < 0.01) {
				t.Errorf("%s has a string at %g cents, want %g", name, k.settled[i], cents)
			}
		}
		over := c.decay < ringing/unheard // s: nothing is left to be heard after a second
		if !(k.bright > k.pitch) || !(k.brightLater < k.bright) && !over || !math.IsNaN(k.brightLater) && over {
			t.Errorf("%s is centred on %g Hz, and on %g Hz a second later", name, k.bright, k.brightLater)
		}
		for n := 1.0; n <= 2; n++ {
			if hz, _ := k.stroke.Peak((n-0.4)*k.pitch, (n+0.4)*k.pitch); math.Abs(hz-n*k.pitch) > 2*k.stroke.Step {
				t.Errorf("%s: partial %g is drawn at %g Hz, want %g", name, n, hz, n*k.pitch)
			}
		}
	}
	if k := keys[3]; k.flat != -3 || k.sharp != 5 || k.second != 2 {
		t.Errorf("strings are asked for from %g to %g cents, the second plane for %g s; want -3, 5, 2", k.flat, k.sharp, k.second)
	}
}

// TestPlotShowsTension: a hard stroke starts sharp and settles, and what the body rings with does not
// hide it.
func TestPlotShowsTension(t *testing.T) {
	const text = `[[zone]]
keys = "C2"
decay = 4
tension = 20
[zone.excitation]
kind = "pluck"
[body]
mix = 0.5
modes = [[70, 0.5, 0]]
`
	patch, keys := sounded(t, text)
	k := keys[0]
	patch.Body = config.Body{}
	alone, err := soundKeys(t.Context(), streams{err: io.Discard}, patch)
	if err != nil {
		t.Fatal(err)
	}
	if !(k.onset > 2 && k.onset < 20) || k.onset != alone[0].onset {
		t.Errorf("%.3g cents sharp at the stroke, %.3g without a body; want the same, within 2 to 20", k.onset, alone[0].onset)
	}
	if len(k.settled) != 1 || math.Abs(k.settled[0]) > 0.1 {
		t.Errorf("settles at %.3g cents, want 0", k.settled)
	}
}

// TestPlotFiles: the pictures are whole, of either form, and their paths are what is printed.
func TestPlotFiles(t *testing.T) {
	patch := writeFile(t, "spare.toml", plottedPatch)
	for _, form := range []string{pictureSVG, picturePNG} {
		dir := filepath.Join(t.TempDir(), "new", "folder")
		code, out, told := runHere(t, "check", "--plot", dir, "--as", form, patch)
		var want string
		for _, name := range []string{"decay", "brightness", "spectrum", "pitch"} {
			want += filepath.Join(dir, name+"."+form) + "\n"
		}
		if code != 0 || told != "" || out != want {
			t.Fatalf("exit code %d, %q, printed %q, want %q", code, told, out, want)
		}
		for _, path := range strings.Fields(out) {
			data, err := os.ReadFile(path)
			if err != nil {
				t.Fatal(err)
			}
			if form == picturePNG {
				if p, err := png.Decode(bytes.NewReader(data)); err != nil || p.Bounds().Dx() < 1000 {
					t.Errorf("%s: %v", path, err)
				}
				continue
			}
			words := wordsOfSVG(t, path, data)
			if !strings.Contains(words, "Spare stays: ") {
				t.Errorf("%s has no title: %s", path, words)
			}
			if strings.Contains(path, "spectrum") {
				for _, want := range []string{"C4, 257 Hz", "E4, 326 Hz", "C6, 1027 Hz", "frequency, Hz"} {
					if !strings.Contains(words, want) {
						t.Errorf("%s lacks %q: %s", path, want, words)
					}
				}
				continue
			}
			for _, want := range []string{"C4-E4", "A5-C6", "key, each struck alone"} {
				if !strings.Contains(words, want) {
					t.Errorf("%s lacks %q: %s", path, want, words)
				}
			}
		}
	}
}

// wordsOfSVG reads a whole SVG file and gives its texts.
func wordsOfSVG(t *testing.T, path string, data []byte) string {
	t.Helper()
	var words []string
	root := ""
	for d := xml.NewDecoder(bytes.NewReader(data)); ; {
		token, err := d.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatalf("%s: %v", path, err)
		}
		switch token := token.(type) {
		case xml.StartElement:
			if root == "" {
				root = token.Name.Local
			}
		case xml.CharData:
			if word := strings.TrimSpace(string(token)); word != "" {
				words = append(words, word)
			}
		}
	}
	if root != "svg" {
		t.Errorf("%s is a %q, want an svg", path, root)
	}
	if text := string(data); strings.Contains(text, "NaN") || strings.Contains(text, "Inf") {
		t.Errorf("%s has coordinates that are no numbers", path)
	}
	return strings.Join(words, " | ")
}

// TestPlotSeveral: each patch has a folder of its own.
func TestPlotSeveral(t *testing.T) {
	one := writeFile(t, "one.toml", "[[zone]]\nkeys = \"C4\"\ndecay = 0.3\n")
	two := writeFile(t, "two.toml", "[[zone]]\nkeys = \"C5\"\ndecay = 0.3\n")
	dir := t.TempDir()
	code, out, told := runHere(t, "check", one, two, "--plot", dir)
	if code != 0 || told != "" || strings.Count(out, filepath.Join(dir, "one")+"/") != 4 || strings.Count(out, filepath.Join(dir, "two")+"/") != 4 {
		t.Errorf("exit code %d, %q, printed %q", code, told, out)
	}
}

// TestPlotRefuses: where anything is wrong it is told in a line each, and nothing is drawn.
func TestPlotRefuses(t *testing.T) {
	good := writeFile(t, "good.toml", "[[zone]]\nkeys = \"C4\"\ndecay = 0.3\n")
	again := writeFile(t, "good.toml", "[[zone]]\nkeys = \"C4\"\ndecay = 0.3\n")
	bad := writeFile(t, "bad.toml", "[[zone]]\nkeys = \"C4\"\ndecoy = 1\npan = 3\n")
	rig := writeFile(t, "rig.toml", "[audio]\nrate = 48000\n")
	for _, c := range []struct {
		names []string
		lines int
		says  string
	}{
		{[]string{bad}, 2, bad + ":3"},
		{[]string{bad, good}, 2, bad + ":4"},
		{[]string{good, "no-such-patch"}, 1, "no such patch"},
		{[]string{rig}, 1, "found a rig"},
		{[]string{good, again}, 1, "one at a time"},
	} {
		dir := filepath.Join(t.TempDir(), "pictures")
		code, out, told := runHere(t, append([]string{"check", "--plot", dir}, c.names...)...)
		if code != 1 || out != "" || strings.Count(told, "\n") != c.lines || !strings.Contains(told, c.says) {
			t.Errorf("%v: exit code %d, printed %q, told %q; want 1, nothing, %d lines with %q", c.names, code, out, told, c.lines, c.says)
		}
		if _, err := os.Stat(dir); !errors.Is(err, os.ErrNotExist) {
			t.Errorf("%v: the folder of the pictures was made (%v)", c.names, err)
		}
	}
	code, out, told := runHere(t, "check", "--plot", good, good)
	if code != 1 || out != "" || strings.Count(told, "\n") != 1 || !strings.Contains(told, "not a directory; give --plot a folder") {
		t.Errorf("into a file: exit code %d, printed %q, told %q", code, out, told)
	}
	if code, _, told = runHere(t, "check", "--plot", t.TempDir(), "--as", "jpeg", good); code != 2 || !strings.Contains(told, "one of svg, png") {
		t.Errorf("as jpeg: exit code %d, told %q", code, told)
	}
}

// TestPlotOfNothing: a key that is silent, over at once or beyond hearing has no numbers, and a picture
// all the same.
func TestPlotOfNothing(t *testing.T) {
	patch, keys := sounded(t, "level = -60\n[[zone]]\nkeys = \"0-1\"\ndecay = 0.05\n[[zone]]\nkeys = \"126-127\"\ndecay = 0.05\n")
	for _, silent := range []bool{false, true} {
		if silent {
			for i := range keys {
				keys[i] = keySound{key: keys[i].key, pitch: keys[i].pitch, values: keys[i].values, second: math.NaN(), onset: math.NaN()}
				keys[i].listen(make([]float32, 2*plotRate))
				if k := keys[i]; !math.IsNaN(k.decay) || !math.IsNaN(k.bright) || !math.IsNaN(k.brightLater) || k.settled != nil {
					t.Errorf("silence measures %g s, %g and %g Hz, %g cents", k.decay, k.bright, k.brightLater, k.settled)
				}
			}
		}
		for _, p := range pictures() {
			data, err := p.render(pictureSVG, patch, keys)
			if err != nil {
				t.Fatalf("%s: %v", p.name, err)
			}
			wordsOfSVG(t, p.name, data)
		}
	}
}

// TestPlotOfShortNote: what is left of a note after it has died away has no brightness.
func TestPlotOfShortNote(t *testing.T) {
	k := keySound{key: 69, pitch: 440, second: math.NaN()}
	note := make([]float32, 2*plotRate)
	for i := range note {
		fall := math.Pow(10, -3*float64(i)/plotRate/0.5)
		note[i] = float32(0.5 * fall * math.Sin(2*math.Pi*440*float64(i)/plotRate))
	}
	k.listen(note)
	if math.Abs(k.decay-0.5) > 1e-3 || math.Abs(k.bright-440) > 10 || !math.IsNaN(k.brightLater) {
		t.Errorf("falls in %g s, centred on %g Hz and %g Hz later; want 0.5 s, 440 Hz and none", k.decay, k.bright, k.brightLater)
	}
}

func TestLogAxis(t *testing.T) {
	for _, c := range []struct {
		values    []float64
		low, high float64
	}{
		{[]float64{0.3, 4}, 0.2, 10},
		{[]float64{27.5, 4186}, 20, 10000},
		{[]float64{1, math.NaN(), math.Inf(1), 0}, 0.5, 2},
		{[]float64{math.NaN()}, 0.1, 10},
	} {
		if low, high := logRange(c.values); math.Abs(low/c.low-1) > 1e-9 || math.Abs(high/c.high-1) > 1e-9 {
			t.Errorf("%v go from %g to %g, want %g to %g", c.values, low, high, c.low, c.high)
		}
	}
	var labels []string
	for _, tick := range (logTicks{}).Ticks(0.1, 20) {
		if tick.Label != "" {
			labels = append(labels, tick.Label)
		}
	}
	if got := strings.Join(labels, " "); got != "0.1 0.2 0.5 1 2 5 10 20" {
		t.Errorf("0.1 to 20 has the labels %s", got)
	}
}

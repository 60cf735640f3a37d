package main

import (
	"bytes"
	"context"
	"errors"
	"math"
	"os"
	"path/filepath"
	"testing"

	"tautwire/voice/measure"
)

// rendered carries out a render command and reads its file.
func rendered(t testing.TB, args ...string) (wav, []byte) {
	t.Helper()
	path := filepath.Join(t.TempDir(), "out.wav")
	if code, out, err := runHere(t, append([]string{"render", "--out", path}, args...)...); code != 0 || out != "" || err != "" {
		t.Fatalf("render %q: exit code %d, %q, %q", args, code, out, err)
	}
	raw, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	w, err := parseWAV(raw)
	if err != nil && !errors.Is(err, errNoWAV) {
		t.Fatal(err)
	}
	return w, raw
}

// plainString is a patch with nothing in it that moves a string's pitch.
const plainString = `title = "Signal halyard"
[[zone]]
keys = "0-127"
decay = 6.0
`

// TestRenderPitch: one note at key 69 is within 0.006 cent of 440 Hz.
func TestRenderPitch(t *testing.T) {
	patch := writeFile(t, "plain.toml", plainString)
	for _, rate := range []string{"44100", "48000", "96000"} {
		w, _ := rendered(t, "--key", "69", "--seconds", "4", "--rate", rate, "--patch", patch)
		x := mono(w.samples, w.channels)
		// From after the attack until before the key is let go.
		m, err := measure.Partial(x[w.rate/2:4*w.rate], float64(w.rate), 440, 440)
		if err != nil {
			t.Fatal(err)
		}
		cents := measure.Cents(m.Frequency, 440)
		t.Logf("%s Hz: %.6f Hz, %+.5f cent", rate, m.Frequency, cents)
		if math.Abs(cents) > 0.006 {
			t.Errorf("%s Hz: key 69 is %.4f cent off 440 Hz", rate, cents)
		}
	}
}

// watchChange is a standard MIDI file, division 96 at 120 beats a minute: a chord,
// a bend, a pedal, and two Program Changes among notes that ring on.
func watchChange(t testing.TB) string {
	t.Helper()
	track := []byte{
		0, 0xc0, 1, // Program Change 2
		0, 0x90, 45, 100, 0, 52, 90, 0, 61, 80, // running status
		24, 0xb0, 64, 127, // damper
		24, 0xe0, 0, 80, // bend
		7, 0xc0, 3, // Program Change 4, beside the beat
		1, 0x90, 69, 110,
		48, 0x80, 45, 64, 0, 52, 64, 0, 61, 64, 0, 69, 64,
		10, 0xc0, 100, // there is none
		14, 0xb0, 64, 0,
		24, 0xff, 0x2f, 0,
	}
	file := []byte("MThd\x00\x00\x00\x06\x00\x00\x00\x01\x00\x60MTrk\x00\x00\x00")
	file = append(append(file, byte(len(track))), track...)
	return writeFile(t, "watch-change.mid", string(file))
}

// TestRenderSame: the same bytes every time, and whatever the period.
func TestRenderSame(t *testing.T) {
	performance := watchChange(t)
	_, want := rendered(t, performance, "--tail", "1")
	for _, period := range []string{"64", "1", "7", "1000", "4096"} {
		if _, got := rendered(t, performance, "--tail", "1", "--period", period); !bytes.Equal(got, want) {
			t.Errorf("periods of %s frames give another file", period)
		}
	}
}

// TestRenderPrograms: a Program Change takes another patch of the set.
func TestRenderPrograms(t *testing.T) {
	_, want := rendered(t, watchChange(t), "--tail", "0.5")
	performance, err := os.ReadFile(watchChange(t))
	if err != nil {
		t.Fatal(err)
	}
	at := bytes.Index(performance, []byte{0xc0, 3})
	performance[at+1] = 4
	_, got := rendered(t, writeFile(t, "other.mid", string(performance)), "--tail", "0.5")
	if bytes.Equal(got, want) {
		t.Error("Program Change 5 sounds as Program Change 4")
	}
}

// TestRenderPlace: a note begins where the performance says, the file has the
// length that was asked for, and ends in silence without a click.
func TestRenderPlace(t *testing.T) {
	w, _ := rendered(t, "--key", "A4", "--seconds", "1", "--tail", "1", "--patch", writeFile(t, "plain.toml", plainString))
	x := mono(w.samples, w.channels)
	if len(x) != 2*w.rate {
		t.Errorf("%d frames, want %d", len(x), 2*w.rate)
	}
	begin := 0
	for begin < len(x) && math.Abs(x[begin]) < 1e-3 {
		begin++
	}
	// The pulse runs from the stroke to the bridge first, in less than a period of the string.
	if begin > w.rate/440 {
		t.Errorf("the note begins at frame %d", begin)
	}
	if end := x[len(x)-1]; math.Abs(end) > 1e-5 {
		t.Errorf("the file ends at %g", end)
	}
}

// TestRenderToPipe: standard output gets the same file.
func TestRenderToPipe(t *testing.T) {
	_, want := rendered(t, "--key", "A4", "--seconds", "0.2", "--tail", "0.5")
	code, out, err := runHere(t, "render", "--key", "A4", "--seconds", "0.2", "--tail", "0.5", "--out", "-")
	if code != 0 || err != "" || out != string(want) {
		t.Errorf("exit code %d, %q, %d bytes instead of %d", code, err, len(out), len(want))
	}
}

// TestRender24 tells the same sound in 24 bits, within the dither.
func TestRender24(t *testing.T) {
	w, _ := rendered(t, "--key", "A4", "--seconds", "0.2", "--tail", "0.5")
	_, raw := rendered(t, "--key", "A4", "--seconds", "0.2", "--tail", "0.5", "--bits", "24")
	const header = 44
	if want := header + 3*len(w.samples); len(raw) != want {
		t.Fatalf("%d bytes, want %d", len(raw), want)
	}
	for i, want := range w.samples {
		b := raw[header+3*i:]
		got := float64(int32(uint32(b[0])<<8|uint32(b[1])<<16|uint32(b[2])<<24)>>8) / (1 << 23)
		if math.Abs(got-float64(want)) > 2.0/(1<<23) {
			t.Fatalf("sample %d is %g, want %g", i, got, want)
		}
	}
}

// TestRenderLeavesNothing: a rendering that fails leaves no half file.
func TestRenderLeavesNothing(t *testing.T) {
	path := filepath.Join(t.TempDir(), "out.wav")
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	var s text
	if code := run(ctx, []string{"render", "--demo", "--out", path}, streams{out: &s, err: &s}); code != exitFailed {
		t.Errorf("exit code %d", code)
	}
	if _, err := os.Stat(path); err == nil {
		t.Errorf("%s is left", path)
	}
}

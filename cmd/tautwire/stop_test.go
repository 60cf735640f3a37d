package main

import (
	"math"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"tautwire/voice/measure"
)

// TestStop: while a chord rings, SIGTERM ends the daemon within a second, and what
// JACK's side recorded fades without a click.
func TestStop(t *testing.T) {
	server := startJack(t, 48000, 128)
	ears := server.probe(t, 30)
	keys := newKeyboard(t)
	daemon := start(t, server.env(), tautwire(), "play", "--device", "jack", "--midi", keys.path,
		"--patch", writeFile(t, "plain.toml", plainString))
	daemon.says(t, keys.path+" plays", 20*time.Second)
	waitFor(t, 10*time.Second, "the probe to hear it", ears.hears, ears.process, daemon)
	for _, key := range []byte{45, 52, 57, 61, 64} {
		keys.on(t, key, 120)
	}
	time.Sleep(700 * time.Millisecond) // of sound
	daemon.stops(t)
	heard := ears.stop(t)

	last := len(heard.mono) - 1
	for last > 0 && heard.mono[last] == 0 {
		last--
	}
	ms := heard.rate / 1000
	if last < 600*ms {
		t.Fatalf("only %d ms were heard", last/ms)
	}
	ringing := peak(heard.mono[last-600*ms : last-400*ms])
	end := peak(heard.mono[last-2*ms : last+1])
	t.Logf("the chord rings at %.1f dBFS; its last 2 ms are at %.1f dB of that", 20*math.Log10(ringing), 20*math.Log10(end/ringing))
	if end > ringing/1000 {
		t.Errorf("the sound ends at %.1f dB of the chord", 20*math.Log10(end/ringing))
	}
	// No step on the way down is greater than those of the chord itself.
	if from := last - 400*ms; heard.whole(from-200*ms, last) {
		if fading, before := step(heard.mono[from:last]), step(heard.mono[from-200*ms:from]); fading > 1.1*before {
			t.Errorf("the fade has a step of %g, the chord's are at most %g", fading, before)
		}
	}
}

func peak(x []float64) float64 { return math.Pow(10, measure.Peak(x)/20) }

// step is the greatest difference between two frames.
func step(x []float64) (most float64) {
	for i := 1; i < len(x); i++ {
		most = max(most, math.Abs(x[i]-x[i-1]))
	}
	return most
}

// TestSecondSignal: a second Ctrl-C doesn't wait for the fade.
func TestSecondSignal(t *testing.T) {
	keys := newKeyboard(t)
	daemon := start(t, nil, tautwire(), "play", "--device", "null", "--midi", keys.path, "--patch", writeFile(t, "plain.toml", plainString))
	daemon.says(t, keys.path+" plays", 20*time.Second)
	for key := byte(30); key < 90; key++ {
		keys.on(t, key, 120)
	}
	daemon.signal(syscall.SIGINT)
	daemon.signal(syscall.SIGINT)
	if !daemon.endsWithin(time.Second) || daemon.exitCode() != 0 {
		t.Errorf("it does not end at once: %s", daemon.err.String())
	}
}

// TestPlayNull: without a sound device, a keyboard that comes and goes is told of,
// a Program Change takes the next patch, and the log has it all.
func TestPlayNull(t *testing.T) {
	keys := newKeyboard(t)
	log := filepath.Join(t.TempDir(), "log")
	rig := writeFile(t, "rig.toml", `[audio]
device = "null"
period = 128
[[set]]
patch = "lamp-room"
[[set]]
patch = "keepers-gut"
`)
	daemon := start(t, nil, tautwire(), "play", "--rig", rig, "--midi", keys.path, "--log", log)
	daemon.says(t, "the null output", 20*time.Second)
	daemon.says(t, "damages hearing", time.Second)
	daemon.says(t, keys.path+" plays", 5*time.Second)
	keys.write(t, 0xc0, 1)
	daemon.says(t, "Patch 2: ", 10*time.Second)
	keys.write(t, 0xc0, 9)
	daemon.says(t, "the set has 2 patches; nothing changes", 5*time.Second)
	keys.on(t, 69, 100)
	keys.file.Close()
	daemon.says(t, keys.path+" is gone", 5*time.Second)
	daemon.stops(t)

	seen := map[string]bool{}
	for _, r := range records(t, log) {
		what, _ := r["what"].(string)
		seen[strings.TrimSpace(r["event"].(string)+" "+what)] = true
	}
	for _, want := range []string{"start", "port plugged", "port lost", "patch swapped", "patch unknown", "window", "stop"} {
		if !seen[want] {
			t.Errorf("the log has no record %q; it has %v", want, seen)
		}
	}
	if code, out, err := runHere(t, "report", log); code != 0 || !strings.Contains(out, "port plugged") {
		t.Errorf("report: exit code %d, %q, %q", code, out, err)
	}
}

// TestNoDevice: without any sound device, and none asked for, one line says the way out.
func TestNoDevice(t *testing.T) {
	daemon := start(t, []string{"JACK_DEFAULT_SERVER=no-such-server", "JACK_NO_START_SERVER=1"}, tautwire(), "play")
	if !daemon.endsWithin(20 * time.Second) {
		t.Log("this machine has a sound device, on which it plays")
		daemon.stops(t)
		return
	}
	said := daemon.err.String()
	if daemon.exitCode() != exitFailed || strings.Count(said, "\n") != 1 || !strings.Contains(said, `"null"`) {
		t.Errorf("exit code %d, %q", daemon.exitCode(), said)
	}
}

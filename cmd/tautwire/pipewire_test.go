package main

import (
	"math"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"tautwire/voice/measure"
)

// desktop is today's desktop without hardware: a session bus, PipeWire with a sink
// that nobody hears, and its session manager, all in folders of their own.
type desktop struct {
	env      []string
	pipewire *process
}

func startDesktop(t testing.TB) *desktop {
	t.Helper()
	run := filepath.Join(t.TempDir(), "run")
	if err := os.Mkdir(run, 0o700); err != nil {
		t.Fatal(err)
	}
	bus := "unix:path=" + filepath.Join(run, "bus")
	d := &desktop{env: []string{
		"XDG_RUNTIME_DIR=" + run, "DBUS_SESSION_BUS_ADDRESS=" + bus,
		"HOME=" + run, "XDG_CONFIG_HOME=" + run, "XDG_STATE_HOME=" + run,
		"PIPEWIRE_RUNTIME_DIR=" + run, "JACK_NO_START_SERVER=1",
	}}
	daemon := start(t, d.env, "dbus-daemon", "--session", "--nofork", "--nopidfile", "--address="+bus)
	waitFor(t, 10*time.Second, "the session bus", exists(filepath.Join(run, "bus")), daemon)
	d.pipewire = start(t, d.env, "pipewire")
	waitFor(t, 10*time.Second, "PipeWire", exists(filepath.Join(run, "pipewire-0")), d.pipewire)
	node := start(t, d.env, "pw-cli", "create-node", "adapter",
		"{ factory.name=support.null-audio-sink node.name=stage media.class=Audio/Sink object.linger=true audio.position=[FL FR] audio.rate=48000 }")
	if !node.endsWithin(10*time.Second) || node.exitCode() != 0 {
		t.Fatalf("no sink: %s%s", node.out.String(), node.err.String())
	}
	start(t, d.env, "wireplumber")
	waitFor(t, 20*time.Second, "the sink's ports", func() bool { return strings.Contains(d.ask(t, "pw-link", "-i"), "stage:playback_FR") }, d.pipewire)
	return d
}

func exists(path string) func() bool {
	return func() bool {
		_, err := os.Stat(path)
		return err == nil
	}
}

// ask runs a short command in the desktop.
func (d *desktop) ask(t testing.TB, name string, args ...string) string {
	t.Helper()
	p := start(t, d.env, name, args...)
	if !p.endsWithin(10 * time.Second) {
		t.Fatalf("%s does not end", name)
	}
	return p.out.String()
}

// linked tells whether a link leads from a port with one name to one with another.
func (d *desktop) linked(t testing.TB, from, to string) func() bool {
	return func() bool {
		var at string
		for line := range strings.Lines(d.ask(t, "pw-link", "-l")) {
			if !strings.HasPrefix(line, " ") {
				at = line
				continue
			}
			if strings.Contains(at, from) && strings.Contains(line, "|-> "+to) {
				return true
			}
		}
		return false
	}
}

// TestPipeWire plays 60 notes by the desktop's path: PortAudio's ALSA device of
// the sound server. None is missed, and each has its pitch.
func TestPipeWire(t *testing.T) {
	d := startDesktop(t)
	keys := newKeyboard(t)
	daemon := start(t, d.env, tautwire(), "play", "--device", "pipewire", "--period", "128", "--midi", keys.path,
		"--patch", writeFile(t, "tap.toml", tap))
	daemon.says(t, keys.path+" plays", 20*time.Second)
	file := filepath.Join(t.TempDir(), "heard.wav")
	recorder := start(t, d.env, "pw-record", "--target", "stage", "-P", "{ stream.capture.sink=true }",
		"--rate", "48000", "--channels", "2", "--format", "f32", file)
	waitFor(t, 20*time.Second, "Tautwire to be heard at the sink", d.linked(t, "output_F", "stage:playback"), daemon)
	waitFor(t, 20*time.Second, "the recorder to hear the sink", d.linked(t, "stage:monitor", "pw-record"), recorder)

	played := []byte{57, 62, 69, 74, 81}
	const notes = 60
	time.Sleep(300 * time.Millisecond) // of silence, to begin the recording with
	for i := range notes {
		keys.on(t, played[i%len(played)], 100)
		time.Sleep(60 * time.Millisecond)
		keys.off(t, played[i%len(played)])
		time.Sleep(90 * time.Millisecond)
	}
	time.Sleep(300 * time.Millisecond)
	recorder.signal(syscall.SIGINT)
	if !recorder.endsWithin(10 * time.Second) {
		t.Fatal("the recorder does not end")
	}
	daemon.stops(t)

	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	heard, err := parseWAV(raw)
	if err != nil {
		t.Fatal(err)
	}
	x := mono(heard.samples, heard.channels)
	begins := onsetsIn(x, heard.rate)
	if len(begins) != notes {
		t.Fatalf("%d notes are heard, %d were played", len(begins), notes)
	}
	worst, clean := 0.0, 0
	for i, at := range begins {
		key := played[i%len(played)]
		hz := 440 * math.Exp2((float64(key)-69)/12)
		m, whole := oneTone(x[at+heard.rate/1000:at+49*heard.rate/1000], float64(heard.rate), hz)
		if !whole {
			continue
		}
		clean++
		cents := measure.Cents(m.Frequency, hz)
		worst = max(worst, math.Abs(cents))
		if math.Abs(cents) > 2 {
			t.Errorf("note %d, key %d: %.1f cents off", i, key, cents)
		}
	}
	t.Logf("%d notes, none missed; %d without a gap, their pitch within %.2f cents", notes, clean, worst)
	if clean < notes/2 {
		t.Errorf("only %d of %d notes are without a gap", clean, notes)
	}
}

// oneTone measures the tone near a frequency, and tells whether it goes through
// without a gap: the second half is in phase with the first.
func oneTone(x []float64, rate, hz float64) (m measure.Mode, whole bool) {
	half := len(x) / 2
	m, err := measure.Partial(x[:half], rate, hz, hz)
	if err != nil {
		return m, false
	}
	second, err := measure.Partial(x[half:], rate, hz, hz)
	if err != nil {
		return m, false
	}
	const inPhase = 0.1 // rad
	apart := second.Phase - m.Phase - 2*math.Pi*m.Frequency*float64(half)/rate
	return m, math.Abs(math.Remainder(apart, 2*math.Pi)) < inPhase
}

// onsetsIn gives where sound begins after at least 20 ms of near silence, as
// beside the loudest of all.
func onsetsIn(x []float64, rate int) (at []int) {
	peak := math.Pow(10, measure.Peak(x)/20)
	loud, quiet := peak/20, peak/200
	silent, rested := 0, false
	for i, v := range x {
		if math.Abs(v) < quiet {
			silent++
			rested = rested || silent >= rate/50
			continue
		}
		silent = 0
		if rested && math.Abs(v) > loud {
			rested = false
			// Sooner, it is the same note after a gap that the busy machine made.
			if len(at) == 0 || i-at[len(at)-1] > rate/12 {
				at = append(at, i)
			}
		}
	}
	return at
}

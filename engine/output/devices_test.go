package output

import (
	"errors"
	"io"
	"os"
	"slices"
	"strings"
	"testing"

	"github.com/gordonklaus/portaudio"
	"golang.org/x/sys/unix"

	"tautwire/engine"
)

func lighthouse() []Device {
	devices := []Device{
		{Host: "JACK", Name: "system", Channels: 2, Default: true},
		{Host: "JACK", Name: "Fog mixer", Channels: 2},
		{Host: "ALSA", Name: "Lantern USB: - (hw:1,0)", Channels: 2},
		{Host: "ALSA", Name: "Lantern USB: S/PDIF (hw:1,1)", Channels: 2},
		{Host: "ALSA", Name: "Keeper's board: Analog (hw:0,0)", Channels: 8},
		{Host: "ALSA", Name: "sysdefault", Channels: 128},
		{Host: "ALSA", Name: "default", Channels: 128, Default: true},
		{Host: "OSS", Name: "system", Channels: 2},
		{Host: "null", Name: "null", Channels: 2},
	}
	nameThem(devices)
	return devices
}

func TestWordsOfEachDeviceSelectIt(t *testing.T) {
	devices := lighthouse()
	for i, d := range devices {
		if got := pick(devices, d.Words); got != i {
			t.Errorf("%q selects device %d, want %d, %q", d.Words, got, i, d.full())
		}
		if got := pick(devices, strings.ToUpper(d.Words)); got != i {
			t.Errorf("%q in capitals selects device %d, want %d", d.Words, got, i)
		}
	}
}

func TestPickDevice(t *testing.T) {
	tests := []struct{ words, want string }{
		{"", "JACK: system"},
		{"jack", "JACK: system"},
		{"fog", "JACK: Fog mixer"},
		{"JACK: fog", "JACK: Fog mixer"},
		{"lantern", "ALSA: Lantern USB: - (hw:1,0)"},
		{"s/pdif", "ALSA: Lantern USB: S/PDIF (hw:1,1)"},
		{"default", "ALSA: default"},
		{"alsa", "ALSA: Lantern USB: - (hw:1,0)"},
		{"system", "JACK: system"},
		{"oss: system", "OSS: system"},
		{"null", "null: null"},
		{"gramophone", ""},
	}
	devices := lighthouse()
	for _, test := range tests {
		got := ""
		if i := pick(devices, test.words); i >= 0 {
			got = devices[i].full()
		}
		if got != test.want {
			t.Errorf("%q selects %q, want %q", test.words, got, test.want)
		}
	}
}

func TestOneDefaultDevice(t *testing.T) {
	tests := []struct {
		name    string
		devices []Device
		want    string
	}{
		{"JACK before ALSA", lighthouse(), "JACK: system"},
		{"no default told", []Device{{Host: "ALSA", Name: "hw"}, {Host: "null", Name: "null"}}, "ALSA: hw"},
		{"nothing", []Device{{Host: "null", Name: "null"}}, ""},
	}
	for _, test := range tests {
		nameThem(test.devices)
		var defaults []string
		for _, d := range test.devices {
			if d.Default {
				defaults = append(defaults, d.full())
			}
		}
		if strings.Join(defaults, "+") != test.want {
			t.Errorf("%s: defaults %q, want %q", test.name, defaults, test.want)
		}
	}
}

func TestAReplugedCardIsFoundByItsName(t *testing.T) {
	devices := []Device{
		{Host: "ALSA", Name: "Lantern USB: - (hw:2,0)", info: &portaudio.DeviceInfo{Index: 4}},
		{Host: "null", Name: "null"},
	}
	d, err := Choice{Host: "ALSA", Device: "Lantern USB: - (hw:1,0)"}.find(devices)
	if err != nil || d.info.Index != 4 {
		t.Errorf("found %+v, %v", d, err)
	}
	if _, err := (Choice{Host: "ALSA", Device: "Other: - (hw:2,0)"}).find(devices); err == nil {
		t.Error("another card was taken")
	}
}

func TestUnknownDeviceSaysWhatThereIs(t *testing.T) {
	t.Setenv("JACK_DEFAULT_SERVER", "tautwire-none")
	var system System
	_, err := system.Choose("gramophone", 48000, 64)
	var missing *NoDeviceError
	if !errors.As(err, &missing) {
		t.Fatalf("error %v", err)
	}
	if text := err.Error(); !strings.Contains(text, `"gramophone"`) || !strings.Contains(text, `"null"`) || strings.Contains(text, "\n") {
		t.Errorf("error %q", text)
	}
	if text := (&NoDeviceError{}).Error(); !strings.Contains(text, `"null"`) {
		t.Errorf("error %q", text)
	}
}

func TestNullIsAlwaysThere(t *testing.T) {
	t.Setenv("JACK_DEFAULT_SERVER", "tautwire-none")
	var system System
	devices, err := system.Devices()
	if err != nil {
		t.Fatal(err)
	}
	if last := devices[len(devices)-1]; last.Words != "null" || last.Default {
		t.Errorf("the last device is %+v", last)
	}
	choice, err := system.Choose("NULL", 44100, 32)
	if err != nil || choice.Rate != 44100 || choice.Period != 32 {
		t.Fatalf("%+v, %v", choice, err)
	}
	out := system.Open(choice, engine.NewPlayer(newSine(440, 44100), 44100), nil)
	if _, ok := out.(*Null); !ok {
		t.Errorf("opened a %T", out)
	}
}

// The chatter of the libraries while they probe is kept out, and nothing else is.
func TestStandardErrorIsQuietWhileProbing(t *testing.T) {
	t.Setenv("JACK_DEFAULT_SERVER", "tautwire-none")
	for _, verbose := range []bool{false, true} {
		text := captured(t, func() {
			system := System{Verbose: verbose}
			if _, err := system.Devices(); err != nil {
				t.Error(err)
			}
			unix.Write(2, []byte("afterwards"))
		})
		if !strings.HasSuffix(text, "afterwards") {
			t.Errorf("verbose %v: standard error stays shut: %q", verbose, text)
		}
		if quiet := text == "afterwards"; quiet == verbose {
			t.Errorf("verbose %v: standard error has %q", verbose, text)
		}
	}
}

func TestStderrIsNotHushed(t *testing.T) {
	text := captured(t, func() {
		log, err := Stderr()
		if err != nil {
			t.Error(err)
			return
		}
		defer log.Close()
		quietly(func() error {
			unix.Write(2, []byte("chatter "))
			_, err := log.WriteString("a log line")
			return err
		})
	})
	if text != "a log line" {
		t.Errorf("standard error has %q", text)
	}
}

// captured returns what f writes on standard error, at most a pipe's worth.
func captured(t *testing.T, f func()) string {
	t.Helper()
	r, w, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	kept, err := unix.Dup(2)
	if err != nil {
		t.Fatal(err)
	}
	defer unix.Close(kept)
	if err := unix.Dup3(int(w.Fd()), 2, 0); err != nil {
		t.Fatal(err)
	}
	f()
	unix.Dup3(kept, 2, 0)
	w.Close()
	text, err := io.ReadAll(r)
	if err != nil {
		t.Fatal(err)
	}
	return string(text)
}

func TestSpread(t *testing.T) {
	stereo := []float32{0.5, 0.25, -1, 1}
	tests := []struct {
		channels int
		want     []float32
	}{
		{1, []float32{0.375, 0}},
		{3, []float32{0.5, 0.25, 0, -1, 1, 0}},
		{4, []float32{0.5, 0.25, 0, 0, -1, 1, 0, 0}},
	}
	for _, test := range tests {
		out := slices.Repeat([]float32{9}, 2*test.channels)
		spread(out, stereo, test.channels)
		if !slices.Equal(out, test.want) {
			t.Errorf("%d channels: %v, want %v", test.channels, out, test.want)
		}
	}
}

func TestCallbackForEveryNumberOfChannels(t *testing.T) {
	for _, channels := range []int{1, 2, 6} {
		instrument := newSine(440, 48000)
		player := engine.NewPlayer(instrument, 48000)
		p := newPortAudio(&System{}, Choice{Host: "ALSA", Rate: 48000, Period: 64, Channels: channels}, player, nil)
		for _, frames := range []int{64, 1, mostFrames, mostFrames + 100} {
			before := instrument.frames.Load()
			onThread(func() {
				p.callback(make([]float32, frames*channels), portaudio.StreamCallbackTimeInfo{}, portaudio.OutputUnderflow)
			})
			if got := instrument.frames.Load() - before; got != int64(frames) {
				t.Errorf("%d channels: rendered %d frames of %d", channels, got, frames)
			}
		}
		out := make([]float32, 64*channels)
		onThread(func() {
			n := testing.AllocsPerRun(100, func() {
				p.callback(out, portaudio.StreamCallbackTimeInfo{}, 0)
			})
			if n != 0 {
				t.Errorf("%d channels: %v allocations", channels, n)
			}
		})
		var m engine.Measure
		if !player.Measures().Take(&m) || m.Flags&engine.Underflow == 0 {
			t.Errorf("%d channels: the underflow was not passed on", channels)
		}
	}
}

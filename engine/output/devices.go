package output

import (
	"cmp"
	"fmt"
	"slices"
	"strings"
	"sync"
	"time"

	"github.com/gordonklaus/portaudio"
)

// System is the machine's audio, as PortAudio has it. The zero value is ready. It is for
// any goroutine; a program has one, for PortAudio is one for the whole process.
type System struct {
	// Verbose lets through what the sound libraries print on standard error
	// while they look for devices.
	Verbose bool

	mu sync.Mutex // PortAudio's own calls are not for several threads
}

// Device is an audio output.
type Device struct {
	Host     string // "ALSA", "JACK", ... or "null"
	Name     string
	Channels int
	Rate     int // Hz: its own
	Latency  time.Duration
	// Default says that it is taken where no device is asked for.
	Default bool
	// Words select it: a part of its name, or of "host: name".
	Words string

	info *portaudio.DeviceInfo
}

// NoDeviceError says that no output is what was asked for.
type NoDeviceError struct {
	Asked string // "" for any
	Known []string
}

// Error returns one line with the way out.
func (e *NoDeviceError) Error() string {
	if e.Asked == "" {
		return `no audio output found: plug one in, or start JACK or PipeWire, or choose the device "null", which has no sound`
	}
	return fmt.Sprintf("no audio output has %q in its name: there are %s", e.Asked, strings.Join(e.Known, ", "))
}

// Devices lists the outputs, best hosts first, and the null output last.
//
// # Errors
//
// PortAudio itself failing. No device at all is no error: there is always "null".
func (s *System) Devices() ([]Device, error) {
	var devices []Device
	err := s.session(func() (err error) {
		devices, err = list()
		return err
	})
	return devices, err
}

// session runs f with PortAudio initialized.
func (s *System) session(f func() error) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.hushed(func() error {
		if err := initialize(); err != nil {
			return err
		}
		defer portaudio.Terminate()
		return f()
	})
}

func (s *System) hushed(f func() error) error {
	if s.Verbose {
		return f()
	}
	return quietly(f)
}

// hostOrder: where a JACK server runs, somebody started it to play on. Next is ALSA,
// which has the desktop's sound server as its default device.
func hostOrder(host string) int {
	switch host {
	case portaudio.JACK.String():
		return 0
	case portaudio.ALSA.String():
		return 1
	}
	return 2
}

func list() ([]Device, error) {
	hosts, err := portaudio.HostApis()
	if err != nil {
		return nil, fmt.Errorf("audio outputs: %w", err)
	}
	slices.SortStableFunc(hosts, func(a, b *portaudio.HostApiInfo) int {
		return cmp.Compare(hostOrder(a.Type.String()), hostOrder(b.Type.String()))
	})
	var devices []Device
	for _, host := range hosts {
		for _, info := range host.Devices {
			if info.MaxOutputChannels < 1 {
				continue
			}
			devices = append(devices, Device{
				Host:     host.Type.String(),
				Name:     info.Name,
				Channels: info.MaxOutputChannels,
				Rate:     int(info.DefaultSampleRate + 0.5),
				Latency:  info.DefaultLowOutputLatency,
				Default:  info == host.DefaultOutputDevice,
				info:     info,
			})
		}
	}
	devices = append(devices, Device{Host: nullHost, Name: nullHost, Channels: 2})
	nameThem(devices)
	return devices, nil
}

// nameThem leaves one default, the first host's, and gives each its words.
func nameThem(devices []Device) {
	best := slices.IndexFunc(devices, func(d Device) bool { return d.Default })
	if best < 0 && devices[0].Host != nullHost {
		best = 0
	}
	for i := range devices {
		devices[i].Default = i == best
	}
	for i := range devices {
		d := &devices[i]
		for _, words := range []string{baseName(d.Name), d.Name, d.full()} {
			d.Words = words
			if pick(devices, words) == i {
				break
			}
		}
	}
}

// pick returns the index of the device with the words in its name, or -1: the one
// whose name they are, else the default one, else the first. No words pick the default.
func pick(devices []Device, words string) int {
	if words == "" {
		return slices.IndexFunc(devices, func(d Device) bool { return d.Default })
	}
	rules := []func(d Device) bool{
		func(d Device) bool { return strings.EqualFold(d.Name, words) || strings.EqualFold(d.full(), words) },
		func(d Device) bool { return d.Default && d.has(words) },
		func(d Device) bool { return d.has(words) },
	}
	for _, rule := range rules {
		if i := slices.IndexFunc(devices, rule); i >= 0 {
			return i
		}
	}
	return -1
}

func (d Device) full() string { return d.Host + ": " + d.Name }

func (d Device) has(words string) bool {
	return strings.Contains(strings.ToLower(d.full()), strings.ToLower(words))
}

// baseName is the name without the card's number, which changes when it is
// plugged in again.
func baseName(name string) string {
	base, _, _ := strings.Cut(name, " (hw:")
	return strings.TrimRight(base, " :-")
}

func noDevice(devices []Device, asked string) error {
	e := &NoDeviceError{Asked: asked}
	for _, d := range devices {
		e.Known = append(e.Known, fmt.Sprintf("%q", d.Words))
	}
	return e
}

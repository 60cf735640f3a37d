package output

/*
#cgo pkg-config: portaudio-2.0
#include <pa_jack.h>

// The name is kept by reference.
static PaError nameJackClient(void) { return PaJack_SetClientName("tautwire"); }
*/
import "C"

import (
	"errors"
	"fmt"
	"strings"
	"sync/atomic"
	"time"

	"github.com/gordonklaus/portaudio"

	"tautwire/engine"
)

// PortAudio is an output to a loudspeaker.
//
// A stereo stream is played as it is; on a device of one channel both sides are
// mixed at half their level each, and on one that takes no fewer than all its channels
// those after the second stay silent.
type PortAudio struct {
	keeper  keeper
	system  *System
	player  *engine.Player
	thread  Thread
	choice  Choice
	stereo  []float32 // where the device isn't
	stream  *portaudio.Stream
	latency atomic.Int64 // ns
}

const (
	// The longest period of a JACK server; longer ones are rendered in parts.
	mostFrames = 8192
	// ALSA's buffer is asked to hold so many periods: while one is heard the next
	// is rendered.
	bufferPeriods = 2
	// How long a JACK server may take to call for the first time.
	firstCallback = 2 * time.Second
	// How long a call may wait for a server that has gone before it is woken.
	ringAfter = 100 * time.Millisecond
)

// Choose finds the device with the words in its name (case-insensitively, or in its
// host's: "jack"), and what it plays at. No words choose JACK's default where a server
// runs, else ALSA's, which is the desktop's sound server where there is one. The words
// "null" choose the null output.
//
// The asked rate (Hz) is tried first, then the device's own. JACK dictates
// its rate and its period (frames); the engine has to be made for those of the Choice.
// The device is opened and, with JACK, run in silence for a moment, to be sure.
//
// # Errors
//
// A *NoDeviceError: nothing has these words, or there is nothing at all; choose
// another or "null". Otherwise the device is busy or plays at neither rate.
func (s *System) Choose(words string, rate, period int) (Choice, error) {
	if strings.EqualFold(words, nullHost) {
		return Choice{Device: nullHost, Host: nullHost, Rate: rate, Period: period, Channels: 2}, nil
	}
	var choice Choice
	err := s.session(func() error {
		devices, err := list()
		if err != nil {
			return err
		}
		i := pick(devices, words)
		if i < 0 || devices[i].info == nil {
			return noDevice(devices, words)
		}
		choice, err = try(devices[i], rate, period)
		return err
	})
	return choice, err
}

// try opens the device in the ways that it may take, best first.
func try(d Device, rate, period int) (Choice, error) {
	rates := []int{rate}
	if d.Rate != rate {
		rates = append(rates, d.Rate)
	}
	channels := []int{min(2, d.Channels)}
	if d.Channels > 2 {
		channels = append(channels, d.Channels)
	}
	var errs []error
	for _, rate := range rates {
		for _, channels := range channels {
			c := Choice{Device: d.Name, Host: d.Host, Rate: rate, Period: period, Channels: channels}
			err := probe(&c, d.info)
			if err == nil {
				return c, nil
			}
			errs = append(errs, fmt.Errorf("%d Hz, %d channels: %w", rate, channels, err))
		}
	}
	return Choice{}, fmt.Errorf("audio output %s does not open; choose another, or free it: %w", d.full(), oneLine(errs))
}

func oneLine(errs []error) error {
	var lines []string
	for _, err := range errs {
		lines = append(lines, err.Error())
	}
	return errors.New(strings.Join(lines, "; "))
}

func probe(c *Choice, info *portaudio.DeviceInfo) error {
	frames := make(chan int, 1)
	stream, err := openStream(*c, info, func(out []float32, _ portaudio.StreamCallbackTimeInfo, _ portaudio.StreamCallbackFlags) {
		clear(out)
		select {
		case frames <- len(out) / c.Channels:
		default:
		}
	})
	if err != nil {
		return err
	}
	defer closeStream(stream, true)
	c.Latency = stream.Info().OutputLatency
	if c.Host != portaudio.JACK.String() {
		return nil
	}
	if err := stream.Start(); err != nil {
		return err
	}
	select {
	case c.Period = <-frames:
		return nil
	case <-time.After(firstCallback):
		return fmt.Errorf("the server did not call within %v", firstCallback)
	}
}

func newPortAudio(s *System, c Choice, player *engine.Player, tell func(Notice)) *PortAudio {
	p := &PortAudio{system: s, player: player, choice: c}
	if c.Channels != 2 {
		p.stereo = make([]float32, 2*max(mostFrames, c.Period))
	}
	p.latency.Store(int64(c.Latency))
	p.keeper = keeper{stream: p, player: player, device: c.Device, rate: c.Rate, period: c.Period, tell: tell}
	return p
}

// Start opens the device and begins to play.
func (p *PortAudio) Start() error { return p.keeper.start() }

// Stop plays out what the device has, and closes it.
func (p *PortAudio) Stop() error { return p.keeper.stop() }

// Info tells the device as it was chosen, and the latency that the driver states.
func (p *PortAudio) Info() Info {
	return Info{
		Device:     p.choice.Device,
		Host:       p.choice.Host,
		Rate:       p.choice.Rate,
		Period:     p.choice.Period,
		Latency:    time.Duration(p.latency.Load()),
		Scheduling: p.thread.Scheduling(),
	}
}

// open initializes PortAudio anew, for that is when it looks for devices and
// for a JACK server.
func (p *PortAudio) open() error {
	p.system.mu.Lock()
	defer p.system.mu.Unlock()
	return p.system.hushed(func() error {
		if err := initialize(); err != nil {
			return err
		}
		if err := p.begin(); err != nil {
			portaudio.Terminate()
			return fmt.Errorf("audio output %s: %s: %w", p.choice.Host, p.choice.Device, err)
		}
		return nil
	})
}

func (p *PortAudio) begin() error {
	devices, err := list()
	if err != nil {
		return err
	}
	d, err := p.choice.find(devices)
	if err != nil {
		return err
	}
	p.thread.renew()
	stream, err := openStream(p.choice, d.info, p.callback)
	if err != nil {
		return err
	}
	if err := stream.Start(); err != nil {
		closeStream(stream, true)
		return err
	}
	p.stream = stream
	p.latency.Store(int64(stream.Info().OutputLatency))
	return nil
}

// find returns the chosen device, which may be another card by number since.
func (c Choice) find(devices []Device) (Device, error) {
	for _, same := range []func(name string) bool{
		func(name string) bool { return name == c.Device },
		func(name string) bool { return baseName(name) == baseName(c.Device) },
	} {
		for _, d := range devices {
			if d.Host == c.Host && d.info != nil && same(d.Name) {
				return d, nil
			}
		}
	}
	return Device{}, errors.New("it is not there; plug it in or start its server")
}

func (p *PortAudio) close(lost bool) error {
	p.system.mu.Lock()
	defer p.system.mu.Unlock()
	err := closeStream(p.stream, lost)
	p.stream = nil
	return errors.Join(err, portaudio.Terminate())
}

func (p *PortAudio) gone() bool {
	return p.choice.Host == portaudio.JACK.String() && jackDown()
}

func (p *PortAudio) callback(out []float32, _ portaudio.StreamCallbackTimeInfo, status portaudio.StreamCallbackFlags) {
	p.thread.enter()
	var flags engine.Flags
	if status&portaudio.OutputUnderflow != 0 {
		flags = engine.Underflow
	}
	if p.choice.Channels == 2 {
		p.player.Period(out, flags)
		return
	}
	for len(out) > 0 {
		frames := min(len(out)/p.choice.Channels, len(p.stereo)/2)
		stereo := p.stereo[:2*frames]
		p.player.Period(stereo, flags)
		spread(out[:frames*p.choice.Channels], stereo, p.choice.Channels)
		out = out[frames*p.choice.Channels:]
		flags = 0
	}
}

// spread puts stereo frames on a device of one channel, or of more than two.
func spread(out, stereo []float32, channels int) {
	if channels == 1 {
		for i := range out {
			out[i] = (stereo[2*i] + stereo[2*i+1]) / 2
		}
		return
	}
	clear(out)
	for i := range len(stereo) / 2 {
		copy(out[i*channels:], stereo[2*i:2*i+2])
	}
}

func initialize() error {
	C.nameJackClient()
	if err := portaudio.Initialize(); err != nil {
		return fmt.Errorf("audio does not initialize: %w", err)
	}
	return nil
}

// callbackFunc is what the binding calls. The binding hands PortAudio a number in the
// place of a pointer, which Go's pointer checks, on with the race detector, take for an
// error: tests with -race need -gcflags=github.com/gordonklaus/portaudio=-d=checkptr=0.
// And it has a recover of its own that ends the
// process, so nothing in it may panic that Player.Period doesn't catch.
type callbackFunc func(out []float32, time portaudio.StreamCallbackTimeInfo, status portaudio.StreamCallbackFlags)

func openStream(c Choice, info *portaudio.DeviceInfo, callback callbackFunc) (*portaudio.Stream, error) {
	frames := c.Period
	if c.Host == portaudio.JACK.String() {
		// Its own, without a buffer between.
		frames = portaudio.FramesPerBufferUnspecified
	}
	stream, err := portaudio.OpenStream(portaudio.StreamParameters{
		Output: portaudio.StreamDeviceParameters{
			Device:   info,
			Channels: c.Channels,
			Latency:  bufferPeriods * time.Duration(c.Period) * time.Second / time.Duration(c.Rate),
		},
		SampleRate:      float64(c.Rate),
		FramesPerBuffer: frames,
	}, (func([]float32, portaudio.StreamCallbackTimeInfo, portaudio.StreamCallbackFlags))(callback))
	if err != nil {
		return nil, err
	}
	return stream, nil
}

// closeStream plays out a stream, unless abrupt, and closes it. PortAudio stays
// initialized.
func closeStream(stream *portaudio.Stream, abrupt bool) error {
	closed := make(chan error, 1)
	go func() {
		var err error
		if !abrupt {
			err = stream.Stop()
		}
		closed <- errors.Join(err, stream.Close())
	}()
	for {
		select {
		case err := <-closed:
			return err
		case <-time.After(ringAfter):
			if jackDown() {
				jackRing()
			}
		}
	}
}

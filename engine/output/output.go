// Package output carries sound from an engine.Player to where it is heard, or to a file.
//
// Every output that plays in real time is an Output. Which one to take:
//
//	PortAudio  a loudspeaker, by ALSA or JACK        System.Choose, System.Open
//	Null       none: the clock alone paces it        the device "null", or NewNull
//	WAV        a file, as fast as it can be written  NewWAV
package output

import (
	"time"

	"tautwire/engine"
)

// Output is a stream that calls its Player for each period, in real time.
type Output interface {
	// Start opens the device and begins to play.
	//
	// # Errors
	//
	// The device is gone, busy, or refuses the rate since it was chosen. The
	// error says which.
	Start() error
	// Stop ends playing. After it no callback runs. It takes less than a second, or is
	// given up with an error that says so.
	Stop() error
	// Info tells what is played on. It is whole once Start has returned.
	Info() Info
}

// Info is what an output knows of itself.
type Info struct {
	Device  string        // its name, as the host has it
	Host    string        // "ALSA", "JACK", "null", ...
	Rate    int           // Hz
	Period  int           // frames that each callback renders
	Latency time.Duration // from the callback to the loudspeaker, as the driver states it
	// Scheduling is what the callback's thread was granted; its zero value until
	// the first callback.
	Scheduling Scheduling
}

// Happening is what befell a stream.
type Happening string

// The happenings, in the words of the log.
const (
	// Lost: the device is gone or calls no more. It is waited for.
	Lost Happening = "lost"
	// Regained: it plays again.
	Regained Happening = "regained"
	// Restarted: a panic of the instrument was followed by a fresh start.
	Restarted Happening = "restarted"
	// SilentForGood: panics came too often; the stream runs on in silence.
	SilentForGood Happening = "silent"
)

// Notice tells of something that befell a stream.
type Notice struct {
	Happening Happening
	Device    string
	// Took is how long no sound came, for Regained and Restarted.
	Took time.Duration
	// Err is why, where it is known: of a lost device or of an attempt to reopen it.
	Err error
	// Reason and Stack are of the panic, for Restarted and SilentForGood.
	Reason string
	Stack  []byte
}

// Choice is a device that Choose found to play at Rate and Period. The engine is
// made for these, and then the output opened.
type Choice struct {
	Device   string
	Host     string
	Rate     int // Hz: the asked one, or where that failed the device's own
	Period   int // frames: the asked ones, or those that the host dictates
	Channels int // that the stream has: 1, or 2, or all of the device where it takes no fewer
	Latency  time.Duration
}

// Open returns the output of a choice, not yet started. It plays player, and tells
// each Notice, one at a time, from a goroutine of its own.
func (s *System) Open(c Choice, player *engine.Player, tell func(Notice)) Output {
	if c.Host == nullHost {
		return NewNull(player, c.Rate, c.Period, tell)
	}
	return newPortAudio(s, c, player, tell)
}

package output

// #cgo LDFLAGS: -ldl
// #include "jackdown.h"
import "C"

// PortAudio (19.6) asks JACK to be told when the server goes, and then, when the
// stream is stopped or closed, waits for an answer of that server for ten minutes,
// and ends the process by an assertion where the server can't be told goodbye.
// What wakes it is being told of the end again. So this package stands between the
// two: its jack_on_shutdown takes note of whom PortAudio wants called, to call it when a
// stream of a server that is gone has to be closed, and its goodbyes to such a
// server succeed.

// jackDown tells that the JACK server has gone since PortAudio was initialized.
func jackDown() bool { return C.jackdown_is() != 0 }

// jackRing wakes a call that waits for a server that has gone. Only for the time between
// PortAudio's initialization and its end.
func jackRing() { C.jackdown_ring() }

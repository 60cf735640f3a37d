package engine

import _ "unsafe" // for go:linkname

// Now returns the time in nanoseconds of the system's monotonic clock
// (CLOCK_MONOTONIC on Linux), the clock of every Event and of every callback.
// It neither allocates nor enters the kernel, so the audio callback may call it.
func Now() int64 { return nanotime() }

// time.Now does the same work and more, and its monotonic part counts from the
// program's start: it could not be compared with times that the kernel stamps
// on MIDI events.
//
//go:linkname nanotime runtime.nanotime
func nanotime() int64

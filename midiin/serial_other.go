//go:build unix && !linux

package midiin

// setSerial leaves a terminal as it is: its speed is set by the system's own
// means, and nothing is known of its wire.
func setSerial(fd int) (spacing int64, err error) { return 0, nil }

package output

import (
	"os"

	"golang.org/x/sys/unix"
)

// quietly runs f while standard error leads nowhere: the sound libraries print pages on it
// when they probe for devices that are not there.
func quietly(f func() error) error {
	kept, err := unix.FcntlInt(2, unix.F_DUPFD_CLOEXEC, 3)
	if err != nil {
		return f()
	}
	defer unix.Close(kept)
	nowhere, err := unix.Open(os.DevNull, unix.O_WRONLY|unix.O_CLOEXEC, 0)
	if err != nil {
		return f()
	}
	defer unix.Close(nowhere)
	if unix.Dup3(nowhere, 2, 0) != nil {
		return f()
	}
	defer unix.Dup3(kept, 2, 0)
	return f()
}

// Stderr returns a file on what is now standard error that the hushing of sound
// libraries doesn't reach. A log that goes on while a lost device is sought
// is written to it.
func Stderr() (*os.File, error) {
	fd, err := unix.FcntlInt(2, unix.F_DUPFD_CLOEXEC, 3)
	if err != nil {
		return nil, os.NewSyscallError("dup", err)
	}
	return os.NewFile(uintptr(fd), os.Stderr.Name()), nil
}

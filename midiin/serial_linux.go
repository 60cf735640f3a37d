package midiin

import "golang.org/x/sys/unix"

// Pseudo-terminals' slaves have these device numbers (Linux,
// Documentation/admin-guide/devices.txt); they have no wire.
const (
	firstPseudoTerminal = 136
	lastPseudoTerminal  = 143
)

// setSerial puts a terminal into raw mode and at 31250 baud, and returns the
// time from byte to byte on its wire, ns: 0 if fd is no terminal or has no wire.
// A speed that no B constant stands for needs termios2 and BOTHER.
func setSerial(fd int) (spacing int64, err error) {
	t, err := unix.IoctlGetTermios(fd, unix.TCGETS2)
	if err != nil {
		return 0, nil
	}
	raw(t)
	slow := *t
	t.Cflag = t.Cflag&^unix.CBAUD | unix.BOTHER
	t.Cflag &^= unix.CBAUD << unix.IBSHIFT
	t.Ispeed, t.Ospeed = wireSpeed, wireSpeed
	if unix.IoctlSetTermios(fd, unix.TCSETS2, t) != nil {
		// A driver without such speeds may run at MIDI's by other means.
		return 0, unix.IoctlSetTermios(fd, unix.TCSETS2, &slow)
	}
	got, err := unix.IoctlGetTermios(fd, unix.TCGETS2)
	if err != nil {
		return 0, err
	}
	var stat unix.Stat_t
	if err := unix.Fstat(fd, &stat); err != nil {
		return 0, err
	}
	major := unix.Major(stat.Rdev)
	if !nearly(got.Ospeed) || major >= firstPseudoTerminal && major <= lastPseudoTerminal {
		return 0, nil
	}
	return byteTime, nil
}

// nearly says if a speed that a UART could reach is as good as MIDI's, within
// the 1 % that MIDI 1.0 allows.
func nearly(speed uint32) bool {
	return speed >= wireSpeed*99/100 && speed <= wireSpeed*101/100
}

// raw is cfmakeraw(3), and reads that return with the first byte.
func raw(t *unix.Termios) {
	t.Iflag &^= unix.IGNBRK | unix.BRKINT | unix.PARMRK | unix.ISTRIP |
		unix.INLCR | unix.IGNCR | unix.ICRNL | unix.IXON | unix.IXOFF | unix.IXANY
	t.Oflag &^= unix.OPOST
	t.Lflag &^= unix.ECHO | unix.ECHONL | unix.ICANON | unix.ISIG | unix.IEXTEN
	t.Cflag &^= unix.CSIZE | unix.PARENB | unix.CSTOPB | unix.CRTSCTS
	t.Cflag |= unix.CS8 | unix.CREAD | unix.CLOCAL
	t.Cc[unix.VMIN], t.Cc[unix.VTIME] = 1, 0
}

package midiin

import (
	"fmt"
	"os"
	"path/filepath"
	"testing"

	"golang.org/x/sys/unix"

	"tautwire/engine"
)

// pseudoTerminal opens a pair: the master and the slave's path.
func pseudoTerminal(t *testing.T) (master *os.File, slave string) {
	t.Helper()
	master, err := os.OpenFile("/dev/ptmx", os.O_RDWR|unix.O_NOCTTY, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { master.Close() })
	fd := int(master.Fd())
	if err := unix.IoctlSetPointerInt(fd, unix.TIOCSPTLCK, 0); err != nil {
		t.Fatal(err)
	}
	n, err := unix.IoctlGetInt(fd, unix.TIOCGPTN)
	if err != nil {
		t.Fatal(err)
	}
	return master, fmt.Sprintf("/dev/pts/%d", n)
}

// A terminal's own services (echo, line editing, flow control, signals) must not touch the bytes.
func TestStreamPseudoTerminal(t *testing.T) {
	link := filepath.Join(t.TempDir(), "keys")
	master, slave := pseudoTerminal(t)
	if err := os.Symlink(slave, link); err != nil {
		t.Fatal(err)
	}
	l := listen(t, func(report func(Record)) Source { return NewStream(link, report) })
	l.told(Plugged, 1)
	n := 0
	for key := range byte(128) {
		master.Write([]byte{0x90, key, 0x0D, key, 0})
		n += 2
	}
	is(t, l.hear(n), engine.NoteOff, 127)
	l.mu.Lock()
	for i, e := range l.events {
		if e.Key != uint8(i/2) {
			t.Fatalf("event %d is of key %d", i, e.Key)
		}
	}
	l.mu.Unlock()

	// It is pulled out in mid-chord, and comes back as another terminal.
	master.Write([]byte{0x90, 60, 64, 62, 64})
	l.hear(n + 2)
	master.Close()
	is(t, l.hear(n+4), engine.NoteOff, 62)
	l.told(Lost, 1)
	master, slave = pseudoTerminal(t)
	os.Remove(link)
	if err := os.Symlink(slave, link); err != nil {
		t.Fatal(err)
	}
	l.told(Plugged, 2)
	master.Write([]byte{0x90, 64, 64})
	is(t, l.hear(n+5), engine.NoteOn, 64)
	l.end()
}

// A pseudo-terminal takes MIDI's speed, and has no wire whose bytes are apart.
func TestSetSerial(t *testing.T) {
	_, slave := pseudoTerminal(t)
	l, err := openLine(slave)
	if err != nil {
		t.Fatal(err)
	}
	defer l.close()
	got, err := unix.IoctlGetTermios(l.fd, unix.TCGETS2)
	if err != nil {
		t.Fatal(err)
	}
	if got.Ispeed != 31250 || got.Ospeed != 31250 || got.Cflag&unix.CBAUD != unix.BOTHER {
		t.Errorf("speed %d in, %d out", got.Ispeed, got.Ospeed)
	}
	if got.Lflag&(unix.ICANON|unix.ECHO|unix.ISIG) != 0 || got.Iflag&(unix.ICRNL|unix.IXON) != 0 || got.Cflag&unix.CSIZE != unix.CS8 {
		t.Errorf("not raw: %+v", got)
	}
	if l.spacing != 0 {
		t.Errorf("bytes %d ns apart on no wire", l.spacing)
	}
	if byteTime != 320000 {
		t.Errorf("a byte takes %d ns, want 320 us", byteTime)
	}
}

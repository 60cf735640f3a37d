//go:build unix

package midiin

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"time"

	"golang.org/x/sys/unix"

	"tautwire/engine"
)

// wireSpeed and byteTime are those of MIDI 1.0: ten bits to a byte.
const (
	wireSpeed = 31250 // baud
	byteTime  = 10 * int64(time.Second) / wireSpeed
)

// A path that is not there is looked for at growing intervals.
const (
	firstRetry = 10 * time.Millisecond
	lastRetry  = 250 * time.Millisecond
)

// Stream is a source of raw MIDI bytes with a path:
//
//	path                    time of a byte
//	FIFO, pseudo-terminal   when the read that brought it woke up
//	/dev/snd/midiC*D*       the same; a USB keyboard's bytes come a message at a time
//	serial UART             set to 31250 baud, raw; the last byte of a read counts as
//	                        arriving when the read woke up, the others 320 us before each
//	                        other, as they were on the wire
//
// A stream that ends, is pulled out, or loses its last writer releases its notes,
// and is opened again as soon as it can be.
type Stream struct {
	path   string
	report func(Record)
}

// NewStream gives a stream of the bytes at path. report, if not nil, is told of each change,
// from the goroutine that runs the stream.
func NewStream(path string, report func(Record)) *Stream {
	if report == nil {
		report = func(Record) {}
	}
	return &Stream{path, report}
}

// Name is the stream's path.
func (s *Stream) Name() string { return s.path }

// Run listens to the stream until ctx ends.
//
// # Errors
//
// A path that can never bring live bytes (a directory, a regular file) is an error; a
// path that is missing, busy or not permitted is waited for and reported.
func (s *Stream) Run(ctx context.Context, out *Merger) error {
	wake, err := newWaker(ctx)
	if err != nil {
		return fmt.Errorf("byte stream %s: %w", s.path, err)
	}
	defer wake.close()
	port := out.Open(s.path)
	defer port.Close()
	// A FIFO is opened again before its last opening is closed: what the next
	// writer has written meanwhile would be lost with its only reader.
	var last *line
	defer func() { last.close() }()
	retry, waiting := firstRetry, ""
	for ctx.Err() == nil {
		noticed := engine.Now()
		line, err := openLine(s.path)
		last.close()
		last = nil
		if errors.Is(err, errNotLive) {
			return err
		}
		if err != nil {
			if waiting != err.Error() {
				waiting = err.Error()
				s.report(Record{Change: Waiting, Name: s.path, Err: err})
			}
			wake.sleep(retry)
			retry = min(2*retry, lastRetry)
			continue
		}
		waiting = ""
		s.report(Record{Change: Plugged, Name: s.path, Took: since(noticed)})
		heard, noticed := line.copy(port, wake)
		port.Release()
		if last = line; !line.fifo {
			last.close()
			last = nil
		}
		s.report(Record{Change: Lost, Name: s.path, Took: since(noticed)})
		if heard {
			retry = firstRetry
			continue
		}
		// Something that ends as soon as it is opened must not keep us busy.
		wake.sleep(retry)
		retry = min(2*retry, lastRetry)
	}
	return nil
}

func since(t int64) time.Duration { return time.Duration(engine.Now() - t) }

// errNotLive marks a path that no live bytes can come from.
var errNotLive = errors.New("is not a byte stream: name a FIFO, a terminal or a MIDI device")

// line is an open byte stream.
type line struct {
	fd      int
	fifo    bool
	spacing int64 // ns from byte to byte where the wire's speed is known, else 0
}

// openLine opens path without waiting for anything, a terminal in raw mode and at MIDI's speed
// if it has one.
func openLine(path string) (*line, error) {
	fd, err := unix.Open(path, unix.O_RDONLY|unix.O_NONBLOCK|unix.O_NOCTTY|unix.O_CLOEXEC, 0)
	if err != nil {
		return nil, &fs.PathError{Op: "open", Path: path, Err: advised(err)}
	}
	l := &line{fd: fd}
	var stat unix.Stat_t
	if err := unix.Fstat(fd, &stat); err != nil {
		l.close()
		return nil, &fs.PathError{Op: "stat", Path: path, Err: err}
	}
	switch stat.Mode & unix.S_IFMT {
	case unix.S_IFIFO:
		l.fifo = true
	case unix.S_IFCHR:
		l.spacing, err = setSerial(fd)
		if err != nil {
			l.close()
			return nil, &fs.PathError{Op: "set up", Path: path, Err: err}
		}
	default:
		l.close()
		return nil, fmt.Errorf("%s %w", path, errNotLive)
	}
	return l, nil
}

// advised adds to an error what a player can do about it.
func advised(err error) error {
	switch {
	case errors.Is(err, unix.EACCES):
		return fmt.Errorf("%w: add yourself to the group that `ls -l` shows, and log in again", err)
	case errors.Is(err, unix.EBUSY), errors.Is(err, unix.EAGAIN):
		return fmt.Errorf("%w: another program has it open; close that, or use the sequencer's port", err)
	}
	return err
}

// copy gives the line's bytes to port until it ends or wake says stop. It returns if there
// were any, and when the end was noticed.
func (l *line) copy(port *Port, wake *waker) (heard bool, noticed int64) {
	var buffer [512]byte
	for {
		ready, stop := wake.wait(l.fd)
		now := engine.Now()
		if stop || !ready {
			return heard, now
		}
		n, err := unix.Read(l.fd, buffer[:])
		if err == unix.EAGAIN || err == unix.EINTR {
			continue
		}
		if err != nil || n <= 0 {
			return heard, now
		}
		heard = true
		port.WriteSpaced(buffer[:n], now, l.spacing)
	}
}

// close closes the line; none is none to close.
func (l *line) close() {
	if l != nil {
		unix.Close(l.fd)
	}
}

// waker ends a wait for bytes when a context ends. Polling with it, and not
// reading in a goroutine of its own, leaves nothing behind that hangs in a read.
type waker struct {
	pipe [2]int
	stop func() bool
	done chan struct{}
}

func newWaker(ctx context.Context) (*waker, error) {
	w := &waker{done: make(chan struct{})}
	if err := unix.Pipe(w.pipe[:]); err != nil {
		return nil, os.NewSyscallError("pipe", err)
	}
	unix.CloseOnExec(w.pipe[0])
	unix.CloseOnExec(w.pipe[1])
	w.stop = context.AfterFunc(ctx, func() {
		unix.Write(w.pipe[1], []byte{0})
		close(w.done)
	})
	return w, nil
}

// wait waits for bytes on any of fds. It says if there are bytes, or a last read
// that tells of the end, and if the context has ended. Neither is the end of the line.
func (w *waker) wait(fds ...int) (ready, stop bool) {
	polled := make([]unix.PollFd, 0, 4)
	for _, fd := range append(fds, w.pipe[0]) {
		polled = append(polled, unix.PollFd{Fd: int32(fd), Events: unix.POLLIN})
	}
	for {
		_, err := unix.Poll(polled, -1)
		if err == unix.EINTR {
			continue
		}
		for _, p := range polled[:len(fds)] {
			ready = ready || p.Revents&unix.POLLIN != 0
		}
		return ready, polled[len(fds)].Revents != 0
	}
}

// sleep waits for d, or until the context ends.
func (w *waker) sleep(d time.Duration) {
	timer := time.NewTimer(d)
	defer timer.Stop()
	select {
	case <-timer.C:
	case <-w.done:
	}
}

func (w *waker) close() {
	if !w.stop() {
		<-w.done
	}
	unix.Close(w.pipe[0])
	unix.Close(w.pipe[1])
}

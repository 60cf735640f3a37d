package midiin

import (
	"errors"
	"fmt"
	"strings"
	"time"
)

// ErrNoSequencer says that this machine has no ALSA sequencer, or none for us.
// Byte streams and files play without one.
var ErrNoSequencer = errors.New("no ALSA sequencer: load it with `modprobe snd-seq`, or name a byte stream (a FIFO, /dev/snd/midiC1D0) as MIDI input")

// SequencerOptions say what a Sequencer listens to.
type SequencerOptions struct {
	// Inputs are parts of port names, in small or capital letters, or addresses such as "24:0". None is
	// every port that can be read, but for the system's own and those that only pass on what
	// others send (Midi Through).
	Inputs []string
	// Report, if not nil, is told of each port that comes or goes.
	Report func(Record)
	// Verbose lets the ALSA library print to standard error.
	Verbose bool
}

// PortInfo is a sequencer port as `devices` lists it.
type PortInfo struct {
	Address string // client:port, as in "24:0"
	Name    string
	// Through says that the port only passes on what others send to it; it must be named to be
	// listened to.
	Through bool
}

// address is a sequencer port's.
type address struct{ client, port int }

func (a address) String() string { return fmt.Sprintf("%d:%d", a.client, a.port) }

// The system's client and its port that announces what comes and goes.
const (
	systemClient     = 0
	systemAnnounce   = 1
	throughClientTag = "Midi Through"
)

// seqPort is a port as the sequencer knows it.
type seqPort struct {
	address
	client, name string
	// readable says that others may subscribe to what it sends.
	readable bool
}

// fullName is what a player sees. Most drivers repeat the device in the port's name.
func (p seqPort) fullName() string {
	if strings.HasPrefix(p.name, p.client) {
		return p.name
	}
	return p.client + " " + p.name
}

func (p seqPort) through() bool { return p.client == throughClientTag }

// wanted says if a port is to be listened to.
func (p seqPort) wanted(inputs []string) bool {
	if !p.readable || p.address.client == systemClient {
		return false
	}
	for _, part := range inputs {
		if part == p.address.String() || strings.Contains(strings.ToLower(p.fullName()), strings.ToLower(part)) {
			return true
		}
	}
	return len(inputs) == 0 && !p.through()
}

// subscriber is what the switchboard asks of the sequencer.
type subscriber interface {
	// ports lists all ports of all clients but our own.
	ports() []seqPort
	// port looks one up; ok is false if it is gone.
	port(address) (p seqPort, ok bool)
	// subscribe makes what a port sends arrive at ours; a subscription that
	// there is already is no error.
	subscribe(address) error
}

// switchboard keeps a Merger's ports in step with the sequencer's: it hears the
// announcements, connects what comes and releases what goes. All calls come from
// one goroutine, in the order in which the sequencer delivered, so a port's last notes
// come before its end.
type switchboard struct {
	seq    subscriber
	out    *Merger
	inputs []string
	report func(Record)
	now    func() int64
	self   int // our own client
	lines  map[address]*seqLine
}

// seqLine is a port that is connected to ours, or has sent to it.
type seqLine struct {
	*Port
	connected bool
}

func newSwitchboard(seq subscriber, self int, out *Merger, o SequencerOptions, now func() int64) *switchboard {
	report := o.Report
	if report == nil {
		report = func(Record) {}
	}
	return &switchboard{seq, out, o.Inputs, report, now, self, map[address]*seqLine{}}
}

// start connects what is there already.
func (s *switchboard) start() {
	for _, p := range s.seq.ports() {
		s.connect(p, s.now())
	}
}

// came answers a port's start or change, noticed at t.
func (s *switchboard) came(a address, t int64) {
	if p, ok := s.seq.port(a); ok {
		s.connect(p, t)
	}
}

func (s *switchboard) connect(p seqPort, t int64) {
	if p.address.client == s.self || !p.wanted(s.inputs) {
		return
	}
	if l := s.lines[p.address]; l != nil && l.connected {
		return
	}
	if err := s.seq.subscribe(p.address); err != nil {
		s.report(Record{Change: Waiting, Name: p.fullName(), Err: err})
		return
	}
	s.connected(p, t)
}

func (s *switchboard) connected(p seqPort, t int64) {
	l := s.line(p.address, p.fullName())
	if l.connected {
		return
	}
	l.connected = true
	s.report(Record{Change: Plugged, Name: p.fullName(), Took: time.Duration(s.now() - t)})
}

// line is the Merger's port for an address; name serves if it is new.
func (s *switchboard) line(a address, name string) *seqLine {
	l := s.lines[a]
	if l == nil {
		l = &seqLine{Port: s.out.Open(name)}
		s.lines[a] = l
	}
	return l
}

// subscribed answers that a program has connected a port to ours.
func (s *switchboard) subscribed(sender address, t int64) {
	if sender.client == systemClient {
		return
	}
	if p, ok := s.seq.port(sender); ok {
		s.connected(p, t)
	}
}

// gone answers a port's exit, or its disconnection by some program.
func (s *switchboard) gone(a address, t int64) {
	l := s.lines[a]
	if l == nil {
		return
	}
	l.Close()
	delete(s.lines, a)
	if l.connected {
		s.report(Record{Change: Lost, Name: l.Name(), Took: time.Duration(s.now() - t)})
	}
}

// clientGone answers a whole client's exit.
func (s *switchboard) clientGone(client int, t int64) {
	for a := range s.lines {
		if a.client == client {
			s.gone(a, t)
		}
	}
}

// bytes takes what a port sent. A program may send without a subscription.
func (s *switchboard) bytes(a address, b []byte, t int64) {
	s.line(a, a.String()).Write(b, t)
}

// overrun answers that the sequencer had no room and lost events, releases perhaps among
// them: all that is held is let go.
func (s *switchboard) overrun() {
	for _, l := range s.lines {
		l.Release()
	}
}

// stop closes every line.
func (s *switchboard) stop() {
	for a, l := range s.lines {
		l.Close()
		delete(s.lines, a)
	}
}

// stamp is the time of an event that the sequencer's queue stamped with stamped,
// when that queue stood at queue while our clock stood at now, all in ns. Only the age is
// taken from the queue, so a queue that drifts from our clock does no harm. A
// stamp that cannot be (of the future, or older than a second) counts as just now.
func stamp(stamped, queue, now int64) int64 {
	age := queue - stamped
	if age < 0 || age > int64(time.Second) {
		age = 0
	}
	return now - age
}

//go:build linux && cgo

package midiin

/*
#cgo pkg-config: alsa
#include <alsa/asoundlib.h>

// What Go cannot reach (unions, macros, variadic handlers) in plain form.

static void tautwire_quiet(const char *file, int line, const char *function, int err, const char *fmt, ...) {}

static int tautwire_open(snd_seq_t **seq, int verbose) {
	snd_lib_error_handler_t kept = snd_lib_error;
	if (!verbose)
		snd_lib_error_set_handler(tautwire_quiet);
	int err = snd_seq_open(seq, "default", SND_SEQ_OPEN_DUPLEX, SND_SEQ_NONBLOCK);
	if (!verbose)
		snd_lib_error_set_handler(kept);
	return err;
}

// One input port that any program may write to, stamped by the queue if there is one.
static int tautwire_port(snd_seq_t *seq, int queue) {
	snd_seq_port_info_t *info;
	snd_seq_port_info_alloca(&info);
	snd_seq_port_info_set_name(info, "in");
	snd_seq_port_info_set_capability(info, SND_SEQ_PORT_CAP_WRITE | SND_SEQ_PORT_CAP_SUBS_WRITE);
	snd_seq_port_info_set_type(info, SND_SEQ_PORT_TYPE_MIDI_GENERIC | SND_SEQ_PORT_TYPE_SOFTWARE |
		SND_SEQ_PORT_TYPE_SYNTHESIZER | SND_SEQ_PORT_TYPE_APPLICATION);
	snd_seq_port_info_set_midi_channels(info, 16);
	if (queue >= 0) {
		snd_seq_port_info_set_timestamping(info, 1);
		snd_seq_port_info_set_timestamp_real(info, 1);
		snd_seq_port_info_set_timestamp_queue(info, queue);
	}
	int err = snd_seq_create_port(seq, info);
	return err < 0 ? err : snd_seq_port_info_get_port(info);
}

static int tautwire_start_queue(snd_seq_t *seq) {
	int queue = snd_seq_alloc_named_queue(seq, "tautwire");
	if (queue < 0)
		return queue;
	int err = snd_seq_start_queue(seq, queue, NULL);
	if (err >= 0)
		err = snd_seq_drain_output(seq);
	if (err < 0) {
		snd_seq_free_queue(seq, queue);
		return err;
	}
	return queue;
}

// Nanoseconds of the queue, or -1.
static long long tautwire_queue_time(snd_seq_t *seq, int queue) {
	snd_seq_queue_status_t *status;
	snd_seq_queue_status_alloca(&status);
	if (snd_seq_get_queue_status(seq, queue, status) < 0)
		return -1;
	const snd_seq_real_time_t *t = snd_seq_queue_status_get_real_time(status);
	return t->tv_sec * 1000000000LL + t->tv_nsec;
}

typedef struct {
	int type;
	int client, port;           // who sent it
	int about_client, about_port; // whom an announcement is about: the sender of a connection
	int dest_client, dest_port; // the other end of a connection
	long long stamp;            // ns of the queue, or -1
	// A MIDI event's bytes: the library's, good until the next call, or if that is NULL those
	// in buffer. (A pointer to buffer itself could not pass from Go again.)
	const unsigned char *bytes;
	long length;
	unsigned char buffer[32];
} tautwire_event;

static int tautwire_input(snd_seq_t *seq, snd_midi_event_t *coder, tautwire_event *out) {
	snd_seq_event_t *ev;
	int err = snd_seq_event_input(seq, &ev);
	if (err < 0)
		return err;
	out->type = ev->type;
	out->client = ev->source.client;
	out->port = ev->source.port;
	out->stamp = -1;
	if (snd_seq_ev_is_real(ev))
		out->stamp = ev->time.time.tv_sec * 1000000000LL + ev->time.time.tv_nsec;
	out->bytes = NULL;
	out->length = 0;
	switch (ev->type) {
	case SND_SEQ_EVENT_CLIENT_EXIT:
	case SND_SEQ_EVENT_PORT_START:
	case SND_SEQ_EVENT_PORT_CHANGE:
	case SND_SEQ_EVENT_PORT_EXIT:
		out->about_client = ev->data.addr.client;
		out->about_port = ev->data.addr.port;
		break;
	case SND_SEQ_EVENT_PORT_SUBSCRIBED:
	case SND_SEQ_EVENT_PORT_UNSUBSCRIBED:
		out->about_client = ev->data.connect.sender.client;
		out->about_port = ev->data.connect.sender.port;
		out->dest_client = ev->data.connect.dest.client;
		out->dest_port = ev->data.connect.dest.port;
		break;
	case SND_SEQ_EVENT_SYSEX:
		out->bytes = ev->data.ext.ptr;
		out->length = ev->data.ext.len;
		break;
	default:
		out->length = snd_midi_event_decode(coder, out->buffer, sizeof out->buffer, ev);
		if (out->length < 0)
			out->length = 0;
	}
	return 0;
}

// tautwire_readable says that others may subscribe to what the port sends.
static int tautwire_readable(const snd_seq_port_info_t *info) {
	unsigned want = SND_SEQ_PORT_CAP_READ | SND_SEQ_PORT_CAP_SUBS_READ;
	unsigned have = snd_seq_port_info_get_capability(info);
	return (have & want) == want && !(have & SND_SEQ_PORT_CAP_NO_EXPORT);
}
*/
import "C"

import (
	"context"
	"errors"
	"fmt"
	"syscall"
	"unsafe"

	"golang.org/x/sys/unix"

	"tautwire/engine"
)

// sequencerDevice is what the ALSA library opens.
const sequencerDevice = "/dev/snd/seq"

// Sizes of what waits for us, in events and bytes: a burst of a wholly loaded USB
// keyboard while we are not scheduled for a tenth of a second.
const (
	inputPool   = 1000
	inputBuffer = 64 << 10
)

// Sequencer is one client, "tautwire", of the ALSA sequencer with one input port, "in". It
// hears of each port that comes, and connects it at once if it is wanted.
//
// Times: the kernel stamps each event with a queue's real time when the driver hands it
// on, before any thread wakes up; what is read upon waking adds the time that the scheduler took, some
// 50 us to milliseconds. The queue counts in ns between its ticks (ktime, since Linux 4.18),
// so its stamps are the more exact ones. They are mapped to engine.Now by their age at the
// time of reading. Where no queue is to be had, the time of waking serves. The sequencer passes whole
// messages: of a five-pin cable, it sees the last byte of a message, 640 us after its first; of USB all bytes at
// once.
type Sequencer struct {
	seq     *C.snd_seq_t
	coder   *C.snd_midi_event_t
	options SequencerOptions
	client  int
	in      int
	queue   int // below 0 is none
}

// OpenSequencer opens the client; it listens when it is run. Close it in any case.
//
// # Errors
//
// ErrNoSequencer where there is none; else what the system said, as when it is not permitted.
func OpenSequencer(o SequencerOptions) (*Sequencer, error) {
	if err := unix.Access(sequencerDevice, unix.R_OK|unix.W_OK); errors.Is(err, unix.ENOENT) {
		return nil, ErrNoSequencer
	} else if err != nil {
		return nil, fmt.Errorf("ALSA sequencer: %s: %w: add yourself to the group audio, and log in again", sequencerDevice, err)
	}
	s := &Sequencer{options: o}
	if err := alsaError("open", C.tautwire_open(&s.seq, boolInt(o.Verbose))); err != nil {
		return nil, err
	}
	if err := s.setUp(); err != nil {
		s.Close()
		return nil, err
	}
	return s, nil
}

func (s *Sequencer) setUp() error {
	s.client = int(C.snd_seq_client_id(s.seq))
	name := C.CString("tautwire")
	defer C.free(unsafe.Pointer(name))
	if err := alsaError("name the client", C.snd_seq_set_client_name(s.seq, name)); err != nil {
		return err
	}
	// Defaults serve where these are refused.
	C.snd_seq_set_client_pool_input(s.seq, inputPool)
	C.snd_seq_set_input_buffer_size(s.seq, inputBuffer)
	s.queue = int(C.tautwire_start_queue(s.seq))
	in := C.tautwire_port(s.seq, C.int(s.queue))
	if err := alsaError("create the port", in); err != nil {
		return err
	}
	s.in = int(in)
	if err := alsaError("make a decoder", C.snd_midi_event_new(0, &s.coder)); err != nil {
		return err
	}
	C.snd_midi_event_no_status(s.coder, 1)
	return s.subscribe(address{systemClient, systemAnnounce})
}

func boolInt(b bool) C.int {
	if b {
		return 1
	}
	return 0
}

func alsaError(what string, code C.int) error {
	if code >= 0 {
		return nil
	}
	return fmt.Errorf("ALSA sequencer: %s: %w", what, syscall.Errno(-code))
}

// Close ends the client: the system disconnects it and tells everybody.
func (s *Sequencer) Close() error {
	if s.coder != nil {
		C.snd_midi_event_free(s.coder)
		s.coder = nil
	}
	if s.seq == nil {
		return nil
	}
	err := alsaError("close", C.snd_seq_close(s.seq))
	s.seq = nil
	return err
}

// Name is "ALSA sequencer" and the address that programs connect to.
func (s *Sequencer) Name() string {
	return "ALSA sequencer " + address{s.client, s.in}.String()
}

// Run connects the wanted ports and listens until ctx ends; it may be run once.
//
// # Errors
//
// What the system says when the sequencer itself goes away, as when its module is
// unloaded.
func (s *Sequencer) Run(ctx context.Context, out *Merger) error {
	wake, err := newWaker(ctx)
	if err != nil {
		return fmt.Errorf("ALSA sequencer: %w", err)
	}
	defer wake.close()
	fds, err := s.descriptors()
	if err != nil {
		return err
	}
	board := newSwitchboard(s, s.client, out, s.options, engine.Now)
	defer board.stop()
	board.start()
	for {
		ready, stop := wake.wait(fds...)
		if stop {
			return nil
		}
		if !ready {
			return fmt.Errorf("ALSA sequencer: %s is gone", sequencerDevice)
		}
		if err := s.drain(board); err != nil {
			return err
		}
	}
}

func (s *Sequencer) descriptors() ([]int, error) {
	var polled [4]C.struct_pollfd
	n := C.snd_seq_poll_descriptors(s.seq, &polled[0], C.uint(len(polled)), C.POLLIN)
	if n <= 0 {
		return nil, errors.New("ALSA sequencer: has nothing to wait for: the library and the kernel do not fit")
	}
	fds := make([]int, n)
	for i := range fds {
		fds[i] = int(polled[i].fd)
	}
	return fds, nil
}

// drain takes all events that are there. One reading of both clocks serves for
// all of them: between two readings of our clock, of which it takes the middle.
func (s *Sequencer) drain(board *switchboard) error {
	before := engine.Now()
	queue, now := int64(-1), before
	if s.queue >= 0 {
		queue = int64(C.tautwire_queue_time(s.seq, C.int(s.queue)))
		now = before + (engine.Now()-before)/2
	}
	var e C.tautwire_event
	for {
		switch code := C.tautwire_input(s.seq, s.coder, &e); {
		case code == -C.EAGAIN:
			return nil
		case code == -C.ENOSPC:
			board.overrun()
			continue
		case code == -C.EINTR:
			continue
		case code < 0:
			return alsaError("read", code)
		}
		t := before
		if e.stamp >= 0 && queue >= 0 {
			// An event that came after the clocks were read is a little younger than queue.
			t = stamp(min(int64(e.stamp), queue), queue, now)
		}
		s.route(&e, t, board)
	}
}

func (s *Sequencer) route(e *C.tautwire_event, t int64, board *switchboard) {
	about := address{int(e.about_client), int(e.about_port)}
	toUs := int(e.dest_client) == s.client && int(e.dest_port) == s.in
	switch e._type {
	case C.SND_SEQ_EVENT_PORT_START, C.SND_SEQ_EVENT_PORT_CHANGE:
		board.came(about, t)
	case C.SND_SEQ_EVENT_PORT_EXIT:
		board.gone(about, t)
	case C.SND_SEQ_EVENT_CLIENT_EXIT:
		board.clientGone(about.client, t)
	case C.SND_SEQ_EVENT_PORT_SUBSCRIBED:
		if toUs {
			board.subscribed(about, t)
		}
	case C.SND_SEQ_EVENT_PORT_UNSUBSCRIBED:
		if toUs {
			board.gone(about, t)
		}
	default:
		first := (*byte)(e.bytes)
		if first == nil {
			first = (*byte)(&e.buffer[0])
		}
		if e.length > 0 {
			board.bytes(address{int(e.client), int(e.port)}, unsafe.Slice(first, int(e.length)), t)
		}
	}
}

// Ports lists what can be listened to.
func (s *Sequencer) Ports() []PortInfo {
	var list []PortInfo
	for _, p := range s.ports() {
		if p.readable && p.address.client != systemClient {
			list = append(list, PortInfo{p.address.String(), p.fullName(), p.through()})
		}
	}
	return list
}

func (s *Sequencer) ports() (list []seqPort) {
	var client *C.snd_seq_client_info_t
	if C.snd_seq_client_info_malloc(&client) < 0 {
		return nil
	}
	defer C.snd_seq_client_info_free(client)
	var port *C.snd_seq_port_info_t
	if C.snd_seq_port_info_malloc(&port) < 0 {
		return nil
	}
	defer C.snd_seq_port_info_free(port)
	C.snd_seq_client_info_set_client(client, -1)
	for C.snd_seq_query_next_client(s.seq, client) >= 0 {
		id := C.snd_seq_client_info_get_client(client)
		if int(id) == s.client {
			continue
		}
		C.snd_seq_port_info_set_client(port, id)
		C.snd_seq_port_info_set_port(port, -1)
		for C.snd_seq_query_next_port(s.seq, port) >= 0 {
			list = append(list, describe(client, port))
		}
	}
	return list
}

func (s *Sequencer) port(a address) (p seqPort, ok bool) {
	var client *C.snd_seq_client_info_t
	if C.snd_seq_client_info_malloc(&client) < 0 {
		return p, false
	}
	defer C.snd_seq_client_info_free(client)
	var port *C.snd_seq_port_info_t
	if C.snd_seq_port_info_malloc(&port) < 0 {
		return p, false
	}
	defer C.snd_seq_port_info_free(port)
	if C.snd_seq_get_any_client_info(s.seq, C.int(a.client), client) < 0 ||
		C.snd_seq_get_any_port_info(s.seq, C.int(a.client), C.int(a.port), port) < 0 {
		return p, false
	}
	return describe(client, port), true
}

func describe(client *C.snd_seq_client_info_t, port *C.snd_seq_port_info_t) seqPort {
	return seqPort{
		address:  address{int(C.snd_seq_client_info_get_client(client)), int(C.snd_seq_port_info_get_port(port))},
		client:   C.GoString(C.snd_seq_client_info_get_name(client)),
		name:     C.GoString(C.snd_seq_port_info_get_name(port)),
		readable: C.tautwire_readable(port) != 0,
	}
}

func (s *Sequencer) subscribe(a address) error {
	code := C.snd_seq_connect_from(s.seq, C.int(s.in), C.int(a.client), C.int(a.port))
	if code == -C.EBUSY {
		return nil
	}
	return alsaError(fmt.Sprintf("connect %v", a), code)
}

var _ interface {
	Source
	subscriber
	Close() error
} = (*Sequencer)(nil)

package midiin

import (
	"context"
	"sync"
	"time"

	"tautwire/engine"
)

// Source is something that plays: it opens ports of the Merger and writes to
// them what it hears.
type Source interface {
	// Name is what a player knows it by.
	Name() string
	// Run listens until ctx ends, and then returns nil. It returns an error at once when
	// listening can never begin; a source that is away is waited for.
	Run(ctx context.Context, out *Merger) error
}

// Change is what a Record tells of.
type Change string

// The changes of a port.
const (
	Plugged Change = "plugged" // it came and is listened to
	Lost    Change = "lost"    // it is gone, its notes are released
	Waiting Change = "waiting" // it is not there yet, or not to be had
)

// Record tells what became of a port.
type Record struct {
	Change Change
	// Name is the port's, as its system calls it.
	Name string
	// Took is the time from when the change was noticed until it was answered.
	Took time.Duration
	// Err says why a port that is waited for cannot be had.
	Err error
}

// Counts says what a Merger has seen.
type Counts struct {
	Events   uint64 // given to the engine and taken
	Refused  uint64 // given to the engine and not taken
	Filtered uint64 // on channels that are not listened to
	Messages uint64 // complete messages, those included that ask nothing
	Dropped  uint64 // bytes that belonged to no message
	Cut      uint64 // exclusive messages without an end
}

// sensingTimeout is the silence after which a source that sends Active Sensing
// counts as gone: 300 ms, and the tenth more that a receiver allows for a sender's clock
// (MIDI 1.0 Detailed Specification 4.2, Active Sensing).
const sensingTimeout = 330 * time.Millisecond

// Merger makes one stream of events of all sources and is the engine's one
// producer. Its methods and those of its ports may be called from any goroutine.
//
// A key, or a pedal, that two sources hold on one channel is held until both
// have let it go.
type Merger struct {
	mu       sync.Mutex
	send     func(engine.Event) bool
	now      func() int64
	listen   [16]bool
	channels *Channels
	ports    []*Port
	counts   Counts
}

// NewMerger gives a merger that sends to send, which is never called twice at
// once and says if the event was taken. Only the given channels, 1 to 16, are listened to;
// none is all. now is engine.Now, or a test's own clock.
func NewMerger(send func(engine.Event) bool, channels []int, now func() int64) *Merger {
	m := &Merger{send: send, now: now, channels: NewChannels()}
	for i := range m.listen {
		m.listen[i] = len(channels) == 0
	}
	for _, c := range channels {
		if c >= 1 && c <= len(m.listen) {
			m.listen[c-1] = true
		}
	}
	return m
}

// Counts says what came so far from all ports, closed ones included.
func (m *Merger) Counts() Counts {
	m.mu.Lock()
	defer m.mu.Unlock()
	return m.counts
}

// Open gives a port for one source. Close it when the source is gone for good.
func (m *Merger) Open(name string) *Port {
	p := &Port{name: name, merger: m, translator: NewTranslator(m.channels)}
	p.onMessage, p.onEvent = p.message, p.event
	m.mu.Lock()
	defer m.mu.Unlock()
	m.ports = append(m.ports, p)
	return p
}

// Port is one source's way into a Merger.
type Port struct {
	name       string
	merger     *Merger
	decoder    Decoder
	translator *Translator
	onMessage  func(Message)
	onEvent    func(engine.Event)
	held       [16]held
	last       int64 // time of the last byte
	sensing    *time.Timer
	closed     bool
}

// held is what a source holds down on a channel.
type held struct {
	keys  [128]bool
	pedal [3]float32 // damper, sostenuto, soft
	// How far it has moved what would be stuck if it went away.
	modulation, pressure, bend float32
}

// Name is the name that the port was opened with.
func (p *Port) Name() string { return p.name }

// Write takes bytes that arrived at t, ns of the merger's clock. Times never go
// back: an earlier one than the last counts as the last.
func (p *Port) Write(b []byte, t int64) { p.WriteSpaced(b, t, 0) }

// WriteSpaced takes bytes of which the last arrived at t and the others spacing
// ns before each other, as on a wire of known speed.
func (p *Port) WriteSpaced(b []byte, t, spacing int64) {
	m := p.merger
	m.mu.Lock()
	defer m.mu.Unlock()
	if p.closed || len(b) == 0 {
		return
	}
	dropped, cut := p.decoder.Dropped, p.decoder.Cut
	for i, c := range b {
		p.last = max(p.last, t-int64(len(b)-1-i)*spacing)
		p.decoder.Byte(c, p.last, p.onMessage)
	}
	m.counts.Dropped += p.decoder.Dropped - dropped
	m.counts.Cut += p.decoder.Cut - cut
	if p.sensing != nil {
		p.sensing.Reset(sensingTimeout)
	}
}

// Event takes an event that is already translated, as from a performance. Its
// time, too, never goes back.
func (p *Port) Event(e engine.Event) {
	p.merger.mu.Lock()
	defer p.merger.mu.Unlock()
	if p.closed {
		return
	}
	p.last = max(p.last, e.Time)
	e.Time = p.last
	p.event(e)
}

// Release lets go all that the source holds, at once: it went silent or away,
// but may come back to this port.
func (p *Port) Release() {
	p.merger.mu.Lock()
	defer p.merger.mu.Unlock()
	p.release()
}

// silent releases what the source holds, if it has truly been silent: the timer may
// have run out while a byte was on its way.
func (p *Port) silent() {
	p.merger.mu.Lock()
	defer p.merger.mu.Unlock()
	if p.sensing != nil && p.merger.now()-p.last >= int64(sensingTimeout) {
		p.release()
	}
}

// Close releases what the source holds and takes the port out of the merger.
// What is written to it afterwards is lost.
func (p *Port) Close() {
	m := p.merger
	m.mu.Lock()
	defer m.mu.Unlock()
	if p.closed {
		return
	}
	p.release()
	p.closed = true
	for i, q := range m.ports {
		if q == p {
			m.ports = append(m.ports[:i], m.ports[i+1:]...)
			break
		}
	}
}

func (p *Port) message(msg Message) {
	p.merger.counts.Messages++
	if msg.Message[0] == statusSensing && p.sensing == nil {
		p.sensing = time.AfterFunc(sensingTimeout, p.silent)
	}
	p.translator.Message(msg, p.onEvent)
}

// event notes what the source holds by e, and sends it if it is heard and not held
// against by another source.
func (p *Port) event(e engine.Event) {
	m := p.merger
	if !m.listen[e.Channel] {
		m.counts.Filtered++
		return
	}
	h := &p.held[e.Channel]
	switch e.Kind {
	case engine.NoteOn:
		h.keys[e.Key] = true
	case engine.NoteOff:
		h.keys[e.Key] = false
		if m.holds(e.Channel, e.Key) {
			return
		}
	case engine.Control:
		if i := pedalIndex(e.Key); i >= 0 {
			h.pedal[i] = e.Value
			e.Value = m.pedal(e.Channel, i)
		} else if e.Key == modulation {
			h.modulation = e.Value
		}
	case engine.ChannelPressure:
		h.pressure = e.Value
	case engine.Bend:
		h.bend = e.Value
	case engine.AllNotesOff, engine.AllSoundOff:
		for _, q := range m.ports {
			q.held[e.Channel].keys = [128]bool{}
		}
	case engine.ResetControllers:
		for _, q := range m.ports {
			q.held[e.Channel] = held{keys: q.held[e.Channel].keys}
		}
	}
	m.pass(e)
}

func (m *Merger) pass(e engine.Event) {
	if m.send(e) {
		m.counts.Events++
	} else {
		m.counts.Refused++
	}
}

// holds says if any source holds a key.
func (m *Merger) holds(channel, key uint8) bool {
	for _, q := range m.ports {
		if q.held[channel].keys[key] {
			return true
		}
	}
	return false
}

// pedals are the controllers that are held by a foot.
func pedals() [3]uint8 { return [3]uint8{damper, sostenuto, soft} }

func pedalIndex(controller uint8) int {
	for i, c := range pedals() {
		if c == controller {
			return i
		}
	}
	return -1
}

// pedal is how far the heaviest foot of all sources holds a pedal down.
func (m *Merger) pedal(channel uint8, i int) (v float32) {
	for _, q := range m.ports {
		v = max(v, q.held[channel].pedal[i])
	}
	return v
}

// release sends what undoes all that the source holds, keys first.
func (p *Port) release() {
	m := p.merger
	if p.closed {
		return
	}
	if p.sensing != nil {
		p.sensing.Stop()
		p.sensing = nil
	}
	dropped := p.decoder.Dropped
	p.decoder.Reset()
	m.counts.Dropped += p.decoder.Dropped - dropped
	p.translator.Reset()
	p.last = max(p.last, m.now())
	for c := range p.held {
		p.releaseChannel(uint8(c))
	}
}

func (p *Port) releaseChannel(c uint8) {
	m := p.merger
	was := p.held[c]
	p.held[c] = held{}
	e := engine.Event{Time: p.last, Channel: c}
	for key, down := range was.keys {
		if down && !m.holds(c, uint8(key)) {
			e.Kind, e.Key, e.Value = engine.NoteOff, uint8(key), defaultReleaseVelocity
			m.pass(e)
		}
	}
	for i, controller := range pedals() {
		if v := m.pedal(c, i); v < was.pedal[i] {
			e.Kind, e.Key, e.Value = engine.Control, controller, v
			m.pass(e)
		}
	}
	if was.modulation != 0 {
		m.channels.channel[c].set(modulation, 0)
		e.Kind, e.Key, e.Value = engine.Control, modulation, 0
		m.pass(e)
	}
	if was.pressure != 0 {
		e.Kind, e.Key, e.Value = engine.ChannelPressure, 0, 0
		m.pass(e)
	}
	if was.bend != 0 {
		m.channels.channel[c].bend, m.channels.channel[c].bendSent = bendCentre, 0
		e.Kind, e.Key, e.Value = engine.Bend, 0, 0
		m.pass(e)
	}
}

package engine

import (
	"math"
	"math/bits"
	"sync/atomic"
)

// Queue carries events from one producer to one consumer without a lock: a ring
// on two counters, each on a cache line of its own, so that the two sides do not
// take the line from each other.
//
//	what is pushed                     room                when there is none
//	strikes, bends, other controllers  the ring but its    refused and counted
//	                                   last quarter
//	releases (see Releases)            the whole ring      kept aside, merged
//
// What is kept aside has a place for each of its kinds on each channel and key, so
// it never runs out: a release is never lost, and takes effect after
// everything that was pushed before it. As long as something is kept aside all
// else is refused, so that nothing overtakes it. Merging keeps the last state of
// each pedal and each key, not the order between them.
type Queue struct {
	_    [64]byte
	head atomic.Uint64 // next to pop; written by the consumer
	_    [56]byte
	tail atomic.Uint64 // next to push; written by the producer
	_    [56]byte

	ring    []Event
	mask    uint64
	open    uint64 // strikes are refused from this fill on
	refused atomic.Uint64
	rescued atomic.Uint64

	aside aside
}

// QueueLength is the number of events that a queue of the engine holds. A
// 31250 baud cable delivers at most one a third of a millisecond.
const QueueLength = 4096

// NewQueue returns an empty queue of length events, a power of two of at least 8.
func NewQueue(length int) *Queue {
	if length < 8 || bits.OnesCount(uint(length)) != 1 {
		panic("engine: a queue's length is a power of two, 8 or more")
	}
	return &Queue{
		ring: make([]Event, length),
		mask: uint64(length - 1),
		open: uint64(length - length/4),
	}
}

// Releases reports whether e can only end or hold back sound, or is a pedal: what
// must never get lost, or a note would hang.
func (e Event) Releases() bool {
	switch e.Kind {
	case NoteOff, AllSoundOff, AllNotesOff, ResetControllers:
		return true
	case Control:
		return asidePedal(e.Key) >= 0
	}
	return false
}

// Push adds e and reports whether it was taken. It never waits. Only one
// goroutine may push.
func (q *Queue) Push(e Event) bool {
	e.Channel &= 15
	e.Key &= 127
	if q.aside.pending() {
		if e.Releases() {
			q.rescued.Add(1)
			q.aside.put(e)
			return true
		}
		q.refused.Add(1)
		return false
	}
	tail := q.tail.Load()
	fill := tail - q.head.Load()
	switch {
	case fill < q.open, fill <= q.mask && e.Releases():
		q.ring[tail&q.mask] = e
		q.tail.Store(tail + 1)
		return true
	case e.Releases():
		q.rescued.Add(1)
		q.aside.put(e)
		return true
	}
	q.refused.Add(1)
	return false
}

// Pop takes the oldest event out, and after the ring's events those that were
// kept aside. Only one goroutine may pop.
func (q *Queue) Pop() (Event, bool) {
	// In this order: once something is known to be kept aside the ring gets nothing
	// more, so a ring that is empty then has given all that came before.
	kept := q.aside.pending()
	head := q.head.Load()
	if head != q.tail.Load() {
		e := q.ring[head&q.mask]
		q.head.Store(head + 1)
		return e, true
	}
	if !kept {
		return Event{}, false
	}
	return q.aside.pop()
}

// Refused counts the events that were refused, Rescued those that were kept aside.
func (q *Queue) Refused() uint64 { return q.refused.Load() }
func (q *Queue) Rescued() uint64 { return q.rescued.Load() }

// aside has one place for each release that there can be.
type aside struct {
	puts  atomic.Uint64 // written by the producer
	_     [56]byte
	taken atomic.Uint64 // the puts that the consumer has merged
	_     [56]byte
	line  [16]asideChannel

	// The consumer's walk through the lines.
	walking bool
	noted   uint64 // puts when the walk began
	at      int
}

type asideChannel struct {
	time   atomic.Int64 // of the last put
	keys   [2]atomic.Uint64
	pedals [3]atomic.Uint64 // value's bits with asideSet above them; 0 is none
	kinds  atomic.Uint32    // a bit for each Kind of the whole channel
}

const (
	asideSet = 1 << 32
	// asideVelocity is the release velocity of a NoteOff that was kept aside: MIDI 1.0's
	// for a key that has none.
	asideVelocity = 64
)

// asidePedal is the place of a pedal's controller number, or -1.
func asidePedal(controller uint8) int {
	switch controller {
	case controlDamper:
		return 0
	case controlSostenuto:
		return 1
	case controlSoft:
		return 2
	}
	return -1
}

func (a *aside) pending() bool { return a.puts.Load() != a.taken.Load() }

func (a *aside) put(e Event) {
	c := &a.line[e.Channel]
	c.time.Store(e.Time)
	switch e.Kind {
	case NoteOff:
		c.keys[e.Key>>6].Or(1 << (e.Key & 63))
	case Control:
		c.pedals[asidePedal(e.Key)].Store(asideSet | uint64(math.Float32bits(e.Value)))
	case ResetControllers:
		// What the pedals did before is void; what they do afterwards is not.
		for i := range c.pedals {
			c.pedals[i].Store(0)
		}
		c.kinds.Or(1 << e.Kind)
	default:
		c.kinds.Or(1 << e.Kind)
	}
	a.puts.Add(1)
}

// pop notes the number of puts when its walk begins: one that comes during the walk
// is either taken along or found by the next walk.
func (a *aside) pop() (Event, bool) {
	if !a.walking {
		a.walking, a.noted, a.at = true, a.puts.Load(), 0
	}
	for ; a.at < len(a.line); a.at++ {
		if e, ok := a.line[a.at].pop(); ok {
			e.Channel = uint8(a.at)
			return e, true
		}
	}
	a.walking = false
	a.taken.Store(a.noted)
	return Event{}, false
}

// pop takes resets before pedals, for put voids what came before a reset.
func (c *asideChannel) pop() (Event, bool) {
	e := Event{Time: c.time.Load()}
	if kinds := c.kinds.Load(); kinds != 0 {
		e.Kind = Kind(bits.TrailingZeros32(kinds))
		c.kinds.And(^uint32(1 << e.Kind))
		return e, true
	}
	for half := range c.keys {
		keys := c.keys[half].Load()
		if keys == 0 {
			continue
		}
		bit := bits.TrailingZeros64(keys)
		c.keys[half].And(^uint64(1 << bit))
		e.Kind, e.Key, e.Value = NoteOff, uint8(half<<6+bit), asideVelocity
		return e, true
	}
	for i, controller := range [...]uint8{controlDamper, controlSostenuto, controlSoft} {
		if pedal := c.pedals[i].Swap(0); pedal != 0 {
			e.Kind, e.Key, e.Value = Control, controller, math.Float32frombits(uint32(pedal))
			return e, true
		}
	}
	return Event{}, false
}

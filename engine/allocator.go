package engine

import (
	"math"

	"tautwire/voice"
)

// allocator deals strings from a fixed pool. Beside the strings that may sound there are
// spare ones, so that a note that takes another's place starts at once while the other
// fades.
//
// Every decision is taken from values of the grid and of the event alone, so that the
// same performance gets the same strings whatever the period.
type allocator struct {
	pool  *voice.Pool
	slots []slot
	free  []int16 // a stack
	live  []int16 // slots that are rendered, in the order of their strokes
	limit int     // sounding strings
	count int     // sounding strings: live and not fading
}

// slot is a string of the pool.
type slot struct {
	voice  *voice.Voice
	patch  *Compiled // whose string it is
	design *voice.Design

	key, channel uint8
	// orphan is a string whose key is now another string's, since the patch has
	// changed: it ends as if its key had been let go.
	orphan bool
	fading bool
	wild   bool    // its numbers have run away
	soft   float64 // of the soft pedal when it was struck

	born   int64   // frame of the last stroke
	energy float64 // at the last step of the grid, as heard

	// What the voice was last told.
	cents, damp, mute, node, dark float64

	// Gains at the start of this step of the grid and at its end.
	from, to voice.Gain
}

const (
	none = -1
	// spareStrings is how many strings can fade while all others sound. Ten fingers'
	// chord, and once more within 2 ms.
	spareStrings = 24
	// youth is how long a new note is not taken for a quiet one, s: its energy
	// has yet to build up.
	youth = 0.02
	// lowestPlayed is how low a bend can bring a single string, Hz: the lowest key
	// of a piano by four octaves.
	lowestPlayed = 1.5
)

func newAllocator(maker *voice.Maker, strings int) allocator {
	n := strings + spareStrings
	a := allocator{
		pool:  maker.NewPool(n, lowestPlayed),
		slots: make([]slot, n),
		free:  make([]int16, n),
		live:  make([]int16, 0, n),
		limit: strings,
	}
	for i := range a.slots {
		a.slots[i].voice = a.pool.Voice(i)
		a.free[i] = int16(n - 1 - i)
	}
	return a
}

// takesOff reports whether a stroke, on a slot or on none, takes off at once what
// may still sound there.
func (a *allocator) takesOff(index int16) bool {
	if index == none {
		return len(a.free) == 0
	}
	return a.slots[index].voice.Silent()
}

// take returns a silent slot, already live. It tells whether another string had to
// give way, which has then begun to fade.
func (a *allocator) take(channels *[16]channel, frame int64, rate float64) (index int16, stolen bool) {
	if a.count >= a.limit {
		a.fade(a.victim(channels, frame, rate), channels)
		stolen = true
	}
	if len(a.free) == 0 {
		a.cut(a.fadedMost())
	}
	index = a.free[len(a.free)-1]
	a.free = a.free[:len(a.free)-1]
	a.live = append(a.live, index)
	a.count++
	return index, stolen
}

// victim is the string with the least energy, released ones first, and of
// equals the one struck first.
func (a *allocator) victim(channels *[16]channel, frame int64, rate float64) int16 {
	best := int16(none)
	var bestReleased bool
	var bestEnergy float64
	for _, index := range a.live {
		s := &a.slots[index]
		if s.fading {
			continue
		}
		released := s.damping(channels) > 0
		energy := s.energy
		if float64(frame-s.born) < youth*rate {
			energy = math.Inf(1)
		}
		if best == none || released && !bestReleased || released == bestReleased && energy < bestEnergy {
			best, bestReleased, bestEnergy = index, released, energy
		}
	}
	return best
}

// fadedMost is the slot that has been fading the longest.
func (a *allocator) fadedMost() int16 {
	for _, index := range a.live {
		if a.slots[index].fading {
			return index
		}
	}
	return a.live[0]
}

// fade lets a string go to silence within 2 ms; its key has none then.
func (a *allocator) fade(index int16, channels *[16]channel) {
	s := &a.slots[index]
	if s.fading {
		return
	}
	s.fading = true
	a.count--
	s.leave(index, channels)
	s.voice.Fade()
	// The fades in the order in which they began.
	for i, other := range a.live {
		if other == index {
			copy(a.live[i:], a.live[i+1:])
			a.live[len(a.live)-1] = index
			return
		}
	}
}

// cut frees a slot as it is.
func (a *allocator) cut(index int16) {
	for i, other := range a.live {
		if other == index {
			copy(a.live[i:], a.live[i+1:])
			a.live = a.live[:len(a.live)-1]
			break
		}
	}
	a.release(index)
}

// release gives a slot back that is no longer in live.
func (a *allocator) release(index int16) {
	s := &a.slots[index]
	if !s.fading {
		a.count--
	}
	s.fading, s.orphan, s.wild = false, false, false
	s.patch, s.design = nil, nil
	s.voice.Reset()
	a.free = append(a.free, index)
}

// reset empties all slots.
func (a *allocator) reset() {
	a.live = a.live[:0]
	a.free = a.free[:0]
	a.count = 0
	for i := range a.slots {
		s := &a.slots[i]
		s.fading, s.orphan, s.wild = false, false, false
		s.patch, s.design = nil, nil
		s.voice.Reset()
		a.free = append(a.free, int16(len(a.slots)-1-i))
	}
}

// silence fades the strings of a channel and returns how many others sound.
func (a *allocator) silence(channel uint8, channels *[16]channel) (others int) {
	// A string that fades moves to the end of live.
	for i, n := 0, len(a.live); i < n; {
		index := a.live[i]
		s := &a.slots[index]
		switch {
		case s.fading:
			i++
		case s.channel == channel:
			a.fade(index, channels)
			n--
		default:
			others++
			i++
		}
	}
	return others
}

// settle makes the slot the string of a key that it has not been before: every
// setting is told to its voice anew.
func (s *slot) settle(patch *Compiled, channel, key uint8) {
	unknown := math.NaN()
	s.patch, s.design = patch, patch.keys[key].design
	s.channel, s.key = channel, key
	s.cents, s.damp, s.mute, s.node, s.dark = unknown, unknown, unknown, unknown, unknown
}

// leave makes the slot its key's string no longer.
func (s *slot) leave(index int16, channels *[16]channel) {
	if c := &channels[s.channel]; c.string[s.key] == index {
		c.string[s.key] = none
	}
}

func (s *slot) damping(channels *[16]channel) float64 {
	c := &channels[s.channel]
	if s.orphan {
		up := 1 - c.damper
		return up * up
	}
	return c.damping(s.key)
}

// tell passes on to the voice what has changed.
func (s *slot) tell(channels *[16]channel, wave float64) {
	c := &channels[s.channel]
	own := s.patch.keys[s.key].pitch
	cents := c.cents(s.key, own) + float64(wave*c.keyDepth(s.key))
	if cents != s.cents {
		s.cents = cents
		s.voice.Tune(cents)
	}
	if damp := s.damping(channels); damp != s.damp {
		s.damp = damp
		s.voice.Damp(damp)
	}
	if c.mute != s.mute {
		s.mute = c.mute
		s.voice.Mute(c.mute)
	}
	if c.node != s.node {
		s.node = c.node
		s.voice.Touch(s.patch.controls.NodeAt, c.node)
	}
	if dark := min(1, c.darkness+float64(softDarkness*s.soft)); dark != s.dark {
		s.dark = dark
		s.voice.Darken(dark)
	}
}

// aim returns the gains of the slot as its channel stands.
func (s *slot) aim(channels *[16]channel, pan *panTable) voice.Gain {
	c := &channels[s.channel]
	key := &s.patch.keys[s.key]
	gain := key.gain * float32(c.gain.value)
	left, right := pan.gains(c.place.value + key.pan)
	return voice.Gain{Left: gain * left, Right: gain * right}
}

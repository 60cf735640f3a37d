package engine

import (
	"math"

	"tautwire/voice"
)

// gather gives the events that have come their frames.
func (e *Engine) gather(frames int64) {
	for !e.schedule.full() {
		ev, ok := e.queue.Pop()
		if !ok {
			return
		}
		e.schedule.add(e.due(ev, frames), ev)
	}
}

// due is the frame at which ev takes effect.
func (e *Engine) due(ev Event, frames int64) int64 {
	switch e.options.Timing {
	case Eager:
		return e.frame
	case Offline:
		rate := int64(e.options.Rate)
		seconds, rest := ev.Time/1e9, ev.Time%1e9
		return e.late(seconds*rate + int64(math.Round(float64(rest*rate)/1e9)))
	}
	// No event is younger than the callback, so none is due beyond the next period.
	ahead := int64(math.Round(e.dll.Frame(ev.Time)))
	return e.late(e.frame + min(ahead, frames) + e.period)
}

func (e *Engine) late(frame int64) int64 {
	if frame < e.frame {
		e.counts.late.Add(1)
		return e.frame
	}
	return frame
}

// perform does what is due at the current frame, and returns the frame until which nothing
// else is: the next event's, the next multiple of voice.Grid or end.
func (e *Engine) perform(end int64) int64 {
	until := min(end, (e.frame/voice.Grid+1)*voice.Grid)
	for {
		frame, ok := e.schedule.first()
		if !ok {
			return until
		}
		if frame > e.frame {
			return min(until, frame)
		}
		e.take(e.schedule.take())
	}
}

// take answers one event. What glides or is shared by a channel's strings follows on the
// grid; strokes and releases are to the frame.
func (e *Engine) take(ev Event) {
	e.report.events++
	e.counts.events.Add(1)
	c := &e.channels[ev.Channel&15]
	key := ev.Key & 127
	if ev.Value != ev.Value {
		return
	}
	switch ev.Kind {
	case NoteOn:
		e.noteOn(c, ev.Channel&15, key, ev)
	case NoteOff:
		e.noteOff(c, key, ev.Value)
	case Control:
		e.control(c, ev)
	case Bend:
		c.bend = float64(ev.Value)
	case KeyPressure:
		c.keyPressure[key] = min(max(ev.Value, 0), fullValue)
	case ChannelPressure:
		c.pressure = min(max(ev.Value, 0), fullValue)
		c.setDepth()
	case Program:
		e.counts.program.Store(int64(ev.Value))
		e.counts.programs.Add(1)
	case Tune:
		c.tuning[key] = ev.Value
		e.sympathy.tuning[key] = float64(ev.Value)
	case Shift:
		c.shift = float64(ev.Value)
	case AllSoundOff:
		e.soundOff(c, ev.Channel&15)
	case AllNotesOff:
		c.releaseAll()
	case ResetControllers:
		c.reset()
	}
}

func (e *Engine) control(c *channel, ev Event) {
	switch {
	case ev.Key == controlAllSoundOff:
		e.soundOff(c, ev.Channel&15)
	case ev.Key == controlReset:
		c.reset()
	case ev.Key >= controlAllNotesOff:
		c.releaseAll()
	default:
		c.control(ev.Key, ev.Value, e.stage.patch)
	}
}

// noteOn strikes the key's string, the same one again if it still sounds.
func (e *Engine) noteOn(c *channel, number, key uint8, ev Event) {
	if ev.Value <= 0 {
		e.noteOff(c, key, 0)
		return
	}
	c.down.add(key)
	c.keyPressure[key] = 0
	e.struck++
	e.counts.notes.Add(1)
	e.log(ev)
	patch := e.stage.patch
	design := patch.keys[key].design
	index := c.string[key]
	if index != none && e.strings.slots[index].design != design {
		e.strings.slots[index].orphan = true
		c.string[key], index = none, none
	}
	if design == nil {
		return
	}
	if e.strings.takesOff(index) {
		e.flush() // while what is left of its sound is there
	}
	fresh := index == none
	if fresh {
		var stolen bool
		index, stolen = e.strings.take(&e.channels, e.frame, e.rate)
		if stolen {
			e.counts.stolen.Add(1)
		}
		c.string[key] = index
		e.strings.slots[index].settle(patch, number, key)
	}
	s := &e.strings.slots[index]
	s.born, s.soft = e.frame, c.soft
	velocity := min(float64(ev.Value), fullValue) * (1 - float64(softVelocity*c.soft))
	s.voice.Strike(design, velocity, seed(e.struck))
	s.tell(&e.channels, e.wave)
	if fresh {
		s.to = s.aim(&e.channels, e.pan)
		s.from = s.to
		s.voice.Mix(s.to, s.to)
	}
}

func (e *Engine) noteOff(c *channel, key uint8, velocity float32) {
	c.release(key, velocity)
	if index := c.string[key]; index != none {
		e.strings.slots[index].tell(&e.channels, e.wave)
	}
}

// soundOff silences a channel. When no other sounds, the body is silenced as well.
func (e *Engine) soundOff(c *channel, number uint8) {
	e.flush() // what sounds in sympathy needs all that came before
	c.releaseAll()
	c.caught.clear()
	if e.strings.silence(number, &e.channels) == 0 && e.stage.body != nil {
		e.change.hush()
	}
	e.sympathy.silence()
}

// log keeps a note for the report.
func (e *Engine) log(ev Event) {
	if int(e.report.notes) < len(e.report.struck) {
		e.report.struck[e.report.notes] = struck{time: ev.Time, frame: e.frame - e.report.start}
	}
	e.report.notes++
}

// seed makes a number that looks like chance of a note's place in the performance: the
// finalizer of Steele, Lea and Flood, "Fast Splittable Pseudorandom Number Generators",
// OOPSLA 2014.
func seed(note uint64) uint64 {
	z := note * 0x9e3779b97f4a7c15
	z = (z ^ z>>30) * 0xbf58476d1ce4e5b9
	z = (z ^ z>>27) * 0x94d049bb133111eb
	return z ^ z>>31
}

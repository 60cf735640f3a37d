// Package engine is the whole instrument between events and sound: a lock-free
// queue, a pool of strings, the mix, sympathy, a body and a limiter. Render is
// all that an output calls.
package engine

import (
	"fmt"
	"math"
	"sync/atomic"

	"tautwire/voice"
)

// Timing says when an event takes effect.
//
//	Steady   its time plus one period, to the frame: latency is constant. To play.
//	Eager    the start of the next period: the least latency, with a period's jitter.
//	Offline  its time, counted from the first frame. To render files and to test.
type Timing uint8

const (
	Steady Timing = iota
	Eager
	Offline
)

// Options are what New needs beside a patch.
type Options struct {
	Rate   int // frames per second
	Period int // frames of a callback: what Steady adds; unused when Offline
	Timing Timing
	Voices int // strings that may sound at once; 0 is DefaultVoices
}

// DefaultVoices is how many strings an Engine has when Options doesn't say.
const DefaultVoices = 128

// Engine plays a patch. Three sides may use it at once, none of which ever
// waits for another: one goroutine that sends, one callback that renders, and
// any number of others that swap patches and read counts.
//
// Render gives the same bits however its frames are cut into periods: all
// that changes does so at the frame of an event or on a multiple of voice.Grid frames.
type Engine struct {
	options Options
	rate    float64
	period  int64
	queue   *Queue
	next    atomic.Pointer[stage] // what Swap left; nil when taken
	counts  counters
	meters  meters

	// The rest is the callback's own.
	frame    int64 // of the stream, next to render
	dll      *DLL
	woken    int64
	awake    bool
	schedule schedule
	report   report

	stage     *stage
	change    bodyChange
	channels  [16]channel
	strings   allocator
	sympathy  sympathy
	vibrato   vibrato
	wave      float64
	pan       *panTable
	glideStep float64
	struck    uint64 // notes in this performance
	master    master
	limiter   *limiter

	rest  []float32 // of the period that is being rendered
	mixed int64     // the frame from which on

	ramp        [voice.Grid]float32 // 0 to below 1 over a step of the grid
	left, right [voice.Grid]float32
	volume      atomic.Uint32 // what SetVolume set, bits of a float32
}

// counters are written by the callback.
type counters struct {
	late, stolen, notes, cured, events atomic.Uint64
	program                            atomic.Int64
	programs                           atomic.Uint64
	quiet, faded                       atomic.Bool
}

// Counts are what an engine has done since it was made.
type Counts struct {
	Notes   uint64 // struck
	Events  uint64 // taken
	Refused uint64 // by a full queue; never releases
	Rescued uint64 // releases that came when even their own room was full, and were merged
	Late    uint64 // events that came after the frame at which they were due
	Stolen  uint64 // strings that gave way to a new note
	Cured   uint64 // strings and frames whose numbers ran away, and were silenced
	Strings int    // that sound now
}

// New returns an engine that is silent and plays c. It allocates all that it
// will ever need. It panics when c was compiled for another rate, or without a
// positive Period where Timing is Steady: that is a mistake of the program, not of its user.
func New(c *Compiled, o Options) *Engine {
	if c.rate != o.Rate {
		panic(fmt.Sprintf("engine: patch compiled for %d Hz, engine for %d Hz", c.rate, o.Rate))
	}
	if o.Timing == Steady && o.Period <= 0 {
		panic("engine: steady timing needs a period")
	}
	if o.Voices <= 0 {
		o.Voices = DefaultVoices
	}
	rate := float64(o.Rate)
	e := &Engine{
		options:   o,
		rate:      rate,
		period:    int64(o.Period),
		queue:     NewQueue(QueueLength),
		dll:       NewDLL(rate),
		stage:     &stage{patch: c, body: newBodyState(c.body)},
		strings:   newAllocator(c.maker, o.Voices),
		pan:       newPanTable(),
		glideStep: glideCoefficient(rate, voice.Grid),
		limiter:   newLimiter(rate),
	}
	for i := range e.ramp {
		e.ramp[i] = float32(i) / voice.Grid
	}
	for i := range e.channels {
		e.channels[i].init()
	}
	e.sympathy.init(c.maker)
	e.vibrato.init(rate, voice.Grid)
	e.meters.init(rate)
	e.counts.program.Store(-1)
	e.change.init(rate)
	e.SetVolume(0)
	e.master.init(rate)
	return e
}

// Send hands ev to the callback, without waiting, and reports whether it was
// taken: a full queue refuses and counts what is not a release (see Queue). Only one
// goroutine may send. When Offline, send the events of a period before it is rendered.
func (e *Engine) Send(ev Event) bool { return e.queue.Push(ev) }

// Swap makes c the patch of all notes to come, from the next period on; strings that sound end
// as they were struck. The body changes over bodyFade. It may be called from any
// goroutine; of several within a period the last one counts. It panics when c was compiled
// for another rate than the engine's.
func (e *Engine) Swap(c *Compiled) {
	if c.rate != e.options.Rate {
		panic(fmt.Sprintf("engine: patch compiled for %d Hz, engine for %d Hz", c.rate, e.options.Rate))
	}
	e.next.Store(&stage{patch: c, body: newBodyState(c.body)})
}

// SetVolume sets the loudness of the whole, dB, -90 to +12. It glides. It may be called from
// any goroutine.
func (e *Engine) SetVolume(db float64) {
	e.volume.Store(math.Float32bits(float32(amplitude(min(max(db, -90), 12)))))
}

// Quiet lets all keys and pedals go and fades to silence within 0.3 s, for good. It may be
// called from any goroutine.
func (e *Engine) Quiet() { e.counts.quiet.Store(true) }

// Faded reports whether the fade that Quiet began has left the callback whole.
func (e *Engine) Faded() bool { return e.counts.faded.Load() }

// Levels reads the meters, and lets their peaks go. It may be called from any goroutine, but
// by one reader, for the peaks are the reader's.
func (e *Engine) Levels() Levels { return e.meters.levels() }

// Counts returns what has been done so far. It may be called from any goroutine.
func (e *Engine) Counts() Counts {
	return Counts{
		Notes:   e.counts.notes.Load(),
		Events:  e.counts.events.Load(),
		Refused: e.queue.Refused(),
		Rescued: e.queue.Rescued(),
		Late:    e.counts.late.Load(),
		Stolen:  e.counts.stolen.Load(),
		Cured:   e.counts.cured.Load(),
		Strings: int(e.meters.strings.Load()),
	}
}

// Program returns the last program that was asked for, counted from 0, and how many times one
// was asked for: whoever has the set swaps when the second number has changed. It
// may be called from any goroutine.
func (e *Engine) Program() (program int, asked uint64) {
	asked = e.counts.programs.Load()
	return int(e.counts.program.Load()), asked
}

// Delay is the number of frames by which the limiter's look-ahead delays all sound.
func (e *Engine) Delay() int { return e.limiter.look }

// Wake tells that a callback has begun at now, by Now. It comes before the callback's Render, and
// not at all when Offline.
func (e *Engine) Wake(now int64) { e.woken, e.awake = now, true }

// Render overwrites out with the next len(out)/2 frames, interleaved stereo. It allocates
// nothing, takes no lock and makes no system call. No sample is beyond -1 to +1.
func (e *Engine) Render(out []float32) {
	frames := int64(len(out) / 2)
	e.report.begin(e.frame)
	if e.awake {
		e.dll.Update(e.woken, int(frames))
		e.awake = false
	}
	e.gather(frames)
	e.rest, e.mixed = out, e.frame
	for end := e.frame + frames; e.frame < end; {
		grid := e.frame%voice.Grid == 0
		if grid {
			e.enter()
		}
		until := e.perform(end)
		if grid {
			e.step()
		}
		e.frame = until
		e.strings.pool.Arrive(e.place())
		if until == end || until%voice.Grid == 0 {
			e.flush()
		}
	}
	e.limiter.process(out)
	e.meter(out)
}

// flush renders what has not been since the last time, up to the present frame. It comes at the end of
// each step of the grid and of each period; between them an event takes the
// strings that it is about there, and leaves the others for later.
func (e *Engine) flush() {
	n := int(e.frame - e.mixed)
	if n == 0 {
		return
	}
	e.mix(n)
	interleave(e.rest[:2*n], e.left[:n], e.right[:n])
	e.rest, e.mixed = e.rest[2*n:], e.frame
}

func interleave(out, left, right []float32) {
	right = right[:len(left)]
	for i, l := range left {
		out[2*i], out[2*i+1] = l, right[i]
	}
}

// meter tells the readers of counts and levels how things stand.
func (e *Engine) meter(out []float32) {
	e.meters.see(out, e.limiter.least)
	e.limiter.least = one
	if e.limiter.muted > 0 {
		e.counts.cured.Add(e.limiter.muted)
		e.limiter.muted = 0
	}
	e.meters.strings.Store(int32(len(e.strings.live)))
	e.meters.sympathetic.Store(int32(e.sympathy.live))
	if e.master.still(e.limiter.look) {
		e.counts.faded.Store(true)
	}
}

// step does what is due on each multiple of voice.Grid.
func (e *Engine) step() {
	if e.counts.quiet.Load() && !e.master.quiet {
		e.master.quiet = true
		for i := range e.channels {
			e.channels[i].reset()
			e.channels[i].releaseAll()
		}
	}
	e.master.step(math.Float32frombits(e.volume.Load()), e.glideStep)
	e.wave = e.vibrato.step()
	for i := range e.channels {
		e.channels[i].step(e.glideStep)
	}
	e.stepStrings()
	e.strings.pool.Step()
	e.sympathy.step(&e.channels, e.stage.patch, e.pan)
	if e.change.step() {
		e.stage.body.reset()
	}
}

// stepStrings retires the strings that have fallen silent and leads the others on.
func (e *Engine) stepStrings() {
	kept := e.strings.live[:0]
	for _, index := range e.strings.live {
		s := &e.strings.slots[index]
		energy := s.voice.Energy()
		if !sane(energy) {
			s.wild = true
		}
		if s.wild || s.voice.Silent() {
			if s.wild {
				e.counts.cured.Add(1)
			}
			s.leave(index, &e.channels)
			e.strings.release(index)
			continue
		}
		kept = append(kept, index)
		s.tell(&e.channels, e.wave)
		s.from = s.to
		s.to = s.aim(&e.channels, e.pan)
		s.voice.Mix(s.from, s.to)
		s.energy = energy * float64(float32(s.to.Left*s.to.Left)+float32(s.to.Right*s.to.Right))
	}
	e.strings.live = kept
}

// Report tells m about the period that has just been rendered; see Reporter.
func (e *Engine) Report(m *Measure) {
	m.Strings = int32(len(e.strings.live))
	m.Events = e.report.events
	for i := range e.report.notes {
		latency := int64(0)
		if int(i) < len(e.report.struck) {
			struck := &e.report.struck[i]
			frames := struck.frame + int64(e.limiter.look)
			latency = e.dll.Start() + frames*1e9/int64(e.options.Rate) - struck.time
		}
		m.Note(latency)
	}
}

// report is what happened in a period.
type report struct {
	start         int64 // frame of the stream
	events, notes int32
	struck        [MeasuredNotes]struck
}

// struck is a note that took effect at a frame of the period.
type struck struct {
	time, frame int64
}

func (r *report) begin(frame int64) { r.start, r.events, r.notes = frame, 0, 0 }

// Reset makes the engine silent and sound again, as after a panic: all strings and the body are
// at rest, and no key is down. Controllers, patch and counts stay. Call it while no Render
// runs.
func (e *Engine) Reset() {
	e.strings.reset()
	e.sympathy.reset()
	e.schedule = schedule{}
	e.change.init(e.rate)
	e.stage.body.reset()
	e.limiter = newLimiter(e.rate)
	e.dll.Unlock()
	for i := range e.channels {
		c := &e.channels[i]
		c.releaseAll()
		c.caught.clear()
		for key := range c.string {
			c.string[key] = none
		}
	}
}

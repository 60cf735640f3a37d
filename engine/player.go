package engine

import (
	"fmt"
	"runtime"
	"sync/atomic"
)

// Instrument is what a Player plays. *Engine is one.
type Instrument interface {
	// Wake tells that a callback has begun at now, by Now. Its Render follows.
	Wake(now int64)
	// Render overwrites out with the next len(out)/2 frames, interleaved stereo.
	Render(out []float32)
}

// Reporter is an Instrument that tells about the period that it has just rendered, in the
// callback: Strings, Events, and Note for each note struck.
type Reporter interface{ Report(m *Measure) }

// Resetter is an Instrument that can be made silent and sound again after a panic
// has left it half way. Reset is called while no callback runs.
type Resetter interface{ Reset() }

// Player is what every output calls for each of its periods: it has the instrument
// render, measures it, and keeps a panic of it from becoming a dead process or a burst.
//
// After a panic the period is silent, and so are all others until the output's owner,
// who watches Failed, has stopped the stream, called Restart, and started
// anew. With the third panic within a minute the Player stays silent for good.
//
// A period is an xrun by its Cause:
//
//   - Slow: rendering took longer than the period lasts. An underflow that the driver
//     reports just after is the same one and not counted again.
//   - Late: the driver reports an underflow, and the callback, or one of those just before,
//     was woken more than half a period late.
//   - Device: the driver reports an underflow without either.
//
// What the driver doesn't report is no xrun, however late: sound servers call in bursts by design.
//
// Denormal numbers are flushed to zero by the output's thread, not here: see
// output.Thread.
type Player struct {
	instrument Instrument
	reporter   Reporter // nil if the instrument is none
	measures   *Measures
	now        func() int64
	rate       int64 // Hz

	// Of the callback.
	busy      atomic.Bool
	dll       *DLL
	last      int64 // start of the callback before; 0 for none
	measure   Measure
	sinceSlow int // callbacks
	sinceLate int

	periods atomic.Uint64
	health  atomic.Uint32
	// What the panic was. Written by the callback before health says so, read by
	// the owner after.
	reason any
	stack  []byte
	depth  int // bytes of stack in use
	panics [panicLimit]int64
	count  int
}

const (
	panicLimit  = 3
	panicWithin = 60e9 // ns
	panicStack  = 16 << 10
	xrunMemory  = 4
	// At 64 frames and 48 kHz, some ten seconds that the logger may be behind.
	measureRing = 8192
)

const (
	well = iota
	failed
	silenced
)

// NewPlayer returns a Player of the instrument for rate frames per second.
func NewPlayer(instrument Instrument, rate int) *Player {
	p := &Player{
		instrument: instrument,
		measures:   NewMeasures(measureRing),
		now:        Now,
		rate:       int64(rate),
		dll:        NewDLL(float64(rate)),
		stack:      make([]byte, panicStack),
	}
	p.reporter, _ = instrument.(Reporter)
	p.begin()
	return p
}

// Begin forgets the times of the callbacks so far. The output's owner calls it before
// each start of its stream.
func (p *Player) Begin() {
	p.enter()
	defer p.busy.Store(false)
	p.begin()
}

func (p *Player) begin() {
	p.dll.Unlock()
	p.last = 0
	p.sinceSlow, p.sinceLate = xrunMemory, xrunMemory
}

// enter keeps the callback out, waiting for one that is inside. For owners only.
func (p *Player) enter() {
	for !p.busy.CompareAndSwap(false, true) {
		runtime.Gosched()
	}
}

// Period renders one period: it overwrites out, interleaved stereo. It allocates nothing
// and never waits. One goroutine at a time plays; to another one at the same time, as a
// stream given up for lost that comes to life again, it gives silence.
func (p *Player) Period(out []float32, flags Flags) {
	if !p.busy.CompareAndSwap(false, true) {
		clear(out)
		return
	}
	start := p.now()
	m := &p.measure
	*m = Measure{Start: start, Frames: int32(len(out) / 2), Flags: flags}
	m.Wake = p.dll.Update(start, len(out)/2)
	if p.last != 0 {
		m.Gap = start - p.last
	}
	p.last = start
	if p.health.Load() == well {
		p.render(out, m)
	} else {
		clear(out)
		m.Flags |= Silenced
	}
	m.Render = p.now() - start
	p.judge(m)
	p.measures.Put(m)
	p.periods.Add(1)
	p.busy.Store(false)
}

// Periods returns how many periods have been played: when it stands still, so does
// the stream. For any goroutine.
func (p *Player) Periods() uint64 { return p.periods.Load() }

// Measures returns the ring with a Measure of each period, for the one goroutine that
// logs.
func (p *Player) Measures() *Measures { return p.measures }

// Failed tells that the instrument has panicked and the stream wants a fresh start, or,
// with final, that it is silent for good. For any goroutine.
func (p *Player) Failed() (failure, final bool) {
	health := p.health.Load()
	return health != well, health == silenced
}

// Failure says what the panic was, with its stack. It is empty unless Failed. For the
// stream's owner.
func (p *Player) Failure() (reason string, stack []byte) {
	if p.health.Load() == well {
		return "", nil
	}
	return fmt.Sprint(p.reason), p.stack[:p.depth]
}

// Restart resets the instrument, where it is a Resetter, and lets it play again, unless
// it is silent for good, as it also becomes when Reset panics. Call it while the
// stream stands.
func (p *Player) Restart() {
	if p.health.Load() != failed {
		return
	}
	p.enter()
	defer func() {
		if reason := recover(); reason != nil {
			p.keep(reason)
			p.health.Store(silenced)
		}
		p.busy.Store(false)
	}()
	if r, ok := p.instrument.(Resetter); ok {
		r.Reset()
	}
	p.begin()
	p.health.Store(well)
}

func (p *Player) render(out []float32, m *Measure) {
	defer p.caught(out, m)
	p.instrument.Wake(m.Start)
	p.instrument.Render(out)
	if p.reporter != nil {
		p.reporter.Report(m)
	}
}

// caught ends a panic. What was rendered until then may be half a mix that no limiter
// has seen, so none of it is played.
func (p *Player) caught(out []float32, m *Measure) {
	reason := recover()
	if reason == nil {
		return
	}
	clear(out)
	m.Flags |= Silenced
	p.keep(reason)
	p.panics[p.count%panicLimit] = m.Start
	p.count++
	// The ring's next place holds the oldest of the last panicLimit ones.
	if oldest := p.panics[p.count%panicLimit]; p.count >= panicLimit && m.Start-oldest < panicWithin {
		p.health.Store(silenced)
		return
	}
	p.health.Store(failed)
}

func (p *Player) keep(reason any) {
	p.reason = reason
	p.depth = runtime.Stack(p.stack, false)
}

func (p *Player) judge(m *Measure) {
	period := int64(m.Frames) * 1e9 / p.rate
	if m.Flags&Unheard != 0 {
		return
	}
	p.sinceSlow = min(p.sinceSlow+1, xrunMemory)
	p.sinceLate = min(p.sinceLate+1, xrunMemory)
	if m.Wake > period/2 {
		p.sinceLate = 0
	}
	switch {
	case m.Render > period:
		m.Cause = Slow
		p.sinceSlow = 0
	case m.Flags&Underflow == 0:
	case p.sinceSlow < xrunMemory:
		// Already counted when it was slow.
	case p.sinceLate < xrunMemory:
		m.Cause = Late
	default:
		m.Cause = Device
	}
}

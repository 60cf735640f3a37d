package output

import (
	"runtime"
	"sync/atomic"
	"time"

	"golang.org/x/sys/unix"

	"tautwire/engine"
)

const nullHost = "null"

// Null is an output without sound: the clock calls for its periods, as a sound card of
// perfect pitch would. A callback that comes too late is caught up with, so
// that time keeps its course.
type Null struct {
	keeper keeper
	player *engine.Player
	thread Thread
	clock  pacer
	rate   int // Hz
	period int // frames
	out    []float32

	stop  atomic.Bool
	ended chan struct{}
	late  atomic.Uint64
}

// pacer is a clock to wait by. Times are in ns.
type pacer interface {
	Now() int64
	SleepUntil(t int64)
}

// A stream that is further behind than this has slept with the machine; it goes on
// from now.
const nullGiveUp = 1e9 // ns

// NewNull returns a null output that plays player at the given frames per second, in
// periods of the given frames. See System.Open for tell.
func NewNull(player *engine.Player, rate, period int, tell func(Notice)) *Null {
	n := &Null{
		player: player,
		clock:  monotonic{},
		rate:   rate,
		period: period,
		out:    make([]float32, 2*period),
	}
	n.keeper = keeper{stream: n, player: player, device: nullHost, rate: rate, period: period, tell: tell}
	return n
}

// Start begins to play.
func (n *Null) Start() error { return n.keeper.start() }

// Stop ends playing.
func (n *Null) Stop() error { return n.keeper.stop() }

// Info tells the rate and period. The latency is one period, as with a card that
// plays one period while the next one is rendered.
func (n *Null) Info() Info {
	return Info{
		Device:     nullHost,
		Host:       nullHost,
		Rate:       n.rate,
		Period:     n.period,
		Latency:    time.Duration(n.nanos(int64(n.period))),
		Scheduling: n.thread.Scheduling(),
	}
}

// Late returns how often a callback came more than a period late. For any goroutine.
func (n *Null) Late() uint64 { return n.late.Load() }

func (n *Null) open() error {
	n.stop.Store(false)
	n.thread.renew()
	n.ended = make(chan struct{})
	go func() {
		// Never unlocked: the thread ends with this goroutine, and its priority with it.
		runtime.LockOSThread()
		defer close(n.ended)
		n.run()
	}()
	return nil
}

func (n *Null) close(bool) error {
	n.stop.Store(true)
	<-n.ended
	return nil
}

func (n *Null) gone() bool { return false }

func (n *Null) run() {
	n.thread.enter()
	start := n.clock.Now()
	period := n.nanos(int64(n.period))
	behind := false
	var flags engine.Flags
	for frames := int64(n.period); !n.stop.Load(); frames += int64(n.period) {
		n.player.Period(n.out, flags)
		flags = 0
		due := start + n.nanos(frames)
		lag := n.clock.Now() - due
		if lag < 0 {
			behind = false
			n.clock.SleepUntil(due)
			lag = n.clock.Now() - due
		}
		// One stall is one underflow, however many periods it takes to catch up.
		if lag > period && !behind {
			behind = true
			flags = engine.Underflow
			n.late.Add(1)
		}
		if lag > nullGiveUp {
			start += lag
		}
	}
}

// nanos returns the length of that many frames. The seconds are split off, for the
// product would not fit after two days.
func (n *Null) nanos(frames int64) int64 {
	rate := int64(n.rate)
	return frames/rate*1e9 + frames%rate*1e9/rate
}

// monotonic is the clock of engine.Now.
type monotonic struct{}

func (monotonic) Now() int64 { return engine.Now() }

// SleepUntil sleeps in the kernel and not by a Go timer, whose wake-up has to find its
// way through another thread first.
func (monotonic) SleepUntil(t int64) {
	ts := unix.NsecToTimespec(t)
	for unix.ClockNanosleep(unix.CLOCK_MONOTONIC, unix.TIMER_ABSTIME, &ts, nil) == unix.EINTR {
	}
}

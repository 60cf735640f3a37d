package output

import (
	"math"
	"slices"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"tautwire/engine"
)

// hands is a clock that moves only when it is slept by, or when a stall is due.
type hands struct {
	mu     sync.Mutex
	now    int64
	slept  []int64         // the times slept until
	stalls map[int]int64   // ns that the n-th sleep ends late
	after  func(slept int) // called after each sleep
}

func (h *hands) Now() int64 {
	h.mu.Lock()
	defer h.mu.Unlock()
	return h.now
}

func (h *hands) SleepUntil(t int64) {
	h.mu.Lock()
	h.now = max(h.now, t) + h.stalls[len(h.slept)]
	h.slept = append(h.slept, t)
	n := len(h.slept)
	h.mu.Unlock()
	h.after(n)
}

// newPacedNull returns an output whose clock stops it after that many sleeps.
func newPacedNull(rate, period, sleeps int, stalls map[int]int64) (*Null, *hands, *engine.Player) {
	player := engine.NewPlayer(newSine(440, rate), rate)
	n := NewNull(player, rate, period, nil)
	h := &hands{now: 5e9, stalls: stalls}
	h.after = func(slept int) {
		if slept == sleeps {
			n.stop.Store(true)
		}
	}
	n.clock = h
	return n, h, player
}

func TestNullKeepsAbsoluteTime(t *testing.T) {
	for _, test := range []struct{ rate, period int }{{48000, 64}, {44100, 100}, {44100, 1}, {96000, 1024}} {
		n, h, player := newPacedNull(test.rate, test.period, 1000, nil)
		n.run()
		if player.Periods() != 1000 {
			t.Errorf("%+v: %d periods in 1000 sleeps", test, player.Periods())
		}
		for i, slept := range h.slept {
			want := 5e9 + float64(i+1)*float64(test.period)*1e9/float64(test.rate)
			if off := float64(slept) - want; math.Abs(off) > 1 {
				t.Fatalf("%+v: sleep %d is %v ns off", test, i, off)
			}
		}
		if n.Late() != 0 {
			t.Errorf("%+v: late %d times", test, n.Late())
		}
	}
}

func TestNullCatchesUpAndCounts(t *testing.T) {
	const ms = 1_000_000
	tests := []struct {
		name    string
		stall   int64 // ns, at the tenth sleep
		periods uint64
		late    uint64
	}{
		{"in time", 0, 100, 0},
		{"a little late", ms / 2, 100, 0},
		{"five periods and a half late", 5*ms + ms/2, 105, 1},
		{"the machine slept", 7000 * ms, 100, 1},
	}
	for _, test := range tests {
		n, h, player := newPacedNull(48000, 48, 100, map[int]int64{10: test.stall})
		n.run()
		// Each sleep is a period, and so is each that was caught up with. After a pause beyond
		// nullGiveUp time goes on from there.
		if player.Periods() != test.periods {
			t.Errorf("%s: %d periods, want %d", test.name, player.Periods(), test.periods)
		}
		if n.Late() != test.late {
			t.Errorf("%s: late %d times, want %d", test.name, n.Late(), test.late)
		}
		var m engine.Measure
		flagged := uint64(0)
		for player.Measures().Take(&m) {
			if m.Flags&engine.Underflow != 0 {
				flagged++
			}
		}
		if flagged != test.late {
			t.Errorf("%s: %d underflows, want %d", test.name, flagged, test.late)
		}
		if last := h.slept[99]; (last-5e9)%ms != 0 && test.stall < nullGiveUp {
			t.Errorf("%s: time lost its course by %d ns", test.name, (last-5e9)%ms)
		}
	}
}

func TestNullTimeDoesNotOverflow(t *testing.T) {
	n := NewNull(engine.NewPlayer(newSine(1, 48000), 48000), 48000, 64, nil)
	year := int64(365 * 24 * 3600)
	if got := n.nanos(year * 48000); got != year*1e9 {
		t.Errorf("a year's frames last %d ns", got)
	}
}

func TestNullPlaysInRealTime(t *testing.T) {
	instrument := newSine(440, 48000)
	player := engine.NewPlayer(instrument, 48000)
	n := NewNull(player, 48000, 64, func(Notice) {})
	begin := engine.Now()
	if err := n.Start(); err != nil {
		t.Fatal(err)
	}
	eventually(t, "half a second of sound", func() bool { return instrument.frames.Load() >= 24000 })
	took := engine.Now() - begin
	if err := n.Stop(); err != nil {
		t.Fatal(err)
	}
	// It never runs ahead by more than the period under way.
	if took < n.nanos(24000-2*64) {
		t.Errorf("24000 frames took %d ns only", took)
	}
	stopped := player.Periods()
	if info := n.Info(); info.Scheduling.Class == "" || info.Rate != 48000 || info.Period != 64 {
		t.Errorf("info %+v", info)
	}
	if err := n.Start(); err == nil {
		t.Error("started twice")
	}
	if player.Periods() != stopped {
		t.Error("played on after Stop")
	}
}

func TestNullStartsAnewAfterAPanic(t *testing.T) {
	instrument := newSine(440, 48000)
	player := engine.NewPlayer(instrument, 48000)
	var told notices
	n := NewNull(player, 48000, 64, told.tell)
	if err := n.Start(); err != nil {
		t.Fatal(err)
	}
	defer n.Stop()
	for i := range 3 {
		before := instrument.frames.Load()
		eventually(t, "sound", func() bool { return instrument.frames.Load() > before+640 })
		instrument.fails.Store(true)
		if i < 2 {
			eventually(t, "the fresh start is told", func() bool { return told.count(Restarted) == i+1 })
		}
	}
	eventually(t, "the end is told", func() bool { return told.count(SilentForGood) == 1 })
	before := instrument.frames.Load()
	periods := player.Periods()
	eventually(t, "it runs on", func() bool { return player.Periods() > periods+100 })
	if instrument.frames.Load() != before {
		t.Error("the instrument plays on after its third panic")
	}
	if told.count(Restarted) != 2 || told.count(SilentForGood) != 1 {
		t.Errorf("told %d fresh starts and %d ends", told.count(Restarted), told.count(SilentForGood))
	}
}

func (n *notices) count(h Happening) int {
	n.mu.Lock()
	defer n.mu.Unlock()
	count := 0
	for _, notice := range n.all {
		if notice.Happening == h {
			count++
		}
	}
	return count
}

// plug is a stream that can be pulled.
type plug struct {
	player *engine.Player
	out    atomic.Bool // pulled
	opens  atomic.Int64
	stop   chan bool
	done   sync.WaitGroup
}

func (p *plug) open() error {
	p.opens.Add(1)
	if p.out.Load() {
		return errPulled
	}
	p.stop = make(chan bool)
	p.done.Go(func() {
		out := make([]float32, 128)
		for !p.out.Load() {
			select {
			case <-p.stop:
				return
			case <-time.After(time.Millisecond):
				p.player.Period(out, 0)
			}
		}
	})
	return nil
}

func (p *plug) close(bool) error {
	close(p.stop)
	p.done.Wait()
	return nil
}

func (p *plug) gone() bool { return false }

type pulled string

func (p pulled) Error() string { return string(p) }

const errPulled = pulled("it is not there")

// A device that just calls no more, as one that is unplugged.
func TestKeeperFindsASilentDeviceLost(t *testing.T) {
	player := engine.NewPlayer(newSine(440, 48000), 48000)
	stream := &plug{player: player}
	var told notices
	k := &keeper{stream: stream, player: player, device: "lamp", rate: 48000, period: 64, tell: told.tell}
	if err := k.start(); err != nil {
		t.Fatal(err)
	}
	eventually(t, "it plays", func() bool { return player.Periods() > 10 })
	stream.out.Store(true)
	eventually(t, "the failed reopening is told", func() bool { return told.count(Lost) == 2 })
	stream.out.Store(false)
	eventually(t, "the return is told", func() bool { return told.count(Regained) == 1 })
	if err := k.stop(); err != nil {
		t.Fatal(err)
	}
	var order []Happening
	for _, notice := range told.all {
		order = append(order, notice.Happening)
	}
	if !slices.Equal(order, []Happening{Lost, Lost, Regained}) || told.all[1].Err != errPulled {
		t.Errorf("told %+v", told.all)
	}
	if took := told.all[2].Took; took < patience {
		t.Errorf("regained after %v, sooner than it could be missed", took)
	}
	var m engine.Measure
	unheard := 0
	for player.Measures().Take(&m) {
		if m.Flags&engine.Unheard != 0 {
			unheard++
		}
	}
	if unheard < 100 {
		t.Errorf("%d periods were played unheard", unheard)
	}
}

func TestStopGivesUpADeviceThatHangs(t *testing.T) {
	player := engine.NewPlayer(newSine(440, 48000), 48000)
	stream := &stuck{release: make(chan bool)}
	k := &keeper{stream: stream, player: player, device: "lamp", rate: 48000, period: 64, tell: func(Notice) {}}
	if err := k.start(); err != nil {
		t.Fatal(err)
	}
	begin := time.Now()
	if err := k.stop(); err == nil {
		t.Error("no error")
	}
	if took := time.Since(begin); took > 2*stopWithin {
		t.Errorf("Stop took %v", took)
	}
	close(stream.release)
}

type stuck struct{ release chan bool }

func (s *stuck) open() error { return nil }
func (s *stuck) close(bool) error {
	<-s.release
	return nil
}
func (s *stuck) gone() bool { return false }

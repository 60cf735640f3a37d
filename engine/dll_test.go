package engine

import (
	"math"
	"math/rand/v2"
	"testing"
)

// callbacks simulates the clock of a device: the true start of every period and
// the time at which the callback saw it.
type callbacks struct {
	rate   float64 // true frames per second
	jitter float64 // ns; wake-ups are late by 0 to this much
	random *rand.Rand
	start  float64 // ns
}

func newCallbacks(rate, jitter float64) *callbacks {
	return &callbacks{rate: rate, jitter: jitter, random: rand.New(rand.NewPCG(1, 2)), start: 1e15}
}

func (c *callbacks) next(frames int) (start float64, seen int64) {
	start = c.start
	c.start += float64(frames) * 1e9 / c.rate
	return start, int64(start + c.random.Float64()*c.jitter)
}

// drive runs the loop for the given seconds and returns the worst distance (ns)
// of its starts from the true starts plus the mean lateness, in the last half.
func drive(d *DLL, c *callbacks, seconds float64, frames func() int) (worst float64) {
	begin := c.start
	for c.start < begin+seconds*1e9 {
		start, seen := c.next(frames())
		d.Update(seen, c.lastFrames(start))
		if c.start > begin+seconds*0.5e9 {
			worst = max(worst, math.Abs(float64(d.Start())-start-c.jitter/2))
		}
	}
	return worst
}

func (c *callbacks) lastFrames(start float64) int {
	return int(math.Round((c.start - start) * c.rate / 1e9))
}

func fixed(n int) func() int { return func() int { return n } }

func TestDLLFiltersJitterAndDrift(t *testing.T) {
	tests := []struct {
		rate, drift, jitter float64 // Hz, parts per million, ns
		period              int
		bound               float64 // ns
	}{
		{48000, 0, 0, 64, 2},
		{48000, 0, 200e3, 64, 20e3},
		{48000, 100, 200e3, 64, 20e3},
		{48000, -300, 1e6, 64, 100e3},
		{44100, 500, 1e6, 128, 150e3},
		{96000, 50, 100e3, 32, 10e3},
		{48000, 50, 2e6, 1024, 800e3},
		{48000, -50, 2e6, 8192, 2e6},
		{48000, 50, 100e3, 1, 10e3},
	}
	for _, test := range tests {
		d := NewDLL(test.rate)
		truth := test.rate * (1 + test.drift*1e-6)
		c := newCallbacks(truth, test.jitter)
		seconds := 10.0
		worst := drive(d, c, seconds, fixed(test.period))
		if worst > test.bound {
			t.Errorf("%+v: start is off by up to %.0f ns, bound %.0f", test, worst, test.bound)
		}
		// The loop's own noise in the rate: errors times c per period.
		if off := math.Abs(d.Rate()/truth-1) * 1e6; off > 30+test.jitter/1e3 {
			t.Errorf("%+v: rate %.3f Hz is off by %.1f ppm", test, d.Rate(), off)
		}
	}
}

func TestDLLFollowsPeriodsOfMixedLength(t *testing.T) {
	d := NewDLL(48000)
	c := newCallbacks(48000*(1+100e-6), 100e3)
	random := rand.New(rand.NewPCG(3, 4))
	sizes := []int{1, 7, 64, 128, 1024}
	worst := drive(d, c, 10, func() int { return sizes[random.IntN(len(sizes))] })
	if worst > 100e3 {
		t.Errorf("start is off by up to %.0f ns", worst)
	}
}

// The lines from start to start must join, or an event at the border of two
// periods would be told as a frame of neither or of both.
func TestDLLTimeIsContinuous(t *testing.T) {
	d := NewDLL(48000)
	c := newCallbacks(48010, 300e3)
	var end int64
	for i := range 5000 {
		_, seen := c.next(64)
		d.Update(seen, 64)
		if f := d.Frame(d.Start()); math.Abs(f) > 1e-3 {
			t.Fatalf("period %d: its start is frame %v", i, f)
		}
		if i > 0 {
			if gap := d.Start() - end; gap < -2 || gap > 2 {
				t.Fatalf("period %d: %d ns between the last end and this start", i, gap)
			}
		}
		end = d.origin + int64(math.Round(d.t1))
		if f := d.Frame(end); math.Abs(f-64) > 1e-3 {
			t.Fatalf("period %d: its end is frame %v", i, f)
		}
	}
}

func TestDLLKeepsItsLockThroughLateCallbacks(t *testing.T) {
	d := NewDLL(48000)
	c := newCallbacks(48000, 50e3)
	drive(d, c, 5, fixed(64))
	// One wake-up 5 ms late, after which the driver catches up.
	late := c.start + 5e6
	for range 4 {
		start, _ := c.next(64)
		d.Update(int64(late), 64)
		if off := math.Abs(float64(d.Start()) - start); off > 100e3 {
			t.Fatalf("a late wake-up moved the clock by %.0f ns", off)
		}
	}
	if worst := drive(d, c, 1, fixed(64)); worst > 50e3 {
		t.Errorf("afterwards the start is off by %.0f ns", worst)
	}
}

// Sound servers with a long period call back many times in a row.
func TestDLLTakesBurstsForOneClock(t *testing.T) {
	d := NewDLL(48000)
	const burst = 32
	start := 1e15
	locks := 0
	for i := range 20000 {
		if i%burst == 0 {
			start = 1e15 + float64(i)*64e9/48000
		}
		d.Update(int64(start)+int64(i%burst)*20e3, 64)
		if d.elapsed == 0 {
			locks++
		}
	}
	if locks != 1 {
		t.Errorf("locked %d times", locks)
	}
	if off := math.Abs(d.Rate()/48000-1) * 1e6; off > 3000 {
		t.Errorf("rate %.1f Hz", d.Rate())
	}
}

func TestDLLLocksAnewAfterLostTime(t *testing.T) {
	tests := []struct {
		name   string
		lost   float64 // ns
		within float64 // s
	}{
		{"a pause", 2e9, 0.01},
		{"a dropped buffer", 20e6, 0.3},
		{"a step back", -20e6, 0.3},
	}
	for _, test := range tests {
		d := NewDLL(48000)
		c := newCallbacks(48000, 50e3)
		drive(d, c, 5, fixed(64))
		c.start += test.lost
		drive(d, c, test.within, fixed(64))
		if worst := drive(d, c, 2, fixed(64)); worst > 50e3 {
			t.Errorf("%s: start is off by up to %.0f ns", test.name, worst)
		}
	}
}

func TestDLLBeforeItsFirstPeriod(t *testing.T) {
	d := NewDLL(48000)
	if f := d.Frame(Now()); f != 0 {
		t.Errorf("Frame = %v", f)
	}
	if d.Rate() != 48000 {
		t.Errorf("Rate = %v", d.Rate())
	}
	d.Update(1000, 0)
	if d.locked {
		t.Error("locked on a period of no frames")
	}
}

func TestDLLDoesNotAllocate(t *testing.T) {
	d := NewDLL(48000)
	now := Now()
	n := testing.AllocsPerRun(1000, func() {
		now += 1333333
		d.Update(now, 64)
		d.Frame(now)
	})
	if n != 0 {
		t.Errorf("%v allocations", n)
	}
}

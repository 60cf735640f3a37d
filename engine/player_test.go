package engine

import (
	"slices"
	"strings"
	"testing"
)

// stand is an instrument for tests: it sounds at 0.5, and panics, tarries or reports
// when told.
type stand struct {
	clock  int64 // ns; what Now is for the Player
	takes  int64 // ns; of one Render
	fails  bool
	resets int
	badly  bool // Reset panics too
	woken  []int64
}

func (s *stand) Wake(now int64) { s.woken = append(s.woken[:0], now) }

func (s *stand) Render(out []float32) {
	s.clock += s.takes
	for i := range out {
		out[i] = 0.5
		if s.fails && i == len(out)/2 {
			out[i] = 1e30
			var none []float32
			out[i] = none[i]
		}
	}
}

func (s *stand) Report(m *Measure) {
	m.Strings = 2
	m.Events = 1
	m.Note(1_500_000)
}

func (s *stand) Reset() {
	if s.badly {
		panic("reset too")
	}
	s.fails = false
	s.resets++
}

func newStand(rate int) (*stand, *Player) {
	s := &stand{clock: 1e12, takes: 100_000}
	p := NewPlayer(s, rate)
	p.now = func() int64 { return s.clock }
	return s, p
}

func all(out []float32, value float32) bool {
	return !slices.ContainsFunc(out, func(x float32) bool { return x != value })
}

func TestPlayerMeasuresEachPeriod(t *testing.T) {
	s, p := newStand(48000)
	out := make([]float32, 96)
	for range 2 {
		p.Period(out, 0)
		s.clock += 900_000
	}
	if !all(out, 0.5) {
		t.Error("the sound did not get through")
	}
	if p.Periods() != 2 {
		t.Errorf("Periods = %d", p.Periods())
	}
	want := []Measure{{Start: 1e12}, {Start: 1e12 + 1e6, Gap: 1e6}}
	for i := range want {
		w := &want[i]
		w.Render, w.Frames, w.Strings, w.Events, w.Notes = 100_000, 48, 2, 1, 1
		w.Latency[0] = 1_500_000
		var m Measure
		if !p.Measures().Take(&m) || m != *w {
			t.Errorf("period %d: %+v, want %+v", i, m, *w)
		}
	}
	if s.woken[0] != 1e12+1e6 {
		t.Errorf("woken at %d", s.woken[0])
	}
}

func TestPlayerTurnsAPanicIntoSilenceAndAFreshStart(t *testing.T) {
	s, p := newStand(48000)
	out := make([]float32, 128)
	p.Period(out, 0)
	if !all(out, 0.5) {
		t.Fatal("no sound before the panic")
	}
	s.fails = true
	for i := range 3 {
		fill(out, 9)
		p.Period(out, 0)
		if !all(out, 0) {
			t.Fatalf("period %d from the panic on is not silent", i)
		}
	}
	if failure, final := p.Failed(); !failure || final {
		t.Fatalf("Failed = %v, %v", failure, final)
	}
	reason, stack := p.Failure()
	if !strings.Contains(reason, "index out of range") {
		t.Errorf("reason %q", reason)
	}
	if !strings.Contains(string(stack), "(*stand).Render") {
		t.Errorf("the stack does not lead to the panic:\n%s", stack)
	}
	var m Measure
	for p.Measures().Take(&m) {
	}
	if m.Flags&Silenced == 0 {
		t.Error("the measure does not say that the period was silenced")
	}
	p.Restart()
	if s.resets != 1 {
		t.Errorf("reset %d times", s.resets)
	}
	if failure, _ := p.Failed(); failure {
		t.Error("failed still after Restart")
	}
	p.Period(out, 0)
	if !all(out, 0.5) {
		t.Error("no sound after the fresh start")
	}
}

func TestPlayerStaysSilentAfterPanicsInARow(t *testing.T) {
	tests := []struct {
		name  string
		apart int64 // ns
		final bool
	}{
		{"seconds apart", 5e9, true},
		{"hours apart", 3600e9, false},
	}
	for _, test := range tests {
		s, p := newStand(48000)
		out := make([]float32, 128)
		for range panicLimit {
			s.fails = true
			p.Period(out, 0)
			p.Restart()
			s.clock += test.apart
		}
		if _, final := p.Failed(); final != test.final {
			t.Errorf("%s: silent for good is %v", test.name, final)
		}
		p.Period(out, 0)
		if all(out, 0) != test.final {
			t.Errorf("%s: silent is %v", test.name, !test.final)
		}
	}
}

func TestPlayerOutlivesAPanicOfReset(t *testing.T) {
	s, p := newStand(48000)
	s.fails, s.badly = true, true
	out := make([]float32, 128)
	p.Period(out, 0)
	p.Restart()
	if _, final := p.Failed(); !final {
		t.Error("not silent for good")
	}
	if reason, _ := p.Failure(); reason != "reset too" {
		t.Errorf("reason %q", reason)
	}
}

func TestPlayerFindsTheCauseOfAnXrun(t *testing.T) {
	const period = 1_000_000 // ns, of 48 frames
	type callback struct {
		wait  int64 // ns late
		takes int64
		flags Flags
	}
	calm := callback{0, 100_000, 0}
	tests := []struct {
		name string
		run  []callback
		want []Cause
	}{
		{"calm", []callback{calm, calm}, []Cause{NoXrun, NoXrun}},
		{"slow", []callback{{0, 1_200_000, 0}, calm}, []Cause{Slow, NoXrun}},
		{"slow, and the driver says so after", []callback{{0, 1_200_000, 0}, {0, 100_000, Underflow}, calm}, []Cause{Slow, NoXrun, NoXrun}},
		{"woken late", []callback{{900_000, 100_000, Underflow}, calm}, []Cause{Late, NoXrun}},
		{"woken late, and the driver says so after", []callback{{900_000, 100_000, 0}, {0, 100_000, Underflow}}, []Cause{NoXrun, Late}},
		{"woken late and nothing lost", []callback{{900_000, 100_000, 0}, calm}, []Cause{NoXrun, NoXrun}},
		{"the driver alone", []callback{{10_000, 100_000, Underflow}, calm}, []Cause{Device, NoXrun}},
		{"slow long ago", []callback{{0, 1_200_000, 0}, calm, calm, calm, calm, {0, 100_000, Underflow}}, []Cause{Slow, NoXrun, NoXrun, NoXrun, NoXrun, Device}},
		{"unheard", []callback{{0, 1_200_000, Unheard}}, []Cause{NoXrun}},
	}
	for _, test := range tests {
		s, p := newStand(48000)
		out := make([]float32, 96)
		due := s.clock
		play := func(c callback) Cause {
			s.clock = max(s.clock, due+c.wait)
			due += period
			s.takes = c.takes
			p.Period(out, c.flags)
			var m Measure
			for p.Measures().Take(&m) {
			}
			return m.Cause
		}
		for range 1000 {
			play(calm)
		}
		for i, c := range test.run {
			if cause := play(c); cause != test.want[i] {
				t.Errorf("%s: callback %d is %q, want %q", test.name, i, cause, test.want[i])
			}
		}
	}
}

// A stream that was given up for lost may come to life beside its successor.
func TestPlayerGivesSilenceToASecondCaller(t *testing.T) {
	inside := make(chan bool)
	leave := make(chan bool)
	p := NewPlayer(gate{inside, leave}, 48000)
	first := make([]float32, 64)
	done := make(chan bool)
	go func() {
		p.Period(first, 0)
		close(done)
	}()
	<-inside
	second := make([]float32, 64)
	fill(second, 9)
	p.Period(second, 0)
	close(leave)
	<-done
	if !all(second, 0) || !all(first, 0.5) {
		t.Error("the second caller was let in")
	}
}

type gate struct{ inside, leave chan bool }

func (g gate) Wake(int64) {}

func (g gate) Render(out []float32) {
	g.inside <- true
	<-g.leave
	fill(out, 0.5)
}

func fill(out []float32, value float32) {
	for i := range out {
		out[i] = value
	}
}

func TestPeriodDoesNotAllocate(t *testing.T) {
	s, p := newStand(48000)
	s.woken = make([]int64, 0, 1)
	out := make([]float32, 128)
	var m Measure
	n := testing.AllocsPerRun(1000, func() {
		s.clock += 1_333_333
		p.Period(out, Underflow)
		p.Measures().Take(&m)
	})
	if n != 0 {
		t.Errorf("%v allocations", n)
	}
}

// BenchmarkPeriod shows what the Player adds to a render: the control is the
// instrument called bare.
func BenchmarkPeriod(b *testing.B) {
	out := make([]float32, 128)
	b.Run("control", func(b *testing.B) {
		s, _ := newStand(48000)
		for b.Loop() {
			s.Wake(1)
			s.Render(out)
		}
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N), "ns/period")
	})
	b.Run("player", func(b *testing.B) {
		_, p := newStand(48000)
		p.now = Now
		var m Measure
		for b.Loop() {
			p.Period(out, 0)
			p.Measures().Take(&m)
		}
		b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N), "ns/period")
	})
}

package output

import (
	"fmt"
	"math"
	"os"
	"os/exec"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"tautwire/engine"
)

// sine is an instrument that sounds as one steady tone.
type sine struct {
	step   float64 // turns per frame
	phase  float64
	frames atomic.Int64
	fails  atomic.Bool
}

func (s *sine) Wake(int64) {}

func (s *sine) Render(out []float32) {
	for i := 0; i < len(out); i += 2 {
		s.phase += s.step
		x := float32(0.25 * math.Sin(2*math.Pi*s.phase))
		out[i], out[i+1] = x, x
	}
	s.frames.Add(int64(len(out) / 2))
	if s.fails.CompareAndSwap(true, false) {
		panic("a wire snapped")
	}
}

func newSine(hz float64, rate int) *sine { return &sine{step: hz / float64(rate)} }

// notices keeps what an output tells.
type notices struct {
	mu  sync.Mutex
	all []Notice
}

func (n *notices) tell(notice Notice) {
	n.mu.Lock()
	defer n.mu.Unlock()
	n.all = append(n.all, notice)
}

func (n *notices) find(h Happening) (Notice, bool) {
	n.mu.Lock()
	defer n.mu.Unlock()
	for _, notice := range n.all {
		if notice.Happening == h {
			return notice, true
		}
	}
	return Notice{}, false
}

// eventually waits for a condition, and fails the test where it doesn't come.
func eventually(t *testing.T, what string, met func() bool) {
	t.Helper()
	deadline := time.Now().Add(20 * time.Second)
	for !met() {
		if time.Now().After(deadline) {
			t.Fatalf("%s: not within 20 s", what)
		}
		time.Sleep(5 * time.Millisecond)
	}
}

// jackServer is a real JACK server without hardware, whose name is its test's alone.
type jackServer struct {
	name    string
	command *exec.Cmd
	log     string
}

func startJack(t *testing.T, rate, period int) *jackServer {
	t.Helper()
	for _, program := range []string{"jackd", "jack_lsp", "jack_rec"} {
		if _, err := exec.LookPath(program); err != nil {
			t.Fatalf("%v: run the tests by make test, which installs the packages they need", err)
		}
	}
	s := &jackServer{
		name: fmt.Sprintf("tautwire-%d-%d", os.Getpid(), engine.Now()),
		log:  t.TempDir() + "/jackd.log",
	}
	t.Setenv("JACK_DEFAULT_SERVER", s.name)
	t.Cleanup(s.end)
	s.start(t, rate, period)
	return s
}

func (s *jackServer) start(t *testing.T, rate, period int) {
	t.Helper()
	log, err := os.Create(s.log)
	if err != nil {
		t.Fatal(err)
	}
	defer log.Close()
	s.command = exec.Command("jackd", "-n", s.name, "-r", "-d", "dummy",
		"-r", fmt.Sprint(rate), "-p", fmt.Sprint(period))
	s.command.Stdout, s.command.Stderr = log, log
	if err := s.command.Start(); err != nil {
		t.Fatal(err)
	}
	deadline := time.Now().Add(20 * time.Second)
	for {
		// jack_lsp takes the server's name from the environment: with the name as
		// its option -s it crashes at some lengths of it.
		ports, _ := exec.Command("jack_lsp").CombinedOutput()
		if strings.Contains(string(ports), "system:playback_2") {
			return
		}
		if time.Now().After(deadline) {
			text, _ := os.ReadFile(s.log)
			t.Fatalf("the JACK server does not start within 20 s; jack_lsp says\n%s\nand jackd\n%.1000s", ports, text)
		}
		time.Sleep(50 * time.Millisecond)
	}
}

func (s *jackServer) end() {
	if s.command == nil || s.command.Process == nil {
		return
	}
	s.command.Process.Signal(syscall.SIGTERM)
	s.command.Wait()
}

func TestJackPlaysAtTheServersRateAndPeriod(t *testing.T) {
	startJack(t, 48000, 128)
	var system System
	// The server has neither the rate nor the period that is asked.
	choice, err := system.Choose("", 44100, 64)
	if err != nil {
		t.Fatal(err)
	}
	if choice.Host != "JACK" || choice.Device != "system" || choice.Rate != 48000 || choice.Period != 128 || choice.Channels != 2 {
		t.Fatalf("chose %+v", choice)
	}
	instrument := newSine(1000, choice.Rate)
	player := engine.NewPlayer(instrument, choice.Rate)
	var told notices
	out := system.Open(choice, player, told.tell)
	if err := out.Start(); err != nil {
		t.Fatal(err)
	}
	defer out.Stop()
	eventually(t, "a second of sound", func() bool { return instrument.frames.Load() > 48000 })

	ports, err := exec.Command("jack_lsp", "-c").Output()
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(string(ports), "tautwire:out_0\n   system:playback_1") {
		t.Errorf("the client named tautwire is not connected to the speakers:\n%s", ports)
	}
	info := out.Info()
	if info.Latency <= 0 || info.Latency > 100*time.Millisecond || info.Scheduling.Class == "" {
		t.Errorf("info %+v", info)
	}

	recorded := t.TempDir() + "/recorded.wav"
	if text, err := exec.Command("jack_rec", "-f", recorded, "-d", "1", "-b", "16",
		"tautwire:out_0", "tautwire:out_1").CombinedOutput(); err != nil {
		t.Fatalf("jack_rec: %v\n%s", err, text)
	}
	if err := out.Stop(); err != nil {
		t.Errorf("Stop: %v", err)
	}
	frames := instrument.frames.Load()
	samples, rate := readWAV(t, recorded)
	if rate != 48000 {
		t.Errorf("recorded at %d Hz", rate)
	}
	if hz := pitch(samples, rate); math.Abs(hz-1000) > 2 {
		t.Errorf("JACK heard %.2f Hz, want 1000", hz)
	}

	var m engine.Measure
	var window engine.Window
	first, last := int64(0), int64(0)
	for player.Measures().Take(&m) {
		if m.Frames != 128 {
			t.Fatalf("a callback of %d frames", m.Frames)
		}
		if first == 0 {
			first = m.Start
		}
		last = m.Start
		window.Add(&m)
	}
	// The dummy driver sleeps by the clock. On a busy machine it wakes late and leaves
	// periods out, so the rate may be below, and is never above.
	measured := float64(frames-128) * 1e9 / float64(last-first)
	if measured < 0.5*48000 || measured > 1.02*48000 {
		t.Errorf("%.0f frames per second", measured)
	}
	t.Logf("%.1f frames/s, %d callbacks, render p50 %d ns, p99 %d ns, wake p99 %d us, xruns %v, scheduling %+v, latency %v",
		measured, window.Callbacks, window.Render.Quantile(0.5), window.Render.Quantile(0.99),
		window.Wake.Quantile(0.99)/1000, window.Xruns[1:], info.Scheduling, info.Latency)
	if len(told.all) != 0 {
		t.Errorf("told %+v", told.all)
	}
}

func TestJackServerThatGoesIsWaitedFor(t *testing.T) {
	server := startJack(t, 48000, 64)
	var system System
	choice, err := system.Choose("jack", 48000, 64)
	if err != nil {
		t.Fatal(err)
	}
	instrument := newSine(440, choice.Rate)
	var told notices
	out := system.Open(choice, engine.NewPlayer(instrument, choice.Rate), told.tell)
	if err := out.Start(); err != nil {
		t.Fatal(err)
	}
	eventually(t, "sound", func() bool { return instrument.frames.Load() > 4800 })

	server.end()
	eventually(t, "the loss is told", func() bool { _, ok := told.find(Lost); return ok })
	// The instrument goes on unheard.
	before := instrument.frames.Load()
	eventually(t, "it plays unheard", func() bool { return instrument.frames.Load() > before+4800 })

	server.start(t, 48000, 64)
	eventually(t, "the return is told", func() bool { _, ok := told.find(Regained); return ok })
	before = instrument.frames.Load()
	eventually(t, "sound again", func() bool { return instrument.frames.Load() > before+4800 })
	regained, _ := told.find(Regained)
	if regained.Took <= 0 || regained.Device != "system" {
		t.Errorf("regained: %+v", regained)
	}
	t.Logf("regained after %v", regained.Took)
	begin := time.Now()
	if err := out.Stop(); err != nil {
		t.Errorf("Stop: %v", err)
	}
	if took := time.Since(begin); took > time.Second {
		t.Errorf("Stop took %v", took)
	}
}

func TestJackStopsWhileItsServerIsGone(t *testing.T) {
	server := startJack(t, 48000, 64)
	var system System
	choice, err := system.Choose("jack", 48000, 64)
	if err != nil {
		t.Fatal(err)
	}
	instrument := newSine(440, choice.Rate)
	var told notices
	out := system.Open(choice, engine.NewPlayer(instrument, choice.Rate), told.tell)
	if err := out.Start(); err != nil {
		t.Fatal(err)
	}
	server.end()
	eventually(t, "the loss is told", func() bool { _, ok := told.find(Lost); return ok })
	begin := time.Now()
	if err := out.Stop(); err != nil {
		t.Errorf("Stop: %v", err)
	}
	if took := time.Since(begin); took > time.Second {
		t.Errorf("Stop took %v", took)
	}
}

func TestJackPanicIsFollowedByAFreshStart(t *testing.T) {
	startJack(t, 48000, 64)
	var system System
	choice, err := system.Choose("jack", 48000, 64)
	if err != nil {
		t.Fatal(err)
	}
	instrument := newSine(440, choice.Rate)
	var told notices
	out := system.Open(choice, engine.NewPlayer(instrument, choice.Rate), told.tell)
	if err := out.Start(); err != nil {
		t.Fatal(err)
	}
	defer out.Stop()
	eventually(t, "sound", func() bool { return instrument.frames.Load() > 4800 })
	instrument.fails.Store(true)
	eventually(t, "the fresh start is told", func() bool { _, ok := told.find(Restarted); return ok })
	notice, _ := told.find(Restarted)
	if notice.Reason != "a wire snapped" || !strings.Contains(string(notice.Stack), "(*sine).Render") {
		t.Errorf("told %q with the stack\n%s", notice.Reason, notice.Stack)
	}
	before := instrument.frames.Load()
	eventually(t, "sound again", func() bool { return instrument.frames.Load() > before+4800 })
}

// pitch tells the frequency of a tone by the median time between its rising zero
// crossings, which the gaps of a busy machine's xruns don't move.
func pitch(samples []float64, rate int) float64 {
	var times []float64
	last := math.NaN()
	for i := 1; i < len(samples); i++ {
		if samples[i-1] < 0 && samples[i] >= 0 {
			at := float64(i) - samples[i]/(samples[i]-samples[i-1])
			if !math.IsNaN(last) {
				times = append(times, at-last)
			}
			last = at
		}
	}
	if len(times) == 0 {
		return 0
	}
	slices.Sort(times)
	return float64(rate) / times[len(times)/2]
}

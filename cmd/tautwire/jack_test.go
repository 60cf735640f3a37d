package main

import (
	"bufio"
	"cmp"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"

	"tautwire/engine"
	"tautwire/voice/measure"
)

// jackServer is a JACK server of the test's own, without hardware. It wakes
// its clients in real time where that is permitted.
type jackServer struct {
	*process
	name         string
	rate, period int
}

func startJack(t testing.TB, rate, period int) *jackServer {
	t.Helper()
	j := &jackServer{rate: rate, period: period}
	driver := []string{"-d", "dummy", "-r", strconv.Itoa(rate), "-p", strconv.Itoa(period)}
	// The names are few and come again: of a server that was killed, JACK's registry
	// keeps the name, and has room for eight. One that is in use is refused.
	for try := range 6 {
		j.name = fmt.Sprintf("tautwire-test-%d", try)
		for _, priority := range [][]string{{"-R", "-P", "70"}, {"-r"}} {
			j.process = start(t, j.env(), "jackd", slices.Concat([]string{"-n", j.name}, priority, driver)...)
			if !j.endsWithin(500 * time.Millisecond) {
				return j
			}
		}
	}
	t.Fatalf("jackd does not start: %v\n%s%s", j.waitErr, j.out.String(), j.err.String())
	return nil
}

// env points programs to the server.
func (j *jackServer) env() []string {
	return []string{"JACK_DEFAULT_SERVER=" + j.name, "JACK_NO_START_SERVER=1", "JACK_NO_AUDIO_RESERVATION=1"}
}

// probe is a bare client in the server's graph that records and counts.
type probe struct {
	*process
	prefix string
	server *jackServer
}

// probe starts a bare client that has room for so many seconds. With "deaf" it
// connects to nothing.
func (j *jackServer) probe(t testing.TB, seconds int, deaf ...string) *probe {
	t.Helper()
	prefix := filepath.Join(t.TempDir(), "probe")
	name := strings.Join(append([]string{"probe"}, deaf...), "-")
	var p *process
	waitFor(t, 10*time.Second, "the JACK server to take a client", func() bool {
		p = start(t, j.env(), jackprobe(), append([]string{name, strconv.Itoa(seconds), prefix}, deaf...)...)
		for !p.endsWithin(10 * time.Millisecond) {
			if strings.Contains(p.out.String(), "ready") {
				return true
			}
		}
		return false
	}, j.process)
	return &probe{p, prefix, j}
}

// hears tells whether the probe is connected to something.
func (p *probe) hears() bool { return strings.HasSuffix(p.out.String(), "connected\n") }

// cycle is one turn of the graph as the probe has seen it. Times are us of the
// monotonic clock.
type cycle struct {
	frame, frames             int64
	start, next, woken, ended float64
	at                        int // of its first frame in the recording
}

// recording is what the probe has heard and seen.
type recording struct {
	rate   int
	mono   []float64
	cycles []cycle
	xruns  []float64 // us
}

// stop ends the probe and reads what it has written.
func (p *probe) stop(t testing.TB) recording {
	t.Helper()
	p.stdin.Close()
	if !p.endsWithin(10*time.Second) || p.exitCode() != 0 {
		t.Fatalf("the probe does not end well: %s%s", p.out.String(), p.err.String())
	}
	raw, err := os.ReadFile(p.prefix + ".audio")
	if err != nil {
		t.Fatal(err)
	}
	r := recording{rate: p.server.rate, mono: mono(floats(t, raw), 2)}
	at := 0
	for _, line := range numbers(t, p.prefix+".cycles") {
		c := cycle{int64(line[0]), int64(line[1]), line[2], line[3], line[4], line[5], at}
		at += int(c.frames)
		r.cycles = append(r.cycles, c)
	}
	for _, line := range numbers(t, p.prefix+".xruns") {
		r.xruns = append(r.xruns, line[0])
	}
	return r
}

// numbers reads lines of numbers.
func numbers(t testing.TB, path string) (lines [][]float64) {
	t.Helper()
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	for s := bufio.NewScanner(f); s.Scan(); {
		var line []float64
		for _, word := range strings.Fields(s.Text()) {
			x, err := strconv.ParseFloat(word, 64)
			if err != nil {
				t.Fatal(err)
			}
			line = append(line, x)
		}
		lines = append(lines, line)
	}
	return lines
}

// clock tells the server's frames as times, in a short stretch around one.
type clock struct {
	rate   float64
	cycles []cycle
}

// clockSpan is the stretch, to either side. It is short, for a server without
// hardware loses time whenever it is woken late.
const clockSpan = 100e3 // us

// around gives the time in us of frame 0 as the cycles around a time have it, by
// their median, and how far each wake-up is from that: the clock's own jitter.
func (c clock) around(us float64) (zero float64, jitter []float64, ok bool) {
	near := c.offsets(us-clockSpan, us+clockSpan)
	if len(near) < 10 {
		return 0, nil, false
	}
	zero = near[len(near)/2]
	for _, offset := range near {
		jitter = append(jitter, offset-zero)
	}
	return zero, jitter, true
}

// wander is how far the server's own filtered clock, by which it tells the time of
// a frame to every client, is from the true one at a time.
func (c clock) wander(zero, us float64) float64 {
	i, _ := slices.BinarySearchFunc(c.cycles, us, func(x cycle, us float64) int { return cmp.Compare(x.woken, us) })
	x := c.cycles[min(i, len(c.cycles)-1)]
	return x.start - float64(x.frame)*1e6/c.rate - zero
}

// offsets are the times of frame 0 as each cycle between two times has it, in order.
func (c clock) offsets(from, to float64) (us []float64) {
	byTime := func(x cycle, us float64) int { return cmp.Compare(x.woken, us) }
	first, _ := slices.BinarySearchFunc(c.cycles, from, byTime)
	after, _ := slices.BinarySearchFunc(c.cycles, to, byTime)
	for _, x := range c.cycles[first:after] {
		us = append(us, x.woken-float64(x.frame)*1e6/c.rate)
	}
	slices.Sort(us)
	return us
}

// at gives where in the recording the first frame not before a time stands.
func (r recording) at(zero, us float64) int {
	frame := int64(math.Ceil((us - zero) * float64(r.rate) / 1e6))
	i, _ := slices.BinarySearchFunc(r.cycles, frame, func(x cycle, frame int64) int { return cmp.Compare(x.frame+x.frames, frame+1) })
	if i == len(r.cycles) {
		return len(r.mono)
	}
	return r.cycles[i].at + int(max(0, frame-r.cycles[i].frame))
}

// frame gives the server's frame of a place in the recording.
func (r recording) frame(at int) int64 {
	i, _ := slices.BinarySearchFunc(r.cycles, at, func(x cycle, at int) int { return cmp.Compare(x.at+int(x.frames), at+1) })
	return r.cycles[i].frame + int64(at-r.cycles[i].at)
}

// whole tells whether nothing was lost between two places of the recording: the
// server skipped no cycle, and told of no dropout near.
func (r recording) whole(from, to int) bool {
	if from < 0 || to > len(r.mono) || r.frame(to-1)-r.frame(from) != int64(to-1-from) {
		return false
	}
	i, _ := slices.BinarySearchFunc(r.cycles, from, func(x cycle, at int) int { return cmp.Compare(x.at+int(x.frames), at+1) })
	j, _ := slices.BinarySearchFunc(r.cycles, to-1, func(x cycle, at int) int { return cmp.Compare(x.at+int(x.frames), at+1) })
	const near = 10e3 // us
	return !slices.ContainsFunc(r.xruns, func(us float64) bool {
		return us > r.cycles[i].woken-near && us < r.cycles[j].woken+near
	})
}

// tap is a patch whose notes are short: each has died away before the next.
const tap = `title = "Gull on the rail"
[[zone]]
keys = "0-127"
decay = 0.6
release = 0.01
[zone.excitation]
kind = "pluck"
hardness = 1.0
position = 0.1
`

func writeFile(t testing.TB, name, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// TestJACK plays 200 notes through a real server. No note is missed, each has its
// pitch, and the latency is constant: the onsets that JACK's side recorded, told
// as times by the server's clock, follow the times at which the notes' first bytes
// came (of Tautwire's log) within one frame more than the clock's own jitter.
//
// The clock's own jitter is that of the wake-ups of a bare client in the same graph,
// or, where it is more, that of the time that the server tells this client: a
// server without hardware loses time whenever the machine is busy, and any filter
// takes a while to follow. The middle 80 % count, in the quieter half of the notes.
// Where that clock is so bad that the bound would let anything pass, half a period
// is the bound: notes that keep to the period spread over 0.8 of one.
//
// What else the machine does can only add to the spread, so the least disturbed of a few takes
// counts for it, as in a benchmark. Missed notes and pitch count in every take.
func TestJACK(t *testing.T) {
	const takes = 3
	var uneven []string
	for take := range takes {
		var problem string
		t.Run(fmt.Sprintf("take %d", take+1), func(t *testing.T) { problem = takeOfJACK(t) })
		if t.Failed() || problem == "" {
			return
		}
		uneven = append(uneven, problem)
	}
	t.Errorf("in none of %d takes was the latency constant: %s", takes, strings.Join(uneven, "; "))
}

// takeOfJACK plays the notes once, and says in what the latency was not constant.
func takeOfJACK(t *testing.T) (uneven string) {
	server := startJack(t, 48000, 64)
	control := server.probe(t, 60, "deaf")
	ears := server.probe(t, 60)
	keys := newKeyboard(t)
	log := filepath.Join(t.TempDir(), "log")
	daemon := start(t, server.env(), tautwire(), "play", "--device", "jack", "--midi", keys.path,
		"--patch", writeFile(t, "tap.toml", tap), "--log", log, "--verbose")
	daemon.says(t, keys.path+" plays", 10*time.Second)
	waitFor(t, 10*time.Second, "the probe to hear it", ears.hears, ears.process, daemon)

	const notes = 200
	played := []byte{57, 62, 69, 74, 81}
	pace := rand.New(rand.NewPCG(1, 2))
	wait := func(least, most time.Duration) { time.Sleep(least + time.Duration(pace.Int64N(int64(most-least)))) }
	// The clocks settle first.
	wait(time.Second, time.Second+time.Millisecond)
	var written []float64 // us
	for i := range notes {
		written = append(written, float64(engine.Now())/1e3)
		keys.on(t, played[i%len(played)], 100)
		wait(50*time.Millisecond, 55*time.Millisecond)
		keys.off(t, played[i%len(played)])
		wait(45*time.Millisecond, 60*time.Millisecond)
	}
	heard := ears.stop(t)
	ticks := clock{float64(server.rate), control.stop(t).cycles}
	daemon.stops(t)

	var arrived []float64
	for _, r := range records(t, log) {
		if r["event"] == "midi" && r["kind"] == "note on" {
			arrived = append(arrived, r["at_us"].(float64))
		}
	}
	if len(arrived) != notes {
		t.Fatalf("the log has %d notes, %d were written", len(arrived), notes)
	}
	return checkNotes(t, heard, ticks, played, written, arrived)
}

// onset is a note as it was recorded.
type onset struct {
	key     byte
	latency float64   // us
	jitter  []float64 // us: of the wake-ups around it
	wander  float64   // us: of the server's own filtered clock
}

// checkNotes fails for missed and mistuned notes, and says in what the latency was not constant.
func checkNotes(t *testing.T, heard recording, ticks clock, played []byte, written, arrived []float64) (uneven string) {
	var onsets []onset
	var way []float64 // from the writer to Tautwire, us
	missed, pitched, worst := 0, 0, 0.0
	loudest := math.Pow(10, measure.Peak(heard.mono)/20)
	for i, us := range arrived {
		way = append(way, us-written[i])
		key := played[i%len(played)]
		zero, jitter, ok := ticks.around(us)
		if !ok {
			continue
		}
		from, to := heard.at(zero, us-10e3), heard.at(zero, us+55e3)
		peak := math.Pow(10, measure.Peak(heard.mono[from:to])/20)
		if peak < loudest/10 || peak == 0 {
			missed++
			continue
		}
		at := from
		for math.Abs(heard.mono[at]) < peak/50 {
			at++
		}
		if !heard.whole(from, to) {
			continue
		}
		latency := zero + float64(heard.frame(at))*1e6/ticks.rate - us
		onsets = append(onsets, onset{key, latency, jitter, ticks.wander(zero, us)})
		hz := 440 * math.Exp2((float64(key)-69)/12)
		m, err := measure.Partial(heard.mono[at+48:to-240], ticks.rate, hz, hz)
		if err != nil {
			t.Errorf("note %d, key %d: %v", i, key, err)
			continue
		}
		pitched++
		cents := measure.Cents(m.Frequency, hz)
		worst = max(worst, math.Abs(cents))
		if math.Abs(cents) > 2 {
			t.Errorf("note %d, key %d: %.1f cents off", i, key, cents)
		}
	}
	if missed > 0 {
		t.Errorf("%d of %d notes were missed", missed, len(arrived))
	}
	t.Logf("%d notes, %d missed; %d in stretches without a dropout; pitch of %d within %.2f cents", len(arrived), missed, len(onsets), pitched, worst)
	slices.Sort(way)
	t.Logf("from the writer to the log's time: p50 %.0f us, p99 %.0f us", way[len(way)/2], way[len(way)*99/100])
	if len(onsets) < len(arrived)/4 {
		t.Fatalf("only %d notes without a dropout nearby: this machine is too busy to tell latencies", len(onsets))
	}
	frame := 1e6 / ticks.rate
	// The quietest half are those whose latency can be told best.
	slices.SortFunc(onsets, func(a, b onset) int { return cmp.Compare(middle(a.jitter), middle(b.jitter)) })
	for _, part := range []int{len(onsets) / 2, len(onsets)} {
		latency, spread, jitter, wander := spreadOf(onsets[:part])
		t.Logf("the quietest %d: latency %.0f us, the middle 80 %% within %.1f us; of the clock, the wake-ups within %.1f us, as the server filters it within %.1f us; a frame is %.1f us",
			part, latency, spread, jitter, wander, frame)
		if own := max(jitter, wander); part < len(onsets) && spread > own+frame {
			uneven = fmt.Sprintf("it spread over %.1f us, more than a frame beyond the clock's own %.1f us", spread, own)
		}
		if half := float64(heard.cycles[0].frames) * frame / 2; part < len(onsets) && spread > half {
			uneven = fmt.Sprintf("it spread over %.1f us, more than half a period: notes do not keep to the frame", spread)
		}
	}
	return uneven
}

// spreadOf gives the median latency, and the spreads of the latencies, of the
// clock's wake-ups around the notes, and of the server's own filtered clock. Notes of different keys begin to sound differently,
// so each counts from its key's median.
func spreadOf(onsets []onset) (latency, spread, jitter, wander float64) {
	byKey := map[byte][]float64{}
	var all, apart, wakes, wanders []float64
	for _, o := range onsets {
		byKey[o.key] = append(byKey[o.key], o.latency)
		all = append(all, o.latency)
		wakes = append(wakes, o.jitter...)
		wanders = append(wanders, o.wander)
	}
	for _, latencies := range byKey {
		slices.Sort(latencies)
		for _, l := range latencies {
			apart = append(apart, l-latencies[len(latencies)/2])
		}
	}
	slices.Sort(all)
	return all[len(all)/2], middle(apart), middle(wakes), middle(wanders)
}

// middle is the width of the middle 80 % of some values: on a shared machine, a
// stall in ten is nobody's.
func middle(x []float64) float64 {
	x = slices.Sorted(slices.Values(x))
	return x[len(x)*9/10] - x[len(x)/10]
}

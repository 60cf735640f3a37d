package main

import (
	"bufio"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
	"time"
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
	j := &jackServer{name: fmt.Sprintf("tw%d-%s", os.Getpid(), t.Name()), rate: rate, period: period}
	driver := []string{"-n", j.name, "-d", "dummy", "-r", strconv.Itoa(rate), "-p", strconv.Itoa(period)}
	for _, priority := range [][]string{{"-R", "-P", "70"}, {"-r"}} {
		j.process = start(t, j.env(), "jackd", append(slices.Clone(priority), driver...)...)
		if !j.endsWithin(300 * time.Millisecond) {
			return j
		}
	}
	t.Fatalf("jackd does not start:\n%s%s", j.out.String(), j.err.String())
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

// probe starts a bare client that has room for so many seconds.
func (j *jackServer) probe(t testing.TB, seconds int) *probe {
	t.Helper()
	prefix := filepath.Join(t.TempDir(), "probe")
	var p *process
	waitFor(t, 10*time.Second, "the JACK server to take a client", func() bool {
		p = start(t, j.env(), jackprobe(), "probe", strconv.Itoa(seconds), prefix)
		for !p.endsWithin(10 * time.Millisecond) {
			if strings.Contains(p.out.String(), "ready") {
				return true
			}
		}
		return false
	}, j.process)
	return &probe{p, prefix, j}
}

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

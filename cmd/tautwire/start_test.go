package main

import (
	"bufio"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"
)

// ready is the last of what play says before it plays.
const ready = "Begin with the loudspeakers turned down"

// BenchmarkStart reports ms from starting the program to when it plays, and of
// a program that only tells its version, which is the system's part.
func BenchmarkStart(b *testing.B) {
	for _, c := range []struct {
		name  string
		args  []string
		until string
	}{
		{"play", []string{"play", "--device", "null"}, ready},
		{"version", []string{"version"}, "tautwire"},
	} {
		b.Run(c.name, func(b *testing.B) {
			var took []float64
			for b.Loop() {
				took = append(took, startUntil(b, c.until, c.args...))
			}
			slices.Sort(took)
			b.ReportMetric(took[len(took)/2], "ms/start")
			b.ReportMetric(took[len(took)-1], "ms/slowest")
			b.ReportMetric(0, "ns/op")
		})
	}
}

// startUntil gives the ms until the program has said a text, and ends it.
func startUntil(t testing.TB, text string, args ...string) float64 {
	t.Helper()
	cmd := exec.Command(tautwire(), args...)
	read, write, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	defer read.Close()
	cmd.Stdout, cmd.Stderr = write, write
	begin := time.Now()
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	write.Close()
	lines := bufio.NewScanner(read)
	for lines.Scan() && !strings.Contains(lines.Text(), text) {
	}
	took := time.Since(begin)
	cmd.Process.Signal(syscall.SIGTERM)
	cmd.Wait()
	return 1e3 * took.Seconds()
}

// TestResidentMemory bounds how much memory has ever been resident.
func TestResidentMemory(t *testing.T) {
	const bound = 64 << 10 // kB
	if most := mostResident(t); most >= bound {
		t.Errorf("%d kB were resident, allowed %d", most, bound)
	}
}

// BenchmarkResidentMemory reports how much memory has ever been resident.
func BenchmarkResidentMemory(b *testing.B) {
	b.ReportMetric(float64(mostResident(b))/1024, "MB")
	b.ReportMetric(0, "ns/op")
}

// mostResident plays all keys of all built-in patches, so that every string there
// is has sounded low, and gives how much memory has ever been resident.
func mostResident(t testing.TB) (kB int) {
	t.Helper()
	keys, log := newKeyboard(t), filepath.Join(t.TempDir(), "log")
	daemon := start(t, nil, tautwire(), "play", "--device", "null", "--midi", keys.path, "--log", log)
	daemon.says(t, keys.path+" plays", 20*time.Second)
	patches, err := builtins()
	if err != nil {
		t.Fatal(err)
	}
	keys.write(t, 0xb0, 64, 127) // the pedal holds them all
	for n := range patches {
		keys.write(t, 0xc0, byte(n))
		daemon.says(t, fmt.Sprintf("Patch %d: ", n+1), 20*time.Second)
		for key := range byte(128) {
			keys.on(t, key, 100)
		}
	}
	waitFor(t, 30*time.Second, "a record of 128 strings", func() bool {
		return slices.ContainsFunc(records(t, log), func(r map[string]any) bool {
			return r["event"] == "window" && r["strings"].(float64) >= 128
		})
	}, daemon)
	most := status(t, daemon, "VmHWM")
	t.Logf("%d kB resident now, %d kB at most; %d kB of it files", status(t, daemon, "VmRSS"), most, status(t, daemon, "RssFile"))
	daemon.stops(t)
	return most
}

// status is a line of what the kernel says of a process, in kB.
func status(t testing.TB, p *process, name string) (kB int) {
	t.Helper()
	text, err := os.ReadFile(fmt.Sprintf("/proc/%d/status", p.cmd.Process.Pid))
	if err != nil {
		t.Fatal(err)
	}
	_, rest, _ := strings.Cut(string(text), name+":")
	if _, err := fmt.Sscan(rest, &kB); err != nil {
		t.Fatalf("%s: %v", name, err)
	}
	return kB
}

package output

import (
	"math"
	"os"
	"os/exec"
	"runtime"
	"strconv"
	"strings"
	"testing"

	"golang.org/x/sys/unix"
)

// onThread runs f on a thread of its own, which ends with it.
func onThread(f func()) {
	done := make(chan bool)
	go func() {
		runtime.LockOSThread()
		defer close(done)
		f()
	}()
	<-done
}

func TestThreadIsRealTimeOrSaysWhatWouldPermitIt(t *testing.T) {
	var thread Thread
	if thread.Scheduling().Class != "" {
		t.Error("granted before the first callback")
	}
	onThread(func() {
		thread.enter()
		attr, err := unix.SchedGetAttr(0, 0)
		if err != nil {
			t.Error(err)
			return
		}
		s := thread.Scheduling()
		if s.Class != className(attr.Policy) || s.Priority != int(attr.Priority) {
			t.Errorf("tells %+v, is %+v", s, attr)
		}
		switch s.Class {
		case "fifo":
			if s.Given || s.Refusal != nil {
				t.Errorf("%+v", s)
			}
		case "other":
			if s.Refusal == nil || !strings.Contains(s.Refusal.String(), "rtprio") || !strings.Contains(s.Refusal.String(), "LimitRTPRIO") {
				t.Errorf("refused without a way out: %+v", s)
			}
		}
		// The next stream finds the thread as it is.
		thread.renew()
		thread.enter()
		if again := thread.Scheduling(); s.Class == "fifo" && !again.Given {
			t.Errorf("a real-time thread was not recognized: %+v", again)
		}
	})
}

func TestThreadFlushesDenormals(t *testing.T) {
	var plain, flushed float32
	small := math.Float32frombits(0x00800000) // the smallest normal number
	onThread(func() { plain = product(small, 0.5) })
	onThread(func() {
		var thread Thread
		thread.enter()
		flushed = product(small, 0.5)
	})
	if plain == 0 {
		t.Error("denormals are flushed on other threads too")
	}
	if flushed != 0 {
		t.Errorf("%v was not flushed to 0", flushed)
	}
}

// product is not inlined, or the compiler would multiply before the thread is ready.
//
//go:noinline
func product(a, b float32) float32 { return a * b }

func TestEnterIsFreeAfterTheFirst(t *testing.T) {
	onThread(func() {
		var thread Thread
		thread.enter()
		if n := testing.AllocsPerRun(100, thread.enter); n != 0 {
			t.Errorf("%v allocations", n)
		}
	})
}

// TestPrepareProcess runs in a process of its own, which it changes for good.
func TestPrepareProcess(t *testing.T) {
	const inside = "TAUTWIRE_TEST_PREPARE"
	if os.Getenv(inside) == "" {
		command := exec.Command(os.Args[0], "-test.run=^TestPrepareProcess$", "-test.v")
		command.Env = append(os.Environ(), inside+"=1")
		text, err := command.CombinedOutput()
		if err != nil {
			t.Fatalf("%v\n%s", err, text)
		}
		t.Logf("%s", text)
		return
	}
	before := status(t, "VmRSS:")
	p := PrepareProcess()
	if p.Procs < runtime.NumCPU()+6 || runtime.GOMAXPROCS(0) != p.Procs {
		t.Errorf("GOMAXPROCS is %d, told %d", runtime.GOMAXPROCS(0), p.Procs)
	}
	if os.Getenv("GOGC") == "" && p.GCPercent < 400 {
		t.Errorf("GC percent %d", p.GCPercent)
	}
	if os.Getenv("GOMEMLIMIT") == "" && p.MemoryLimit < 1<<26 {
		t.Errorf("memory limit %d", p.MemoryLimit)
	}
	locked := status(t, "VmLck:")
	if p.Locked != (locked > 0) {
		t.Errorf("locked: %v, the kernel says %d KiB", p.Locked, locked)
	}
	if !p.Locked && (len(p.Refusals) != 1 || !strings.Contains(p.Refusals[0].String(), "LimitMEMLOCK")) {
		t.Errorf("refused without a way out: %v", p.Refusals)
	}
	// New memory has to come still, and only what is touched of it.
	block := make([]byte, 64<<20)
	block[1<<20] = 1
	grown := status(t, "VmRSS:") - before
	if grown > 32<<10 {
		t.Errorf("locking took %d KiB of memory", grown)
	}
	t.Logf("%+v; RSS %d KiB, then %d more; locked %d KiB of address space", p, before, grown, locked)
	runtime.KeepAlive(block)
}

// status returns a number of /proc/self/status, in KiB.
func status(t *testing.T, key string) int {
	t.Helper()
	text, err := os.ReadFile("/proc/self/status")
	if err != nil {
		t.Fatal(err)
	}
	for line := range strings.Lines(string(text)) {
		if rest, ok := strings.CutPrefix(line, key); ok {
			n, err := strconv.Atoi(strings.Fields(rest)[0])
			if err != nil {
				t.Fatal(err)
			}
			return n
		}
	}
	t.Fatalf("/proc/self/status has no %s", key)
	return 0
}

package output

/*
#if defined(__SSE__)
#include <xmmintrin.h>
// Flush to zero (bit 15) and denormals are zero (bit 6).
static void flushDenormals(void) { _mm_setcsr(_mm_getcsr() | 0x8040); }
#elif defined(__aarch64__)
static void flushDenormals(void) {
	unsigned long fpcr;
	__asm__ volatile("mrs %0, fpcr" : "=r"(fpcr));
	__asm__ volatile("msr fpcr, %0" : : "r"(fpcr | 1UL << 24));
}
#else
static void flushDenormals(void) {}
#endif
*/
import "C"

import (
	"fmt"
	"math"
	"os"
	"runtime"
	"runtime/debug"
	"runtime/metrics"
	"sync/atomic"

	"golang.org/x/sys/unix"
)

// Refusal is something that the system did not grant.
type Refusal struct {
	What   string // "real-time scheduling" or "memory lock"
	Err    error
	Permit string // the lines that would permit it
}

// String returns one line that says what to do.
func (r Refusal) String() string {
	return fmt.Sprintf("%s refused (%v); to permit it: %s", r.What, r.Err, r.Permit)
}

const (
	permitPriority = `"@audio - rtprio 95" in /etc/security/limits.d/audio.conf with the user in the group audio, or LimitRTPRIO=95 in the systemd unit`
	permitLock     = `"@audio - memlock unlimited" in /etc/security/limits.d/audio.conf with the user in the group audio, or LimitMEMLOCK=infinity in the systemd unit`
)

// Process is what the process was granted for playing in real time.
type Process struct {
	Procs       int   // GOMAXPROCS
	GCPercent   int   // 0 if the user's own setting stands
	MemoryLimit int64 // bytes; 0 if the user's own setting stands
	Locked      bool  // memory, against being paged out
	Refusals    []Refusal
}

const (
	// A callback that enters Go from a C thread waits for a free P. So there are
	// more of them than goroutines that could ever be busy at once.
	spareProcs = 6
	// Steady state allocates next to nothing, so the collector may wait until the
	// heap has grown by this much, or to the memory limit: a quarter of the machine's.
	gcPercent       = 800
	memoryShare     = 4
	memoryLimitMost = 1 << 30 // bytes
)

// PrepareProcess readies the process for callbacks in real time: enough Ps, a quiet
// collector, locked memory. Call it once at the start of playing. GOGC and GOMEMLIMIT stand
// where the user has set them.
func PrepareProcess() Process {
	p := Process{Procs: max(runtime.GOMAXPROCS(0), runtime.NumCPU()+spareProcs)}
	runtime.GOMAXPROCS(p.Procs)
	if os.Getenv("GOGC") == "" {
		p.GCPercent = gcPercent
		debug.SetGCPercent(gcPercent)
	}
	if limit := memoryLimit(); os.Getenv("GOMEMLIMIT") == "" && limit > 0 {
		p.MemoryLimit = limit
		debug.SetMemoryLimit(limit)
	}
	if err := lockMemory(); err != nil {
		p.Refusals = append(p.Refusals, Refusal{"memory lock", err, permitLock})
		return p
	}
	p.Locked = true
	return p
}

// Settle gives back the memory that loading took and no longer needs, and from here on has the
// collector come when the heap has grown by some megabytes, so that a night's
// scraps do not pile up. Call it once all that plays is in memory.
func (p *Process) Settle() {
	const growth = 8 << 20 // bytes
	debug.FreeOSMemory()
	if p.GCPercent == 0 {
		return
	}
	live := []metrics.Sample{{Name: "/gc/heap/live:bytes"}}
	metrics.Read(live)
	p.GCPercent = int(min(gcPercent, 1+growth*100/max(1, live[0].Value.Uint64())))
	debug.SetGCPercent(p.GCPercent)
}

func memoryLimit() int64 {
	var info unix.Sysinfo_t
	if unix.Sysinfo(&info) != nil {
		return 0
	}
	return min(int64(uint64(info.Totalram)*uint64(info.Unit)/memoryShare), memoryLimitMost)
}

// lockMemory locks what is in memory and all that comes, each page when it is first
// touched: Go's arenas and the stacks of threads are reserved far beyond what is
// used, and locked whole they would take hundreds of megabytes.
//
// With a limit the kernel counts those reservations as well, and, worse, fails
// every later mapping beyond it, which would end the process. So it is all or nothing.
func lockMemory() error {
	if limit := raiseLimit(unix.RLIMIT_MEMLOCK); limit != unix.RLIM_INFINITY && !capable(unix.CAP_IPC_LOCK) {
		return fmt.Errorf("no more than %d KiB may be locked", limit>>10)
	}
	return unix.Mlockall(unix.MCL_CURRENT | unix.MCL_FUTURE | unix.MCL_ONFAULT)
}

// raiseLimit raises a soft limit to the hard one and returns it.
func raiseLimit(resource int) uint64 {
	var limit unix.Rlimit
	if unix.Getrlimit(resource, &limit) != nil {
		return 0
	}
	if limit.Cur < limit.Max {
		raised := unix.Rlimit{Cur: limit.Max, Max: limit.Max}
		if unix.Setrlimit(resource, &raised) == nil {
			return raised.Cur
		}
	}
	return limit.Cur
}

func capable(capability uint) bool {
	header := unix.CapUserHeader{Version: unix.LINUX_CAPABILITY_VERSION_3}
	var data [2]unix.CapUserData
	if unix.Capget(&header, &data[0]) != nil {
		return false
	}
	return data[capability/32].Effective&(1<<(capability%32)) != 0
}

// Scheduling is the scheduling class of a callback's thread.
type Scheduling struct {
	Class    string // "fifo", "rr", "deadline", or "other": not in real time. "" if unknown yet
	Priority int    // 1 to 99 in real time
	Given    bool   // by the sound server, not by us
	Refusal  *Refusal
}

// Thread readies the thread that runs the callbacks of a stream when the first of
// them runs.
//
// Besides the scheduling class it has denormal numbers flushed to zero on this thread.
// Strings are retired before they get there; filters that ring out after
// them, which nobody counts, are not. It changes nothing above 1.2e-38, -758 dBFS,
// so that what is played and what is rendered to a file agree in every sample that either
// can hold.
type Thread struct {
	state      atomic.Uint32
	scheduling Scheduling // written by the thread before state says so
	refusal    Refusal
}

const (
	threadNew = iota
	threadEntering
	threadReady
)

// Audio servers run at 70 or above, and the kernel's own threads at 50.
const wantedPriority = 70

// enter is called at the start of each callback; all but the first return at once.
func (t *Thread) enter() {
	if !t.state.CompareAndSwap(threadNew, threadEntering) {
		return
	}
	C.flushDenormals()
	t.scheduling = Scheduling{}
	if !t.find() {
		t.ask()
	}
	t.state.Store(threadReady)
}

// renew makes the next enter ready another thread. Call it while the stream stands.
func (t *Thread) renew() { t.state.Store(threadNew) }

// Scheduling returns what the thread was granted. For any goroutine.
func (t *Thread) Scheduling() Scheduling {
	if t.state.Load() != threadReady {
		return Scheduling{}
	}
	return t.scheduling
}

// find tells whether the thread is real-time already.
func (t *Thread) find() bool {
	attr, err := unix.SchedGetAttr(0, 0)
	if err != nil {
		return false
	}
	t.scheduling.Class = className(attr.Policy)
	t.scheduling.Priority = int(attr.Priority)
	t.scheduling.Given = t.scheduling.Class != "other"
	return t.scheduling.Given
}

func (t *Thread) ask() {
	priority := uint32(wantedPriority)
	if !capable(unix.CAP_SYS_NICE) {
		if limit := raiseLimit(unix.RLIMIT_RTPRIO); limit > 0 && limit < math.MaxInt32 {
			priority = min(priority, uint32(limit))
		}
	}
	err := unix.SchedSetAttr(0, &unix.SchedAttr{
		Size:     unix.SizeofSchedAttr,
		Policy:   unix.SCHED_FIFO,
		Flags:    unix.SCHED_FLAG_RESET_ON_FORK, // no thread inherits it
		Priority: priority,
	}, 0)
	if err != nil {
		t.refusal = Refusal{"real-time scheduling", err, permitPriority}
		t.scheduling = Scheduling{Class: "other", Refusal: &t.refusal}
		return
	}
	t.scheduling = Scheduling{Class: "fifo", Priority: int(priority)}
}

func className(policy uint32) string {
	switch policy {
	case unix.SCHED_FIFO:
		return "fifo"
	case unix.SCHED_RR:
		return "rr"
	case unix.SCHED_DEADLINE:
		return "deadline"
	}
	return "other"
}

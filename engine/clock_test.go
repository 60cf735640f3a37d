package engine

import (
	"testing"

	"golang.org/x/sys/unix"
)

func TestNowIsTheKernelsMonotonicClock(t *testing.T) {
	kernel := func() int64 {
		var ts unix.Timespec
		if err := unix.ClockGettime(unix.CLOCK_MONOTONIC, &ts); err != nil {
			t.Fatal(err)
		}
		return ts.Nano()
	}
	for range 100 {
		before := kernel()
		now := Now()
		after := kernel()
		if now < before || now > after {
			t.Fatalf("Now() = %d, outside of the kernel's %d to %d", now, before, after)
		}
	}
	if n := testing.AllocsPerRun(100, func() { Now() }); n != 0 {
		t.Errorf("Now allocates %v times", n)
	}
}

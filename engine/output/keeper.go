package output

import (
	"context"
	"fmt"
	"sync"
	"time"

	"tautwire/engine"
)

// stream is what a keeper keeps running: the part of an output that comes and goes.
type stream interface {
	// open starts the callbacks.
	open() error
	// close ends them; none runs after. A lost stream's device answers no more.
	close(lost bool) error
	// gone tells that the device is known to be gone, before its silence shows it.
	gone() bool
}

// keeper watches a stream from outside of its callbacks: it starts it anew after a
// panic, and waits for its device when that is lost. While it waits the instrument plays
// on unheard, so that keys let go meanwhile don't sound when the device comes back.
type keeper struct {
	stream stream
	player *engine.Player
	device string
	rate   int // Hz
	period int // frames
	tell   func(Notice)

	cancel context.CancelFunc
	done   sync.WaitGroup
	opened bool // of the watching goroutine, and of stop after it has ended
}

const (
	watchEvery = 20 * time.Millisecond
	// A device that has not called for so long, or for 8 periods, is lost.
	patience = time.Second
	backoff  = time.Second
	// Stop gives a device up after this.
	stopWithin = 800 * time.Millisecond
)

func (k *keeper) start() error {
	if k.cancel != nil {
		return fmt.Errorf("output %s: it has been started before; open another one", k.device)
	}
	k.player.Begin()
	if err := k.stream.open(); err != nil {
		return err
	}
	k.opened = true
	ctx, cancel := context.WithCancel(context.Background())
	k.cancel = cancel
	k.done.Go(func() { k.watch(ctx) })
	return nil
}

func (k *keeper) stop() error {
	if k.cancel == nil {
		return nil
	}
	k.cancel()
	ended := make(chan error, 1)
	go func() {
		k.done.Wait()
		if !k.opened {
			ended <- nil
			return
		}
		k.opened = false
		ended <- k.stream.close(false)
	}()
	select {
	case err := <-ended:
		return err
	case <-time.After(stopWithin):
		return fmt.Errorf("output %s: the device did not stop within %v; it was given up", k.device, stopWithin)
	}
}

func (k *keeper) watch(ctx context.Context) {
	tick := time.NewTicker(watchEvery)
	defer tick.Stop()
	periods, last := k.player.Periods(), time.Now()
	silent := false
	for {
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
		}
		if n := k.player.Periods(); n != periods {
			periods, last = n, time.Now()
		}
		failed, final := k.player.Failed()
		switch {
		case final && !silent:
			silent = true
			reason, stack := k.player.Failure()
			k.tell(Notice{Happening: SilentForGood, Device: k.device, Reason: reason, Stack: stack})
		case failed && !final:
			k.restart(ctx, last)
			last = time.Now()
		case k.stream.gone() || time.Since(last) > k.patience():
			k.regain(ctx, last, nil)
			last = time.Now()
		}
	}
}

func (k *keeper) patience() time.Duration {
	return max(patience, 8*time.Duration(k.period)*time.Second/time.Duration(k.rate))
}

// restart follows a panic.
func (k *keeper) restart(ctx context.Context, last time.Time) {
	reason, kept := k.player.Failure()
	stack := append([]byte(nil), kept...)
	begin := time.Now()
	err := k.close(false)
	k.player.Restart()
	if err == nil {
		err = k.open()
	}
	k.tell(Notice{Happening: Restarted, Device: k.device, Took: time.Since(begin), Reason: reason, Stack: stack})
	if err != nil {
		k.regain(ctx, last, err)
	}
}

// regain waits for a lost device until it plays or ctx ends.
func (k *keeper) regain(ctx context.Context, last time.Time, cause error) {
	k.tell(Notice{Happening: Lost, Device: k.device, Err: cause})
	if k.opened {
		k.close(true)
	}
	told := ""
	for {
		k.playUnheard(ctx, backoff)
		if ctx.Err() != nil {
			return
		}
		err := k.open()
		if err == nil {
			k.tell(Notice{Happening: Regained, Device: k.device, Took: time.Since(last)})
			return
		}
		if err.Error() != told {
			told = err.Error()
			k.tell(Notice{Happening: Lost, Device: k.device, Err: err})
		}
	}
}

func (k *keeper) open() error {
	k.player.Begin()
	err := k.stream.open()
	k.opened = err == nil
	return err
}

func (k *keeper) close(lost bool) error {
	k.opened = false
	return k.stream.close(lost)
}

func (k *keeper) playUnheard(ctx context.Context, span time.Duration) {
	k.player.Begin()
	out := make([]float32, 2*k.period)
	length := time.Duration(k.period) * time.Second / time.Duration(k.rate)
	begin := time.Now()
	for played := time.Duration(0); played < span && ctx.Err() == nil; {
		for played < time.Since(begin) {
			k.player.Period(out, engine.Unheard)
			played += length
		}
		time.Sleep(max(length, 5*time.Millisecond))
	}
}

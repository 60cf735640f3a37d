package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"strings"
	"sync"
	"time"

	"github.com/rs/zerolog"

	"tautwire/midiin"
)

// sourceRetry is how long a source that failed is left alone.
const sourceRetry = 2 * time.Second

// keyboards are all that may play: the sequencer's ports and byte streams.
type keyboards struct {
	names   []string // parts of the sequencer's port names; none is every port
	paths   []string // of byte streams
	journal *journal
	verbose bool
}

// newKeyboards sorts inputs into names and paths. None is every keyboard of the
// sequencer.
//
// # Errors
//
// A path that live bytes can never come from.
func newKeyboards(inputs []string, j *journal, verbose bool) (*keyboards, error) {
	k := &keyboards{journal: j, verbose: verbose}
	for _, input := range inputs {
		info, err := os.Stat(input)
		switch {
		case err == nil && (info.IsDir() || info.Mode().IsRegular()):
			return nil, fmt.Errorf("MIDI input %s is no stream of bytes; name a FIFO, a terminal, a device such as /dev/snd/midiC1D0, or a keyboard as `tautwire devices` lists it", input)
		case err == nil, strings.Contains(input, "/"):
			k.paths = append(k.paths, input)
		default:
			k.names = append(k.names, input)
		}
	}
	return k, nil
}

// run listens until ctx ends. Sources that fail are tried again; none is ever a
// reason not to play.
func (k *keyboards) run(ctx context.Context, out *midiin.Merger) {
	var all sync.WaitGroup
	for _, path := range k.paths {
		all.Go(func() { k.keep(ctx, midiin.NewStream(path, k.report), out) })
	}
	if len(k.paths) == 0 || len(k.names) > 0 {
		all.Go(func() { k.sequencer(ctx, out) })
	}
	all.Wait()
}

func (k *keyboards) keep(ctx context.Context, s midiin.Source, out *midiin.Merger) {
	for ctx.Err() == nil {
		err := s.Run(ctx, out)
		if err != nil && ctx.Err() == nil {
			k.journal.tell(zerolog.WarnLevel, "port").Str("what", "failed").Str("port", s.Name()).Err(err).
				Msgf("%v; tried again", err)
		}
		pause(ctx, sourceRetry)
	}
}

// sequencer keeps a client of the ALSA sequencer, from when there is one.
func (k *keyboards) sequencer(ctx context.Context, out *midiin.Merger) {
	said := ""
	for ctx.Err() == nil {
		s, err := midiin.OpenSequencer(midiin.SequencerOptions{Inputs: k.names, Report: k.report, Verbose: k.verbose})
		if err == nil {
			said = ""
			k.journal.tell(zerolog.InfoLevel, "port").Str("what", "open").Str("port", s.Name()).
				Msgf("Listening to %s on the %s", k.wanted(), s.Name())
			err = s.Run(ctx, out)
			s.Close()
		}
		if err != nil && err.Error() != said {
			said = err.Error()
			k.journal.tell(zerolog.WarnLevel, "port").Str("what", "failed").Err(err).Msg(said)
		}
		pause(ctx, sourceRetry)
	}
}

func (k *keyboards) wanted() string {
	if len(k.names) == 0 {
		return "every keyboard"
	}
	return "keyboards with " + strings.Join(k.names, " or ") + " in their name"
}

// report tells of a port that came or went.
func (k *keyboards) report(r midiin.Record) {
	level := zerolog.InfoLevel
	var says string
	switch r.Change {
	case midiin.Plugged:
		says = r.Name + " plays"
	case midiin.Lost:
		says = r.Name + " is gone; its notes are let go"
	case midiin.Waiting:
		level = zerolog.WarnLevel
		says = fmt.Sprintf("%v; waiting for it", r.Err)
		if errors.Is(r.Err, os.ErrNotExist) {
			says = r.Name + " is not there yet; waiting for it"
		}
	}
	k.journal.tell(level, "port").
		Str("what", string(r.Change)).
		Str("port", r.Name).
		Float64("took_us", microseconds(r.Took.Nanoseconds())).
		Err(r.Err).
		Msg(says)
}

// pause waits for d, or less where ctx ends.
func pause(ctx context.Context, d time.Duration) {
	timer := time.NewTimer(d)
	defer timer.Stop()
	select {
	case <-timer.C:
	case <-ctx.Done():
	}
}

//go:build !linux || !cgo

package midiin

import "context"

// Sequencer is what a system without the ALSA sequencer has of it: nothing.
type Sequencer struct{}

// OpenSequencer always gives ErrNoSequencer.
func OpenSequencer(SequencerOptions) (*Sequencer, error) { return nil, ErrNoSequencer }

// Close does nothing.
func (s *Sequencer) Close() error { return nil }

// Name is empty.
func (s *Sequencer) Name() string { return "" }

// Ports is empty.
func (s *Sequencer) Ports() []PortInfo { return nil }

// Run gives ErrNoSequencer.
func (s *Sequencer) Run(context.Context, *Merger) error { return ErrNoSequencer }

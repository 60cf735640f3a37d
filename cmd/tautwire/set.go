package main

import (
	"fmt"

	"github.com/rs/zerolog"

	"tautwire/config"
	"tautwire/engine"
)

// set is what a player goes through by Program Change: patches compiled at the
// start, so that taking another is an exchange of a pointer.
type set struct {
	patches  []*config.Patch
	compiled []*engine.Compiled
}

// compile makes the patches ready for a rate in Hz. A patch that stands twice
// is compiled once.
func compile(patches []*config.Patch, rate int) (*set, error) {
	s := &set{patches: patches}
	met := map[*config.Patch]*engine.Compiled{}
	for _, p := range patches {
		c := met[p]
		if c == nil {
			var err error
			if c, err = engine.Compile(p, rate); err != nil {
				return nil, err
			}
			met[p] = c
		}
		s.compiled = append(s.compiled, c)
	}
	return s, nil
}

// take has the engine play the n-th patch, counted from 0, and tells whether
// there is one. It never waits. A number that the set has not changes nothing.
func (s *set) take(n int, e *engine.Engine) bool {
	if n < 0 || n >= len(s.compiled) {
		return false
	}
	e.Swap(s.compiled[n])
	return true
}

// tell says what became of a Program Change.
func (s *set) tell(c change, j *journal) {
	if !c.taken {
		j.tell(zerolog.WarnLevel, "patch").
			Str("what", "unknown").
			Int("program", c.program+1).
			Msgf("Program Change %d, but the set has %s; nothing changes", c.program+1, plural(len(s.compiled), "patch"))
		return
	}
	p := s.patches[c.program]
	j.tell(zerolog.InfoLevel, "patch").
		Str("what", "swapped").
		Str("patch", p.Path).
		Int("program", c.program+1).
		Float64("took_us", microseconds(c.took)).
		Msgf("Patch %d: %s", c.program+1, p.Title)
}

// change is a Program Change that came.
type change struct {
	program int // counted from 0
	taken   bool
	took    int64 // ns
}

// builtins are all the patches that come with the program, the default first.
func builtins() ([]*config.Patch, error) {
	names := []string{config.DefaultPatch}
	for _, name := range config.Builtins() {
		if name != config.DefaultPatch {
			names = append(names, name)
		}
	}
	var patches []*config.Patch
	for _, name := range names {
		p, err := config.LoadPatch(name)
		if err != nil {
			return nil, fmt.Errorf("built-in patch: %w", err)
		}
		patches = append(patches, p)
	}
	return patches, nil
}

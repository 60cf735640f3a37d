package main

import (
	"context"
	"fmt"
	"runtime"
	"sync"

	"github.com/rs/zerolog"
	"golang.org/x/sys/unix"

	"tautwire/config"
	"tautwire/engine"
)

// set is what a player goes through by Program Change. The patch to
// begin with is compiled before anything sounds; the others while it plays already, so that
// taking one is an exchange of a pointer.
type set struct {
	patches  []*config.Patch
	compiler *engine.Compiler
	swap     func(*engine.Compiled)
	tell     func(change)

	mu       sync.Mutex // of keyboards and the compiling goroutine; no callback takes it
	compiled map[*config.Patch]*engine.Compiled
	waiting  *change // for its patch to be compiled
}

// change is a Program Change that came.
type change struct {
	program int  // counted from 0
	known   bool // the set has it
	asked   int64
	took    int64 // ns, until it was swapped
}

// newSet compiles the patch to begin with, which need not be of the set, for a
// rate in Hz. Later, swap is called with what is taken, and tell with what became
// of each change.
func newSet(first *config.Patch, patches []*config.Patch, rate int, tell func(change)) (*set, *engine.Compiled, error) {
	compiler, err := engine.NewCompiler(rate)
	if err != nil {
		return nil, nil, err
	}
	s := &set{patches: patches, compiler: compiler, tell: tell, compiled: map[*config.Patch]*engine.Compiled{}}
	c, err := compiler.Compile(first)
	if err != nil {
		return nil, nil, err
	}
	s.compiled[first] = c
	return s, c, nil
}

// compileRest compiles the other patches, on a thread that gives way to all
// others. What can't be compiled is told and stays out of the set.
func (s *set) compileRest(ctx context.Context) error {
	runtime.LockOSThread() // for good: the thread, and its niceness, end with the goroutine
	const giveWay = 10
	unix.Setpriority(unix.PRIO_PROCESS, 0, giveWay)
	for _, p := range s.patches {
		if ctx.Err() != nil {
			return nil
		}
		if s.have(p) != nil {
			continue
		}
		c, err := s.compiler.Compile(p)
		if err != nil {
			return err
		}
		s.arrived(p, c)
	}
	return nil
}

func (s *set) have(p *config.Patch) *engine.Compiled {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.compiled[p]
}

// arrived keeps a compiled patch, and takes it where it is waited for.
func (s *set) arrived(p *config.Patch, c *engine.Compiled) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.compiled[p] = c
	if w := s.waiting; w != nil && s.patches[w.program] == p {
		s.exchange(*w, c)
	}
}

// take has the n-th patch play, counted from 0; one that is still being compiled
// plays as soon as it can. A number that the set has not changes nothing.
func (s *set) take(n int) {
	c := change{program: n, known: n >= 0 && n < len(s.patches), asked: engine.Now()}
	if !c.known {
		s.tell(c)
		return
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if compiled := s.compiled[s.patches[n]]; compiled != nil {
		s.exchange(c, compiled)
		return
	}
	s.waiting = &c
}

func (s *set) exchange(c change, to *engine.Compiled) {
	s.waiting = nil
	s.swap(to)
	c.took = engine.Now() - c.asked
	s.tell(c)
}

// log says what became of a Program Change.
func (s *set) log(c change, j *journal) {
	if !c.known {
		j.tell(zerolog.WarnLevel, "patch").
			Str("what", "unknown").
			Int("program", c.program+1).
			Msgf("Program Change %d, but the set has %s; nothing changes", c.program+1, plural(len(s.patches), "patch"))
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

package main

import (
	"testing"

	"tautwire/config"
	"tautwire/engine"
)

// TestSet: a Program Change to a patch that is still being compiled is carried out
// once it is there; of several that wait, the last one counts; and a number that
// the set has not changes nothing.
func TestSet(t *testing.T) {
	var patches []*config.Patch
	for _, name := range []string{"lamp-room", "keepers-gut", "bell-buoy"} {
		p, err := config.LoadPatch(name)
		if err != nil {
			t.Fatal(err)
		}
		patches = append(patches, p)
	}
	var swapped []string
	var told []change
	s, first, err := newSet(patches[0], patches, 48000, func(c change) { told = append(told, c) })
	if err != nil {
		t.Fatal(err)
	}
	if first.Title() != patches[0].Title {
		t.Errorf("it begins with %q", first.Title())
	}
	s.swap = func(c *engine.Compiled) { swapped = append(swapped, c.Title()) }
	s.take(1)
	s.take(2)
	s.take(3)
	s.take(-1)
	if len(swapped) != 0 || len(told) != 2 || told[0].known || told[1].known {
		t.Fatalf("before anything is compiled, %q is taken and %+v told", swapped, told)
	}
	done := make(chan error)
	go func() { done <- s.compileRest(t.Context()) }()
	if err := <-done; err != nil {
		t.Fatal(err)
	}
	s.take(1)
	s.take(0)
	want := []string{patches[2].Title, patches[1].Title, patches[0].Title}
	if len(swapped) != len(want) || swapped[0] != want[0] || swapped[1] != want[1] || swapped[2] != want[2] {
		t.Errorf("%q are taken, want %q", swapped, want)
	}
	if len(told) != 5 || !told[2].known || told[2].program != 2 {
		t.Errorf("told is %+v", told)
	}
}

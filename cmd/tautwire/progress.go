package main

import (
	"fmt"
	"io"
	"time"
)

// progressEvery is how often a progress line is drawn anew.
const progressEvery = 200 * time.Millisecond

// progress tells on a terminal how far long work is. A nil progress tells nothing.
type progress struct {
	w              io.Writer
	what           string
	whole, reached float64
	drawn          time.Time
	shown          bool
}

// newProgress gives nil where w is no terminal or there is no end to know.
func newProgress(w io.Writer, what string, whole float64) *progress {
	if !isTerminal(w) || whole <= 0 {
		return nil
	}
	return &progress{w: w, what: what, whole: whole, drawn: time.Now()}
}

func (p *progress) add(amount float64) {
	if p == nil {
		return
	}
	p.reached += amount
	if now := time.Now(); now.Sub(p.drawn) >= progressEvery {
		p.drawn, p.shown = now, true
		fmt.Fprintf(p.w, "\r%s: %3.0f %%", p.what, 100*min(1, p.reached/p.whole))
	}
}

// done clears the line.
func (p *progress) done() {
	if p != nil && p.shown {
		fmt.Fprint(p.w, "\r\x1b[K")
	}
}

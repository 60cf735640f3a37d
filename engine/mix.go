package engine

// mix renders n frames up to e.frame, which lie within one step of the grid, into left and right.
func (e *Engine) mix(n int) {
	left, right := e.left[:n], e.right[:n]
	at := e.place() - n
	ramp := e.ramp[at : at+n]
	pool := e.strings.pool
	pool.Advance(at + n)
	pool.Sum(left, right, at)
	if !allSane(left) || !allSane(right) {
		e.cure(at, n)
		pool.Sum(left, right, at)
		e.scrub(left)
		e.scrub(right)
	}
	if e.sympathy.needed(e.stage.patch) {
		e.resonate(left, right, at)
	}
	e.change.process(e.stage.body, left, right, ramp)
	e.master.process(left, right, ramp)
}

// place is where e.frame is in the step of the grid that ends with it or around it.
func (e *Engine) place() int { return int((e.frame-1)%int64(len(e.ramp))) + 1 }

// resonate adds what sounds in sympathy.
func (e *Engine) resonate(left, right []float32, at int) {
	e.sympathy.hear(left, right)
	for _, index := range e.strings.live {
		s := &e.strings.slots[index]
		e.sympathy.leaveOut(s.key, s.voice, at, len(left))
	}
	e.sympathy.add(left, right, at)
}

// cure takes strings off whose numbers have run away in the last n frames; they are retired
// on the grid.
func (e *Engine) cure(at, n int) {
	out := e.sympathy.out[:n]
	for _, index := range e.strings.live {
		s := &e.strings.slots[index]
		clear(out)
		s.voice.Bridge(out, at)
		if !allSane(out) {
			s.wild = true
			s.voice.Reset()
		}
	}
	e.strings.pool.Again(at)
}

// scrub keeps from the body, which would never forget it, what is still no number.
func (e *Engine) scrub(x []float32) {
	for i, v := range x {
		if v-v != 0 {
			x[i] = 0
			e.counts.cured.Add(1)
		}
	}
}

// insane is the amplitude beyond which a string has run away: +80 dBFS.
const insane = 1e4

// sane reports whether x is a number of a reasonable size.
func sane(x float64) bool { return x < insane && x > -insane }

func allSane(x []float32) bool {
	for _, v := range x {
		if !sane(float64(v)) {
			return false
		}
	}
	return true
}

package engine

// mix renders n frames, which cross neither an event nor a multiple of voice.Grid,
// into left and right.
func (e *Engine) mix(n int) {
	left, right := e.left[:n], e.right[:n]
	at := int(e.frame % int64(len(e.ramp)))
	ramp := e.ramp[at : at+n]
	for _, index := range e.strings.live {
		s := &e.strings.slots[index]
		s.voice.Render(s.out[:n], nil)
	}
	e.sum(left, right, ramp)
	if !allSane(left) || !allSane(right) {
		e.cure(n)
		e.sum(left, right, ramp)
		e.scrub(left)
		e.scrub(right)
	}
	if e.sympathy.needed(e.stage.patch) {
		e.resonate(left, right, ramp)
	}
	e.change.process(e.stage.body, left, right, ramp)
	e.master.process(left, right, ramp)
}

// sum adds the strings in the order of their strokes.
func (e *Engine) sum(left, right, ramp []float32) {
	clear(left)
	clear(right)
	for _, index := range e.strings.live {
		s := &e.strings.slots[index]
		out := s.out[:len(left)]
		if s.from == s.to {
			addSteady(left, right, out, s.to)
		} else {
			addMoving(left, right, out, ramp, s.from, s.to)
		}
	}
}

func addSteady(left, right, out []float32, g gains) {
	left, right = left[:len(out)], right[:len(out)]
	for i, y := range out {
		left[i] += float32(y * g.left)
		right[i] += float32(y * g.right)
	}
}

func addMoving(left, right, out, ramp []float32, from, to gains) {
	left, right, ramp = left[:len(out)], right[:len(out)], ramp[:len(out)]
	stepLeft, stepRight := to.left-from.left, to.right-from.right
	for i, y := range out {
		left[i] += float32(y * (from.left + float32(stepLeft*ramp[i])))
		right[i] += float32(y * (from.right + float32(stepRight*ramp[i])))
	}
}

// resonate adds what sounds in sympathy.
func (e *Engine) resonate(left, right, ramp []float32) {
	for _, index := range e.strings.live {
		s := &e.strings.slots[index]
		e.sympathy.hear(s.key, s.out[:len(left)], s.from.bridge, s.to.bridge, ramp)
	}
	e.sympathy.add(left, right, ramp)
}

// cure silences the frames of strings whose numbers have run away; the string itself
// is retired on the grid.
func (e *Engine) cure(n int) {
	for _, index := range e.strings.live {
		s := &e.strings.slots[index]
		for i, y := range s.out[:n] {
			if !sane(float64(y)) {
				s.out[i] = 0
				s.wild = true
			}
		}
	}
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

package engine

import "tautwire/voice"

// sympathy is the sounding along of undamped strings: those of held keys, and
// those of all the patch's keys while the damper pedal is down. Each is
// driven by the bridge's motion less its own key's part, for what that does is the
// played string's own sound. What they sound goes to the mix and never back to
// the bridge, so no gain can make them unstable.
//
// It is bounded: one string a key, from lowestSympathy to highestSympathy, and those
// that are silent on a bridge at rest are not computed.
type sympathy struct {
	pool    *voice.Pool
	strings [highestSympathy - lowestSympathy + 1]sympathetic
	live    int // strings that are computed

	bridge [voice.Grid]float32                                       // the motion of all played strings
	own    [highestSympathy - lowestSympathy + 1][voice.Grid]float32 // each key's part in it
	owned  [highestSympathy - lowestSympathy + 1]bool                // whether own holds anything
	drive  [voice.Grid]float32
	out    [voice.Grid]float32
	left   [voice.Grid]float32
	right  [voice.Grid]float32
	peak   float32 // of the bridge since the last step
	tuning [128]float64
}

const (
	// The keys of a piano. Lower ones hardly speak through a bridge, higher ones
	// have no dampers there.
	lowestSympathy  = 21
	highestSympathy = 108
	// lowestDriven is how low a sympathetic string can sound, Hz; several of a
	// course share the room.
	lowestDriven = 6
	// A bridge below this moves nothing that could be heard: -120 dBFS.
	bridgeAtRest = 1e-6
	// sympathySoftening is the part of the way that a damper goes per step of the grid
	// in lifting off the bridge's motion, so that neither end of it clicks.
	sympathySoftening = 0.1
)

// sympathetic is one key's string.
type sympathetic struct {
	voice        *voice.Voice
	patch        *Compiled
	live, fading bool
	damp, cents  float64
	from, to     float32 // coupling at the start and the end of the step
}

func (s *sympathy) init(maker *voice.Maker) {
	s.pool = maker.NewPool(len(s.strings), lowestDriven)
	for i := range s.strings {
		s.strings[i].voice = s.pool.Voice(i)
	}
	for key := range s.tuning {
		s.tuning[key] = -1
	}
}

func (s *sympathy) reset() {
	for i := range s.strings {
		s.strings[i].stop()
	}
	s.live, s.peak = 0, 0
	clear(s.owned[:])
}

// silence fades all strings within 2 ms.
func (s *sympathy) silence() {
	for i := range s.strings {
		s.strings[i].fade()
	}
}

func (s *sympathy) needed(patch *Compiled) bool { return patch.resonance > 0 || s.live > 0 }

// step wakes, damps and retires strings, on a multiple of voice.Grid.
func (s *sympathy) step(channels *[16]channel, patch *Compiled, pan *panTable) {
	if !s.needed(patch) {
		return
	}
	pedal := 0.0
	var held keySet
	for i := range channels {
		c := &channels[i]
		pedal = max(pedal, c.damper)
		for half := range held {
			held[half] |= c.down[half] | c.caught[half]
		}
	}
	moving := s.peak > bridgeAtRest
	s.peak = 0
	s.live = 0
	for i := range s.strings {
		key := uint8(lowestSympathy + i)
		lifted := pedal
		if held.has(key) {
			lifted = 1
		}
		s.strings[i].step(key, lifted, moving, patch, pan)
		if s.strings[i].live {
			s.strings[i].tune(key, s.tuning[key])
			s.live++
		}
	}
	s.pool.Step()
}

func (s *sympathetic) step(key uint8, lifted float64, moving bool, patch *Compiled, pan *panTable) {
	own := &patch.keys[key]
	if !s.live {
		if lifted == 0 || !moving || own.coupling == 0 {
			return
		}
		s.start(own, patch, pan)
	}
	s.from = s.to
	if s.patch != patch {
		s.fade()
	}
	// A string that fades is driven on as it was: to stop that would click.
	if !s.fading {
		s.to += float32(sympathySoftening * (float32(own.coupling*float32(lifted)) - s.to))
		if damp := (1 - lifted) * (1 - lifted); damp != s.damp {
			s.damp = damp
			s.voice.Damp(damp)
		}
	}
	driven := moving && !s.fading && (lifted > 0 || s.to > own.coupling*1e-3)
	if s.voice.Silent() && !driven || !sane(s.voice.Energy()) {
		s.stop()
	}
}

// start lays the string ready without a stroke.
func (s *sympathetic) start(own *compiledKey, patch *Compiled, pan *panTable) {
	s.voice.Fit(own.single)
	s.patch, s.live, s.fading = patch, true, false
	s.damp, s.cents, s.from, s.to = 0, 0, 0, 0
	left, right := pan.gains(0.5 + own.pan)
	gain := voice.Gain{Left: left, Right: right}
	s.voice.Mix(gain, gain)
}

func (s *sympathetic) fade() {
	if s.live && !s.fading {
		s.fading = true
		s.voice.Fade()
	}
}

func (s *sympathetic) stop() {
	if s.live {
		s.voice.Reset()
	}
	s.patch, s.live, s.fading = nil, false, false
	s.from, s.to = 0, 0
}

func (s *sympathetic) tune(key uint8, tuning float64) {
	cents := 0.0
	if tuning >= 0 {
		cents = 100 * (tuning - s.patch.keys[key].pitch)
	}
	if cents != s.cents {
		s.cents = cents
		s.voice.Tune(cents)
	}
}

// hear takes the bridge's motion from the mix of the played strings.
func (s *sympathy) hear(left, right []float32) {
	right = right[:len(left)]
	bridge := s.bridge[:len(left)]
	for i, x := range left {
		bridge[i] = float32((x + right[i]) * voice.BridgeGain)
		s.peak = max(s.peak, abs(bridge[i]))
	}
}

// leaveOut keeps from a key's own string what a voice of the key gave to the bridge in n frames from
// a frame of the step on.
func (s *sympathy) leaveOut(key uint8, v *voice.Voice, at, n int) {
	if key < lowestSympathy || key > highestSympathy || !s.strings[key-lowestSympathy].live {
		return
	}
	own := s.own[key-lowestSympathy][:n]
	if !s.owned[key-lowestSympathy] {
		s.owned[key-lowestSympathy] = true
		clear(own)
	}
	v.Bridge(own, at)
}

// add sounds the strings along and adds them to the mix, from a frame of the step on.
func (s *sympathy) add(left, right []float32, at int) {
	n := len(left)
	if s.live > 0 {
		for i := range s.strings {
			if s.strings[i].live {
				s.push(i, at, n)
			}
		}
		s.pool.Advance(at + n)
		s.pool.Sum(s.left[:n], s.right[:n], at)
		if !allSane(s.left[:n]) || !allSane(s.right[:n]) {
			s.cure(at, n)
		}
		for i := range left {
			left[i] += s.left[i]
			right[i] += s.right[i]
		}
	}
	clear(s.owned[:])
}

// push drives a string with the bridge's motion, but for its own key's part.
func (s *sympathy) push(i, at, n int) {
	string := &s.strings[i]
	bridge, drive := s.bridge[:n], s.drive[:n]
	step := (string.to - string.from) / voice.Grid
	gain := func(k int) float32 { return string.from + float32(step*float32(at+k)) }
	if s.owned[i] {
		own := s.own[i][:n]
		for k, x := range bridge {
			drive[k] = (x - own[k]) * gain(k)
		}
	} else {
		for k, x := range bridge {
			drive[k] = x * gain(k)
		}
	}
	string.voice.Push(at, drive)
}

// cure silences strings whose numbers have run away.
func (s *sympathy) cure(at, n int) {
	out := s.out[:n]
	for i := range s.strings {
		if !s.strings[i].live {
			continue
		}
		clear(out)
		s.strings[i].voice.Bridge(out, at)
		if !allSane(out) {
			s.strings[i].stop()
		}
	}
	s.pool.Again(at)
	s.pool.Sum(s.left[:n], s.right[:n], at)
}

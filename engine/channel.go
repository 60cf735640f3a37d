package engine

import "math"

// Controller numbers of MIDI 1.0, Detailed Specification 4.2, table 3.
const (
	controlModulation = 1
	controlVolume     = 7
	controlPan        = 10
	controlExpression = 11
	controlDamper     = 64
	controlSostenuto  = 66
	controlSoft       = 67
	controlBrightness = 74

	controlAllSoundOff = 120
	controlReset       = 121
	controlAllNotesOff = 123 // to 127: mode messages release all notes as well
)

const (
	volumeAtStart = 100 // MIDI 1.0's recommended practice, in RP-024 as well
	panAtStart    = 64
	fullValue     = 127

	vibratoRate  = 5.5  // Hz
	vibratoDepth = 50.0 // cents either way, at 127

	// A soft pedal takes this part of the velocity, and adds this much darkness.
	softVelocity = 0.3
	softDarkness = 0.3
)

// channel is what one MIDI channel's controllers and keys say now.
type channel struct {
	volume, expression float32 // 0 to 127
	gain               glide   // of both
	place              glide   // 0 left to 1 right

	modulation, pressure float32 // 0 to 127
	depth                glide   // of the vibrato, cents

	bend, shift float64 // semitones
	damper      float64 // 0 up to 1 down
	sostenuto   bool
	soft        float64 // 0 to 1
	darkness    float64 // 0 to 1
	mute, node  float64 // 0 to 1

	down   keySet // keys that are held
	caught keySet // keys that the sostenuto pedal holds

	keyPressure [128]float32 // 0 to 127
	// fall is how firmly the damper falls on each key that was let go: 1 is the
	// patch's own release, 2 twice as fast.
	fall [128]float32
	// tuning is each key's pitch in semitones above key 0; negative is the patch's.
	tuning [128]float32
	// string is the slot that sounds each key, or none.
	string [128]int16
}

// keySet is a set of keys.
type keySet [2]uint64

func (s *keySet) add(key uint8)      { s[key>>6] |= 1 << (key & 63) }
func (s *keySet) remove(key uint8)   { s[key>>6] &^= 1 << (key & 63) }
func (s *keySet) has(key uint8) bool { return s[key>>6]>>(key&63)&1 != 0 }
func (s *keySet) clear()             { *s = keySet{} }

func (c *channel) init() {
	c.volume, c.expression = volumeAtStart, fullValue
	c.place.jump(panPlace(panAtStart))
	c.setGain()
	c.gain.jump(c.gain.target)
	for key := range c.string {
		c.string[key] = none
		c.tuning[key] = -1
		c.fall[key] = 1
	}
}

// setGain follows General MIDI 2 (RP-024, 3.3.4 and 3.3.5): 40 log10(value/127) dB each.
func (c *channel) setGain() {
	x := float64(c.volume) / fullValue * float64(c.expression) / fullValue
	c.gain.target = x * x
}

func (c *channel) setDepth() {
	c.depth.target = vibratoDepth * min(1, float64(c.modulation+c.pressure)/fullValue)
}

func (c *channel) control(number uint8, value float32, patch *Compiled) {
	value = min(max(value, 0), fullValue)
	switch number {
	case controlModulation:
		c.modulation = value
		c.setDepth()
	case controlVolume:
		c.volume = value
		c.setGain()
	case controlExpression:
		c.expression = value
		c.setGain()
	case controlPan:
		c.place.target = panPlace(value)
	case controlDamper:
		c.damper = float64(value) / fullValue
	case controlSostenuto:
		c.setSostenuto(value >= 64)
	case controlSoft:
		c.soft = float64(value) / fullValue
	case controlBrightness:
		c.darkness = max(0, (64-float64(value))/64)
	default:
		c.gesture(int(number), float64(value)/fullValue, patch)
	}
}

// gesture answers the controllers that the patch names.
func (c *channel) gesture(number int, amount float64, patch *Compiled) {
	switch number {
	case patch.controls.Mute:
		c.mute = amount
	case patch.controls.Node:
		c.node = amount
	}
}

func (c *channel) setSostenuto(on bool) {
	if on && !c.sostenuto {
		c.caught = c.down
	}
	if !on {
		c.caught.clear()
	}
	c.sostenuto = on
}

// release notes how a key was let go. A release velocity of 64 is the patch's own
// release, and so is 0, which keyboards send that do not measure it.
func (c *channel) release(key uint8, velocity float32) {
	c.down.remove(key)
	c.fall[key] = 1
	if velocity > 0 {
		c.fall[key] = gentlestFall + (1-gentlestFall)*min(velocity, fullValue)/64
	}
}

// gentlestFall is how firmly the damper falls on a key that is let go very slowly.
const gentlestFall = 0.25

func (c *channel) releaseAll() {
	c.down.clear()
	for key := range c.fall {
		c.fall[key] = 1
	}
}

// reset answers RP-015, Response to Reset All Controllers: volume, pan, program and
// the sound controllers stay. The patch's own gestures are let go like modulation.
func (c *channel) reset() {
	c.expression, c.modulation, c.pressure = fullValue, 0, 0
	c.setGain()
	c.setDepth()
	clear(c.keyPressure[:])
	c.bend, c.damper, c.soft, c.mute, c.node = 0, 0, 0, 0, 0
	c.setSostenuto(false)
}

// undamped reports whether the key itself or the sostenuto holds its damper up.
func (c *channel) undamped(key uint8) bool { return c.down.has(key) || c.caught.has(key) }

// damping is the amount of a key's damper that is on its string: 0 none, 1 the patch's
// release. The pedal lifts it by degrees; the square gives the felt's last touch more of the way.
func (c *channel) damping(key uint8) float64 {
	if c.undamped(key) {
		return 0
	}
	up := 1 - c.damper
	return up * up * float64(c.fall[key])
}

// cents is the pitch of a key from the patch's own, without vibrato.
func (c *channel) cents(key uint8, own float64) float64 {
	cents := float64(100 * (c.bend + c.shift))
	if c.tuning[key] >= 0 {
		cents += float64(100 * (float64(c.tuning[key]) - own))
	}
	return cents
}

// keyDepth is the vibrato of one key, cents either way.
func (c *channel) keyDepth(key uint8) float64 {
	if c.keyPressure[key] == 0 {
		return c.depth.value
	}
	return min(vibratoDepth, c.depth.value+vibratoDepth*float64(c.keyPressure[key])/fullValue)
}

// step moves what glides by one step of the grid.
func (c *channel) step(coefficient float64) {
	c.gain.step(coefficient)
	c.place.step(coefficient)
	c.depth.step(coefficient)
}

// vibrato is one slow sine for all channels, from a table.
type vibrato struct {
	table [vibratoSteps + 1]float64
	phase uint32 // of a turn, in 2^-32
	turn  uint32 // per step of the grid
}

const vibratoSteps = 256

func (v *vibrato) init(rate, frames float64) {
	for i := range v.table {
		v.table[i] = math.Sin(2 * math.Pi * float64(i) / vibratoSteps)
	}
	v.turn = uint32(vibratoRate * frames / rate * (1 << 32))
}

// step returns the sine's next value.
func (v *vibrato) step() float64 {
	v.phase += v.turn
	at := float64(v.phase) * vibratoSteps / (1 << 32)
	i := int(at)
	return v.table[i] + float64((at-float64(i))*(v.table[i+1]-v.table[i]))
}

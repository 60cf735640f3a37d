package voice

import "math"

// A burst of noise peaks by chance, the more so the fewer samples a period has, so its level
// is set by playing it in advance. A burst of one period cannot meet its own
// return: its peak is found at the stroke. Of a longer one the string is part, so some
// bursts are played when the design is made, and each stroke takes one of them.

// variants is how many long bursts a design knows.
const variants = 8

// variant is a burst's seed with the gains that give it its peak, at three velocities.
type variant struct {
	seed  uint64
	gains [len(variantVelocities)]float64
}

// variantVelocities are where a variant's gain is known; between them it is interpolated.
var variantVelocities = [...]float64{16, 48, 127}

// gain is a variant's at a velocity.
func (t *variant) gain(velocity float64) float64 {
	for i := 1; i < len(variantVelocities); i++ {
		low, high := variantVelocities[i-1], variantVelocities[i]
		if velocity <= high {
			part := max(0, (velocity-low)/(high-low))
			return t.gains[i-1] + part*(t.gains[i]-t.gains[i-1])
		}
	}
	return t.gains[len(t.gains)-1]
}

// strandSeed gives each string and plane a noise of its own: shared, they would cancel.
func strandSeed(seed uint64, strand int) uint64 { return seed + uint64(strand)*0xd1342543de82ef95 }

// rehearse gives a burst of noise of one period the peak that its velocity asks for,
// by playing it in advance.
func (v *Voice) rehearse(velocity float64, seed uint64) {
	const fewSamples = 300
	d := v.design
	rate := float64(noiseRate) // the noise's own, which needs the least work
	if d.shape.length*rate < fewSamples {
		rate = v.maker.rate // a peak between few samples depends on where they are
	}
	frames := int(d.shape.length*rate) + 3*taps
	var trial [maxLoops]stroke
	for i := range d.strings {
		trial[i].start(&d.shape, v.maker.ip, v.loops[i].glide.aim, 1, rate, velocity, strandSeed(seed, i))
	}
	peak := 0.0
	for range frames {
		sum := 0.0
		for i, s := range d.strings {
			var x [1]float64
			trial[i].force(x[:])
			trial[i].soften(x[:])
			trial[i].center(x[:])
			sum += float64(s.mix) * x[0]
		}
		peak = max(peak, math.Abs(sum))
	}
	if peak == 0 {
		return
	}
	hard := velocity / 127
	for i := range d.strings {
		v.latest(i).gain = float32(fullLevel * hard * hard / peak)
	}
}

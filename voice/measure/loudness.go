package measure

import (
	"fmt"
	"math"
)

// Loudness is the integrated loudness in LUFS of channels that are all of weight
// one (mono, or left and right), by Recommendation ITU-R BS.1770-4, Annex 1: K
// weighting, blocks of 400 ms that overlap by three quarters, an absolute gate at
// -70 LUFS and a relative one 10 LU below what passes it. What remains of a block
// at the end is left out. It is -Inf if no block passes, as for less than 400 ms.
//
// # Errors
//
// No channels, channels of different lengths, or a rate below 8 kHz.
func Loudness[S Sample](rate float64, channels ...[]S) (float64, error) {
	if len(channels) == 0 || !(rate >= 8000) {
		return 0, fmt.Errorf("measure: loudness of %d channels at %g Hz; give at least one, at 8000 Hz or more", len(channels), rate)
	}
	const overlap = 4 // hops in a block
	hop := int(math.Round(0.1 * rate))
	var power []float64 // of each hop, over all channels
	for c, x := range channels {
		if len(x) != len(channels[0]) {
			return 0, fmt.Errorf("measure: channel %d has %d frames, channel 0 has %d; give as many", c, len(x), len(channels[0]))
		}
		e := energies(kWeighted(x, rate), hop)
		if power == nil {
			power = make([]float64, len(e))
		}
		for i, v := range e {
			power[i] += v / float64(hop)
		}
	}
	var blocks []float64
	for i := range len(power) - overlap + 1 {
		blocks = append(blocks, sum(power[i:i+overlap])/overlap)
	}
	const absolute, relative = -70, -10
	gate := gated(blocks, absolute) + relative
	return gated(blocks, math.Max(gate, absolute)), nil
}

// gated is the loudness of the blocks above a threshold, equation (5).
func gated(blocks []float64, threshold float64) float64 {
	var total float64
	var n int
	for _, p := range blocks {
		if lufs(p) > threshold {
			total += p
			n++
		}
	}
	if n == 0 {
		return math.Inf(-1)
	}
	return lufs(total / float64(n))
}

// lufs is the loudness of a mean square, equation (2); the constant takes back what
// K weighting adds at 997 Hz.
func lufs(power float64) float64 { return -0.691 + 10*math.Log10(power) }

// kWeighted passes x through both filters of K weighting.
func kWeighted[S Sample](x []S, rate float64) []float64 {
	head, low := kWeighting(rate)
	y := make([]float64, len(x))
	for i, v := range x {
		y[i] = low.next(head.next(float64(v)))
	}
	return y
}

// kRate is the rate that the Recommendation's tables are for.
const kRate = 48000

// kWeighting is the Recommendation's shelf for the acoustic effect of the head
// (table 1) and its high-pass (table 2).
func kWeighting(rate float64) (head, low biquad) {
	head = biquad{b: [3]float64{1.53512485958697, -2.69169618940638, 1.19839281085285}, a: [3]float64{1, -1.69065929318241, 0.73248077421585}}
	low = biquad{b: [3]float64{1, -2, 1}, a: [3]float64{1, -1.99004745483398, 0.99007225036621}}
	return head.at(rate), low.at(rate)
}

// biquad is a second-order section, b over a in powers of 1/z, with a[0] = 1, in
// transposed direct form II.
type biquad struct {
	b, a   [3]float64
	s1, s2 float64
}

func (q *biquad) next(x float64) float64 {
	y := q.b[0]*x + q.s1
	q.s1 = q.b[1]*x - q.a[1]*y + q.s2
	q.s2 = q.b[2]*x - q.a[2]*y
	return y
}

// at is the section made for kRate as it must be at another rate: taken back to
// its analog prototype by the bilinear transform, and from there to the new
// rate, both exact at the frequency of the poles.
func (q biquad) at(rate float64) biquad {
	if rate == kRate {
		return q
	}
	num, den := bilinear(q.b), bilinear(q.a)
	warped := math.Sqrt(den[0] / den[2]) // tan(pi f/kRate) of the poles
	ratio := warped / math.Tan(math.Atan(warped)*kRate/rate)
	for i, scale := 0, 1.0; i < 3; i, scale = i+1, scale*ratio {
		num[i] *= scale
		den[i] *= scale
	}
	b, a := bilinear(num), bilinear(den)
	var made biquad
	for i := range b {
		made.b[i], made.a[i] = b[i]/a[0], a[i]/a[0]
	}
	return made
}

// bilinear puts 1/z = (1 - p)/(1 + p) into a polynomial and multiplies by
// (1 + p)^2. It is its own inverse but for a factor of 4.
func bilinear(c [3]float64) [3]float64 {
	return [3]float64{c[0] + c[1] + c[2], 2 * (c[0] - c[2]), c[0] - c[1] + c[2]}
}

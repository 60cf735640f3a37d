package engine

import "math"

// Band-limited interpolation with a stored kernel: Smith and Gossett, "A
// Flexible Sampling-Rate Conversion Method", ICASSP 1984. The kernel is a sinc
// under a Kaiser window: Kaiser, "Nonrecursive Digital Filter Design Using the
// I0-sinh Window Function", ISCAS 1974.
const (
	// kernelBand is the middle of the transition, in parts of the lower rate:
	// flat to 0.45, closed from 0.5 on.
	kernelBand = 0.475
	// kernelStop is how far down the closed part is, dB.
	kernelStop = 100
	// kernelReach is the kernel's half length in frames of the lower rate, from
	// Kaiser's (A - 7.95) / (14.36 Δf) for the whole of it, with Δf = 0.05.
	kernelReach = 65
	// kernelGrain is how many values of the kernel are stored for each frame of
	// the lower rate; a line between neighbours is then true to -115 dB.
	kernelGrain = 1024
)

// resample gives data, sampled at from Hz, as it would be at to Hz: the same
// loudness, duration and start, without delay, flat within 0.1 dB to 0.45 of
// the lower rate, aliases below -90 dB. Outside of data is silence, so a sound
// that starts at full strength loses the little that the interpolation would
// set before its start. Both rates are above zero; data is not changed, and is
// what comes back when the rates are alike.
func resample(data []float32, from, to int) []float32 {
	if from == to || len(data) == 0 {
		return data
	}
	kernel := newKernel()
	// A step of the input, in frames of the lower rate.
	step := min(1, float64(to)/float64(from))
	reach := kernelReach / step
	n := (int64(len(data))*int64(to) + int64(from) - 1) / int64(from)
	out := make([]float32, n)
	for i := range out {
		// In whole numbers, so that long sounds keep their place.
		at := int64(i) * int64(from)
		whole, part := int(at/int64(to)), float64(at%int64(to))/float64(to)
		first := max(0, whole-int(reach-part))
		last := min(len(data)-1, whole+int(reach+part))
		sum := 0.0
		for k := first; k <= last; k++ {
			x := math.Abs(float64(k-whole)-part) * step * kernelGrain
			cell := int(x)
			low := kernel[cell]
			sum += float64(data[k]) * (low + (x-float64(cell))*(kernel[cell+1]-low))
		}
		out[i] = float32(sum * step)
	}
	return out
}

// newKernel gives the right half of the kernel, kernelGrain values a frame.
func newKernel() []float64 {
	const beta = 0.1102 * (kernelStop - 8.7)
	kernel := make([]float64, kernelReach*kernelGrain+2)
	scale := 1 / besselI0(beta)
	for i := range kernel[:kernelReach*kernelGrain] {
		x := float64(i) / kernelGrain
		window := besselI0(beta*math.Sqrt(1-x*x/(kernelReach*kernelReach))) * scale
		kernel[i] = 2 * kernelBand * sinc(2*kernelBand*x) * window
	}
	return kernel
}

func sinc(x float64) float64 {
	if x == 0 {
		return 1
	}
	return math.Sin(math.Pi*x) / (math.Pi * x)
}

// besselI0 is the modified Bessel function of the first kind and order zero, by
// its power series: Abramowitz and Stegun, 9.6.12.
func besselI0(x float64) float64 {
	sum, term := 1.0, 1.0
	for k := 1.0; term > sum*1e-17; k++ {
		term *= (x / (2 * k)) * (x / (2 * k))
		sum += term
	}
	return sum
}

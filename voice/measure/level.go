package measure

import "math"

// Peak is the largest magnitude, in dB; -Inf for silence and for no frames.
func Peak[S Sample](signal []S) float64 {
	var peak float64
	for _, x := range signal {
		peak = math.Max(peak, math.Abs(float64(x)))
	}
	return dB(peak)
}

// RMS is the root of the mean square, in dB: a sine of full scale has -3.01,
// a square wave 0. It is -Inf for silence and for no frames.
func RMS[S Sample](signal []S) float64 {
	var sum float64
	for _, x := range signal {
		sum += float64(x) * float64(x)
	}
	return dB(math.Sqrt(sum / math.Max(1, float64(len(signal)))))
}

// Mean is the magnitude of the mean value (DC), in dB. Whole notes, or
// many periods, are what it is for: part of a period has a mean of its own.
func Mean[S Sample](signal []S) float64 {
	var sum float64
	for _, x := range signal {
		sum += float64(x)
	}
	return dB(math.Abs(sum) / math.Max(1, float64(len(signal))))
}

// Split takes interleaved frames apart, into one slice a channel. Frames that
// are not whole are left out.
func Split[S Sample](interleaved []S, channels int) [][]S {
	frames := len(interleaved) / channels
	split := make([][]S, channels)
	for c := range split {
		split[c] = make([]S, frames)
		for i := range split[c] {
			split[c][i] = interleaved[i*channels+c]
		}
	}
	return split
}

func dB(ratio float64) float64 { return 20 * math.Log10(ratio) }

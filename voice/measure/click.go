package measure

import (
	"fmt"
	"math"
)

// The click test: what a motion of the pitch puts above a dark note.
const (
	clickCutoff = 5000.0 // Hz
	clickTaps   = 1023
	clickBeta   = 14.0
	clickShort  = 10  // ms: what is heard as one click
	clickLong   = 50  // ms: how loud the note is meanwhile
	clickAfter  = 200 // ms after the motion that belong to it
)

// Click is how strongly a motion of the pitch, from one time to another (s), is
// heard as a click or as zipper noise: the worst RMS over 10 ms of what
// lies above 5 kHz, over the RMS of 50 ms of the note around them, in dB, during
// the motion and 0.2 s after. The high-pass is a sinc of 1023 taps
// under a Kaiser window of beta 14, in steady state, so it adds nothing of its
// own; what it lets through of lower partials is below -135 dB, of a fundamental below -150.
//
// The note must be dark: its own partials above 5 kHz count as well. Float32
// rounding stands at about -150 dB.
//
// # Errors
//
// A motion that ends before it begins, a rate below 10 kHz, or a signal that does not reach from 40 ms
// before the motion to 0.24 s after it.
func Click[S Sample](signal []S, rate, from, to float64) (float64, error) {
	if !(rate > 2*clickCutoff) || !(from <= to) {
		return 0, fmt.Errorf("measure: click from %g to %g s at rate %g Hz; need from <= to and a rate above %g Hz", from, to, rate, 2*clickCutoff)
	}
	ms := int(math.Round(rate / 1000))
	margin := max(clickTaps/2, (clickLong-clickShort)/2*ms)
	first := int(math.Round(from * rate))
	blocks := (int(math.Round(to*rate))-first)/ms + clickAfter
	if first < margin || first+blocks*ms+margin > len(signal) {
		return 0, fmt.Errorf("measure: click from %g to %g s needs frames %d to %d; the signal has %d", from, to, first-margin, first+blocks*ms+margin, len(signal))
	}
	high := energies(highpass(signal[first-clickTaps/2:first+blocks*ms+clickTaps/2], rate), ms)
	side := (clickLong - clickShort) / 2
	whole := energies(signal[first-side*ms:first+(blocks+side)*ms], ms)
	worst := math.Inf(-1)
	for i := range len(high) - clickShort + 1 {
		click := sum(high[i:i+clickShort]) / clickShort
		note := sum(whole[i:i+clickLong]) / clickLong
		if click > 0 {
			worst = math.Max(worst, 10*math.Log10(click/note))
		}
	}
	return worst, nil
}

// highpass keeps only the frames whose taps all lie in the signal.
func highpass[S Sample](signal []S, rate float64) []float64 {
	taps := kaiser(clickTaps, clickBeta)
	c := 2 * clickCutoff / rate
	for i := range taps {
		if k := float64(i - clickTaps/2); k != 0 {
			taps[i] *= -math.Sin(math.Pi*c*k) / (math.Pi * k)
		} else {
			taps[i] *= 1 - c
		}
	}
	x := make([]float64, len(signal))
	for i, v := range signal {
		x[i] = float64(v)
	}
	y := make([]float64, len(x)-clickTaps+1)
	const half = clickTaps / 2
	for i := range y {
		older, newer := x[i:i+half], x[i+half+1:i+clickTaps]
		v := taps[half] * x[i+half]
		for k, h := range taps[:half] { // the taps are symmetric
			v += h * (older[k] + newer[half-1-k])
		}
		y[i] = v
	}
	return y
}

// energies are the sums of squares of whole blocks.
func energies[S Sample](x []S, block int) []float64 {
	e := make([]float64, len(x)/block)
	for i := range e {
		for _, v := range x[i*block : (i+1)*block] {
			e[i] += float64(v) * float64(v)
		}
	}
	return e
}

func sum(x []float64) float64 {
	var s float64
	for _, v := range x {
		s += v
	}
	return s
}

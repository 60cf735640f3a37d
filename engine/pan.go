package engine

import "math"

// panTable holds cos(pi/2 x) for x from 0 to 1, so that the callback needs no
// trigonometry. Straight lines between its entries are off by 3e-7 at most.
type panTable [panSteps + 1]float32

const panSteps = 1024

func newPanTable() *panTable {
	t := new(panTable)
	for i := range t {
		t[i] = float32(math.Cos(math.Pi / 2 * float64(i) / panSteps))
	}
	t[panSteps] = 0
	return t
}

// gains returns the left and right amplitudes of a place, 0 left to 1 right, by RP-036,
// Default Pan Formula (MIDI Association): left 20 log10 cos(pi/2 x), right the same
// with sin, so that the power is the same everywhere.
func (t *panTable) gains(place float64) (left, right float32) {
	place = min(max(place, 0), 1)
	return t.cos(place), t.cos(1 - place)
}

func (t *panTable) cos(x float64) float32 {
	at := x * panSteps
	i := min(int(at), panSteps-1)
	part := float32(at - float64(i))
	return t[i] + float32(part*(t[i+1]-t[i]))
}

// panPlace is the place of a Pan controller's value, by RP-036: 0 and 1 are both
// hard left, 64 the middle, 127 hard right.
func panPlace(value float32) float64 { return max(0, float64(value)-1) / 126 }

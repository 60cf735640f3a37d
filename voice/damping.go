package voice

import "math"

// damping is what fingers and felt take from a trip beside the law.
type damping struct {
	rate, aim float64 // 1/s: 1/T60 added to the law's
	node      int     // a finger at 1/node of the string
	finger    float64 // 0 to 0.25: how firmly. It takes 2 finger (1 - cos(2 pi n/node)) of
	// partial n on each trip, and nothing from the partials that rest there: a comb without delay
	fingerAim float64
}

// step moves the damping towards its aim and says whether it moves.
func (d *damping) step() bool {
	const part = 0.2 // of the rest, each step: some 5 ms in all
	if d.rate == d.aim && d.finger == d.fingerAim {
		return false
	}
	d.rate = toward(d.rate, d.aim, part, 1e-4)
	d.finger = toward(d.finger, d.fingerAim, part, 1e-6)
	return true
}

func toward(x, aim, part, near float64) float64 {
	if x += float64((aim - x) * part); math.Abs(x-aim) < near {
		return aim
	}
	return x
}

// touched says that a finger lies on the string.
func (d *damping) touched() bool { return d.finger > 0 || d.fingerAim > 0 }

// perTrip is the gain that the damping leaves to a trip at a pitch (Hz).
func (d *damping) perTrip(f0 float64) float64 { return math.Exp(-decayNepers * d.rate / f0) }

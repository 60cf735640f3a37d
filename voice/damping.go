package voice

import "math"

// damping is what fingers and felt take from a trip beside the law.
type damping struct {
	rate, aim float64 // 1/s: 1/T60 added to the law's
	node      int     // a finger at 1/node of the string
	finger    float64 // 0 to 0.25: how firmly
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
	if x += (aim - x) * part; math.Abs(x-aim) < near {
		return aim
	}
	return x
}

// damp takes from the taps what a damper takes from a trip.
func (l *loop) damp(h *[taps]float64) {
	if l.damped.rate == 0 {
		return
	}
	k := l.damped.perTrip(l.glide.pitch)
	for i := range h {
		h[i] *= k
	}
}

// perTrip is the gain that the damping leaves to a trip at a pitch (Hz).
func (d *damping) perTrip(f0 float64) float64 { return math.Exp(-decayNepers * d.rate / f0) }

// renderTouched renders with a finger at 1/node of the string, which takes
// 2 finger (1 - cos(2 pi n/node)) of partial n on each trip, and nothing from
// the partials that rest there. It is a comb without delay, so the pitch stays.
func (l *loop) renderTouched(out, e []float32) {
	finger := float32(l.damped.finger)
	if l.motion != gliding {
		l.standGliding()
	}
	for i := range out {
		l.moveFilters()
		l.gain += l.dg
		d := l.moveLength()
		trip := l.mode.rate / l.glide.pitch
		side := trip / float64(l.damped.node)
		x := l.readAt(d)
		if d-side >= shortest && int(d+side)+taps < l.w {
			x = float32((1-2*finger)*x) + float32(finger*(l.readAt(d-side)+l.readAt(d+side)))
		}
		y := l.end(float32(l.gain*x), at(e, i))
		l.line[l.w] = y
		out[i] = y
		l.w++
	}
	l.note(out)
}

// standGliding makes a glide that does not move of a string that stands.
func (l *loop) standGliding() {
	g := &l.glide
	l.takeFilters()
	g.slope, l.dc1, l.dc2 = 0, 0, 0
	l.da, l.dShelf = [maxSections][2]float64{}, [3]float64{}
	g.from = g.s[2]
	for i := range g.s {
		g.s[i] = g.s[2]
	}
	l.gain, l.dg = float32(l.safeGain()*l.damped.perTrip(g.pitch)), 0
}

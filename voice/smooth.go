package voice

import "math"

// glideTime is each of the three one-poles (s) that smooth a string's length.
const glideTime = 0.003

// smoothing is three one-poles in a row over a control step at once: a pitch that
// jumps bends without a corner.
type smoothing struct {
	rate float64 // of each pole, 1 a frame
	turn float64 // the same, over a control step
	fall float64 // what a pole keeps of a step
	step float64 // what it takes
}

func newSmoothing(rate float64) *smoothing {
	turn := Grid / (glideTime * rate)
	fall := math.Exp(-turn)
	return &smoothing{rate: turn / Grid, turn: turn, fall: fall, step: 1 - fall}
}

// follow takes s a step on, behind an input at from that moves by slope a frame, and returns the
// speed of the last at the end, samples a frame.
//
// The method: behind a steady slope each pole lags by its time; what there is
// beside that lag falls as the poles' free motion does.
func (m *smoothing) follow(s *[3]float64, from, slope float64) (speed float64) {
	lag := slope / m.rate
	d0, d1, d2 := s[0]-(from-lag), s[1]-(from-2*lag), s[2]-(from-3*lag)
	to := from + float64(slope*Grid)
	s[2] = to - 3*lag + float64(m.fall*(d2+float64(m.turn*(d1+float64(m.turn*d0/2)))))
	s[1] = to - 2*lag + float64(m.fall*(d1+float64(m.turn*d0)))
	s[0] = to - lag + float64(m.fall*d0)
	return m.rate * (s[1] - s[2])
}

// path is a delay (samples) over the frames of a control step, 1 to Grid: a
// cubic, by the power of the frame.
type path [4]float64

// newPath goes from one delay to another, at the speeds (samples a frame) of both ends.
func newPath(from, to, speed, speedAfter float64) path {
	const n = Grid
	rise := to - from
	return path{
		from,
		speed,
		float64(3*rise/n-2*speed-speedAfter) / n,
		float64(speed+speedAfter-2*rise/n) / (n * n),
	}
}

// fastest bounds the speed, samples a frame.
func (p *path) fastest() float64 {
	end := p[1] + float64(2*p[2]*Grid) + float64(3*p[3]*Grid*Grid)
	fast := max(math.Abs(p[1]), math.Abs(end))
	if p[3] != 0 {
		if t := -p[2] / (3 * p[3]); t > 0 && t < Grid {
			fast = max(fast, math.Abs(p[1]+float64(p[2]*t)))
		}
	}
	return fast
}

// least bounds the delay from below.
func (p *path) least() float64 {
	end := p[0] + float64(Grid*(p[1]+float64(Grid*(p[2]+float64(Grid*p[3])))))
	return min(p[0], end) - float64(p.fastest()*Grid/8)
}

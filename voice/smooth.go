package voice

import "math"

// glideTime is each of the three one-poles (s) that smooth a string's length.
const glideTime = 0.003

// smoothing is three one-poles in a row over some control steps at once: a pitch that
// jumps bends without a corner.
type smoothing struct {
	frames float64
	rate   float64 // of each pole, 1 a frame
	turn   float64 // the same, over all frames
	fall   float64 // what a pole keeps of itself over them
	step   float64 // what it takes
}

func newSmoothing(rate float64, steps int) *smoothing {
	frames := float64(steps * Grid)
	turn := frames / (glideTime * rate)
	fall := math.Exp(-turn)
	return &smoothing{frames: frames, rate: turn / frames, turn: turn, fall: fall, step: 1 - fall}
}

// follow takes s over the frames, behind an input at from that moves by slope a frame, and returns the
// speed of the last at the end, samples a frame.
//
// The method: behind a steady slope each pole lags by its time; what there is
// beside that lag falls as the poles' free motion does.
func (m *smoothing) follow(s *[3]float64, from, slope float64) (speed float64) {
	lag := slope / m.rate
	d0, d1, d2 := s[0]-(from-lag), s[1]-(from-2*lag), s[2]-(from-float64(3*lag))
	to := from + float64(slope*m.frames)
	s[2] = to - float64(3*lag) + float64(m.fall*(d2+float64(m.turn*(d1+float64(m.turn*d0/2)))))
	s[1] = to - 2*lag + float64(m.fall*(d1+float64(m.turn*d0)))
	s[0] = to - lag + float64(m.fall*d0)
	return m.rate * (s[1] - s[2])
}

// path is a delay (samples) over some frames, from 1 on: a cubic, by the power of the frame.
type path [4]float64

// newPath goes from one delay to another in n frames, at the speeds (samples a frame) of both ends.
func newPath(from, to, speed, speedAfter, n float64) path {
	rise := (to - from) / n
	return path{
		from,
		speed,
		(float64(3*rise) - 2*speed - speedAfter) / n,
		(speed + speedAfter - 2*rise) / (n * n),
	}
}

// fastest bounds the speed over n frames, samples a frame.
func (p *path) fastest(n float64) float64 {
	end := p[1] + float64(n*(2*p[2]+float64(3*p[3]*n)))
	fast := max(math.Abs(p[1]), math.Abs(end))
	if p[3] != 0 {
		if t := -p[2] / (3 * p[3]); t > 0 && t < n {
			fast = max(fast, math.Abs(p[1]+float64(p[2]*t)))
		}
	}
	return fast
}

// from is the path from frame t on.
func (p *path) from(t float64) path {
	return path{
		p[0] + float64(t*(p[1]+float64(t*(p[2]+float64(t*p[3]))))),
		p[1] + float64(t*(2*p[2]+float64(3*t*p[3]))),
		p[2] + float64(3*t*p[3]),
		p[3],
	}
}

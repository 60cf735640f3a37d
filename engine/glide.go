package engine

import "math"

// glide follows a target without a step or a corner: two one-poles in
// cascade, moved once on each multiple of voice.Grid.
type glide struct {
	target float64
	first  float64
	value  float64
}

// glideTime is the time constant of each pole, s: short enough to be played, long
// enough that the raw steps of a controller make no zipper.
const glideTime = 0.004

// glideCoefficient is the part of the way that a pole goes in frames.
func glideCoefficient(rate, frames float64) float64 {
	return -math.Expm1(-frames / (rate * glideTime))
}

func (g *glide) jump(to float64) { *g = glide{target: to, first: to, value: to} }

func (g *glide) step(coefficient float64) {
	if g.value == g.target && g.first == g.target {
		return
	}
	g.first += float64(coefficient * (g.target - g.first))
	g.value += float64(coefficient * (g.first - g.value))
	if near(g.first, g.target) && near(g.value, g.target) {
		g.jump(g.target)
	}
}

func near(a, b float64) bool { return math.Abs(a-b) < 1e-6 }

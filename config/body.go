package config

import "sort"

// bodies are the bodies that come with the program.
func bodies() map[string][]Mode {
	return map[string][]Mode{
		// A classical guitar. The low modes are those of its air, top and back
		// as reported by Christensen and Vistisen, "Simple model for
		// low-frequency guitar function", JASA 68(3), 1980, and in Fletcher and
		// Rossing, "The Physics of Musical Instruments"; frequencies, T60 (2.2
		// Q/f, Q 20 to 40) and levels from memory and rounded. Those above
		// 500 Hz are our own, spread as a plate's.
		"guitar": {
			{100, 0.45, 0}, {185, 0.35, 2}, {225, 0.30, -4}, {270, 0.25, -8},
			{390, 0.20, -7}, {435, 0.18, -6}, {540, 0.15, -10}, {660, 0.13, -9},
			{830, 0.11, -12}, {1050, 0.09, -11}, {1370, 0.07, -13}, {1820, 0.06, -14},
			{2450, 0.05, -16}, {3300, 0.04, -18}, {4700, 0.03, -22},
		},
		// Our own: the lantern room's iron and glass. Few modes, long and
		// far apart.
		"lantern": {
			{310, 0.9, -8}, {523, 1.2, -10}, {911, 1.4, -8}, {1390, 1.1, -10},
			{2130, 0.9, -11}, {3270, 0.7, -13}, {4810, 0.5, -15}, {7100, 0.3, -18},
		},
		// Our own: a boat's hull of thin planks, keel up. Low, broad and dry.
		"hull": {
			{72, 0.30, 0}, {128, 0.22, -1}, {206, 0.16, -3}, {334, 0.12, -6},
			{512, 0.09, -9}, {790, 0.07, -12}, {1240, 0.05, -16}, {2100, 0.03, -22},
		},
	}
}

// BodyNames are the words that body.builtin takes.
func BodyNames() []string {
	var names []string
	for name := range bodies() {
		names = append(names, name)
	}
	sort.Strings(names)
	return names
}

package config

import (
	"math"
	"testing"
)

// zoneOf reads one zone of a text.
func zoneOf(t *testing.T, text string) Zone {
	t.Helper()
	p, err := ParsePatch("stays.toml", []byte(text))
	if err != nil {
		t.Fatal(err)
	}
	return p.Zones[0]
}

func TestPairsStepEvenly(t *testing.T) {
	z := zoneOf(t, `[[zone]]
keys = "C2-C4"
decay = [9.0, 4.5]
release = [0.1, 0.9]
brightness = [0.1, 0.7]
level = [-12, 6]
pan = [0.5, -0.5]

[zone.course]
strings = [1, 3]
cents = 4
`)
	steps := z.High - z.Low
	for key := z.Low; key < z.High; key++ {
		a, b := z.At(key), z.At(key+1)
		for _, c := range []struct {
			name      string
			got, want float64
		}{
			{"decay, a ratio", b.Decay / a.Decay, math.Pow(4.5/9.0, 1/float64(steps))},
			{"release, a ratio", b.Release / a.Release, math.Pow(0.9/0.1, 1/float64(steps))},
			{"brightness", b.Brightness - a.Brightness, 0.6 / float64(steps)},
			{"level", b.Level - a.Level, 18 / float64(steps)},
			{"pan", b.Pan - a.Pan, -1 / float64(steps)},
			{"course, alike", b.CourseCents - a.CourseCents, 0},
		} {
			if math.Abs(c.got-c.want) > 1e-12 {
				t.Errorf("%s from %s up: %v, want %v", c.name, KeyName(key), c.got, c.want)
			}
		}
	}
	for key, want := range map[int]int{36: 1, 41: 1, 42: 2, 53: 2, 54: 3, 60: 3} {
		if got := z.At(key).Strings; got != want {
			t.Errorf("%s has %d strings, want %d", KeyName(key), got, want)
		}
	}
}

func TestPairsAreExactAtTheirEnds(t *testing.T) {
	z := zoneOf(t, "[[zone]]\nkeys = \"31-107\"\ndecay = [119.9, 0.0517]\nrelease = [0.011, 29.3]\nbrightness = [0.1, 0.3]\n")
	for _, c := range []struct {
		key                        int
		decay, release, brightness float64
	}{
		{31, 119.9, 0.011, 0.1}, {107, 0.0517, 29.3, 0.3},
		{0, 119.9, 0.011, 0.1}, {127, 0.0517, 29.3, 0.3}, // outside: the nearer end
	} {
		v := z.At(c.key)
		if v.Decay != c.decay || v.Release != c.release || v.Brightness != c.brightness {
			t.Errorf("key %d: %v, %v, %v; want %v", c.key, v.Decay, v.Release, v.Brightness, c)
		}
	}
}

func TestPairOfOneKeyIsItsLowEnd(t *testing.T) {
	if v := zoneOf(t, "[[zone]]\nkeys = \"A4\"\ndecay = [3, 9]\n").At(69); v.Decay != 3 {
		t.Errorf("decay is %v, want 3", v.Decay)
	}
}

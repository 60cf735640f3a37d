package measure

import "math"

// Cents is the interval from reference to frequency, both in Hz, positive when
// frequency is the higher.
func Cents(frequency, reference float64) float64 {
	return 1200 * math.Log2(frequency/reference)
}

// Shift is the frequency, in Hz, that lies the given cents above reference.
func Shift(reference, cents float64) float64 {
	return reference * math.Exp2(cents/1200)
}

package measure

import "math"

// kaiser is the window of Kaiser and Schafer, "On the Use of the I0-Sinh Window
// for Spectrum Analysis", IEEE Trans. ASSP 28(1), 1980. The zero of its spectrum
// that ends the main lobe is sqrt(1 + (beta/pi)^2) bins of 1/length from the
// middle.
func kaiser(length int, beta float64) []float64 {
	if length == 1 {
		return []float64{1}
	}
	w := make([]float64, length)
	for i := range w {
		x := 2*float64(i)/float64(length-1) - 1
		w[i] = bessel0(beta*math.Sqrt(math.Max(0, 1-x*x))) / bessel0(beta)
	}
	return w
}

// bessel0 is the modified Bessel function I0, by its power series.
func bessel0(x float64) float64 {
	sum, term := 1.0, 1.0
	for k := 1.0; term > sum*1e-17; k++ {
		term *= x * x / (4 * k * k)
		sum += term
	}
	return sum
}

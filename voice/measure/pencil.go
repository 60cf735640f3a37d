package measure

import (
	"math"
	"math/cmplx"

	"gonum.org/v1/gonum/mat"
)

// fit is a real sequence as a sum of damped oscillations,
//
//	x[m] = sum over k of Re(amps[k] exp(m rates[k])) + rest
type fit struct {
	rates []complex128
	amps  []complex128
	rest  float64   // RMS of what is not explained
	sigma []float64 // one standard deviation of the real and of the imaginary part of each rate, were the rest white
}

// fitModes tries models of growing order and keeps the one that explains x best
// for its size, by the Bayesian information criterion (Schwarz, "Estimating the
// Dimension of a Model", Annals of Statistics 6(2), 1978). A nil fit means that
// there was none.
func fitModes(x []float64) *fit {
	pencil := newPencil(x)
	if pencil == nil {
		return nil
	}
	var best *fit
	least := math.Inf(1)
	for _, order := range []int{2, 4, 6, 8, 12, 16, 20, 24, 28, 32, 36, 40} {
		if order >= pencil.width || 3*order > len(x) {
			break
		}
		f := refine(x, pencil.rates(order))
		if f == nil {
			continue
		}
		n := float64(len(x))
		score := 2*n*math.Log(f.rest) + 4*float64(len(f.rates))*math.Log(n)
		if score < least {
			best, least = f, score
		}
	}
	return best
}

// pencil is the matrix pencil of Hua and Sarkar, "Matrix Pencil Method for
// Estimating Parameters of Exponentially Damped/Undamped Sinusoids in Noise",
// IEEE Trans. ASSP 38(5), 1990: the poles are the eigenvalues that carry the
// signal space of the Hankel matrix of x from one row to the next.
type pencil struct {
	width int // columns of the Hankel matrix, its rows being at least as many
	space mat.Dense
}

func newPencil(x []float64) *pencil {
	width := 2 * len(x) / 5
	if width < 4 {
		return nil
	}
	h := mat.NewDense(len(x)-width+1, width, nil)
	for r := range len(x) - width + 1 {
		h.SetRow(r, x[r:r+width])
	}
	var svd mat.SVD
	if !svd.Factorize(h, mat.SVDThin) {
		return nil
	}
	p := &pencil{width: width}
	svd.VTo(&p.space)
	return p
}

// rates are the logarithms of the poles in the upper half plane; order counts
// both halves.
func (p *pencil) rates(order int) []complex128 {
	upper := p.space.Slice(0, p.width-1, 0, order)
	lower := p.space.Slice(1, p.width, 0, order)
	var step mat.Dense
	if step.Solve(upper, lower) != nil {
		return nil
	}
	var eigen mat.Eigen
	if !eigen.Factorize(&step, mat.EigenNone) {
		return nil
	}
	var rates []complex128
	for _, z := range eigen.Values(nil) {
		if imag(z) > 1e-9 {
			rates = append(rates, cmplx.Log(z))
		}
	}
	return rates
}

// refine finds the amplitudes for given rates and then improves both by the
// method of Gauss and Newton, which for white noise ends at the most likely model.
func refine(x []float64, rates []complex128) *fit {
	if len(rates) == 0 {
		return nil
	}
	f := &fit{rates: rates, amps: make([]complex128, len(rates))}
	if !f.solveAmps(x) {
		return nil
	}
	for range 4 {
		next := f.improved(x)
		if next == nil || !(next.rest < f.rest) {
			break
		}
		done := next.rest > 0.999*f.rest
		f = next
		if done {
			break
		}
	}
	if !f.solveSigma(x) {
		return nil
	}
	return f
}

// columns are the derivatives of the model by each mode's amplitude and, where
// asked, by its rate, real parts and imaginary parts, scaled to unit length.
func (f *fit) columns(n int, byRate bool) (*mat.Dense, []float64) {
	per := 2
	if byRate {
		per = 4
	}
	j := mat.NewDense(n, per*len(f.rates), nil)
	for k, s := range f.rates {
		for m := range n {
			e := cmplx.Exp(complex(float64(m), 0) * s)
			j.Set(m, per*k, real(e))
			j.Set(m, per*k+1, -imag(e))
			if byRate {
				d := complex(float64(m), 0) * f.amps[k] * e
				j.Set(m, per*k+2, real(d))
				j.Set(m, per*k+3, -imag(d))
			}
		}
	}
	scale := make([]float64, per*len(f.rates))
	for c := range scale {
		col := j.ColView(c)
		scale[c] = mat.Norm(col, 2)
		if !(scale[c] > 0) || math.IsInf(scale[c], 0) {
			return nil, nil
		}
		for m := range n {
			j.Set(m, c, j.At(m, c)/scale[c])
		}
	}
	return j, scale
}

// solveAmps sets the amplitudes that leave the least rest.
func (f *fit) solveAmps(x []float64) bool {
	j, scale := f.columns(len(x), false)
	if j == nil {
		return false
	}
	var p mat.VecDense
	if p.SolveVec(j, mat.NewVecDense(len(x), x)) != nil {
		return false
	}
	for k := range f.amps {
		f.amps[k] = complex(p.AtVec(2*k)/scale[2*k], p.AtVec(2*k+1)/scale[2*k+1])
	}
	f.rest = rms(f.residual(x))
	return true
}

// improved is one Gauss-Newton step away from f; nil where it leads nowhere.
func (f *fit) improved(x []float64) *fit {
	j, scale := f.columns(len(x), true)
	if j == nil {
		return nil
	}
	var p mat.VecDense
	if p.SolveVec(j, mat.NewVecDense(len(x), f.residual(x))) != nil {
		return nil
	}
	g := &fit{rates: make([]complex128, len(f.rates)), amps: make([]complex128, len(f.amps))}
	for k := range f.rates {
		g.rates[k] = f.rates[k] + complex(p.AtVec(4*k+2)/scale[4*k+2], p.AtVec(4*k+3)/scale[4*k+3])
	}
	if !g.solveAmps(x) {
		return nil
	}
	return g
}

// solveSigma sets sigma from the inverse of the normal matrix.
func (f *fit) solveSigma(x []float64) bool {
	j, scale := f.columns(len(x), true)
	free := len(x) - len(scale)
	if j == nil || free < 1 {
		return false
	}
	var qr mat.QR
	qr.Factorize(j)
	var r, inverse mat.Dense
	qr.RTo(&r)
	n := len(scale)
	if inverse.Inverse(r.Slice(0, n, 0, n)) != nil {
		return false
	}
	noise := f.rest * math.Sqrt(float64(len(x))/float64(free))
	f.sigma = make([]float64, len(f.rates))
	for k := range f.sigma {
		row := mat.Norm(inverse.RowView(4*k+2), 2) / scale[4*k+2]
		f.sigma[k] = noise * row
	}
	return true
}

func (f *fit) residual(x []float64) []float64 {
	r := make([]float64, len(x))
	copy(r, x)
	for k, s := range f.rates {
		for m := range r {
			r[m] -= real(f.amps[k] * cmplx.Exp(complex(float64(m), 0)*s))
		}
	}
	return r
}

// energy is the sum of squares of mode k over n points.
func (f *fit) energy(k, n int) float64 {
	var sum float64
	for m := range n {
		v := real(f.amps[k] * cmplx.Exp(complex(float64(m), 0)*f.rates[k]))
		sum += v * v
	}
	return sum
}

package bandwidth

import (
	"math"

	"drumlin/mv"
)

// coords are log-Cholesky coordinates: H = L*L' with L lower triangular, the
// diagonal entries of L as logarithms, the others as they are, so every vector
// gives a positive definite matrix. Diagonal has the logarithms alone, Scalar
// one of them.
type coords struct {
	d     int
	shape Shape
}

func (c coords) len() int {
	switch c.shape {
	case Scalar:
		return 1
	case Diagonal:
		return c.d
	}
	return c.d * (c.d + 1) / 2
}

// lower fills L, row-major, from coordinates.
func (c coords) lower(x []float64) []float64 {
	l := make([]float64, c.d*c.d)
	at := 0
	for i := range c.d {
		for j := range i + 1 {
			switch {
			case i == j && c.shape == Scalar:
				l[i*c.d+j] = math.Exp(x[0])
			case i == j:
				l[i*c.d+j] = math.Exp(x[at])
				at++
			case c.shape == Full:
				l[i*c.d+j] = x[at]
				at++
			}
		}
	}
	return l
}

// matrix returns the entries of H, row-major.
func (c coords) matrix(x []float64) []float64 { return square(c.d, c.lower(x)) }

func square(d int, l []float64) []float64 {
	h := make([]float64, d*d)
	for i := range d {
		for j := range d {
			for k := range min(i, j) + 1 {
				h[i*d+j] += l[i*d+k] * l[j*d+k]
			}
		}
	}
	return h
}

// from returns the coordinates of h, dropping what the shape cannot express.
func (c coords) from(h mv.BandwidthMatrix) []float64 {
	x := make([]float64, 0, c.len())
	switch c.shape {
	case Scalar:
		return append(x, h.LogDet()/float64(2*c.d))
	case Diagonal:
		for i := range c.d {
			x = append(x, 0.5*math.Log(h.At(i, i)))
		}
		return x
	}
	for i := range c.d {
		for j := range i {
			x = append(x, h.LowerAt(i, j))
		}
		x = append(x, math.Log(h.LowerAt(i, i)))
	}
	return x
}

// pull turns the gradient with respect to the entries of H (row-major, the
// entries taken as independent, symmetric) into the gradient with respect to
// the coordinates: dH = dL L' + L dL'.
func (c coords) pull(x, gradH []float64) []float64 {
	d, l := c.d, c.lower(x)
	out := make([]float64, c.len())
	at := 0
	for i := range d {
		for j := range i + 1 {
			var g float64 // derivative by L_ij
			for k := range d {
				g += (gradH[i*d+k] + gradH[k*d+i]) * l[k*d+j]
			}
			switch {
			case i == j && c.shape == Scalar:
				out[0] += g * l[i*d+i]
			case i == j:
				out[at] = g * l[i*d+i]
				at++
			case c.shape == Full:
				out[at] = g
				at++
			}
		}
	}
	return out
}
